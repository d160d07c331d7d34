package stats

import (
	"fmt"
	"math"
	"testing"
)

// relative fails unless got lies within tol of want, as a part of want.
func relative(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if got == want {
		return
	}
	if !(math.Abs(got-want) <= tol*math.Abs(want)) {
		t.Errorf("%s: got %.17g, want %.17g, off by %.3g of it, allowed %.3g", what, got, want, got/want-1, tol)
	}
}

// Every point of testdata/published/distribution_points.json, at the tolerance
// that it states.
func TestTails(t *testing.T) {
	p := load(t, "distribution_points")
	tol := number(t, p.Tolerance["rel"])
	type point struct{ P, DF, D1, D2, X, CDF, SF, NCP float64 }
	points := func(key string) []point {
		var list []point
		decode(t, p.Expected.of(key), &list)
		if len(list) < 4 {
			t.Fatalf("%s: %d points", key, len(list))
		}
		return list
	}
	for _, c := range points("normal_quantile") {
		relative(t, fmt.Sprintf("normal quantile %g", c.P), NormalQuantile(c.P), c.X, tol)
		relative(t, fmt.Sprintf("normal upper quantile %g", c.P), -NormalQuantile(c.P), -c.X, tol)
	}
	for _, c := range points("normal_cdf") {
		relative(t, fmt.Sprintf("normal %g", c.X), NormalUpper(-c.X), c.CDF, tol)
	}
	for _, c := range points("t_quantile") {
		if c.P > 0.5 {
			// 1-p as the nearest number is a different probability by up to 1e-16.
			relative(t, fmt.Sprintf("t quantile %g, %g", c.P, c.DF), UpperT(1-c.P, c.DF), c.X, tol)
		}
		relative(t, fmt.Sprintf("t quantile -, %g, %g", c.P, c.DF), -UpperT(c.P, c.DF), c.X, tol)
	}
	for _, c := range points("t_cdf") {
		relative(t, fmt.Sprintf("t %g, %g", c.X, c.DF), TUpper(-c.X, c.DF), c.CDF, tol)
	}
	for _, c := range points("chi2_quantile") {
		relative(t, fmt.Sprintf("chi-square quantile %g, %g", c.P, c.DF), ChiSquareQuantile(c.P, c.DF), c.X, tol)
		relative(t, fmt.Sprintf("chi-square upper quantile %g, %g", c.P, c.DF), ChiSquareUpperQuantile(1-c.P, c.DF), c.X, tol)
	}
	for _, c := range points("chi2_sf_tail") {
		relative(t, fmt.Sprintf("chi-square %g, %g", c.X, c.DF), ChiSquareUpper(c.X, c.DF), c.SF, tol)
	}
	for _, c := range points("f_quantile") {
		relative(t, fmt.Sprintf("F quantile %g, %g, %g", c.P, c.D1, c.D2), FQuantile(c.P, c.D1, c.D2), c.X, tol)
	}
	for _, c := range points("f_sf_tail") {
		relative(t, fmt.Sprintf("F %g, %g, %g", c.X, c.D1, c.D2), FUpper(c.X, c.D1, c.D2), c.SF, tol)
	}
	// The file allows 1e-6 here; its points were found good to 9e-12.
	for _, c := range points("noncentral_t_quantile") {
		what := fmt.Sprintf("noncentral t %g, %g, %g", c.P, c.DF, c.NCP)
		relative(t, what, NoncentralTQuantile(c.P, c.DF, c.NCP), c.X, 2e-11)
		relative(t, what, NoncentralTLower(c.X, c.DF, c.NCP), c.P, tol)
		relative(t, what, NoncentralTUpper(c.X, c.DF, c.NCP), 1-c.P, tol)
	}
}

// Tails and small probabilities of every function against values computed with 40
// digits, as testdata/published/distribution_tails.json says how.
func TestTailsAgainstManyDigits(t *testing.T) {
	p := load(t, "distribution_tails")
	tol := number(t, p.Tolerance["rel"])
	rows := func(key string) (list [][]float64) {
		decode(t, p.Expected.of(key), &list)
		return list
	}
	worst := map[string]float64{}
	check := func(name string, c []float64, got, want float64) {
		t.Helper()
		if want < 1e-300 {
			return
		}
		worst[name] = math.Max(worst[name], math.Abs(got/want-1))
		relative(t, fmt.Sprint(name, c), got, want, tol)
	}
	for _, c := range rows("t") {
		check("t", c, TUpper(c[0], c[1]), c[2])
	}
	for _, c := range rows("chi_square") {
		check("chi-square upper", c, ChiSquareUpper(c[0], c[1]), c[2])
		check("chi-square lower", c, ChiSquareLower(c[0], c[1]), c[3])
	}
	for _, c := range rows("f") {
		check("F", c, FUpper(c[0], c[1], c[2]), c[3])
	}
	for _, c := range rows("noncentral_t") {
		check("noncentral t", c, NoncentralTUpper(c[0], c[1], c[2]), c[3])
		check("noncentral t", c, NoncentralTLower(-c[0], c[1], -c[2]), c[3])
	}
	if len(worst) != 5 {
		t.Fatal(worst)
	}
	t.Log(worst)
}

