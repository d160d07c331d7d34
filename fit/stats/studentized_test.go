package stats

import (
	"math"
	"testing"
)

// nearPart is near with a relative tolerance.
func nearPart(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	near(t, what, got, want, rel*math.Abs(want))
}

// The 72 points of the reference file agree to 1e-11 of their value, but for six
// below 1e-20: k = 20 and q = 0.1. These are integrals of 40 digits whose own nodes
// missed the mark (they do not even fall evenly with df: 5.6e-26 at 50, 2.0e-27 at
// 100), so that only the absolute tolerance of the file is asked there; what they
// should be is in TestStudentizedRangeFarBelow.
func TestStudentizedRange(t *testing.T) {
	p := load(t, "studentized_range")
	var points []struct {
		Q       float64
		K       int
		DF, CDF float64
	}
	decode(t, p.Expected.of("cdf_points"), &points)
	if len(points) != 72 {
		t.Fatalf("%d points, want 72", len(points))
	}
	doubtful := 0
	for _, c := range points {
		got, above := StudentizedRangeCDF(c.Q, c.K, c.DF), StudentizedRangeUpper(c.Q, c.K, c.DF)
		near(t, "CDF", got, c.CDF, number(t, p.Tolerance["cdf_abs"]))
		near(t, "both tails", got+above, 1, 1e-14)
		if c.CDF < 1e-20 {
			doubtful++
			continue
		}
		if !(math.Abs(got/c.CDF-1) <= 1e-11) {
			t.Errorf("q %g of %d with %g: %.17g, want %.17g", c.Q, c.K, c.DF, got, c.CDF)
		}
	}
	if doubtful != 6 {
		t.Errorf("%d points left to the absolute tolerance, want 6", doubtful)
	}
	var quantiles []struct {
		P     float64
		K     int
		DF, Q float64
	}
	decode(t, p.Expected.of("quantiles"), &quantiles)
	for _, c := range quantiles {
		nearPart(t, "quantile", StudentizedRangeQuantile(c.P, c.K, c.DF), c.Q, number(t, p.Tolerance["quantile_rel"]))
		nearPart(t, "quantile in full", StudentizedRangeQuantile(c.P, c.K, c.DF), c.Q, 1e-9)
	}
}

// Outside the file: scipy 1.10.1, scipy.stats.studentized_range.sf, .cdf and .ppf.
func TestStudentizedRangeElsewhere(t *testing.T) {
	for _, c := range []struct {
		q     float64
		k     int
		df    float64
		above float64
		tol   float64 // scipy takes 1 - cdf: so many digits it has
	}{
		{12, 5, 12, 1.6703222371350357e-05, 1e-10},
		{25, 3, 8, 2.8289169085038424e-07, 1e-8},
		{3, 50, 200, 0.9953842021721648, 1e-11},
		{6, 100, 1000, 0.06602546183311508, 1e-11},
	} {
		nearPart(t, "upper tail", StudentizedRangeUpper(c.q, c.k, c.df), c.above, c.tol)
	}
	for _, c := range []struct {
		p  float64
		k  int
		df float64
		q  float64
	}{
		{0.99, 30, 100, 6.158779170604186},
		{0.001, 6, 9, 0.499777079035777},
		{0.5, 3, 2, 1.908178518404062},
		{0.95, 20, math.Inf(1), 5.0116887941184425},
	} {
		nearPart(t, "quantile", StudentizedRangeQuantile(c.p, c.k, c.df), c.q, 2e-8)
		nearPart(t, "there and back", StudentizedRangeCDF(StudentizedRangeQuantile(c.p, c.k, c.df), c.k, c.df), c.p, 1e-11)
	}
}

// The range of two is √2 |t|, to either side and far into the tail.
func TestStudentizedRangeOfTwo(t *testing.T) {
	for _, df := range []float64{1, 2, 3, 5, 10, 30, 300, 999, 1001, 1e5, 1e9, math.Inf(1)} {
		for _, q := range []float64{1e-6, 1e-3, 0.1, 1, 3, 10, 30, 50, 1000, 1e6} {
			want := 2 * TUpper(q/math.Sqrt2, df)
			if got := StudentizedRangeUpper(q, 2, df); !(math.Abs(got-want) <= 1e-12*want) {
				t.Errorf("q %g, df %g: %.16g, want %.16g", q, df, got, want)
			}
		}
	}
}

