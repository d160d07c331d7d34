package fit

import (
	"math"
	"testing"
)

// near checks a number against a reference within an absolute tolerance.
func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g ± %.2g (off by %.3g)", what, got, want, tolerance, got-want)
	}
}

func TestAccuracyArithmetic(t *testing.T) {
	// ±(0.5 % + 2 counts of 1 mV) at 3.000 V is ±17 mV; as a rectangle
	// 17/√3 = 9.815 mV (JCGM 100:2008, 4.3.7).
	a := Accuracy{Percent: 0.5, Counts: 2, Resolution: 1e-3}
	near(t, "0.5 % + 2 counts at 3 V", a.absolute(3), 9.815e-3, 0.5e-6)
	near(t, "negative reading", a.absolute(-3), 9.815e-3, 0.5e-6)
	// EA-4/02, supplement S9 (handheld multimeter at 100 V, from memory): a
	// resolution of 0.1 V is a rectangle of ±0.05 V, the calibrator's ±0.011 V
	// another, its reading 0.001 V; together 0.0296 V.
	display := Accuracy{Counts: 1, Resolution: 0.05}.absolute(100)
	source := Accuracy{Percent: 0.011}.absolute(100)
	near(t, "EA-4/02 S9", math.Sqrt(0.001*0.001+display*display+source*source), 0.0296, 0.00005)
	// A statement at k = 2 or 99 % (2.576 for a normal distribution).
	near(t, "k = 2", Accuracy{Percent: 1, Divisor: 2}.absolute(1), 0.005, 1e-12)
	near(t, "99 %", Accuracy{Percent: 1, Divisor: 2.576}.absolute(1), 0.01/2.576, 1e-12)
	if u := (Accuracy{Resolution: 1e-3}).absolute(3); !math.IsNaN(u) {
		t.Errorf("resolution alone is no statement, got %g", u)
	}
	// Quantisation to one step: a rectangle of full width q, q/√12.
	near(t, "one count", random(1e-3, 0), 0.288675e-3, 1e-9)
	near(t, "one count and noise", random(1e-3, 0.5e-3), 0.577350e-3, 1e-9)
}

func TestRangeIsTheLowestThatHolds(t *testing.T) {
	r := []Accuracy{{Top: 0.6, Resolution: 1e-4}, {Top: 6, Resolution: 1e-3}, {Top: 60, Resolution: 1e-2}}
	for _, c := range []struct{ x, want float64 }{{0.6, 1e-4}, {-0.6, 1e-4}, {0.6001, 1e-3}, {6, 1e-3}, {61, 1e-2}} {
		if got := rangeFor(r, c.x).Resolution; got != c.want {
			t.Errorf("%g V: resolution %g, want %g", c.x, got, c.want)
		}
	}
	if rangeFor(nil, 1).known() {
		t.Error("nothing known gave something")
	}
	if got := rangeFor([]Accuracy{{Resolution: 1e-3}}, 7).Resolution; got != 1e-3 {
		t.Errorf("a range without a top: got %g", got)
	}
}

func TestDecimals(t *testing.T) {
	for _, c := range []struct {
		x    float64
		want int
		ok   bool
	}{
		{3.012, 3, true}, {-3.01, 2, true}, {2, 0, true}, {1200, -2, true}, {0.000123, 6, true}, {2.5e-7, 8, true},
		{9.99, 2, true}, {0.1, 1, true}, {1e-12, 12, true}, {12345678, 0, true},
		{1. / 3, 0, false}, {math.Pi, 0, false}, {0, 0, false}, {math.NaN(), 0, false}, {math.Inf(1), 0, false},
	} {
		if got, ok := decimals(c.x); got != c.want || ok != c.ok {
			t.Errorf("decimals(%v) = %d, %v; want %d, %v", c.x, got, ok, c.want, c.ok)
		}
	}
}

func TestResolution(t *testing.T) {
	for _, c := range []struct {
		x    []float64
		want float64
	}{
		{[]float64{2.78, 2.67, 2.94, 2.82, 2.47}, 0.01}, // printed with one decimal too few is no matter
		{[]float64{2.80, 2.9, 3.1}, 0.1},
		{[]float64{2.785, 2.780, 2.775, 2.790}, 0.005},
		{[]float64{1.002, 1.004, 1.010}, 0.002},
		{[]float64{1.001, 1.004, 1.010}, 0.001},
		{[]float64{0.1 + 0.2, 0.5}, 0.1},                 // 0.30000000000000004
		{[]float64{1. / 3, 0.5, 0.7}, 0},                 // computed
		{[]float64{2.78}, 0}, {[]float64{2.78, 2.78}, 0}, // no two different readings
		{nil, 0}, {[]float64{0, 0}, 0},
		{[]float64{math.NaN(), 1.25, 1.5, math.Inf(1)}, 0.05},
	} {
		near(t, "resolution", Resolution(c.x), c.want, 1e-12)
	}
}

func TestQuantaFollowTheRange(t *testing.T) {
	// Two ranges: 1 µA steps, then 10 µA steps from index 6 on.
	x := []float64{0, 0.000001, 0.000014, 0.000212, 0.001234, 0.003657, 0.00722, 0.02158, 0.03109, 0.04051, 0.05113, 0.0593}
	q, place := make([]float64, len(x)), make([]int8, len(x))
	quanta(x, q, place)
	near(t, "fine range", q[2], 1e-6, 1e-15)
	near(t, "coarse range", q[10], 1e-5, 1e-15)
	for j := range x {
		x[j] = math.Sqrt(float64(j + 2))
	}
	quanta(x, q, place)
	for j := range q {
		if q[j] != 0 && x[j] != math.Round(x[j]) {
			t.Errorf("computed number %g has step %g", x[j], q[j])
		}
	}
}

func TestQuantityAsJSON(t *testing.T) {
	for _, c := range []struct {
		q    Quantity
		want string
	}{
		{None(), `{"value":null,"u":null,"u_between":null,"u_absolute":null,"n":0}`},
		{Quantity{Value: 3.5, U: 0.001, UBetween: math.NaN(), UAbsolute: math.Inf(1), N: 4}, `{"value":3.5,"u":0.001,"u_between":null,"u_absolute":null,"n":4}`},
		{Quantity{N: 1}, `{"value":0,"u":0,"u_between":0,"u_absolute":0,"n":1}`},
	} {
		b, err := c.q.MarshalJSON()
		if err != nil || string(b) != c.want {
			t.Errorf("%+v: %s, %v; want %s", c.q, b, err, c.want)
		}
	}
}
