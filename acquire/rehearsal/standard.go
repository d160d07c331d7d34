package rehearsal

import (
	"fmt"
	"math/rand/v2"
)

// The standard benches.
const (
	Quick    = "quick"    // three quick meters, the gate's and the drain's supply on lines
	Handheld = "handheld" // three handhelds, the gate turned by hand
	OneLine  = "one line" // a microcontroller that prints gate voltage, current and load voltage
)

// Standards names the standard benches.
var Standards = []string{Quick, Handheld, OneLine}

// invented are the devices of the standard benches, the same for the same seed.
func invented(seed uint64) []Device {
	r := rand.New(rand.NewPCG(seed, 0))
	var out []Device
	for i := range 8 {
		out = append(out, Device{
			Name:  fmt.Sprintf("R%d", i+1),
			Vt:    2.92 + 0.055*r.NormFloat64(),
			Beta:  3.4 * (1 + 0.03*r.NormFloat64()),
			N:     1.6,
			Theta: 0.12, Lambda: 0.008,
			Kappa: 4e-3, Alpha: 1.8, Rth: 2, Tau: 20,
		})
	}
	return out
}

// Standard is a bench to begin with: a load resistor of 15 ohm at 13.8 V, and eight
// invented devices R1 to R8 with thresholds near 2.9 V. Folder, Seed and whatever
// else may be changed before [Start].
func Standard(kind string) (Config, error) {
	const seed = 1
	c := Config{
		Circuit: "load", RL: 15, VDD: 13.8, Rating: 50, Devices: invented(seed), Seed: seed, Tremor: 0.45,
		MaxVgs: 10, MaxVds: 20, MaxID: 1, MaxPD: 5,
	}
	switch kind {
	case Quick:
		// Integration over one period of 50 Hz; the lags are within what is said of them.
		quick := Meter{Counts: 120000, Noise: 0.5, Cycle: 0.02, Integration: 0.02, Processing: 0.001, LagU: 0.003, Percent: 0.01, Plus: 4}
		gate, current, load := quick, quick, quick
		gate.Role, gate.Speaks, gate.Settings, gate.Tops, gate.Lag = "gate", "text", "115200 8N1", []float64{12}, 0.001
		current.Role, current.Speaks, current.Settings, current.Tops, current.Burden = "current", "scpi", "115200 8N1", []float64{1.2}, 0.1
		current.Lag, current.Gain = 0.0005, 1.00004
		load.Role, load.Speaks, load.Settings, load.Tops, load.Lag = "load", "text", "115200 8N1", []float64{120}, -0.0005
		c.Meters = []Meter{gate, current, load}
		c.Supplies = []string{"gate", "drain"}
		c.Bleed = 100e3
	case Handheld:
		hand := Meter{Integration: 0.1, Processing: 0.05, LagU: 0.03, Paced: true, Auto: true, Noise: 0.2}
		gate, current, load := hand, hand, hand
		gate.Role, gate.Speaks, gate.Settings, gate.Counts, gate.Tops = "gate", "fs9721", "2400 8N1", 4000, []float64{4, 40}
		gate.Cycle, gate.Lag, gate.Percent, gate.Plus, gate.Gain = 0.3, 0.021, 0.5, 2, 1.0012
		current.Role, current.Speaks, current.Settings, current.Counts, current.Tops = "current", "es51922", "19230 7O1", 22000, []float64{0.022, 0.22, 22}
		current.Cycle, current.Lag, current.Percent, current.Plus, current.Gain, current.Burden = 0.4, -0.013, 0.8, 10, 0.998, 0.5
		load.Role, load.Speaks, load.Settings, load.Counts, load.Tops = "load", "fs9922", "2400 8N1", 6000, []float64{6, 60}
		load.Cycle, load.Lag, load.Percent, load.Plus, load.Gain = 0.25, 0.006, 0.5, 2, 0.9991
		c.Meters = []Meter{gate, current, load}
	case OneLine:
		column := Meter{Line: "line", Speaks: "text", Settings: "115200 8N1", Counts: 60000, Noise: 0.4, Cycle: 0.05, Integration: 0.02, Processing: 0.001, LagU: 0.001, Percent: 0.1, Plus: 2}
		gate, current, load := column, column, column
		gate.Role, gate.Tops = "gate", []float64{6}
		current.Role, current.Tops, current.Burden = "current", []float64{0.6}, 0.1
		load.Role, load.Tops = "load", []float64{60}
		c.Meters = []Meter{gate, current, load}
	default:
		return Config{}, fmt.Errorf("%w: no standard bench %q", ErrConfig, kind)
	}
	return c, nil
}