// Far below the median the distribution follows from its leading terms: F(z)-F(z-w) =
// w f(m) (1 + w²(m²-1)/24) with m in the middle, which leaves integrals over a normal
// density of k times the sharpness and over s^(k-1), both in closed form. What is left
// out is of the order w⁴.
func TestStudentizedRangeFarBelow(t *testing.T) {
	const k, q = 20.0, 0.1
	moment := func(m, df float64) float64 { // of s
		a, _ := math.Lgamma((df + m) / 2)
		b, _ := math.Lgamma(df / 2)
		return math.Exp(a - b + m/2*math.Log(2/df))
	}
	for _, df := range []float64{10, 20, 50, 100, 120} {
		lead := k * math.Pow(q, k-1) * math.Pow(2*math.Pi, -k/2) * math.Sqrt(2*math.Pi/k)
		next := q * q * ((k-1)/(8*k) + (k-1)/24*(1-1/k))
		want := lead * (moment(k-1, df) - next*moment(k+1, df))
		nearPart(t, "far below", StudentizedRangeCDF(q, k, df), want, 2e-3)
	}
}

func TestStudentizedRangeRefuses(t *testing.T) {
	for _, c := range []struct {
		q  float64
		k  int
		df float64
	}{{1, 1, 5}, {1, 3, 0.5}, {math.NaN(), 3, 5}, {1, 3, math.NaN()}} {
		if v := StudentizedRangeUpper(c.q, c.k, c.df); !math.IsNaN(v) {
			t.Errorf("%+v: %v, want NaN", c, v)
		}
		if v := StudentizedRangeQuantile(0.95, c.k, c.df); !math.IsNaN(v) && !math.IsNaN(c.q) {
			t.Errorf("quantile of %+v: %v, want NaN", c, v)
		}
	}
	for _, p := range []float64{0, 1, -1, math.NaN()} {
		if v := StudentizedRangeQuantile(p, 3, 5); !math.IsNaN(v) {
			t.Errorf("quantile at %v: %v, want NaN", p, v)
		}
	}
	near(t, "above nothing", StudentizedRangeUpper(0, 3, 5), 1, 0)
	near(t, "below +Inf", StudentizedRangeCDF(math.Inf(1), 3, 5), 1, 0)
	near(t, "above +Inf", StudentizedRangeUpper(math.Inf(1), 3, 5), 0, 0)
}

// More values have a wider range, and fewer degrees of freedom a longer tail; the
// quantile goes back to where it came from.
func TestStudentizedRangeProperties(t *testing.T) {
	for _, q := range []float64{2.5, 4, 11} {
		for _, k := range []int{2, 3, 9, 30} {
			for _, df := range []float64{1, 2.5, 17, 400} {
				above := StudentizedRangeUpper(q, k, df)
				if more := StudentizedRangeUpper(q, k+1, df); !(more > above) {
					t.Errorf("above %v lie %v of %d and %v of one more", q, above, k, more)
				}
				if wider := StudentizedRangeUpper(q, k, df*1.1); !(wider < above) && above < 0.1 {
					t.Errorf("above %v lie %v with %v and %v with more degrees of freedom", q, above, df, wider)
				}
			}
		}
	}
	for _, k := range []int{2, 7} {
		for _, df := range []float64{1, 4, 60} {
			for _, p := range []float64{0.01, 0.5, 0.9, 0.999} {
				q := StudentizedRangeQuantile(p, k, df)
				near(t, "there and back", StudentizedRangeCDF(q, k, df), p, 1e-12)
			}
		}
	}
}

// Student's t is a normal value over such a standard deviation: the same tail by
// another way, also against scipy 1.10.1, 2*scipy.stats.t.sf(10/2**.5, 300).
func TestTailOfTAsMean(t *testing.T) {
	for _, df := range []float64{1, 2.5, 7, 30, 300, 999, 1001, 1e5, 1e9} {
		for _, x := range []float64{0, 0.1, 0.45, 0.55, 1, 2, 7, 20, 40} {
			want := overScale(df, 1, func(s float64) float64 { return NormalUpper(x * s) })
			nearPart(t, "tail of t", TUpper(x, df), want, 1e-11)
		}
	}
	nearPart(t, "scipy", StudentizedRangeUpper(10, 2, 300), 1.0846976779505501e-11, 1e-12)
}
