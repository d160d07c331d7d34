package stats

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sort"
	"strconv"
	"testing"
)

// otherSets are the samples that the normality checks name in short.
var otherSets = map[string]string{
	"zarr13": "ehb_ci_mean_zarr13", "rosner": "ehb_generalized_esd", "visc": "control_chart_viscosity",
	"flow": "ehb_individuals_chart", "sw11": "shapiro_wilk", "chick": "anderson_darling_chicks", "grubbs": "ehb_grubbs",
}

// others are what a check file says of samples of other files.
func others(t *testing.T, name string) map[string]map[string]float64 {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "testdata", "published", name+".json"))
	if err != nil {
		t.Fatal(err)
	}
	var f struct {
		Other map[string]map[string]float64 `json:"other_datasets"`
	}
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	if len(f.Other) < 5 {
		t.Fatalf("%s: %d other sets", name, len(f.Other))
	}
	return f.Other
}

// asPublished compares got with every figure of expected at its tolerance, and of
// recomputed at part of it.
func asPublished(t *testing.T, p published, got map[string]float64, part float64) {
	t.Helper()
	rel := 0.0
	if raw, ok := p.Tolerance["rel"]; ok {
		rel = number(t, raw)
	}
	for key, v := range got {
		_, in := p.Expected.find(key)
		_, again := p.Recomputed[key]
		if !in && !again {
			t.Errorf("%s: no such figure in the file", key)
		}
		if in {
			if raw, ok := p.Tolerance[key]; ok {
				near(t, key+" as published", v, number(t, p.Expected.of(key)), number(t, raw))
			} else if rel > 0 {
				relative(t, key+" as published", v, number(t, p.Expected.of(key)), rel)
			} else {
				t.Errorf("%s: no tolerance", key)
			}
		}
		if again {
			relative(t, key+" recomputed", v, number(t, p.Recomputed[key]), part)
		}
	}
	for key := range p.Expected.all() {
		if _, ok := got[key]; !ok {
			t.Logf("not compared here: %s", key)
		}
	}
}

func TestAndersonDarling(t *testing.T) {
	p := load(t, "anderson_darling_chicks")
	r := AndersonDarling(floats(t, p.Data["y"]))
	asPublished(t, p, map[string]float64{"A2": r.Statistic, "A2_modified": r.Modified, "p": r.P}, 1e-9)
	for name, want := range others(t, "anderson_darling_chicks") {
		r := AndersonDarling(readings(t, dataOf(t, otherSets[name])))
		relative(t, name+" A2", r.Statistic, want["A2"], 1e-9)
		relative(t, name+" modified", r.Modified, want["A2_modified"], 1e-9)
		relative(t, name+" p", r.P, want["p"], 1e-9)
	}
}

func TestShapiroWilk(t *testing.T) {
	p := load(t, "shapiro_wilk")
	r := ShapiroWilk(floats(t, p.Data["y"]))
	asPublished(t, p, map[string]float64{"W": r.Statistic, "p": r.P}, 2e-6)
	for name, want := range others(t, "shapiro_wilk") {
		r := ShapiroWilk(readings(t, dataOf(t, otherSets[name])))
		near(t, name+" W", r.Statistic, want["W"], 2e-6) // two tools of the file agree to this
		relative(t, name+" p", r.P, want["p"], 2e-4)
	}
	// Small samples: scipy 1.10.1, scipy.stats.shapiro(x), which keeps seven digits.
	for _, c := range []struct {
		x    []float64
		w, p float64
	}{
		{[]float64{0.2, 1.7, 3.9}, 0.9882096648, 0.7922100425},
		{[]float64{0.2, 1.7, 3.1, 9}, 0.8856849074, 0.3634847701},
		{[]float64{1, 2, 4, 8, 16}, 0.8761088252, 0.2920486927},
		{[]float64{1, 2, 4, 8, 16, 32, 33, 40, 50, 51, 52, 90}, 0.9106512070, 0.2174865752},
	} {
		r := ShapiroWilk(c.x)
		near(t, "W", r.Statistic, c.w, 2e-6)
		near(t, "p", r.P, c.p, 2e-5)
	}
}

