package stats

import (
	"fmt"
	"math"
	"math/bits"
	"math/rand/v2"
	"testing"
)

func TestCeramic(t *testing.T) {
	p := load(t, "ehb_f_test_ceramic")
	x, y := floats(t, p.Data["y1"]), floats(t, p.Data["y2"])
	r := VarianceRatio(x, y, 0.95)
	asPublished(t, p, map[string]float64{"mean1": Mean(x), "mean2": Mean(y), "sd1": SD(x), "sd2": SD(y), "F": r.Statistic,
		"crit_low": FQuantile(0.025, r.DF1, r.DF2), "crit_high": FQuantile(0.975, r.DF1, r.DF2), "p_two_sided": r.P,
		"ks_D": KolmogorovSmirnov(x, y).Statistic}, 1e-9)
	interval(t, p, "ci_ratio", r.Low, r.High, 1e-9)
}

func TestGears(t *testing.T) {
	p := load(t, "ehb_levene_bartlett_gear")
	var groups [][]float64
	decode(t, p.Data["groups"], &groups)
	var all []float64
	for _, g := range groups {
		all = append(all, g...)
	}
	bf, lev, bart := BrownForsythe(groups...), Levene(groups...), Bartlett(groups...)
	v := VarianceAgainst(all, number(t, p.Data["sigma0_squared"]), 0.95)
	asPublished(t, p, map[string]float64{"brown_forsythe_W": bf.Statistic, "bf_p": bf.P, "levene_mean_W": lev.Statistic,
		"crit_F_5pct": FQuantile(0.95, bf.DF1, bf.DF2), "bartlett_T": bart.Statistic, "bartlett_p": bart.P,
		"crit_chi2_5pct": ChiSquareUpperQuantile(0.05, bart.DF1), "sd": SD(all), "chi2_T": v.Statistic}, 1e-9)
	// The ends of the interval are the variances with p of 1 - level.
	for _, end := range []float64{v.Low, v.High} {
		near(t, "p at an end", VarianceAgainst(all, end, 0.95).P, 0.05, 1e-10)
	}
	for _, test := range []func(...[]float64) SpreadTest{BrownForsythe, Levene, Bartlett} {
		for _, g := range [][][]float64{nil, {{1, 2, 3}}, {{1, 2}, {3}}, {{1, 1}, {2, 2}}, {{1, 2, math.NaN()}, {1, 2, 3}}, {{1, 2, math.Inf(1)}, {1, 2, 3}}} {
			if r := test(g...); !math.IsNaN(r.P) {
				t.Error(g, r)
			}
		}
	}
}

func TestSpreadRatio(t *testing.T) {
	// The formula in numpy 1.24.2 and scipy 1.10.1: l = log(mean(abs(x-median(x)))
	// *n/(n-1)), v = (((mean(x)-median(x))/tau)**2 + var(x, ddof=1)/tau**2 - 1)/n,
	// interval exp(l1-l2 -/+ t.ppf(0.975, df)*sqrt(v1+v2)).
	r := SpreadRatioOf(farX, farY, 0.95)
	relative(t, "ratio", r.Ratio, 1.0955955955955954, 1e-12)
	relative(t, "df", r.DF, 18.75112102903253, 1e-12)
	relative(t, "low", r.Low, 0.1903663869182173, 1e-8) // quantile of scipy
	relative(t, "high", r.High, 6.30536581862079, 1e-8)
	relative(t, "p", r.P, 0.9141370585250468, 1e-10)

	rng := rand.New(rand.NewPCG(17, 18))
	const runs = 2000
	for _, tails := range []bool{false, true} {
		missed := 0
		x, y := make([]float64, 10), make([]float64, 25)
		for range runs {
			for _, s := range [][]float64{x, y} {
				for i := range s {
					s[i] = rng.NormFloat64()
					if tails && rng.IntN(20) == 0 {
						s[i] *= 5
					}
				}
			}
			for i := range x {
				x[i] = 7 - 3*x[i]
			}
			r := SpreadRatioOf(x, y, 0.95)
			if r.Low > 3 || r.High < 3 {
				missed++
			}
			if s := SpreadRatioOf(y, x, 0.95); math.Abs(s.Low*r.High-1) > 1e-9 || math.Abs(s.P-r.P) > 1e-9 {
				t.Fatal("exchanged:", r, s)
			}
		}
		t.Logf("missed %.1f %%", 100*float64(missed)/runs)
		if part := float64(missed) / runs; part < 0.015 || part > 0.07 {
			t.Errorf("95 %% interval missed %.1f %% of the time", 100*part)
		}
	}
	for _, x := range [][]float64{nil, {1, 2, 3}, {1, 1, 1, 1}, {1, 2, 3, math.Inf(1)}, {1, 2, 3, math.NaN()}} {
		if r := SpreadRatioOf(x, farY, 0.95); !math.IsNaN(r.Ratio) || !math.IsNaN(r.P) {
			t.Error(x, r)
		}
		if r := VarianceRatio(x, farY, 0.95); len(x) != 3 && (!math.IsNaN(r.Estimate) || !math.IsNaN(r.Low)) {
			t.Error(x, r)
		}
	}
}

