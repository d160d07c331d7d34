package stats

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// Power is the chance that a test finds what is there, 0..1; NaN for arguments out
// of range. In all of it alpha is the level of the test (for two one-sided tests,
// of either), and standard deviations are those of single values.

// TPower is the chance that a t test at level alpha rejects when its statistic has
// df degrees of freedom and noncentrality delta (true difference over standard
// error): in either direction when twoSided, else upwards. Noncentral t, both
// tails. Checked: TestPower.
func TPower(delta, df, alpha float64, twoSided bool) float64 {
	if !(df > 0) || !(alpha > 0 && alpha < 1) || math.IsNaN(delta) || math.IsInf(delta, 0) {
		return math.NaN()
	}
	if !twoSided {
		return NoncentralTUpper(UpperT(alpha, df), df, delta)
	}
	t := UpperT(alpha/2, df)
	return NoncentralTUpper(t, df, delta) + NoncentralTLower(-t, df, delta)
}

// OneSamplePower is the power of [OneSampleT] or [PairedT] with n values (or pairs)
// when the mean lies effect standard deviations off (those of the differences, for
// pairs). NaN for n < 2. Checked: TestPower.
func OneSamplePower(n int, effect, alpha float64, twoSided bool) float64 {
	return oneSamplePower(float64(n), effect, alpha, twoSided)
}

func oneSamplePower(n, effect, alpha float64, twoSided bool) float64 {
	return TPower(effect*math.Sqrt(n), n-1, alpha, twoSided)
}

// TwoSamplePower is the power of [PooledT] with n and m values when the means lie
// effect standard deviations apart; that of [WelchT] is a little lower unless n
// and m are equal. NaN when there are fewer than three values or a sample has none.
// Checked: TestPower.
func TwoSamplePower(n, m int, effect, alpha float64, twoSided bool) float64 {
	return twoSamplePower(float64(n), float64(m), effect, alpha, twoSided)
}

func twoSamplePower(n, m, effect, alpha float64, twoSided bool) float64 {
	if n < 1 || m < 1 {
		return math.NaN()
	}
	return TPower(effect/math.Sqrt(1/n+1/m), n+m-2, alpha, twoSided)
}

// mostValues is where the search for a sample size gives up.
const mostValues = 10_000_000

// OneSampleSize is the smallest number of values (or pairs) for which
// [OneSamplePower] is at least power; 0 when ten million are not enough or an
// argument is out of range: power in (alpha, 1), effect not 0, and above 0 for one
// side. Checked: TestPower.
func OneSampleSize(effect, alpha, power float64, twoSided bool) int {
	return smallestSize(power, alpha, func(n int) float64 { return OneSamplePower(n, effect, alpha, twoSided) })
}

// TwoSampleSize is the smallest number of values of each of two samples for which
// [TwoSamplePower] is at least power; 0 as for [OneSampleSize]. Checked: TestPower.
func TwoSampleSize(effect, alpha, power float64, twoSided bool) int {
	return smallestSize(power, alpha, func(n int) float64 { return TwoSamplePower(n, n, effect, alpha, twoSided) })
}

// smallestSize is the smallest n from 2 for which chance(n), which rises with n,
// is at least power; 0 when there is none.
func smallestSize(power, alpha float64, chance func(n int) float64) int {
	if !(power > alpha && power < 1) {
		return 0
	}
	low, high := 1, 2
	for !(chance(high) >= power) {
		low, high = high, 2*high
		if high > mostValues {
			return 0
		}
	}
	for high-low > 1 {
		if mid := (low + high) / 2; chance(mid) >= power {
			high = mid
		} else {
			low = mid
		}
	}
	return high
}

// EquivalencePower is the chance that [EquivalenceOf] by [PooledT] shows two
// samples of n and m values, both with standard deviation sd, to differ by between
// low and high, when they differ by shift. Exact, by integration over the standard
// deviation that will be found; the product of two noncentral t tails is not. NaN
// unless low < high, sd > 0 and there are three values, one in each. Checked:
// TestEquivalencePower.
func EquivalencePower(n, m int, shift, low, high, sd, alpha float64) float64 {
	N, M := float64(n), float64(m)
	if n < 1 || m < 1 {
		return math.NaN()
	}
	return equivalencePower(N+M-2, shift, low, high, sd*math.Sqrt(1/N+1/M), alpha)
}

// PairedEquivalencePower is [EquivalencePower] of [PairedT] with n pairs, sd that
// of the differences.
func PairedEquivalencePower(n int, shift, low, high, sd, alpha float64) float64 {
	return equivalencePower(float64(n-1), shift, low, high, sd/math.Sqrt(float64(n)), alpha)
}

func equivalencePower(df, shift, low, high, se, alpha float64) float64 {
	if !(df > 0) || !(low < high) || !(se > 0) || !(alpha > 0 && alpha < 0.5) || math.IsNaN(shift+low+high) {
		return math.NaN()
	}
	a, b := (low-shift)/se, (high-shift)/se
	t := UpperT(alpha, df)
	// s is the standard error found over the true one; beyond the last both tests
	// cannot reject.
	last := (b - a) / (2 * t)
	return overChi(df, last, func(s float64) float64 { return normalWithin(a+t*s, b-t*s) })
}

// normalWithin is the probability of a standard normal value between a and b, 0
// when they are in the wrong order.
func normalWithin(a, b float64) float64 {
	if !(a < b) {
		return 0
	}
	return normalBetween(a, b)
}

// overChi is the mean of f(s) over s, the root of chi-square over its df degrees of
// freedom, from 0 to last, above which f is 0.
func overChi(df, last float64, f func(s float64) float64) float64 {
	nodes, weights := chiRule(df, last)
	sum := 0.0
	for i, s := range nodes {
		sum += weights[i] * f(s)
	}
	return math.Min(1, sum)
}

// chiRule are nodes and weights for the mean over s, the root of chi-square over
// its df degrees of freedom, from 0 to last.
func chiRule(df, last float64) (nodes, weights []float64) {
	// All but 1e-17 lies here.
	from := math.Sqrt(ChiSquareQuantile(1e-17, df) / df)
	to := math.Min(last, math.Sqrt(ChiSquareUpperQuantile(1e-17, df)/df))
	if !(from < to) {
		return nil, nil
	}
	const pieces, each = 8, 16
	x, w := make([]float64, each), make([]float64, each)
	a, scale := df/2, chiScale(df/2)
	for i := range pieces {
		quad.Legendre{}.FixedLocations(x, w, from+(to-from)*float64(i)/pieces, from+(to-from)*float64(i+1)/pieces)
		for k, s := range x {
			// The density of s, large parts cancelled: s = 1+d.
			d := s - 1
			nodes = append(nodes, s)
			weights = append(weights, w[k]*scale/s*math.Exp(2*a*(math.Log1p(d)-d-d*d/2)))
		}
	}
	return nodes, weights
}

// EquivalenceSize is the smallest number of values of each of two samples for which
// [EquivalencePower] is at least power; 0 when ten million are not enough, which is
// so when shift is not between low and high, or an argument is out of range.
// Checked: TestEquivalencePower.
func EquivalenceSize(shift, low, high, sd, alpha, power float64) int {
	if !(low < shift && shift < high) {
		return 0
	}
	return smallestSize(power, 0, func(n int) float64 { return EquivalencePower(n, n, shift, low, high, sd, alpha) })
}
