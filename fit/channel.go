package fit

import "math"

// The parameters of the transfer curve, in the order of their vectors. Gain
// factor and knee width are fitted as logarithms, for they are above zero.
const (
	parVt     = iota // V
	parBeta          // ln of β in A/V²
	parN             // ln of n
	parTheta         // 1/V
	parLambda        // 1/V
	parTop           // V, by which the supply is higher than stated
	parCount
)

// channel is the transfer model at one set of parameters, in the form in which it
// is evaluated: see [Model] for the equation. n-channel signs.
type channel struct {
	vt, half      float64 // V; β/2, A/V²
	a, inverse    float64 // 2 n kT/q and its inverse, V and 1/V
	theta, lambda float64 // 1/V
	foot          Foot
	knee          *kneeSeries // of the smooth and the sharp foot
}

func channelOf(p *[parCount]float64, foot Foot) channel {
	a := 2 * math.Exp(p[parN]) * thermalVoltage
	c := channel{vt: p[parVt], half: math.Exp(p[parBeta]) / 2, a: a, inverse: 1 / a, theta: p[parTheta], lambda: p[parLambda], foot: foot}
	switch foot {
	case SmoothFoot:
		c.knee = smoothKnee()
	case SharpFoot:
		c.knee = sharpKnee()
	}
	return c
}

// pinched is how far below the knee, and how much V_DS, in units of a, it takes for
// the square of the drain end to be nothing beside that of the source end to the last
// bit.
const pinched = 19

// rounded is the smooth or the sharp knee, a y(x/a), its slope, and its derivative by
// a.
func (c *channel) rounded(x float64) (s, g, da float64) {
	z := x * c.inverse
	switch {
	case z > far:
		return x, 1, 0
	case z < -far:
		return 0, 0, 0
	}
	y, g := c.knee.at(z)
	return c.a * y, g, y - z*g
}

// kinked is the knee that is exponential, (a/2) exp(x/a - 1/2), up to x = a/2 and
// then x itself, its slope, and its derivative by a.
func (c *channel) kinked(x float64) (s, g, da float64) {
	z := x * c.inverse
	if z >= 0.5 {
		return x, 1, 0
	}
	if z < -far {
		return 0, 0, 0
	}
	s = c.a / 2 * math.Exp(z-0.5)
	g = s * c.inverse
	return s, g, g * (1 - z)
}

// ends is what the channel feels at its source and its drain end, V: the current
// goes with the difference of their squares.
type ends struct {
	x, s, sx, sa  float64 // V_GS - V_T; source end; its derivatives by V_GS and a
	share         float64 // what mobility leaves, 1/(1 + θ s)
	d, dx, dv, da float64 // drain end; its derivatives by V_GS, -V_DS and a
}

// source evaluates the source end at V_GS.
func (c *channel) source(e *ends, vgs float64) {
	e.x = vgs - c.vt
	if c.foot == KinkedFoot {
		e.s, e.sx, e.sa = c.kinked(e.x)
	} else {
		e.s, e.sx, e.sa = c.rounded(e.x)
	}
	e.share = 1 / (1 + c.theta*e.s)
}

// drain evaluates the drain end at V_DS. With the kinked foot it is what a square
// law leaves: the source end less V_DS, or nothing.
func (c *channel) drain(e *ends, vds float64) {
	x := e.x - vds
	switch {
	case c.foot == KinkedFoot:
		if e.d = e.s - vds; e.d > 0 {
			e.dx, e.dv, e.da = e.sx, 1, e.sa
		} else {
			e.d, e.dx, e.dv, e.da = 0, 0, 0, 0
		}
		return
	case vds > pinched*c.a && x < -pinched*c.a:
		e.d, e.dx, e.da = 0, 0, 0
	default:
		e.d, e.dx, e.da = c.rounded(x)
	}
	e.dv = e.dx
}

