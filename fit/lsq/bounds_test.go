package lsq

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// near fails unless got lies within tol of want.
func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.17g, want %.17g, off by %.3g, allowed %.3g", what, got, want, got-want, tol)
	}
}

// straight is y = p0 + p1 x with standard deviations sigma.
func straight(x, y, sigma []float64) Problem {
	m := len(x)
	a, v := make([]float64, 2*m), make([]float64, m)
	for i := range x {
		a[i], a[m+i], v[i] = 1/sigma[i], x[i]/sigma[i], y[i]/sigma[i]
	}
	return matrix(a, v, 2)
}

func ones(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = 1
	}
	return v
}

// A line with bounds (invented readings). Where the slope is held the intercept
// is mean(y) - slope mean(x), by hand; at a corner both are the bounds.
func TestBounds(t *testing.T) {
	x, y := []float64{1, 2, 3, 4, 5}, []float64{1.1, 1.9, 3.2, 3.8, 5.1} // slope 0.99, intercept 0.05
	inf := math.Inf(1)
	var s Solver
	for _, c := range []struct {
		what         string
		start        []float64
		lower, upper []float64
		want         []float64
		at           []bool
	}{
		{"none", []float64{9, -9}, nil, nil, []float64{0.05, 0.99}, []bool{false, false}},
		{"upper on the slope", []float64{0, 0}, nil, []float64{inf, 0.5}, []float64{3.02 - 0.5*3, 0.5}, []bool{false, true}},
		{"lower on the slope", []float64{0, 3}, []float64{-inf, 1.2}, nil, []float64{3.02 - 1.2*3, 1.2}, []bool{false, true}},
		{"lower on the intercept", []float64{2, 0}, []float64{1, -inf}, nil, []float64{1, (sum(x, y) - 15) / 55}, []bool{true, false}},
		{"a corner", []float64{1, 1}, []float64{0.5, 1.1}, []float64{inf, inf}, []float64{0.5, 1.1}, []bool{true, true}},
		{"start outside", []float64{100, -100}, []float64{-1, 0.5}, []float64{0.2, 2}, []float64{0.05, 0.99}, []bool{false, false}},
		{"start on bounds that it must leave", []float64{-1, 2}, []float64{-1, 0.5}, []float64{0.2, 2}, []float64{0.05, 0.99}, []bool{false, false}},
		{"held", []float64{7, 7}, []float64{-inf, 1.5}, []float64{inf, 1.5}, []float64{3.02 - 1.5*3, 1.5}, []bool{false, true}},
	} {
		pr := straight(x, y, ones(5))
		pr.Lower, pr.Upper = c.lower, c.upper
		f := s.Solve(pr, c.start, Options{})
		if !f.Reason.Converged() || !slices.Equal(f.AtBound, c.at) {
			t.Errorf("%s: %s, at bounds %v, want %v", c.what, f.Reason, f.AtBound, c.at)
		}
		for j, want := range c.want {
			near(t, c.what, f.P[j], want, 1e-12)
			if c.at[j] && (f.P[j] != want || !math.IsNaN(f.SE(j, true))) {
				t.Errorf("%s: parameter %d is %.17g ± %g, want %g itself without uncertainty", c.what, j, f.P[j], f.SE(j, true), want)
			}
		}
		free := 0
		for _, at := range c.at {
			if !at {
				free++
			}
		}
		if f.DOF() != 5-free {
			t.Errorf("%s: %d degrees of freedom, want %d", c.what, f.DOF(), 5-free)
		}
		if c.at[1] && !c.at[0] { // the mean alone is fitted
			near(t, c.what+": variance", f.Cov(0, 0), 1.0/5, 1e-15)
		}
	}
}

func sum(x, y []float64) float64 { return dot(x, y) }

