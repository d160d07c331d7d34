package rehearsal

import (
	"errors"
	"math"
	"testing"

	"gatesill/fit"
)

// cold is a device that does not warm up.
func cold() Device { return Device{Name: "D", Vt: 3, Beta: 2, N: 1.5, Theta: 0.1, Lambda: 0.01} }

// hand is a bench with a knob and one device in it.
func hand(t *testing.T, d Device, change func(*Config)) *Bench {
	t.Helper()
	c := Config{Circuit: "load", RL: 10, VDD: 12, Devices: []Device{d}}
	if change != nil {
		change(&c)
	}
	b, err := NewBench(c)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: %.9g, want %.9g ± %.1g", what, got, want, tol)
	}
}

func TestNothingInserted(t *testing.T) {
	b := hand(t, cold(), nil)
	b.Knob(3.5, 0)
	b.Step(1)
	s := b.Truth()
	if s.Device != "" || s.Vg != 3.5 || s.Id != 0 || s.Vl != 0 || s.Vd != 12 || s.Tj != ambient {
		t.Errorf("empty fixture: %+v", s)
	}
}

func TestStates(t *testing.T) {
	for _, c := range []struct {
		state    string
		leak, vg float64
		id, tol  float64
	}{
		{"open", 0, 5, 0, 0},
		{"shorted", 0, 0, 12 / (10 + shortOhm), 1e-12},
		{"", 2e-3, 0, 2e-3, 1e-6}, // leaks with its gate off
		{"", 0, 0, 0, 1e-20},      // does not
		{"", 0, 10, 1.18, 0.02},   // hard on: nearly all of 12 V across 10 ohm
	} {
		d := cold()
		d.State, d.Leak = c.state, c.leak
		b := hand(t, d, nil)
		b.Insert("D")
		b.Knob(c.vg, 0)
		b.Step(0.1)
		s := b.Truth()
		near(t, "I_D, state "+c.state, s.Id, c.id, c.tol)
		near(t, "V_L + V_D", s.Vl+s.Vd, 12, 1e-9)
		near(t, "V_L", s.Vl, 10*s.Id, 1e-12)
	}
	if err := hand(t, cold(), nil).Insert("E"); !errors.Is(err, ErrConfig) {
		t.Errorf("a device that is not there: %v", err)
	}
}

// With a leak the operating point is found by another way than without; a leak of
// next to nothing must not matter.
func TestLeakAndSolveAgree(t *testing.T) {
	for _, circuit := range []string{"load", "fixed", "diode"} {
		for vg := 2.5; vg < 6; vg += 0.5 {
			var id [2]float64
			for k, leak := range []float64{0, 1e-15} {
				d := cold()
				d.Leak = leak
				b := hand(t, d, func(c *Config) {
					c.Circuit = circuit
					c.Meters = []Meter{{Role: "current", Speaks: "text", Counts: 1000, Tops: []float64{10}, Burden: 0.5}}
				})
				b.Insert("D")
				b.Knob(vg, 0)
				s := b.Truth()
				id[k] = s.Id
				switch circuit {
				case "diode":
					near(t, "V_G is V_D", s.Vg, s.Vd, 1e-9)
					near(t, "diode", s.Id, fit.Model{Vt: 3, Beta: 2, N: 1.5, Theta: 0.1, Lambda: 0.01}.Current(s.Vd, s.Vd), 1e-6)
				case "fixed":
					near(t, "fixed", s.Vd, 12-0.5*s.Id, 1e-9)
				}
			}
			near(t, circuit, id[1], id[0], 1e-9)
		}
	}
}

// A constant power warms a first-order body by P R (1 - exp(-t/tau)); afterwards the
// body cools by the same law. A shorted device keeps its power whatever its
// temperature.
func TestHeatClosedForm(t *testing.T) {
	for _, speed := range []float64{1, 20} {
		d := cold()
		d.State, d.Rth, d.Tau = "shorted", 50, 4
		b := hand(t, d, func(c *Config) { c.Speed = speed })
		b.Insert("D")
		i := 12 / (10 + shortOhm)
		power := i * i * shortOhm
		for _, world := range []float64{1, 4, 12, 40} {
			b.Step(world / speed)
			want := power * 50 * (1 - math.Exp(-world/4))
			near(t, "rise", b.Truth().Tj-ambient, want, 0.002*want)
		}
	}
}

// With feedback the end is where the rise that the current makes is the rise that
// makes the current.
func TestHeatWithFeedback(t *testing.T) {
	d := cold()
	d.Kappa, d.Alpha, d.Rth, d.Tau = 0.004, 1.8, 8, 2
	b := hand(t, d, nil)
	b.Insert("D")
	b.Knob(3.4, 0)
	at := func(rise float64) (id, vd float64) {
		m := fit.Model{Vt: 3 - 0.004*rise, Beta: 2 * math.Pow((298.15+rise)/298.15, -1.8), N: 1.5, Theta: 0.1, Lambda: 0.01}
		id = m.Solve(3.4, 12, 10)
		return id, 12 - 10*id
	}
	start := b.Truth()
	id, _ := at(0)
	near(t, "cold current", start.Id, id, 1e-12)
	b.Step(40)
	rise := 0.0
	for range 1000 {
		id, vd := at(rise)
		rise += 0.1 * (8*id*vd - rise)
	}
	id, _ = at(rise)
	s := b.Truth()
	near(t, "rise", s.Tj-ambient, rise, 1e-3*rise)
	near(t, "warm current", s.Id, id, 1e-3*id)
	if rise < 3 || s.Id < 1.05*start.Id {
		t.Errorf("rise %.3g K, current %.4g -> %.4g A: too little to have been tested", rise, start.Id, s.Id)
	}
	b.Remove()
	b.Insert("D")
	near(t, "cold again", b.Truth().Id, start.Id, 1e-12)
}

