package stats

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mathext"
)

// Tail probabilities are taken from the tail itself, never as 1 minus the other
// one, so that they keep their digits where they are small: relative error below
// 1e-10 (checked: TestTails, TestTailsAgainstManyDigits). Of symmetric
// distributions the lower tail is the upper one at the negative value; the lower
// tail of F at f is [FUpper] at 1/f with the degrees of freedom exchanged. All
// give NaN for arguments that are no numbers and for degrees of freedom that are
// not above 0.

// NormalUpper is the probability that a standard normal value exceeds z.
func NormalUpper(z float64) float64 { return math.Erfc(z/math.Sqrt2) / 2 }

// NormalQuantile is the value that a standard normal one falls below with
// probability p; ±Inf for p of 0 and 1, NaN outside. The value exceeded with a
// small probability p is -NormalQuantile(p): 1-p would lose its digits.
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
	case math.IsInf(t, 1):
		return 0
	case math.IsInf(t, -1):
		return 1
	case t < 0:
		return 1 - TUpper(-t, df)
	case t < 0.5:
		return 0.5 - tWithin(t, df)
	case t/df*t > 1e20:
		return math.Exp(tLogDensity(t, df)+math.Log(t)) / df // the leading power is all there is
	case df > manyDF:
		return mixed(t, df, 0)
	}
	return mathext.RegIncBeta(df/2, 0.5, 1/(1+t/df*t)) / 2
}

// manyDF is where the incomplete beta function begins to lose digits to the
// difference of two large logarithms of the gamma function.
const manyDF = 1e3

// tWithin is the probability that t with df degrees of freedom lies between 0 and
// t, for t >= 0.
func tWithin(t, df float64) float64 {
	switch {
	case math.IsInf(df, 1):
		return math.Erf(t/math.Sqrt2) / 2
	case df <= manyDF:
		return mathext.RegIncBeta(0.5, df/2, t*t/(df+t*t)) / 2
	case t > 1:
		return 0.5 - TUpper(t, df)
	}
	return quad.Fixed(func(x float64) float64 { return math.Exp(tLogDensity(x, df)) }, 0, t, 20, quad.Legendre{}, 0)
}

// tLogDensity is the logarithm of the density of Student's t with df degrees of
// freedom, not +Inf.
func tLogDensity(t, df float64) float64 {
	// Γ(a+1/2)/Γ(a) in a form whose large parts have cancelled.
	a := df / 2
	ratio := a*math.Log1p(0.5/a) - 0.5 + math.Log(chiScale(a)/chiScale(a+0.5)*math.Sqrt((a+0.5)/(df*math.Pi)))
	return ratio - (df+1)/2*math.Log1p(t/df*t)
}

// UpperT is the value that Student's t with df degrees of freedom exceeds with
// probability p, 0 < p < 1; NaN outside, and for df not above 0. df may be +Inf.
// Relative error below 1e-10 down to p = 1e-300 (checked: TestTails,
// TestUpperTRoundTrip); +Inf where the value passes the range of numbers.
func UpperT(p, df float64) float64 {
	switch {
	case !(p > 0 && p < 1) || !(df > 0):
		return math.NaN()
	case math.IsInf(df, 1):
		return -NormalQuantile(p)
	case p > 0.5:
		return -UpperT(1-p, df)
	case p == 0.5:
		return 0
	}
	if p >= 0.25 {
		// The probability between 0 and t is concave: Newton's method comes from
		// below and does not pass the root.
		t := 0.0
		for range 60 {
			step := (0.5 - p - tWithin(t, df)) / math.Exp(tLogDensity(t, df))
			t += step
			if math.Abs(step) <= 1e-15*t {
				break
			}
		}
		return t
	}
	// Two values that the root is not below: the normal one, and that of the
	// leading power of the tail. From there Newton's method on logarithms, which
	// comes from above after the first step.
	u := math.Log(-NormalQuantile(p))
	if x := (math.Log(p*math.Sqrt(df)) - tLogDensity(0, df)) * 2 / df; x < 0 {
		u = math.Max(u, (math.Log(df)+math.Log(-math.Expm1(x))-x)/2)
	}
	for range 60 {
		t := math.Exp(u)
		if math.IsInf(t, 1) {
			return t
		}
		tail := TUpper(t, df)
		if tail < 0x1p-1021 {
			u -= 0.01 // past the smallest number that keeps its digits: a little back
			continue
		}
		step := math.Log(tail/p) * tail / math.Exp(tLogDensity(t, df)+u)
		u += step
		if math.Abs(step) <= 1e-15 {
			break
		}
	}
	return math.Exp(u)
}

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

