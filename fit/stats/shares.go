package stats

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// NormalToleranceFactor is the k with which mean ± k sd of n values covers at least
// that share of the normal distribution they come from, with that confidence; two-sided,
// exact.
//
// Inputs: n from 2, share and level between 0 and 1. Result: NaN for others. For a
// mean z/√n off, the share between mean ± k sd is reached when sd/σ is at least r/k,
// where Φ(z/√n + r) - Φ(z/√n - r) = share; the probability of that is integrated over
// z by Simpson's rule, and k is found by bisection; relative error below 1e-6. Source:
// Wald and Wolfowitz, "Tolerance limits for a normal distribution", Annals of
// Mathematical Statistics 17 (1946) 208-215, without their approximation (from
// memory). Checked: TestNormalToleranceFactor.
func NormalToleranceFactor(n int, share, level float64) float64 {
	if n < 2 || !(share > 0 && share < 1) || !(level > 0 && level < 1) {
		return math.NaN()
	}
	const steps, far = 200, 8.0
	nu, root := float64(n-1), math.Sqrt(float64(n))
	var r [steps + 1]float64
	for i := range r {
		r[i] = halfWidth(far*float64(i)/steps/root, share)
	}
	confidence := func(k float64) float64 {
		sum := 0.0
		for i := range r {
			z := far * float64(i) / steps
			f := math.Exp(-z*z/2) * ChiSquareUpper(nu*r[i]*r[i]/(k*k), nu)
			switch {
			case i == 0 || i == steps:
			case i%2 == 1:
				f *= 4
			default:
				f *= 2
			}
			sum += f
		}
		return math.Sqrt(2/math.Pi) * sum * far / steps / 3
	}
	lo, hi := 0.0, 4.0
	for confidence(hi) < level {
		lo, hi = hi, 2*hi
		if hi > 1e9 {
			return math.NaN()
		}
	}
	for hi-lo > 1e-9*hi {
		if mid := (lo + hi) / 2; confidence(mid) < level {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi
}

// halfWidth is the r with Φ(x+r) - Φ(x-r) = share.
func halfWidth(x, share float64) float64 {
	lo, hi := 0.0, x+10
	for hi-lo > 1e-12*hi {
		if r := (lo + hi) / 2; 1-NormalUpper(x+r)-NormalUpper(r-x) < share {
			lo = r
		} else {
			hi = r
		}
	}
	return hi
}

// ToleranceRank is the greatest r with which the range from the r-th least to the
// r-th greatest of n values covers at least that share of the distribution they come
// from, whatever that is, with that confidence; 0 where n is too small for any (below
// 93 for 95 % with 95 %).
//
// Source: Wilks, "Determination of sample sizes for setting tolerance limits", Annals
// of Mathematical Statistics 12 (1941) 91-96: the share covered is Beta(n+1-2r, 2r)
// (from memory). Checked: TestToleranceRank.
func ToleranceRank(n int, share, level float64) int {
	if !(share > 0 && share < 1) || !(level > 0 && level < 1) {
		return 0
	}
	r := 0
	for 2*(r+1) <= n && 1-mathext.RegIncBeta(float64(n+1-2*(r+1)), float64(2*(r+1)), share) >= level {
		r++
	}
	return r
}

// ShareUpper is the one-sided upper confidence limit of a share of which k of n were
// seen; for none of n it is 1 - (1-level)^(1/n). NaN for k or n that are no such
// counts.
//
// Source: Clopper and Pearson, "The use of confidence or fiducial limits illustrated
// in the case of the binomial", Biometrika 26 (1934) 404-413 (from memory). Checked:
// TestShareUpper.
func ShareUpper(k, n int, level float64) float64 {
	switch {
	case k < 0 || n < 1 || k > n || !(level > 0 && level < 1):
		return math.NaN()
	case k == n:
		return 1
	}
	return mathext.InvRegIncBeta(float64(k+1), float64(n-k), level)
}

// CapabilityLower is the one-sided lower confidence limit of (limit - μ)/(3σ) of a
// normal distribution, where c was found with mean and standard deviation of n values.
// Of the nearer of two limits it is that of Ppk, or a little less.
//
// Result: NaN for n below 2 or c that is no number. 3√n c is noncentral t with n-1
// degrees of freedom. Source: the distribution, see [NoncentralTUpper]; common
// practice. Checked: TestCapabilityLower.
func CapabilityLower(c float64, n int, level float64) float64 {
	if n < 2 || math.IsNaN(c) || math.IsInf(c, 0) || !(level > 0 && level < 1) {
		return math.NaN()
	}
	scale, nu := 3*math.Sqrt(float64(n)), float64(n-1)
	// The more the noncentrality the more probable so great a t.
	above := func(x float64) bool { return NoncentralTUpper(scale*c, nu, scale*x) > 1-level }
	lo, hi := c, c
	for step := 0.1; above(lo); step *= 2 {
		lo -= step
	}
	for step := 0.1; !above(hi); step *= 2 {
		hi += step
	}
	for hi-lo > 1e-9*math.Max(1, math.Abs(hi)) {
		if mid := (lo + hi) / 2; above(mid) {
			hi = mid
		} else {
			lo = mid
		}
	}
	return lo
}
