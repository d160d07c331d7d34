package stats

import "math"

// NoncentralTUpper is the probability that noncentral t with df degrees of
// freedom and noncentrality delta exceeds t; NaN for df not above 0. df may be
// +Inf: the normal distribution about delta. Relative error below 1e-10 in both
// tails.
//
// Source: the definition, (z+delta)/s > t with z standard normal and s² a
// chi-square over its degrees of freedom, integrated over ln s by the trapezoid
// rule, whose error falls exponentially with the step here. Checked: TestTails,
// TestTailsAgainstManyDigits.
func NoncentralTUpper(t, df, delta float64) float64 {
	switch {
	case !(df > 0) || math.IsNaN(t) || math.IsNaN(delta) || math.IsInf(delta, 0):
		return math.NaN()
	case math.IsInf(t, 0):
		return map[bool]float64{true: 0, false: 1}[t > 0]
	case math.IsInf(df, 1):
		return NormalUpper(t - delta)
	case t == 0:
		return NormalUpper(-delta)
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
	if !(p > 0 && p < 1) || !(df > 0) || math.IsNaN(delta) || math.IsInf(delta, 0) {
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
	for step := 0.5; !(f(hi) >= 0); step *= 2 {
		lo, hi = hi, hi+step
	}
	for step := 0.5; f(lo) > 0; step *= 2 {
		if lo < -700 {
			return math.Inf(-1)
		}
		lo -= step
	}
	return math.Sinh(rootWithin(f, lo, hi))
}

// mixed is the probability that a standard normal value exceeds s t - delta,
// where s² is chi-square with df degrees of freedom over df, for finite arguments.
func mixed(t, df, delta float64) float64 {
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
	curvature := 4*a*lo*lo + ts*ts + math.Abs(ts)*(math.Abs(ts-delta)+1) + delta*delta + 1
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

// rootWithin is where f, which rises from below 0 at lo to above 0 at hi or falls,
// crosses 0, to a few units in the last place: false position after Anderson and
// Björck ("A new high order method of regula falsi type", BIT 13, 1973), halving
// where it does not gain.
func rootWithin(f func(float64) float64, lo, hi float64) float64 {
	flo, fhi := f(lo), f(hi)
	if flo == 0 {
		return lo
	}
	if fhi == 0 {
		return hi
	}
	side, width := 0, math.Abs(hi-lo)
	for k := range 200 {
		if math.Abs(hi-lo) <= 4e-16*math.Max(math.Abs(lo), math.Abs(hi)) {
			break
		}
		x := hi - fhi*(hi-lo)/(fhi-flo)
		if k%4 == 3 {
			if math.Abs(hi-lo) > width/4 || !(x > math.Min(lo, hi) && x < math.Max(lo, hi)) {
				x = lo + (hi-lo)/2
			}
			width = math.Abs(hi - lo)
		}
		if x == lo || x == hi || math.IsNaN(x) || math.IsInf(x, 0) {
			x = lo + (hi-lo)/2
		}
		fx := f(x)
		if fx == 0 || math.IsNaN(fx) {
			return x
		}
		if (fx > 0) == (fhi > 0) {
			if side == 1 {
				flo *= shrink(fx, fhi)
			}
			hi, fhi, side = x, fx, 1
		} else {
			if side == -1 {
				fhi *= shrink(fx, flo)
			}
			lo, flo, side = x, fx, -1
		}
	}
	if math.Abs(flo) < math.Abs(fhi) {
		return lo
	}
	return hi
}

// shrink is the factor for the value at the end that has stayed.
func shrink(now, before float64) float64 {
	if m := 1 - now/before; m > 0 {
		return m
	}
	return 0.5
}
