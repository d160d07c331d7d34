package lsq

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// scaled is the problem with parameter j in units 2^unit[j] times smaller and
// readings weighed 2^weight times more.
func (pr Problem) scaled(unit []int, weight int) Problem {
	q, p := pr, make([]float64, pr.N)
	q.Eval = func(v, r, jac []float64) bool {
		for j := range p {
			p[j] = math.Ldexp(v[j], -unit[j])
		}
		ok := pr.Eval(p, r, jac)
		for i := range r {
			r[i] = math.Ldexp(r[i], weight)
		}
		for i := range jac {
			jac[i] = math.Ldexp(jac[i], weight-unit[i/pr.M])
		}
		return ok
	}
	if pr.Lower != nil {
		q.Lower, q.Upper = slices.Clone(pr.Lower), slices.Clone(pr.Upper)
		for j := range p {
			q.Lower[j], q.Upper[j] = math.Ldexp(pr.Lower[j], unit[j]), math.Ldexp(pr.Upper[j], unit[j])
		}
	}
	return q
}

// Units do not matter: with parameters and readings in other units, by powers of
// two so that no digit is lost, a fit goes the same way to the same point, digit
// by digit.
func TestUnitsDoNotMatter(t *testing.T) {
	names := nistNames()
	sets := map[string]strd{}
	for _, n := range names {
		sets[n] = loadStrd(t, "nonlinear_"+n)
	}
	var s Solver
	rapid.Check(t, func(t *rapid.T) {
		name := rapid.SampledFrom(names).Draw(t, "set")
		d := sets[name]
		pr := d.problem(nistModels[name])
		start := slices.Clone(d.Starts["start2"])
		if rapid.Bool().Draw(t, "bounded") {
			pr.Lower, pr.Upper = make([]float64, pr.N), make([]float64, pr.N)
			for j, v := range d.Expected.P {
				w := math.Abs(v) * rapid.Float64Range(0.01, 2).Draw(t, "room")
				pr.Lower[j], pr.Upper[j] = math.Min(v, start[j])-w/2, v+w
			}
		}
		weight := rapid.IntRange(-30, 30).Draw(t, "weight")
		unit := rapid.SliceOfN(rapid.IntRange(-30, 30), pr.N, pr.N).Draw(t, "units")
		o := Options{MaxEvals: 300, JacobianWithTrial: rapid.Bool().Draw(t, "with trial")}
		f := s.Solve(pr, start, o)
		for j := range start {
			start[j] = math.Ldexp(start[j], unit[j])
		}
		g := s.Solve(pr.scaled(unit, weight), start, o)
		if f.Reason != g.Reason || f.Evals != g.Evals || math.Ldexp(f.SSR, 2*weight) != g.SSR {
			t.Fatalf("%s: %s after %d calls, S = %.17g; in other units %s after %d, %.17g",
				name, f.Reason, f.Evals, f.SSR, g.Reason, g.Evals, math.Ldexp(g.SSR, -2*weight))
		}
		for j := range f.P {
			if a, b := math.Ldexp(f.P[j], unit[j]), g.P[j]; a != b {
				t.Fatalf("%s: parameter %d is %.17g, in other units %.17g", name, j, a, b)
			}
			if a, b := math.Ldexp(f.SE(j, true), unit[j]), g.SE(j, true); a != b && !(math.IsNaN(a) && math.IsNaN(b)) {
				t.Fatalf("%s: its error is %.17g, in other units %.17g", name, a, b)
			}
		}
	})
}

