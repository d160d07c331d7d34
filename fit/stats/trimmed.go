package stats

import "math"

// Trimmed is a mean without the smallest and largest values, and what its
// standard error follows from.
type Trimmed struct {
	N, Cut       int     // values; how many of them are left out at either end
	Mean         float64 // of the rest, in the unit of the values
	WinsorizedSD float64 // standard deviation with the values left out moved to the nearest one kept
	SE           float64 // standard error of Mean
	DF           float64 // its degrees of freedom: values kept less 1
}

// TrimmedMean leaves out the part trim, 0 <= trim < 0.5, of the values at either
// end, rounded down to whole values: none of fewer than 5 with a trim of 0.2.
//
// Inputs: x, any order, not modified. Infinite values are beyond every other and
// do no harm as long as they are among those left out: a reading over the range
// still has its place. Result: Mean and WinsorizedSD are NaN when an infinite
// value would be kept, when x holds a NaN, and for no values; SE and DF also with
// fewer than two values kept. Source: Tukey and McLaughlin, "Less vulnerable
// confidence and significance procedures for location based on a single sample",
// Sankhya A 25 (1963) 331-352. Checked: TestYuen.
func TrimmedMean(x []float64, trim float64) Trimmed {
	n := len(x)
	nan := math.NaN()
	r := Trimmed{N: n, Mean: nan, WinsorizedSD: nan, SE: nan, DF: nan}
	if n == 0 || !(trim >= 0 && trim < 0.5) {
		return r
	}
	// A hair, so that 0.2 of 5 is 1.
	r.Cut = int(trim*float64(n) + 1e-9)
	kept := n - 2*r.Cut
	if kept < 1 {
		r.Cut, kept = (n-1)/2, n-2*((n-1)/2)
	}
	s := Sorted(x)
	lo, hi := s[r.Cut], s[n-1-r.Cut]
	// A NaN sorts to the front.
	if math.IsNaN(s[0]) || math.IsInf(lo, 0) || math.IsInf(hi, 0) {
		return r
	}
	r.Mean = Mean(s[r.Cut : n-r.Cut])
	for i := range r.Cut {
		s[i], s[n-1-i] = lo, hi
	}
	r.WinsorizedSD = SD(s)
	if h := float64(kept); kept >= 2 {
		r.DF = h - 1
		r.SE = r.WinsorizedSD * math.Sqrt(float64(n-1)/(h*(h-1)))
	}
	return r
}

// TrimmedT tests the trimmed mean of x against null: [OneSampleT] with trim 0.
// Effect is measured in winsorised standard deviations, scaled as in [YuenT].
// Inputs and NaN as for [TrimmedMean].
func TrimmedT(x []float64, null, trim, level float64) TTest {
	m := TrimmedMean(x, trim)
	share := float64(m.Cut) / float64(m.N)
	return tTest(m.Mean, null, m.SE, m.DF, level, m.WinsorizedSD/winsorizedNormal(share), m.DF)
}

// YuenT tests the difference of the trimmed means of x and y against 0, each
// sample with its own spread: [WelchT] with trim 0. With a trim of 0.2 single
// values that lie far off, and infinite ones, hardly move it, and its level holds
// with unequal spreads.
//
// Inputs: any order, not modified, infinite values as for [TrimmedMean]. Effect is
// the difference in pooled winsorised standard deviations times what such a one is
// of a standard normal distribution (0.642 for 0.2), so that it is Cohen's d where
// both are normal. Source: Yuen, "The two-sample trimmed t for unequal population
// variances", Biometrika 61 (1974) 165-170; effect: Algina, Keselman and Penfield,
// "An alternative to Cohen's standardized mean difference effect size",
// Psychological Methods 10 (2005) 317-328. Checked: TestYuen.
func YuenT(x, y []float64, trim, level float64) TTest {
	a, b := TrimmedMean(x, trim), TrimmedMean(y, trim)
	se, df := satterthwaite(a.SE*a.SE, a.DF, b.SE*b.SE, b.DF)
	sd, _ := pooledSD(Summary{a.N, a.Mean, a.WinsorizedSD}, Summary{b.N, b.Mean, b.WinsorizedSD})
	share := float64(a.Cut+b.Cut) / float64(a.N+b.N)
	return tTest(a.Mean-b.Mean, 0, se, df, level, sd/winsorizedNormal(share), a.DF+b.DF)
}

// winsorizedNormal is the standard deviation of a standard normal distribution of
// which the part share at either end has been moved in to where it begins.
func winsorizedNormal(share float64) float64 {
	if !(share > 0) {
		return 1
	}
	z := -NormalQuantile(share)
	density := math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
	return math.Sqrt(1 - 2*share - 2*z*density + 2*share*z*z)
}