// A quantile put back into its tail gives the probability again.
func TestUpperTRoundTrip(t *testing.T) {
	worst := 0.0
	for _, df := range []float64{0.5, 1, 1.7, 3, 9, 40, 137.2, 999, 1001, 3e4, 1e6, math.Inf(1)} {
		for _, p := range []float64{0.5 - 1e-12, 0.4999, 0.3, 0.25, 0.2499, 0.05, 1e-3, 1e-8, 1e-12, 1e-20, 1e-40, 1e-100, 1e-300} {
			x := UpperT(p, df)
			if math.IsInf(x, 1) || x*x > math.MaxFloat64/1e10 {
				continue // beyond the numbers
			}
			got := TUpper(x, df)
			// What a last place of x moves p by, and no more.
			allowed := 1e-12 * (1 + x*x/(1+x*x/df)/100)
			if p > 0.4 {
				got = 0.5 - tWithin(x, df)
				relative(t, fmt.Sprint(p, df), tWithin(x, df), 0.5-p, 1e-10)
			}
			worst = math.Max(worst, math.Abs(got/p-1))
			relative(t, fmt.Sprint(p, df), got, p, allowed)
		}
	}
	t.Logf("worst %.2g", worst)
	near(t, "t, one degree, deep", UpperT(1e-18, 1)/(1/(math.Pi*1e-18)), 1, 1e-12) // Cauchy: cot(πp)
	for _, c := range [][2]float64{{0, 3}, {1, 3}, {math.NaN(), 3}, {0.1, 0}, {0.1, math.NaN()}} {
		if v := UpperT(c[0], c[1]); !math.IsNaN(v) {
			t.Error(c, v)
		}
	}
}

// Deep quantiles of noncentral t, against the tails they come from.
func TestNoncentralRoundTrip(t *testing.T) {
	for _, df := range []float64{1, 2, 29, 300} {
		for _, delta := range []float64{-12, 0, 0.3, 40} {
			for _, p := range []float64{1e-15, 1e-6, 0.01, 0.2, 0.5, 0.9} {
				x := NoncentralTQuantile(p, df, delta)
				what := fmt.Sprint(p, df, delta)
				relative(t, what, NoncentralTLower(x, df, delta), p, 1e-10)
				relative(t, what, NoncentralTUpper(-NoncentralTQuantile(p, df, -delta), df, delta), p, 1e-10)
			}
		}
	}
	relative(t, "central", NoncentralTUpper(2.3, 7, 0), TUpper(2.3, 7), 1e-13)
	relative(t, "no end of degrees", NoncentralTUpper(9, math.Inf(1), 1), NormalUpper(8), 1e-15)
}

// The two ways to noncentral t, which share no step, where both hold.
func TestNoncentralFar(t *testing.T) {
	for _, df := range []float64{0.5, 1, 20, 790} {
		for _, delta := range []float64{205, 500} {
			for _, part := range []float64{0.1, 0.9, 1, 1.2, 300} {
				x := delta * part
				what := fmt.Sprint(x, df, delta)
				if want := mixed(x, df, delta); want > 1e-290 {
					relative(t, what, steep(x, df, delta), want, 1e-10)
				}
				if want := mixed(-x, df, -delta); want > 1e-290 {
					relative(t, what+" lower", steep(-x, df, -delta), want, 1e-10)
				}
			}
		}
	}
}

// Quantiles of chi-square and F put back into their tails, far out too.
func TestQuantileRoundTrip(t *testing.T) {
	for _, df := range []float64{0.1, 0.5, 1, 2, 9, 50, 1e3, 1e5} {
		for _, p := range []float64{1e-200, 1e-60, 1e-17, 1e-6, 0.01, 0.3, 0.5} {
			what := fmt.Sprint(p, df)
			if x := ChiSquareQuantile(p, df); x > 0 { // else below the smallest number
				relative(t, what+" lower", ChiSquareLower(x, df), p, 1e-10)
			} else if df > 5 {
				t.Error(what, x)
			}
			relative(t, what+" upper", ChiSquareUpper(ChiSquareUpperQuantile(p, df), df), p, 1e-10)
			for _, d2 := range []float64{0.5, 1, 3, 30, 900} {
				if x := FQuantile(p, df, d2); x > 0 {
					relative(t, what+fmt.Sprint(" F ", d2), FUpper(1/x, d2, df), p, 1e-9)
				} else if df > 5 {
					t.Error(what, d2, x)
				}
			}
		}
	}
}
