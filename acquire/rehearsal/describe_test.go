package rehearsal

import (
	"math"
	"testing"

	"gatesill/acquire/bench"
)

// The bench file of every standard bench is one that can be read, and says what was
// configured.
func TestDescription(t *testing.T) {
	for _, kind := range Standards {
		c, err := Standard(kind)
		if err != nil {
			t.Fatal(err)
		}
		sim, err := NewBench(c)
		if err != nil {
			t.Fatalf("%s: %v", kind, err)
		}
		text, err := sim.Describe(func(line string) string { return "/x/" + line })
		if err != nil {
			t.Fatal(err)
		}
		b, err := bench.Parse([]byte(text))
		if err != nil {
			t.Fatalf("%s: %v\n%s", kind, err, text)
		}
		if len(b.Meters) != len(c.Meters) || len(b.Supplies) != len(c.Supplies) || b.Given.RL.Or(0) != c.RL || b.Given.VDD.Or(0) != c.VDD || b.Limits.PD.Or(0) != c.MaxPD {
			t.Errorf("%s: %+v", kind, b)
		}
		for i, m := range c.Meters {
			in, line := b.Meters[i], b.Lines[i]
			if in.Role != m.Role || line.Path != "/x/"+m.lineName() || line.Speaks != m.Speaks || line.Integration.Or(0) != m.Integration || line.LagU.Or(0) != m.LagU {
				t.Errorf("%s %s: %+v %+v", kind, m.Role, in, line)
			}
			if len(in.Ranges) != len(m.Tops) {
				t.Fatalf("%s %s: %d ranges", kind, m.Role, len(in.Ranges))
			}
			for k, r := range in.Ranges {
				if math.Abs(r.Top/m.Tops[k]-1) > 1e-9 || math.Abs(r.Resolution*m.Counts/m.Tops[k]-1) > 1e-9 || r.Percent != m.Percent || r.Counts != m.Plus {
					t.Errorf("%s %s range %d: %+v", kind, m.Role, k, r)
				}
			}
			// An invented error that its own statement does not cover would make liars of both.
			if g := m.Gain; g != 0 && math.Abs(g-1) > m.Percent/100 {
				t.Errorf("%s %s: gain %g, stated %g %%", kind, m.Role, g, m.Percent)
			}
			if math.Abs(m.Lag) > m.LagU {
				t.Errorf("%s %s: lag %g s, stated %g s", kind, m.Role, m.Lag, m.LagU)
			}
		}
	}
	if _, err := Standard("grand"); err == nil {
		t.Error("a bench that does not exist")
	}
}

func TestQuantities(t *testing.T) {
	for _, c := range []struct {
		x          float64
		unit, want string
	}{{13.8, "V", "13.8 V"}, {0.001, "V", "1 mV"}, {1e-5, "A", "10 uA"}, {1e5, "ohm", "100 kohm"}, {0.3, "s", "300 ms"}, {4.0 / 4000, "V", "1 mV"}, {50, "degC", "50 degC"}, {0, "V", "0 nV"}} {
		if got := quantity(c.x, c.unit); got != c.want {
			t.Errorf("%g: %q, want %q", c.x, got, c.want)
		}
	}
}
