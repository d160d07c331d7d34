package stats

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// digits is the number of decimal digits in which got and want agree.
func digits(got, want float64) float64 {
	if got == want {
		return 17
	}
	return -math.Log10(math.Abs(got-want) / math.Abs(want))
}

// Certified means and standard deviations of the NIST reference data sets. The
// decimals of the data are not exact in binary: from the numbers as a computer
// holds them, a standard deviation can be had to about 15.9 digits less those of
// mean/SD (NumAcc4: 8).
func TestCertifiedMoments(t *testing.T) {
	files, err := filepath.Glob("../../testdata/published/strd_univariate_*.json")
	if err != nil || len(files) != 9 {
		t.Fatalf("have %d reference data sets, want 9 (%v)", len(files), err)
	}
	for _, f := range files {
		name := strings.TrimSuffix(filepath.Base(f), ".json")
		p := load(t, name)
		mean, sd := MeanSD(readings(t, p))
		wantMean, wantSD := number(t, p.Expected.of("mean")), number(t, p.Expected.of("sd"))
		need := min(13.5, 15.9-math.Log10(math.Abs(wantMean)/wantSD))
		dm, ds := digits(mean, wantMean), digits(sd, wantSD)
		t.Logf("%s: mean %.1f digits, sd %.1f digits", name, dm, ds)
		// How a standard deviation is off, so is what is divided by its square. The
		// constructed sets are exact: -0.999 of 1001 values is a certified figure.
		lag, wantLag := Lag1(readings(t, p)), number(t, p.Expected.of("lag1_autocorrelation"))
		near(t, name+": lag 1", lag, wantLag, 10*math.Pow(10, -need))
		near(t, name+": n", float64(len(readings(t, p))), number(t, p.Expected.of("n")), 0)
		if dm < 14.5 || ds < need {
			t.Errorf("%s: mean to %.1f digits (want 14.5), sd to %.1f (want %.1f)", name, dm, ds, need)
		}
	}
}

// Small rows by hand, and what has no such number.
func TestLag1(t *testing.T) {
	near(t, "alternating", Lag1([]float64{1, -1, 1, -1}), -0.75, 1e-15)
	near(t, "1 to 4", Lag1([]float64{1, 2, 3, 4}), 0.25, 1e-15) // (0.75 - 0.25 + 0.75)/5
	for _, x := range [][]float64{nil, {1}, {2, 2, 2}, {1, math.NaN(), 2}, {1, math.Inf(1), 2}} {
		if r := Lag1(x); !math.IsNaN(r) {
			t.Errorf("%v: %v, want NaN", x, r)
		}
	}
}

func TestPercentile12(t *testing.T) {
	p := load(t, "ehb_percentile_12")
	s := Sorted(floats(t, p.Data["y"]))
	near(t, "type 6", Quantile(s, 0.9, Type6), number(t, p.Expected.of("type6")), number(t, p.Tolerance["type6"]))
	near(t, "type 6 in full", Quantile(s, 0.9, Type6), number(t, p.Recomputed["type6"]), 1e-9)
	near(t, "type 7 in full", Quantile(s, 0.9, Type7), number(t, p.Recomputed["type7"]), 1e-9)
}

func TestQuantileEnds(t *testing.T) {
	s := []float64{1, 2, 4}
	for _, c := range []struct{ p, want6, want7 float64 }{
		{0, 1, 1}, {0.25, 1, 1.5}, {0.5, 2, 2}, {0.75, 4, 3}, {1, 4, 4},
	} {
		near(t, "type 6", Quantile(s, c.p, Type6), c.want6, 1e-15)
		near(t, "type 7", Quantile(s, c.p, Type7), c.want7, 1e-15)
	}
	for _, p := range []float64{-0.1, 1.1, math.NaN()} {
		if q := Quantile(s, p, Type7); !math.IsNaN(q) {
			t.Errorf("quantile at %v: %v, want NaN", p, q)
		}
	}
	if q := Quantile(nil, 0.5, Type7); !math.IsNaN(q) {
		t.Errorf("quantile of nothing: %v, want NaN", q)
	}
}

