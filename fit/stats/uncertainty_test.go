package stats

import (
	"math"
	"testing"
)

// The end gauge of JCGM 100:2008 H.1: inputs as in a public example, published
// results from memory (u_c 32 nm, ν_eff 16, t_99 2.92, U_99 93 nm), arithmetic
// verified apart.
func TestEndGauge(t *testing.T) {
	parts := []Part{{U: 25, Nu: 18}, {U: 9.7, Nu: 25.6}, {U: 2.9, Nu: 50}, {U: 16.6, Nu: 2}}
	u := RootSumSquare(parts)
	near(t, "u_c, nm", u, 31.67, 0.005)
	near(t, "ν_eff", EffectiveNu(parts), 16.76, 0.005)
	k := Coverage(parts, 0.99)
	near(t, "t_99(16)", k, 2.921, 0.0005)
	near(t, "U_99, nm", k*u, 92.5, 0.05)
	if math.Round(u) != 32 || math.Ceil(k*u) != 93 {
		t.Errorf("published 32 and 93 nm, got %g and %g", u, k*u)
	}
}

// The impedance of JCGM 100:2008 H.2 from its five simultaneous observations of V, I
// and φ (from memory; they reproduce the published means, standard uncertainties and
// correlations, which are checked first). Results: published ones from memory,
// arithmetic verified apart. The two correlations printed beside the data have two
// digits; taken with the rounded standard uncertainties they give the second line.
func TestImpedance(t *testing.T) {
	obs := [3][5]float64{
		{5.007, 4.994, 5.005, 4.990, 4.999},
		{19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3},
		{1.0456, 1.0438, 1.0468, 1.0428, 1.0433},
	}
	var mean, u [3]float64
	for k := range obs {
		mean[k] = Mean(obs[k][:])
		u[k] = SD(obs[k][:]) / math.Sqrt(5)
	}
	r := func(k, l int) float64 {
		s := 0.0
		for j := range obs[k] {
			s += (obs[k][j] - mean[k]) * (obs[l][j] - mean[l])
		}
		return s / 20 / (u[k] * u[l])
	}
	near(t, "V", mean[0], 4.9990, 5e-7)
	near(t, "I", mean[1], 19.661e-3, 5e-10)
	near(t, "φ", mean[2], 1.04446, 5e-7)
	near(t, "u(V)", u[0], 3.2e-3, 0.05e-3)
	near(t, "u(I)", u[1], 9.5e-6, 0.05e-6)
	near(t, "u(φ)", u[2], 0.75e-3, 0.005e-3)
	near(t, "r(V,I)", r(0, 1), -0.3553, 0.00005)
	near(t, "r(V,φ)", r(0, 2), 0.8576, 0.00005)
	near(t, "r(I,φ)", r(1, 2), -0.6451, 0.00005)

	v, i, phi := mean[0], mean[1], mean[2]
	z := v / i
	c := [][]float64{
		{math.Cos(phi) / i, -v * math.Cos(phi) / (i * i), -z * math.Sin(phi)}, // R
		{math.Sin(phi) / i, -v * math.Sin(phi) / (i * i), z * math.Cos(phi)},  // X
		{1 / i, -v / (i * i), 0}, // |Z|
	}
	near(t, "R", z*math.Cos(phi), 127.732, 0.0005)
	near(t, "X", z*math.Sin(phi), 219.847, 0.0005)
	near(t, "|Z|", z, 254.260, 0.0005)
	two := func(k, l int) float64 { return [3]float64{-0.36, 0.86, -0.65}[k+l-1] }
	for _, x := range []struct {
		name string
		u    []float64
		r    func(k, l int) float64
		want [6]float64 // u of R, X, |Z|; correlations of R and X, R and |Z|, X and |Z|
	}{
		{"observations", u[:], r, [6]float64{0.071, 0.295, 0.236, -0.588, -0.485, 0.993}},
		{"two digits", []float64{3.2e-3, 9.5e-6, 0.75e-3}, two, [6]float64{0.070, 0.296, 0.237, -0.591, -0.491, 0.993}},
	} {
		uc, corr := Propagate(c, x.u, x.r)
		for k, got := range [6]float64{uc[0], uc[1], uc[2], corr[0][1], corr[0][2], corr[1][2]} {
			tol := 0.0005
			if k == 1 {
				tol = 0.001 // u(X) is 0.2956 from the observations; the published 0.295 came of rounded numbers
			}
			near(t, x.name, got, x.want[k], tol)
		}
	}
	// Without correlation the sum of squares remains, and is another number.
	uc, _ := Propagate(c, u[:], nil)
	near(t, "u(|Z|), independent", uc[2], math.Hypot(u[0]/i, v/(i*i)*u[1]), 1e-12)
	if math.Abs(uc[2]-0.236) < 0.01 {
		t.Errorf("the correlation changes nothing: %g", uc[2])
	}
}

// A hand-held multimeter at 100 V, EA-4/02 S9 (from memory; arithmetic verified):
// one rectangle outweighs the rest, k is 1.65 and not 2.
func TestHandheldAtHundredVolts(t *testing.T) {
	parts := []Part{{U: 0.001, Nu: math.Inf(1)}, {U: 0.05 / math.Sqrt(3), Nu: math.Inf(1), Box: true}, {U: 0.011 / math.Sqrt(3), Nu: math.Inf(1), Box: true}}
	u := RootSumSquare(parts)
	near(t, "u, V", u, 0.0296, 0.00005)
	k := Coverage(parts, 0.95)
	near(t, "k", k, 1.6454, 0.0001)
	near(t, "U, V", k*u, 0.049, 0.0005)
	// Two rectangles of one size make no rectangle.
	parts[2].U = parts[1].U
	near(t, "k of two", Coverage(parts, 0.95), 1.95996, 1e-5)
	// On either side of the limit.
	for _, x := range []struct{ rest, k float64 }{{0.299, 0.95 * math.Sqrt(3)}, {0.301, 1.95996}} {
		got := Coverage([]Part{{U: 1, Nu: math.Inf(1), Box: true}, {U: x.rest, Nu: math.Inf(1)}}, 0.95)
		near(t, "k beside the limit", got, x.k, 1e-5)
	}
}

func TestUncertaintyOfNothing(t *testing.T) {
	inf := math.Inf(1)
	if nu := EffectiveNu([]Part{{U: 1, Nu: inf}, {U: 0, Nu: 0}}); !math.IsInf(nu, 1) {
		t.Errorf("ν %g", nu)
	}
	for name, x := range map[string]float64{
		"NaN part":         EffectiveNu([]Part{{U: math.NaN(), Nu: inf}}),
		"no freedom":       EffectiveNu([]Part{{U: 1, Nu: 0}}),
		"less than one ν":  Coverage([]Part{{U: 1, Nu: 0.5}}, 0.95),
		"level of one":     Coverage([]Part{{U: 1, Nu: inf}}, 1),
		"NaN part's k":     Coverage([]Part{{U: math.NaN(), Nu: inf}}, 0.95),
		"NaN part's total": RootSumSquare([]Part{{U: 1}, {U: math.NaN()}}),
	} {
		if !math.IsNaN(x) {
			t.Errorf("%s: %g, want NaN", name, x)
		}
	}
	if uc, _ := Propagate([][]float64{{1}}, []float64{1, 2}, nil); !math.IsNaN(uc[0]) {
		t.Errorf("row too short: %v", uc)
	}
}
