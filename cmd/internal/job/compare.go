package job

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store/record"
)

// CompareRequest is how lots are compared with a reference lot.
type CompareRequest struct {
	By       string        // "vgsth", "vgs-idle"; "": gate bias at the idle current where both lots have it
	Margin   record.Amount // V, % or A; zero: the stored one
	Level    float64       // %, of the interval; 0: 95
	Paired   bool          // by serial
	Unpaired bool          // never by serial; neither: where serials and values go together
	Tempco   record.Num    // V/K
	TempcoU  record.Num    // V/K, its standard uncertainty; not known: a typical share of it
	Beta     record.Num    // A/V², gain factor of lots whose curves were not measured
	Fail     bool          // end in [ExitNo] when a lot differs or is outside the margin
}

// pairing is what was asked for.
func (rq *CompareRequest) pairing() compare.Pairing {
	switch {
	case rq.Paired:
		return compare.BySerial
	case rq.Unpaired:
		return compare.Never
	}
	return compare.ByLikeness
}

// levels of an interval that are taken, %.
const leastLevel, greatestLevel = 50, 99.9

// check says what is wrong with the request.
func (rq *CompareRequest) check(reference string, candidates []string) error {
	if rq.Level == 0 {
		rq.Level = 95
	}
	if !(rq.Level >= leastLevel && rq.Level <= greatestLevel) {
		return Usage("--level 95", "--level: %g %%, must be from %g to %g", rq.Level, float64(leastLevel), float64(greatestLevel))
	}
	if rq.Margin.Unit != "" && !(rq.Margin.Value > 0) {
		return Usage("--margin 50mV, --margin 10% or --margin 25mA", "--margin: %s, must be above 0", report.AmountWords(rq.Margin))
	}
	if b, ok := rq.Beta.Get(); ok && !(b > 0) {
		return Usage("--beta 3.8", "--beta: %g A/V², must be above 0", b)
	}
	if err := checkTempco(rq.Tempco); err != nil {
		return err
	}
	if u, ok := rq.TempcoU.Get(); ok && !(u > 0 && rq.Tempco.IsKnown()) {
		return Usage("--tempco -4mV/K --tempco-u 1mV/K", "--tempco-u: must be above 0, and go with --tempco")
	}
	if rq.Paired && rq.Unpaired {
		return Usage("leave one of them out", "--paired and --unpaired exclude each other")
	}
	for i, c := range candidates {
		if c == reference {
			return Usage("name two different lots", "lot %q: compared with itself", c)
		}
		if slices.Contains(candidates[:i], c) {
			return Usage("name each lot once", "lot %q: named twice", c)
		}
	}
	return nil
}

// Compare holds one lot or several against a reference lot. With rq.Fail it ends
// in [ExitNo] when one of them differs or is outside the margin.
func Compare(ctx context.Context, env *Env, reference string, candidates []string, o SheetOptions, rq CompareRequest) error {
	if err := rq.check(reference, candidates); err != nil {
		return err
	}
	ref, err := env.referenceSheet(ctx, reference, o, rq)
	if err != nil {
		return err
	}
	env.doubt(&ref, rq)
	sheets := make([]report.Sheet, len(candidates))
	for i, name := range candidates {
		if sheets[i], err = env.candidateSheet(ctx, &ref, name, o); err != nil {
			return err
		}
	}
	by, err := comparedBy(&ref, sheets, rq, o.At.IsKnown())
	if err != nil {
		return err
	}
	start := time.Now()
	for i := range sheets {
		c, err := compareSheets(&ref, &sheets[i], by, rq)
		if err != nil {
			return err
		}
		sheets[i].Compared = &c
	}
	cl := report.ComparedLots{Reference: &ref, Candidates: sheets}
	if len(sheets) > 1 {
		lots := []compare.Lot{comparedLot(&ref)}
		for i := range sheets {
			lots = append(lots, comparedLot(&sheets[i]))
		}
		trend, err := compare.TrendOf(lots, optionsOf(&ref, by, rq))
		if err != nil {
			return failed("", "the run of lots: %w", err)
		}
		trend.Text = append(trend.Text, fmt.Sprintf("the verdicts of the %d lots against lot %s stand each on its own and are not adjusted for their number; the p and intervals of the pairs are", len(sheets), ref.Lot.Name))
		cl.Trend = &trend
	}
	env.detail("%s compared in %v", count(1+len(sheets), "lot"), time.Since(start).Round(time.Millisecond))
	if env.JSON {
		err = report.CompareJSON(env.Out, cl)
	} else {
		err = report.CompareTable(env.Out, cl, env.style())
	}
	if err != nil || !rq.Fail {
		return err
	}
	return env.failOf(sheets)
}

// doubt warns of numbers that are taken as given and hardly meant.
func (e *Env) doubt(ref *report.Sheet, rq CompareRequest) {
	e.doubtMargin(rq.Margin)
	e.doubtTempco(rq.Tempco, ref.Part)
}

