package lsq

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// On a linear problem the profile is the t interval.
func TestProfileLinear(t *testing.T) {
	var s Solver
	for _, name := range []string{"norris", "pontius", "noint1", "noint2", "longley"} {
		d := loadStrd(t, "linear_"+name)
		pr := d.linear()
		f := s.Solve(pr, make([]float64, pr.N), Options{})
		for j := range f.P {
			for _, level := range []float64{0.5, 0.95, 0.999} {
				lo, hi, why := s.Profile(pr, f, j, level, Options{})
				wantLo, wantHi := f.Interval(j, level, true)
				if why != ByProfile {
					t.Errorf("%s parameter %d: %s", name, j, why)
				}
				near(t, name+" low", lo, wantLo, 1e-6*(wantHi-wantLo))
				near(t, name+" high", hi, wantHi, 1e-6*(wantHi-wantLo))
			}
		}
	}
}

// One parameter: S - S_min = t² S_min/(M-1) written out. r_i = e^p - y_i with y
// = 1, 2, 3, 4, 10: S = S_min + 5 (e^p - 4)², so e^p = 4 ∓ t √(S_min/4/5). At 95 %
// t = 2.776 and the low end is where e^p = 4 - 4.39 < 0: open below, while the t
// interval says ln 4 - 1.10. At 80 % t = 1.533206 (scipy 1.10.1, t.ppf(0.9, 4)).
func TestProfileOneParameter(t *testing.T) {
	y := []float64{1, 2, 3, 4, 10}
	pr := Problem{M: 5, N: 1, Eval: func(p, r, jac []float64) bool {
		e := math.Exp(p[0])
		for i, v := range y {
			r[i] = e - v
		}
		for i := range jac {
			jac[i] = e
		}
		return true
	}}
	var s Solver
	f := s.Solve(pr, []float64{0}, Options{})
	near(t, "p", f.P[0], math.Log(4), 1e-7)
	h := math.Sqrt(50.0 / 4 / 5)
	lo, hi, why := s.Profile(pr, f, 0, 0.8, Options{})
	if why != ByProfile {
		t.Errorf("at 80 %%: %s", why)
	}
	near(t, "low at 80 %", lo, math.Log(4-1.5332062737131438*h), 1e-6)
	near(t, "high at 80 %", hi, math.Log(4+1.5332062737131438*h), 1e-6)
	lo, hi, why = s.Profile(pr, f, 0, 0.95, Options{})
	if why != ProfileOpen || !math.IsInf(lo, -1) {
		t.Errorf("at 95 %%: %s, low end %g", why, lo)
	}
	near(t, "high at 95 %", hi, math.Log(4+2.7764451051977987*h), 1e-6)
	// A level at which e^p is all but 0 at the low end: there √(S - S_min) hardly
	// changes any more, and the search must not creep.
	q := 3.999 / h
	level := 1 - 2*distuv.StudentsT{Mu: 0, Sigma: 1, Nu: 4}.Survival(q)
	lo, _, why = s.Profile(pr, f, 0, level, Options{})
	if why != ByProfile {
		t.Errorf("nearly open: %s", why)
	}
	near(t, "low when nearly open", lo, math.Log(0.001), 1e-3)
	// With a bound of the parameter on the way the interval ends there.
	pr.Lower = []float64{-1}
	f = s.Solve(pr, []float64{0}, Options{})
	lo, _, why = s.Profile(pr, f, 0, 0.95, Options{})
	if why != ProfileAtBound || lo != -1 {
		t.Errorf("bounded: %s, low end %g", why, lo)
	}
	// At the bound itself there is no profile.
	pr.Lower = []float64{2}
	f = s.Solve(pr, []float64{0}, Options{})
	if lo, hi, why := s.Profile(pr, f, 0, 0.95, Options{}); why != BadInput || !math.IsNaN(lo) || !math.IsNaN(hi) {
		t.Errorf("at the bound: %s, %g to %g", why, lo, hi)
	}
}

