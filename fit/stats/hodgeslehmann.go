package stats

import "math"

// Shift is by how much one sample lies above another, without taking either to be
// normal.
type Shift struct {
	Estimate  float64 // median of all differences of one value of x and one of y; unit of the values
	Low, High float64 // interval; ±Inf where the samples are too small for the level asked for
	Level     float64 // actual confidence of the interval, at least the one asked for; 1 for an endless one
	Exact     bool    // Level is counted; else by the normal approximation
}

// HodgesLehmann is the median of all differences x[i]-y[j], with the interval that
// belongs to [MannWhitney]: from the k-th smallest difference to the k-th largest,
// k the largest for which the confidence is at least level. Level of the result is
// exact for continuous values with one shape, shifted; with ties it is at least
// that. Samples of 3 and 3 have no interval at 0.95. With an infinite value the
// interval may be endless, and the estimate is NaN if it would be infinite.
//
// The differences are never listed: the k-th is found between numbers by counting,
// in (n+m) times 64 steps. Inputs: any order, not modified. Result: NaN for an
// empty sample, one with a NaN, and when both hold an infinite value of one sign.
// Source: Hodges and Lehmann, "Estimates of location based on rank tests", Annals
// of Mathematical Statistics 34 (1963) 598-611. Checked: TestMannWhitney,
// TestHodgesLehmann.
func HodgesLehmann(x, y []float64, level float64) Shift {
	nan := math.NaN()
	r := Shift{nan, nan, nan, nan, false}
	n, m := len(x), len(y)
	if n == 0 || m == 0 || !(level > 0 && level < 1) {
		return r
	}
	a, b := Sorted(x), Sorted(y)
	if math.IsNaN(a[0]) || math.IsNaN(b[0]) {
		return r
	}
	if both(a, b, math.Inf(1)) || both(a, b, math.Inf(-1)) {
		return r
	}
	pairs := int64(n) * int64(m)
	r.Estimate = kthDifference(a, b, (pairs+1)/2)
	if pairs%2 == 0 {
		r.Estimate = r.Estimate/2 + kthDifference(a, b, pairs/2+1)/2
	}
	if math.IsInf(r.Estimate, 0) {
		r.Estimate = nan
	}
	var k int64
	k, r.Level, r.Exact = shiftRank(n, m, level)
	r.Low, r.High = math.Inf(-1), math.Inf(1)
	if k > 0 {
		r.Low, r.High = kthDifference(a, b, k), kthDifference(a, b, pairs+1-k)
	}
	return r
}

// both tells whether v is the first or last value of both ascending slices.
func both(a, b []float64, v float64) bool {
	in := func(s []float64) bool { return s[0] == v || s[len(s)-1] == v }
	return in(a) && in(b)
}

// shiftRank is the largest k for which the k-th smallest and the k-th largest of n
// m differences enclose the shift with a confidence of at least level, and that
// confidence; 0 and 1 when there is none.
func shiftRank(n, m int, level float64) (k int64, actual float64, exact bool) {
	half := (1 - level) / 2
	alone := make([]int, n+m)
	for i := range alone {
		alone[i] = 1
	}
	if share, _ := mannWhitneyShares(n, m, alone); share != nil {
		// P(U <= k-1) for the next k; a hair for levels that are met exactly.
		below := 0.0
		for k < int64(len(share)) && below+share[k] <= half*(1+1e-12) {
			below += share[k]
			k++
		}
		return k, 1 - 2*below, true
	}
	N, M := float64(n), float64(m)
	mean, sd := N*M/2, math.Sqrt(N*M*(N+M+1)/12)
	// P(U <= k-1) = Φ((k-1/2-mean)/sd).
	k = int64(math.Max(0, math.Floor(mean+0.5+NormalQuantile(half)*sd)))
	if k == 0 {
		return 0, 1, false
	}
	return k, 1 - 2*NormalUpper((mean+0.5-float64(k))/sd), false
}

// kthDifference is the k-th smallest, from 1, of all differences of a value of a
// and one of b, both ascending.
func kthDifference(a, b []float64, k int64) float64 {
	// Halve the numbers between the extremes, by their place among all numbers of
	// 64 bits: that ends on the difference itself, as rounded.
	lo, hi := place(a[0]-b[len(b)-1]), place(a[len(a)-1]-b[0])
	for lo < hi {
		mid := lo + int64(uint64(hi-lo)/2)
		if countUpTo(a, b, number64(mid)) >= k {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	return number64(lo)
}

// countUpTo is how many differences are at most v.
func countUpTo(a, b []float64, v float64) int64 {
	count, from := int64(0), 0
	// The larger the value of a, the larger that of b must be: one pass over both.
	for _, x := range a {
		for from < len(b) && x-b[from] > v {
			from++
		}
		if from == len(b) {
			break
		}
		count += int64(len(b) - from)
	}
	return count
}

// place is the order of v among all numbers of 64 bits; -0 is 0.
func place(v float64) int64 {
	i := int64(math.Float64bits(v + 0))
	if i < 0 {
		return math.MinInt64 - i
	}
	return i
}

// number64 is the number at a place.
func number64(i int64) float64 {
	if i < 0 {
		return math.Float64frombits(uint64(math.MinInt64 - i))
	}
	return math.Float64frombits(uint64(i))
}
