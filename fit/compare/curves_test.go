package compare

import (
	"math"
	"slices"
	"strings"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// withCurves gives every device of a lot square-law curves from its gate bias, with
// a gain factor that goes with the place of the device.
func withCurves(l Lot, beta float64, from, to float64) Lot {
	for i := range l.Members {
		r := &l.Members[i].Result
		b := beta * (1 + 0.02*math.Sin(7*float64(i)))
		vt := r.VgsIdle.Value - math.Sqrt(2*0.25/b)
		r.Beta = fit.Quantity{Value: b, U: 0.01, UBetween: 0.01, UAbsolute: 0.01, N: 9}
		r.Vgsth = fit.Quantity{Value: vt + math.Sqrt(2*1e-3/b), U: 1e-5, UBetween: 1e-4, UAbsolute: 1e-3, N: 9}
		r.Method = "sqrt"
		for _, at := range fit.LevelCurrents {
			if at >= from && at <= to {
				r.Levels = append(r.Levels, fit.Level{I: at, Vg: vt + math.Sqrt(2*at/b), U: 1e-5})
			}
		}
	}
	return l
}

func curveLots(betaA, betaB, shift float64) (a, b Lot) {
	return withCurves(lotOf("A", spreadOut(20, 3, 0.03)...), betaA, 1e-3, 1),
		withCurves(lotOf("B", spreadOut(20, 3+shift, 0.03)...), betaB, 1e-3, 1)
}

// One shift at all currents, and one that changes.
func TestBand(t *testing.T) {
	a, b := curveLots(4, 4, 0.1)
	c := compareLots(t, a, b, plain())
	if c.Curves == nil || len(c.Curves.Points) != 10 || !c.Curves.Differs || !strings.Contains(c.Curves.Text, "parallel") {
		t.Fatalf("%+v", c.Curves)
	}
	t.Log(c.Curves.Text)
	single, most := stats.UpperT(0.025, c.DF), stats.UpperT(0.025/10, c.DF)
	if !(c.Curves.Critical > single*0.99 && c.Curves.Critical < most) {
		t.Errorf("critical value %v, single %v, Bonferroni %v", c.Curves.Critical, single, most)
	}
	for _, p := range c.Curves.Points {
		near(t, amps(p.I), p.Shift, 0.1, 0.002)
		if p.Reference != 20 || p.Candidate != 20 || !(p.Low < p.Shift && p.High > p.Shift) {
			t.Errorf("%+v", p)
		}
	}
	// The same again is the same to the last digit.
	d := compareLots(t, a, b, plain())
	if !slices.Equal(c.Curves.Points, d.Curves.Points) {
		t.Error("another band from the same curves")
	}
	// Less gain needs more gate voltage the more the current.
	a, b = curveLots(4, 2, 0.1)
	c = compareLots(t, a, b, plain())
	if !strings.Contains(c.Curves.Text, "it changes with the current, by +") {
		t.Error(c.Curves.Text)
	}
	t.Log(c.Curves.Text)
	a, b = curveLots(4, 4, 0)
	c = compareLots(t, a, b, plain())
	if c.Curves.Differs || !strings.Contains(c.Curves.Text, "no difference of the curves is seen") {
		t.Error(c.Curves.Text)
	}
	t.Log(c.Curves.Text)
}

// The common error widens the band as it does the primary interval.
func TestBandHoldsTheCommonError(t *testing.T) {
	a, b := curveLots(4, 4, 0.1)
	before := compareLots(t, a, b, plain()).Curves
	sit(&a, Sitting{"s", "m"}, 0.02, 0)
	sit(&b, Sitting{"t", "m"}, 0.02, 0)
	after := compareLots(t, a, b, plain()).Curves
	u := 0.02 * math.Sqrt2
	for i, p := range after.Points {
		q := before.Points[i]
		se := (q.High - q.Shift) / before.Critical
		near(t, "half width at "+amps(p.I), (p.High-p.Shift)/after.Critical, math.Hypot(se, u), 1e-9)
	}
}

// Curves that end early do not draw the mean: those with the highest thresholds here.
// Beyond a fifth the current is no longer compared.
func TestBandOfShortCurves(t *testing.T) {
	a, b := curveLots(4, 4, 0.1)
	whole := compareLots(t, a, b, plain()).Curves
	shorten := func(n int) {
		for i := 20 - n; i < 20; i++ {
			r := &b.Members[i].Result
			r.Levels = r.Levels[:5]
		}
	}
	shorten(4)
	c := compareLots(t, a, b, plain()).Curves
	if len(c.Points) != 10 || c.Points[9].Candidate != 16 {
		t.Fatalf("%+v", c.Points)
	}
	for i, p := range c.Points {
		near(t, amps(p.I), p.Shift, whole.Points[i].Shift, 0.002) // left out: 10 mV less
	}
	shorten(5)
	if c = compareLots(t, a, b, plain()).Curves; len(c.Points) != 5 {
		t.Errorf("%d currents", len(c.Points))
	}
	for i := range b.Members {
		b.Members[i].Result.Levels = nil
	}
	d := compareLots(t, a, b, plain())
	if d.Curves != nil || !has(&d, fit.CodeNTooSmall) {
		t.Error("curves compared that are not there")
	}
}

// The quantile of the greatest |T|: one current is Student's t; two that are one are
// too; independent ones are known in closed form.
func TestMaxT(t *testing.T) {
	one := [][]float64{{1}}
	near(t, "one", maxT(one, 11, 0.95), 2.20099, 1e-5) // R 4.2, from memory: qt(.975, 11)
	same := [][]float64{{1, 1, 1}, {1, 1, 1}, {1, 1, 1}}
	near(t, "three that are one", maxT(same, 11, 0.95), stats.UpperT(0.025, 11), 0.03)
	k := 5
	free := make([][]float64, k)
	for i := range free {
		free[i] = make([]float64, k)
		free[i][i] = 1
	}
	want := stats.NormalQuantile(0.5 + math.Pow(0.95, 1/float64(k))/2)
	near(t, "five independent normal ones", maxT(free, math.Inf(1), 0.95), want, 0.03)
}

// Gain at equal threshold, against the differences put in.
func TestGainAtEqualThreshold(t *testing.T) {
	a, b := curveLots(4, 3.6, 0.1)
	// Gain that falls with the threshold in both lots, 1 % for 10 mV: at equal threshold
	// the lot 100 mV higher has what it would have there.
	for _, l := range []*Lot{&a, &b} {
		for i := range l.Members {
			r := &l.Members[i].Result
			r.Beta.Value *= math.Exp(-(r.Vgsth.Value - 2.7))
		}
	}
	c := compareLots(t, a, b, plain())
	if c.Gain == nil || c.Gain.Key != fit.KeyBeta || !c.Gain.Adjusted {
		t.Fatalf("%+v", c.Gain)
	}
	near(t, "percent", c.Gain.Percent.Value, -10, 0.6)
	if !(c.Gain.Percent.Low < -10 && c.Gain.Percent.High > -10) {
		t.Errorf("%+v", c.Gain)
	}
	t.Log(c.Gain.Text)
	// Another method in one lot: the gain factor is not compared.
	for i := range b.Members {
		b.Members[i].Result.Method = "curve"
	}
	if c = compareLots(t, a, b, plain()); c.Gain != nil {
		t.Errorf("%+v", c.Gain)
	}
	for _, l := range []*Lot{&a, &b} {
		for i := range l.Members {
			l.Members[i].Result.GmIdle = fit.Quantity{Value: 1.4 + 0.01*math.Sin(float64(i))}
		}
	}
	if c = compareLots(t, a, b, plain()); c.Gain == nil || c.Gain.Key != fit.KeyGmIdle {
		t.Fatalf("%+v", c.Gain)
	}
	near(t, "equal gm", c.Gain.Percent.Value, 0, 1)
	few := b
	few.Members = few.Members[:3]
	if c = compareLots(t, a, few, plain()); c.Gain != nil {
		t.Errorf("three gains compared: %+v", c.Gain)
	}
}
