package fit

import (
	"cmp"
	"encoding/json"
	"math"
	"os"
	"slices"
	"testing"
)

// nistLinear reads one of the NIST linear sets (NIST Statistical Reference
// Datasets, Linear Regression, public domain; certified to 15 digits), ascending
// in x.
func nistLinear(t *testing.T, name string) (x, y, p, sd []float64, rsd float64) {
	t.Helper()
	b, err := os.ReadFile("../testdata/published/strd/linear_" + name + ".json")
	if err != nil {
		t.Fatal(err)
	}
	var d struct {
		Data     struct{ X, Y []float64 }
		Expected struct {
			P   []float64 `json:"parameters"`
			SD  []float64 `json:"standard_deviations"`
			RSD float64   `json:"residual_standard_deviation"`
		}
	}
	if err := json.Unmarshal(b, &d); err != nil {
		t.Fatal(err)
	}
	order := make([]int, len(d.Data.X))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(d.Data.X[a], d.Data.X[b]) })
	for _, i := range order {
		x, y = append(x, d.Data.X[i]), append(y, d.Data.Y[i])
	}
	return x, y, d.Expected.P, d.Expected.SD, d.Expected.RSD
}

// The local polynomial on the NIST linear sets that it can express: Norris (a
// line) and Pontius (a parabola). It has no form without intercept (NoInt1,
// NoInt2), none of more than degree 3 (Filip, Wampler1 to 5) and none of several
// regressors (Longley).
func TestPolyNIST(t *testing.T) {
	for name, want := range map[string]float64{"norris": 10, "pontius": 10} {
		x, y, p, sd, rsd := nistLinear(t, name)
		degree := len(p) - 1
		var q poly
		if !q.fit(x, y, nil, degree) {
			t.Fatalf("%s: no fit", name)
		}
		left := 0.0
		for i := range x {
			v, _ := q.at(x[i])
			left += (y[i] - v) * (y[i] - v)
		}
		s := math.Sqrt(left / float64(len(x)-degree-1))
		sigma := make([]float64, len(x))
		for i := range sigma {
			sigma[i] = s
		}
		v, b := q.at(0)
		got, se := []float64{v, b}, []float64{q.scatter(0, sigma, false), q.scatter(0, sigma, true)}
		if degree == 2 { // the highest basis polynomial begins with x²
			got, se = append(got, q.c[2]), append(se, s/math.Sqrt(q.norm[2]))
		}
		nearDigits(t, name+" residual standard deviation", s, rsd, want)
		for k := range p {
			nearDigits(t, name+" coefficient", got[k], p[k], want)
			nearDigits(t, name+" standard deviation", se[k], sd[k], want)
		}
	}
}

// The line of the square-root method on Norris. It always weighs by the floors
// too; with sigma a thousand million times the readings these do not count.
func TestLineNIST(t *testing.T) {
	x, y, p, sd, rsd := nistLinear(t, "norris")
	sigma := make([]float64, len(x))
	for i := range sigma {
		sigma[i] = 1e12
	}
	l, ok := layLine(x, y, sigma, 0)
	if !ok {
		t.Fatal("no line")
	}
	b, ub := l.slope()
	zero, uzero := l.zero()
	v, _ := l.p.at(0)
	scale := rsd / 1e12
	nearDigits(t, "slope", b, p[1], 10)
	nearDigits(t, "its standard deviation", ub*scale, sd[1], 10)
	nearDigits(t, "intercept", v, p[0], 10)
	nearDigits(t, "its standard deviation", l.p.scatter(0, sigma, false)*scale, sd[0], 10)
	// The zero of the line is -B0/B1, by the certified figures.
	nearDigits(t, "zero", zero, -p[0]/p[1], 10)
	// Its uncertainty is that of the line's height there, over the slope:
	// √(s²/n + SD(B1)² (zero - mean x)²)/B1.
	mean := 0.0
	for _, v := range x {
		mean += v / float64(len(x))
	}
	want := math.Hypot(rsd/math.Sqrt(float64(len(x))), sd[1]*(-p[0]/p[1]-mean)) / p[1]
	nearDigits(t, "its uncertainty", uzero*scale, want, 10)
}

// nearDigits fails unless got has that many right digits.
func nearDigits(t *testing.T, what string, got, want, digits float64) {
	t.Helper()
	d := -math.Log10(math.Abs(got-want) / math.Abs(want))
	t.Logf("%s: %.15g, certified %.15g: %.1f digits", what, got, want, d)
	if !(d >= digits) {
		t.Errorf("%s: got %.15g, want %.15g: %.1f digits, want %g", what, got, want, d, digits)
	}
}