// hostile is a problem of drawn size and kind, with cliffs, flat stretches, holes
// and readings that are not numbers.
func hostile(r *rand.Rand) (Problem, []float64, Options) {
	m, n := r.IntN(12), r.IntN(5)
	y, start := make([]float64, m), make([]float64, n)
	size := math.Pow(10, float64(r.IntN(13)-6))
	for i := range y {
		y[i] = size * r.NormFloat64()
	}
	for j := range start {
		start[j] = r.NormFloat64() * math.Pow(10, float64(r.IntN(9)-4))
	}
	special := []float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, math.MaxFloat64, 1e-300}
	if m > 0 && r.IntN(6) == 0 {
		y[r.IntN(m)] = special[r.IntN(len(special))]
	}
	if n > 0 && r.IntN(12) == 0 {
		start[r.IntN(n)] = special[r.IntN(len(special))]
	}
	kind, hole := r.IntN(6), r.IntN(3) == 0
	pr := Problem{M: m, N: n, Eval: func(p, r, jac []float64) bool {
		for i := range m {
			x := float64(i) / 3
			r[i] = -y[i]
			for j, v := range p {
				var f, d float64
				switch (kind + j) % 6 {
				case 0:
					f, d = v*math.Pow(x, float64(j)), math.Pow(x, float64(j))
				case 1:
					f, d = math.Exp(v*x), x*math.Exp(v*x)
				case 2:
					f, d = math.Log(v+x), 1/(v+x)
				case 3:
					f, d = math.Atan(1e6*v), 1e6/(1+1e12*v*v)
				case 4:
					f, d = 1/(v-x), -1/((v-x)*(v-x))
				case 5:
					f, d = math.Abs(v), math.Copysign(1, v)
				}
				r[i] += f
				if jac != nil {
					jac[j*m+i] = d
				}
			}
		}
		return !hole || len(p) == 0 || !(p[0] > 0.1 && p[0] < 0.3)
	}}
	if r.IntN(2) == 0 {
		pr.Lower, pr.Upper = make([]float64, n), make([]float64, n)
		for j := range n {
			pr.Lower[j] = r.NormFloat64()
			pr.Upper[j] = pr.Lower[j] + float64(r.IntN(4))*r.Float64()
		}
		if n > 0 && r.IntN(10) == 0 {
			pr.Lower[0] = special[r.IntN(len(special))]
		}
	}
	return pr, start, Options{MaxEvals: 1 + r.IntN(300), JacobianWithTrial: r.IntN(2) == 0}
}

// FuzzSolve looks for a panic, an endless run, a point outside the bounds, a sum
// of squares above that of the start, and a claim of a minimum that a gradient
// worked out afresh does not bear out.
func FuzzSolve(f *testing.F) {
	for seed := range uint64(300) {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, seed uint64) {
		pr, start, o := hostile(rand.New(rand.NewPCG(seed, 1)))
		var s Solver
		f := s.Solve(pr, start, o)
		if f.Reason == "" || f.Evals > o.MaxEvals+1 {
			t.Fatalf("reason %q after %d calls of at most %d", f.Reason, f.Evals, o.MaxEvals)
		}
		if f.Reason == BadInput || f.Reason == TooFewPoints || f.Reason == NotDefined {
			if f.Reason.Converged() || f.cov != nil {
				t.Fatalf("%s with a result", f.Reason)
			}
			return
		}
		for j, v := range f.P {
			if lo, hi := pr.bounds(j); !(v >= lo && v <= hi) {
				t.Fatalf("parameter %d is %g, bounds %g and %g", j, v, lo, hi)
			}
		}
		r, jac := make([]float64, pr.M), make([]float64, pr.M*pr.N)
		from := slices.Clone(start)
		pr.clamp(from)
		pr.Eval(from, r, nil)
		if before := dot(r, r); !(f.SSR <= before*(1+1e-9)) {
			t.Fatalf("S rose from %g to %g", before, f.SSR)
		}
		if !pr.Eval(f.P, r, jac) || dot(r, r) != f.SSR {
			t.Fatalf("S is %g, given as %g", dot(r, r), f.SSR)
		}
		if f.Reason == ByCosine {
			for j := range f.P {
				col := jac[j*pr.M : (j+1)*pr.M]
				lo, hi := pr.bounds(j)
				slope := dot(col, r) / math.Sqrt(dot(col, col)*f.SSR)
				if f.P[j] <= lo && slope > 0 || f.P[j] >= hi && slope < 0 || lo == hi {
					continue
				}
				if math.Abs(slope) > 1.1*defaultCosine {
					t.Fatalf("%s, but the cosine with column %d is %.3g", f.Reason, j, slope)
				}
			}
		}
		for j := range f.P {
			if lo, hi, why := s.Profile(pr, f, j, 0.9, o); why == "" || lo > hi {
				t.Fatalf("profile %g to %g, reason %q", lo, hi, why)
			}
		}
	})
}
