package stats

import "math"

// RankTest is a test by ranks. All numbers are NaN where there are too few
// values or one is no number.
type RankTest struct {
	Statistic float64 // as named at the test
	N, M      int     // values used: of the first sample, of the second (0 with one sample)
	Z         float64 // (Statistic - its mean) / its standard deviation with the ties, no continuity correction
	P         float64 // two-sided
	Greater   float64 // of a Statistic at least as large: small when the first sample lies higher
	Less      float64 // of a Statistic at least as small
	Exact     bool    // P, Greater and Less count all arrangements; else they are normal, with a continuity correction of 1/2
}

// noRankTest is a test that could not be had.
func noRankTest(n, m int) RankTest {
	nan := math.NaN()
	return RankTest{Statistic: nan, N: n, M: m, Z: nan, P: nan, Greater: nan, Less: nan}
}

// normal fills in z and probabilities by the normal distribution.
func (r *RankTest) normal(mean, variance float64) {
	if !(variance > 0) {
		return // all tied: nothing can be said
	}
	sd := math.Sqrt(variance)
	d := r.Statistic - mean
	r.Z = d / sd
	r.Greater, r.Less = NormalUpper((d-0.5)/sd), NormalUpper((-d-0.5)/sd)
	r.P = math.Min(1, 2*NormalUpper((math.Abs(d)-0.5)/sd))
}

// exact fills in probabilities from those of every value of the statistic, given
// in steps of unit from 0.
func (r *RankTest) exact(share []float64, unit, mean float64) {
	at := int(math.Round(r.Statistic / unit))
	// Twice the distance from the mean, in units: a whole number.
	far := math.Abs(math.Round(2 * (r.Statistic - mean) / unit))
	r.Greater, r.Less, r.P = 0, 0, 0
	for k, p := range share {
		if k >= at {
			r.Greater += p
		}
		if k <= at {
			r.Less += p
		}
		if math.Abs(math.Round(2*float64(k)-2*mean/unit)) >= far {
			r.P += p
		}
	}
	r.Greater, r.Less, r.P = math.Min(1, r.Greater), math.Min(1, r.Less), math.Min(1, r.P)
	r.Exact = true
}

// mannWhitneyWork is up to how many steps the exact distribution is counted: about
// 60 by 60 values with ties, 0.1 s.
const mannWhitneyWork = 8e7

// MannWhitney tests whether values of x tend to be larger or smaller than those of
// y. Statistic is U: the pairs with the one of x above, and half of those that are
// equal. P counts all ways to deal the values, ties as they are, out to x and y
// (those with U at least as far from nm/2), up to about 60 by 60 values, or as many
// pairs with one sample small; beyond, it is normal with the variance for ties. It
// is a test of equal distributions: with unequal spreads and sizes its level is
// not that of a test of equal medians.
//
// Inputs: any order, not modified; infinite values rank beyond all others. Result:
// NaN for an empty sample or one with a NaN; P is 1 and Z NaN when all values are
// equal. Source: Mann and Whitney, "On a test of whether one of two random
// variables is stochastically larger than the other", Annals of Mathematical
// Statistics 18 (1947) 50-60; common practice for ties. Checked: TestMannWhitney,
// TestMannWhitneyEnumeration.
func MannWhitney(x, y []float64) RankTest {
	n, m := len(x), len(y)
	r := noRankTest(n, m)
	ranks, groups := Midranks(append(append(make([]float64, 0, n+m), x...), y...))
	if n == 0 || m == 0 || ranks == nil {
		return r
	}
	sum := 0.0
	for _, k := range ranks[:n] {
		sum += k
	}
	N, M := float64(n), float64(m)
	r.Statistic = sum - N*(N+1)/2
	mean := N * M / 2
	if len(groups) == 1 {
		r.P, r.Greater, r.Less, r.Exact = 1, 1, 1, true
		return r
	}
	r.normal(mean, N*M/12*(N+M+1-tieCubes(groups)/((N+M)*(N+M-1))))
	if share, unit := mannWhitneyShares(n, m, groups); share != nil {
		r.exact(share, unit, mean)
	}
	return r
}

