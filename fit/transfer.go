package fit

import (
	"math"

	"gatesill/fit/lsq"
)

// transfer lays the transfer model through points of one curve by weighted least
// squares: residual (model - i)/sigma, the circuit solved inside the model, so that
// a drain voltage is never made of a measured current. A parameter with a prior
// has one more residual, (p - mean)/sd.
type transfer struct {
	f                  feed
	foot               Foot
	vg, vtop, i, sigma []float64           // V, V, A, A; one element a point
	p                  [parCount]float64   // the last parameters evaluated, and the fixed ones
	free               []int               // parameters that are fitted
	mean, sd           [parCount]float64   // priors; sd 0: none
	solved             []float64           // A, the model's current at each point
	slope              []float64           // S, its slope by the gate
	tangent            [][parCount]float64 // its derivatives by the parameters
	last               [parCount]float64   // the free parameters that these three belong to
	warm               bool                // they do
	lower, upper, at   [parCount]float64   // scratch, by free parameter
	steps, params      [parCount]float64
	r, jac             []float64 // scratch: residuals and derivatives, see room
	solver             lsq.Solver
}

// bounds of the parameters: what no transistor and no knee goes beyond.
var parLower = [parCount]float64{math.Inf(-1), -20, -3, -0.5, -0.05, -1} // n from 0.05
var parUpper = [parCount]float64{math.Inf(1), 12, 3, 5, 0.5, 1}          // n to 20

// parSteps are steps of the parameters that no longer matter: a tenth of a microvolt,
// and what is as little of the others.
var parSteps = [parCount]float64{1e-7, 1e-6, 1e-4, 1e-5, 1e-5, 1e-4}

// size makes room for n points.
func (t *transfer) size(n int) {
	if cap(t.vg) < n {
		f := make([]float64, 6*(n+8))
		m := n + 8
		t.vg, t.vtop, t.i = f[:0:m], f[m:m:2*m], f[2*m:2*m:3*m]
		t.sigma, t.solved, t.slope = f[3*m:3*m:4*m], f[4*m:4*m:5*m], f[5*m:5*m]
		t.tangent = make([][parCount]float64, 0, m)
	}
	t.vg, t.vtop, t.i = t.vg[:n], t.vtop[:n], t.i[:n]
	t.sigma, t.solved, t.slope = t.sigma[:n], t.solved[:n], t.slope[:n]
	t.tangent, t.warm = t.tangent[:n], false
}

// eval is the problem as lsq sees it. Where the circuit is to be solved, that starts
// from what the derivatives at the last parameters lead to expect.
func (t *transfer) eval(x, r, jac []float64) bool {
	p := t.p
	var by [parCount]float64
	for k, par := range t.free {
		p[par] = x[k]
		by[k] = x[k] - t.last[k]
		t.last[k] = x[k]
	}
	c := channelOf(&p, t.foot)
	res := t.f.source + t.f.drain
	m := len(r)
	n := len(t.vg)
	for j := range n {
		vtop := t.vtop[j] + p[parTop]
		tangent := &t.tangent[j]
		guess := t.solved[j]
		if t.warm && res > 0 {
			to := guess
			for k, par := range t.free {
				to += tangent[par] * by[k]
			}
			if to > 0 && to*res < vtop {
				guess = to
			}
		}
		i, slope := c.along(t.f, t.vg[j], vtop, guess, tangent)
		w := 1 / t.sigma[j]
		t.solved[j], t.slope[j] = i, slope
		r[j] = (i - t.i[j]) * w
		if jac == nil {
			continue
		}
		for k, par := range t.free {
			jac[k*m+j] = tangent[par] * w
		}
	}
	t.warm = true
	row := n
	for k, par := range t.free {
		if !(t.sd[par] > 0) {
			continue
		}
		r[row] = (p[par] - t.mean[par]) / t.sd[par]
		if jac != nil {
			for j := range t.free {
				jac[j*m+row] = 0
			}
			jac[k*m+row] = 1 / t.sd[par]
		}
		row++
	}
	for j := range r {
		if math.IsNaN(r[j]) || math.IsInf(r[j], 0) {
			return false
		}
	}
	return true
}

// room makes scratch for m residuals and their derivatives by n parameters.
func (t *transfer) room(m, n int) {
	if cap(t.r) < m*(n+1) {
		t.r = make([]float64, (m+8)*(parCount+1))
	}
	t.r, t.jac = t.r[:m], t.r[m:m*(n+1)]
}

// rows is the number of residuals.
func (t *transfer) rows() int {
	m := len(t.vg)
	for _, k := range t.free {
		if t.sd[k] > 0 {
			m++
		}
	}
	return m
}

// fit finds the parameters from those in t.p, which it replaces. Residuals and
// derivatives share most of their work, so both are had at every trial.
func (t *transfer) fit(o lsq.Options) lsq.Fit {
	for j := range t.solved {
		t.solved[j] = t.i[j]
	}
	for j, k := range t.free {
		t.lower[j], t.upper[j], t.at[j], t.steps[j] = parLower[k], parUpper[k], t.p[k], parSteps[k]
	}
	t.warm = false
	n := len(t.free)
	o.Step = t.steps[:n]
	o.JacobianWithTrial = true
	got := t.solver.Solve(lsq.Problem{M: t.rows(), N: n, Eval: t.eval, Lower: t.lower[:n], Upper: t.upper[:n]}, t.at[:n], o)
	for j, k := range t.free {
		t.p[k] = got.P[j]
	}
	return got
}
