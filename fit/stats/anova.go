package stats

import (
	"cmp"
	"math"
	"slices"
)

// Squares is one line of a table of analysis of variance.
type Squares struct {
	SS float64 // sum of squares, in the unit of the values squared
	DF float64 // its degrees of freedom
	MS float64 // mean square SS/DF; NaN for no degrees of freedom
}

func squares(ss, df float64) Squares {
	s := Squares{SS: ss, DF: df, MS: math.NaN()}
	if df > 0 {
		s.MS = ss / df
	}
	return s
}

// OneWay is the outcome of [AnovaOneWay].
type OneWay struct {
	Groups, N       int     // groups that hold values; values in all
	Between, Within Squares // among the means; within the groups
	F, P            float64 // F = MS between / MS within; the probability of a greater one where all means are equal
	SD              float64 // pooled standard deviation, unit of the values
	RSquared        float64 // share of the sum of squares that lies between, 0 to 1
}

// AnovaOneWay is the one-way analysis of variance: do the means of several groups
// differ by more than the scatter within them explains? It takes the scatter to be
// normal and the same in all groups; see [WelchOneWay] where it is not.
//
// Inputs: groups of any sizes, not modified; empty ones take no part. Result: all NaN
// for fewer than two groups with values and where a value is not finite; F and P NaN
// where every group holds one value only or all values are the same; F +Inf, P 0
// where only the means differ.
//
// The sums are taken over differences, which for values near each other are exact:
// 13 digits of what the numbers as they are held give. Decimals that are not exact in
// binary limit more: of 1000000000000.4 four digits are left behind the point, and F
// has as many. Subtract a constant before rounding to have more.
//
// Source: Fisher (1925); the sums as in [Mean]. Checked: TestCertifiedAnova against
// the reference data sets of NIST, TestAnovaThreeByFive, TestAnovaProperties.
func AnovaOneWay(groups [][]float64) OneWay {
	nan := math.NaN()
	out := OneWay{Between: Squares{nan, nan, nan}, Within: Squares{nan, nan, nan}, F: nan, P: nan, SD: nan, RSquared: nan}
	var all []float64
	for _, g := range groups {
		if len(g) > 0 {
			out.Groups++
		}
		all = append(all, g...)
	}
	out.N = len(all)
	if out.Groups < 2 || !finite(all) {
		return out
	}
	// Against a value amid all of them, the differences are small and mostly exact.
	mid := Mean(all)
	var grand, within float64
	var means, sizes []float64
	for _, g := range groups {
		if len(g) == 0 {
			continue
		}
		d, ss := about(g, mid)
		within += ss
		means, sizes = append(means, d), append(sizes, float64(len(g)))
		grand += d * float64(len(g))
	}
	grand /= float64(out.N)
	between := 0.0
	for i, m := range means {
		between += sizes[i] * (m - grand) * (m - grand)
	}
	out.Between = squares(between, float64(out.Groups-1))
	out.Within = squares(within, float64(out.N-out.Groups))
	out.SD = math.Sqrt(out.Within.MS)
	out.RSquared = between / (between + within)
	out.F = out.Between.MS / out.Within.MS
	out.P = FUpper(out.F, out.Between.DF, out.Within.DF)
	return out
}

// about gives the mean of x less c, and the sum of squares about that mean.
func about(x []float64, c float64) (mean, ss float64) {
	n := float64(len(x))
	for _, v := range x {
		mean += (v - c) / n
	}
	m := c + mean // rounded: only a place from which to take differences
	var sum, low, sq float64
	for _, v := range x {
		d := v - m
		sum += d
		sq += d * d
		low += (v - c) - mean
	}
	return mean + low/n, math.Max(0, sq-sum*sum/n)
}

