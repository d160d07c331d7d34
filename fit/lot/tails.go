package lot

import (
	"math"

	"gatesill/fit"
)

// lowGain says which end of a column is that of low gain and with which power of
// the gain factor the quantity goes; sign 0: it is no gain.
func lowGain(k fit.Key) (sign, root float64) {
	switch k {
	case fit.KeyBeta:
		return -1, 1
	case fit.KeyGmMax, fit.KeyGmIdle:
		return -1, 2
	case KeySpan:
		return 1, 2
	}
	return 0, 1
}

// allowSkew moves the limit on the side of low gain out to where it would be if
// the gain factor, and not its logarithm, were spread like a normal distribution:
// which of the two a lot is cannot be told from some hundred devices, and in
// large lots the wrong one makes false alarms (spread 8 %, 5,000 devices: 15 % of
// lots). Transconductance and gate span go with the root of the gain factor.
func (b *band) allowSkew(c *column) {
	sign, root := lowGain(c.key)
	out := func(reach float64) float64 {
		const most = 0.8 // beyond, the two scales have little in common
		if r := root * reach; r < most {
			return -math.Log1p(-r) / root
		}
		return math.Max(reach, -math.Log1p(-most)/root)
	}
	switch sign {
	case -1:
		b.low = b.mid - out(b.mid-b.low)
	case 1:
		b.high = b.mid + out(b.high-b.mid)
	}
}

// A crowd is so many devices beyond some distance on one side of the lot that few
// of them can be its tail.
const (
	crowdFrom  = 3    // robust spreads from the median
	crowdLeast = 5    // devices
	crowdSure  = 10   // devices, more than a skewed gain makes of a tail
	crowdTail  = 0.05 // share of them that the tail of a normal lot may be
	crowdOther = 0.1  // share of them that may lie as far out on the other side
)

// takeInCrowd takes a limit in where a second group merges with the tail of the
// lot: near enough to leave no gap, too near for a limit that one device among
// thousands is held to. Lots of heavy tails on both sides are left alone; a few
// devices of low gain are allowed the skew of allowSkew.
//
// Source: the share of false flags among those given, Benjamini and Hochberg,
// J. Royal Statistical Society B 57 (1995) 289-300, with a normal tail half as
// large again as the robust spread says; the conditions are our own judgement. It
// adds nothing to the false alarms of normal lots. Checked: TestOtherDie,
// TestFalseAlarms.
func (b *band) takeInCrowd(c *column) {
	if at := b.crowd(c, -1); at > b.low {
		b.low, b.narrowed = at, true
	}
	if at := b.crowd(c, 1); at < b.high {
		b.high, b.narrowed = at, true
	}
}

// crowd is the limit before a crowd on the side with that sign, infinite where
// there is none.
func (b *band) crowd(c *column, side float64) float64 {
	n := len(c.sorted)
	from := func(i int) float64 { // i-th value from the end of that side
		if side > 0 {
			return c.sorted[n-1-i]
		}
		return c.sorted[i]
	}
	sign, root := lowGain(c.key)
	for i := n / 4; i >= 0; i-- { // from within outwards: the widest crowd is met first
		reach := side * (from(i) - b.mid)
		if sign == side && i+1 < crowdSure {
			reach = -math.Expm1(-root*reach) / root
		}
		z := (reach - c.step/2) / b.sd
		if z < crowdFrom {
			continue
		}
		count := float64(i + 1)
		tail := 1.5 * float64(n) * math.Erfc(z/math.Sqrt2) / 2
		if i+1 < crowdLeast || tail > crowdTail*count {
			continue
		}
		other := 0
		for other < n && side*(b.mid-from(n-1-other)) >= z*b.sd {
			other++
		}
		if float64(other) > crowdOther*count {
			continue
		}
		return (from(i) + from(i+1)) / 2
	}
	return math.Inf(int(side))
}
