package stats

import (
	"math"
	"sort"
)

// Normality is a test of a sample against the normal distributions, whatever
// their mean and standard deviation.
type Normality struct {
	Statistic float64 // as named at the test; NaN where it could not be had
	Modified  float64 // Anderson-Darling: A²(1+0.75/n+2.25/n²); else NaN
	P         float64 // of a statistic at least as far from normal; NaN where it could not be had
	N         int     // values
}

// noNormality is a test that could not be had.
func noNormality(n int) Normality {
	return Normality{Statistic: math.NaN(), Modified: math.NaN(), P: math.NaN(), N: n}
}

// AndersonDarling is A² = -n - Σ(2i-1)(ln F(z_i) + ln(1-F(z_{n+1-i})))/n of x with
// mean and standard deviation estimated, and its probability by Stephens'
// modification. It is sensitive in the tails.
//
// Inputs: x, any order, not modified. Result: Statistic is A²; P is NaN for n < 8,
// where the modification does not hold; beyond a modified value of 10 P is that of
// 10, 4e-24. All NaN for fewer than three values, values that are no finite
// numbers, or no spread. Source: D'Agostino and Stephens, "Goodness-of-Fit
// Techniques", 1986, table 4.9. Checked: TestAndersonDarling.
func AndersonDarling(x []float64) Normality {
	n := len(x)
	r := noNormality(n)
	mean, sd := MeanSD(x)
	if n < 3 || !(sd > 0) || math.IsInf(sd, 0) {
		return r
	}
	s := Sorted(x)
	sum := 0.0
	for i := range s {
		low, high := (s[i]-mean)/sd, (s[n-1-i]-mean)/sd
		sum += float64(2*i+1) * (math.Log(NormalUpper(-low)) + math.Log(NormalUpper(high)))
	}
	N := float64(n)
	r.Statistic = -N - sum/N
	r.Modified = r.Statistic * (1 + 0.75/N + 2.25/(N*N))
	if n < 8 {
		return r
	}
	switch a := math.Min(r.Modified, 10); {
	case a < 0.2:
		r.P = 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		r.P = 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		r.P = math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	default:
		r.P = math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	}
	return r
}

// ShapiroWilk is W, the squared correlation of the ordered values of x with what
// is expected of normal ones, near 1 for a normal sample, and the probability of
// a smaller one. It is the most powerful of the three for most alternatives, but
// values on a coarse grid, with many ties, lower W.
//
// Inputs: x, 3 to 5000 values in any order, not modified. Result: NaN for other
// numbers of values, values that are no finite numbers, or no spread. Source:
// Royston, "Remark AS R94: a remark on algorithm AS 181: the W-test for normality",
// Applied Statistics 44 (1995) 547-551. Checked: TestShapiroWilk.
func ShapiroWilk(x []float64) Normality {
	n := len(x)
	r := noNormality(n)
	mean, sd := MeanSD(x)
	if n < 3 || n > 5000 || !(sd > 0) || math.IsInf(sd, 0) {
		return r
	}
	s := Sorted(x)
	a := shapiroWeights(n) // of the lower half, negative
	var up, down float64   // Σ a x, Σ (x-mean)²; Σ a² is 1
	for i := range s {
		d := (s[i] - mean) / sd
		down += d * d
		switch {
		case i < n/2:
			up += a[i] * d
		case i >= n-n/2:
			up -= a[n-1-i] * d
		}
	}
	// 1-W as a product of near things, which keeps its digits for W near 1.
	root := math.Sqrt(down)
	rest := math.Max(0, (root-up)*(root+up)/down)
	r.Statistic = 1 - rest
	if n == 3 {
		r.P = math.Max(0, 6/math.Pi*(math.Asin(math.Sqrt(r.Statistic))-math.Asin(math.Sqrt(0.75))))
		return r
	}
	N, y := float64(n), math.Log(rest)
	var m, spread float64
	if n <= 11 {
		limit := -2.273 + 0.459*N
		if y >= limit {
			r.P = 0
			return r
		}
		y = -math.Log(limit - y)
		m = polynomial(N, 0.544, -0.39978, 0.025054, -6.714e-4)
		spread = math.Exp(polynomial(N, 1.3822, -0.77857, 0.062767, -0.0020322))
	} else {
		l := math.Log(N)
		m = polynomial(l, -1.5861, -0.31082, -0.083751, 0.0038915)
		spread = math.Exp(polynomial(l, -0.4803, -0.082676, 0.0030302))
	}
	r.P = NormalUpper((y - m) / spread)
	return r
}

