package stats

import "math"

// ToleranceFactor is the factor k for which mean + k sd of a normal sample of n
// lies, with the confidence given, above at least the share given of what it was
// drawn from (or mean - k sd below it): the one-sided normal tolerance factor,
//
//	k = t'(confidence; n-1, z(share) √n) / √n
//
// with the noncentral t, which is exact. NaN for n below 2 and for a share or
// confidence not between 0 and 1.
//
// Source: Natrella, Experimental Statistics (NBS Handbook 91, 1963), section 2-5;
// exact form as in the e-Handbook 7.2.6.3. Checked: TestToleranceFactors.
func ToleranceFactor(n int, share, confidence float64) float64 {
	if n < 2 || !inside(share) || !inside(confidence) {
		return math.NaN()
	}
	root := math.Sqrt(float64(n))
	return NoncentralTQuantile(confidence, float64(n-1), NormalQuantile(share)*root) / root
}

// ToleranceFactorTwoSided is the factor k for which mean ± k sd of a normal
// sample of n covers, with the confidence given, at least the share given of what
// it was drawn from: exact, by integration over where the mean may lie,
//
//	confidence = E over z of P(chi-square(n-1) > (n-1) r(z)²/k²)
//	Φ(z/√n + r) - Φ(z/√n - r) = share
//
// with z standard normal. NaN for n below 2 and for a share or confidence not
// between 0 and 1.
//
// Source: A. Wald and J. Wolfowitz, "Tolerance limits for a normal distribution"
// (Ann. Math. Stat. 17, 1946) for the form; ISO 16269-6 tabulates the same
// factors. The integrand is smooth over the whole line, for which the trapezoid
// rule errs by less than the digits kept. Checked: TestToleranceFactors.
func ToleranceFactorTwoSided(n int, share, confidence float64) float64 {
	if n < 2 || !inside(share) || !inside(confidence) {
		return math.NaN()
	}
	const step, far = 0.1, 9.0
	df := float64(n - 1)
	var weights, halves []float64 // over z >= 0; the integrand is even
	for i := range int(far/step) + 1 {
		z := float64(i) * step
		w := 2 * step * math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
		if i == 0 {
			w /= 2
		}
		r := halfWidth(z/math.Sqrt(float64(n)), share)
		weights, halves = append(weights, w), append(halves, r*r)
	}
	short := func(logK float64) float64 {
		k2 := math.Exp(2 * logK)
		miss := 0.0 // the chance of covering too little
		for i, w := range weights {
			miss += w * ChiSquareLower(df*halves[i]/k2, df)
		}
		return math.Log((1 - confidence) / miss)
	}
	lo := math.Log(NormalQuantile((1+share)/2)) - 1
	hi := lo + 2
	for short(lo) > 0 {
		lo--
	}
	for !(short(hi) > 0) {
		hi++
	}
	return math.Exp(rootWithin(short, lo, hi))
}

// halfWidth is half the width of an interval about c that a standard normal value
// falls in with probability share.
func halfWidth(c, share float64) float64 {
	// From outside the interval, where the digits of a share near 1 are.
	f := func(r float64) float64 { return (1 - share) - NormalUpper(r-c) - NormalUpper(r+c) }
	hi := c + NormalQuantile((1+share)/2) // covers share on the side of c alone
	return rootWithin(f, 0, hi+1e-9)
}

// ToleranceInterval is an interval that covers a share of what a sample was drawn
// from with a confidence.
type ToleranceInterval struct {
	Low, High  float64 // ends in the unit of the sample; ±Inf: that side is open, NaN: none could be had
	N          int     // values it was made from
	K          float64 // factor of the sd; NaN for order statistics
	Share      float64 // asked to be covered
	Confidence float64 // reached: as asked for normal samples, not less for order statistics
}

// Sides says which ends an interval has.
type Sides int

// Both ends, only a lower one (most values lie above it), only an upper one.
const (
	Both Sides = iota
	LowerOnly
	UpperOnly
)

// NormalTolerance is the tolerance interval mean ± k sd of a sample from a normal
// distribution, which nothing here checks. NaN ends for fewer than 2 values.
// Uses [ToleranceFactor] and [ToleranceFactorTwoSided]. Checked:
// TestToleranceInterval.
func NormalTolerance(x []float64, sides Sides, share, confidence float64) ToleranceInterval {
	mean, sd := MeanSD(x)
	t := ToleranceInterval{N: len(x), Share: share, Confidence: confidence}
	if sides == Both {
		t.K = ToleranceFactorTwoSided(t.N, share, confidence)
	} else {
		t.K = ToleranceFactor(t.N, share, confidence)
	}
	t.Low, t.High = mean-t.K*sd, mean+t.K*sd
	return t.open(sides)
}

