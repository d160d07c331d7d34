package fit

import "math"

// ordinate is what is made of the current before a polynomial is laid through
// it: a square law is straight in its root, an exponential in its logarithm, a
// linear region as it is.
type ordinate uint8

const (
	root ordinate = iota
	logarithm
	plain
)

// of is the ordinate of current i.
func (o ordinate) of(i float64) float64 {
	switch o {
	case root:
		return math.Sqrt(i)
	case logarithm:
		return math.Log(i)
	}
	return i
}

// at is the ordinate of point p, whose current is above zero.
func (o ordinate) at(p *point) float64 {
	switch o {
	case root:
		return p.rt
	case logarithm:
		return p.ln
	}
	return p.i
}

// slopeAt is d(ordinate)/di at point p.
func (o ordinate) slopeAt(p *point) float64 {
	switch o {
	case root:
		return 0.5 / p.rt
	case logarithm:
		return 1 / p.i
	}
	return 1
}

// back is the current of an ordinate.
func (o ordinate) back(y float64) float64 {
	switch o {
	case root:
		return y * y
	case logarithm:
		return math.Exp(y)
	}
	return y
}

// slope is d(ordinate)/di at current i.
func (o ordinate) slope(i float64) float64 {
	switch o {
	case root:
		return 0.5 / math.Sqrt(i)
	case logarithm:
		return 1 / i
	}
	return 1
}

// floorCounts is how many counts a current must have to enter a logarithm or an
// interpolation (judgement: below that the last digit decides).
const floorCounts = 3

// floor is the least current that point p can be said to carry.
func (p *point) floor() float64 { return floorCounts * p.q }

// above reports whether the current of p stands clear of the last digits.
func (p *point) above() bool { return p.i > 0 && p.i*tie >= p.floor() }

// steepest is the steepest slope of ln I that a transistor can have, 1/V: kT/q
// at -40 °C. What is steeper is the corner of a simulated square law or noise.
const steepest = 50

// tie lets a comparison of two readings that are the same decimal number come
// out the same whatever their last binary digit.
const tie = 1 + 1e-9

// rss is the root of the sum of two squares.
func rss(a, b float64) float64 { return math.Sqrt(a*a + b*b) }
