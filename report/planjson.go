package report

import (
	"fmt"
	"io"
	"math"

	"gatesill/fit/plan"
)

// known is a number of parts that is null when it is 0: not asked for, or none
// would do.
func known(n int) any {
	if n == 0 {
		return nil
	}
	return n
}

// PlanJSON writes what `plan KIND --json` gives: one object with the kind, what
// was asked, and the answer. Voltages end in _V, shares, risks and chances are
// fractions; what was not asked for is null.
func PlanJSON(w io.Writer, a plan.Answer) error {
	head := []member{{"schema", Schema}, {"plan", a.Kind()}}
	var rest []member
	switch a := a.(type) {
	case *plan.Find:
		rest = findMembers(a)
	case *plan.Shift:
		rest = shiftMembers(a)
	case *plan.Same:
		rest = sameMembers(a)
	case *plan.Cover:
		rest = coverMembers(a)
	case *plan.Capability:
		rest = capabilityMembers(a)
	case *plan.Accept:
		rest = acceptMembers(a)
	default:
		return fmt.Errorf("plan %q: no JSON", a.Kind())
	}
	return writeObject(w, append(head, rest...)...)
}

type possibleDoc struct {
	Confidence number `json:"confidence"`
	Share      number `json:"bad_share"`
	Count      any    `json:"bad_count"`
}

type zeroDoc struct {
	Share      number `json:"bad_share"`
	Count      any    `json:"bad_count"`
	Confidence number `json:"confidence"`
	N          any    `json:"n"`
}

func findMembers(f *plan.Find) []member {
	possible, zero := []possibleDoc{}, []zeroDoc{}
	for _, p := range f.Possible {
		d := possibleDoc{number(p.Confidence), number(p.Share), nil}
		if p.Count >= 0 {
			d.Count = p.Count
		}
		possible = append(possible, d)
	}
	for _, r := range f.Sizes {
		for i, n := range r.N {
			zero = append(zero, zeroDoc{number(r.Bad), known(r.Count), number(plan.ZeroConfidences[i]), known(n)})
		}
	}
	return []member{
		{"bad_share", number(f.Bad)}, {"bad_count", known(f.BadCount)}, {"of", known(f.Of)}, {"risk", number(fraction(1 - f.Confidence))},
		{"n", known(f.N)}, {"found", f.Found}, {"needed_n", known(f.Needed)}, {"finds", number(f.Finds)}, {"misses", number(1 - f.Finds)},
		{"possible", rowsOf(possible)}, {"zero_failure", rowsOf(zero)},
	}
}

// fraction takes the noise off a difference from 1.
func fraction(x float64) float64 { return math.Round(x*1e12) / 1e12 }

type reachDoc struct {
	Chance number `json:"chance"`
	V      number `json:"smallest_V"`
}

func reachDocs(list []plan.Reach) rows {
	out := []reachDoc{}
	for _, r := range list {
		out = append(out, reachDoc{number(r.Chance), number(r.V)})
	}
	return rowsOf(out)
}

func shiftMembers(s *plan.Shift) []member {
	return []member{
		{"lot", optional(s.Lot.Name)}, {"quantity", optional(s.Lot.Of)}, {"shift_V", number(s.Shift)}, {"sd_V", number(s.SD)}, {"risk", number(s.Risk)}, {"confidence", number(s.Confidence)},
		{"n", known(s.N)}, {"needed_n", known(s.Needed)}, {"needed_n_plain_means", known(s.NeededT)},
		{"power", number(s.Power)}, {"power_plain_means", number(s.PowerT)}, {"sees", reachDocs(s.Smallest)},
		{"sd_high_V", number(s.SDHigh)}, {"needed_n_sd_high", known(s.NeededHigh)},
	}
}

func sameMembers(s *plan.Same) []member {
	return []member{
		{"lot", optional(s.Lot.Name)}, {"quantity", optional(s.Lot.Of)}, {"margin_V", number(s.Margin)}, {"sd_V", number(s.SD)}, {"shift_V", number(s.Shift)}, {"risk", number(s.Risk)},
		{"level", number(s.Level)}, {"n", known(s.N)}, {"needed_n", known(s.Needed)}, {"needed_n_plain_means", known(s.NeededT)},
		{"few_n", s.Few}, {"few_shows", number(s.Chance)}, {"few_shows_plain_means", number(s.ChanceT)}, {"shows", reachDocs(s.Smallest)},
		{"sd_high_V", number(s.SDHigh)}, {"needed_n_sd_high", known(s.NeededHigh)},
	}
}

type planFactorDoc struct {
	N    int    `json:"n"`
	Both number `json:"k_two_limits"`
	One  number `json:"k_one_limit"`
}

type planIntervalDoc struct {
	Rule       string `json:"rule"`
	Low        number `json:"low_V"`
	High       number `json:"high_V"`
	K          number `json:"k"`
	Confidence number `json:"confidence"`
}

