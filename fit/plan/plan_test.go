package plan

import (
	"errors"
	"math"
	"testing"

	"gatesill/fit/stats"
)

var none = math.NaN()

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %v, want %v, off by %.3g, allowed %.3g", what, got, want, got-want, tol)
	}
}

func same(t *testing.T, what string, got, want int) {
	t.Helper()
	if got != want {
		t.Errorf("%s: got %d, want %d", what, got, want)
	}
}

// The lengths of all-good samples in common use, and the chances of finding one
// of 20 bad in 200 (1 - C(180,n)/C(200,n) in exact fractions).
func TestFind(t *testing.T) {
	f, err := ToFind(FindRequest{Bad: none, Confidence: 0.95})
	if err != nil {
		t.Fatal(err)
	}
	want := map[float64][]int{0.10: {22, 29, 44}, 0.05: {45, 59, 90}, 0.01: {230, 299, 459}}
	for _, r := range f.Sizes {
		for i, n := range want[r.Bad] {
			same(t, "all good", r.N[i], n)
		}
		delete(want, r.Bad)
	}
	same(t, "rows not there", len(want), 0)

	for n, chance := range map[int]float64{5: 0.41283398240555309, 22: 0.91429827967902009} {
		for _, r := range []FindRequest{{Bad: none, BadCount: 20}, {Bad: 0.1}} {
			r.Of, r.Confidence, r.N = 200, 0.9, n
			f, err := ToFind(r)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "finds", f.Finds, chance, 1e-12)
			same(t, "bad", f.BadCount, 20)
			same(t, "needed", f.Needed, 21)
		}
	}
	// A share is rounded up to whole parts: 5 % of 30 are 2.
	f, _ = ToFind(FindRequest{Bad: 0.05, Of: 30, Confidence: 0.9})
	same(t, "5 % of 30", f.BadCount, 2)
	same(t, "finds one of 2 in 30", f.Needed, stats.ZeroFailureSizeOfLot(2, 30, 0.9))
	// What remains possible is told for the confidence asked for and the usual ones.
	f, _ = ToFind(FindRequest{Bad: none, N: 22, Of: 200, Found: 1, Confidence: 0.8})
	same(t, "confidences", len(f.Possible), 4)
	same(t, "at 0.95", f.Possible[2].Count, 38)

	refused(t, "find", map[string]FindRequest{
		"risk": {Bad: none, Confidence: 1}, "bad": {Bad: none, BadCount: 30, Of: 20, Confidence: 0.9}, "n": {Bad: none, N: 201, Of: 200, Confidence: 0.9},
		"found": {Bad: none, N: 3, Found: 4, Confidence: 0.9},
	}, func(r FindRequest) error { _, err := ToFind(r); return err })
}

func refused[R any](t *testing.T, kind string, list map[string]R, ask func(R) error) {
	t.Helper()
	for input, r := range list {
		var bad *Invalid
		if err := ask(r); !errors.As(err, &bad) || bad.Input != input || bad.Hint == "" {
			t.Errorf("%s with a wrong %s: %v", kind, input, err)
		}
	}
}

