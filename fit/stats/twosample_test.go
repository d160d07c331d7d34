package stats

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// interval is a published pair of limits.
func interval(t *testing.T, p published, key string, low, high, part float64) {
	t.Helper()
	if raw, ok := p.Expected.find(key); ok {
		want := floats(t, raw)
		tol := 1e-9 * math.Abs(want[1]-want[0])
		if raw, ok := p.Tolerance[key]; ok {
			tol = number(t, raw)
		}
		near(t, key+" low", low, want[0], tol)
		near(t, key+" high", high, want[1], tol)
	}
	if raw, ok := p.Recomputed[key]; ok {
		want := floats(t, raw)
		relative(t, key+" low recomputed", low, want[0], part)
		relative(t, key+" high recomputed", high, want[1], part)
	}
}

func TestMeanInterval(t *testing.T) {
	p := load(t, "ehb_ci_mean_zarr13")
	x := floats(t, p.Data["y"])
	r := OneSampleT(x, number(t, p.Data["mu0"]), 0.95)
	asPublished(t, p, map[string]float64{"n": float64(len(x)), "mean": r.Estimate, "sd": SD(x), "t_crit": UpperT(0.025, r.DF),
		"ci_low": r.Low, "ci_high": r.High, "t_stat": r.Statistic}, 1e-9)
}

// The test knows nothing of the sample but its summary: the figures that are published
// (rounded to the digits printed) lead to the published interval.
func TestMeanIntervalOfSummary(t *testing.T) {
	p := dataOf(t, "ehb_ci_mean_zarr13") // its figures: TestMeanInterval
	printed := func(key string) float64 { return number(t, p.Expected.of(key)) }
	r := OneSampleTOf(Summary{N: int(printed("n")), Mean: printed("mean"), SD: printed("sd")}, number(t, p.Data["mu0"]), 0.95)
	near(t, "low", r.Low, printed("ci_low"), 6e-6) // the mean is printed to 1e-5
	near(t, "high", r.High, printed("ci_high"), 6e-6)
	near(t, "statistic", r.Statistic, printed("t_stat"), 0.06) // 2611 by an SD of five digits
	x := floats(t, p.Data["y"])
	if a, b := OneSampleT(x, 9, 0.9), OneSampleTOf(SummaryOf(x), 9, 0.9); a != b {
		t.Errorf("%+v, by its summary %+v", a, b)
	}
	for _, s := range []Summary{{}, {N: 1, Mean: 2, SD: math.NaN()}, {N: 5, Mean: 2}, {N: 5, Mean: math.NaN(), SD: 1}} {
		if r := OneSampleTOf(s, 0, 0.95); !math.IsNaN(r.P) || !math.IsNaN(r.Low) {
			t.Errorf("%+v: %+v, want NaN", s, r)
		}
	}
}

