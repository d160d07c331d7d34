package lot

import (
	"math"
	"slices"
)

// StepOf finds the step in which sorted values were read: the coarsest of 1, 2 and 5
// times a power of ten of which all are whole multiples, 0 where there is none
// down to a millionth of the greatest value (values that were computed, or all
// the same).
//
// Fine readings are multiples of a coarser step by chance: of ten steps once in
// ten, of five once in five. A step is believed where the chance of all
// different values being such multiples is about one in a thousand: 5 different
// values for a step of 5, 10 for a step of 2. For a power of ten two are taken,
// because too coarse a step only makes flags rarer.
func StepOf(sorted []float64) float64 {
	distinct := slices.Compact(slices.Clone(sorted))
	if len(distinct) < 2 {
		return 0
	}
	top := math.Max(math.Abs(distinct[0]), math.Abs(distinct[len(distinct)-1]))
	if math.IsInf(top, 0) || math.IsNaN(distinct[0]) {
		return 0
	}
	high := int(math.Floor(math.Log10(top)))
	for e := high; e >= high-6; e-- {
		for _, c := range []struct {
			times float64
			need  int
		}{{5, 5}, {2, 10}, {1, 2}} {
			step := c.times * math.Pow(10, float64(e))
			if len(distinct) >= c.need && multiples(distinct, step) {
				return step
			}
		}
	}
	return 0
}

// multiples reports whether all values are whole multiples of step, to a
// millionth of it and the last digits of the number.
func multiples(values []float64, step float64) bool {
	for _, v := range values {
		q := v / step
		if math.Abs(q-math.Round(q)) > 1e-6+1e-14*math.Abs(q) {
			return false
		}
	}
	return true
}