// 50 mV at 80 mV and 80 %: 42 of either lot by plain means (SciPy 1.10.1: the
// least n with nct.sf(c, 2n-2, d) + nct.cdf(-c, 2n-2, d) >= 0.8, d = 50/80
// sqrt(n/2), c = t.isf(0.025, 2n-2)); trimmed means need about 1.145 times as many.
func TestShift(t *testing.T) {
	s, err := ToSee(ShiftRequest{Shift: 0.05, SD: 0.08, Risk: 0.2, Confidence: 0.95})
	if err != nil {
		t.Fatal(err)
	}
	same(t, "by plain means", s.NeededT, 42)
	if p := stats.WelchPower(s.NeededT, s.NeededT, 0.05, 0.08, 0.08, 0.05, true); p < 0.8 || stats.WelchPower(s.NeededT-1, s.NeededT-1, 0.05, 0.08, 0.08, 0.05, true) >= 0.8 {
		t.Errorf("%d by plain means: power %v", s.NeededT, p)
	}
	near(t, "price of trimming", float64(s.Needed)/float64(s.NeededT), 1.145, 0.03)
	back, err := ToSee(ShiftRequest{Shift: 0.05, SD: 0.08, Risk: 0.2, Confidence: 0.95, N: s.Needed})
	if err != nil || back.Power < 0.8 || back.Power > 0.82 {
		t.Errorf("power with the size needed: %+v, %v", back, err)
	}
	// The smallest shift seen 80 % of the time is near the one asked for.
	near(t, "smallest", back.Smallest[0].V, 0.05, 0.001)
	// A standard deviation from six devices may be much too small.
	lot := LotOf("six", []float64{3, 3.1, 2.95, 3.05, 3.2, 2.9})
	l, err := ToSee(ShiftRequest{Shift: 0.1, SD: lot.SD, Risk: 0.2, Confidence: 0.95, Lot: lot})
	if err != nil || l.SDHigh < 1.5*lot.SD || l.NeededHigh < 2*l.Needed {
		t.Errorf("sd of six: %+v, %v", l, err)
	}
	far, err := ToSee(ShiftRequest{Shift: 1e-9, SD: 0.08, Risk: 0.2, Confidence: 0.95})
	if err != nil || !far.TooMany {
		t.Errorf("a nanovolt: %+v, %v", far, err)
	}
	refused(t, "shift", map[string]ShiftRequest{
		"shift": {Shift: -0.05, SD: 0.08, Risk: 0.2, Confidence: 0.95}, "sd": {Shift: 0.05, SD: none, Risk: 0.2, Confidence: 0.95},
		"risk": {Shift: 0.05, SD: 0.08, Risk: 0.96, Confidence: 0.95}, "n": {Shift: 0.05, SD: 0.08, Risk: 0.2, Confidence: 0.95, N: 2},
	}, func(r ShiftRequest) error { _, err := ToSee(r); return err })
}

func TestSame(t *testing.T) {
	s, err := ToShowSame(SameRequest{Margin: 0.05, SD: 0.08, Shift: none, Risk: 0.2})
	if err != nil {
		t.Fatal(err)
	}
	if !s.Hopeless || s.Few != 6 || s.Chance > 0.01 || s.ChanceT > 0.005 {
		t.Errorf("six of either: %+v", s)
	}
	// By plain means, simulated: 24 % with 20, 55 % with 30 (rounded).
	for n, chance := range map[int]float64{20: 0.24, 30: 0.55} {
		s, err := ToShowSame(SameRequest{Margin: 0.05, SD: 0.08, Shift: none, Risk: 0.2, N: n})
		if err != nil {
			t.Fatal(err)
		}
		near(t, "plain means", s.ChanceT, chance, 0.006)
		if s.Hopeless || s.Chance >= s.ChanceT {
			t.Errorf("%d of either: %+v", n, s)
		}
	}
	back, err := ToShowSame(SameRequest{Margin: 0.05, SD: 0.08, Risk: 0.2, N: s.Needed})
	if err != nil || back.Chance < 0.8 || back.Chance > 0.82 {
		t.Errorf("chance with the size needed: %+v, %v", back, err)
	}
	near(t, "smallest", back.Smallest[0].V, 0.05, 0.001)
	off, err := ToShowSame(SameRequest{Margin: 0.05, SD: 0.08, Shift: 0.02, Risk: 0.2})
	if err != nil || off.Needed <= s.Needed {
		t.Errorf("with a true shift: %+v, %v", off, err)
	}
	refused(t, "same", map[string]SameRequest{
		"margin": {Margin: 0, SD: 0.08, Risk: 0.2}, "sd": {Margin: 0.05, SD: -1, Risk: 0.2}, "risk": {Margin: 0.05, SD: 0.08, Risk: 0}, "shift": {Margin: 0.05, SD: 0.08, Risk: 0.2, Shift: 0.05},
	}, func(r SameRequest) error { _, err := ToShowSame(r); return err })
}

