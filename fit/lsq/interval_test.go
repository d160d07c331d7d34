package lsq

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Covariance of a weighted straight line against its closed form:
// Δ = S Sxx - Sx², var(p0) = Sxx/Δ, var(p1) = S/Δ, cov = -Sx/Δ with S = Σ 1/σ²,
// Sx = Σ x/σ², Sxx = Σ x²/σ² (common practice, no source).
func TestCovarianceOfLine(t *testing.T) {
	x := []float64{0.3, 1, 2.2, 2.9, 4.4, 5}
	y := []float64{1.2, 1.9, 3.3, 3.6, 5.6, 5.9} // invented
	sigma := []float64{0.1, 0.3, 0.2, 0.1, 0.5, 0.25}
	var w, wx, wxx, wy, wxy float64
	for i := range x {
		q := 1 / (sigma[i] * sigma[i])
		w, wx, wxx, wy, wxy = w+q, wx+q*x[i], wxx+q*x[i]*x[i], wy+q*y[i], wxy+q*x[i]*y[i]
	}
	det := w*wxx - wx*wx
	var s Solver
	f := s.Solve(straight(x, y, sigma), []float64{0, 0}, Options{})
	near(t, "p0", f.P[0], (wxx*wy-wx*wxy)/det, 1e-12)
	near(t, "p1", f.P[1], (w*wxy-wx*wy)/det, 1e-12)
	near(t, "var p0", f.Cov(0, 0), wxx/det, 1e-12*wxx/det)
	near(t, "var p1", f.Cov(1, 1), w/det, 1e-12*w/det)
	near(t, "cov", f.Cov(0, 1), -wx/det, 1e-12*wx/det)
	near(t, "cov turned", f.Cov(1, 0), f.Cov(0, 1), 0)
	near(t, "scaled error", f.SE(1, true), math.Sqrt(w/det*f.SSR/4), 1e-12)
	// Student's t for 95 % and 4 degrees of freedom: 2.776445105 (e-Handbook
	// 1.3.6.7.2 prints 2.776; further digits from scipy 1.10.1, t.ppf(0.975, 4)).
	lo, hi := f.Interval(1, 0.95, false)
	near(t, "half interval", (hi-lo)/2, 2.7764451051977987*math.Sqrt(w/det), 1e-9)
	near(t, "its middle", (hi+lo)/2, f.P[1], 1e-12)
	if !math.IsNaN(f.Cov(2, 0)) || !math.IsNaN(f.Cov(0, -1)) {
		t.Error("a covariance of no parameter")
	}
	for _, level := range []float64{0, 1, -1, 2, math.NaN()} {
		if lo, hi := f.Interval(0, level, true); !math.IsNaN(lo) || !math.IsNaN(hi) {
			t.Errorf("level %g: %g to %g", level, lo, hi)
		}
	}
}

// Coverage by simulation (invented; seed 7). A line through 8 readings of known
// sigma, 4000 times: intervals scaled by the scatter hold the truth 95 % of the
// time. Unscaled, with the true sigma, they are those of Student where the normal
// ones would do, and hold it with P(|z| < 2.447) = 98.56 %. Allowed: 3.5 standard
// deviations of such a count.
func TestIntervalCoverage(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 0))
	x, y, sigma := make([]float64, 8), make([]float64, 8), make([]float64, 8)
	for i := range x {
		x[i], sigma[i] = float64(i), 0.1+0.05*float64(i%3)
	}
	const runs, p0, p1 = 4000, 2, -0.7
	var s Solver
	var scaled, known [2]int
	for range runs {
		for i := range y {
			y[i] = p0 + p1*x[i] + sigma[i]*r.NormFloat64()
		}
		f := s.Solve(straight(x, y, sigma), []float64{0, 0}, Options{})
		for j, truth := range [2]float64{p0, p1} {
			if lo, hi := f.Interval(j, 0.95, true); lo <= truth && truth <= hi {
				scaled[j]++
			}
			if lo, hi := f.Interval(j, 0.95, false); lo <= truth && truth <= hi {
				known[j]++
			}
		}
	}
	for j := range 2 {
		covered(t, "scaled", scaled[j], runs, 0.95)
		covered(t, "known sigma", known[j], runs, math.Erf(2.446911851144969/math.Sqrt2)) // scipy 1.10.1, t.ppf(0.975, 6)
	}
}

func covered(t *testing.T, what string, n, runs int, want float64) {
	t.Helper()
	got := float64(n) / float64(runs)
	t.Logf("%s: %.4f, expected %.4f", what, got, want)
	near(t, what, got, want, 3.5*math.Sqrt(want*(1-want)/float64(runs)))
}

// Coverage of the profile interval on a curved model (invented; seed 8): the
// saturating rise p0 (1 - exp(-p1 x)) through 8 readings, 600 times. The profile
// must hold the truth 95 % of the time, within 3.5 standard deviations of such a
// count; that of the t interval is logged beside it.
func TestProfileCoverage(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 0))
	d := strd{Data: map[string][]float64{"x": {0.5, 1, 1.5, 2, 3, 4, 5, 7}, "y": make([]float64, 8)}}
	d.Expected.P = []float64{10, 0.4}
	truth := d.Expected.P
	const runs = 600
	var s Solver
	var profiled, plain [2]int
	for range runs {
		g := make([]float64, 2)
		for i, x := range d.Data["x"] {
			d.Data["y"][i] = rise(truth, x, g) + 0.5*r.NormFloat64()
		}
		pr := d.problem(nistModels["boxbod"])
		f := s.Solve(pr, truth, Options{})
		for j := range 2 {
			lo, hi, why := s.Profile(pr, f, j, 0.95, Options{})
			if !why.Converged() && why != ProfileOpen {
				t.Errorf("profile: %s", why)
			}
			if lo <= truth[j] && truth[j] <= hi {
				profiled[j]++
			}
			if lo, hi := f.Interval(j, 0.95, true); lo <= truth[j] && truth[j] <= hi {
				plain[j]++
			}
		}
	}
	for j := range 2 {
		t.Logf("t interval of p%d: %.4f", j, float64(plain[j])/runs)
		covered(t, "profile", profiled[j], runs, 0.95)
	}
}