func TestMAD(t *testing.T) {
	p := load(t, "mad_and_modified_z")
	near(t, "scaled MAD of a", MADScale*MAD(floats(t, p.Data["a"])), number(t, p.Expected.of("mad_scaled_a")), number(t, p.Tolerance["mad_scaled_a"]))
	near(t, "MAD of b", MAD(floats(t, p.Data["b"])), number(t, p.Expected.of("mad_raw_b")), 0)
	near(t, "MAD of c", MAD(floats(t, p.Data["c"])), number(t, p.Expected.of("mad_raw_c")), 0)
	near(t, "median of d", Median(floats(t, p.Data["d"])), number(t, p.Recomputed["median_d"]), 1e-12)
	want := floats(t, p.Recomputed["modified_z_d"])
	for i, z := range ModifiedZ(floats(t, p.Data["d"])) {
		near(t, "modified z of d", z, want[i], 1e-9)
	}
	// Above every value counts as such, until the middle is reached.
	inf := math.Inf(1)
	near(t, "median with two infinite values of five", Median([]float64{3, inf, 1, inf, 2}), 3, 0)
	for _, x := range [][]float64{nil, {1, inf}, {1, 2, inf, inf}} {
		if m := Median(x); !math.IsNaN(m) {
			t.Errorf("median of %v: %v, want NaN", x, m)
		}
	}
}

func TestFences(t *testing.T) {
	p := load(t, "ehb_boxplot_fences")
	f := FencesOf(floats(t, p.Data["y"]), Type6)
	got := map[string]float64{
		"q1": f.Q1, "median": f.Median, "q3": f.Q3, "iqr": f.Q3 - f.Q1,
		"inner_low": f.InnerLow, "inner_high": f.InnerHigh, "outer_low": f.OuterLow, "outer_high": f.OuterHigh,
		"n_mild": float64(f.OutsideInner), "n_extreme": float64(f.Beyond),
	}
	for k, v := range got {
		near(t, k, v, number(t, p.Expected.of(k)), number(t, p.Tolerance[k]))
	}
}

// Quartiles and robust limits of three published samples; the limits have no
// published figures, their arithmetic was done by two other tools.
func TestPartAverageLimits(t *testing.T) {
	type row struct {
		Q1          float64
		RobustMean  float64 `json:"robust_mean"`
		Q3          float64
		RobustSigma float64 `json:"robust_sigma"`
		Lower       float64
		Upper       float64
	}
	p := load(t, "part_average_limits")
	var results map[string]map[string]row
	decode(t, p.Recomputed["results"], &results)
	checked := 0
	for name, raw := range p.Data {
		s := Sorted(floats(t, raw))
		for rule, key := range map[QuantileRule]string{Type6: "type6", Type7: "type7"} {
			w := results[name][key]
			sigma := IQR(s, rule) / 1.35
			near(t, name+" q1", Quantile(s, 0.25, rule), w.Q1, 1e-9)
			near(t, name+" q3", Quantile(s, 0.75, rule), w.Q3, 1e-9)
			near(t, name+" median", MedianSorted(s), w.RobustMean, 1e-9)
			near(t, name+" sigma", sigma, w.RobustSigma, 1e-9)
			near(t, name+" lower", MedianSorted(s)-6*sigma, w.Lower, 1e-9)
			near(t, name+" upper", MedianSorted(s)+6*sigma, w.Upper, 1e-9)
			checked++
		}
		near(t, name+" MAD", MADScale*MAD(s), results[name]["mad_variant"].RobustSigma, 1e-9)
	}
	if checked != 6 {
		t.Errorf("checked %d samples, want 6", checked)
	}
}

func TestGrubbs(t *testing.T) {
	p := load(t, "ehb_grubbs")
	y := floats(t, p.Data["y"])
	g, i := Grubbs(y)
	near(t, "G", g, number(t, p.Expected.of("G")), number(t, p.Tolerance["G"]))
	near(t, "G in full", g, number(t, p.Recomputed["G"]), 1e-9)
	if i != 7 {
		t.Errorf("farthest value is no. %d, want 7", i)
	}
	near(t, "critical value", GrubbsCritical(len(y), 0.05, true), number(t, p.Expected.of("crit_one_sided_5pct")), number(t, p.Tolerance["crit_one_sided_5pct"]))
	for ns, row := range p.Critical {
		n := int(number(t, []byte(ns)))
		for key, want := range row {
			alpha := map[string]float64{"05": 0.05, "01": 0.01}[key[len(key)-2:]]
			near(t, ns+" "+key, GrubbsCritical(n, alpha, strings.HasPrefix(key, "one")), want, 1e-8)
		}
	}
}