// ChiSquareLower is the probability that chi-square with df degrees of freedom
// is at most x.
func ChiSquareLower(x, df float64) float64 {
	if !(df > 0) || math.IsNaN(x) {
		return math.NaN()
	}
	if x <= 0 {
		return 0
	}
	return mathext.GammaIncReg(df/2, x/2)
}

// ChiSquareQuantile is the value that chi-square with df degrees of freedom falls
// below with probability p, 0 < p < 1.
func ChiSquareQuantile(p, df float64) float64 {
	if !(p > 0 && p < 1) || !(df > 0) {
		return math.NaN()
	}
	return chiSquareAt(p, 1-p, df)
}

// ChiSquareUpperQuantile is the value that chi-square with df degrees of freedom
// exceeds with probability p, 0 < p < 1.
func ChiSquareUpperQuantile(p, df float64) float64 {
	if !(p > 0 && p < 1) || !(df > 0) {
		return math.NaN()
	}
	return chiSquareAt(1-p, p, df)
}

// FUpper is the probability that F with d1 and d2 degrees of freedom exceeds f.
// The error grows with the degrees of freedom: 1e-11 with 600 and 2000.
func FUpper(f, d1, d2 float64) float64 {
	if !(d1 > 0) || !(d2 > 0) || math.IsNaN(f) {
		return math.NaN()
	}
	if f <= 0 {
		return 1
	}
	return math.Min(1, mathext.RegIncBeta(d2/2, d1/2, 1/(1+f*(d1/d2))))
}

// FQuantile is the value that F with d1 and d2 degrees of freedom falls below
// with probability p, 0 < p < 1.
func FQuantile(p, d1, d2 float64) float64 {
	if !(p > 0 && p < 1) || !(d1 > 0) || !(d2 > 0) {
		return math.NaN()
	}
	start := NormalQuantile(p) * math.Sqrt(2/d1+2/d2) // nearly normal in the logarithm
	constant := mathext.Lbeta(d1/2, d2/2)
	return positiveAt(p, 1-p, start,
		func(x float64) float64 { return FUpper(1/x, d2, d1) },
		func(x float64) float64 { return FUpper(x, d1, d2) },
		func(x float64) float64 {
			return d1/2*math.Log(x*d1/d2) - (d1+d2)/2*math.Log1p(x*d1/d2) - constant
		})
}

// chiSquareAt is the value with p below and q above.
func chiSquareAt(p, q, df float64) float64 {
	z := NormalQuantile(p)
	if q < p {
		z = -NormalQuantile(q)
	}
	start := math.Log(df)
	if root := 1 - 2/(9*df) + z*math.Sqrt(2/(9*df)); root > 0 { // the cube root is nearly normal
		start += 3 * math.Log(root)
	}
	constant, _ := math.Lgamma(df / 2)
	return positiveAt(p, q, start,
		func(x float64) float64 { return ChiSquareLower(x, df) },
		func(x float64) float64 { return ChiSquareUpper(x, df) },
		func(x float64) float64 { return df/2*math.Log(x/2) - x/2 - constant })
}

// positiveAt is the positive value with probability p below and q above, from the
// tail that is the smaller one, by Newton's method on logarithms of both: there
// the tails are concave, so that after the first step it comes from one side.
// start is a guess of the logarithm, density the logarithm of that of ln x. The
// library's inverse functions are not used: they panic far out.
func positiveAt(p, q, start float64, lower, upper, density func(x float64) float64) float64 {
	tail, want, sign := lower, p, -1.0
	if q < p {
		tail, want, sign = upper, q, 1
	}
	u := math.Max(-20, math.Min(start, 20))
	last := u // where the tail was a number above 0
	for range 200 {
		x := math.Exp(u)
		switch {
		case x == 0 || math.IsNaN(x):
			return x
		case math.IsInf(x, 1):
			return x
		}
		v := tail(x)
		if v < 0x1p-1021 { // past the smallest number that keeps its digits: back
			if math.Abs(u-last) < 1e-12 {
				u -= sign
				last = u
			} else {
				u = last + (u-last)/4
			}
			continue
		}
		last = u
		step := sign * math.Log(v/want) * math.Exp(math.Log(v)-density(x))
		step = math.Max(-50, math.Min(step, 50))
		u += step
		if !(math.Abs(step) > 4e-16*math.Max(1, math.Abs(u))) {
			break
		}
	}
	return math.Exp(u)
}
