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
