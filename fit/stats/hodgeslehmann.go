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

// PairedShift is the median of the means of any two differences x[i]-y[i], a
// difference with itself too, with the interval that belongs to [SignedRank]: by
// how much values taken twice of the same things have moved, for differences that
// lie symmetrically about that. y may be nil: then x are the differences. Level is
// exact up to 200 differences, for continuous values; five have no interval at
// 0.95.
//
// Inputs, Result: as for [HodgesLehmann]; NaN also for slices of different lengths
// and for differences infinite in both directions. Source: Hollander and Wolfe,
// "Nonparametric Statistical Methods", 1973, section 3. Checked: TestPairedShift.
func PairedShift(x, y []float64, level float64) Shift {
	nan := math.NaN()
	r := Shift{nan, nan, nan, nan, false}
	if y == nil {
		y = make([]float64, len(x))
	}
	d := Sorted(pairDifferences(x, y))
	n := len(d)
	if n == 0 || math.IsNaN(d[0]) || math.IsNaN(d[0]+d[n-1]) || !(level > 0 && level < 1) {
		return r
	}
	at := func(k int64) float64 {
		return kth(2*d[0], 2*d[n-1], k, func(v float64) int64 { return sumsUpTo(d, v) }) / 2
	}
	pairs := int64(n) * int64(n+1) / 2
	r.Estimate = at((pairs + 1) / 2)
	if pairs%2 == 0 {
		r.Estimate = r.Estimate/2 + at(pairs/2+1)/2
	}
	if math.IsInf(r.Estimate, 0) {
		r.Estimate = nan
	}
	half := (1 - level) / 2
	var k int64
	if n <= signedRankMost {
		ranks := make([]int, n)
		for i := range ranks {
			ranks[i] = i + 1
		}
		k, r.Level = rankWithin(signShares(ranks), half)
		r.Exact = true
	} else {
		N := float64(n)
		k, r.Level = rankNormal(N*(N+1)/4, math.Sqrt(N*(N+1)*(2*N+1)/24), half)
	}
	r.Low, r.High = math.Inf(-1), math.Inf(1)
	if k > 0 {
		r.Low, r.High = at(k), at(pairs+1-k)
	}
	return r
}

// sumsUpTo is how many sums of two of the ascending d, one with itself too, are at
// most v.
func sumsUpTo(d []float64, v float64) int64 {
	count := int64(0)
	for lo, hi := 0, len(d)-1; lo <= hi; {
		if d[lo]+d[hi] <= v {
			count += int64(hi - lo + 1)
			lo++
		} else {
			hi--
		}
	}
	return count
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
		k, actual = rankWithin(share, half)
		return k, actual, true
	}
	N, M := float64(n), float64(m)
	k, actual = rankNormal(N*M/2, math.Sqrt(N*M*(N+M+1)/12), half)
	return k, actual, false
}

// rankWithin is the largest k with a probability of at most half below it, share
// those of 0, 1, 2 ..., and what is left when as much is taken at the other end.
func rankWithin(share []float64, half float64) (k int64, actual float64) {
	below := 0.0
	// A hair for levels that are met exactly.
	for int(k) < len(share) && below+share[k] <= half*(1+1e-12) {
		below += share[k]
		k++
	}
	return k, 1 - 2*below
}

// rankNormal is [rankWithin] for a statistic that is normal, with a continuity
// correction.
func rankNormal(mean, sd, half float64) (k int64, actual float64) {
	k = int64(math.Max(0, math.Floor(mean+0.5+NormalQuantile(half)*sd)))
	if k == 0 {
		return 0, 1
	}
	return k, 1 - 2*NormalUpper((mean+0.5-float64(k))/sd)
}

// kthDifference is the k-th smallest, from 1, of all differences of a value of a
// and one of b, both ascending.
func kthDifference(a, b []float64, k int64) float64 {
	return kth(a[0]-b[len(b)-1], a[len(a)-1]-b[0], k, func(v float64) int64 { return countUpTo(a, b, v) })
}

// kth is the k-th smallest, from 1, of numbers that lie between lo and hi, when
// count tells how many are at most v.
func kth(lo, hi float64, k int64, count func(v float64) int64) float64 {
	// Halve the numbers between the ends by their place among all numbers of 64
	// bits: that ends on the k-th itself, as rounded.
	from, to := place(lo), place(hi)
	for from < to {
		mid := from + int64(uint64(to-from)/2)
		if count(number64(mid)) >= k {
			to = mid
		} else {
			from = mid + 1
		}
	}
	return number64(from)
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