// Skewed profiles at 95 % on NIST sets, against an independent computation: Python
// 3.11.2, scipy 1.10.1, numpy 1.24.2. There each parameter was held at values
// further and further out in steps of a quarter of the t interval, the others
// fitted by scipy.optimize.least_squares(method='lm', xtol=ftol=gtol=3e-16)
// without derivatives, and √((S - S_min)/(S_min/(n-p))) - scipy.stats.t.ppf(0.975,
// n-p) brought to zero by scipy.optimize.brentq. Allowed: 1e-5 of the width; the
// reference has its derivatives by differences.
//
// On rat43 the t interval of b4 begins at -0.23, where the model is not defined.
func TestProfileSkewed(t *testing.T) {
	var s Solver
	for _, c := range []struct {
		name   string
		j      int
		lo, hi float64
	}{
		{"misra1a", 0, 233.19530796167012, 245.01736924320818},
		{"misra1a", 1, 0.0005343182679287645, 0.0005660298972763921},
		{"rat43", 0, 668.1015366446517, 739.4279948741668},
		{"rat43", 1, 0.44824244956905324, 12.4921671493814},
		{"rat43", 2, 0.45301817527414007, 1.4945719949585745},
		{"rat43", 3, 0.10775492803668339, 3.8436354875712104},
		{"mgh09", 0, 0.16353068220666162, 0.21590565933816816},
		{"mgh09", 1, -0.007746908826319309, 1.3196336870002168},
		{"mgh09", 2, -0.03472379753638105, 0.6267006219833577},
		{"mgh09", 3, 0.03042294217074326, 0.5477677100579693},
		{"boxbod", 0, 180.96700467352093, 258.5677771071614},
		{"boxbod", 1, 0.3025896226931002, 1.073053204951401},
	} {
		d := loadStrd(t, "nonlinear_"+c.name)
		pr := d.problem(nistModels[c.name])
		f := s.Solve(pr, d.Starts["start2"], Options{})
		lo, hi, why := s.Profile(pr, f, c.j, 0.95, Options{})
		if why != ByProfile {
			t.Errorf("%s b%d: %s", c.name, c.j+1, why)
		}
		near(t, c.name+" low", lo, c.lo, 1e-5*(c.hi-c.lo))
		near(t, c.name+" high", hi, c.hi, 1e-5*(c.hi-c.lo))
		tlo, thi := f.Interval(c.j, 0.95, true)
		t.Logf("%s b%d: %.6g to %.6g; t interval %.6g to %.6g", c.name, c.j+1, lo, hi, tlo, thi)
	}
}

// A profile that comes upon a lower minimum says so: r = (2(p²-1), (p-1)/2, 1) has
// its lowest minimum at p = 1 and another near -1, from where the level is chosen
// so that the first look is taken near 1. (A minimum that no look falls on stays
// unseen.)
func TestProfileLowerMinimum(t *testing.T) {
	pr := Problem{M: 3, N: 1, Eval: func(p, r, jac []float64) bool {
		r[0], r[1], r[2] = 2*(p[0]*p[0]-1), (p[0]-1)/2, 1
		if jac != nil {
			jac[0], jac[1], jac[2] = 4*p[0], 0.5, 0
		}
		return true
	}}
	var s Solver
	f := s.Solve(pr, []float64{-1.5}, Options{})
	if !f.Reason.Converged() || f.P[0] > -0.9 {
		t.Fatalf("%s at %v", f.Reason, f.P)
	}
	lo, hi, why := s.Profile(pr, f, 0, 0.985, Options{})
	if why != LowerMinimum || !(lo < f.P[0]) || !math.IsNaN(hi) {
		t.Errorf("%g to %g, %s", lo, hi, why)
	}
	// From the lowest one the same profile is a closed interval: it spans both.
	f = s.Solve(pr, []float64{1.5}, Options{})
	if lo, hi, why := s.Profile(pr, f, 0, 0.985, Options{}); why != ByProfile || !(lo < -0.9 && hi > 1) {
		t.Errorf("from the lowest: %g to %g, %s", lo, hi, why)
	}
}