func TestCover(t *testing.T) {
	c, err := ToCover(CoverRequest{Share: 0.95, Confidence: 0.95})
	if err != nil {
		t.Fatal(err)
	}
	same(t, "two limits", c.FreeBoth, 93) // e-Handbook 7.2.6.4 and Wilks
	same(t, "one limit", c.FreeOne, 59)
	n, err := ToCover(CoverRequest{Share: 0.95, Confidence: 0.95, N: 92})
	if err != nil || n.BlocksBoth != 1 || !(n.ShareBoth < 0.95 && n.ShareBoth > 0.949) {
		t.Errorf("92: %+v, %v", n, err)
	}
	var x []float64
	for i := range 100 {
		x = append(x, 3+0.1*stats.NormalQuantile((float64(i)+0.5)/100))
	}
	l, err := ToCover(CoverRequest{Share: 0.95, Confidence: 0.95, Lot: LotOf("a", x), N: 100})
	if err != nil || len(l.Intervals) != 2 || l.Normality.Doubts {
		t.Fatalf("of a lot: %+v, %v", l, err)
	}
	near(t, "low", l.Intervals[0].Low, l.Lot.Mean-2.233882023044248*l.Lot.SD, 1e-9) // k of the published grid
	if l.Intervals[1].Low != x[0] || l.Intervals[1].High != x[99] {
		t.Errorf("between values: %+v", l.Intervals[1])
	}
	two := LotOf("two", x)
	two.Mixed = true
	l, err = ToCover(CoverRequest{Share: 0.95, Confidence: 0.95, Lot: two, N: 100})
	if err != nil || len(l.Intervals) != 1 || !l.Intervals[0].Free || l.Declined == "" {
		t.Errorf("of two populations: %+v, %v", l, err)
	}
	refused(t, "cover", map[string]CoverRequest{"share": {Share: 1, Confidence: 0.9}, "n": {Share: 0.9, Confidence: 0.9, N: 1}, "confidence": {Share: 0.9}},
		func(r CoverRequest) error { _, err := ToCover(r); return err })
}

func TestCapability(t *testing.T) {
	c, err := ToBeCapable(CapabilityRequest{Target: 1.33, Expected: 1.67, Confidence: 0.95, Low: none, High: none})
	if err != nil {
		t.Fatal(err)
	}
	same(t, "needed", c.Needed, stats.CpkSize(1.67, 1.33, 0.95))
	few, err := ToBeCapable(CapabilityRequest{Target: 1, Expected: 1.33, Confidence: 0.95, N: 10, Low: none, High: none})
	if err != nil || !few.TooFew {
		t.Errorf("ten: %+v, %v", few, err)
	}
	near(t, "1.33 with ten", few.Bound, 0.7773139245025238, 1e-9) // as in stats.TestCapabilityBounds
	// Expected far above the target: never fewer than are stated at all.
	c, _ = ToBeCapable(CapabilityRequest{Target: 1, Expected: 5, Confidence: 0.95, Low: none, High: none})
	same(t, "fewest", c.Needed, FewestCapable)
	var x []float64
	for i := range 60 {
		x = append(x, 3+0.1*stats.NormalQuantile((float64(i)+0.5)/60))
	}
	l, err := ToBeCapable(CapabilityRequest{Target: 1.33, Expected: none, Confidence: 0.95, N: 60, Lot: LotOf("a", x), Low: 2, High: 4})
	if err != nil || !l.Proven || l.BoundOf >= l.Index.Cpk {
		t.Errorf("of a lot: %+v, %v", l, err)
	}
	l, _ = ToBeCapable(CapabilityRequest{Target: 1.33, Expected: none, Confidence: 0.95, N: 24, Lot: LotOf("a", x[:24]), Low: 2, High: 4})
	if !l.TooFew || l.Proven || l.Declined == "" || !math.IsNaN(l.Index.Cpk) {
		t.Errorf("of 24: %+v", l)
	}
	two := LotOf("two", x)
	two.Mixed = true
	l, _ = ToBeCapable(CapabilityRequest{Target: 1.33, Expected: none, Confidence: 0.95, N: 60, Lot: two, Low: 2, High: 4})
	if l.Declined == "" || !math.IsNaN(l.BoundOf) || l.Proven {
		t.Errorf("of two populations: %+v", l)
	}
	refused(t, "capability", map[string]CapabilityRequest{
		"ppk": {Target: 0, Expected: none, Confidence: 0.95, Low: none, High: none}, "expect": {Target: 1.33, Expected: 1.33, Confidence: 0.95, Low: none, High: none},
		"limit-low": {Target: 1.33, Expected: none, Confidence: 0.95, Low: 4, High: 2},
	}, func(r CapabilityRequest) error { _, err := ToBeCapable(r); return err })
}

