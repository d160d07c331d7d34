package lsq

import "math"

// singular is the damping that makes a singular problem regular: small beside 1,
// the size of the scaled columns, while its root still leaves half the digits.
const singular = epsilon

// scale is D_jj, 1 for a column that never was anything but zero.
func (s *Solver) scale(j int) float64 {
	if s.d[j] == 0 {
		return 1
	}
	return s.d[j]
}

// length is ‖D δ‖ of a step of the free parameters.
func (c *run) length(step []float64) float64 {
	sum := 0.0
	for k, j := range c.free {
		v := c.scale(j) * step[k]
		sum += v * v
	}
	return math.Sqrt(sum)
}

// damping sets μ so that the step has at most the length c.reach: zero where
// the undamped step is no longer than that, else so that the lengths agree
// within 10 %. Newton's rule on the reciprocal of the length, between bounds. It
// leaves the step in c.z; false: there is none.
//
// Source: J. J. Moré, Lecture Notes in Mathematics 630 (1978) 105–116, section 5
// (from memory).
func (c *run) damping() bool {
	c.sel = c.sel[:0]
	for k := range c.free {
		c.sel = append(c.sel, k)
	}
	if c.undamped() && c.length(c.gn) <= 1.1*c.reach {
		copy(c.z, c.gn)
		c.mu = 0
		return true
	}
	low, least := 0.0, 0.0
	length, fall, ok := c.whole(0)
	if !ok { // singular: as little damping as gives an answer
		low, least = singular, singular
		length, fall, ok = c.whole(singular)
	}
	if ok {
		if length <= 1.1*c.reach {
			c.mu = least
			return true
		}
		if v := (length - c.reach) / (c.reach * fall); finite(v) {
			low = math.Max(low, v)
		}
	}
	high := 0.0
	nf := len(c.free)
	for k, j := range c.free {
		v := dot(c.r[k*nf:k*nf+k+1], c.qtr[:k+1]) / c.scale(j)
		high += v * v
	}
	high = math.Sqrt(high) / c.reach
	mu := math.Min(math.Max(c.mu, low), high)
	if mu == 0 {
		mu = math.Max(1e-3*high, low)
	}
	for range 10 {
		c.mu = mu
		length, fall, ok = c.whole(mu)
		if !ok {
			mu = math.Max(2*mu, 1e-3*high)
			continue
		}
		over := length - c.reach
		if math.Abs(over) <= 0.1*c.reach {
			break
		}
		if over > 0 {
			low = math.Max(low, mu)
		} else {
			high = math.Min(high, mu)
		}
		mu = math.Min(math.Max(mu+over/(c.reach*fall), low), high)
	}
	return ok
}

// whole solves for all free parameters with damping mu, and gives the length
// q = ‖D δ‖ and -(dq/dμ)/q: the squared length of R_μ⁻ᵀ D²δ/q, R_μ being the
// damped triangle.
func (c *run) whole(mu float64) (length, fall float64, ok bool) {
	nf := len(c.free)
	rhs := c.rhs[:nf]
	for i, v := range c.qtr {
		rhs[i] = -v
	}
	if !c.damped(mu, rhs) {
		return 0, 0, false
	}
	for k, j := range c.free {
		v := c.scale(j) * c.z[k]
		length += v * v
	}
	length = math.Sqrt(length)
	y := c.u[:nf]
	for k, j := range c.free {
		d := c.scale(j)
		sum := d * d * c.z[k] / length
		for i := range k {
			sum -= c.top[k*nf+i] * y[i]
		}
		y[k] = sum / c.diag[k]
		fall += y[k] * y[k]
	}
	return length, fall, finite(length) && finite(fall)
}

// release finds the free parameters: all but those on a bound that S would
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
		slope := dot(c.jac[j*m:(j+1)*m], c.res)
		if !(v <= lo && slope >= 0 || v >= hi && slope <= 0) {
			c.free = append(c.free, j)
		}
	}
}

// trial makes the next point from the damped step in c.z. A parameter that would
// leave its bounds stops there, and the rest is solved again. It gives the fall of S
// that the linearised problem expects, -(Rδ)·(2 Qᵀr + Rδ), and whether any
// parameter moves.
func (c *run) trial() (expected float64, moved bool) {
	nf := len(c.free)
	step := c.step[:nf]
	clear(step)
	clear(c.hit[:nf])
	c.sel = c.sel[:0]
	for k := range nf {
		c.sel = append(c.sel, k)
	}
	copy(c.next, c.p)
	for c.advance(step) {
		if len(c.sel) == 0 {
			break
		}
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
			break
		}
	}
	for k, j := range c.free {
		if !c.hit[k] {
			lo, hi := c.pr.bounds(j)
			c.next[j] = math.Min(math.Max(c.p[j]+step[k], lo), hi) // rounding
		}
		moved = moved || c.next[j] != c.p[j]
	}
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
			way := c.z[i] - step[k]
			b, hi := c.pr.bounds(j)
			if way > 0 {
				b = hi
			}
			room := b - c.p[j] - step[k]
			if way != 0 && math.Abs(room) < share*math.Abs(way) {
				share, at, bound = math.Abs(room/way), i, b
			}
		}
	}
	if at < 0 {
		for i, k := range c.sel {
			step[k] = c.z[i]
		}
		return false
	}
	for i, k := range c.sel {
		step[k] += share * (c.z[i] - step[k])
	}
	k := c.sel[at]
	j := c.free[k]
	c.hit[k], c.next[j], step[k] = true, bound, bound-c.p[j]
	c.sel = append(c.sel[:at], c.sel[at+1:]...)
	return true
}