func TestProbabilityPlot(t *testing.T) {
	p := load(t, "ppcc_normal")
	var table map[string]map[string]float64
	decode(t, p.Data["critical_values"], &table)
	if len(table) != len(plotCritical) {
		t.Errorf("table has %d sizes, want %d", len(plotCritical), len(table))
	}
	for size, want := range table {
		n, _ := strconv.Atoi(size)
		near(t, size+" 0.01", ProbabilityPlotCritical(n, 0.01), want["p01"], 0)
		near(t, size+" 0.05", ProbabilityPlotCritical(n, 0.05), want["p05"], 0)
	}
	// The table came from the same file; what stands apart was read off it once more.
	for size, key := range map[int]string{10: "crit_05_n10", 20: "crit_05_n20", 50: "crit_05_n50"} {
		near(t, key, ProbabilityPlotCritical(size, 0.05), number(t, p.Expected.of(key)), 0)
	}
	var r map[string]float64
	decode(t, p.Recomputed["r"], &r)
	for name, want := range r {
		near(t, name, ProbabilityPlot(readings(t, dataOf(t, otherSets[name]))).Statistic, want, 1e-9)
	}
	// Which columns are meant: the share of normal samples below them.
	var simulated map[string][2]float64
	decode(t, p.Recomputed["simulated_quantiles_01_05"], &simulated)
	for size, want := range simulated {
		n, _ := strconv.Atoi(size)
		near(t, size+" simulated 0.01", ProbabilityPlotCritical(n, 0.01), want[0], 0.0015)
		near(t, size+" simulated 0.05", ProbabilityPlotCritical(n, 0.05), want[1], 0.0015)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	const runs = 4000
	for _, n := range []int{10, 57} { // 57 is between two sizes of the table
		below := 0
		x := make([]float64, n)
		for range runs {
			for i := range x {
				x[i] = rng.NormFloat64()
			}
			if ProbabilityPlot(x).Statistic < ProbabilityPlotCritical(n, 0.05) {
				below++
			}
		}
		near(t, fmt.Sprint("share below the 0.05 value, n ", n), float64(below)/runs, 0.05, 3.5*math.Sqrt(0.05*0.95/runs))
	}
}

// Normality does not depend on unit and origin, nor on the order or sign.
func TestNormalityInvariance(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	for _, test := range []func([]float64) Normality{AndersonDarling, ShapiroWilk, ProbabilityPlot} {
		for _, n := range []int{3, 4, 5, 6, 11, 12, 60} {
			x, y := make([]float64, n), make([]float64, n)
			for i := range x {
				x[i] = rng.ExpFloat64()
				y[n-1-i] = 3 - 2.5*x[i]
			}
			a, b := test(x), test(y)
			near(t, fmt.Sprint("statistic ", n), a.Statistic, b.Statistic, 1e-12*float64(n))
			if !math.IsNaN(a.P) {
				relative(t, fmt.Sprint("p ", n), a.P, b.P, 1e-9)
			}
			if !sort.Float64sAreSorted(PlotPositions(n)) {
				t.Error("positions not ascending")
			}
		}
		for _, x := range [][]float64{nil, {1, 2}, {1, 1, 1}, {1, 2, math.NaN()}, {1, 2, math.Inf(1)}} {
			if r := test(x); !math.IsNaN(r.Statistic) || !math.IsNaN(r.P) {
				t.Error(x, r)
			}
		}
	}
}

// Three tests at level 0.05 on normal samples, seeded.
func TestNormalityLevel(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	const runs = 3000
	for _, n := range []int{8, 25} {
		var ad, sw int
		x := make([]float64, n)
		for range runs {
			for i := range x {
				x[i] = rng.NormFloat64()
			}
			if AndersonDarling(x).P < 0.05 {
				ad++
			}
			if ShapiroWilk(x).P < 0.05 {
				sw++
			}
		}
		near(t, fmt.Sprint("Anderson-Darling ", n), float64(ad)/runs, 0.05, 0.015)
		near(t, fmt.Sprint("Shapiro-Wilk ", n), float64(sw)/runs, 0.05, 0.015)
	}
}
