package lsq

import "math"

// The damping, as shares of the scaled problem.
const (
	firstMu   = 1e-3
	leastMu   = 1e-30 // below it there is no damping
	greatMu   = 1e40  // above it no step is left
	leastGain = 1e-4  // a step must bring this share of what was expected
	goodGain  = 0.75
	badGain   = 0.25
)

// epsilon is the spacing of numbers at 1.
const epsilon = 0x1p-52

// Solver is the workspace of fits, kept from one to the next. The zero value is
// ready. It must not be used by two goroutines at once.
type Solver struct {
	p, next, d, gn, z, step, qtr, rhs, diag, u, norm []float64 // N each
	res, jac                                         []float64 // M, M*N
	r, top, low                                      []float64 // N*N
	free, sel                                        []int     // columns not held at a bound; those of them not stopped within a step
	hit                                              []bool
	ws                                               []float64 // what the above are cut from
}

// room makes the workspace fit m residuals and n parameters.
func (s *Solver) room(m, n int) {
	need := 11*n + 3*n*n + m + m*n
	if cap(s.ws) < need {
		s.ws = make([]float64, need+need/2)
	}
	w := s.ws[:cap(s.ws)]
	cut := func(k int) []float64 {
		c := w[:k:k]
		w = w[k:]
		return c
	}
	s.p, s.next, s.d, s.gn, s.z, s.step = cut(n), cut(n), cut(n), cut(n), cut(n), cut(n)
	s.qtr, s.rhs, s.diag, s.u, s.norm = cut(n), cut(n), cut(n), cut(n), cut(n)
	s.r, s.top, s.low = cut(n*n), cut(n*n), cut(n*n)
	s.res, s.jac = cut(m), cut(m*n)
	if cap(s.free) < n {
		s.free, s.sel, s.hit = make([]int, 0, n), make([]int, 0, n), make([]bool, n)
	}
	s.hit = s.hit[:n]
}

// run is the state of one fit.
type run struct {
	*Solver
	pr    Problem
	o     Options
	ssr   float64
	evals int
	iter  int
	mu    float64
}

// Solve brings the sum of squares of pr down from start (N values, not changed;
// values outside the bounds are first moved to the nearest bound).
//
// Result: see Fit; its P and covariance are its own. P is the best point reached
// even where Reason does not say converged. Warnings none; errors as Reason.
//
// Checked: TestNISTNonlinear, TestNISTLinear.
func (s *Solver) Solve(pr Problem, start []float64, o Options) Fit {
	if why := pr.check(start, o); why != "" {
		return noFit(pr, start, why)
	}
	s.room(pr.M, pr.N)
	c := run{Solver: s, pr: pr, o: o.withDefaults(), mu: firstMu}
	copy(c.p, start)
	pr.clamp(c.p)
	clear(c.d)
	why := c.begin()
	for why == "" {
		why = c.iterate()
	}
	return c.fit(why)
}

// begin evaluates the start.
func (c *run) begin() Reason {
	c.evals++
	if !c.pr.Eval(c.p, c.res, c.jac) {
		return c.undefined()
	}
	c.ssr = dot(c.res, c.res)
	if !finite(c.ssr) || !c.norms() {
		return c.undefined()
	}
	c.release()
	if len(c.free) > c.pr.M {
		return TooFewPoints
	}
	c.factor(c.pr.M)
	return c.minimum()
}

func (c *run) undefined() Reason {
	c.free = c.free[:0]
	c.ssr = math.NaN()
	return NotDefined
}

// norms finds the column norms of the Jacobian and their running maxima. False
// where one is not finite.
func (c *run) norms() bool {
	m := c.pr.M
	for j := range c.norm {
		col := c.jac[j*m : (j+1)*m]
		c.norm[j] = math.Sqrt(dot(col, col))
		if !finite(c.norm[j]) {
			return false
		}
	}
	for j, v := range c.norm {
		c.d[j] = math.Max(c.d[j], v)
	}
	return true
}

// release finds the free parameters: all but those at a bound that S would
// leave by, or with no room between their bounds.
func (c *run) release() {
	c.free = c.free[:0]
	m := c.pr.M
	for j, v := range c.p {
		lo, hi := c.pr.bounds(j)
		if v > lo && v < hi {
			c.free = append(c.free, j)
			continue
		}
		if lo == hi {
			continue
		}
		g := dot(c.jac[j*m:(j+1)*m], c.res)
		if !(v <= lo && g >= 0 || v >= hi && g <= 0) {
			c.free = append(c.free, j)
		}
	}
}

// minimum says whether the accepted point is one, or "".
func (c *run) minimum() Reason {
	if len(c.free) == 0 {
		return ByCosine
	}
	part := 0.0 // the greatest share of the residuals that any parameter accounts for
	for _, j := range c.free {
		part = math.Max(part, math.Abs(c.p[j])*c.norm[j])
	}
	switch {
	case math.Sqrt(c.ssr) <= 4*epsilon*part || c.ssr == 0:
		return ByExact
	case math.Sqrt(dot(c.qtr, c.qtr)) <= c.o.Cosine*math.Sqrt(c.ssr):
		return ByCosine
	case c.undamped() && c.short(c.o.RelStep, true):
		return ByStep
	}
	return ""
}

