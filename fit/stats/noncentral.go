package stats

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// NoncentralTUpper is the probability that noncentral t with df degrees of
// freedom and noncentrality delta exceeds t; NaN for df below 0.01. df may be
// +Inf: the normal distribution about delta. Relative error below 1e-10 in both
// tails.
//
// Source: the definition, (z+delta)/s > t with z standard normal and s² a
// chi-square over its degrees of freedom, integrated over ln s by the trapezoid
// rule, whose error falls exponentially with the step here; for a delta far above
// the square root of df, over where the normal tail rises only. Checked: TestTails,
// TestTailsAgainstManyDigits.
func NoncentralTUpper(t, df, delta float64) float64 {
	switch {
	case !(df >= 0.01) || math.IsNaN(t) || math.IsNaN(delta) || math.IsInf(delta, 0):
		return math.NaN()
	case math.IsInf(t, 1):
		return 0
	case math.IsInf(t, -1):
		return 1
	case math.IsInf(df, 1):
		return NormalUpper(t - delta)
	case t == 0:
		return NormalUpper(-delta)
	case t > 0 && delta < -39:
		return 0 // below the smallest number
	case t < 0 && delta > 39:
		return 1
	case math.Abs(delta) > 50 && delta*delta > 50*df:
		return steep(t, df, delta)
	}
	return mixed(t, df, delta)
}

// NoncentralTLower is the probability that noncentral t with df degrees of
// freedom and noncentrality delta is at most t, good to small ones.
func NoncentralTLower(t, df, delta float64) float64 {
	return NoncentralTUpper(-t, df, -delta)
}

// NoncentralTQuantile is the value that noncentral t with df degrees of freedom
// and noncentrality delta falls below with probability p, 0 < p < 1; NaN outside.
// The value exceeded with a small probability p is
// -NoncentralTQuantile(p, df, -delta). Checked: TestTails.
func NoncentralTQuantile(p, df, delta float64) float64 {
	if !(p > 0 && p < 1) || !(df >= 0.01) || math.IsNaN(delta) || math.IsInf(delta, 0) {
		return math.NaN()
	}
	if p > 0.5 {
		return -NoncentralTQuantile(1-p, df, -delta)
	}
	// The area hyperbolic sine makes near values of far ones, logarithms a line
	// of a tail.
	f := func(x float64) float64 {
		return math.Log(NoncentralTLower(math.Sinh(x), df, delta) / p)
	}
	hi := math.Asinh(delta) // above the median or little below
	lo := hi
	fhi := f(hi)
	flo := fhi
	for step := 0.5; !(fhi >= 0); step *= 2 {
		lo, flo = hi, fhi
		hi += step
		fhi = f(hi)
	}
	for step := 0.5; flo > 0; step *= 2 {
		if lo < -700 {
			return math.Inf(-1)
		}
		lo -= step
		flo = f(lo)
	}
	return math.Sinh(falsePosition(f, lo, flo, hi, fhi, 1e-17))
}

// mixed is the probability that a standard normal value exceeds s t - delta,
// where s² is chi-square with df degrees of freedom over df, for finite arguments.
func mixed(t, df, delta float64) float64 {
	if df > 1e15 {
		return NormalUpper(t - delta)
	}
	a := df / 2
	// Density of u = ln s: c exp(-a(e^{2u}-1-2u)). The logarithm of the integrand
	// is concave in s; its peak is where this slope is 0.
	slope := func(s float64) float64 {
		z := t*s - delta
		return 2*a*(1/s-s) - t*hazard(z)
	}
	lo, hi := 1.0, 1.0
	for slope(lo) < 0 {
		lo /= 2
	}
	for slope(hi) > 0 {
		hi *= 2
	}
	for range 30 {
		if m := math.Sqrt(lo * hi); slope(m) > 0 {
			lo = m
		} else {
			hi = m
		}
	}
	peak := math.Log(lo)
	ts := t * lo
	curvature := 4*a*lo*lo + (math.Abs(delta)+4)*(math.Abs(delta)+4)
	if z := ts - delta; z > -4 { // else the normal tail is 1 here
		curvature += ts*ts + math.Abs(ts)*(math.Abs(z)+1)
	}
	// Half a width of the peak; and the integrand grows beyond an imaginary part of
	// π/4, for which the error is exp(-π²/2h).
	h := math.Min(0.5/math.Sqrt(curvature), 0.13)
	term := func(u float64) float64 {
		s := math.Exp(u)
		return math.Exp(-a*(math.Expm1(2*u)-2*u)) * math.Erfc((t*s-delta)/math.Sqrt2) / 2
	}
	sum := term(peak)
	for _, step := range []float64{h, -h} {
		for k := 1.0; ; k++ {
			v := term(peak + k*step)
			sum += v
			if !(v > 1e-19*sum) {
				break
			}
		}
	}
	return math.Min(1, sum*h*chiScale(a))
}

// steep is [mixed] for t and delta of one sign and a delta so large that the
// chi-square hardly changes while the normal tail goes from 0 to 1.
func steep(t, df, delta float64) float64 {
	sign := math.Copysign(1, delta)
	t, delta = math.Abs(t), math.Abs(delta)
	chi := func(z float64) float64 { r := (delta + z) / t; return df * r * r }
	// z = s t - delta. For positive signs the tail falls with z: all of it below
	// -10, none above 39; else it rises.
	from, to := -10.0, 39.0
	sum := ChiSquareLower(chi(from), df)
	if sign < 0 {
		from, to = -39, 10
		sum = ChiSquareUpper(chi(to), df)
	}
	a := df / 2
	logScale := math.Log(chiScale(a))
	density := func(z float64) float64 {
		s := (delta + z) / t
		return math.Exp(logScale-a*((s-1)*(s+1)-2*math.Log(s))) / (delta + z) * NormalUpper(sign*z)
	}
	const step = 1.75
	for z := from; z < to; z += step {
		sum += quad.Fixed(density, z, z+step, 16, quad.Legendre{}, 0)
	}
	return math.Min(1, sum)
}

// hazard is the density of a standard normal value over the probability of a
// larger one.
func hazard(z float64) float64 {
	if z > 25 {
		return z + 1/z
	}
	return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) / NormalUpper(z)
}

// chiScale is 2 a^a e^-a / Γ(a).
func chiScale(a float64) float64 {
	if a < 16 {
		g, _ := math.Lgamma(a)
		return 2 * math.Exp(a*math.Log(a)-a-g)
	}
	// Stirling's series: the large terms have gone.
	r := 1 / (a * a)
	series := (1./12 - r*(1./360-r*(1./1260-r*(1./1680-r/1188)))) / a
	return 2 * math.Sqrt(a/(2*math.Pi)) * math.Exp(-series)
}