func coverMembers(c *plan.Cover) []member {
	factors, intervals := []planFactorDoc{}, []planIntervalDoc{}
	for _, f := range c.Factors {
		factors = append(factors, planFactorDoc{f.N, number(f.Both), number(f.One)})
	}
	for _, iv := range c.Intervals {
		rule := "normal"
		if iv.Free {
			rule = "any distribution"
		}
		intervals = append(intervals, planIntervalDoc{rule, number(iv.Low), number(iv.High), number(iv.K), number(iv.Confidence)})
	}
	return []member{
		{"lot", optional(c.Lot.Name)}, {"quantity", optional(c.Lot.Of)}, {"share", number(c.Share)}, {"confidence", number(c.Confidence)}, {"n", known(c.N)},
		{"needed_n_two_limits", known(c.FreeBoth)}, {"needed_n_one_limit", known(c.FreeOne)},
		{"share_two_limits", number(c.ShareBoth)}, {"share_one_limit", number(c.ShareOne)},
		{"normal_p", number(c.Normality.P)}, {"declined", optional(c.Declined)}, {"factors", rowsOf(factors)}, {"intervals", rowsOf(intervals)},
	}
}

type mustDoc struct {
	N   int    `json:"n"`
	Ppk number `json:"ppk_to_be_found"`
}

func capabilityMembers(c *plan.Capability) []member {
	must := []mustDoc{}
	for _, r := range c.Rows {
		must = append(must, mustDoc{r.N, number(r.Ppk)})
	}
	return []member{
		{"lot", optional(c.Lot.Name)}, {"ppk_target", number(c.Target)}, {"ppk_expected", number(c.Expected)}, {"confidence", number(c.Confidence)},
		{"n", known(c.N)}, {"needed_n", known(c.Needed)}, {"ppk_bound_expected", number(c.Bound)}, {"n_too_small", c.TooFew},
		{"limit_low_V", number(c.Low)}, {"limit_high_V", number(c.High)}, {"ppk", number(c.Index.Cpk)}, {"pp", number(c.Index.Cp)}, {"ppk_bound", number(c.BoundOf)},
		{"proven", proven(c)}, {"declined", optional(c.Declined)}, {"normal_p", number(c.Normality.P)}, {"must_show", rowsOf(must)},
	}
}

// proven is null where no lot was judged.
func proven(c *plan.Capability) any {
	if c.Lot.Name == "" || c.Declined != "" {
		return nil
	}
	return c.Proven
}

type ocDoc struct {
	Bad     number `json:"bad_share"`
	Accepts number `json:"accepted"`
}

func acceptMembers(a *plan.Accept) []member {
	curve := []ocDoc{}
	for i := 0; i < len(a.Curve); i += 5 {
		curve = append(curve, ocDoc{number(a.Curve[i].Bad), number(a.Curve[i].Accepts)})
	}
	nan := math.NaN()
	qLow, qHigh, estimated, most := nan, nan, nan, nan
	if j := a.Judgement; j.Computable {
		qLow, qHigh, estimated, most = j.QLow, j.QHigh, j.BadLow+j.BadHigh, j.MostBad
	}
	var most2 any
	if a.CountN > 0 {
		most2 = a.CountMost
	}
	return []member{
		{"lot", optional(a.Lot.Name)}, {"good_share", number(a.Good)}, {"good_risk", number(a.GoodRisk)}, {"bad_share", number(a.Bad)}, {"risk", number(a.Risk)},
		{"sigma_known_V", number(a.KnownSigma)}, {"n", known(a.N)}, {"needed_n", known(a.Needed)}, {"plan_n", a.Plan.N}, {"k", number(a.Plan.K)},
		{"accepts_good", number(a.AtGood)}, {"accepts_bad", number(a.AtBad)}, {"bad_share_accepted_95", number(a.Often)}, {"bad_share_accepted_10", number(a.Seldom)},
		{"counting_n", known(a.CountN)}, {"counting_most_bad", most2},
		{"decision", optional(a.Decision)}, {"undecided", optional(a.Undecided)}, {"accepts_bad_lot_n", number(a.BadWithThose)}, {"lot_n", known(a.Lot.N)}, {"mean_V", lotNumber(a.Lot, a.Lot.Mean)}, {"sd_V", lotNumber(a.Lot, a.Lot.SD)},
		{"limit_low_V", number(a.Low)}, {"limit_high_V", number(a.High)}, {"q_low", number(qLow)}, {"q_high", number(qHigh)},
		{"bad_share_estimated", number(estimated)}, {"bad_share_most", number(most)}, {"normal_p", number(a.Normality.P)}, {"operating_characteristic", rowsOf(curve)},
	}
}

func lotNumber(l plan.Lot, x float64) number {
	if l.Name == "" {
		return number(math.NaN())
	}
	return number(x)
}
