package lot

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

// capabilityFewest is the number of devices below which no capability is given: of
// ten, a Ppk of 1.33 may be one of 0.78 as well.
const capabilityFewest = 25

// farFromNormal is the probability of the Anderson-Darling test below which a lot
// counts as far from normal: one normal lot in a hundred does.
const farFromNormal = 0.01

// specLevel and specShare are the confidence of everything said of the parts that
// were not measured, and the share of them that a tolerance interval covers.
const (
	specLevel = 0.95
	specShare = 0.95
)

// Capability is how many times three standard deviations fit between the mean of the
// lot and the nearer limit. What may be relied on is Lower; both are NaN where
// Declined says why there is none.
type Capability struct {
	Value    float64 // Ppk of the sample
	Lower    float64 // one-sided lower confidence limit
	Level    float64 // its confidence, 0.95
	N        int
	NormalP  float64 // of the Anderson-Darling test; NaN: not tested
	Of       string  // "all parts" or "the parts that conduct"
	Declined string
}

// The kinds of a [ToleranceBand].
const (
	BandNormal = "normal"
	BandFree   = "distribution-free"
)

// ToleranceBand is the range that covers a share of all parts that such a sample is
// drawn from. Low and High are NaN where Declined says why there is none.
type ToleranceBand struct {
	Low, High float64 // V, by sign
	Share     float64 // of the parts, 0.95
	Level     float64 // confidence, 0.95
	Kind      string  // BandNormal or BandFree; "" where declined
	Factor    float64 // standard deviations on either side of the mean; NaN unless normal
	N         int
	Of        string // "all parts" or "the parts that conduct"
	Declined  string
}

// OutsideShare is how many devices lie outside the limits, and how large the share
// of the parts outside may be. Devices that have no V_GS(th) are not among them,
// unless they are known to lie beyond the upper limit.
type OutsideShare struct {
	Count, N int
	Upper    float64 // one-sided upper confidence limit of the share; NaN: no device
	Level    float64 // its confidence, 0.95
}

// sample is the values of a lot and what has none.
type sample struct {
	x       []float64 // V, more gate voltage is greater
	without int       // devices without a value
	beyond  int       // of these, known to lie beyond the upper limit
}

// of names the parts that a statement holds for.
func (s *sample) of() string {
	if s.without > 0 {
		return "the parts that conduct"
	}
	return "all parts"
}

// oneLot gives mean and standard deviation of a lot that can be spoken of as one, or
// why it cannot.
func (s *sample) oneLot(populations, needed int) (mean, sd float64, why string) {
	if populations > 1 {
		return math.NaN(), math.NaN(), "the lot is two populations"
	}
	if n := len(s.x); n < needed {
		return math.NaN(), math.NaN(), fmt.Sprintf("%d devices have a value, %d are needed", n, needed)
	}
	if mean, sd = stats.MeanSD(s.x); !(sd > 0) || math.IsInf(sd, 0) {
		return mean, sd, "the values do not differ"
	}
	return mean, sd, ""
}

// capabilityOf gives Ppk = min((upper - mean), (mean - lower)) / (3 sd) with its lower
// limit; with one limit it is that side alone.
//
// Declined below 25 devices, in two populations, and where the lot is far from
// normal. Source: ISO 22514-2 (from memory); the limit: [stats.CpkBoundOneLimit], of
// the nearer side. Checked: TestCapabilityOfLots.
func capabilityOf(s *sample, least, most float64, populations int) Capability {
	nan := math.NaN()
	c := Capability{Value: nan, Lower: nan, Level: specLevel, N: len(s.x), NormalP: nan, Of: s.of()}
	mean, sd, why := s.oneLot(populations, capabilityFewest)
	if why != "" {
		c.Declined = why
		return c
	}
	if c.NormalP = stats.AndersonDarling(s.x).P; c.NormalP < farFromNormal {
		c.Declined = fmt.Sprintf("the lot is far from normal (Anderson-Darling p = %s)", short(c.NormalP))
		return c
	}
	for _, side := range []float64{mean - least, most - mean} {
		if v := side / (3 * sd); !math.IsNaN(v) && !(v >= c.Value) {
			c.Value = v
		}
	}
	c.Lower = stats.CpkBoundOneLimit(c.Value, c.N, specLevel)
	return c
}

// bandOfLot gives the tolerance interval: mean and standard deviation with the exact
// two-sided factor where the lot is not far from normal; else the range between two of
// its values, where it is large enough (93 devices).
//
// Checked: TestBandOfLots.
func bandOfLot(s *sample, populations int) ToleranceBand {
	nan := math.NaN()
	b := ToleranceBand{Low: nan, High: nan, Share: specShare, Level: specLevel, Factor: nan, N: len(s.x), Of: s.of()}
	mean, sd, why := s.oneLot(populations, fewest)
	if why != "" {
		b.Declined = why
		return b
	}
	p := stats.AndersonDarling(s.x).P
	if !(p < farFromNormal) {
		b.Kind, b.Factor = BandNormal, stats.ToleranceFactorTwoSided(b.N, specShare, specLevel)
		b.Low, b.High = mean-b.Factor*sd, mean+b.Factor*sd
		return b
	}
	if t := stats.FreeTolerance(s.x, stats.Both, specShare, specLevel); !math.IsNaN(t.Low) {
		b.Kind = BandFree
		b.Low, b.High = t.Low, t.High
		return b
	}
	b.Declined = fmt.Sprintf("the lot is far from normal (Anderson-Darling p = %s), and without that %d devices are needed", short(p), freeFewest)
	return b
}

// Tolerance is the interval that covers 95 % of what a lot's values are drawn from
// with 95 % confidence, as [ToleranceBand] has it.
//
// Inputs: x, the values of the devices that have one, in any order, not modified;
// without, the number of devices that have none; the populations that the lot was found to be.
// Checked: TestBandOfLots.
func Tolerance(x []float64, without, populations int) ToleranceBand {
	return bandOfLot(&sample{x: x, without: without}, populations)
}

// freeFewest is the number of devices whose range covers 95 % of the parts with 95 %
// confidence, whatever their distribution. Checked: TestBandOfLots.
const freeFewest = 93

// outsideOf counts the devices outside the limits.
func outsideOf(s *sample, least, most float64) OutsideShare {
	o := OutsideShare{Count: s.beyond, N: len(s.x) + s.beyond, Level: specLevel}
	for _, x := range s.x {
		if x < least-limitSlack || x > most+limitSlack {
			o.Count++
		}
	}
	o.Upper = stats.BadBound(o.Count, o.N, specLevel)
	return o
}