func TestTwoMeans(t *testing.T) {
	p := load(t, "ehb_two_sample_t_auto83b")
	x, y := floats(t, p.Data["y1"]), floats(t, p.Data["y2"])
	a, b := PooledT(x, y, 0.95), WelchT(x, y, 0.95)
	sx, sy := SummaryOf(x), SummaryOf(y)
	pooled, _ := pooledSD(sx, sy)
	asPublished(t, p, map[string]float64{"n1": float64(sx.N), "n2": float64(sy.N), "mean1": sx.Mean, "mean2": sy.Mean, "sd1": sx.SD, "sd2": sy.SD,
		"pooled_sd": pooled, "t_pooled": a.Statistic, "df_pooled": a.DF, "crit_pooled": UpperT(0.025, a.DF), "t_welch": b.Statistic,
		"df_welch": b.DF, "p_welch": b.P, "p_pooled": a.P, "cohens_d": a.Effect, "hedges_g_exact": a.Hedges}, 1e-9)
	interval(t, p, "ci_welch", b.Low, b.High, 1e-9)

	p = load(t, "ehb_two_process_means")
	x, y = floats(t, p.Data["old"]), floats(t, p.Data["new"])
	b = WelchT(x, y, 0.95)
	sx, sy = SummaryOf(x), SummaryOf(y)
	asPublished(t, p, map[string]float64{"mean1": sx.Mean, "mean2": sy.Mean, "sd1": sx.SD, "sd2": sy.SD, "t": b.Statistic, "df": b.DF, "p": b.P}, 1e-9)

	p = load(t, "welch_sleep")
	x, y = floats(t, p.Data["y1"]), floats(t, p.Data["y2"])
	b = WelchT(x, y, 0.95)
	// One-way analysis of two groups by Welch is the square of his t.
	asPublished(t, p, map[string]float64{"t": b.Statistic, "df": b.DF, "p": b.P, "cohens_d": b.Effect, "F_welch_oneway": b.Statistic * b.Statistic}, 1e-9)
	interval(t, p, "ci", b.Low, b.High, 1e-9)

	p = dataOf(t, "ehb_f_test_ceramic") // its figures: TestCeramic
	b = WelchT(floats(t, p.Data["y1"]), floats(t, p.Data["y2"]), 0.95)
	asPublished(t, p, map[string]float64{"t_welch": b.Statistic, "df_welch": b.DF, "p_welch": b.P}, 1e-9)
}

// Two samples with a value far off in each; figures of scipy 1.10.1.
var (
	farX = []float64{1.1, 2.3, 2.9, 3.3, 3.8, 4.1, 4.4, 5.0, 9.7, 30.0}
	farY = []float64{2.0, 2.2, 3.5, 4.9, 5.1, 5.3, 6.0, 6.4, 7.7, 7.9, 8.8, -20}
)

func TestPairedT(t *testing.T) {
	r := PairedT(farX, farY[:10], 0.95) // scipy.stats.ttest_rel(x, y[:10]), its confidence_interval(0.95)
	relative(t, "t", r.Statistic, 0.675877285175957, 1e-12)
	relative(t, "p", r.P, 0.5161080215809928, 1e-12)
	// scipy's quantile of t is good to 5e-9 only (see distribution_points.json).
	relative(t, "low", r.Low, -3.661310511947773, 1e-9)
	relative(t, "high", r.High, 6.781310511947773, 1e-9)
	if r := PairedT(farX, farY, 0.95); !math.IsNaN(r.P) {
		t.Error("pairs of different lengths:", r)
	}
}

func TestYuen(t *testing.T) {
	// scipy.stats.ttest_ind(x, y, equal_var=False, trim=trim)
	for _, c := range []struct{ trim, t, p float64 }{
		{0, 0.9604551154898014, 0.3492934121456379},
		{0.1, -0.48994157173543684, 0.6322001412667477},
		{0.2, -1.1399056929445368, 0.28031179140058643},
		{0.25, -1.4012466217735642, 0.19660854204614187},
	} {
		r := YuenT(farX, farY, c.trim, 0.95)
		relative(t, fmt.Sprint("t at trim ", c.trim), r.Statistic, c.t, 1e-12)
		relative(t, fmt.Sprint("p at trim ", c.trim), r.P, c.p, 1e-12)
		// Values in the cut part may be anywhere, over the range too.
		if c.trim >= 0.1 {
			x, y := append([]float64{}, farX...), append([]float64{}, farY...)
			x[9], y[11] = math.Inf(1), math.Inf(-1)
			if got := YuenT(x, y, c.trim, 0.95); got != r {
				t.Errorf("trim %g with values over the range: %+v, want %+v", c.trim, got, r)
			}
		}
	}
	two := append([]float64{}, farX...)
	two[8], two[9] = math.Inf(1), math.Inf(1)
	for _, r := range []TTest{YuenT(two, farY, 0.1, 0.95), YuenT(two, farY, 0, 0.95), YuenT([]float64{1, math.NaN(), 2, 3, 4, 5}, farY, 0.2, 0.95), YuenT(farX, []float64{1}, 0.2, 0.9)} {
		if !math.IsNaN(r.P) {
			t.Errorf("not refused: %+v", r)
		}
	}
	if r := YuenT(two, farY, 0.2, 0.95); math.IsNaN(r.P) {
		t.Error("two of ten over the range are within a trim of 0.2")
	}
	// The scale that makes the effect one of a normal distribution, as printed by
	// Algina, Keselman and Penfield.
	near(t, "scale of the effect", winsorizedNormal(0.2), 0.642, 5e-4)
	if m := TrimmedMean([]float64{5, 1, 2, 3, 400}, 0.2); m.Cut != 1 || m.Mean != 10.0/3 || m.DF != 2 {
		t.Errorf("%+v", m)
	}
}

