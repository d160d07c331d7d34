package stats

import (
	"math"
	"slices"
)

// MADScale turns a median absolute deviation into an estimate of the standard
// deviation of a normal distribution: 1/z(0.75), rounded as it is in general use
// (the exact factor is 1.482602218505602).
const MADScale = 1.4826

// QuantileRule says how a quantile is interpolated between order statistics;
// the number is that of Hyndman and Fan, "Sample quantiles in statistical
// packages", The American Statistician 50 (1996) 361-365.
type QuantileRule int

// The rules: Type6 puts the quantile at rank p(n+1), Type7 at rank 1+p(n-1).
const (
	Type6 QuantileRule = 6
	Type7 QuantileRule = 7
)

// Sorted is an ascending copy of x.
func Sorted(x []float64) []float64 {
	s := slices.Clone(x)
	slices.Sort(s)
	return s
}

// Quantile is the p-quantile of sorted, 0 <= p <= 1, by the rule named; any rule
// but [Type6] is taken as [Type7]. Beyond the first and last rank the extreme
// value is given.
//
// Inputs: sorted, ascending. Result: NaN for an empty slice or p outside 0..1.
// Checked: TestPercentile12, TestFences.
func Quantile(sorted []float64, p float64, rule QuantileRule) float64 {
	n := len(sorted)
	if n == 0 || !(p >= 0 && p <= 1) {
		return math.NaN()
	}
	rank := 1 + p*float64(n-1)
	if rule == Type6 {
		rank = p * float64(n+1)
	}
	if rank <= 1 {
		return sorted[0]
	}
	if rank >= float64(n) {
		return sorted[n-1]
	}
	below := math.Floor(rank)
	i := int(below) - 1
	part := rank - below
	if part == 0 {
		return sorted[i] // also where the next value is infinite
	}
	return sorted[i] + part*(sorted[i+1]-sorted[i])
}

// Median is the middle value of x, or the mean of the two middle ones. It is NaN
// for an empty slice and where a middle value is infinite. x in any order, not
// modified.
func Median(x []float64) float64 {
	return MedianSorted(Sorted(x))
}

// MedianSorted is [Median] of an ascending slice.
func MedianSorted(sorted []float64) float64 {
	n := len(sorted)
	if n == 0 {
		return math.NaN()
	}
	m := sorted[n/2]
	if n%2 == 0 {
		m = sorted[n/2-1]/2 + m/2
	}
	if math.IsInf(m, 0) {
		return math.NaN()
	}
	return m
}

// MAD is the median of |x - median(x)|, unscaled: multiply by [MADScale] to
// compare with a standard deviation. NaN for an empty slice, and where half of
// the values or more are infinite. Checked: TestMAD.
func MAD(x []float64) float64 {
	return MADSorted(Sorted(x))
}

// MADSorted is [MAD] of an ascending slice, in linear time.
func MADSorted(sorted []float64) float64 {
	m := MedianSorted(sorted)
	if math.IsNaN(m) {
		return math.NaN()
	}
	// Distances grow to both sides of the median: merge the two runs up to the
	// middle one.
	n := len(sorted)
	right, _ := slices.BinarySearch(sorted, m)
	left := right - 1
	var last, before float64
	for range n/2 + 1 {
		before = last
		if right >= n || left >= 0 && m-sorted[left] <= sorted[right]-m {
			last = m - sorted[left]
			left--
		} else {
			last = sorted[right] - m
			right++
		}
	}
	if n%2 == 0 {
		last = before/2 + last/2
	}
	if math.IsInf(last, 0) {
		return math.NaN()
	}
	return last
}

// IQR is the distance between the quartiles of sorted by the rule named, NaN for
// an empty slice.
func IQR(sorted []float64, rule QuantileRule) float64 {
	return Quantile(sorted, 0.75, rule) - Quantile(sorted, 0.25, rule)
}
