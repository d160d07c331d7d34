package stats

import "math"

// The studentised range is the range of k independent standard normal values over
// an independent standard deviation with df degrees of freedom. With F the normal
// distribution and f its density, the range of k values alone stays below w with
// probability
//
//	k ∫ f(z) [F(z) - F(z-w)]^(k-1) dz
//
// and exceeds it with k ∫ f(z) [F(z)^(k-1) - (F(z)-F(z-w))^(k-1)] dz, which has no
// difference of near-equal numbers left once the bracket is written with expm1.
// Both are averaged over s = exp(u), the standard deviation, whose density in u is
// proportional to exp(df (u - s²/2)). All of these are analytic and fall off fast at
// both ends, where equal steps converge exponentially.
//
// Source: Tukey (1953); Harter, "Tables of range and studentized range", Annals of
// Mathematical Statistics 31 (1960) 1122-1147 (both from memory; the integrals are
// elementary). Checked: TestStudentizedRange against integration with 40 digits,
// TestStudentizedRangeOfTwo against Student's t.

const (
	// rangeStep times 1/√k is the step of z. The narrowest integrand there is behaves
	// as exp(-k z²/2), for which equal steps h err by 2 exp(-2π²/(k h²)): 6e-18.
	rangeStep = 0.7
	// rangeReach is how far from its middle an integrand in z is followed: exp(-8.5²/2)
	// is 2e-16, and most fall faster.
	rangeReach = 8.5
	// scaleStep, and for many degrees of freedom scaleNarrow times 1/√(df+k), are the
	// step h of u. At u + iv the density is larger than at u by up to cos(2v)^(-df/2), so
	// that equal steps err by the least over v of that times exp(-2πv/h): below 1e-13
	// for every df.
	scaleStep   = 0.1
	scaleNarrow = 0.4
	// negligible is the share of a sum below which a term ends it.
	negligible = 1e-17
)

// StudentizedRangeUpper is the probability that the studentised range of k values
// with df degrees of freedom exceeds q; with k = 2 it is twice [TUpper] of q/√2.
//
// Inputs: q without unit; k at least 2; df at least 1, +Inf for a known standard
// deviation. Result: NaN for other k, df and for q that is no number; 1 for q not
// above 0. Relative error below 1e-11 down to 1e-200.
func StudentizedRangeUpper(q float64, k int, df float64) float64 {
	return studentized(q, k, df, true)
}

// StudentizedRangeCDF is the probability that the studentised range stays below q;
// arguments as for [StudentizedRangeUpper]. It keeps its digits where it is small.
func StudentizedRangeCDF(q float64, k int, df float64) float64 {
	return studentized(q, k, df, false)
}

// StudentizedRangeQuantile is the value that the studentised range falls below with
// probability p, 0 < p < 1, to a relative error of 1e-10; NaN outside, and as
// [StudentizedRangeUpper] is. p next to 1 limits it by its own digits.
func StudentizedRangeQuantile(p float64, k int, df float64) float64 {
	if !(p > 0 && p < 1) || !(studentized(1, k, df, true) >= 0) {
		return math.NaN()
	}
	// The smaller tail decides; in logarithms it is near a straight line.
	upper, target := p > 0.5, p
	if upper {
		target = 1 - p
	}
	off := func(logq float64) float64 {
		d := math.Log(studentized(math.Exp(logq), k, df, upper) / target)
		if upper {
			d = -d
		}
		return d
	}
	lo, hi := 0.0, 1.0
	flo, fhi := off(lo), off(hi)
	for step := 1.0; fhi < 0 && hi < 700; step *= 1.5 {
		lo, flo = hi, fhi
		hi += step
		fhi = off(hi)
	}
	for step := 1.0; flo > 0 && lo > -700; step *= 1.5 {
		hi, fhi = lo, flo
		lo -= step
		flo = off(lo)
	}
	if !(flo <= 0 && fhi >= 0) {
		return math.NaN()
	}
	return math.Exp(falsePosition(off, lo, flo, hi, fhi, 1e-13))
}

