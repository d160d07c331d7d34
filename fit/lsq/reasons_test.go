package lsq

import (
	"math"
	"slices"
	"testing"
)

// decay is r = p0 exp(-p1 x) - y, not defined where p1 is below low.
func decay(x, y []float64, low float64) Problem {
	m := len(x)
	return Problem{M: m, N: 2, Eval: func(p, r, jac []float64) bool {
		if p[1] < low {
			return false
		}
		for i, v := range x {
			e := math.Exp(-p[1] * v)
			r[i] = p[0]*e - y[i]
			if jac != nil {
				jac[i], jac[m+i] = e, -p[0]*v*e
			}
		}
		return true
	}}
}

var (
	decayX = []float64{0, 1, 2, 3, 4, 5}
	decayY = []float64{3.1, 2.1, 1.3, 0.95, 0.6, 0.38} // invented
)

func TestBadInput(t *testing.T) {
	good := decay(decayX, decayY, math.Inf(-1))
	inf, nan := math.Inf(1), math.NaN()
	var s Solver
	for _, c := range []struct {
		what  string
		pr    Problem
		start []float64
		o     Options
		want  Reason
	}{
		{"nothing", Problem{}, nil, Options{}, BadInput},
		{"no parameters", Problem{M: 3, Eval: good.Eval}, nil, Options{}, BadInput},
		{"negative counts", Problem{M: -3, N: -2, Eval: good.Eval}, nil, Options{}, BadInput},
		{"no Eval", Problem{M: 6, N: 2}, []float64{1, 1}, Options{}, BadInput},
		{"short start", good, []float64{1}, Options{}, BadInput},
		{"long start", good, []float64{1, 1, 1}, Options{}, BadInput},
		{"no start", good, nil, Options{}, BadInput},
		{"NaN start", good, []float64{nan, 1}, Options{}, BadInput},
		{"infinite start", good, []float64{1, inf}, Options{}, BadInput},
		{"short bounds", Problem{M: 6, N: 2, Eval: good.Eval, Lower: []float64{0}}, []float64{1, 1}, Options{}, BadInput},
		{"crossed bounds", Problem{M: 6, N: 2, Eval: good.Eval, Lower: []float64{0, 2}, Upper: []float64{1, 1}}, []float64{1, 1}, Options{}, BadInput},
		{"NaN bound", Problem{M: 6, N: 2, Eval: good.Eval, Upper: []float64{nan, 1}}, []float64{1, 1}, Options{}, BadInput},
		{"bound out of reach", Problem{M: 6, N: 2, Eval: good.Eval, Lower: []float64{inf, 0}}, []float64{1, 1}, Options{}, BadInput},
		{"short step", good, []float64{1, 1}, Options{Step: []float64{1}}, BadInput},
		{"too few points", Problem{M: 1, N: 2, Eval: good.Eval}, []float64{1, 1}, Options{}, TooFewPoints},
		{"no points", Problem{M: 0, N: 2, Eval: good.Eval}, []float64{1, 1}, Options{}, TooFewPoints},
		{"NaN reading", decay(decayX, []float64{1, nan, 1, 1, 1, 1}, -inf), []float64{1, 1}, Options{}, NotDefined},
		{"infinite reading", decay(decayX, []float64{1, inf, 1, 1, 1, 1}, -inf), []float64{1, 1}, Options{}, NotDefined},
		{"not defined at the start", decay(decayX, decayY, 2), []float64{1, 1}, Options{}, NotDefined},
		{"overflow", good, []float64{1, -1e6}, Options{}, NotDefined},
		{"few calls", good, []float64{1, 1}, Options{MaxEvals: 3}, TooManyEvaluations},
	} {
		f := s.Solve(c.pr, c.start, c.o)
		if f.Reason != c.want || f.Reason.Converged() {
			t.Errorf("%s: %s, want %s", c.what, f.Reason, c.want)
		}
		// Whatever it holds can be asked without panic.
		for j := -1; j < 3; j++ {
			if v := f.Cov(j, j); c.want != TooManyEvaluations && !math.IsNaN(v) {
				t.Errorf("%s: variance %g", c.what, v)
			}
			f.Interval(j, 0.95, true)
			if lo, hi, why := s.Profile(c.pr, f, j, 0.95, c.o); !math.IsNaN(lo) || !math.IsNaN(hi) || why.Converged() {
				t.Errorf("%s: profile %g to %g, %s", c.what, lo, hi, why)
			}
		}
		f.Scale()
		if c.want == TooManyEvaluations && f.Evals > 4 {
			t.Errorf("%d calls, at most 3 and one more for derivatives were allowed", f.Evals)
		}
	}
}

