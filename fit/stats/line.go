package stats

import (
	"math"
	"slices"
)

// Line is a straight line through points, y = Intercept + Slope x.
type Line struct {
	N           int     // points
	Slope       float64 // unit of y per unit of x
	Intercept   float64 // unit of y, at x = 0
	SlopeSE     float64 // standard errors, scaled from the scatter about the line
	InterceptSE float64
	Low, High   float64 // interval of the slope
	T, P        float64 // slope in standard errors; two-sided probability of a greater one without slope
	SD          float64 // residual standard deviation, unit of y, divisor N-2
	RSquared    float64 // share of the sum of squares of y that the line takes
}

// LineThrough is the least-squares line with the uncertainty of its slope: does y
// drift with x (the order of measuring)? It takes the scatter to be normal,
// independent from point to point and all of it in y; for points that are not, see
// [MedianSlope].
//
// Inputs: x, y of one length, any order, not modified; level of the interval between 0
// and 1 (0.95). Result: NaN for fewer than two points, where all x are the same or a
// value is not finite; errors, interval, P NaN for two points. T ±Inf and P 0 for
// points on a line to the last digit. Source: Draper and Smith, "Applied Regression
// Analysis" (from memory). Checked: TestLineThroughNorris.
func LineThrough(x, y []float64, level float64) Line {
	nan := math.NaN()
	l := Line{N: len(x), Slope: nan, Intercept: nan, SlopeSE: nan, InterceptSE: nan, Low: nan, High: nan, T: nan, P: nan, SD: nan, RSquared: nan}
	if len(x) != len(y) || len(x) < 2 || !finite(x) || !finite(y) {
		return l
	}
	n := float64(len(x))
	mx, my := Mean(x), Mean(y)
	var dx, dy, xx, xy, yy float64
	for i := range x {
		a, b := x[i]-mx, y[i]-my
		dx, dy = dx+a, dy+b
		xx, xy, yy = xx+a*a, xy+a*b, yy+b*b
	}
	// What rounding left of the sums of differences is taken out.
	xx, xy, yy = xx-dx*dx/n, xy-dx*dy/n, yy-dy*dy/n
	if !(xx > 0) {
		return l
	}
	l.Slope = xy / xx
	// The residuals carry what rounding left in the slope: one step more.
	var left, lean float64
	residual := func(i int) float64 { return (y[i] - my) - l.Slope*(x[i]-mx) }
	for i := range x {
		lean += (x[i] - mx) * residual(i)
	}
	l.Slope += lean / xx
	l.Intercept = my - l.Slope*mx
	for i := range x {
		r := residual(i)
		left += r * r
	}
	l.RSquared = 1 - left/yy
	if n < 3 {
		return l
	}
	l.SD = math.Sqrt(left / (n - 2))
	l.SlopeSE = l.SD / math.Sqrt(xx)
	l.InterceptSE = l.SD * math.Sqrt(1/n+mx/xx*mx)
	l.T = l.Slope / l.SlopeSE
	l.P = 2 * TUpper(math.Abs(l.T), n-2)
	if level > 0 && level < 1 {
		t := UpperT((1-level)/2, n-2)
		l.Low, l.High = l.Slope-t*l.SlopeSE, l.Slope+t*l.SlopeSE
	}
	return l
}

// Kendall is the outcome of [KendallTau].
type Kendall struct {
	Tau   float64 // -1 to 1, tau-b where there are ties
	P     float64 // two-sided probability of one as far from 0 without any connection
	Exact bool    // P counts the orders; otherwise it is that of the normal distribution
}

// exactMost is the greatest number of points for which the orders are counted: the
// time grows with its third power (200: some milliseconds). Beyond, the normal
// distribution errs by less than 0.001 (judgement).
const exactMost = 200

// KendallTau tests whether y rises or falls with x, by order alone.
//
// Inputs: x, y of one length, any order, not modified. Result: NaN for fewer than two
// points, where x or y are all the same, or one is NaN. Without ties and up to 200
// points P is exact; otherwise from the variance corrected for ties, with continuity.
// Source: Kendall, "A new measure of rank correlation", Biometrika 30 (1938) 81-93;
// with ties, "Rank Correlation Methods" (both from memory). Checked: TestKendall.
func KendallTau(x, y []float64) Kendall {
	k := Kendall{Tau: math.NaN(), P: math.NaN()}
	n := len(x)
	if n != len(y) || n < 2 || hasNaN(x) || hasNaN(y) {
		return k
	}
	var s, tiedX, tiedY int // pairs
	for i := range x {
		for j := range i {
			a, b := sign(x[i], x[j]), sign(y[i], y[j])
			s += a * b
			if a == 0 {
				tiedX++
			}
			if b == 0 {
				tiedY++
			}
		}
	}
	pairs := n * (n - 1) / 2
	if tiedX == pairs || tiedY == pairs {
		return k
	}
	k.Tau = float64(s) / math.Sqrt(float64(pairs-tiedX)) / math.Sqrt(float64(pairs-tiedY))
	if k.Exact = tiedX == 0 && tiedY == 0 && n <= exactMost; k.Exact {
		below := 0.0
		for d, p := range inversions(n) {
			if d <= (pairs-abs(s))/2 {
				below += p
			}
		}
		k.P = min(1, 2*below)
		return k
	}
	z := max(0, math.Abs(float64(s))-1) / math.Sqrt(orderVariance(x, y))
	k.P = min(1, 2*NormalUpper(z))
	return k
}

