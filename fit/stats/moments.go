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

// Lag1 is the correlation of every value with the next one, in the order in which
// they stand:
//
//	Σ (x[i]-mean)(x[i+1]-mean) / Σ (x[i]-mean)²
//
// Inputs: x in the order of time, not modified. Result: about 0 for values that do not
// lean on their forerunners, NaN for fewer than two values, no spread, and values that
// are no finite numbers. Source: certified figures of the NIST reference data sets
// (StRD, univariate), whose definition this is. Checked: TestCertifiedMoments.
func Lag1(x []float64) float64 {
	mean, sd := MeanSD(x)
	if !(sd > 0) || math.IsInf(sd, 0) {
		return math.NaN()
	}
	sum := 0.0
	for i := range len(x) - 1 {
		sum += (x[i] - mean) / sd * ((x[i+1] - mean) / sd)
	}
	return sum / float64(len(x)-1)
}