// falsePosition is the root of an increasing f between lo and hi, where it is flo <= 0
// and fhi >= 0, to within tol (absolute). An end that stays has its value halved, so
// that both ends move.
func falsePosition(f func(float64) float64, lo, flo, hi, fhi, tol float64) float64 {
	side := 0
	for range 200 {
		if hi-lo <= tol || flo == 0 || fhi == 0 {
			break
		}
		x := lo - flo*(hi-lo)/(fhi-flo)
		if math.IsInf(flo, 0) || math.IsInf(fhi, 0) || !(x > lo && x < hi) {
			x = lo + (hi-lo)/2
		}
		if !(x > lo && x < hi) {
			break
		}
		fx := f(x)
		switch {
		case fx == 0:
			return x
		case fx > 0:
			// A step from the far side that hardly moves it means the root is here.
			if hi-x <= tol && side > 0 {
				return x
			}
			hi, fhi = x, fx
			if side > 0 {
				flo /= 2
			}
			side = 1
		default:
			if x-lo <= tol && side < 0 {
				return x
			}
			lo, flo = x, fx
			if side < 0 {
				fhi /= 2
			}
			side = -1
		}
	}
	if flo == 0 {
		return lo
	}
	if fhi == 0 {
		return hi
	}
	return lo + (hi-lo)/2
}

// studentized is the upper or the lower tail.
func studentized(q float64, k int, df float64, upper bool) float64 {
	switch {
	case math.IsNaN(q) || k < 2 || !(df >= 1):
		return math.NaN()
	case q <= 0 || math.IsInf(q, 1):
		if (q <= 0) == upper {
			return 1
		}
		return 0
	case math.IsInf(df, 1):
		return normalRange(q, k, upper)
	}
	return min(1, overScale(df, float64(k), func(s float64) float64 { return normalRange(q*s, k, upper) }))
}

// overScale is the mean of f(s) >= 0 where s is a sample standard deviation with df
// degrees of freedom of normal values with standard deviation 1. f rises no faster
// than s^k and falls no faster than a normal tail. Sums of positive terms: the result
// has its digits however small it is.
func overScale(df, k float64, f func(s float64) float64) float64 {
	h := min(scaleStep, scaleNarrow/math.Sqrt(df+k))
	var sum, all float64
	for _, way := range []float64{1, -1} {
		last := 0.0
		for i := 0; ; i++ {
			if i == 0 && way < 0 {
				continue
			}
			u := way * h * float64(i)
			g := math.Exp(df * (u - math.Expm1(2*u)/2))
			if g == 0 {
				break
			}
			term := g * f(math.Exp(u))
			sum += term
			all += g
			// Far out in a tail the terms grow before they fall, from 0 even.
			if sum > 0 && g < negligible*all && term <= last && term <= negligible*sum {
				break
			}
			last = term
		}
	}
	return sum / all
}

// normalRange is the probability that the range of k standard normal values lies
// above w > 0, or below it.
func normalRange(w float64, k int, upper bool) float64 {
	n := float64(k)
	h := rangeStep / math.Sqrt(n)
	// Where the range is large the ends lie evenly about 0, the upper one at w/2.
	lo, hi := -float64(rangeReach), w/2+rangeReach
	if upper {
		lo = w/2 - rangeReach
	}
	sum := 0.0
	for i := range int((hi-lo)/h) + 1 {
		z := lo + h*float64(i)
		f := math.Exp(-z * z / 2)
		if !upper {
			sum += f * math.Pow(normalBetween(z-w, z), n-1)
			continue
		}
		whole, below := NormalUpper(-z), NormalUpper(w-z)
		share := below / whole
		var part float64
		if share < 0.5 {
			part = -math.Expm1((n - 1) * math.Log1p(-share))
		} else {
			part = 1 - math.Pow(normalBetween(z-w, z)/whole, n-1)
		}
		sum += f * math.Pow(whole, n-1) * part
	}
	return min(1, n*h*sum/math.Sqrt(2*math.Pi))
}

// normalBetween is the probability that a standard normal value lies between a and
// b > a, with its digits where that is small.
func normalBetween(a, b float64) float64 {
	if w := b - a; w < 0.02 {
		// The series about the middle: what is left out is below w⁶.
		m := (a + b) / 2
		return w * math.Exp(-m*m/2) / math.Sqrt(2*math.Pi) *
			(1 + w*w/24*(m*m-1) + w*w*w*w/1920*(m*m*(m*m-6)+3))
	}
	if a > 0 {
		return NormalUpper(a) - NormalUpper(b)
	}
	if b < 0 {
		return NormalUpper(-b) - NormalUpper(-a)
	}
	return 1 - NormalUpper(b) - NormalUpper(-a)
}