// short says whether the undamped step is below the share of every free
// parameter, or below what its owner said no longer matters.
func (c *run) short(share float64, own bool) bool {
	for k, j := range c.free {
		step := math.Abs(c.gn[k])
		if step <= share*math.Abs(c.p[j]) || own && c.o.Step != nil && step <= c.o.Step[j] {
			continue
		}
		return false
	}
	return true
}

// iterate tries steps until one is accepted. It gives "" or why to stop.
func (c *run) iterate() Reason {
	c.iter++
	for {
		if c.evals >= c.o.MaxEvals {
			return TooManyEvaluations
		}
		if c.mu > greatMu {
			return c.end()
		}
		expected, moved := c.trial()
		if !moved {
			return c.end()
		}
		tiny := expected <= c.o.RelReduction*c.ssr
		if !(expected > 0) {
			c.raise(4)
			continue
		}
		ssr, ok := c.evaluate(c.o.JacobianWithTrial)
		if !ok {
			c.raise(8)
			continue
		}
		gain := (c.ssr - ssr) / expected
		if tiny && ssr-c.ssr <= c.o.RelReduction*c.ssr {
			gain = 1 // S cannot tell; the undamped step will
		}
		if !(gain > leastGain) {
			if tiny {
				return c.end()
			}
			c.raise(4)
			continue
		}
		if !c.o.JacobianWithTrial {
			if ssr, ok = c.evaluate(true); !ok {
				c.raise(8)
				continue
			}
		}
		if !c.norms() {
			c.raise(8)
			continue
		}
		before := dot(c.qtr, c.qtr)
		copy(c.p, c.next)
		c.ssr = ssr
		switch {
		case gain > goodGain:
			c.mu /= 5
		case gain < badGain:
			c.mu *= 2
		}
		if c.mu < leastMu {
			c.mu = 0
		}
		c.release()
		c.factor(c.pr.M)
		if why := c.minimum(); why != "" {
			return why
		}
		if tiny && dot(c.qtr, c.qtr) > before/4 {
			return c.end()
		}
		return ""
	}
}

func (c *run) raise(by float64) {
	c.mu = math.Max(by*c.mu, 1e-20)
}

// evaluate evaluates the next point; false where the model is not defined.
func (c *run) evaluate(jac bool) (ssr float64, ok bool) {
	c.evals++
	if jac {
		ok = c.pr.Eval(c.next, c.res, c.jac)
	} else {
		ok = c.pr.Eval(c.next, c.res, nil)
	}
	if !ok {
		return 0, false
	}
	ssr = dot(c.res, c.res)
	return ssr, finite(ssr)
}

// end names the state where S falls no further: a minimum in these digits when
// the undamped step is short, stuck otherwise.
func (c *run) end() Reason {
	if dot(c.qtr, c.qtr) <= 1e-12*c.ssr || c.undamped() && c.short(1e-6, true) {
		return ByReduction
	}
	return Stuck
}

// trial makes the next point from the damped step, stopped at the bounds. It
// gives the reduction of S that the linearised problem expects, and false where
// no parameter moves.
func (c *run) trial() (expected float64, moved bool) {
	nf := len(c.free)
	step := c.step[:nf]
	clear(step)
	c.sel = c.sel[:0]
	for k := range nf {
		c.sel = append(c.sel, k)
		c.hit[k] = false
	}
	copy(c.next, c.p)
	for len(c.sel) > 0 {
		rhs := c.rhs[:nf]
		for i, v := range c.qtr {
			rhs[i] = -v
		}
		for k, h := range c.hit[:nf] {
			if h {
				add(-step[k], c.r[k*nf:k*nf+k+1], rhs[:k+1])
			}
		}
		if !c.damped(c.mu, rhs) {
			return 0, true // singular: more damping
		}
		if !c.advance(step) {
			break
		}
	}
	for k, j := range c.free {
		if !c.hit[k] {
			c.next[j] = c.p[j] + step[k]
		}
		moved = moved || c.next[j] != c.p[j]
	}
	// The expected reduction is -(Rδ)·(2 Qᵀr + Rδ).
	v := c.rhs[:nf]
	clear(v)
	for k := range nf {
		add(step[k], c.r[k*nf:k*nf+k+1], v[:k+1])
	}
	for i, x := range v {
		expected -= x * (2*c.qtr[i] + x)
	}
	return expected, moved
}

// advance goes from step towards the solution z of the columns sel, up to the
// first bound. True: a parameter was stopped there and the rest is to be solved
// again.
func (c *run) advance(step []float64) bool {
	share, at, bound := 1.0, -1, 0.0
	if c.pr.Lower != nil || c.pr.Upper != nil {
		for i, k := range c.sel {
			j := c.free[k]
			lo, hi := c.pr.bounds(j)
			b := hi
			if c.z[i] < step[k] {
				b = lo
			}
			room, way := b-c.p[j]-step[k], c.z[i]-step[k]
			if way != 0 && math.Abs(way)*share > math.Abs(room) {
				share, at, bound = math.Abs(room/way), i, b
			}
		}
	}
	for i, k := range c.sel {
		step[k] += share * (c.z[i] - step[k])
	}
	if at < 0 {
		for i, k := range c.sel {
			step[k] = c.z[i]
		}
		return false
	}
	k := c.sel[at]
	j := c.free[k]
	c.hit[k], c.next[j], step[k] = true, bound, bound-c.p[j]
	c.sel = append(c.sel[:at], c.sel[at+1:]...)
	return true
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
