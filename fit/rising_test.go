package fit

import "testing"

// The greatest transconductance of a sweep that stops on the rise is marked as
// such; where the curve is seen to bend over (mobility and a small V_DS, or a
// load resistor past half of the supply) it is a maximum. Self-made curves.
func TestGreatestTransconductanceAtTheEndOfASweep(t *testing.T) {
	curve := func(m Model, to, vtop, rl float64) Curve {
		var c Curve
		for v := 2.5; v < to; v += 0.02 {
			c.Vg = append(c.Vg, v)
			c.Id = append(c.Id, m.Solve(v, vtop, rl))
		}
		return c
	}
	m := Model{Vt: 3, Beta: 3, N: 1.5, Theta: 0.1}
	check := func(name string, c Curve, s Setup, want bool) {
		t.Helper()
		s.TestCurrent, s.IdleCurrent = 1e-3, 0
		r := One(c, s)
		if !r.GmMax.Ok() || r.GmRising != want {
			t.Errorf("%s: g_m(max) %v, rising %v, want %v", name, r.GmMax.Value, r.GmRising, want)
		}
	}
	check("saturation", curve(m, 3.6, 10, 0), Setup{Circuit: Fixed, Vds: 10}, true)
	check("small V_DS, past the bend", curve(m, 4, 0.1, 0), Setup{Circuit: Fixed, Vds: 0.1}, false)
	check("load line, short sweep", curve(m, 3.3, 13.8, 15), Setup{Circuit: Load, RL: 15, Vdd: 13.8}, true)
	check("load line, past half of the supply", curve(m, 4, 13.8, 15), Setup{Circuit: Load, RL: 15, Vdd: 13.8}, false)
}
