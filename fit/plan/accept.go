package plan

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

// AcceptRequest asks for a plan that accepts lots by mean and spread of a sample.
type AcceptRequest struct {
	Good       float64 // share of bad parts of a lot that should be accepted; NaN with N and K: not asked
	GoodRisk   float64 // of refusing such a lot
	Bad        float64 // share of bad parts of a lot that should be refused; NaN as Good
	Risk       float64 // of accepting such a lot
	KnownSigma float64 // V, the standard deviation, known beforehand; NaN: taken from the sample
	N          int     // parts; 0: how many is asked
	K          float64 // factor of a plan that is there already; NaN: to be found
	Lot        Lot     // sample at hand, to be judged
	Low, High  float64 // V, limits; NaN: none
}

// Decision is what a plan says about the sample at hand.
type Decision string

// Decisions. Undecided: too few values, no limit, or not normal.
const (
	Undecided   Decision = ""
	Accepted    Decision = "accept"
	NotAccepted Decision = "do not accept"
)

// OCPoint is the chance that a lot is accepted, by the share of bad parts in it.
type OCPoint struct{ Bad, Accepts float64 }

// Accept is the answer to an [AcceptRequest].
type Accept struct {
	AcceptRequest
	Needed       int                 // parts that the two points ask for; without them N
	Plan         stats.VariablesPlan // for the sample at hand where that is larger than Needed
	AtGood       float64             // chance of accepting at Good; NaN
	AtBad        float64             // chance of accepting at Bad; NaN
	Often        float64             // share of bad parts with which 95 of 100 lots are accepted
	Seldom       float64             // share of bad parts with which 10 of 100 lots are
	Curve        []OCPoint           // operating characteristic, by rising share from 0
	CountN       int                 // parts of a plan that counts bad ones instead, with the same two points; 0: none, or not asked
	CountMost    int                 // and how many may be bad
	Decision     Decision
	Judgement    stats.Judgement
	Undecided    string  // why there is no decision, ""
	BadWithThose float64 // where the sample is too small: chance of accepting at Bad with a plan of its size; NaN
	Normality    Normality
	SigmaDoubt   bool // the sample spreads more than the sigma that is known lets expect (chance below 1 %)
}

// ToAccept answers an [AcceptRequest]. A sample of fewer parts than the plan wants
// is not judged, unless N says to plan with so few; one of more is judged with the
// factor of its own size, which keeps both risks. Values that are not normal are
// not judged. Errors: [Invalid]. Checked: TestAccept.
func ToAccept(r AcceptRequest) (*Accept, error) {
	known := !math.IsNaN(r.KnownSigma)
	a := &Accept{AcceptRequest: r, AtGood: math.NaN(), AtBad: math.NaN(), BadWithThose: math.NaN(), Normality: Normality{P: math.NaN()}}
	if err := a.check(known); err != nil {
		return nil, err
	}
	points := !math.IsNaN(r.Good) && !math.IsNaN(r.Bad)
	switch {
	case !math.IsNaN(r.K):
		a.Plan = stats.VariablesPlan{N: r.N, K: r.K, KLeast: r.K, KMost: r.K, KnownSigma: known}
	case r.N > 0:
		a.Plan = stats.VariablesPlanWith(r.N, r.Good, r.GoodRisk, known)
	default:
		a.Plan = stats.VariablesPlanFor(r.Good, r.GoodRisk, r.Bad, r.Risk, known)
		if a.Plan.N == 0 || a.Plan.N > mostParts {
			return nil, &Invalid{"bad", fmt.Sprintf("no plan of up to %d parts tells %s bad from %s bad", mostParts, percent(r.Good), percent(r.Bad)), "shares further apart"}
		}
		if a.Plan.N < 3 {
			// Two limits are judged from three values on.
			a.Plan = stats.VariablesPlanWith(3, r.Good, r.GoodRisk, known)
		}
	}
	// A factor as it is written down, where the risks leave room for that.
	if k := math.Floor(a.Plan.KMost*1000) / 1000; k >= a.Plan.KLeast {
		a.Plan.K = k
	}
	a.Needed = a.Plan.N
	if points && r.N > 0 {
		a.Needed = stats.VariablesPlanFor(r.Good, r.GoodRisk, r.Bad, r.Risk, known).N
		a.Needed = max(a.Needed, 3)
	}
	if math.IsNaN(r.K) && r.N == 0 && r.Lot.N > a.Plan.N {
		a.Plan = stats.VariablesPlanWith(r.Lot.N, r.Good, r.GoodRisk, known)
	}
	if points {
		a.CountN, a.CountMost = stats.AttributesPlanFor(r.Good, r.GoodRisk, r.Bad, r.Risk)
	}
	if !math.IsNaN(r.Good) {
		a.AtGood = a.Plan.Accepts(r.Good)
	}
	if !math.IsNaN(r.Bad) {
		a.AtBad = a.Plan.Accepts(r.Bad)
	}
	a.Often, a.Seldom = a.Plan.BadAccepted(0.95), a.Plan.BadAccepted(0.10)
	a.Curve = curve(a.Plan, r.Bad)
	if r.Lot.given() {
		a.judge(known)
	}
	return a, nil
}

