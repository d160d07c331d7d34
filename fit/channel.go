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
	parKink          // share of the kinked foot, 0 to 1
	parCount
)

// channel is the transfer model at one set of parameters, in the form in which it
// is evaluated: see [Model] for the equation. n-channel signs.
type channel struct {
	vt, half      float64 // V; β/2, A/V²
	a, inverse    float64 // 2 n kT/q and its inverse, V and 1/V
	theta, lambda float64 // 1/V
	kink          float64
}

func channelOf(p *[parCount]float64) channel {
	a := 2 * math.Exp(p[parN]) * thermalVoltage
	return channel{vt: p[parVt], half: math.Exp(p[parBeta]) / 2, a: a, inverse: 1 / a, theta: p[parTheta], lambda: p[parLambda], kink: p[parKink]}
}

// far is the argument of the knee, in units of a, beyond which it is straight (or
// nothing) to the last bit.
const far = 37

// knee is the overdrive that the channel feels at x = V_GS - V_T, V: x itself well
// above the threshold, exponential with rate 1/a well below. It mixes the smooth
// foot of Enz, Krummenacher and Vittoz (kink 0) with one that goes over into the
// straight line at x = a/2 (kink 1). g is its slope, da and dk its derivatives by a
// and by the kink.
func (c *channel) knee(x float64) (s, g, da, dk float64) {
	z := x * c.inverse
	if z > far {
		return x, 1, 0, 0
	}
	if z < -far {
		return 0, 0, 0, 0
	}
	e := math.Exp(-math.Abs(z))
	l := logOnePlus(e)
	var foot, footSlope, footA float64
	if z >= 0 {
		s, g = x+c.a*l, 1/(1+e)
		foot, footSlope = x, 1
	} else {
		s, g = c.a*l, e/(1+e)
	}
	da = (s - x*g) * c.inverse
	if c.kink == 0 {
		return s, g, da, c.footOf(x, z, e) - s
	}
	if z < 0.5 {
		foot = c.footOf(x, z, e)
		footSlope = foot * c.inverse
		footA = footSlope * (1 - z)
	}
	dk = foot - s
	s += c.kink * dk
	g += c.kink * (footSlope - g)
	da += c.kink * (footA - da)
	return s, g, da, dk
}

// footOf is the kinked foot at x = z a, with e = exp(-|z|): the exponential
// (a/2) exp(z - 1/2) below z = 1/2, the straight line above.
func (c *channel) footOf(x, z, e float64) float64 {
	const half = 0.5 * 0.60653065971263342360 // exp(-1/2)/2
	switch {
	case z >= 0.5:
		return x
	case z >= 0:
		return c.a * half / e
	}
	return c.a * half * e
}

// logOnePlus is ln(1+e) for 0 <= e <= 1; by its series where e is small.
func logOnePlus(e float64) float64 {
	if e > 1e-3 {
		return math.Log1p(e)
	}
	return e * (1 - e*(0.5-e*(1.0/3-e*(0.25-e*0.2))))
}

// current is I_D [A] at V_GS and V_DS [V], and its derivatives by both, S.
func (c *channel) current(vgs, vds float64) (i, gm, gds float64) {
	x := vgs - c.vt
	s1, g1, _, _ := c.knee(x)
	s2, g2, _, _ := c.knee(x - vds)
	d := 1 / (1 + c.theta*s1)
	l := 1 + c.lambda*vds
	q := s1*s1 - s2*s2
	k := c.half * d
	i = k * q * l
	gm = k * l * (2*(s1*g1-s2*g2) - q*c.theta*g1*d)
	gds = k * (2*s2*g2*l + c.lambda*q)
	return i, gm, gds
}

// partials adds to current the derivatives of I_D by every parameter, at fixed
// V_GS and V_DS.
func (c *channel) partials(vgs, vds float64, dp *[parCount]float64) (i, gm, gds float64) {
	x := vgs - c.vt
	s1, g1, a1, k1 := c.knee(x)
	s2, g2, a2, k2 := c.knee(x - vds)
	d := 1 / (1 + c.theta*s1)
	l := 1 + c.lambda*vds
	q := s1*s1 - s2*s2
	k := c.half * d
	i = k * q * l
	by := func(d1, d2 float64) float64 { return k * l * (2*(s1*d1-s2*d2) - q*c.theta*d1*d) }
	gm = by(g1, g2)
	gds = k * (2*s2*g2*l + c.lambda*q)
	dp[parVt] = -gm
	dp[parBeta] = i
	dp[parN] = by(a1, a2) * c.a
	dp[parTheta] = -i * s1 * d
	dp[parLambda] = k * q * vds
	dp[parKink] = by(k1, k2)
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
// from start (any number), halving where a step leaves the bracket, to a relative
// 1e-11 (the last step is below 1e-6, and the rule doubles the digits).
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
	for range 80 {
		id, gm, gds := c.current(vg-i*f.source, vtop-i*r)
		if miss := i - id; miss > 0 {
			hi = i
		} else {
			lo = i
		}
		next := i - (i-id)/(1+f.source*gm+r*gds)
		if !(next >= lo && next <= hi) {
			next = lo + (hi-lo)/2
		} else if math.Abs(next-i) <= 1e-6*next {
			return next
		}
		if next == i {
			return i
		}
		i = next
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
	if r == 0 {
		return i, slope
	}
	scale := 1 / (1 + f.source*gm + r*gds)
	for k := range dp {
		dp[k] *= scale
	}
	return i, slope * scale
}
