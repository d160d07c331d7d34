package stats

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Part is one contribution to a standard uncertainty that is independent of the
// others.
type Part struct {
	U   float64 // contribution in the unit of the result, standard uncertainty; not below 0
	Nu  float64 // its degrees of freedom; +Inf where it is taken to be known exactly
	Box bool    // its distribution is a rectangle
}

// RootSumSquare is the combined standard uncertainty of independent parts: the root
// of the sum of their squares. NaN when one of them is.
//
// Source: JCGM 100:2008 eq. (10) (from memory). Checked: TestEndGauge.
func RootSumSquare(parts []Part) float64 {
	s := 0.0
	for _, p := range parts {
		s += p.U * p.U
	}
	return math.Sqrt(s)
}

// EffectiveNu is the degrees of freedom of the combined standard uncertainty of
// independent parts: u⁴ / Σ(u_i⁴/ν_i) (Welch and Satterthwaite).
//
// Result: +Inf when no part has few; NaN when a part is NaN, or has ν not above 0
// while it contributes. Source: JCGM 100:2008 eq. (G.2b) (from memory). Checked:
// TestEndGauge.
func EffectiveNu(parts []Part) float64 {
	u := RootSumSquare(parts)
	sum := 0.0
	for _, p := range parts {
		if p.U == 0 || math.IsInf(p.Nu, 1) {
			continue
		}
		if !(p.Nu > 0) {
			return math.NaN()
		}
		r := p.U / u
		sum += r * r * r * r / p.Nu
	}
	if math.IsNaN(u) {
		return u
	}
	return 1 / sum
}

// boxShare is how large all other parts together may be against one rectangle for
// the result still to count as a rectangle.
const boxShare = 0.3

// Coverage is the factor k by which the combined standard uncertainty of independent
// parts is multiplied for the interval of that level (0.95): the quantile of
// Student's t at the effective degrees of freedom, these cut to whole ones; where
// one rectangle outweighs the rest, that of the rectangle, level × √3, which is less.
//
// NaN for a level outside 0 to 1, and when [EffectiveNu] is NaN or below 1. Source:
// JCGM 100:2008 G.4.1; the rule of the outweighing rectangle with its limit of 0.3:
// EA-4/02 S9 (both from memory). Checked: TestEndGauge, TestHandheldAtHundredVolts.
func Coverage(parts []Part, level float64) float64 {
	nu := math.Floor(EffectiveNu(parts) * (1 + 1e-12))
	if !(level > 0 && level < 1) || !(nu >= 1) {
		return math.NaN()
	}
	most := Part{}
	for _, p := range parts {
		if p.U > most.U {
			most = p
		}
	}
	u := RootSumSquare(parts)
	if most.Box && math.Sqrt(math.Max(0, u*u-most.U*most.U)) <= boxShare*most.U {
		return level * math.Sqrt(3)
	}
	if math.IsInf(nu, 1) {
		return distuv.UnitNormal.Quantile((1 + level) / 2)
	}
	return -distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}.Quantile((1 - level) / 2)
}

// Propagate takes the standard uncertainties of inputs, which may be correlated,
// through a linear map to several results.
//
// Inputs: c[i][k] is the derivative of result i by input k; u[k] the standard
// uncertainty of input k; r(k, l) the correlation coefficient of inputs k and l,
// asked for k ≠ l only (nil: independent). Result: the combined standard uncertainty
// of every result, and the matrix of their correlation coefficients, NaN for a
// result without uncertainty. Rows of c that are not as long as u give NaN.
//
// Source: JCGM 100:2008 eq. (16), for several results H.2 (from memory). Checked:
// TestImpedance.
func Propagate(c [][]float64, u []float64, r func(k, l int) float64) (uc []float64, corr [][]float64) {
	n := len(c)
	cov := func(a, b []float64) float64 {
		if len(a) != len(u) || len(b) != len(u) {
			return math.NaN()
		}
		s := 0.0
		for k := range u {
			s += a[k] * b[k] * u[k] * u[k]
			if r == nil {
				continue
			}
			for l := range u {
				if l != k {
					s += a[k] * b[l] * u[k] * u[l] * r(k, l)
				}
			}
		}
		return s
	}
	uc, corr = make([]float64, n), make([][]float64, n)
	for i := range c {
		// A sum of squares with correlations of few digits may end a little below 0.
		uc[i] = math.Sqrt(math.Max(0, cov(c[i], c[i])))
	}
	for i := range c {
		corr[i] = make([]float64, n)
		for j := range c {
			corr[i][j] = cov(c[i], c[j]) / (uc[i] * uc[j])
		}
	}
	return uc, corr
}
