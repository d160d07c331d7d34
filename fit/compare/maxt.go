package compare

import (
	"math"
	"math/rand/v2"
	"slices"

	"gatesill/fit/stats"
)

// maxT is the quantile of the greatest |T| of multivariate t with that correlation
// matrix, which need not be regular.
func maxT(corr [][]float64, df, level float64) float64 {
	single := stats.UpperT((1-level)/2, df)
	k := len(corr)
	if k == 1 {
		return single
	}
	root := rootOf(corr)
	rng := rand.New(rand.NewPCG(bandSeed, uint64(k)))
	z := make([]float64, k)
	most := make([]float64, bandDraws)
	for d := range most {
		for i := range z {
			z[i] = rng.NormFloat64()
		}
		for i := range root {
			v := 0.0
			for j, r := range root[i] {
				v += r * z[j]
			}
			most[d] = math.Max(most[d], math.Abs(v))
		}
	}
	// The common standard deviation goes evenly through its distribution, which
	// leaves less to chance than drawing it.
	if !math.IsInf(df, 1) {
		const steps = 200
		var s [steps]float64
		for i := range s {
			s[i] = math.Sqrt(stats.ChiSquareQuantile((float64(i)+0.5)/steps, df) / df)
		}
		for d := range most {
			most[d] /= s[d%steps]
		}
	}
	slices.Sort(most)
	bonferroni := stats.UpperT((1-level)/2/float64(k), df)
	return min(max(stats.Quantile(most, level, stats.Type7), single), bonferroni)
}

// rootOf is the lower triangle whose product with its transpose is the matrix
// (Cholesky); directions without variance get none.
func rootOf(m [][]float64) [][]float64 {
	l := make([][]float64, len(m))
	for i := range m {
		l[i] = make([]float64, i+1)
		for j := range i + 1 {
			s := m[i][j]
			for q := range j {
				s -= l[i][q] * l[j][q]
			}
			switch {
			case i == j:
				l[i][i] = math.Sqrt(math.Max(0, s))
			case l[j][j] > 1e-6:
				l[i][j] = s / l[j][j]
			}
		}
	}
	return l
}
