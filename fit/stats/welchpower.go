package stats

import "math"

// WelchPower is the chance that [WelchT] at level alpha, two-sided or upwards, finds
// a difference shift of the means of n and m values with standard deviations sdX
// and sdY. Exact, by integration over both standard deviations that will be found.
// NaN unless n and m are at least 2, both standard deviations above 0, and a
// one-sided alpha below 0.5. Checked:
// TestWelchPower.
func WelchPower(n, m int, shift, sdX, sdY, alpha float64, twoSided bool) float64 {
	if !(alpha > 0 && alpha < 1) || math.IsNaN(shift) {
		return math.NaN()
	}
	tail := alpha
	if twoSided {
		tail /= 2
	}
	if tail >= 0.5 {
		return math.NaN()
	}
	return overWelch(n, m, sdX, sdY, tail, func(se, reach float64) float64 {
		p := NormalUpper(reach - shift/se)
		if twoSided {
			p += NormalUpper(reach + shift/se)
		}
		return p
	})
}

// WelchEquivalencePower is [EquivalencePower] by [WelchT], with a standard
// deviation for each sample; good to six digits. NaN as for [WelchPower]. Checked: TestWelchPower.
func WelchEquivalencePower(n, m int, shift, low, high, sdX, sdY, alpha float64) float64 {
	if !(low < high) || !(alpha > 0 && alpha < 0.5) || math.IsNaN(shift+low+high) {
		return math.NaN()
	}
	return overWelch(n, m, sdX, sdY, alpha, func(se, reach float64) float64 {
		return normalWithin((low-shift)/se+reach, (high-shift)/se-reach)
	})
}

// WelchEquivalenceSize is the smallest number of values of each of two samples for
// which [WelchEquivalencePower] is at least power; 0 as for [EquivalenceSize].
func WelchEquivalenceSize(shift, low, high, sdX, sdY, alpha, power float64) int {
	if !(low < shift && shift < high) {
		return 0
	}
	return smallestSize(power, 0, func(n int) float64 { return WelchEquivalencePower(n, n, shift, low, high, sdX, sdY, alpha) })
}

// overWelch is the mean of f over what Welch's test may find: se is the true
// standard error of the difference, reach the critical value, exceeded with
// probability tail, times the standard error found over the true one.
func overWelch(n, m int, sdX, sdY, tail float64, f func(se, reach float64) float64) float64 {
	if n < 2 || m < 2 || !(sdX > 0) || !(sdY > 0) || math.IsInf(sdX+sdY, 0) {
		return math.NaN()
	}
	v, w := sdX*sdX/float64(n), sdY*sdY/float64(m)
	dx, dy := float64(n-1), float64(m-1)
	se := math.Sqrt(v + w)
	critical := criticalBetween(tail, math.Min(dx, dy), dx+dy)
	nx, wx := chiRule(dx, math.Inf(1))
	ny, wy := chiRule(dy, math.Inf(1))
	alike := n == m && v == w // then what the samples find may be exchanged
	sum := 0.0
	for i, s := range nx {
		if wx[i] < 1e-16 {
			continue
		}
		for k, r := range ny {
			weight := wx[i] * wy[k]
			if alike && k > i {
				break
			} else if alike && k < i {
				weight *= 2
			}
			if weight < 1e-18 {
				continue
			}
			found, df := satterthwaite(v*s*s, dx, w*r*r, dy)
			sum += weight * f(se, critical(df)*found/se)
		}
	}
	return math.Min(1, sum)
}

// criticalBetween is UpperT(tail, df) for df between low and high, by a polynomial
// in 1/df through Chebyshev's points, good to nine digits: the quantile itself
// would be most of the work.
func criticalBetween(tail, low, high float64) func(df float64) float64 {
	const points = 24
	a, b := 1/high, 1/low
	if !(b-a > 1e-12) {
		t := UpperT(tail, high)
		return func(float64) float64 { return t }
	}
	var c [points]float64
	for k := range points {
		at := math.Cos(math.Pi * (float64(k) + 0.5) / points)
		t := math.Log(UpperT(tail, 1/((a+b)/2+(b-a)/2*at)))
		for j := range points {
			c[j] += 2. / points * t * math.Cos(math.Pi*float64(j)*(float64(k)+0.5)/points)
		}
	}
	return func(df float64) float64 {
		// Clenshaw's sum.
		x := (1/df - (a+b)/2) / ((b - a) / 2)
		var y, z float64
		for j := points - 1; j > 0; j-- {
			y, z = 2*x*y-z+c[j], y
		}
		return math.Exp(x*y - z + c[0]/2)
	}
}
