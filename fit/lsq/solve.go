package lsq

import "math"

// epsilon is the spacing of numbers at 1.
const epsilon = 0x1p-52

// Rules of the step length, for the gain: the fall of S as a share of the fall
// that the linearised problem expects. The thresholds are the usual ones of trust
// regions (common practice, no source). The factors were chosen among some on the
// NIST sets themselves: with shrink at 0.6 and grow at 2, 3, 4 or 5 every set is
// solved from both its starts; with shrink at 0.25 to 0.5 one hard start or two
// (MGH17, MGH10, Bennett5) are now and then not.
const (
	leastGain = 1e-4 // a step that brings less is taken back
	badGain   = 0.25
	goodGain  = 0.75
	shrink    = 0.6 // of the length after a bad or rejected step
	shrinkFar = 0.1 // after a step to where the model is not defined
	grow      = 3   // times the length of a good step
)

// run is the state of one fit.
type run struct {
	*Solver
	pr    Problem
	o     Options
	ssr   float64 // S at p
	part  float64 // greatest |p_j| ‖J_j‖: the size of the model's values, in the unit of the residuals
	noise float64 // change of S at p that says nothing
	mu    float64 // damping μ
	reach float64 // length ‖D δ‖ allowed to a step
	evals int
	iter  int
}

// Solve brings the sum of squares of pr down from start.
//
// Inputs: start, N values, not modified; values outside the bounds are first
// moved to the nearest bound. Result: see Fit, which shares no memory with the
// Solver; P is the best point reached even where Reason is not one of those
// that stand for a minimum. It never panics on NaN or on lengths that do not
// fit: see Reason.
//
// Checked: TestNISTNonlinear, TestNISTLinear, TestBounds.
func (s *Solver) Solve(pr Problem, start []float64, o Options) Fit {
	if why := pr.check(start, o); why != "" {
		return noFit(pr, start, why)
	}
	s.room(pr.M, pr.N)
	c := run{Solver: s, pr: pr, o: o.withDefaults()}
	copy(c.p, start)
	pr.clamp(c.p)
	why := c.begin()
	for why == "" {
		why = c.iterate()
	}
	return c.fit(why)
}

// begin evaluates the start.
func (c *run) begin() Reason {
	clear(c.d)
	c.free = c.free[:0]
	copy(c.next, c.p)
	ssr, ok := c.evaluate(true)
	if !ok || !c.norms() {
		c.ssr = math.NaN()
		return NotDefined
	}
	c.take(ssr)
	sum := 0.0
	for j, v := range c.p {
		sum += c.d[j] * v * c.d[j] * v
	}
	c.reach = math.Sqrt(sum)
	if c.reach == 0 {
		c.reach = math.Sqrt(c.ssr)
	}
	return c.minimum()
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
		return math.NaN(), false
	}
	ssr = dot(c.res, c.res)
	return ssr, finite(ssr)
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

// take makes the next point, whose residuals and derivatives are at hand, the
// present one.
func (c *run) take(ssr float64) {
	copy(c.p, c.next)
	c.ssr = ssr
	c.release()
	c.part = 0
	for _, j := range c.free {
		c.part = math.Max(c.part, math.Abs(c.p[j])*c.norm[j])
	}
	c.noise = c.o.RelReduction*ssr + 4*epsilon*c.part*math.Sqrt(ssr)
	c.factor(c.pr.M)
}

// minimum says why the present point is a minimum, or "".
func (c *run) minimum() Reason {
	root := math.Sqrt(c.ssr)
	switch {
	case c.ssr == 0 || root <= 4*epsilon*c.part:
		return ByExact
	case len(c.free) == 0 || c.cosine() <= c.o.Cosine:
		return ByCosine
	case c.undamped() && c.short(c.o.RelStep):
		return ByStep
	}
	return ""
}

// cosine is that of the angle between the residuals and the plane of the free
// columns of the Jacobian.
func (c *run) cosine() float64 { return math.Sqrt(dot(c.qtr, c.qtr) / c.ssr) }

// short says whether the undamped step is below that share of every free
// parameter, or below what the caller said no longer matters.
func (c *run) short(share float64) bool {
	for k, j := range c.free {
		step := math.Abs(c.gn[k])
		if !(step <= share*math.Abs(c.p[j]) || c.o.Step != nil && step <= c.o.Step[j]) {
			return false
		}
	}
	return true
}

// iterate tries steps until one is accepted. It gives "" or why to stop.
func (c *run) iterate() Reason {
	for {
		if c.evals >= c.o.MaxEvals {
			return TooManyEvaluations
		}
		if !c.damping() {
			return c.end()
		}
		expected, moved := c.trial()
		if !moved || !(expected > 0) {
			return c.end()
		}
		length := c.length(c.step)
		if c.iter == 0 {
			c.reach = math.Min(c.reach, length)
		}
		ssr, ok := c.evaluate(c.o.JacobianWithTrial)
		if !ok {
			c.reach = shrinkFar * math.Min(c.reach, length)
			continue
		}
		gain := (c.ssr - ssr) / expected
		tiny := expected <= c.noise
		if tiny && ssr-c.ssr <= c.noise {
			gain = 1 // S cannot tell; the angle will
		}
		if !(gain > leastGain) {
			if tiny {
				return c.end()
			}
			c.reach = shrink * math.Min(c.reach, length)
			continue
		}
		if !c.o.JacobianWithTrial {
			ssr, ok = c.evaluate(true)
		}
		if !ok || !c.norms() {
			c.reach = shrinkFar * math.Min(c.reach, length)
			continue
		}
		switch {
		case gain >= goodGain || c.mu <= singular && gain >= badGain:
			c.reach = grow * length
		case gain < badGain:
			c.reach = shrink * math.Min(c.reach, length)
		}
		c.iter++
		before := dot(c.qtr, c.qtr)
		c.take(ssr)
		if why := c.minimum(); why != "" {
			return why
		}
		if tiny && !(dot(c.qtr, c.qtr) < 0.9*before) {
			return c.end()
		}
		return ""
	}
}

// end names the state where S falls no further: a minimum in these digits when
// residuals and derivatives are nearly at right angles, or the undamped step is
// short; stuck otherwise. The limits are a hundred and ten thousand times wider
// than the defaults of Cosine and RelStep.
func (c *run) end() Reason {
	if c.cosine() <= 1e-6 || c.undamped() && c.short(1e-6) {
		return ByReduction
	}
	return Stuck
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
