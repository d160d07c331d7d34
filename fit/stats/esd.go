package stats

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// ESD is the outcome of the generalised extreme studentised deviate test.
type ESD struct {
	R       []float64 // statistic of each step
	Lambda  []float64 // critical value of each step
	Removed []int     // index into x of the value taken out at each step
	Count   int       // outliers: the greatest step with R > Lambda
}

// GeneralizedESD looks for up to most outliers in x, each step at level alpha
// against both sides. The number of outliers is the greatest step that exceeds
// its critical value, not the first failure: that is what keeps two odd values
// from hiding each other.
//
// Inputs: x, finite, any order, not modified; most is cut to n-2. Result: no
// steps for fewer than three values or for values that are not finite; R is 0
// where the remaining values are all equal. Source: Rosner, "Percentage points
// for a generalized ESD many-outlier procedure", Technometrics 25 (1983)
// 165-172. Checked: TestGeneralizedESD.
func GeneralizedESD(x []float64, alpha float64, most int) ESD {
	var out ESD
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(x[a], x[b]) })
	s := make([]float64, len(x))
	for i, j := range order {
		s[i] = x[j]
	}
	for _, st := range peel(s, most) {
		out.R = append(out.R, st.r)
		out.Removed = append(out.Removed, order[st.index])
		out.Lambda = append(out.Lambda, esdCritical(st.n, alpha))
		if out.R[len(out.R)-1] > out.Lambda[len(out.Lambda)-1] {
			out.Count = len(out.R)
		}
	}
	return out
}

// ESDInner gives the part of sorted that [GeneralizedESD] leaves: sorted[lo:hi].
// It computes critical values only where they decide, so that thousands of
// values take well under a millisecond.
func ESDInner(sorted []float64, alpha float64, most int) (lo, hi int) {
	steps := peel(sorted, most)
	count := 0
	for i := len(steps) - 1; i >= 0 && count == 0; i-- {
		st := steps[i]
		if st.r > esdAtLeast(st.n, alpha) && st.r > esdCritical(st.n, alpha) {
			count = i + 1
		}
	}
	lo, hi = 0, len(sorted)
	for _, st := range steps[:count] {
		if st.index == lo {
			lo++
		} else {
			hi--
		}
	}
	return lo, hi
}

// peeled is one step: the statistic of n values, and which one was taken out.
type peeled struct {
	r     float64
	n     int
	index int
}

// peel takes the value farthest from the mean off sorted, most times.
func peel(sorted []float64, most int) []peeled {
	n := len(sorted)
	most = min(most, n-2)
	if most < 1 || math.IsInf(sorted[0], 0) || math.IsInf(sorted[n-1], 0) ||
		slices.ContainsFunc(sorted, math.IsNaN) {
		return nil
	}
	var steps []peeled
	w := windowOf(sorted, 0, n)
	for len(steps) < most {
		sd := w.sd()
		low, high := w.mean-sorted[w.lo], sorted[w.hi-1]-w.mean
		st := peeled{n: w.hi - w.lo, index: w.lo}
		if high > low {
			st.index, low = w.hi-1, high
		}
		if sd > 0 {
			st.r = low / sd
		}
		steps = append(steps, st)
		w = w.without(sorted, st.index)
	}
	return steps
}

// esdCritical is the critical value of a step that has n values left.
func esdCritical(n int, alpha float64) float64 {
	return GrubbsCritical(n, alpha, false)
}

// esdAtLeast is a quick lower bound of [esdCritical]: the first terms of the
// expansion of the t quantile about the normal one, z + (z³+z)/4df (Cornish and
// Fisher 1938; Abramowitz and Stegun 26.7.5, from memory). What follows is above
// 0 in the tails that matter. Checked: TestESDBound.
func esdAtLeast(n int, alpha float64) float64 {
	N := float64(n)
	z := -distuv.UnitNormal.Quantile(alpha / (2 * N))
	if n < 3 || !(z > 1) {
		return 0
	}
	t := z + (z*z*z+z)/(4*(N-2))
	return (N - 1) / math.Sqrt(N) * math.Sqrt(t*t/(N-2+t*t)) * (1 - 1e-9)
}

// window is the mean and sum of squares of sorted[lo:hi], kept up to date while
// values leave at the ends.
type window struct {
	lo, hi  int
	mean    float64
	squares float64
	exact   float64 // sum of squares when it was last computed afresh
}

func windowOf(sorted []float64, lo, hi int) window {
	mean, sd := MeanSD(sorted[lo:hi])
	squares := 0.0
	if hi-lo > 1 {
		squares = sd * sd * float64(hi-lo-1)
	}
	return window{lo: lo, hi: hi, mean: mean, squares: squares, exact: squares}
}

func (w window) sd() float64 {
	return math.Sqrt(math.Max(0, w.squares) / float64(w.hi-w.lo-1))
}

// without takes out the value at index i, one of the two ends.
func (w window) without(sorted []float64, i int) window {
	n := float64(w.hi - w.lo)
	d := sorted[i] - w.mean
	w.mean -= d / (n - 1)
	w.squares -= d * d * n / (n - 1)
	if i == w.lo {
		w.lo++
	} else {
		w.hi--
	}
	// After a far value has left, little is left of the digits: begin again.
	if !(w.squares > 1e-4*w.exact) {
		return windowOf(sorted, w.lo, w.hi)
	}
	return w
}