func (t ToleranceInterval) open(sides Sides) ToleranceInterval {
	switch sides {
	case LowerOnly:
		t.High = math.Inf(1)
	case UpperOnly:
		t.Low = math.Inf(-1)
	}
	return t
}

// FreeSize is how many values it takes until their least and greatest (sides
// Both), or one of them, bound at least the share given with the confidence
// given, whatever the distribution: the least n with
//
//	P(Binomial(n, 1-share) >= m) >= confidence,  m = 2 for both sides, else 1.
//
// 0 where share or confidence is not between 0 and 1, or more than 1e9 would be
// needed. Source: S. S. Wilks, "Determination of sample sizes for setting
// tolerance limits" (Ann. Math. Stat. 12, 1941). Checked: TestFreeTolerance.
func FreeSize(sides Sides, share, confidence float64) int {
	if !inside(share) || !inside(confidence) {
		return 0
	}
	m := blocks(sides)
	return leastInt(m, 1e9, func(n int) bool { return FreeConfidence(n, m, share) >= confidence*(1-1e-13) })
}

// FreeConfidence is the confidence with which the interval that leaves out m
// blocks of n ordered values covers at least the share given: m = 1 from the
// least value upwards, or up to the greatest; m = 2 from the least to the
// greatest; one more for each value left out at an end. NaN for n or m below 1
// and m above n.
func FreeConfidence(n, m int, share float64) float64 {
	if m < 1 || m > n || !inside(share) {
		return math.NaN()
	}
	return BinomialUpper(m, n, 1-share)
}

// FreeBlocks is how many blocks may be left out of n ordered values so that the
// rest covers at least the share given with the confidence given; 0: none, the
// values are too few. With one side open it is the rank of the value to take,
// counted from the end. See [FreeConfidence].
func FreeBlocks(n int, share, confidence float64) int {
	if n < 1 || !inside(share) || !inside(confidence) || FreeConfidence(n, 1, share) < confidence*(1-1e-13) {
		return 0
	}
	return leastInt(1, n, func(m int) bool { return m == n || FreeConfidence(n, m+1, share) < confidence*(1-1e-13) })
}

// FreeShare is the share that the interval leaving out m blocks of n ordered
// values covers at least, with the confidence given. See [FreeConfidence].
func FreeShare(n, m int, confidence float64) float64 {
	if m < 1 || m > n || !inside(confidence) {
		return math.NaN()
	}
	// In the logarithm of the odds, where near 0 and near 1 are far.
	f := func(l float64) float64 {
		return math.Log((1 - confidence) / BinomialLower(m-1, n, 1/(1+math.Exp(l))))
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

// FreeTolerance is the tolerance interval between two values of a sample,
// whatever the distribution: as many values as may be are left out at the ends,
// equally on both where both sides are bounded, one more at the lower end of an
// odd number. Confidence is the one reached. NaN ends where the sample is too
// small; values that are ±Inf stand for what is above or below every number.
func FreeTolerance(x []float64, sides Sides, share, confidence float64) ToleranceInterval {
	t := ToleranceInterval{Low: math.NaN(), High: math.NaN(), N: len(x), K: math.NaN(), Share: share, Confidence: math.NaN()}
	m := FreeBlocks(len(x), share, confidence)
	if m < blocks(sides) {
		return t
	}
	s := Sorted(x)
	t.Confidence = FreeConfidence(len(x), m, share)
	switch sides {
	case LowerOnly:
		t.Low = s[m-1]
	case UpperOnly:
		t.High = s[len(s)-m]
	default:
		t.Low, t.High = s[(m+1)/2-1], s[len(s)-m/2]
	}
	return t.open(sides)
}

func blocks(sides Sides) int {
	if sides == Both {
		return 2
	}
	return 1
}

func inside(p float64) bool { return p > 0 && p < 1 }

// leastInt is the least n from lo to hi for which yes, which stays yes from there
// on; 0 where there is none.
func leastInt(lo, hi int, yes func(int) bool) int {
	step := 1
	n := lo
	for n < hi && !yes(n) {
		lo = n + 1
		n = min(hi, n+step)
		step *= 2
	}
	if n >= hi {
		if !yes(hi) {
			return 0
		}
		n = hi
	}
	for lo < n {
		if mid := lo + (n-lo)/2; yes(mid) {
			n = mid
		} else {
			lo = mid + 1
		}
	}
	return n
}
