package lot

import (
	"math"
	"slices"

	"gatesill/fit"
)

// NiceWidth proposes a bin width for a quantity when the user gave none: 1, 2 or
// 5 times a power of ten, at least the smallest honest width (4u, median u),
// and wide enough that the middle 80 % of the devices fall into about six bins.
// It is 50 mV, or 50 mS for a gain, where fewer than two devices have a value.
// The number of six is common practice, no source.
func NiceWidth(devs []Device, by fit.Key) float64 {
	const bins, fallback = 6, 0.05
	var values []float64
	for i := range devs {
		if x, _ := valueOf(&devs[i].Result, by); counts(&devs[i]) && !math.IsNaN(x) {
			values = append(values, x)
		}
	}
	if len(values) < 2 {
		return fallback
	}
	slices.Sort(values)
	cut := len(values) / 10
	want := (values[len(values)-1-cut] - values[cut]) / bins
	if w := smallestWidth(devs, by); w > want { // false for NaN
		want = w
	}
	if want <= 0 {
		return fallback
	}
	decade := math.Pow(10, math.Floor(math.Log10(want)))
	for _, m := range []float64{1, 2, 5} {
		if m*decade >= want*(1-1e-9) {
			return m * decade
		}
	}
	return 10 * decade
}
