package stats

import "math"

// Mean is the arithmetic mean of x.
//
// Inputs: x, any length, any order, not modified. Result: NaN for an empty
// slice, and when x holds a NaN. Source: two passes, the second adding the mean
// of the residuals (Chan, Golub and LeVeque, "Algorithms for computing the
// sample variance", 1983). Checked: TestCertifiedMoments against the univariate
// reference data sets of NIST.
func Mean(x []float64) float64 {
	m, _ := MeanSD(x)
	return m
}

// SD is the sample standard deviation of x with divisor n-1; NaN for fewer than
// two values. Source and checks as for [Mean].
func SD(x []float64) float64 {
	_, s := MeanSD(x)
	return s
}

// MeanSD is [Mean] and [SD] together.
func MeanSD(x []float64) (mean, sd float64) {
	n := float64(len(x))
	if n == 0 {
		return math.NaN(), math.NaN()
	}
	// Dividing first keeps the sum finite for values near the largest float.
	for _, v := range x {
		mean += v / n
	}
	var sum, squares float64
	for _, v := range x {
		d := v - mean
		sum += d
		squares += d * d
	}
	mean += sum / n
	if n < 2 {
		return mean, math.NaN()
	}
	// sum is zero but for rounding; its square takes out what is left of it.
	return mean, math.Sqrt(math.Max(0, squares-sum*sum/n) / (n - 1))
}