// mannWhitneyShares are the probabilities of U = 0, unit, 2 unit ... when n of the
// values, whose groups of equal ones are given in ascending order, are dealt to the
// first sample; unit is 1 without ties and 1/2 with. Nil where that takes more than
// mannWhitneyWork.
func mannWhitneyShares(n, m int, groups []int) (share []float64, unit float64) {
	unit = 1
	if len(groups) < n+m {
		unit = 0.5
	}
	// U of the other sample is n m - U: deal the smaller one, from above.
	if n > m {
		share, unit = mannWhitneyShares(m, n, groups)
		for i, k := 0, len(share)-1; i < k; i, k = i+1, k-1 {
			share[i], share[k] = share[k], share[i]
		}
		return share, unit
	}
	per := int(1 / unit)
	if N, M := float64(n), float64(m); (N+M)*N*(N*M*float64(per)+1) > mannWhitneyWork {
		return nil, unit
	}
	width := n*m*per + 1
	// ways[a][u] is the probability of a values of the first sample and U of u units
	// among the values dealt so far, when each way to choose a of them is equally
	// likely, times that of a there: the weights are hypergeometric.
	ways := make([][]float64, n+1)
	next := make([][]float64, n+1)
	for a := range ways {
		ways[a], next[a] = make([]float64, width), make([]float64, width)
	}
	ways[0][0] = 1
	done := 0
	for _, g := range groups {
		for a := range next {
			clear(next[a])
		}
		for a := max(0, done-m); a <= min(n, done); a++ {
			below := done - a // of the second sample
			top := a * below * per
			// Odds of j of this group for the first sample, given what is left.
			odds := hypergeometric(g, n-a, n+m-done)
			for j, p := range odds {
				if p == 0 || a+j > n || below+g-j > m {
					continue
				}
				up := j*below*per + j*(g-j)*per/2
				from, to := ways[a][:top+1], next[a+j][up:]
				for u, w := range from {
					to[u] += p * w
				}
			}
		}
		ways, next = next, ways
		done += g
	}
	return ways[n], unit
}

// hypergeometric are the probabilities of 0, 1 ... g marked ones among g drawn
// from total, of which marked are.
func hypergeometric(g, marked, total int) []float64 {
	p := make([]float64, g+1)
	if g == 1 { // the common case, without logarithms
		p[1] = float64(marked) / float64(total)
		p[0] = float64(total-marked) / float64(total)
		return p
	}
	all := logChoose(total, g)
	for j := range p {
		if j <= marked && g-j <= total-marked {
			p[j] = math.Exp(logChoose(marked, j) + logChoose(total-marked, g-j) - all)
		}
	}
	return p
}

// logChoose is the logarithm of n over k.
func logChoose(n, k int) float64 {
	a, _ := math.Lgamma(float64(n + 1))
	b, _ := math.Lgamma(float64(k + 1))
	c, _ := math.Lgamma(float64(n - k + 1))
	return a - b - c
}

// signedRankMost is up to how many differences the exact distribution is counted.
const signedRankMost = 200

// SignedRank tests whether the differences x[i]-y[i] lie about 0 evenly: values
// taken twice of the same things. y may be nil: then x are the differences.
// Statistic is the sum of the ranks, by size, of the positive ones; differences of
// 0 are left out and N counts the others; equal sizes share their rank. P counts
// all signs for these ranks up to 200 differences; beyond, it is normal with the
// variance for ties. Differences that are equal in decimals are taken for equal
// though their binary numbers differ in the last places.
//
// Inputs: not modified; infinite values rank beyond all others. Result: NaN for
// slices of different lengths or a difference that is no number; P is 1 and Z NaN
// when no difference is left. Source: Wilcoxon, "Individual comparisons by ranking
// methods", Biometrics Bulletin 1 (1945) 80-83. Checked: TestSignedRank,
// TestSignedRankEnumeration.
func SignedRank(x, y []float64) RankTest {
	r := noRankTest(0, 0)
	if y == nil {
		y = make([]float64, len(x))
	}
	var d, size []float64
	largest := 0.0
	for _, v := range [][]float64{x, y} {
		for _, a := range v {
			if a = math.Abs(a); !math.IsInf(a, 0) {
				largest = math.Max(largest, a)
			}
		}
	}
	slack := 4 * 0x1p-52 * largest
	all := pairDifferences(x, y)
	for _, v := range all {
		if math.Abs(v) > slack || math.IsNaN(v) {
			d, size = append(d, v), append(size, math.Abs(v))
		}
	}
	n := len(d)
	r.N = n
	ranks, groups := midranks(size, slack)
	if len(all) == 0 || n > 0 && ranks == nil {
		return r
	}
	r.Statistic = 0
	doubled := make([]int, n)
	for i, k := range ranks {
		doubled[i] = int(math.Round(2 * k))
		if d[i] > 0 {
			r.Statistic += k
		}
	}
	N := float64(n)
	mean := N * (N + 1) / 4
	r.normal(mean, N*(N+1)*(2*N+1)/24-tieCubes(groups)/48)
	if n <= signedRankMost {
		r.exact(signShares(doubled), 0.5, mean)
	}
	return r
}

// signShares are the probabilities of 0, 1, 2 ... as the sum of those of the ranks
// whose sign, either as likely as the other, is positive.
func signShares(ranks []int) []float64 {
	share := []float64{1}
	for _, k := range ranks {
		next := make([]float64, len(share)+k)
		for s, p := range share {
			next[s] += p / 2
			next[s+k] += p / 2
		}
		share = next
	}
	return share
}