// shapiroWeights are the weights of the lower half of n ordered values.
func shapiroWeights(n int) []float64 {
	if n == 3 {
		return []float64{-math.Sqrt(0.5)}
	}
	half := n / 2
	m := make([]float64, half)
	var squares float64
	for i := range m {
		m[i] = NormalQuantile((float64(i+1) - 0.375) / (float64(n) + 0.25))
		squares += 2 * m[i] * m[i]
	}
	a := make([]float64, half)
	u := 1 / math.Sqrt(float64(n))
	root := math.Sqrt(squares)
	a[0] = m[0]/root - polynomial(u, 0, 0.221157, -0.147981, -2.07119, 4.434685, -2.706056)
	first, left, rest := 1, squares-2*m[0]*m[0], 1-2*a[0]*a[0]
	if n > 5 {
		a[1] = m[1]/root - polynomial(u, 0, 0.042981, -0.293762, -1.752461, 5.682633, -3.582633)
		first, left, rest = 2, left-2*m[1]*m[1], rest-2*a[1]*a[1]
	}
	f := math.Sqrt(left / rest)
	for i := first; i < half; i++ {
		a[i] = m[i] / f
	}
	return a
}

// polynomial is c[0] + c[1] x + c[2] x² ...
func polynomial(x float64, c ...float64) float64 {
	v := 0.0
	for i := len(c) - 1; i >= 0; i-- {
		v = v*x + c[i]
	}
	return v
}

// ProbabilityPlot is the correlation of the ordered values of x with the medians
// of normal order statistics: of the points of a normal probability plot. A
// sample is not normal at level alpha when it lies below
// [ProbabilityPlotCritical]; P is NaN.
//
// Inputs: x, any order, not modified. Result: NaN for fewer than three values,
// values that are no finite numbers, or no spread. Source: Filliben, "The
// probability plot correlation coefficient test for normality", Technometrics 17
// (1975) 111-117. Checked: TestProbabilityPlot.
func ProbabilityPlot(x []float64) Normality {
	n := len(x)
	r := noNormality(n)
	mean, sd := MeanSD(x)
	if n < 3 || !(sd > 0) || math.IsInf(sd, 0) {
		return r
	}
	s := Sorted(x)
	var xy, yy float64
	for i, z := range PlotPositions(n) {
		xy += (s[i] - mean) / sd * z // the positions' mean is 0
		yy += z * z
	}
	r.Statistic = xy / math.Sqrt(float64(n-1)*yy)
	return r
}

// PlotPositions are the medians of the n order statistics of a standard normal
// sample, as good as Filliben's formula: i-0.3175 over n+0.365, and exactly for
// the first and last. Ascending; empty for n < 1.
func PlotPositions(n int) []float64 {
	z := make([]float64, max(n, 0))
	for i := range n / 2 {
		p := (float64(i+1) - 0.3175) / (float64(n) + 0.365)
		if i == 0 {
			p = -math.Expm1(-math.Ln2 / float64(n)) // 1 - 0.5^(1/n)
		}
		z[i] = NormalQuantile(p)
		z[n-1-i] = -z[i]
	}
	return z
}

// ProbabilityPlotCritical is the value that [ProbabilityPlot] of n normal values
// lies below with probability alpha, which is 0.05 or 0.01; NaN for another alpha
// and for n outside 3 to 1000. Between the sizes of the table ln(1-r) is taken as
// a line in ln n.
//
// Source: table by J. Devaney, NIST, file NORPPCCS.DAT. Its head tells a reader to
// take the columns 0.95 and 0.99; simulation shows that 0.05 and 0.01 are meant.
// Checked: TestProbabilityPlot, by simulation too.
func ProbabilityPlotCritical(n int, alpha float64) float64 {
	column := map[float64]int{0.01: 0, 0.05: 1}
	c, ok := column[alpha]
	last := len(plotCritical) - 1
	if !ok || n < plotCritical[0].n || n > plotCritical[last].n {
		return math.NaN()
	}
	i := sort.Search(last, func(i int) bool { return plotCritical[i].n >= n })
	above := plotCritical[i]
	if above.n == n {
		return above.r[c]
	}
	below := plotCritical[i-1]
	part := math.Log(float64(n)/float64(below.n)) / math.Log(float64(above.n)/float64(below.n))
	a, b := math.Log(1-below.r[c]), math.Log(1-above.r[c])
	return 1 - math.Exp(a+part*(b-a))
}
