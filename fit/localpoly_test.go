package fit

import (
	"math"
	"testing"
)

// maps5 gives the linear maps of an m-point window with step h at its middle.
func windowMaps(t *testing.T, m, degree int, h float64) (value, slope []float64) {
	t.Helper()
	x, y := make([]float64, m), make([]float64, m)
	for j := range x {
		x[j] = 3 + h*float64(j-m/2) // not about zero
	}
	var p poly
	if !p.fit(x, y, nil, degree) {
		t.Fatal("no fit")
	}
	value, slope = make([]float64, m), make([]float64, m)
	p.maps(3, value, slope)
	return value, slope
}

func checkRow(t *testing.T, what string, got, want []float64, divisor float64) {
	t.Helper()
	for j := range want {
		near(t, what, got[j], want[j]/divisor, 1e-12*math.Max(1, math.Abs(want[j]/divisor)))
	}
}

// The published convolution integers of A. Savitzky and M. J. E. Golay, Anal.
// Chem. 36 (1964) 1627–1639, tables I (smoothing) and IV, V (first derivative).
func TestSavitzkyGolay(t *testing.T) {
	const h = 0.05
	v, s := windowMaps(t, 5, 2, h)
	checkRow(t, "5-point quadratic smoothing", v, []float64{-3, 12, 17, 12, -3}, 35)
	checkRow(t, "5-point quadratic slope", s, []float64{-2, -1, 0, 1, 2}, 10*h)
	v, s = windowMaps(t, 7, 2, h)
	checkRow(t, "7-point quadratic smoothing", v, []float64{-2, 3, 6, 7, 6, 3, -2}, 21)
	checkRow(t, "7-point quadratic slope", s, []float64{-3, -2, -1, 0, 1, 2, 3}, 28*h)
	v, s = windowMaps(t, 5, 3, h)
	checkRow(t, "5-point cubic smoothing", v, []float64{-3, 12, 17, 12, -3}, 35)
	checkRow(t, "5-point cubic slope", s, []float64{1, -8, 0, 8, -1}, 12*h)
	_, s = windowMaps(t, 7, 3, h)
	checkRow(t, "7-point cubic slope", s, []float64{22, -67, -58, 0, 58, 67, -22}, 252*h)
	// Noise gain of the first derivative: √(12/(m(m²-1)))/h, 0.18898/h at m = 7.
	_, s = windowMaps(t, 7, 2, 1)
	sum := 0.0
	for _, a := range s {
		sum += a * a
	}
	near(t, "noise gain", math.Sqrt(sum), 0.18898, 5e-6)
}

// A parabola on an uneven grid is met exactly: y = 3 - 2x + x²/2 has the slope
// x - 2 (closed form).
func TestPolyExact(t *testing.T) {
	x := []float64{0, .7, 1.1, 2.3, 2.9, 4.2, 5, 5.4, 6.8}
	y := make([]float64, len(x))
	for j, v := range x {
		y[j] = 3 - 2*v + v*v/2
	}
	w := []float64{1, 3, 0.5, 2, 1, 1, 7, 1, 0.1}
	for degree := 2; degree <= maxDegree; degree++ {
		for lo := 0; lo+5 <= len(x); lo++ {
			var p poly
			if !p.fit(x[lo:lo+5], y[lo:lo+5], w[lo:lo+5], degree) {
				t.Fatal("no fit")
			}
			for _, at := range []float64{x[lo], 2.5, x[lo+4]} {
				v, s := p.at(at)
				near(t, "value", v, 3-2*at+at*at/2, 1e-12)
				near(t, "slope", s, at-2, 1e-12)
				value, slope := make([]float64, 5), make([]float64, 5)
				p.maps(at, value, slope)
				sv, ss := 0.0, 0.0
				for k := range value {
					sv += value[k] * y[lo+k]
					ss += slope[k] * y[lo+k]
				}
				near(t, "value by the map", sv, v, 1e-11)
				near(t, "slope by the map", ss, s, 1e-11)
			}
		}
	}
}

func TestPolyRefuses(t *testing.T) {
	var p poly
	if p.fit([]float64{1, 2}, []float64{1, 2}, nil, 2) {
		t.Error("two points gave a parabola")
	}
	if p.fit([]float64{1, 1, 1}, []float64{1, 2, 3}, nil, 1) {
		t.Error("three points of one abscissa gave a line")
	}
	if p.fit([]float64{1, 1, 2, 2}, []float64{1, 1, 3, 3}, nil, 2) {
		if v, _ := p.at(1); math.IsNaN(v) {
			t.Error("two different abscissas gave a parabola that is not a number")
		}
	}
}

// The scatter of a value is that of the map: the mean of n points of σ has
// σ/√n.
func TestPolyScatter(t *testing.T) {
	x := []float64{1, 2, 3, 4}
	s := []float64{2, 2, 2, 2}
	var p poly
	p.fit(x, []float64{1, 5, 2, 8}, nil, 0)
	near(t, "mean", p.scatter(2.5, s, false), 1, 1e-12)
	p.fit(x, []float64{1, 5, 2, 8}, nil, 1)
	// Slope of a line: σ/√Σ(x-x̄)² = 2/√5.
	near(t, "slope", p.scatter(0, s, true), 2/math.Sqrt(5), 1e-12)
}
