package job

import (
	"context"
	"errors"
	"io"
	"math"
	"path/filepath"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/plan"
	"gatesill/report"
	"gatesill/report/svg"
	"gatesill/store/record"
)

// PlanRequest is what a plan is asked for; each kind looks at its own part of it.
type PlanRequest struct {
	N, Of, Found                               record.Num // parts
	Bad                                        string     // share ("10%", "0.1") or number of parts ("20"); "": none
	Good, GoodRisk, Risk, Share, Confidence    record.Num // 0..1
	Shift, SD, SigmaKnown, LimitLow, LimitHigh record.Num // V
	Ppk, Expect, K                             record.Num
	Margin                                     record.Amount // V, or % or A of the idle current
	From                                       string        // lot of the store; "": none
	Output                                     string        // file to draw in; "": none
	Fail                                       bool          // accept: [ExitNo] when the lot is not accepted; undecided is no such answer
}

// Plan answers how many parts to measure for a purpose: find, shift, same, cover,
// capability or accept.
func Plan(ctx context.Context, env *Env, kind string, rq PlanRequest) error {
	if rq.Output != "" && rq.Output != "-" && strings.ToLower(filepath.Ext(rq.Output)) != ".svg" {
		return Usage("-o plan.svg", "-o %s: the operating characteristic is drawn as .svg", rq.Output)
	}
	if rq.Fail && rq.From == "" {
		return Usage("--from LOT", "--fail: no lot to decide on")
	}
	if rq.From == "" && (rq.LimitLow.IsKnown() || rq.LimitHigh.IsKnown()) {
		return Usage("--from LOT", "--limit-low, --limit-high: no lot to hold against them")
	}
	if rq.N.IsKnown() && rq.N.Float() == 0 {
		return Usage("--n 20", "--n: 0 parts show nothing")
	}
	for _, v := range []float64{rq.Shift.Float(), rq.SD.Float(), rq.SigmaKnown.Float(), voltsOf(rq.Margin)} {
		if v > record.GreatestShift {
			return Usage("50 mV is written 50mV: M is mega, m is milli", "%s of gate voltage is more than any", report.FormatGiven(v, "V"))
		}
		if v >= bareVolts {
			env.warn("%s of gate voltage: a bare number is in volts, 50 mV is written 50mV", report.FormatGiven(v, "V"))
		}
	}
	var from *report.Sheet
	if rq.From != "" {
		s, err := env.Sheet(ctx, rq.From, SheetOptions{Method: "auto", ReadOnly: true})
		if err != nil {
			return err
		}
		from = &s
	}
	a, err := env.answer(kind, rq, from)
	if err != nil {
		return planFailure(kind, err)
	}
	if from != nil {
		env.tellPlanning(kind, from)
	}
	if rq.Output != "" {
		if acc, ok := a.(*plan.Accept); ok {
			draw := func(w io.Writer) error {
				return svg.Operating(w, acc, svg.Frame{ID: "oc", Standalone: true})
			}
			if err := env.WriteFile(rq.Output, draw); err != nil || rq.Output == "-" {
				return err
			}
			defer env.talk("operating characteristic: %s", report.Clean(rq.Output))
		}
	}
	if env.JSON {
		err = report.PlanJSON(env.Out, a)
	} else {
		err = report.PlanTable(env.Out, a, env.style())
	}
	if acc, ok := a.(*plan.Accept); ok && err == nil && rq.Fail {
		switch acc.Decision {
		case plan.NotAccepted:
			return &Failure{Code: ExitNo}
		case plan.Undecided:
			env.warn("--fail: nothing was decided about lot %s, and that is no refusal: exit code 0", report.Clean(rq.From))
		}
	}
	return err
}

func voltsOf(a record.Amount) float64 {
	if a.Unit != "V" {
		return math.NaN()
	}
	return a.Value
}

// planFailure tells an input that nothing can be planned with by its flag.
func planFailure(kind string, err error) error {
	var bad *plan.Invalid
	if errors.As(err, &bad) {
		return Usage(bad.Hint, "plan %s: --%s: %s", kind, bad.Input, bad.Why)
	}
	return err
}