func TestAccept(t *testing.T) {
	// The points of stats.TestVariablesPlan: 26 parts with known sigma, 49 without.
	r := AcceptRequest{Good: 0.05, GoodRisk: 0.05, Bad: 0.15, Risk: 0.075, KnownSigma: none, K: none, Low: none, High: none}
	a, err := ToAccept(r)
	if err != nil {
		t.Fatal(err)
	}
	same(t, "parts", a.Plan.N, 49)
	near(t, "k, as written down", a.Plan.K, 1.326, 1e-12)
	if a.AtGood < 0.95 || a.AtBad > 0.075 {
		t.Errorf("risks: %v, %v", a.AtGood, a.AtBad)
	}
	same(t, "counting", a.CountN, 80)
	r.KnownSigma = 0.1
	a, _ = ToAccept(r)
	same(t, "parts with known sigma", a.Plan.N, 26)
	for i := 1; i < len(a.Curve); i++ {
		if a.Curve[i].Bad <= a.Curve[i-1].Bad || a.Curve[i].Accepts > a.Curve[i-1].Accepts {
			t.Fatalf("the curve does not fall at %v", a.Curve[i])
		}
	}
	// A plan that is there already: a point of the published operating characteristic.
	a, err = ToAccept(AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, N: 30, K: 1.86, Low: none, High: none})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "n 30, k 1.86 at 1 %", a.AtGood, 0.9417209479911469, 1e-9)
	near(t, "n 30, k 1.86 at 5 %", a.AtBad, 0.25846642831921546, 1e-9)

	var x []float64
	for i := range 60 {
		x = append(x, 3+0.1*stats.NormalQuantile((float64(i)+0.5)/60))
	}
	lot := AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none, Lot: LotOf("a", x), Low: 2.7, High: 3.4}
	for _, c := range []struct {
		change func(*AcceptRequest)
		want   Decision
	}{
		{func(*AcceptRequest) {}, Accepted},
		{func(r *AcceptRequest) { r.Low = 2.85 }, NotAccepted},
		{func(r *AcceptRequest) { r.Low, r.High = none, none }, Undecided},
		{func(r *AcceptRequest) { r.Lot = LotOf("a", x[20:40]) }, Undecided}, // too few for the plan
		{func(r *AcceptRequest) { r.Lot, r.N = LotOf("a", x[20:40]), 20 }, Accepted},
		{func(r *AcceptRequest) {
			r.Lot = LotOf("two", append(append([]float64{}, x[:30]...), shifted(x[30:], 1)...))
		}, Undecided}, // not normal
	} {
		r := lot
		c.change(&r)
		a, err := ToAccept(r)
		if err != nil || a.Decision != c.want || (a.Decision == Undecided) != (a.Undecided != "") {
			t.Errorf("want %q: got %q (%s), %v", c.want, a.Decision, a.Undecided, err)
		}
	}
	r = lot
	r.KnownSigma = 0.03
	if a, _ := ToAccept(r); !a.SigmaDoubt {
		t.Error("a lot that spreads three times more than known raises no doubt")
	}
	base := lot
	refused(t, "accept", map[string]AcceptRequest{
		"good": {Good: none, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none}, "bad": {Good: 0.05, GoodRisk: 0.05, Bad: 0.01, Risk: 0.1, KnownSigma: none, K: none},
		"k": {Good: none, Bad: none, GoodRisk: 0.05, Risk: 0.1, KnownSigma: none, K: 1.8}, "n": {Good: 0.01, Bad: 0.05, GoodRisk: 0.05, Risk: 0.1, KnownSigma: none, K: none, N: 2},
		"sigma-known": {Good: 0.01, Bad: 0.05, GoodRisk: 0.05, Risk: 0.1, KnownSigma: -1, K: none}, "risk": {Good: 0.01, Bad: 0.05, GoodRisk: 0.6, Risk: 0.6, KnownSigma: none, K: none},
	}, func(r AcceptRequest) error { r.Low, r.High = base.Low, base.High; _, err := ToAccept(r); return err })
}

func shifted(x []float64, by float64) []float64 {
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = v + by
	}
	return out
}
