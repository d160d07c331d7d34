package stats

import "math"

// ModifiedZ gives 0.6745 (x - median) / MAD for every value of x, in its order;
// NaN or ±Inf where MAD is 0.
//
// Source: Iglewicz and Hoaglin, "How to Detect and Handle Outliers", 1993.
// Checked: TestMAD.
func ModifiedZ(x []float64) []float64 {
	m, mad := Median(x), MAD(x)
	z := make([]float64, len(x))
	for i, v := range x {
		z[i] = 0.6745 * (v - m) / mad
	}
	return z
}

// Fences are quartiles and the four box-plot fences of a sample, in its unit.
type Fences struct {
	Q1, Median, Q3       float64
	InnerLow, InnerHigh  float64 // 1.5 interquartile ranges outside the quartiles
	OuterLow, OuterHigh  float64 // 3 interquartile ranges outside
	OutsideInner, Beyond int     // values between inner and outer fences; beyond the outer ones
}

// FencesOf gives the fences of x with the quartile rule named; NaN and counts of
// 0 for an empty slice.
//
// Source: Tukey, "Exploratory Data Analysis", 1977; quartile rule by NIST/SEMATECH
// e-Handbook 7.1.6 is [Type6]. Checked: TestFences.
func FencesOf(x []float64, rule QuantileRule) Fences {
	s := Sorted(x)
	f := Fences{Q1: Quantile(s, 0.25, rule), Median: MedianSorted(s), Q3: Quantile(s, 0.75, rule)}
	iqr := f.Q3 - f.Q1
	f.InnerLow, f.InnerHigh = f.Q1-1.5*iqr, f.Q3+1.5*iqr
	f.OuterLow, f.OuterHigh = f.Q1-3*iqr, f.Q3+3*iqr
	for _, v := range s {
		switch {
		case v < f.OuterLow || v > f.OuterHigh:
			f.Beyond++
		case v < f.InnerLow || v > f.InnerHigh:
			f.OutsideInner++
		}
	}
	return f
}

// Grubbs is max |x - mean| / sd, and the index of the value that has it; NaN and
// -1 for fewer than three values or no spread.
//
// Source: Grubbs, "Procedures for detecting outlying observations in samples",
// Technometrics 11 (1969) 1-21. Checked: TestGrubbs.
func Grubbs(x []float64) (g float64, index int) {
	mean, sd := MeanSD(x)
	if len(x) < 3 || !(sd > 0) || math.IsInf(sd, 0) {
		return math.NaN(), -1
	}
	index = -1
	for i, v := range x {
		if z := math.Abs(v-mean) / sd; index < 0 || z > g {
			g, index = z, i
		}
	}
	return g, index
}

// GrubbsCritical is the value that [Grubbs] of n normal values exceeds with a
// probability of at most alpha: in both directions, or in one that was named
// before looking when oneSided. NaN for n < 3. Checked: TestGrubbs.
func GrubbsCritical(n int, alpha float64, oneSided bool) float64 {
	if n < 3 {
		return math.NaN()
	}
	N := float64(n)
	p := alpha / N
	if !oneSided {
		p /= 2
	}
	t := UpperT(p, N-2)
	return (N - 1) / math.Sqrt(N) * math.Sqrt(t*t/(N-2+t*t))
}