func (e *Env) answer(kind string, rq PlanRequest, from *report.Sheet) (plan.Answer, error) {
	or := func(n record.Num, otherwise float64) float64 {
		if x, ok := n.Get(); ok {
			return x
		}
		return otherwise
	}
	whole := func(n record.Num) int { return int(min(or(n, 0), 1e9)) }
	n := whole(rq.N)
	switch kind {
	case "find":
		r := plan.FindRequest{Of: whole(rq.Of), Confidence: 1 - or(rq.Risk, 0.05), N: n, Found: whole(rq.Found)}
		if from != nil && !rq.Of.IsKnown() {
			q, ok := from.Lot.Quantity.Get()
			if !ok {
				return nil, Usage("gatesill lot edit "+Quote(from.Lot.Name)+" --quantity 200, or --of 200", "lot %q: how many parts it has is not known", from.Lot.Name)
			}
			r.Of = int(min(q, 1e9))
		}
		if rq.Of.IsKnown() && r.Of == 0 {
			return nil, &plan.Invalid{Input: "of", Why: "0: a lot has parts", Hint: "--of 200"}
		}
		var err error
		if r.Bad, r.BadCount, err = badParts(rq.Bad); err != nil {
			return nil, err
		}
		return answered(plan.ToFind(r))
	case "shift":
		r := plan.ShiftRequest{Shift: rq.Shift.Float(), SD: rq.SD.Float(), Risk: or(rq.Risk, 0.2), Confidence: or(rq.Confidence, 0.95), N: n}
		if from != nil && !rq.SD.IsKnown() {
			r.Lot = sampleOf(from, from.SortedBy)
			r.SD = r.Lot.SD
			if err := hasSpread(r.Lot); err != nil {
				return nil, err
			}
		}
		return answered(plan.ToSee(r))
	case "same":
		r := plan.SameRequest{Shift: rq.Shift.Float(), SD: rq.SD.Float(), Risk: or(rq.Risk, 0.2), N: n}
		var err error
		if r.Margin, err = e.marginVolts(rq.Margin, from); err != nil {
			return nil, err
		}
		if from != nil && !rq.SD.IsKnown() {
			r.Lot = sampleOf(from, from.SortedBy)
			r.SD = r.Lot.SD
			if err := hasSpread(r.Lot); err != nil {
				return nil, err
			}
		}
		return answered(plan.ToShowSame(r))
	case "cover":
		r := plan.CoverRequest{Share: or(rq.Share, 0.95), Confidence: or(rq.Confidence, 0.95), N: n}
		if from != nil {
			r.Lot = sampleOf(from, from.SortedBy)
			if err := ownNumber(n, r.Lot); err != nil {
				return nil, err
			}
			r.N = r.Lot.N
		}
		return answered(plan.ToCover(r))
	case "capability":
		r := plan.CapabilityRequest{Target: or(rq.Ppk, 1.33), Expected: rq.Expect.Float(), Confidence: or(rq.Confidence, 0.95), N: n, Low: rq.LimitLow.Float(), High: rq.LimitHigh.Float()}
		if from != nil {
			r.Lot = sampleOf(from, fit.KeyVgsth)
			if err := ownNumber(n, r.Lot); err != nil {
				return nil, err
			}
			r.N = r.Lot.N
			if r.Low, r.High = planLimits(from, rq, r.Lot.Mean); math.IsNaN(r.Low) && math.IsNaN(r.High) {
				return nil, Usage("gatesill lot edit "+Quote(from.Lot.Name)+" --vgsth-min 2 --vgsth-max 4, or --limit-low and --limit-high", "lot %q: no limit of its part is known for V_GS(th) at %s", from.Lot.Name, report.FormatGiven(from.TestCurrent, "A"))
			}
		}
		return answered(plan.ToBeCapable(r))
	case "accept":
		r := plan.AcceptRequest{
			Good: rq.Good.Float(), GoodRisk: or(rq.GoodRisk, 0.05), Bad: math.NaN(), Risk: or(rq.Risk, 0.1), KnownSigma: rq.SigmaKnown.Float(),
			N: n, K: rq.K.Float(), Low: rq.LimitLow.Float(), High: rq.LimitHigh.Float(),
		}
		bad, number, err := badParts(rq.Bad)
		switch {
		case err != nil:
			return nil, err
		case number > 0:
			return nil, &plan.Invalid{Input: "bad", Why: rq.Bad + " is no share", Hint: "--bad 5%"}
		}
		r.Bad = bad
		if from != nil {
			r.Lot = sampleOf(from, fit.KeyVgsth)
			r.Low, r.High = planLimits(from, rq, r.Lot.Mean)
		}
		return answered(plan.ToAccept(r))
	}
	return nil, Usage("gatesill plan --help", "plan %s: no such kind", kind)
}

// answered keeps a nil pointer from becoming an answer.
func answered[A plan.Answer](a A, err error) (plan.Answer, error) {
	if err != nil {
		return nil, err
	}
	return a, nil
}

