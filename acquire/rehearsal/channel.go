package rehearsal

import (
	"math"
	"math/rand/v2"
)

// shown is what a display shows after one conversion.
type shown struct {
	value float64 // SI unit, whole counts
	over  bool    // overload instead; value has the sign only
	digit float64 // one count, SI unit
	unit  string
	auto  bool
	hold  bool
}

// channel is one quantity that a meter converts: range, counts, noise, and what is
// wrong with its display.
type channel struct {
	Meter
	rng   *rand.Rand
	at    int     // index of its range
	auto  bool    // at the moment; an SCPI meter can be told
	lost  int     // conversions that the change of range still costs
	sum   float64 // of the conversion under way, unit times s
	count int64   // conversions since the start
	last  shown
	any   bool // last is something

	overload, stuck, hold, scaled float64 // until when, s
	factor                        float64 // of scaled
}

func newChannel(m Meter, rng *rand.Rand) *channel {
	c := &channel{Meter: m, rng: rng, auto: m.Auto, at: len(m.Tops) - 1}
	if m.Auto {
		c.at = 0
	}
	if c.Gain == 0 {
		c.Gain = 1
	}
	return c
}

// lostConversions are swallowed by a change of range.
const lostConversions = 2

// convert ends a conversion whose mean was x, at t, and tells whether the display
// shows something new; changed tells that the range was.
func (c *channel) convert(x, t float64) (s shown, ok, changed bool) {
	digit := c.Tops[c.at] / c.Counts
	s = shown{digit: digit, unit: units[c.Role], auto: c.auto}
	if c.Counting {
		s.value = float64(c.count%int64(c.Counts+1)) * digit
		c.count++
		return c.faulty(s, t), true, false
	}
	c.count++
	if c.lost > 0 {
		c.lost--
		return s, false, false
	}
	x = x*c.Gain + c.Offset
	n := math.Round(x/digit + c.Noise*c.rng.NormFloat64())
	switch {
	case math.Abs(n) > c.Counts:
		s.over, s.value = true, x
		if c.auto && c.at < len(c.Tops)-1 {
			c.to(x)
			changed = true
		}
	case c.auto && c.at > 0 && math.Abs(x) < 0.9*c.Tops[c.at-1]:
		c.to(x)
		c.lost-- // this one is lost already
		return s, false, true
	default:
		s.value = n * digit
	}
	return c.faulty(s, t), true, changed
}

// to goes to the range for x.
func (c *channel) to(x float64) {
	c.at = len(c.Tops) - 1
	for c.at > 0 && math.Abs(x) < 0.9*c.Tops[c.at-1] {
		c.at--
	}
	c.lost = lostConversions
}

// faulty is what the display makes of s under the faults that were ordered.
func (c *channel) faulty(s shown, t float64) shown {
	if t < c.scaled && !s.over {
		s.value *= c.factor
		s.digit *= c.factor
	}
	if t < c.overload {
		s.over = true
	}
	if (t < c.stuck || t < c.hold) && c.any {
		s = c.last
	}
	s.hold = t < c.hold
	c.last, c.any = s, true
	return s
}

// setRange is the range that an SCPI command asks for; it tells whether there is one.
func (c *channel) setRange(top float64) bool {
	for i, t := range c.Tops {
		if math.Abs(top) <= t*(1+1e-9) {
			c.at, c.auto, c.lost = i, false, 0
			return true
		}
	}
	return false
}
