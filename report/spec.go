package report

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/store/record"
)

// SpecFields says in words how the lot stands to the limits of its data sheet:
// limits, rule, verdicts, uncertainty, what holds of the parts that were not
// measured, the rule to send back. nil where there are no limits.
func (s *Sheet) SpecFields() []Field {
	sp := s.Spec
	if sp == nil {
		return nil
	}
	out := []Field{{"limits", s.specLimits()}}
	if sp.Why != "" {
		out = append(out, Field{"no verdict", Clean(sp.Why) + noVerdictStep(sp.Why)})
		if sp.Outside.N > 0 { // what holds of the lot needs no verdict on its devices
			return append(out, s.partsFields()...)
		}
		if sp.SendBack {
			out = append(out, Field{"send back", s.sendBackLine()})
		}
		return out
	}
	out = append(out, Field{"rule", s.GuardRule()}, Field{"verdicts", s.verdictLine()})
	for _, d := range []lot.Decision{lot.ConditionalPass, lot.ConditionalFail, lot.Fail} {
		if names := s.judged(d); len(names) > 0 {
			out = append(out, Field{string(d), namesWords(names, 12)})
		}
	}
	if why := s.undecided(); why != "" {
		out = append(out, Field{"no verdict", why})
	}
	if text := s.uncertaintyLine(); text != "" {
		out = append(out, Field{"uncertainty", text})
	}
	return append(out, s.partsFields()...)
}

// noVerdictStep is what to do where no device can be judged, "" where the reason says it.
func noVerdictStep(why string) string {
	if why == lot.NoAbsolute {
		return "; give the accuracy of the meters in a bench file (gatesill help bench-file), or a guard band in volts (lot edit --guard 20mV)"
	}
	return ""
}

// specLimits are the limits with their condition.
func (s *Sheet) specLimits() string {
	sp := s.Spec
	limit := func(x float64) string {
		if math.IsNaN(x) {
			return ""
		}
		return FormatGiven(x, "V")
	}
	text := "V_GS(th) "
	switch low, high := limit(sp.Low), limit(sp.High); {
	case low == "":
		text += "up to " + high
	case high == "":
		text += "from " + low
	default:
		text += low + " to " + high
	}
	if x, ok := s.Part.TestCurrent.Get(); ok {
		text += " at " + FormatGiven(x, "A")
	}
	if x, ok := s.Part.TestVDS.Get(); ok {
		return text + ", V_DS = " + FormatGiven(x, "V")
	}
	return text + ", drain tied to gate"
}

// setWords says when a rule was set.
var setWords = map[string]string{
	lot.RuleBefore: "set before the first reading",
	lot.RuleAfter:  "set after the first reading",
	lot.RuleNone:   "not set beforehand",
}

// GuardRule is the rule of decision in words, "" without limits.
func (s *Sheet) GuardRule() string {
	sp := s.Spec
	if sp == nil {
		return ""
	}
	switch {
	case sp.Guard.Unit == "":
		return "none set beforehand: simple acceptance, pass inside the limits and fail outside, without regard to the uncertainty (lot edit --guard sets one)"
	case sp.Guard.Value == 0:
		return "guard band 0: simple acceptance, pass inside the limits and fail outside, " + setWords[sp.GuardSet]
	}
	text := "guard band " + FormatGiven(sp.Guard.Value, "V")
	if sp.Guard.Unit == "u" {
		text = fmt.Sprintf("guard band %s absolute standard uncertainties (k = 1) of the device", strconv.FormatFloat(sp.Guard.Value, 'g', -1, 64))
		if g := medianGuard(sp); isNumber(g) {
			text += ", in the median " + FormatTwoDigits(g, "V")
		}
	}
	text += ", " + setWords[sp.GuardSet]
	if sp.NoRoom() {
		text += "; it leaves no room between the limits: no device can pass"
	}
	return text
}

func medianGuard(sp *lot.Specification) float64 {
	var g []float64
	for _, j := range sp.Devices {
		if j.Decision != lot.Undecided && isNumber(j.Guard) {
			g = append(g, j.Guard)
		}
	}
	return middle(g)
}