// The level of tests at 0.05 without a difference, spreads unequal, where one value
// in twenty is far off or over the range.
func TestYuenLevel(t *testing.T) {
	rng := rand.New(rand.NewPCG(27, 28))
	const runs = 4000
	for _, n := range []int{10, 20} {
		found, lost := 0, 0
		x, y := make([]float64, n), make([]float64, 15)
		for range runs {
			for k, s := range [][]float64{x, y} {
				for i := range s {
					s[i] = rng.NormFloat64() * float64(k+1)
					switch rng.IntN(40) {
					case 0:
						s[i] *= 5
					case 1:
						s[i] = math.Inf(1)
					}
				}
			}
			r := YuenT(x, y, 0.2, 0.95)
			switch {
			case math.IsNaN(r.P):
				lost++ // more over the range than are cut
			case r.P < 0.05:
				found++
			}
		}
		t.Logf("n %d: %.2f %%, %d without an answer", n, 100*float64(found)/runs, lost)
		if share := float64(found) / runs; share < 0.03 || share > 0.065 || lost > runs/500 {
			t.Errorf("n %d: level %.4f, %d without an answer", n, share, lost)
		}
	}
}

// shifted, turned: what a test may depend on and what not.
func TestMeanTestsInvariance(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	tests := map[string]func(x, y []float64) TTest{
		"pooled": func(x, y []float64) TTest { return PooledT(x, y, 0.9) },
		"Welch":  func(x, y []float64) TTest { return WelchT(x, y, 0.9) },
		"Yuen":   func(x, y []float64) TTest { return YuenT(x, y, 0.2, 0.9) },
	}
	for range 50 {
		x, y := make([]float64, 5+rng.IntN(9)), make([]float64, 5+rng.IntN(9))
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		for i := range y {
			y[i] = 1 + 2*rng.ExpFloat64()
		}
		const c, k = 2.75, 3.5
		moved := make([]float64, len(x))
		turned := [2][]float64{make([]float64, len(x)), make([]float64, len(y))}
		for i, v := range x {
			moved[i], turned[0][i] = v+c, -k*v
		}
		for i, v := range y {
			turned[1][i] = -k * v
		}
		for name, test := range tests {
			r := test(x, y)
			s := test(moved, y)
			near(t, name+" shifted", s.Estimate, r.Estimate+c, 1e-12)
			near(t, name+" shifted low", s.Low, r.Low+c, 1e-12)
			near(t, name+" shifted high", s.High, r.High+c, 1e-12)
			s = test(y, x)
			near(t, name+" exchanged", s.Estimate, -r.Estimate, 1e-12)
			near(t, name+" exchanged low", s.Low, -r.High, 1e-12)
			relative(t, name+" exchanged p", s.P, r.P, 1e-10)
			s = test(turned[0], turned[1])
			relative(t, name+" turned", s.Statistic, -r.Statistic, 1e-10)
			relative(t, name+" turned low", s.Low, -k*r.High, 1e-10)
			relative(t, name+" turned effect", s.Effect, -r.Effect, 1e-10)
		}
		// The end of the interval is the hypothesis with p of 1 - level.
		r := OneSampleT(x, 0, 0.9)
		near(t, "p at the end of the interval", OneSampleT(x, r.High, 0.9).P, 0.1, 1e-10)
		r = TrimmedT(x, 0, 0.2, 0.9)
		near(t, "p at the end of the trimmed interval", TrimmedT(x, r.High, 0.2, 0.9).P, 0.1, 1e-10)
		w, u := WelchT(x, y, 0.9), YuenT(x, y, 0, 0.9)
		relative(t, "Yuen without trim", u.P, w.P, 1e-12)
		relative(t, "Yuen without trim", u.Low, w.Low, 1e-12)
		relative(t, "Yuen without trim", u.Effect, w.Effect, 1e-12)
	}
	for name, test := range tests {
		for _, r := range []TTest{test(nil, nil), test([]float64{1}, []float64{2}), test([]float64{1, 1, 1}, []float64{2, 2, 2}), test([]float64{1, 2, math.NaN()}, []float64{1, 2, 3})} {
			if !math.IsNaN(r.P) || !math.IsNaN(r.Low) {
				t.Errorf("%s: %+v", name, r)
			}
		}
	}
}

