package stats

import "math"

// Capability is how often half a process' spread, three standard deviations, goes
// between its mean and the limits: Cp and Cpk where the sd is that within groups,
// Pp and Ppk where it is that of all values together.
type Capability struct {
	N     int     // values it was made from
	Cp    float64 // both limits: (high-low)/6 sd; NaN with one limit
	Lower float64 // (mean-low)/3 sd; NaN without a lower limit
	Upper float64 // (high-mean)/3 sd; NaN without an upper limit
	Cpk   float64 // the smaller of Lower and Upper; below 0 with the mean outside
}

// CapabilityOf compares mean and sd of n values with limits; a limit that is NaN
// or infinite is none. Everything is NaN for an sd not above 0, and Cpk without
// any limit.
//
// Source: NIST/SEMATECH e-Handbook 6.1.6. Checked: TestCapability.
func CapabilityOf(mean, sd float64, n int, low, high float64) Capability {
	nan := math.NaN()
	c := Capability{N: n, Cp: nan, Lower: nan, Upper: nan, Cpk: nan}
	if !(sd > 0) || math.IsInf(sd, 0) {
		return c
	}
	if isFinite(low) {
		c.Lower = (mean - low) / (3 * sd)
		c.Cpk = c.Lower
	}
	if isFinite(high) {
		c.Upper = (high - mean) / (3 * sd)
		if !(c.Cpk < c.Upper) {
			c.Cpk = c.Upper
		}
	}
	if isFinite(low) && isFinite(high) {
		c.Cp = (high - low) / (6 * sd)
	}
	return c
}

func isFinite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// CpInterval is the interval of level for Cp of n normal values: Cp times the
// root of chi-square over its n-1 degrees of freedom, exact for the sd of all
// values. NaN for n below 2. Source: Kane, "Process capability indices" (J.
// Quality Technology 18, 1986), from memory. Checked: TestCapability.
func CpInterval(cp float64, n int, level float64) (low, high float64) {
	if n < 2 || !inside(level) {
		return math.NaN(), math.NaN()
	}
	df, out := float64(n-1), (1-level)/2
	return cp * math.Sqrt(ChiSquareQuantile(out, df)/df), cp * math.Sqrt(ChiSquareUpperQuantile(out, df)/df)
}

// CpkInterval is the approximate interval of level for Cpk (or Ppk) of n normal
// values, with one limit or two,
//
//	Cpk ± z √(1/9n + Cpk²/2(n-1)),
//
// after Bissell, "How reliable is your capability index?" (Applied Statistics 39,
// 1990). NaN for n below 2. Checked: TestCapability.
func CpkInterval(cpk float64, n int, level float64) (low, high float64) {
	if n < 2 || !inside(level) {
		return math.NaN(), math.NaN()
	}
	d := -NormalQuantile((1-level)/2) * bissell(cpk, n)
	return cpk - d, cpk + d
}

func bissell(cpk float64, n int) float64 {
	return math.Sqrt(1/(9*float64(n)) + cpk*cpk/(2*float64(n-1)))
}

// CpkBound is the lower bound of Cpk (or Ppk) with the confidence given by the
// approximation of [CpkInterval]. NaN for n below 2.
func CpkBound(cpk float64, n int, confidence float64) float64 {
	if n < 2 || !inside(confidence) {
		return math.NaN()
	}
	return cpk - NormalQuantile(confidence)*bissell(cpk, n)
}

// CpkBoundOneLimit is the lower bound with the confidence given of the Ppk of n
// normal values against one limit, exact: 3 Ppk √n follows noncentral t with n-1
// degrees of freedom and noncentrality 3 √n times the true index. For two limits
// it is a bound for the nearer one alone. NaN for n below 2.
//
// Source: the definition of noncentral t; as one-sided tolerance factors turned
// round. Checked: TestCapabilityBounds.
func CpkBoundOneLimit(cpk float64, n int, confidence float64) float64 {
	if n < 2 || !inside(confidence) || !isFinite(cpk) {
		return math.NaN()
	}
	root := 3 * math.Sqrt(float64(n))
	f := func(c float64) float64 {
		return math.Log(NoncentralTUpper(cpk*root, float64(n-1), c*root) / (1 - confidence))
	}
	lo, hi := cpk-1/root, cpk+1/root
	for step := 2 / root; !(f(lo) < 0); step *= 2 {
		lo -= step
	}
	for step := 2 / root; !(f(hi) > 0); step *= 2 {
		hi += step
	}
	return rootWithin(f, lo, hi)
}

// CpkNeeded is the index that n values have to show so that its lower bound with
// the confidence given, by [CpkBoundOneLimit], reaches target.
func CpkNeeded(target float64, n int, confidence float64) float64 {
	if n < 2 || !inside(confidence) || !isFinite(target) {
		return math.NaN()
	}
	root := 3 * math.Sqrt(float64(n))
	return NoncentralTQuantile(confidence, float64(n-1), target*root) / root
}

// CpkSize is the least n for which an index of expected, once found, has a lower
// bound of at least target with the confidence given, by [CpkBoundOneLimit];
// 0 where no n up to 1e6 does, as when expected is not above target.
func CpkSize(expected, target, confidence float64) int {
	if !(expected > target) || !inside(confidence) || !isFinite(expected) || !isFinite(target) {
		return 0
	}
	return leastInt(2, 1e6, func(n int) bool { return CpkNeeded(target, n, confidence) <= expected })
}
