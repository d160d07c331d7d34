package acquire

import (
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

func reads(role string, at, x float64) record.Reading {
	return record.Reading{Role: role, Meter: role, At: at, Value: record.Known(x), Unit: unitOf(role)}
}

func overloaded(role string, at float64) record.Reading {
	return record.Reading{Role: role, Meter: role, At: at, State: record.Overload, Unit: unitOf(role)}
}

// Scenario 2: 5 W at 12 V warns at 333 mA and stops at 417 mA.
func TestPowerLimitOfScenario2(t *testing.T) {
	for _, sign := range []float64{1, -1} {
		for _, c := range []struct {
			id   float64
			want Level
		}{{0.300, Within}, {0.330, Within}, {0.333, Warn}, {0.400, Warn}, {0.416, Warn}, {0.417, Over}, {0.5, Over}} {
			g := NewGuard(Limits{Vgs: 10, ID: 2, PD: 5}, record.Condition{Circuit: record.Fixed}, nil)
			g.Add(reads(Gate, 1, 3*sign))
			g.Add(reads(Drain, 1, 12*sign))
			g.Add(reads(Current, 1, c.id*sign))
			if w := g.Look(); w.Level != c.want {
				t.Errorf("sign %g, %.0f mA: level %d, want %d (%v)", sign, 1e3*c.id, w.Level, c.want, w.Shares)
			}
		}
	}
}

func TestEveryLimit(t *testing.T) {
	load := record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12), RLRating: record.Known(5)}
	for _, c := range []struct {
		name   string
		limits Limits
		give   func(share float64) []record.Reading
	}{
		{"V_GS", Limits{Vgs: 5}, func(s float64) []record.Reading { return []record.Reading{reads(Gate, 1, -5*s)} }},
		{"V_DS", Limits{Vds: 20}, func(s float64) []record.Reading { return []record.Reading{reads(Drain, 1, 20*s)} }},
		{"I_D", Limits{ID: 0.5}, func(s float64) []record.Reading { return []record.Reading{reads(Current, 1, -0.5*s)} }},
		{"P_D", Limits{PD: 3}, func(s float64) []record.Reading {
			return []record.Reading{reads(Drain, 1, 10), reads(Current, 1, 0.3*s)}
		}},
		{"temperature", Limits{Temp: 100}, func(s float64) []record.Reading { return []record.Reading{reads(Temperature, 1, 100*s)} }},
		{"load resistor", Limits{}, func(s float64) []record.Reading {
			return []record.Reading{reads(Current, 1, math.Sqrt(0.5*s))}
		}},
	} {
		for _, x := range []struct {
			share float64
			want  Level
		}{{0.75, Within}, {0.85, Warn}, {0.99, Warn}, {1.01, Over}} {
			g := NewGuard(c.limits, load, nil)
			for _, r := range c.give(x.share) {
				g.Add(r)
			}
			w := g.Look()
			worst, _ := w.Worst()
			if x.want > Within && (w.Level != x.want || worst.Name != c.name) {
				t.Errorf("%s at %.2f: level %d of %v, want %d", c.name, x.share, w.Level, worst, x.want)
			}
			for _, s := range w.Shares {
				if s.Name == c.name && s.Level() != x.want {
					t.Errorf("%s at %.2f: %v, level %d, want %d", c.name, x.share, s, s.Level(), x.want)
				}
			}
		}
	}
}

// The power is that of values that need not belong together: the greatest of the
// last two of each.
func TestPowerIsOnTheSafeSide(t *testing.T) {
	g := NewGuard(Limits{PD: 5}, record.Condition{}, nil)
	for _, r := range []record.Reading{reads(Drain, 0, 11), reads(Current, 0.1, 0.1), reads(Drain, 0.4, 9), reads(Current, 0.5, 0.3)} {
		g.Add(r)
	}
	if w := g.Look(); math.Abs(w.PD-11*0.3) > 1e-12 {
		t.Errorf("P_D %g W, want 11 V x 0.3 A", w.PD)
	}
	g.Add(reads(Drain, 0.8, 9))
	if w := g.Look(); math.Abs(w.PD-9*0.3) > 1e-12 {
		t.Errorf("P_D %g W, want 9 V x 0.3 A: only the last two count", w.PD)
	}
}

