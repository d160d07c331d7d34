package stats

import (
	"math"
	"slices"
)

// Kolmogorov is the largest distance of two empirical distributions.
type Kolmogorov struct {
	Statistic float64 // D, 0..1; NaN for an empty sample or one with a NaN
	At        float64 // the value at and below which the shares differ by D, in the unit of the values
	P         float64 // of a distance at least as large
	Exact     bool    // P counts all arrangements, ties as they are; else it is the limit for large samples
}

// kolmogorovWork is up to how many pairs of values P is counted: about 2000 by
// 2000 values, 30 ms.
const kolmogorovWork = 4e6

// KolmogorovSmirnov compares the distributions of x and y as a whole: place,
// spread and shape. P counts all ways to deal the values, ties as they are, out to
// the samples, up to 4 million pairs; beyond, it is Kolmogorov's limit.
//
// Inputs: any order, not modified; infinite values lie beyond all others. Source:
// Schröer and Trenkler, "Exact and randomization distributions of
// Kolmogorov-Smirnov tests two or three samples", Computational Statistics & Data
// Analysis 20 (1995) 185-202. Checked: TestKolmogorovSmirnov,
// TestKolmogorovEnumeration.
func KolmogorovSmirnov(x, y []float64) Kolmogorov {
	n, m := len(x), len(y)
	nan := math.NaN()
	r := Kolmogorov{Statistic: nan, At: nan, P: nan}
	if n == 0 || m == 0 || slices.ContainsFunc(x, math.IsNaN) || slices.ContainsFunc(y, math.IsNaN) {
		return r
	}
	a, b := Sorted(x), Sorted(y)
	// Distances in units of 1/(n m): whole numbers. ends tells after how many values
	// of both a group of equal ones ends.
	ends := make([]bool, n+m+1)
	far := int64(-1)
	for i, k := 0, 0; i < n || k < m; {
		v := math.Inf(1)
		if i < n {
			v = a[i]
		}
		if k < m {
			v = math.Min(v, b[k])
		}
		for i < n && a[i] == v {
			i++
		}
		for k < m && b[k] == v {
			k++
		}
		ends[i+k] = true
		if d := apart(i, k, n, m); d > far {
			far, r.At = d, v
		}
	}
	N, M := float64(n), float64(m)
	r.Statistic = float64(far) / (N * M)
	if N*M > kolmogorovWork {
		r.P = KolmogorovUpper(r.Statistic * math.Sqrt(N*M/(N+M)))
		return r
	}
	// reach[k] is the probability that dealing i and k values comes to a distance of
	// far or more on the way: sums of small numbers, never 1 minus a large one.
	r.Exact = true
	reach := make([]float64, m+1)
	for i := 0; i <= n; i++ {
		for k := 0; k <= m; k++ {
			switch {
			case ends[i+k] && apart(i, k, n, m) >= far:
				reach[k] = 1
			case i == 0 && k == 0:
				reach[k] = 0
			case i == 0:
				reach[k] = reach[k-1]
			case k > 0:
				reach[k] += (reach[k-1] - reach[k]) * (float64(k) / float64(i+k))
			}
		}
	}
	r.P = reach[m]
	return r
}

// apart is |i/n - k/m| in units of 1/(n m).
func apart(i, k, n, m int) int64 {
	d := int64(i)*int64(m) - int64(k)*int64(n)
	return max(d, -d)
}

// KolmogorovUpper is the probability that the Kolmogorov distribution, the limit
// of √n times the distance of an empirical distribution, exceeds x.
func KolmogorovUpper(x float64) float64 {
	switch {
	case math.IsNaN(x):
		return x
	case x <= 0:
		return 1
	case x < 1:
		// The same function as a sum over the other side converges faster here.
		sum := 0.0
		for k := 1.0; k < 20; k += 2 {
			sum += math.Exp(-k * k * math.Pi * math.Pi / (8 * x * x))
		}
		return 1 - math.Sqrt(2*math.Pi)/x*sum
	}
	sum, sign := 0.0, 1.0
	for k := 1.0; k < 20; k++ {
		sum += sign * math.Exp(-2*k*k*x*x)
		sign = -sign
	}
	return 2 * sum
}
