package stats

import (
	"math"
	"slices"
	"strconv"
	"testing"
)

func TestChartConstants(t *testing.T) {
	p := load(t, "control_chart_constants")
	sizes := floats(t, p.Data["n"])
	for i, n := range sizes {
		c := ChartConstantsOf(int(n))
		for name, got := range map[string]float64{"A2": c.A2, "D3": c.D3, "D4": c.D4, "c4": c.MeanSD, "d2": c.MeanRange} {
			what := name + " of " + strconv.Itoa(int(n))
			near(t, what, got, floats(t, p.Expected.of(name))[i], number(t, p.Tolerance[name]))
			near(t, what+" in full", got, floats(t, p.Recomputed[name])[i], 1e-9)
		}
	}
	var table map[string]map[string]float64
	decode(t, p.Recomputed["table"], &table)
	for size, row := range table {
		n, err := strconv.Atoi(size)
		if err != nil {
			t.Fatal(err)
		}
		c := ChartConstantsOf(n)
		got := map[string]float64{
			"d2": c.MeanRange, "d3": c.SDRange, "c4": c.MeanSD, "A2": c.A2, "A3": c.A3,
			"B3": c.B3, "B4": c.B4, "D3": c.D3, "D4": c.D4, "E2": 3 / c.MeanRange,
		}
		for name, want := range row {
			near(t, name+" of "+size, got[name], want, 1e-9)
		}
	}
	// In closed form (the half-normal distribution; d3 of 3 follows from E w² = 2 + 3√3/π,
	// elementary integration): the range of two is √2 times their standard deviation.
	two, three := ChartConstantsOf(2), ChartConstantsOf(3)
	near(t, "d2 of 2", two.MeanRange, 2/math.Sqrt(math.Pi), 1e-14)
	near(t, "d3 of 2", two.SDRange, math.Sqrt(2-4/math.Pi), 1e-11)
	near(t, "d2 of 3", three.MeanRange, 3/math.Sqrt(math.Pi), 1e-14)
	near(t, "d3 of 3", three.SDRange, math.Sqrt(2+3*math.Sqrt(3)/math.Pi-9/math.Pi), 1e-11)
	near(t, "D4 and B4 of 2", two.D4, two.B4, 1e-11)
	// Of two sizes that follow each other c4 c4' = √((n-1)/n): also across the change
	// from the gamma function to the series.
	for n := 2.0; n < 1e6; n = math.Ceil(n * 1.01) {
		near(t, "c4 of two sizes", meanSD(n)*meanSD(n+1), math.Sqrt((n-1)/n), 2e-12)
	}
	near(t, "c4 across the change", meanSD(1000)*meanSD(1001), math.Sqrt(0.999), 2e-12)
	if k := ChartConstantsOf(1); !math.IsNaN(k.MeanRange) || !math.IsNaN(k.A3) || !math.IsNaN(k.D3) || !math.IsNaN(k.B4) {
		t.Errorf("subgroups of one: %+v, want NaN", k)
	}
}

// rounded is how the sources of the two sets below have d2 for moving ranges of two.
const rounded = 1.128

func TestIndividualsFlow(t *testing.T) {
	p := load(t, "ehb_individuals_chart")
	y := floats(t, p.Data["y"])
	c := IndividualsChart(y)
	again := 3 * Mean(c.Spreads) / rounded
	agree(t, p, map[string]float64{
		"mean": c.Level.Center, "mr_bar": c.Spread.Center, "ucl": c.Level.Center + again, "lcl": c.Level.Center - again,
		"ucl_exact_d2": c.Level.High, "lcl_exact_d2": c.Level.Low, "mr_ucl_exact": c.Spread.High,
	}, 1e-11)
	if out := c.Level.Outside(y); out != nil {
		t.Errorf("outside: %v, want none", out)
	}
}

func TestIndividualsViscosity(t *testing.T) {
	p := load(t, "control_chart_viscosity")
	y := floats(t, p.Data["y"])[:int(number(t, p.Data["n_phase1"]))]
	c := IndividualsChart(y)
	// The source takes out the fourth value and the ranges with it.
	d := IndividualsChart(slices.Delete(slices.Clone(y), 3, 4))
	exact := 2 / math.Sqrt(math.Pi)
	got := map[string]float64{"mean": c.Level.Center, "sigma": c.Sigma * exact / rounded, "mean_without_4": d.Level.Center, "sigma_without_4": d.Sigma * exact / rounded}
	got["lcl"], got["ucl"] = got["mean"]-3*got["sigma"], got["mean"]+3*got["sigma"]
	got["lcl_without_4"], got["ucl_without_4"] = got["mean_without_4"]-3*got["sigma_without_4"], got["mean_without_4"]+3*got["sigma_without_4"]
	got["sigma_exact_d2"], got["lcl_exact_d2"], got["ucl_exact_d2"] = c.Sigma, c.Level.Low, c.Level.High
	agree(t, p, got, 1e-11)
	if out := c.Level.Outside(y); !slices.Equal(out, []int{3}) {
		t.Errorf("outside: %v, want the fourth", out)
	}
}

func TestPistonRings(t *testing.T) {
	p := load(t, "control_chart_xbar_r_s_pistonrings")
	g := groups(t, p.Data["groups"])[:int(number(t, p.Data["n_phase1"]))]
	r, s := RangeChart(g), SDChart(g)
	// The source has d2 of 5 as 2.326, and the full figure of r_ucl d3 as 0.8641.
	sigma := r.Spread.Center / 2.326
	half := 3 * sigma / math.Sqrt(5)
	agree(t, p, map[string]float64{
		"center": r.Level.Center, "rbar": r.Spread.Center, "sigma_r": sigma,
		"xbar_lcl": r.Level.Center - half, "xbar_ucl": r.Level.Center + half,
		"r_lcl": r.Spread.Low, "r_ucl": r.Spread.Center + 3*0.8641*sigma,
		"sbar": s.Spread.Center, "sigma_s": s.Sigma, "s_lcl": s.Spread.Low, "s_ucl": s.Spread.High,
		"sigma_r_exact_d2": r.Sigma, "r_ucl_exact": r.Spread.High,
	}, 1e-11)
	near(t, "limits of the mean", r.Level.High-r.Level.Center, ChartConstantsOf(5).A2*r.Spread.Center, 1e-12)
	near(t, "limits of the mean by S", s.Level.Center-s.Level.Low, ChartConstantsOf(5).A3*s.Spread.Center, 1e-12)
}

func TestChartsRefuse(t *testing.T) {
	nan := math.NaN()
	for _, c := range []Chart{
		IndividualsChart(nil), IndividualsChart([]float64{1}), IndividualsChart([]float64{1, nan, 2}),
		RangeChart(nil), RangeChart([][]float64{{1}, {2}}), RangeChart([][]float64{{1, 2}, {1, 2, 3}}), SDChart([][]float64{{1, nan}}),
	} {
		if !math.IsNaN(c.Sigma) || !math.IsNaN(c.Level.High) || !math.IsNaN(c.Spread.Low) || c.Level.Outside([]float64{1e300}) != nil {
			t.Errorf("%+v, want NaN and nothing outside", c)
		}
	}
}