// Random linear problems in random boxes (invented; seed 1). The right answer is
// found without any step rule: each of the 3^N choices of free parameters and
// parameters at either bound is solved by elimination of the normal equations,
// and that of least S within the box taken.
func TestBoundsAgainstAllChoices(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 0))
	var s Solver
	const n, m = 4, 9
	stopped := 0
	for range 400 {
		a, y := make([]float64, m*n), make([]float64, m)
		for i := range a {
			a[i] = r.NormFloat64()
		}
		for i := range m { // much alike columns make steps that bounds carry back
			a[m+i] = a[i] + 0.1*a[m+i]
			y[i] = 3 * r.NormFloat64()
		}
		pr := matrix(a, y, n)
		pr.Lower, pr.Upper = make([]float64, n), make([]float64, n)
		start := make([]float64, n)
		for j := range n {
			pr.Lower[j] = r.NormFloat64() - 0.5
			pr.Upper[j] = pr.Lower[j] + 2*r.Float64()
			start[j] = pr.Lower[j] + r.Float64()*(pr.Upper[j]-pr.Lower[j])
			if r.IntN(3) == 0 {
				start[j] = pr.Upper[j]
			}
		}
		f := s.Solve(pr, start, Options{})
		want := allChoices(a, y, pr.Lower, pr.Upper)
		if !f.Reason.Converged() || !(math.Abs(f.SSR-want) <= 1e-9*want) {
			t.Errorf("%s with S = %.15g, least %.15g", f.Reason, f.SSR, want)
		}
		if slices.Contains(f.AtBound, true) {
			stopped++
		}
	}
	t.Logf("%d of 400 ended at a bound", stopped)
	if stopped < 200 {
		t.Errorf("%d of 400 ended at a bound: this tests little", stopped)
	}
}

func allChoices(a, y, lower, upper []float64) float64 {
	n, m := len(lower), len(y)
	least := math.Inf(1)
	for code := range int(math.Pow(3, float64(n))) {
		p, free := make([]float64, n), []int{}
		for j, c := 0, code; j < n; j, c = j+1, c/3 {
			switch c % 3 {
			case 0:
				free = append(free, j)
			case 1:
				p[j] = lower[j]
			case 2:
				p[j] = upper[j]
			}
		}
		left := slices.Clone(y)
		for j, v := range p {
			add(-v, a[j*m:(j+1)*m], left)
		}
		k := len(free)
		g := make([][]float64, k) // normal equations with right-hand side
		for i, fi := range free {
			g[i] = make([]float64, k+1)
			for j, fj := range free {
				g[i][j] = dot(a[fi*m:(fi+1)*m], a[fj*m:(fj+1)*m])
			}
			g[i][k] = dot(a[fi*m:(fi+1)*m], left)
		}
		for i := range k {
			for e := range k {
				if e != i {
					add(-g[e][i]/g[i][i], slices.Clone(g[i]), g[e])
				}
			}
		}
		inside := true
		for i, fi := range free {
			p[fi] = g[i][k] / g[i][i]
			inside = inside && p[fi] >= lower[fi] && p[fi] <= upper[fi]
			add(-p[fi], a[fi*m:(fi+1)*m], left)
		}
		if inside {
			least = math.Min(least, dot(left, left))
		}
	}
	return least
}

// Bounds on the NIST set Misra1a. With b1 kept to at most 200 the minimum lies
// there: b2 must be that of the fit with b1 held at 200, and S must rise inwards.
func TestBoundsNonlinear(t *testing.T) {
	d := loadStrd(t, "nonlinear_misra1a")
	pr := d.problem(nistModels["misra1a"])
	var s Solver
	pr.Upper = []float64{200, math.Inf(1)}
	for _, start := range []string{"start1", "start2"} {
		f := s.Solve(pr, d.Starts[start], Options{})
		held := pr
		held.Lower = []float64{200, math.Inf(-1)}
		g := s.Solve(held, d.Starts[start], Options{})
		if !f.Reason.Converged() || !g.Reason.Converged() || f.P[0] != 200 || !f.AtBound[0] || f.AtBound[1] {
			t.Errorf("from %s: %s %v %v; held %s", start, f.Reason, f.P, f.AtBound, g.Reason)
		}
		near(t, "b2 from "+start, f.P[1], g.P[1], 1e-9*g.P[1])
		near(t, "its variance", f.Cov(1, 1), g.Cov(1, 1), 1e-6*g.Cov(1, 1))
		held.Lower, held.Upper = []float64{199, math.Inf(-1)}, []float64{199, math.Inf(1)}
		if in := s.Solve(held, d.Starts[start], Options{}); !(in.SSR > f.SSR) {
			t.Errorf("S is %.10g at 200 and %.10g at 199", f.SSR, in.SSR)
		}
	}
	// Bounds that are not reached change nothing.
	for _, name := range nistNames() {
		d := loadStrd(t, "nonlinear_"+name)
		pr := d.problem(nistModels[name])
		for _, v := range d.Expected.P {
			pr.Lower = append(pr.Lower, v-2*math.Abs(v))
			pr.Upper = append(pr.Upper, v+2*math.Abs(v))
		}
		f := s.Solve(pr, d.Starts["start2"], Options{})
		if p := fewest(f.P, d.Expected.P, 11); !f.Reason.Converged() || p < 6 {
			t.Errorf("%s in wide bounds: %s, %.1f digits", name, f.Reason, p)
		}
	}
}
