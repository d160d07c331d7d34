package bias

import (
	"math"
	"testing"

	"gatesill/fit/lot"
)

// TestZeroPoint holds the formulas against differences of the square law itself, and
// against values worked out elsewhere: κ 4 mV/K and α 1.7 give -3.9, -3.0 and +1.7 mV/K at
// overdrives of 0.05, 0.36 and 2 V.
func TestZeroPoint(t *testing.T) {
	const temp, kappa, alpha = 25.0, usualKappa, usualAlpha
	abs := temp - absoluteZero
	for _, c := range []struct{ v, slope float64 }{{0.05, -3.9e-3}, {0.36, -3.0e-3}, {2, 1.7e-3}} {
		beta := 3.8
		idle := beta / 2 * c.v * c.v
		gm := beta * c.v
		p := planOf(t, Lot{Devices: []lot.Device{device("a", 3+c.v, gm)}}, Options{Idle: idle, Beta: nan, Temp: temp, Tempco: NoTempco()})
		near(t, "slope", p.Thermal.Typical, c.slope, 0.06e-3)
		// The gate voltage at the idle current, a tenth of a kelvin up and down.
		gate := func(dt float64) float64 {
			return 3 - kappa*dt + math.Sqrt(2*idle/(beta*math.Pow((abs+dt)/abs, -alpha)))
		}
		near(t, "by difference", p.Thermal.Typical, (gate(0.1)-gate(-0.1))/0.2, 1e-8)
		// At the zero point a tenth of a kelvin more leaves the current as it is.
		current := func(dt float64) float64 {
			v := p.Thermal.ZeroGate - 3 + kappa*dt
			return beta / 2 * math.Pow((abs+dt)/abs, -alpha) * v * v
		}
		near(t, "change at the zero point", current(0.1)/current(-0.1)-1, 0, 1e-6)
		near(t, "current there", p.Thermal.ZeroCurrent, current(0), 1e-9)
		if p.Thermal.Rises != (c.v < 2*kappa*abs/alpha) {
			t.Errorf("at %g V: rises %v", c.v, p.Thermal.Rises)
		}
	}
	// Worked out elsewhere: κ = 2 mV/K, α = 1.5, 300 K is 0.800 V of overdrive.
	near(t, "formula", 2*2e-3*300/1.5, 0.8, 1e-12)
	// A coefficient given takes the place of the usual κ; the rate is -s·g_m/I.
	p := planOf(t, Lot{Devices: []lot.Device{device("a", 3.4, 1)}}, Options{Idle: 0.2, Beta: nan, Temp: nan, Tempco: Tempco{Value: -2e-3, Basis: TempcoGiven}})
	near(t, "rate", p.Thermal.Rate, 2e-3*1/0.2, 1e-12)
	k := usualAlpha*0.4/(2*298.15) + 2e-3
	near(t, "zero point", p.Thermal.ZeroGate, 3+2*k*298.15/usualAlpha, 1e-12)
	if !p.Thermal.Assumed {
		t.Error("25 °C not marked as assumed")
	}
}

func TestTempcoOf(t *testing.T) {
	got := TempcoOf([][]TempPoint{
		{{25, 3.0}, {75, 2.8}},               // -4 mV/K
		{{25, 3.1}, {50, 3.025}, {75, 2.95}}, // -3
		{{25, 3.1}, {75, 2.85}},              // -5
		{{25, 3.1}, {27, 9}},                 // too near to say
		{{25, 3.1}, {nan, 3}},
		nil,
	})
	near(t, "median", got.Value, -4e-3, 1e-12)
	near(t, "least", got.Low, -5e-3, 1e-12)
	if got.N != 3 || got.Basis != TempcoMeasured || got.From != 25 || got.To != 75 {
		t.Errorf("%+v", got)
	}
	if got := TempcoOf(nil); got.Basis != "" || !math.IsNaN(got.Value) {
		t.Errorf("%+v", got)
	}
}