// failOf ends in [ExitNo] when a lot differs or is outside the margin. Too few to tell
// is no 'no', and no 'yes' either: that is said.
func (e *Env) failOf(sheets []report.Sheet) error {
	var open []string
	no := false
	for i := range sheets {
		c := sheets[i].Compared
		no = no || c.No()
		if c.Verdict == compare.TooFew {
			open = append(open, report.Clean(c.Candidate))
		}
	}
	if open != nil {
		e.warn("--fail: %s: too few to tell is no 'no', and nothing is shown either way", strings.Join(open, ", "))
	}
	if no {
		return &Failure{Code: ExitNo}
	}
	return nil
}

// referenceSheet fits the reference lot. A current given with --by vgs-idle is
// the idle current compared at, else the test current.
func (e *Env) referenceSheet(ctx context.Context, name string, o SheetOptions, rq CompareRequest) (report.Sheet, error) {
	if rq.By == "vgs-idle" && o.At.IsKnown() {
		o.Idle, o.At = o.At, record.Num{}
	}
	return e.Sheet(ctx, name, o)
}

// candidateSheet fits a lot at the currents of the reference lot.
func (e *Env) candidateSheet(ctx context.Context, ref *report.Sheet, name string, o SheetOptions) (report.Sheet, error) {
	o.At, o.Idle = record.Known(ref.TestCurrent), record.Known(ref.IdleCurrent)
	return e.Sheet(ctx, name, o)
}

// comparedBy settles the quantity: the one asked for; else V_GS(th) where a
// current was given for it; else the gate bias at the idle current where every lot
// has it; else V_GS(th).
func comparedBy(ref *report.Sheet, cands []report.Sheet, rq CompareRequest, at bool) (fit.Key, error) {
	switch {
	case rq.By == "vgs-idle" && math.IsNaN(ref.IdleCurrent):
		return "", failed("gatesill lot edit "+Quote(ref.Lot.Name)+" --idle-current 250mA", "--by vgs-idle: lot %q has no idle current", ref.Lot.Name)
	case rq.By != "":
		return sortKeys[rq.By].key, nil
	case at || math.IsNaN(ref.IdleCurrent) || !hasAny(ref, fit.KeyVgsIdle):
		return fit.KeyVgsth, nil
	}
	for i := range cands {
		if !hasAny(&cands[i], fit.KeyVgsIdle) {
			return fit.KeyVgsth, nil
		}
	}
	return fit.KeyVgsIdle, nil
}

// hasAny reports whether some device of the lot has the quantity.
func hasAny(s *report.Sheet, k fit.Key) bool {
	return slices.ContainsFunc(s.Devices, func(d report.Device) bool {
		return !d.Excluded && d.Role != record.Control && d.Result.At(k).Ok()
	})
}

// compareSheets holds the lot of cand against that of ref, both fitted at the
// same currents. It refuses lots of different parts and lots that were not
// measured alike, with what differs; what only may be unlike is a warning.
func compareSheets(ref, cand *report.Sheet, by fit.Key, rq CompareRequest) (report.Compared, error) {
	out := report.Compared{Reference: ref}
	warnings, err := alikeParts(ref, cand)
	if err != nil {
		return out, err
	}
	for _, s := range []*report.Sheet{ref, cand} {
		if n := len(s.Devices); n > 0 && !slices.ContainsFunc(s.Devices, func(d report.Device) bool { return !d.Excluded }) {
			return out, failed("gatesill device include "+Quote(s.Devices[0].Name)+" --lot "+Quote(s.Lot.Name), "lot %q: %s excluded", s.Lot.Name, allOf(n))
		}
		if !slices.ContainsFunc(s.Devices, func(d report.Device) bool { return !d.Excluded && len(d.Sweeps) > 0 }) {
			return out, failed("gatesill import "+Quote(s.Lot.Name)+" FILE", "lot %q: nothing is measured of it", s.Lot.Name)
		}
	}
	if rq.Tempco.IsKnown() {
		for _, s := range []*report.Sheet{ref, cand} {
			if math.IsNaN(lotTemperature(s)) {
				return out, failed("gatesill import "+Quote(s.Lot.Name)+" FILE --temp 25C --again says it, or leave out --tempco",
					"--tempco: the temperature of lot %q is not known, so that there is nothing to take off", s.Lot.Name)
			}
		}
	}
	differ, doubts := unlikeLots(ref, cand, by, rq.Tempco.IsKnown())
	if differ != nil {
		return out, differ.failure(ref, cand)
	}
	for _, s := range []*report.Sheet{ref, cand} {
		if !hasAny(s, by) && !someAbove(s) {
			return out, failed("gatesill fit "+Quote(s.Lot.Name)+" shows what there is; --at CURRENT compares at another current",
				"lot %q: no device has a value of %s", s.Lot.Name, ref.KeyPhrase(by))
		}
	}
	warnings = append(warnings, doubts...)
	opt := optionsOf(ref, by, rq)
	m, err := marginOf(ref, cand, rq)
	if err != nil {
		return out, err
	}
	opt.Margin, opt.MarginSet = m.volts, m.set
	opt.Repeatability = repeatabilityOf(ref, cand, by).Value
	opt.Spots = onlySpots(ref) && onlySpots(cand)
	opt.Judged = report.SendBackJudged(cand)
	opt.SendBack = first(cand.Lot.SendBack, ref.Lot.SendBack)
	out.MarginFrom = m.text
	out.Comparison, err = compare.Lots(comparedLot(ref), comparedLot(cand), opt)
	if err != nil {
		return out, failed("", "lot %q against %q: %w", cand.Lot.Name, ref.Lot.Name, err)
	}
	out.Warnings = append(warnings, out.Warnings...)
	if out.Paired != nil {
		changed, words := changedPairs(ref, cand, by, rq)
		out.Warnings = append(out.Warnings, changed...)
		out.Sentence += words
	}
	return out, nil
}