// middle is the median of numbers, NaN of none.
func middle(x []float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	slices.Sort(x)
	return x[(len(x)-1)/2]/2 + x[len(x)/2]/2
}

func (s *Sheet) verdictLine() string {
	sp := s.Spec
	decisions := lot.Decisions
	if sp.Guard.Value == 0 {
		decisions = []lot.Decision{lot.Pass, lot.Fail}
	}
	var parts []string
	for _, d := range decisions {
		parts = append(parts, fmt.Sprintf("%d %s", sp.Count[d], d))
	}
	text := strings.Join(parts, ", ")
	if sp.Undecided > 0 {
		text += fmt.Sprintf("; %d without a verdict", sp.Undecided)
	}
	return text
}

// judged names the devices with that verdict, with their values and the probability
// that they conform.
func (s *Sheet) judged(d lot.Decision) []string {
	var out []string
	for i, j := range s.Spec.Devices {
		if j.Decision != d || i >= len(s.Devices) {
			continue
		}
		var notes []string
		if q := s.Devices[i].Result.Vgsth; q.Ok() {
			u := q.UAbsolute
			if !isNumber(u) {
				u = q.U
			}
			notes = append(notes, FormatPlain(q.Value, u, "V"))
		} else {
			notes = append(notes, "above")
		}
		if isNumber(j.Conform) {
			notes = append(notes, ConformWords(j.Conform)+" likely to conform")
		}
		out = append(out, fmt.Sprintf("%s (%s)", j.Name, strings.Join(notes, ", ")))
	}
	return out
}

// ConformWords writes a probability of conformance in percent.
func ConformWords(p float64) string {
	switch {
	case !isNumber(p):
		return NotAvailable
	case p > 0.9995:
		return "above 99.9 %"
	case p < 0.0005:
		return "below 0.1 %"
	case p > 0.99 || p < 0.1:
		return strconv.FormatFloat(100*p, 'f', 1, 64) + " %"
	}
	return strconv.FormatFloat(100*p, 'f', 0, 64) + " %"
}

// undecided tells why devices that count have no verdict, reason by reason.
func (s *Sheet) undecided() string {
	var list []lot.Unsorted
	for i, j := range s.Spec.Devices {
		if j.Decision == lot.Undecided && i < len(s.Devices) && !aside(&s.Devices[i]) {
			list = append(list, lot.Unsorted{Name: j.Name, Why: j.Why})
		}
	}
	var parts []string
	for _, g := range GroupNames(list) {
		parts = append(parts, namesWords(g.Names, 12)+": "+Clean(g.Text)+noVerdictStep(g.Text))
	}
	return strings.Join(parts, "; ")
}

// aside reports whether a device takes no part in what is said of its lot.
func aside(d *Device) bool { return d.Role == record.Control || d.State() == fit.Excluded }

// uncertaintyLine tells what a value is uncertain by against the limits, and what two
// devices differ by against each other.
func (s *Sheet) uncertaintyLine() string {
	var absolute, between, within []float64
	for i := range s.Devices {
		q := s.Devices[i].Result.Vgsth
		if aside(&s.Devices[i]) || !q.Ok() {
			continue
		}
		if isNumber(q.UAbsolute) {
			absolute = append(absolute, q.UAbsolute)
		}
		if isNumber(q.UBetween) {
			between = append(between, q.UBetween)
		}
		if isNumber(q.U) {
			within = append(within, q.U)
		}
	}
	if len(absolute) == 0 {
		return "absolute not known: a statement of a meter is missing, so no probability of conformance can be given"
	}
	text := fmt.Sprintf("± %s absolute", FormatTwoDigits(2*middle(absolute), "V"))
	if len(within) > 0 {
		text += fmt.Sprintf("; of a difference between two devices on the same meters ± %s at one temperature", FormatTwoDigits(2*math.Sqrt2*middle(within), "V"))
		if len(between) > 0 {
			text += fmt.Sprintf(", ± %s from one session to another", FormatTwoDigits(2*math.Sqrt2*middle(between), "V"))
		}
	}
	return text + " (k = 2, medians)"
}