// current is I_D [A] at the ends and V_DS [V], and its derivatives by V_GS and V_DS,
// S.
func (c *channel) current(e *ends, vds float64) (i, gm, gds float64) {
	l := 1 + c.lambda*vds
	q := e.s*e.s - e.d*e.d
	k := c.half * e.share
	i = k * l * q
	gm = k * l * (2*(e.s*e.sx-e.d*e.dx) - q*c.theta*e.share*e.sx)
	gds = k * (2*e.d*e.dv*l + c.lambda*q)
	return i, gm, gds
}

// partials writes the derivatives of current by every parameter times scale.
func (c *channel) partials(e *ends, vds, i, gm, gds, scale float64, dp *[parCount]float64) {
	k := c.half * e.share * scale
	kl := k * (1 + c.lambda*vds)
	q := e.s*e.s - e.d*e.d
	bend := q * c.theta * e.share
	dp[parVt] = -gm * scale
	dp[parBeta] = i * scale
	dp[parN] = kl * (2*(e.s*e.sa-e.d*e.da) - bend*e.sa) * c.a
	dp[parTheta] = -i * scale * e.s * e.share
	dp[parLambda] = k * q * vds
	dp[parTop] = gds * scale
}

// feed is how the drain is fed and where gate and source are read: I_D and V_GS of
// the device itself follow from the readings by solving the circuit.
type feed struct {
	tied   bool    // drain at the gate
	source float64 // ohm between the source and where gate and drain voltages end
	drain  float64 // ohm between the drain and the supply
}

// solve gives the current at which device and circuit agree, A, with gate at vg
// and supply at vtop, V:
//
//	I = I_D(vg - I R_source, vtop - I (R_source + R_drain))
//
// The right side falls as I rises, so there is one root, between 0 and the
// smaller of vtop over the resistance and the current without it. Newton's rule
// from start (any number), halving where a step leaves the bracket or is not half
// of the one before (the kink has a corner), until a step is below 1e-7 of the
// current or moves the channel's voltages by less than 1e-6 of the knee: the rule
// squares such shares, so the current is good to a relative 1e-11.
func (c *channel) solve(f feed, vg, vtop, start float64) float64 {
	var dp [parCount]float64
	i, _ := c.along(f, vg, vtop, start, &dp)
	return i
}

// along gives the current of solve, its slope by vg, S, and into dp its derivatives
// by every parameter. The derivatives are those before the last step.
func (c *channel) along(f feed, vg, vtop, start float64, dp *[parCount]float64) (i, slope float64) {
	r := f.source + f.drain
	var e ends
	if r == 0 {
		c.source(&e, vg)
		c.drain(&e, vtop)
		i, gm, gds := c.current(&e, vtop)
		c.partials(&e, vtop, i, gm, gds, 1, dp)
		if f.tied {
			gm += gds
		}
		return i, gm
	}
	lo, hi := 0.0, math.Max(vtop/r, 0)
	i = start
	if !(i >= lo && i < hi) {
		c.source(&e, vg)
		c.drain(&e, vtop)
		i, _, _ = c.current(&e, vtop)
		i = math.Min(i, hi)
	}
	before := math.Inf(1) // the step before
	for k := 1; ; k++ {
		if f.source > 0 || k == 1 {
			c.source(&e, vg-i*f.source)
		}
		vds := vtop - i*r
		c.drain(&e, vds)
		id, gm, gds := c.current(&e, vds)
		scale := 1 / (1 + f.source*gm + r*gds)
		if id < i {
			hi = i
		} else {
			lo = i
		}
		next := i - (i-id)*scale
		step := math.Abs(next - i)
		near := step <= 1e-7*next || step*r <= 1e-6*c.a
		if !near && (!(next >= lo && next <= hi) || step > before/2) {
			next = lo + (hi-lo)/2
			near = hi-lo <= 1e-11*hi
		}
		if near || next == i || k == 80 {
			c.partials(&e, vds, id, gm, gds, scale, dp)
			if f.tied {
				gm += gds
			}
			return next, gm * scale
		}
		i, before = next, math.Abs(next-i)
	}
}