func TestKnob(t *testing.T) {
	still := hand(t, cold(), nil)
	still.Knob(2, 0.05)
	still.Step(10)
	near(t, "at 50 mV/s", still.Truth().Vg, 0.5, 1e-9)
	still.Step(50)
	near(t, "arrived", still.Truth().Vg, 2, 0)

	b := hand(t, cold(), func(c *Config) { c.Tremor = 0.45 })
	b.Knob(1, 0.05)
	slow, fast, last := math.Inf(1), 0.0, 0.0
	for k := 1; k <= 1000; k++ {
		b.Step(float64(k) * 0.01)
		v := b.Truth().Vg
		rate := (v - last) / 0.01
		slow, fast, last = min(slow, rate), max(fast, rate), v
	}
	if slow < 0.05*0.55-1e-9 || fast > 0.05*1.45+1e-9 {
		t.Errorf("rate from %.4g to %.4g V/s, want within 45 %% of 0.05", slow, fast)
	}
	if slow > 0.05*0.75 || fast < 0.05*1.25 {
		t.Errorf("rate from %.4g to %.4g V/s: hardly any tremor", slow, fast)
	}
	b.Knob(0.1, 0.02)
	b.Step(100)
	near(t, "back down", b.Truth().Vg, 0.1, 0)
	if err := b.Knob(math.NaN(), 1); !errors.Is(err, ErrConfig) {
		t.Errorf("knob to nowhere: %v", err)
	}
}

// What is so at a time must not hang on how often the clock was looked at.
func TestStepsDoNotMatter(t *testing.T) {
	run := func(step float64) Truth {
		d := cold()
		d.Kappa, d.Rth, d.Tau = 0.004, 8, 2
		b := hand(t, d, func(c *Config) { c.Tremor = 0.3 })
		b.Insert("D")
		b.Knob(3.5, 0.5)
		for x := step; x < 10; x += step {
			b.Step(x)
		}
		b.Step(10)
		return b.Truth()
	}
	one, many := run(10), run(0.0037)
	near(t, "V_G", many.Vg, one.Vg, 1e-12)
	near(t, "I_D", many.Id, one.Id, 1e-5*one.Id)
	near(t, "T", many.Tj, one.Tj, 1e-3)
}

func TestConfigRefused(t *testing.T) {
	meter := Meter{Role: "gate", Speaks: "text", Counts: 1000, Tops: []float64{10}}
	good := Config{Circuit: "load", RL: 10, VDD: 12, Devices: []Device{cold()}, Meters: []Meter{meter}}
	if _, err := NewBench(good); err != nil {
		t.Fatal(err)
	}
	for name, change := range map[string]func(c *Config){
		"circuit":  func(c *Config) { c.Circuit = "ring" },
		"resistor": func(c *Config) { c.RL = 0 },
		"speed":    func(c *Config) { c.Speed = math.NaN() },
		"twice":    func(c *Config) { c.Devices = []Device{cold(), cold()} },
		"state":    func(c *Config) { c.Devices[0].State = "warm" },
		"beta":     func(c *Config) { c.Devices[0].Beta = 0 },
		"role":     func(c *Config) { c.Meters[0].Role = "colour" },
		"format":   func(c *Config) { c.Meters[0].Speaks = "morse" },
		"ranges":   func(c *Config) { c.Meters[0].Tops = []float64{10, 1} },
		"counts":   func(c *Config) { c.Meters[0].Counts = 0 },
		"settings": func(c *Config) { c.Meters[0].Paced, c.Meters[0].Settings = true, "9600 9X9" },
		"digits": func(c *Config) {
			c.Meters[0].Speaks, c.Meters[0].Counts, c.Meters[0].Tops = "fs9721", 50000, []float64{5}
		},
		"a count": func(c *Config) { c.Meters[0].Speaks, c.Meters[0].Counts = "fs9721", 3000 },
		"one line": func(c *Config) {
			c.Meters[0].Line, c.Meters[0].Speaks, c.Meters[0].Counts = "x", "fs9721", 4000
			c.Meters[0].Tops = []float64{4}
			c.Meters = append(c.Meters, c.Meters[0])
			c.Meters[1].Role = "load"
		},
		"line":   func(c *Config) { c.Meters[0].Line = "../x" },
		"supply": func(c *Config) { c.Supplies = []string{"gate", "gate"} },
	} {
		c := good
		c.Devices, c.Meters = []Device{cold()}, []Meter{meter}
		change(&c)
		if _, err := NewBench(c); !errors.Is(err, ErrConfig) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