func TestEquivalence(t *testing.T) {
	fields := func(e Equivalence) map[string]float64 {
		return map[string]float64{"t_lower": e.StatisticLow, "p_lower": e.PLow, "t_upper": e.StatisticHigh, "p_upper": e.PHigh, "df": e.DF}
	}
	summary := func(p published) (x, y Summary) {
		n := func(key string) float64 { return number(t, p.Data[key]) }
		return Summary{int(n("n1")), n("m1"), n("sd1")}, Summary{int(n("n2")), n("m2"), n("sd2")}
	}
	p := load(t, "tost_welch_replication")
	x, y := summary(p)
	bound := number(t, p.Data["bound_d"]) * math.Sqrt((x.SD*x.SD+y.SD*y.SD)/2)
	e := EquivalenceOf(WelchTOf(x, y, 0.95), -bound, bound, number(t, p.Data["alpha"]))
	got := fields(e)
	got["bound_raw"] = bound
	asPublished(t, p, got, 1e-9)
	interval(t, p, "ci90", e.IntervalLow, e.IntervalHigh, 1e-9)
	near(t, "p", e.P, number(t, p.Recomputed["p"]), 1e-12)

	p = load(t, "tost_pooled_replication")
	x, y = summary(p)
	e = EquivalenceOf(PooledTOf(x, y, 0.95), number(t, p.Data["low"]), number(t, p.Data["high"]), 0.05)
	asPublished(t, p, fields(e), 1e-9)
	interval(t, p, "ci90", e.IntervalLow, e.IntervalHigh, 1e-9)

	p = load(t, "tost_sleep")
	e = EquivalenceOf(WelchT(floats(t, p.Data["y1"]), floats(t, p.Data["y2"]), 0.95), number(t, p.Data["low"]), number(t, p.Data["high"]), 0.05)
	got = fields(e)
	got["p"] = e.P
	asPublished(t, p, got, 1e-9)
	interval(t, p, "ci90", e.IntervalLow, e.IntervalHigh, 1e-9)

	// Trimmed means: P below alpha exactly when the interval lies within.
	rng := rand.New(rand.NewPCG(9, 10))
	within := 0
	for range 200 {
		x, y := make([]float64, 12), make([]float64, 15)
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		for i := range y {
			y[i] = rng.NormFloat64()
		}
		x[3] = math.Inf(1)
		e := EquivalenceOf(YuenT(x, y, 0.2, 0.95), -1, 1.2, 0.05)
		if in := e.IntervalLow > -1 && e.IntervalHigh < 1.2; in != (e.P < 0.05) {
			t.Errorf("%+v", e)
		} else if in {
			within++
		}
	}
	if within < 20 || within > 180 {
		t.Errorf("%d of 200 equivalent: nothing tried", within)
	}
	if e := EquivalenceOf(WelchTOf(x, y, 0.95), 1, 1, 0.05); !math.IsNaN(e.P) {
		t.Error("limits that are none:", e)
	}
}