// A model that is not defined below 0.3, with a start whose first steps lead
// there; the answer is that of the model without this limit.
func TestNotDefinedAside(t *testing.T) {
	var s Solver
	free := s.Solve(decay(decayX, decayY, math.Inf(-1)), []float64{3, 0.4}, Options{})
	refused := 0
	pr := decay(decayX, decayY, 0.3)
	inner := pr.Eval
	pr.Eval = func(p, r, jac []float64) bool {
		ok := inner(p, r, jac)
		if !ok {
			refused++
		}
		return ok
	}
	f := s.Solve(pr, []float64{3, 3}, Options{})
	if !f.Reason.Converged() || refused == 0 {
		t.Fatalf("%s, refused %d times", f.Reason, refused)
	}
	near(t, "p0", f.P[0], free.P[0], 1e-7)
	near(t, "p1", f.P[1], free.P[1], 1e-7)

	// Residuals that are not a number, and derivatives that are not, are refused too.
	for _, spoil := range []string{"r", "jac", "false with jac"} {
		pr.Eval = func(p, r, jac []float64) bool {
			ok := inner(p, r, jac)
			if !ok && spoil == "r" {
				r[2] = math.NaN()
				return true
			}
			if !ok && jac == nil { // the trial looks well, its derivatives do not
				return decay(decayX, decayY, math.Inf(-1)).Eval(p, r, nil)
			}
			if !ok && spoil == "jac" {
				jac[3] = math.Inf(1)
				return true
			}
			return ok
		}
		for _, both := range []bool{false, true} {
			f := s.Solve(pr, []float64{3, 3}, Options{JacobianWithTrial: both})
			if !f.Reason.Converged() {
				t.Errorf("%s spoilt: %s at %v", spoil, f.Reason, f.P)
			}
			near(t, "p1", f.P[1], free.P[1], 1e-7)
		}
	}
}

// Parameters that the readings do not tell apart: the minimum of S is found, but
// it is not called a fit, and no uncertainty is given.
func TestRankDeficient(t *testing.T) {
	m := len(decayX)
	a := make([]float64, 3*m)
	for i, v := range decayX {
		a[i], a[m+i], a[2*m+i] = 1, v, 2+3*v
	}
	line := straight(decayX, decayY, ones(m))
	var s Solver
	want := s.Solve(line, []float64{0, 0}, Options{})
	check := func(what string, f Fit, ssr float64) {
		t.Helper()
		if f.Reason != RankDeficient {
			t.Errorf("%s: %s, want %s", what, f.Reason, RankDeficient)
		}
		near(t, what+": S", f.SSR, ssr, 1e-9*ssr)
		for j := range f.N {
			if !math.IsNaN(f.SE(j, true)) || !finite(f.P[j]) {
				t.Errorf("%s: parameter %d = %g ± %g", what, j, f.P[j], f.SE(j, true))
			}
		}
	}
	check("a sum of two columns", s.Solve(matrix(a, decayY, 3), []float64{1, 1, 1}, Options{}), want.SSR)
	copy(a[2*m:], make([]float64, m))
	check("a column of zeros", s.Solve(matrix(a, decayY, 3), []float64{1, 1, 1}, Options{}), want.SSR)
	check("all zeros", s.Solve(matrix(make([]float64, m), decayY, 1), []float64{1}, Options{}), dot(decayY, decayY))
	// A parameter that only its bound tells: it is fixed there and the rest is a fit.
	copy(a[2*m:], a[m:2*m])
	pr := matrix(a, decayY, 3)
	pr.Lower, pr.Upper = []float64{-9, -9, 2}, []float64{9, 9, 2}
	f := s.Solve(pr, []float64{0, 0, 0}, Options{})
	if !f.Reason.Converged() {
		t.Errorf("with one held: %s", f.Reason)
	}
	near(t, "slope with one held", f.P[1], want.P[1]-2, 1e-12)
}

