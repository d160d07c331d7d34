package stats

import (
	"cmp"
	"math"
	"slices"
)

// The adjusted p of a hypothesis is the smallest level of the whole family at which
// it would be rejected. In all four below, p that are NaN (a test that could not be
// had) or no probabilities stay NaN and do not count towards the size m of the
// family; the input may be in any order, is not modified, and the result is in its
// order. Checked: TestAdjustedP against published counts and against another tool,
// TestAdjustedProperties.

// Bonferroni gives the adjusted p for the error of the whole family under any
// dependence: m p, at most 1.
func Bonferroni(p []float64) []float64 {
	return adjust(p, false, func(_, m float64) float64 { return m })
}

// Holm gives the adjusted p for the error of the whole family under any dependence,
// never above those of [Bonferroni]: the greatest of (m-j+1) p(j) over the j that are
// not above.
//
// Source: Holm, "A simple sequentially rejective multiple test procedure",
// Scandinavian Journal of Statistics 6 (1979) 65-70 (from memory).
func Holm(p []float64) []float64 {
	return adjust(p, false, func(j, m float64) float64 { return m - j + 1 })
}

// Hochberg gives the adjusted p for the error of the whole family where the tests are
// independent or depend positively, never above those of [Holm]: the least of
// (m-j+1) p(j) over the j that are not below.
//
// Source: Hochberg, "A sharper Bonferroni procedure for multiple tests of
// significance", Biometrika 75 (1988) 800-802 (from memory).
func Hochberg(p []float64) []float64 {
	return adjust(p, true, func(j, m float64) float64 { return m - j + 1 })
}

// BenjaminiHochberg gives the adjusted p for the share of false ones among the
// rejections where the tests are independent or depend positively: the least of
// m p(j)/j over the j that are not below.
//
// Source: Benjamini and Hochberg, "Controlling the false discovery rate", Journal of
// the Royal Statistical Society B 57 (1995) 289-300.
func BenjaminiHochberg(p []float64) []float64 {
	return adjust(p, true, func(j, m float64) float64 { return m / j })
}

// adjust multiplies the j-th smallest p by factor(j, m) and makes the results ascend:
// from the largest down taking the least so far (stepUp), or from the smallest up
// taking the greatest.
func adjust(p []float64, stepUp bool, factor func(j, m float64) float64) []float64 {
	out := make([]float64, len(p))
	var order []int
	for i, v := range p {
		out[i] = math.NaN()
		if v >= 0 && v <= 1 {
			order = append(order, i)
		}
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(p[a], p[b]) })
	m := float64(len(order))
	far := 0.0
	if stepUp {
		far = 1
	}
	for s := range order {
		j := s
		if stepUp {
			j = len(order) - 1 - s
		}
		v := min(1, factor(float64(j+1), m)*p[order[j]])
		if stepUp {
			far = min(far, v)
		} else {
			far = max(far, v)
		}
		out[order[j]] = far
	}
	return out
}