// partsFields say what holds of the parts that were not measured.
func (s *Sheet) partsFields() []Field {
	sp := s.Spec
	percent := func(x float64) string { return strconv.FormatFloat(100*x, 'g', 2, 64) + " %" }
	var out []Field
	ppk := "declined, because " + sp.Ppk.Declined
	if sp.Ppk.Declined == "" {
		ppk = fmt.Sprintf("at least %s (%s confidence; %s in these %d devices)", index(sp.Ppk.Lower), percent(sp.Ppk.Level), index(sp.Ppk.Value), sp.Ppk.N)
	}
	if sp.Ppk.Of != "all parts" && sp.Ppk.Declined == "" {
		ppk += ", " + sp.Ppk.Of + " only"
	}
	out = append(out, Field{"Ppk", Clean(ppk)})
	b := &sp.Band
	band := "declined, because " + b.Declined
	if b.Declined == "" {
		u := SummaryDigits(s.Spread.Summary[fit.KeyVgsth])
		sc := ScaleOf("V", b.Low, b.High)
		band = fmt.Sprintf("%s of %s lie from %s to %s %s (%s confidence, n = %d, %s)", percent(b.Share), b.Of,
			sc.FormatNumber(b.Low, u, 0), sc.FormatNumber(b.High, u, 0), sc.Unit("V"), percent(b.Level), b.N, b.Kind)
	}
	out = append(out, Field{"tolerance interval", Clean(band)})
	if o := &sp.Outside; isNumber(o.Upper) {
		out = append(out, Field{"outside", fmt.Sprintf("%d of %d; up to %s of %s (%s confidence)", o.Count, o.N, percent(o.Upper), sp.Band.Of, percent(o.Level))})
	}
	if sp.SendBack {
		out = append(out, Field{"send back", s.sendBackLine()})
	}
	return out
}

// sendBackLine tells whether the stored rule is broken.
func (s *Sheet) sendBackLine() string {
	sp := s.Spec
	rule := "rule '" + SendBackWords("outside-limits") + "', " + setWords[sp.SendBackSet] + ": "
	switch {
	case sp.Why != "":
		return rule + "cannot be judged"
	case len(sp.Broken) > 0:
		return rule + "broken by " + namesWords(sp.Broken, 12) + "; by it the lot is to be sent back"
	case sp.Count[lot.ConditionalFail] > 0:
		return rule + "not broken; what lies outside does so by less than the guard band"
	}
	return rule + "not broken"
}

// specBlock writes the fields for people.
func specBlock(p *printer, s Sheet, style Style) {
	fields := s.SpecFields()
	if fields == nil {
		return
	}
	p.line("")
	p.line("%s", style.paint("Specification", bold))
	for _, f := range fields {
		wrapped(p, "  "+f.Label+": ", "    ", f.Value, style.Width)
	}
}

// SendBackJudged says whether the rule to send a lot back for a device outside the
// limits of the data sheet is broken, as the specification has it: by V_GS(th) and
// the guard band, whatever else is looked at. "" where the lot has no limits.
func SendBackJudged(s *Sheet) string {
	sp := s.Spec
	if sp == nil {
		return ""
	}
	if sp.Why != "" {
		return "whether your stored rule is broken cannot be told: " + sp.Why
	}
	limits := "the data sheet's limits of V_GS(th)"
	var failed []string
	for _, d := range sp.Devices {
		if d.Decision == lot.Fail {
			failed = append(failed, d.Name)
		}
	}
	text := "your stored rule is kept: no device is outside " + limits
	switch n := sp.Count[lot.ConditionalFail]; {
	case len(failed) > 0:
		text = fmt.Sprintf("your stored rule is broken: %s outside %s: %s", count(len(failed), "device"), limits, namesWords(failed, 5))
	case n > 0:
		text = fmt.Sprintf("your stored rule is kept: %s outside %s by less than the guard band", count(n, "device"), limits)
	}
	if sp.Undecided > 0 {
		text += fmt.Sprintf("; of %s it cannot be told", count(sp.Undecided, "device"))
	}
	return text
}
