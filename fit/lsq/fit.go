package lsq

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Fit is where a fit ended.
type Fit struct {
	P          []float64 // parameters, N: the best point reached; the start, or NaN, where nothing was begun
	SSR        float64   // sum of the squared residuals there, dimensionless; NaN where the model is not defined
	M, N       int       // residuals, parameters
	Evals      int       // calls of Eval
	Iterations int       // steps accepted
	Reason     Reason
	// AtBound marks parameters that lie on one of their bounds. They are taken as
	// fixed there: they have no covariance, and count as no parameter in DOF.
	AtBound []bool
	cov     []float64 // N*N; nil where the Jacobian leaves a parameter open
}

// DOF is the number of residuals less that of the parameters not at a bound.
func (f *Fit) DOF() int {
	n := f.M - f.N
	for _, b := range f.AtBound {
		if b {
			n++
		}
	}
	return n
}

// Cov is element i, j of (JᵀJ)⁻¹ of the weighted problem over the parameters not
// at a bound: the covariance of the parameters when the standard deviations used
// as weights are true. Unit: that of parameter i times that of parameter j. NaN
// for a parameter at a bound, and for all where the readings do not tell the
// parameters apart or there is no fit. Where Reason is not one of a minimum it is
// that of the point reached, and worth no more than that point.
func (f *Fit) Cov(i, j int) float64 {
	if f.cov == nil || i < 0 || j < 0 || i >= f.N || j >= f.N {
		return math.NaN()
	}
	return f.cov[i*f.N+j]
}

// Scale is the reduced sum of squares S/(M - parameters): 1 on average when the
// weights are true. NaN without degrees of freedom.
func (f *Fit) Scale() float64 {
	if f.DOF() <= 0 {
		return math.NaN()
	}
	return f.SSR / float64(f.DOF())
}

// SE is the standard error of parameter j, in its unit: √Cov(j, j), with scaled
// times √Scale, that is with the size of σ taken from the scatter and not from
// the weights.
func (f *Fit) SE(j int, scaled bool) float64 {
	u := math.Sqrt(f.Cov(j, j))
	if scaled {
		u *= math.Sqrt(f.Scale())
	}
	return u
}

// Interval is P[j] ∓ t SE(j, scaled), t being Student's two-sided quantile for
// the level (0 to 1) and DOF degrees of freedom. It is exact for a model that is
// linear in its parameters; for a skewed one see Solver.Profile. NaN without
// degrees of freedom or for a parameter at a bound.
func (f *Fit) Interval(j int, level float64, scaled bool) (lo, hi float64) {
	if j < 0 || j >= f.N {
		return math.NaN(), math.NaN()
	}
	h := student(level, f.DOF()) * f.SE(j, scaled)
	return f.P[j] - h, f.P[j] + h
}

// student is the two-sided quantile of Student's t; NaN where there is none.
func student(level float64, dof int) float64 {
	if dof <= 0 || !(level > 0 && level < 1) {
		return math.NaN()
	}
	return -distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(dof)}.Quantile((1 - level) / 2)
}

// noFit is the answer to a problem that was not begun.
func noFit(pr Problem, start []float64, why Reason) Fit {
	n := max(pr.N, 0)
	f := Fit{SSR: math.NaN(), M: pr.M, N: n, Reason: why, P: make([]float64, n), AtBound: make([]bool, n)}
	for j := range f.P {
		f.P[j] = math.NaN()
	}
	copy(f.P, start)
	return f
}

// fit closes a run.
func (c *run) fit(why Reason) Fit {
	n := c.pr.N
	mem := make([]float64, n+n*n)
	f := Fit{P: mem[:n:n], SSR: c.ssr, M: c.pr.M, N: n, Evals: c.evals, Iterations: c.iter, Reason: why, AtBound: make([]bool, n)}
	copy(f.P, c.p)
	for j, v := range f.P {
		lo, hi := c.pr.bounds(j)
		f.AtBound[j] = v <= lo || v >= hi
	}
	if why == NotDefined || why == TooFewPoints {
		return f
	}
	if !c.invert() { // the readings do not tell the parameters apart
		if why.Converged() {
			f.Reason = RankDeficient
		}
		return f
	}
	f.cov = mem[n:]
	c.covariance(f.cov)
	for j, b := range f.AtBound {
		if !b {
			continue
		}
		for i := range n {
			f.cov[j*n+i], f.cov[i*n+j] = math.NaN(), math.NaN()
		}
	}
	return f
}

// covariance writes (JᵀJ)⁻¹ = R⁻¹R⁻ᵀ of the free parameters.
func (c *run) covariance(cov []float64) {
	n, nf := c.pr.N, len(c.free)
	for i := range cov {
		cov[i] = math.NaN()
	}
	for a, ja := range c.free {
		for b := a; b < nf; b++ {
			sum := 0.0
			for i := b; i < nf; i++ {
				sum += c.top[i*nf+a] * c.top[i*nf+b]
			}
			jb := c.free[b]
			cov[ja*n+jb], cov[jb*n+ja] = sum, sum
		}
	}
}