func finite(x []float64) bool {
	for _, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// Welch is the outcome of [WelchOneWay].
type Welch struct {
	F, DF1, DF2 float64 // statistic and its degrees of freedom
	P           float64 // probability of a greater F where all means are equal
}

// WelchOneWay compares the means of groups whose scatter may differ, each weighed by
// n/s²; for two groups F is the square of Welch's t.
//
// Inputs: as [AnovaOneWay], but every group that is not empty needs two values and
// scatter. Result: NaN where one has not. Source: Welch, "On the comparison of several
// mean values: an alternative approach", Biometrika 38 (1951) 330-336 (from memory).
// Checked: TestWelchOneWay.
func WelchOneWay(groups [][]float64) Welch {
	nan := math.NaN()
	none := Welch{nan, nan, nan, nan}
	var means, weights, spare []float64 // spare: n-1
	all, total := 0.0, 0.0
	for _, g := range groups {
		if len(g) == 0 {
			continue
		}
		m, s := MeanSD(g)
		if !(s > 0) || math.IsInf(s, 0) {
			return none
		}
		n := float64(len(g))
		means, weights, spare = append(means, m), append(weights, n/(s*s)), append(spare, n-1)
		total += n / (s * s)
	}
	k := float64(len(means))
	if k < 2 {
		return none
	}
	for i, m := range means {
		all += weights[i] / total * (m - means[0])
	}
	var a, b float64
	for i, m := range means {
		d := m - means[0] - all
		a += weights[i] * d * d
		r := 1 - weights[i]/total
		b += r * r / spare[i]
	}
	w := Welch{DF1: k - 1, DF2: (k*k - 1) / (3 * b)}
	w.F = a / (k - 1) / (1 + 2*(k-2)/(k*k-1)*b)
	w.P = FUpper(w.F, w.DF1, w.DF2)
	return w
}

// RankAnova is the outcome of [KruskalWallis].
type RankAnova struct {
	H  float64 // statistic, corrected for ties
	DF float64 // groups that hold values, less one
	P  float64 // by chi-square: rough where groups hold fewer than five values
}

// KruskalWallis asks by ranks whether several groups come from one distribution; of
// the values only the order counts, so that far-out ones do no more than others.
//
// Inputs: groups of any sizes, not modified; empty ones take no part; equal values
// share their mean rank. Result: NaN for fewer than two groups with values, where all
// values are the same, or one is NaN. P is that of chi-square, exact only for large
// groups. Source: Kruskal and Wallis, "Use of ranks in one-criterion variance
// analysis", Journal of the American Statistical Association 47 (1952) 583-621 (from
// memory). Checked: TestKruskalWallis, TestKruskalWallisProperties.
func KruskalWallis(groups [][]float64) RankAnova {
	nan := math.NaN()
	none := RankAnova{nan, nan, nan}
	type ranked struct {
		v     float64
		group int
	}
	var all []ranked
	k := 0
	for i, g := range groups {
		if len(g) > 0 {
			k++
		}
		for _, v := range g {
			if math.IsNaN(v) {
				return none
			}
			all = append(all, ranked{v, i})
		}
	}
	if k < 2 {
		return none
	}
	slices.SortFunc(all, func(a, b ranked) int { return cmp.Compare(a.v, b.v) })
	n := float64(len(all))
	above := make([]float64, len(groups)) // sum of ranks less their mean
	ties := 0.0
	for i := 0; i < len(all); {
		j := i
		for j < len(all) && all[j].v == all[i].v {
			j++
		}
		t := float64(j - i)
		ties += t * (t*t - 1)
		for ; i < j; i++ {
			above[all[i].group] += float64(j) - (t-1)/2 - (n+1)/2
		}
	}
	h := 0.0
	for i, g := range groups {
		if len(g) > 0 {
			h += above[i] * above[i] / float64(len(g))
		}
	}
	out := RankAnova{H: 12 / (n * (n + 1)) * h / (1 - ties/(n*(n*n-1))), DF: float64(k - 1)}
	out.P = ChiSquareUpper(out.H, out.DF)
	return out
}