// RobustSlope is the outcome of [MedianSlope].
type RobustSlope struct {
	N         int     // points
	Slope     float64 // unit of y per unit of x
	Intercept float64 // unit of y: median of y - Slope x
	Low, High float64 // interval of the slope; -Inf, +Inf where there are too few points for its level
	Level     float64 // probability with which the interval holds the slope, at least that asked for; NaN where it is approximate
	Kendall           // the test that there is a slope
}

// MedianSlope is the slope of Theil and Sen: the median of the slopes of all pairs of
// points with different x. Up to 29 % of the points may be wrong in any way. The
// interval is that of all slopes which Kendall's test does not refuse: exact without
// ties up to 200 points, otherwise by the normal distribution.
//
// Inputs: as [LineThrough]. Result: NaN likewise. Time and memory grow with the square
// of the number of points: some seconds for 5000. Source: Sen, "Estimates of the
// regression coefficient based on Kendall's tau", Journal of the American Statistical
// Association 63 (1968) 1379-1389 (from memory). Checked: TestMedianSlope,
// TestMedianSlopeCovers.
func MedianSlope(x, y []float64, level float64) RobustSlope {
	nan := math.NaN()
	r := RobustSlope{N: len(x), Slope: nan, Intercept: nan, Low: nan, High: nan, Level: nan, Kendall: Kendall{Tau: nan, P: nan}}
	if len(x) != len(y) || !finite(x) || !finite(y) {
		return r
	}
	var slopes []float64
	for i := range x {
		for j := range i {
			if x[i] != x[j] {
				slopes = append(slopes, (y[i]-y[j])/(x[i]-x[j]))
			}
		}
	}
	if len(slopes) == 0 {
		return r
	}
	slices.Sort(slopes)
	r.Slope = MedianSorted(slopes)
	rest := make([]float64, len(x))
	for i := range x {
		rest[i] = y[i] - r.Slope*x[i]
	}
	r.Intercept = Median(rest)
	r.Kendall = KendallTau(x, y)
	if !(level > 0 && level < 1) {
		return r
	}
	// The slope lies below the c-th smallest where fewer than c slopes are below it.
	c := 0
	all := len(x) * (len(x) - 1) / 2
	if len(slopes) == all && len(x) <= exactMost {
		out := 0.0
		for d, p := range inversions(len(x)) {
			if out+p > (1-level)/2 {
				break
			}
			out += p
			c = d + 1
		}
		r.Level = 1 - 2*out
	} else {
		index := make([]float64, len(x)) // ties of y are none against a slope that is not 0
		for i := range index {
			index[i] = float64(i)
		}
		half := NormalQuantile((1+level)/2) * math.Sqrt(orderVariance(x, index))
		c = int(math.Floor((float64(len(slopes)) - half) / 2))
	}
	r.Low, r.High = math.Inf(-1), math.Inf(1)
	if c >= 1 {
		r.Low, r.High = slopes[c-1], slopes[len(slopes)-c]
	}
	return r
}

// inversions is the distribution of the number of pairs out of order among n values in
// random order, up to half of them: the rest mirrors it.
func inversions(n int) []float64 {
	p := make([]float64, n*(n-1)/4+1)
	p[0] = 1
	next := make([]float64, len(p))
	for m := 2; m <= n; m++ {
		// The m-th value jumps over 0 to m-1 others, each as likely. Below the middle the
		// shares grow, so that the running sum keeps its digits.
		sum := 0.0
		for d := range p {
			sum += p[d]
			if d >= m {
				sum -= p[d-m]
			}
			next[d] = max(0, sum) / float64(m)
		}
		p, next = next, p
	}
	return p
}

// orderVariance is the variance of Kendall's S, corrected for ties in x and in y.
func orderVariance(x, y []float64) float64 {
	n := float64(len(x))
	x0, x1, x2 := tieSums(x)
	y0, y1, y2 := tieSums(y)
	v := (n*(n-1)*(2*n+5)-x0-y0)/18 + x1*y1/(2*n*(n-1))
	if n > 2 {
		v += x2 * y2 / (9 * n * (n - 1) * (n - 2))
	}
	return v
}

// tieSums are Σ t(t-1)(2t+5), Σ t(t-1) and Σ t(t-1)(t-2) over runs of t equal values.
func tieSums(x []float64) (a, b, c float64) {
	s := Sorted(x)
	for i := 0; i < len(s); {
		j := i
		for j < len(s) && s[j] == s[i] {
			j++
		}
		t := float64(j - i)
		a += t * (t - 1) * (2*t + 5)
		b += t * (t - 1)
		c += t * (t - 1) * (t - 2)
		i = j
	}
	return a, b, c
}

func hasNaN(x []float64) bool { return slices.ContainsFunc(x, math.IsNaN) }

func sign(a, b float64) int {
	switch {
	case a > b:
		return 1
	case a < b:
		return -1
	}
	return 0
}

func abs(n int) int { return max(n, -n) }
