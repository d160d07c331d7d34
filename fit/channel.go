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
}

func channelOf(p *[parCount]float64, foot Foot) channel {
	a := 2 * math.Exp(p[parN]) * thermalVoltage
	return channel{vt: p[parVt], half: math.Exp(p[parBeta]) / 2, a: a, inverse: 1 / a, theta: p[parTheta], lambda: p[parLambda], foot: foot}
}

// far is the argument of the knee, in units of a, beyond which it is straight (or
// nothing) to the last bit.
const far = 37

// smooth is the smooth knee a ln(1 + exp(x/a)), its slope, and its derivative by a.
func (c *channel) smooth(x float64) (s, g, da float64) {
	z := x * c.inverse
	switch {
	case z > far:
		return x, 1, 0
	case z < -far:
		return 0, 0, 0
	case z >= 0:
		e := math.Exp(-z)
		s, g = x+c.a*logOnePlus(e), 1/(1+e)
	default:
		e := math.Exp(z)
		s, g = c.a*logOnePlus(e), e/(1+e)
	}
	return s, g, (s - x*g) * c.inverse
}

// sharp is the knee a asinh(exp(x/a)/2), its slope, and its derivative by a.
func (c *channel) sharp(x float64) (s, g, da float64) {
	z := x * c.inverse
	switch {
	case z > far:
		return x, 1, 0
	case z < -far:
		return 0, 0, 0
	}
	e := math.Exp(z) / 2
	s, g = c.a*math.Asinh(e), e/math.Sqrt(1+e*e)
	return s, g, (s - x*g) * c.inverse
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

// logOnePlus is ln(1+e) for 0 <= e <= 1; by its series where e is small.
func logOnePlus(e float64) float64 {
	if e > 1e-3 {
		return math.Log1p(e)
	}
	return e * (1 - e*(0.5-e*(1.0/3-e*(0.25-e*0.2))))
}

// ends is what the channel feels at its source and its drain end, V: the current
// goes with the difference of their squares.
type ends struct {
	s, sx, sa     float64 // source end; its derivatives by V_GS and a
	d, dx, dv, da float64 // drain end; the same, and by -V_DS
}

// ends evaluates both at x = V_GS - V_T. With the kinked foot the drain end is what
// a square law leaves: the source end less V_DS, or nothing.
func (c *channel) ends(x, vds float64) (e ends) {
	switch c.foot {
	case SmoothFoot:
		e.s, e.sx, e.sa = c.smooth(x)
		e.d, e.dx, e.da = c.smooth(x - vds)
		e.dv = e.dx
	case SharpFoot:
		e.s, e.sx, e.sa = c.sharp(x)
		e.d, e.dx, e.da = c.sharp(x - vds)
		e.dv = e.dx
	default:
		e.s, e.sx, e.sa = c.kinked(x)
		if e.s > vds {
			e.d, e.dx, e.da, e.dv = e.s-vds, e.sx, e.sa, 1
		}
	}
	return e
}

// current is I_D [A] at V_GS and V_DS [V], and its derivatives by both, S.
func (c *channel) current(vgs, vds float64) (i, gm, gds float64) {
	e := c.ends(vgs-c.vt, vds)
	d := 1 / (1 + c.theta*e.s)
	l := 1 + c.lambda*vds
	q := e.s*e.s - e.d*e.d
	k := c.half * d
	i = k * q * l
	gm = k * l * (2*(e.s*e.sx-e.d*e.dx) - q*c.theta*e.sx*d)
	gds = k * (2*e.d*e.dv*l + c.lambda*q)
	return i, gm, gds
}

// partials adds to current the derivatives of I_D by every parameter, at fixed
// V_GS and V_DS.
func (c *channel) partials(vgs, vds float64, dp *[parCount]float64) (i, gm, gds float64) {
	e := c.ends(vgs-c.vt, vds)
	d := 1 / (1 + c.theta*e.s)
	l := 1 + c.lambda*vds
	q := e.s*e.s - e.d*e.d
	k := c.half * d
	i = k * q * l
	bend := q * c.theta * d
	gm = k * l * (2*(e.s*e.sx-e.d*e.dx) - bend*e.sx)
	gds = k * (2*e.d*e.dv*l + c.lambda*q)
	dp[parVt] = -gm
	dp[parBeta] = i
	dp[parN] = k * l * (2*(e.s*e.sa-e.d*e.da) - bend*e.sa) * c.a
	dp[parTheta] = -i * e.s * d
	dp[parLambda] = k * q * vds
	return i, gm, gds
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
// from start (any number), halving where a step leaves the bracket or is not half of the one before (the
// kink has a corner), to a relative
// 1e-11 (the last step is below 1e-7, and the rule doubles the digits).
func (c *channel) solve(f feed, vg, vtop, start float64) float64 {
	r := f.source + f.drain
	if r == 0 {
		i, _, _ := c.current(vg, vtop)
		return i
	}
	lo, hi := 0.0, math.Max(vtop/r, 0)
	i := start
	if !(i > lo && i < hi) {
		i, _, _ = c.current(vg, vtop)
		i = math.Min(i, hi)
	}
	before := math.Inf(1) // the step before
	for range 80 {
		id, gm, gds := c.current(vg-i*f.source, vtop-i*r)
		if miss := i - id; miss > 0 {
			hi = i
		} else {
			lo = i
		}
		next := i - (i-id)/(1+f.source*gm+r*gds)
		if !(next >= lo && next <= hi) || math.Abs(next-i) > before/2 && hi-lo < math.Inf(1) {
			next = lo + (hi-lo)/2
			if hi-lo <= 1e-11*hi {
				return next
			}
		} else if math.Abs(next-i) <= 1e-7*next {
			return next
		}
		if next == i {
			return i
		}
		i, before = next, math.Abs(next-i)
	}
	return i
}

// along gives the current of the circuit at vg, A, its slope by vg, S, and its
// derivatives by every parameter into dp. start is a guess of the current.
func (c *channel) along(f feed, vg, vtop, start float64, dp *[parCount]float64) (i, slope float64) {
	i = c.solve(f, vg, vtop, start)
	r := f.source + f.drain
	_, gm, gds := c.partials(vg-i*f.source, vtop-i*r, dp)
	slope = gm
	if f.tied {
		slope += gds
	}
	dp[parTop] = gds
	if r == 0 {
		return i, slope
	}
	scale := 1 / (1 + f.source*gm + r*gds)
	for k := range dp {
		dp[k] *= scale
	}
	return i, slope * scale
}