// allOf names all devices of a lot.
func allOf(n int) string {
	if n == 1 {
		return "its one device is"
	}
	return fmt.Sprintf("all %d devices are", n)
}

// repeatabilityOf is the greater of what is known of the lots' benches;
// [gauge.None] where nothing is.
func repeatabilityOf(ref, cand *report.Sheet, by fit.Key) gauge.Repeatability {
	worst := gauge.None()
	for _, s := range []*report.Sheet{ref, cand} {
		if r, ok := s.Repeatability[by]; ok && !(r.Value <= worst.Value) {
			worst = r
		}
	}
	return worst
}

// onlySpots reports whether no sweep of the lot is a curve.
func onlySpots(s *report.Sheet) bool {
	only := true
	counted(s, func(sw *report.Sweep) { only = only && sw.Direction == record.Spot })
	return only
}

// someAbove reports whether a device is known not to reach the current.
func someAbove(s *report.Sheet) bool {
	return slices.ContainsFunc(s.Devices, func(d report.Device) bool { return d.State() == fit.Above && d.Role != record.Control })
}

// optionsOf are the choices that hold for every candidate.
func optionsOf(ref *report.Sheet, by fit.Key, rq CompareRequest) compare.Options {
	low, high := limitsOf(ref, fit.KeyVgsth) // of V_GS(th), whatever is compared
	return compare.Options{
		By: by, Level: rq.Level / 100, Margin: math.NaN(), MarginSet: compare.None, Pairing: rq.pairing(), Repeatability: math.NaN(),
		Tempco: rq.Tempco.Float(), TempcoU: rq.TempcoU.Float(), Beta: rq.Beta.Float(), LimitLow: low, LimitHigh: high, SendBack: ref.Lot.SendBack,
	}
}

// limitsOf gives the data-sheet limits of the quantity compared. They are stated
// for V_GS(th) at the part's test current and hold at no other.
func limitsOf(s *report.Sheet, by fit.Key) (low, high float64) {
	at := s.TestCurrent
	if by == fit.KeyVgsIdle {
		at = s.IdleCurrent
	}
	stated, known := s.Part.TestCurrent.Get()
	if known && math.Abs(stated-at) > 1e-6*at || !known && by == fit.KeyVgsIdle {
		return math.NaN(), math.NaN()
	}
	return s.Part.VgsthMin.Float(), s.Part.VgsthMax.Float()
}

// alikeParts refuses lots of different parts. A lot for which no part was named
// may be of any: that is said.
func alikeParts(ref, cand *report.Sheet) ([]fit.Warning, error) {
	if ref.Part.ID == cand.Part.ID {
		return nil, nil
	}
	if ref.Part.Channel != cand.Part.Channel || ref.Part.Mode != cand.Part.Mode {
		kind := func(s *report.Sheet) string { return fmt.Sprintf("%s-channel %s", s.Part.Channel, s.Part.Mode) }
		return nil, failed("gatesill lot list shows which lots are of one part",
			"lots of different parts: %s is %s, %s is %s", ref.Lot.Name, kind(ref), cand.Lot.Name, kind(cand))
	}
	var unnamed []string
	for _, s := range []*report.Sheet{ref, cand} {
		if s.Part.Name == unnamedPart(s.Lot.Name) {
			unnamed = append(unnamed, s.Lot.Name)
		}
	}
	if unnamed == nil {
		return nil, failed("gatesill lot list shows which lots are of one part; gatesill lot edit "+Quote(cand.Lot.Name)+" --part "+Quote(ref.Part.Name)+" only if the part was entered wrongly",
			"lots of different parts: %s is of %s, %s of %s", ref.Lot.Name, ref.Part.Name, cand.Lot.Name, cand.Part.Name)
	}
	return []fit.Warning{{Code: fit.CodePartNotNamed, Text: fmt.Sprintf(
		"no part is named for %s: whether both lots are of one part is not known, and the currents are those of lot %s",
		strings.Join(unnamed, " and "), ref.Lot.Name)}}, nil
}