// Where V_DS and I_D come from.
func TestWhereVoltageAndCurrentComeFrom(t *testing.T) {
	load := record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12)}
	for _, c := range []struct {
		name    string
		circuit record.Condition
		give    []record.Reading
		vds, id float64
	}{
		{"drain meter", load, []record.Reading{reads(Drain, 1, 10), reads(Load, 1, 3), reads(Current, 1, 0.2)}, 10, 0.3},
		{"V_DD less V_L", load, []record.Reading{reads(Load, 1, 3), reads(Current, 1, 0.3)}, 9, 0.3},
		{"read V_DD less V_L", load, []record.Reading{reads(Supply, 1, 13), reads(Load, 1, 3)}, 10, 0.3},
		{"V_DD less I R_L", load, []record.Reading{reads(Current, 1, 0.2)}, 10, 0.2},
		{"drain meter alone", load, []record.Reading{reads(Drain, 1, 10)}, 10, 0.2},
		{"prefix lost, load meter tells", load, []record.Reading{reads(Load, 1, 3), reads(Current, 1, 0.0003)}, 9, 0.3},
		{"prefix lost, V_DD - V_D tells", load, []record.Reading{reads(Supply, 1, 12), reads(Drain, 1, 9), reads(Current, 1, 0.0003)}, 9, 0.288}, // 1 % of V_DD is left to the two meters
		{"p-channel", load, []record.Reading{reads(Drain, 1, -10), reads(Current, 1, -0.2)}, 10, 0.2},
		{"diode", record.Condition{Circuit: record.Diode, RL: record.Known(10), VDD: record.Known(12)}, []record.Reading{reads(Gate, 1, 4)}, 4, 0.8},
		{"fixed", record.Condition{Circuit: record.Fixed, VDS: record.Known(10)}, []record.Reading{reads(Current, 1, 0.2)}, 10, 0.2},
	} {
		g := NewGuard(Limits{}, c.circuit, nil)
		for _, r := range c.give {
			g.Add(r)
		}
		if w := g.Look(); math.Abs(w.Vds-c.vds) > 1e-9 || math.Abs(w.ID-c.id) > 1e-9 {
			t.Errorf("%s: V_DS %g V, I_D %g A, want %g V, %g A", c.name, w.Vds, w.ID, c.vds, c.id)
		}
	}
}

func TestOverloadIsAboveEveryLimit(t *testing.T) {
	for _, c := range []struct {
		role   string
		limits Limits
	}{{Gate, Limits{Vgs: 10}}, {Current, Limits{ID: 1}}, {Current, Limits{PD: 5}}, {Drain, Limits{Vds: 30}}, {Drain, Limits{PD: 5}}, {Load, Limits{ID: 1}}, {Temperature, Limits{Temp: 100}}} {
		g := NewGuard(c.limits, record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12)}, nil)
		for _, r := range []string{Gate, Current, Drain, Load, Temperature} {
			g.Add(reads(r, 0, 0))
		}
		if w := g.Look(); w.Level != Within {
			t.Fatalf("%s: at zero level %d", c.role, w.Level)
		}
		g.Add(overloaded(c.role, 1))
		if w := g.Look(); w.Level != Over {
			t.Errorf("%s overloaded, %+v: level %d", c.role, c.limits, w.Level)
		}
		g.Add(reads(c.role, 2, 0))
		if w := g.Look(); w.Level != Within {
			t.Errorf("%s back in range: level %d", c.role, w.Level)
		}
	}
	// A meter that shows one overload whenever it changes its range.
	g := NewGuard(Limits{ID: 1}, record.Condition{}, map[string]int{Current: 2})
	g.Add(reads(Current, 0, 0.1))
	g.Add(overloaded(Current, 1))
	if w := g.Look(); w.Level != Within {
		t.Errorf("one overload of two: level %d", w.Level)
	}
	g.Add(overloaded(Current, 2))
	if w := g.Look(); w.Level != Over {
		t.Errorf("two overloads: level %d", w.Level)
	}
}

