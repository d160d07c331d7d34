package stats

import "math"

// FindsBad is the probability that at least one bad part is among n of a lot of
// size that holds bad bad ones. NaN for numbers that fit no lot. Checked:
// TestZeroFailures.
func FindsBad(n, bad, size int) float64 { return HypergeometricUpper(1, n, bad, size) }

// ZeroFailureSize is how many parts, all good, show with the confidence given
// that less than the share bad is bad in a process or a very large lot: the least
// n with (1-bad)^n <= 1-confidence. 0 for numbers not between 0 and 1 and for more
// than 1e9. Checked: TestZeroFailures.
func ZeroFailureSize(bad, confidence float64) int {
	if !inside(bad) || !inside(confidence) {
		return 0
	}
	// A hair, so that a bound met exactly is met.
	n := math.Ceil(math.Log1p(-confidence)/math.Log1p(-bad) - 1e-12)
	if n > 1e9 {
		return 0
	}
	return max(1, int(n))
}

// ZeroFailureSizeOfLot is how many parts of a lot of size, all good, show with
// the confidence given that fewer than bad of it are bad: the least n that finds
// one of bad bad ones with at least that probability. 0 for numbers that fit no
// lot. Checked: TestZeroFailures.
func ZeroFailureSizeOfLot(bad, size int, confidence float64) int {
	if bad < 1 || bad > size || !inside(confidence) {
		return 0
	}
	return leastInt(1, size, func(n int) bool {
		return HypergeometricAt(0, n, bad, size) <= (1-confidence)*(1+1e-12)
	})
}

// BadBound is the upper confidence bound of the share that is bad in a process or
// a very large lot, with found bad ones among n: the p for which so few come with
// the probability 1-confidence. 1 when all were bad, NaN for numbers that do not
// fit.
//
// Source: Clopper and Pearson, "The use of confidence or fiducial limits
// illustrated in the case of the binomial" (Biometrika 26, 1934). Checked:
// TestBadBound.
func BadBound(found, n int, confidence float64) float64 {
	switch {
	case n < 1 || found < 0 || found > n || !inside(confidence):
		return math.NaN()
	case found == n:
		return 1
	case found == 0:
		return -math.Expm1(math.Log1p(-confidence) / float64(n))
	}
	f := func(l float64) float64 {
		return math.Log(BinomialLower(found, n, 1/(1+math.Exp(-l))) / (1 - confidence))
	}
	lo, hi := -1.0, 1.0
	for f(lo) < 0 {
		lo *= 2
	}
	for f(hi) > 0 {
		hi *= 2
	}
	return 1 / (1 + math.Exp(-rootWithin(f, lo, hi)))
}

// BadBoundOfLot is the upper confidence bound of how many of a lot of size are
// bad, those found among them, with found bad ones among n drawn: the most for
// which so few come with a probability above 1-confidence. -1 for numbers that
// fit no lot. Checked: TestBadBound.
func BadBoundOfLot(found, n, size int, confidence float64) int {
	if n < 0 || n > size || found < 0 || found > n || !inside(confidence) {
		return -1
	}
	most := size - (n - found) // those not drawn, and those found
	lo, hi := found, most
	for lo < hi {
		mid := lo + (hi-lo+1)/2
		if HypergeometricLower(found, n, mid, size) > (1-confidence)*(1+1e-12) {
			lo = mid
		} else {
			hi = mid - 1
		}
	}
	return lo
}

// AttributesAccepts is the probability that a plan which draws n and allows up to
// c bad ones accepts a process or a very large lot with the share p bad: the
// operating characteristic, type B. NaN as for [BinomialLower].
func AttributesAccepts(n, c int, p float64) float64 { return BinomialLower(c, n, p) }

// AttributesAcceptsLot is the probability that a plan which draws n of a lot of
// size and allows up to c bad ones accepts it with bad bad ones in it: the
// operating characteristic, type A. NaN as for [HypergeometricLower].
func AttributesAcceptsLot(n, c, bad, size int) float64 {
	return HypergeometricLower(c, n, bad, size)
}

// AttributesPlanFor is the smallest plan, n parts of which up to c may be bad,
// that refuses a lot with a share good of bad ones with a probability of at most
// producer and accepts one with a share bad with a probability of at most
// consumer; n is 0 where there is none below 1e6 parts or 1000 bad ones. Checked:
// TestAttributesPlan.
func AttributesPlanFor(good, producer, bad, consumer float64) (n, c int) {
	if !inside(good) || !inside(bad) || !inside(producer) || !inside(consumer) || !(good < bad) || producer+consumer >= 1 {
		return 0, 0
	}
	for c := range 1000 {
		n := leastInt(c+1, 1e6, func(n int) bool { return BinomialLower(c, n, bad) <= consumer*(1+1e-12) })
		if n == 0 {
			return 0, 0
		}
		if BinomialUpper(c+1, n, good) <= producer*(1+1e-12) {
			return n, c
		}
	}
	return 0, 0
}