// Derivatives with the wrong sign lead nowhere: that must be said.
func TestStuck(t *testing.T) {
	pr := decay(decayX, decayY, math.Inf(-1))
	inner := pr.Eval
	pr.Eval = func(p, r, jac []float64) bool {
		ok := inner(p, r, jac)
		for i := range jac {
			jac[i] = -jac[i]
		}
		return ok
	}
	var s Solver
	if f := s.Solve(pr, []float64{1, 1}, Options{}); f.Reason != Stuck {
		t.Errorf("%s after %d calls, want %s", f.Reason, f.Evals, Stuck)
	}
}

// As many readings as parameters: the curve goes through them, and there are no
// degrees of freedom to judge it by.
func TestExact(t *testing.T) {
	var s Solver
	f := s.Solve(decay(decayX[:2], decayY[:2], math.Inf(-1)), []float64{1, 1}, Options{})
	if !f.Reason.Converged() || f.DOF() != 0 {
		t.Errorf("%s, %d degrees of freedom", f.Reason, f.DOF())
	}
	near(t, "p0", f.P[0], 3.1, 1e-13)
	near(t, "p1", f.P[1], math.Log(3.1/2.1), 1e-13)
	if lo, hi := f.Interval(0, 0.95, false); !math.IsNaN(lo) || !math.IsNaN(hi) || !math.IsNaN(f.Scale()) || !math.IsNaN(f.SE(0, true)) {
		t.Errorf("interval %g to %g, scale %g, scaled error %g without degrees of freedom", lo, hi, f.Scale(), f.SE(0, true))
	}
	if !(f.SE(0, false) > 0) {
		t.Errorf("unscaled error %g", f.SE(0, false))
	}
	// A minimum at zero, where no share of a parameter is short enough.
	x, y := []float64{1, 2, 3, 4}, []float64{0, 0, 0, 0}
	if f := s.Solve(straight(x, y, ones(4)), []float64{3, -1}, Options{}); f.Reason != ByExact || f.SSR != 0 {
		if !f.Reason.Converged() || f.SSR > 1e-28 {
			t.Errorf("zeros: %s, S = %g at %v", f.Reason, f.SSR, f.P)
		}
	}
}

// With a step that no longer matters given, the fit stops sooner and within it.
func TestStep(t *testing.T) {
	var s Solver
	pr := decay(decayX, decayY, math.Inf(-1))
	full := s.Solve(pr, []float64{1, 1}, Options{})
	f := s.Solve(pr, []float64{1, 1}, Options{Step: []float64{1e-3, 1e-3}})
	if f.Reason != ByStep || f.Evals >= full.Evals {
		t.Errorf("%s after %d calls; without the step %d", f.Reason, f.Evals, full.Evals)
	}
	for j := range f.P {
		near(t, "parameter", f.P[j], full.P[j], 2e-3)
	}
}

// Once a Solver has seen the size of a problem, a fit takes two pieces of memory,
// those of its result; and a later one leaves an earlier result alone.
func TestMemory(t *testing.T) {
	var s Solver
	pr := decay(decayX, decayY, math.Inf(-1))
	start := []float64{1, 1}
	f := s.Solve(pr, start, Options{})
	p, u := slices.Clone(f.P), f.SE(0, true)
	if n := testing.AllocsPerRun(50, func() { s.Solve(pr, start, Options{}) }); n > 2 {
		t.Errorf("%g allocations a fit, want 2", n)
	}
	s.Solve(decay(decayX, []float64{9, 7, 6, 5, 4, 3}, math.Inf(-1)), start, Options{})
	if !slices.Equal(f.P, p) || f.SE(0, true) != u || start[0] != 1 || start[1] != 1 {
		t.Errorf("result %v ± %g, before %v ± %g; start %v", f.P, f.SE(0, true), p, u, start)
	}
	// Larger and smaller problems through the same Solver.
	d := loadStrd(t, "nonlinear_gauss1")
	big := s.Solve(d.problem(nistModels["gauss1"]), d.Starts["start2"], Options{})
	again := s.Solve(pr, start, Options{})
	if fewest(big.P, d.Expected.P, 11) < 6 || !slices.Equal(again.P, p) {
		t.Errorf("after a change of size: %v and %v", big.P, again.P)
	}
}
