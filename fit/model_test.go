package fit

import (
	"math"
	"testing"
)

// Values of the level-1 equations (Shichman & Hodges 1968) and of the level-3
// mobility term, worked by hand; testdata/spice has the same from a circuit
// simulator. The model's knee is made narrow (N = 0.02) so that it does not
// count.
func TestModelClosedForm(t *testing.T) {
	check := func(name string, got, want, tol float64) {
		t.Helper()
		if !(math.Abs(got-want) <= tol) {
			t.Errorf("%s: %.9g, want %.9g ± %.1g", name, got, want, tol)
		}
	}
	l1 := Model{Vt: 3, Beta: 2, N: 0.02, Lambda: 0.01}
	check("I(3.5), V_DS=V_GS", l1.Current(3.5, 3.5), 0.25875, 1e-9)
	check("I(4.5), V_DS=V_GS", l1.Current(4.5, 4.5), 2.35125, 1e-9)
	check("I(3.5), V_DS=0.1", l1.Current(3.5, 0.1), 0.0900900*1.0, 5e-8)
	check("I(6), V_DS=0.1", l1.Current(6, 0.1), 0.590590*1.0, 5e-7)
	th := Model{Vt: 3, Beta: 2, N: 0.02, Theta: 0.1}
	check("I(4), theta", th.Current(4, 4), 0.909091, 5e-7)
	check("V_L(3.5)", 10*l1.Solve(3.5, 12, 10), 2.731707, 5e-7)
	check("V_L(4)", 10*l1.Solve(4, 12, 10), 10.181818, 5e-7)
	check("V_L(6)", 10*l1.Solve(6, 12, 10), 11.796909, 5e-7)
	// A decade of current per n·U_T·ln 10 far below the threshold.
	weak := Model{Vt: 3, Beta: 2, N: 1.5}
	slope := math.Log(weak.Current(1.0, 10) / weak.Current(0.9, 10))
	check("ln I per 0.1 V below threshold", slope, 0.1/(1.5*thermalVoltage), 1e-6)
}
