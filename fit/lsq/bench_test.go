package lsq

import (
	"math"
	"testing"
	"time"
)

// cheap is a model whose evaluation costs little beside the fit: a polynomial of
// four degrees in x, and a quadratic term that makes it nonlinear.
func cheap(m int) (Problem, []float64) {
	x, y := make([]float64, m), make([]float64, m)
	for i := range x {
		x[i] = float64(i)/float64(m-1)*2 - 1
		y[i] = 1 + x[i]*(0.5+x[i]*(0.3+x[i]*(-0.2+0.1*x[i]))) + 0.01*math.Sin(40*x[i])
	}
	return Problem{M: m, N: 5, Eval: func(p, r, jac []float64) bool {
		for i, v := range x {
			r[i] = p[0]*p[0] + v*(p[1]+v*(p[2]+v*(p[3]+v*p[4]))) - y[i]
		}
		if jac == nil {
			return true
		}
		a, b, c, d, e := jac[:m], jac[m:2*m], jac[2*m:3*m], jac[3*m:4*m], jac[4*m:5*m]
		for i, v := range x {
			a[i], b[i], c[i], d[i], e[i] = 2*p[0], v, v*v, v*v*v, v*v*v*v
		}
		return true
	}}, []float64{3, 0, 0, 0, 0}
}

// BenchmarkIteration gives the time of one accepted step of 100 residuals and 5
// parameters, without that of the evaluations.
func BenchmarkIteration(b *testing.B) {
	pr, start := cheap(100)
	var s Solver
	f := s.Solve(pr, start, Options{})
	b.ReportAllocs()
	n := 0
	for b.Loop() {
		f = s.Solve(pr, start, Options{})
		n += f.Iterations
	}
	total := float64(b.Elapsed().Nanoseconds())
	b.ReportMetric(total/float64(n), "ns/iteration")
	p, r, jac := f.P, make([]float64, pr.M), make([]float64, pr.M*pr.N)
	const times = 20000
	from := time.Now()
	for range times {
		pr.Eval(p, r, nil)
		pr.Eval(p, r, jac)
	}
	b.ReportMetric(total/float64(n)-float64(time.Since(from).Nanoseconds())/times, "ns/iteration-without-eval")
	b.ReportMetric(float64(f.Iterations), "iterations/fit")
}

// knee is a curve whose derivatives share the exponentials of its values: 60
// residuals, 4 parameters.
func knee() (Problem, []float64) {
	const m = 60
	x, y := make([]float64, m), make([]float64, m)
	value := func(p []float64, x float64) (v, s, g float64) {
		z := (x - p[0]) / p[2]
		e := math.Exp(-math.Abs(z))
		s, g = p[2]*(math.Max(z, 0)+math.Log1p(e)), 1/(1+e)
		if z < 0 {
			g = 1 - g
		}
		return p[1] * s * s / (1 + p[3]*s), s, g
	}
	truth := []float64{3, 2, 0.06, 0.1}
	for i := range x {
		x[i] = 2.5 + 1.5*float64(i)/(m-1)
		v, _, _ := value(truth, x[i])
		y[i] = v * (1 + 0.003*math.Sin(50*x[i]))
	}
	return Problem{M: m, N: 4, Eval: func(p, r, jac []float64) bool {
		for i := range m {
			v, s, g := value(p, x[i])
			w := 1 / (1e-4 + 0.005*y[i])
			r[i] = (v - y[i]) * w
			if jac != nil {
				d := 1 + p[3]*s
				slope := w * p[1] * (2*s - p[3]*s*s/d) / d
				jac[i] = -slope * g
				jac[m+i] = w * v / p[1]
				jac[2*m+i] = slope * (s - (x[i]-p[0])*g) / p[2]
				jac[3*m+i] = -w * v * s / d
			}
		}
		return true
	}}, []float64{2.9, 1.5, 0.1, 0}
}

// BenchmarkKnee compares derivatives in a second call with derivatives at every
// trial.
func BenchmarkKnee(b *testing.B) {
	for name, o := range map[string]Options{
		"apart":              {},
		"together":           {JacobianWithTrial: true},
		"together, 1e-6 off": {JacobianWithTrial: true, Step: []float64{1e-6, 1e-6, 1e-6, 1e-6}},
	} {
		b.Run(name, func(b *testing.B) {
			pr, start := knee()
			var s Solver
			var f Fit
			for b.Loop() {
				f = s.Solve(pr, start, o)
			}
			if !f.Reason.Converged() {
				b.Fatal(f.Reason)
			}
			b.ReportMetric(float64(f.Evals), "calls/fit")
		})
	}
}