func TestNoNumberChangesNothing(t *testing.T) {
	g := NewGuard(Limits{ID: 1}, record.Condition{}, nil)
	g.Add(reads(Current, 0, 0.9))
	g.Add(reads(Current, 1, 0.9))
	held := reads(Current, 2, 0.1)
	held.Refused = "held"
	g.Add(held)
	g.Add(held)
	g.Add(record.Reading{Role: Current, At: 3, State: record.Missing})
	if w := g.Look(); w.ID != 0.9 || w.Level != Warn {
		t.Errorf("I_D %g A, level %d: held and missing readings must not hide it", w.ID, w.Level)
	}
}

func TestSetUpSaysTheWorst(t *testing.T) {
	// 12 V through 5 ohm: 144/20 = 7.2 W in the device at 1.2 A, 28.8 W in the resistor.
	text := strings.Join(SetUp(Limits{Vgs: 10, PD: 5}, record.Condition{Circuit: record.Load, VDD: record.Known(12), RL: record.Known(5), RLRating: record.Known(10)}), "\n")
	for _, want := range []string{"7.20 W", "1.20 A", "above its limit of 5.00 W", "28.8 W", "above its rating of 10.0 W", "I_D is not watched", "V_DS is not watched"} {
		if !strings.Contains(text, want) {
			t.Errorf("set-up does not say %q:\n%s", want, text)
		}
	}
	if strings.Contains(text, "P_D is not") || strings.Contains(text, "V_GS is not") {
		t.Errorf("says of a known limit that it is not watched:\n%s", text)
	}
	text = strings.Join(SetUp(Limits{}, record.Condition{Circuit: record.Fixed}), "\n")
	if !strings.Contains(text, "only the current limit of the supply") {
		t.Errorf("held V_DS: %s", text)
	}
}

func TestShow(t *testing.T) {
	for _, c := range []struct {
		x    float64
		unit string
		want string
	}{{3.15, "V", "3.150 V"}, {-3.15, "V", "-3.150 V"}, {12, "V", "12.0 V"}, {0, "V", "0 V"}, {0.333, "A", "333 mA"}, {0.417, "A", "417 mA"}, {4, "W", "4.00 W"},
		{50e-6, "A", "50.0 µA"}, {0.9999, "A", "1.00 A"}, {28.8, "W", "28.8 W"}, {25.5, "degC", "25.5 °C"}, {math.NaN(), "V", "n/a"}, {math.Inf(1), "A", "overload"}, {0.0005, "V", "500 µV"}} {
		if got := show(c.x, c.unit); got != c.want {
			t.Errorf("show(%g, %s) = %q, want %q", c.x, c.unit, got, c.want)
		}
	}
}

// The prediction lies above the device's curve for every kind of device, whatever
// the spacing of the points, as long as nothing warms up.
func TestPredictionLiesAbove(t *testing.T) {
	for _, d := range []simDevice{{vt: 3, beta: 1.9, n: 1.4}, {vt: 3, beta: 20, n: 1.0}, {vt: 2, beta: 0.2, n: 2.5}, {vt: 3.5, beta: 5, n: 1.2}} {
		for _, step := range []float64{0.004, 0.01, 0.03, 0.05, 0.1} {
			var ns []node
			for u := d.vt - 0.5; u < d.vt+0.6; u += step {
				i := d.at(u, 12)
				ns = append(ns, node{u, i})
				predict := safePrediction(ns, node{u, i}, 20e-6)
				for _, ahead := range []float64{0.001, 0.01, 0.05, 0.1} {
					if want := d.at(u+ahead, 12); predict(u+ahead) < want*0.999 {
						t.Errorf("beta %g, n %g, points every %g V, at %.3f V: %.4g A predicted %.3f V ahead, will be %.4g A", d.beta, d.n, step, u, predict(u+ahead), ahead, want)
					}
				}
			}
		}
	}
}