// badParts reads a share of bad parts, or a number of them: "10%" and "0.1" are
// shares, 1 and more are numbers.
func badParts(text string) (share float64, number int, err error) {
	if text == "" {
		return math.NaN(), 0, nil
	}
	head, percent := strings.CutSuffix(strings.TrimSpace(text), "%")
	x, err := strconv.ParseFloat(strings.TrimSpace(head), 64)
	switch {
	case err != nil || math.IsInf(x, 0) || math.IsNaN(x):
		return 0, 0, &plan.Invalid{Input: "bad", Why: strconv.Quote(text) + " is neither a share nor a number of parts", Hint: "--bad 10%, or --bad 20 --of 200"}
	case percent:
		return x / 100, 0, nil
	case x >= 1 && x != math.Trunc(x):
		return 0, 0, &plan.Invalid{Input: "bad", Why: text + " is no whole number of parts", Hint: "--bad " + strconv.FormatFloat(math.Ceil(x), 'f', -1, 64) + ", or a share: --bad " + head + "%"}
	case x >= 1:
		return math.NaN(), int(min(x, 1e9)), nil
	}
	return x, 0, nil
}

// sampleOf is what is known of one quantity of a lot; controls and what has no
// value are not in it.
func sampleOf(s *report.Sheet, key fit.Key) plan.Lot {
	var values []float64
	for i := range s.Devices {
		d := &s.Devices[i]
		if d.State() != fit.Measured || d.Role == record.Control {
			continue
		}
		if q := d.Result.At(key); q.Ok() {
			values = append(values, q.Value)
		}
	}
	l := plan.LotOf(s.Lot.Name, values)
	l.Of, l.Mixed = report.KeyOf(key).Symbol, s.Spread.Populations > 1
	return l
}

func hasSpread(l plan.Lot) error {
	if l.N < 2 || !(l.SD > 0) {
		return failed("--sd 80mV", "lot %q: %s with a value have no standard deviation", l.Name, count(l.N, "device"))
	}
	return nil
}

// ownNumber refuses a number of parts beside a lot that has its own.
func ownNumber(n int, l plan.Lot) error {
	if n > 0 {
		return Usage("leave --n out, or --from", "--n: lot %q has its own number, %s with a value", l.Name, count(l.N, "device"))
	}
	if l.N < 2 {
		return failed("gatesill spread "+Quote(l.Name), "lot %q: %s with a value, 2 are needed", l.Name, count(l.N, "device"))
	}
	return nil
}

// planLimits are the limits given, else those of the part, with the sign of the
// values they are for.
func planLimits(s *report.Sheet, rq PlanRequest, mean float64) (low, high float64) {
	low, high = limitsOf(s, fit.KeyVgsth)
	if rq.LimitLow.IsKnown() || rq.LimitHigh.IsKnown() {
		low, high = rq.LimitLow.Float(), rq.LimitHigh.Float()
	}
	if low == 0 && high == 0 {
		return math.NaN(), math.NaN()
	}
	// Data sheets of p-channel parts give the limits with or without a sign.
	if s.Part.Channel == record.PChannel && mean < 0 && !(low < 0) && !(high < 0) {
		low, high = -high, -low
	}
	if low > high {
		low, high = high, low
	}
	return low, high
}

// marginVolts is a margin in volts of gate bias, NaN for none; one of the idle
// current is turned by the transconductance of a lot, which also may have a margin
// stored.
func (e *Env) marginVolts(m record.Amount, s *report.Sheet) (float64, error) {
	stored := m.Unit == "" && s != nil
	if stored {
		m = s.Lot.Margin
	}
	switch {
	case m.Unit == "":
		return math.NaN(), nil
	case s == nil && m.Unit != "V":
		return 0, Usage("--margin 50mV, or --from LOT whose transconductance tells the volts", "--margin %s: of the idle current of which lot?", report.AmountWords(m))
	case s == nil:
		return m.Value, nil
	}
	volts, how, err := inVolts(s, m, record.Num{}, stored)
	if err == nil && how != "" {
		e.talk("margin: %s", report.Clean(how))
	}
	return volts, err
}

// tellPlanning warns of what in a lot does not fit what is planned with.
func (e *Env) tellPlanning(kind string, s *report.Sheet) {
	switch kind {
	case "find":
		return
	case "shift", "same":
		if s.Spread.Populations > 1 {
			e.warn("lot %s looks like two populations: its standard deviation is not that of one [%s]", report.Clean(s.Lot.Name), fit.CodeTwoPopulations)
		}
		return
	}
	dead := 0
	for i := range s.Devices {
		d := &s.Devices[i]
		switch d.State() {
		case fit.Above, fit.Open, fit.Shorted, fit.WrongWayRound:
			if d.Role != record.Control {
				dead++
			}
		}
	}
	if dead > 0 {
		e.warn("%s of lot %s without a value (open, shorted, above the range): not in these numbers, count them as bad", count(dead, "device"), report.Clean(s.Lot.Name))
	}
}