func (r *AcceptRequest) check(known bool) error {
	least := 3 // two limits are judged from three values on
	err := firstError(
		atLeast("n", r.N, least, "a plan needs 3 parts"), atMost("n", r.N),
		fraction("good-risk", r.GoodRisk, "--good-risk 5%"), fraction("risk", r.Risk, "--risk 10%"),
	)
	if err == nil && known {
		err = above("sigma-known", r.KnownSigma, "V", "--sigma-known 80mV")
	}
	if err == nil && r.Low >= r.High {
		err = &Invalid{"limit-low", fmt.Sprintf("%.6g V is not below the upper limit of %.6g V", r.Low, r.High), "--limit-low 2V --limit-high 4V"}
	}
	if err != nil {
		return err
	}
	if !math.IsNaN(r.K) {
		switch {
		case math.IsInf(r.K, 0) || math.Abs(r.K) > 30:
			return &Invalid{"k", fmt.Sprintf("%v is no factor of a plan", r.K), "--k 1.86"}
		case r.N == 0:
			return &Invalid{"k", "a factor belongs to a number of parts", "--n 30 --k 1.86"}
		}
	}
	if math.IsNaN(r.Good) && math.IsNaN(r.K) {
		return &Invalid{"good", "needed: the share of bad parts in a lot that should be accepted", "--good 1% --bad 5%"}
	}
	if math.IsNaN(r.Bad) && math.IsNaN(r.K) && r.N == 0 {
		return &Invalid{"bad", "needed: the share of bad parts in a lot that should be refused", "--good 1% --bad 5%"}
	}
	for _, p := range []struct {
		name string
		x    float64
	}{{"good", r.Good}, {"bad", r.Bad}} {
		if !math.IsNaN(p.x) {
			if err := fraction(p.name, p.x, "--good 1% --bad 5%"); err != nil {
				return err
			}
		}
	}
	if r.Good >= r.Bad {
		return &Invalid{"bad", fmt.Sprintf("%s is not more than the %s of a good lot", percent(r.Bad), percent(r.Good)), "--good 1% --bad 5%"}
	}
	if r.GoodRisk+r.Risk >= 1 {
		return &Invalid{"risk", "the two risks together leave nothing to decide", "--good-risk 5% --risk 10%"}
	}
	return nil
}

// judge applies the plan to the sample at hand.
func (a *Accept) judge(known bool) {
	l := a.Lot
	a.Normality = normalityOf(l.Values)
	plan, sd := a.Plan, l.SD
	if known {
		sd = a.KnownSigma
	}
	switch {
	case math.IsNaN(a.Low) && math.IsNaN(a.High):
		a.Undecided = "no limit is known to judge it against"
		return
	case l.N < plan.N:
		a.Undecided = fmt.Sprintf("the plan wants %d parts, and %d have a value", plan.N, l.N)
		if l.N >= 3 && math.IsNaN(a.K) && !math.IsNaN(a.Bad) {
			a.BadWithThose = stats.VariablesPlanWith(l.N, a.Good, a.GoodRisk, known).Accepts(a.Bad)
		}
	}
	if known && l.N > 1 {
		df := float64(l.N - 1)
		a.SigmaDoubt = stats.ChiSquareUpper(df*l.SD*l.SD/(sd*sd), df) < 0.01
	}
	a.Judgement = plan.Judge(l.Mean, sd, l.N, a.Low, a.High)
	if why := l.unfit(a.Normality); why != "" && a.Undecided == "" {
		a.Undecided = why
	}
	switch {
	case a.Undecided != "":
	case !a.Judgement.Computable:
		a.Undecided = "its values have no spread to judge by, or are too few"
	case a.Judgement.Accept:
		a.Decision = Accepted
	default:
		a.Decision = NotAccepted
	}
}

// curve is the operating characteristic from no bad parts to where hardly any lot
// is accepted, or a little beyond the share named.
func curve(p stats.VariablesPlan, bad float64) []OCPoint {
	end := p.BadAccepted(0.01)
	if bad*1.2 > end {
		end = bad * 1.2
	}
	end = math.Min(niceUp(end), 1)
	const steps = 200
	points := make([]OCPoint, steps+1)
	for i := range points {
		x := math.Round(end*float64(i)/steps*1e12) / 1e12
		points[i] = OCPoint{x, p.Accepts(x)}
	}
	return points
}

// niceUp rounds up to 1, 1.5, 2, 3, 4, 5, 6, 8 times a power of ten.
func niceUp(x float64) float64 {
	if !(x > 0) {
		return 1
	}
	p := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{1, 1.5, 2, 3, 4, 5, 6, 8, 10} {
		if m*p >= x*(1-1e-9) {
			return m * p
		}
	}
	return 10 * p
}
