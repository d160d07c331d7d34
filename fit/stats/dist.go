package stats

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// Tail probabilities are taken from the tail itself, never as 1 minus the other
// one, so that they keep their digits where they are small: relative error below
// 1e-10 (checked: TestTails). All give NaN for arguments that are no numbers and
// for degrees of freedom that are not above 0.

// NormalUpper is the probability that a standard normal value exceeds z.
func NormalUpper(z float64) float64 { return math.Erfc(z/math.Sqrt2) / 2 }

// NormalQuantile is the value that a standard normal one falls below with
// probability p; ±Inf for p of 0 and 1, NaN outside.
func NormalQuantile(p float64) float64 {
	if !(p >= 0 && p <= 1) {
		return math.NaN()
	}
	return mathext.NormalQuantile(p)
}

// TUpper is the probability that Student's t with df degrees of freedom exceeds
// t. df may be +Inf: the normal distribution.
func TUpper(t, df float64) float64 {
	switch {
	case !(df > 0) || math.IsNaN(t):
		return math.NaN()
	case math.IsInf(df, 1):
		return NormalUpper(t)
	case math.IsInf(t, 0):
		return map[bool]float64{true: 0, false: 1}[t > 0]
	case t < 0:
		return 1 - TUpper(-t, df)
	}
	switch {
	case df > tMany:
		// A power of df/2 of a number next to 1 would lose its digits.
		return overScale(df, 1, func(s float64) float64 { return NormalUpper(t * s) })
	case t < 1:
		// The other form would lose the digits of df/(df+t²); 0.5 has none to lose yet.
		return 0.5 - mathext.RegIncBeta(0.5, df/2, t*t/(df+t*t))/2
	}
	return mathext.RegIncBeta(df/2, 0.5, 1/(1+t/df*t)) / 2
}

// tMany is the degrees of freedom above which [TUpper] averages the normal tail.
const tMany = 1000

// ChiSquareUpper is the probability that chi-square with df degrees of freedom
// exceeds x.
func ChiSquareUpper(x, df float64) float64 {
	if !(df > 0) || math.IsNaN(x) {
		return math.NaN()
	}
	if x <= 0 {
		return 1
	}
	return mathext.GammaIncRegComp(df/2, x/2)
}

// ChiSquareQuantile is the value that chi-square with df degrees of freedom falls
// below with probability p, 0 < p < 1.
func ChiSquareQuantile(p, df float64) float64 {
	if !(p > 0 && p < 1) || !(df > 0) {
		return math.NaN()
	}
	return distuv.ChiSquared{K: df}.Quantile(p)
}

// FUpper is the probability that F with d1 and d2 degrees of freedom exceeds f.
func FUpper(f, d1, d2 float64) float64 {
	if !(d1 > 0) || !(d2 > 0) || math.IsNaN(f) {
		return math.NaN()
	}
	if f <= 0 {
		return 1
	}
	return mathext.RegIncBeta(d2/2, d1/2, 1/(1+f*(d1/d2)))
}

// FQuantile is the value that F with d1 and d2 degrees of freedom falls below
// with probability p, 0 < p < 1.
func FQuantile(p, d1, d2 float64) float64 {
	if !(p > 0 && p < 1) || !(d1 > 0) || !(d2 > 0) {
		return math.NaN()
	}
	return distuv.F{D1: d1, D2: d2}.Quantile(p)
}

// NoncentralTUpper is the probability that noncentral t with df degrees of
// freedom and noncentrality delta exceeds t.
func NoncentralTUpper(t, df, delta float64) float64 {
	if !(df > 0) || math.IsNaN(t) || math.IsNaN(delta) {
		return math.NaN()
	}
	return 1 - distuv.NoncentralT{Nu: df, Mu: delta}.CDF(t)
}

// NoncentralTQuantile is the value that noncentral t with df degrees of freedom
// and noncentrality delta falls below with probability p, 0 < p < 1.
func NoncentralTQuantile(p, df, delta float64) float64 {
	if !(p > 0 && p < 1) || !(df > 0) || math.IsNaN(delta) {
		return math.NaN()
	}
	return distuv.NoncentralT{Nu: df, Mu: delta}.Quantile(p)
}