func TestKolmogorovSmirnov(t *testing.T) {
	p := load(t, "ks_two_sample_hollander")
	x, y := floats(t, p.Data["x"]), floats(t, p.Data["y"])
	r := KolmogorovSmirnov(x, y)
	asPublished(t, p, map[string]float64{"D": r.Statistic, "p_exact": r.P, "p_asymptotic_R": KolmogorovUpper(r.Statistic * math.Sqrt(100.0/20))}, 1e-9)
	p = load(t, "ks_two_sample_ties")
	r = KolmogorovSmirnov(floats(t, p.Data["x"]), floats(t, p.Data["y"]))
	asPublished(t, p, map[string]float64{"D": r.Statistic, "p_exact": r.P}, 1e-12)

	// Small probabilities keep their digits: all of 40 below all of 30 is 2 ways.
	a, b := make([]float64, 40), make([]float64, 30)
	for i := range a {
		a[i] = float64(i)
	}
	for i := range b {
		b[i] = 100 + float64(i)
	}
	r = KolmogorovSmirnov(a, b)
	relative(t, "apart", r.P, 2*math.Exp(-logChoose(70, 30)), 1e-11)
	if r.At != 39 {
		t.Error("largest distance at", r.At)
	}
	// Both sums of the limit meet; scipy 1.10.1, scipy.special.kolmogorov(x).
	for _, c := range [][2]float64{{0.3, 0.9999906941986655}, {0.8, 0.5441424115741981}, {0.999999, 0.27000074362745646}, {1, 0.26999967167735456}, {1.5, 0.022217962616525127}, {5, 3.8574996959278356e-22}} {
		relative(t, fmt.Sprint("limit ", c[0]), KolmogorovUpper(c[0]), c[1], 1e-13)
	}
	near(t, "where the sums meet", KolmogorovUpper(math.Nextafter(1, 0)), KolmogorovUpper(1), 1e-14)
	big := make([]float64, 3000)
	for i := range big {
		big[i] = math.Sin(float64(i))
	}
	if r := KolmogorovSmirnov(big, big[:2000]); r.Exact || !(r.P > 0.9) {
		t.Error(r)
	}
	for _, r := range []Kolmogorov{KolmogorovSmirnov(nil, a), KolmogorovSmirnov(a, []float64{math.NaN()})} {
		if !math.IsNaN(r.P) || !math.IsNaN(r.Statistic) {
			t.Error(r)
		}
	}
}

// Against all ways to deal the values out, with ties.
func TestKolmogorovEnumeration(t *testing.T) {
	rng := rand.New(rand.NewPCG(19, 20))
	distance := func(x, y []float64) float64 {
		far := 0.0
		for _, v := range append(append([]float64{}, x...), y...) {
			d := 0.0
			for _, a := range x {
				if a <= v {
					d += float64(len(y))
				}
			}
			for _, b := range y {
				if b <= v {
					d -= float64(len(x))
				}
			}
			far = math.Max(far, math.Abs(d))
		}
		return far / float64(len(x)*len(y))
	}
	for trial := range 60 {
		n, m := 1+rng.IntN(6), 1+rng.IntN(6)
		x, y := coarse(rng, n, 2+trial), coarse(rng, m, 2+trial)
		r := KolmogorovSmirnov(x, y)
		near(t, "D", r.Statistic, distance(x, y), 1e-15)
		all := append(append([]float64{}, x...), y...)
		var total, far float64
		for set := range 1 << (n + m) {
			if bits.OnesCount(uint(set)) != n {
				continue
			}
			var a, b []float64
			for i, v := range all {
				if set>>i&1 == 1 {
					a = append(a, v)
				} else {
					b = append(b, v)
				}
			}
			total++
			if distance(a, b) >= r.Statistic-1e-12 {
				far++
			}
		}
		near(t, fmt.Sprint(x, y), r.P, far/total, 1e-12)
	}
}