func TestGeneralizedESD(t *testing.T) {
	p := load(t, "ehb_generalized_esd")
	y := floats(t, p.Data["y"])
	most := int(number(t, p.Data["max_outliers"]))
	alpha := number(t, p.Data["alpha"])
	out := GeneralizedESD(y, alpha, most)
	R, L := floats(t, p.Expected.of("R")), floats(t, p.Expected.of("lambda"))
	fullR, fullL := floats(t, p.Recomputed["R"]), floats(t, p.Recomputed["lambda"])
	for i := range R {
		near(t, "R", out.R[i], R[i], 0.001) // the page cuts digits off
		near(t, "lambda", out.Lambda[i], L[i], 0.001)
		near(t, "R in full", out.R[i], fullR[i], 1e-9)
		near(t, "lambda in full", out.Lambda[i], fullL[i], 1e-9)
		near(t, "value taken out", y[out.Removed[i]], p.Removed[i], 0)
	}
	if want := int(number(t, p.Expected.of("n_outliers"))); out.Count != want {
		t.Errorf("%d outliers, want %d", out.Count, want)
	}
	if lo, hi := ESDInner(Sorted(y), alpha, most); lo != 0 || hi != 51 {
		t.Errorf("ESDInner leaves %d:%d, want 0:51", lo, hi)
	}
}

// The quick form must leave what the full test leaves, and the running sums must
// hold when a value is a million times farther out than the rest.
func TestESDInnerAgrees(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for run := 0; run < 300; run++ {
		n := 3 + rng.IntN(60)
		x := make([]float64, n)
		for i := range x {
			x[i] = rng.NormFloat64()
			if rng.IntN(12) == 0 {
				x[i] *= math.Pow(10, 6*rng.Float64())
			}
		}
		full := GeneralizedESD(x, 0.05, n/4)
		s := Sorted(x)
		lo, hi := ESDInner(s, 0.05, n/4)
		if n-(hi-lo) != full.Count {
			t.Fatalf("n=%d: inner leaves out %d, full %d", n, n-(hi-lo), full.Count)
		}
		left := slices.Clone(x)
		for i, at := range full.Removed {
			g, _ := Grubbs(left)
			near(t, "statistic against a fresh computation", full.R[i], g, 1e-7*g)
			left = slices.Delete(left, slices.Index(left, x[at]), slices.Index(left, x[at])+1)
		}
	}
}

func TestTooFew(t *testing.T) {
	nan := math.NaN()
	for _, x := range [][]float64{nil, {1}, {1, 1}, {nan, 1, 2}, {1, 1, 1}} {
		if g, i := Grubbs(x); !math.IsNaN(g) || i != -1 {
			t.Errorf("Grubbs of %v: %v at %d, want NaN at -1", x, g, i)
		}
		if out := GeneralizedESD(x, 0.05, 5); out.Count != 0 {
			t.Errorf("ESD of %v finds %d", x, out.Count)
		}
	}
	for _, x := range [][]float64{nil, {3}} {
		if s := SD(x); !math.IsNaN(s) {
			t.Errorf("SD of %v: %v, want NaN", x, s)
		}
	}
	if v := UpperT(0, 3); !math.IsNaN(v) {
		t.Errorf("t at probability 0: %v, want NaN", v)
	}
}

// MADSorted merges instead of sorting; it must give what sorting gives.
func TestMADAgainstSorting(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for run := 0; run < 500; run++ {
		x := make([]float64, 1+rng.IntN(30))
		for i := range x {
			x[i] = math.Round(8*rng.NormFloat64()) / 4
		}
		m := Median(x)
		d := make([]float64, len(x))
		for i, v := range x {
			d[i] = math.Abs(v - m)
		}
		near(t, "MAD", MAD(x), Median(d), 1e-15)
	}
}

// The quick bound must never exceed the critical value it stands in for. At
// alpha 1e-6 and ten thousand values it would: for probabilities below 1e-10 the t
// quantile of the library is off from the sixth digit on.
func TestESDBound(t *testing.T) {
	for n := 3; n < 30_000; n += 1 + n/7 {
		for _, alpha := range []float64{0.3, 0.05, 0.008, 0.001, 1e-5} {
			bound, critical := esdAtLeast(n, alpha), esdCritical(n, alpha)
			if !(bound <= critical) {
				t.Errorf("n=%d, alpha %v: bound %v above critical value %v", n, alpha, bound, critical)
			}
		}
	}
}
