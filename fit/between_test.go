package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// sitting is one session at one bench: what changes until the next one.
type sitting struct {
	gate, load, current float64 // counts that the meters are off by, of whatever range
	rl                  float64 // share that R_L is off by
	kelvin              float64 // by which the part is warmer than taken
	kappa, alpha        float64 // of the part
}

// sit draws a session: offsets within the counts of the statements, a temperature
// that was recorded to 1 K or is within 3 K of the room's, and parts that are not
// quite typical.
func sit(r *rand.Rand, recorded bool) sitting {
	rect := func(a float64) float64 { return a * (2*r.Float64() - 1) }
	s := sitting{gate: rect(2), load: rect(2), current: rect(3), kelvin: rect(3), kappa: 4e-3 + rect(1e-3), alpha: 1.7 + rect(0.3)}
	if recorded {
		s.kelvin = r.NormFloat64()
	}
	s.rl = 200e-6 * s.kelvin
	return s
}

// Self-made parts read again and again on one bench, whose offsets and temperature
// are drawn for every session: UBetween is an honest uncertainty of how far one
// session lies from the bench's mean, and U alone is not.
func TestBetweenIsHonest(t *testing.T) {
	r := randomSource(314)
	const room = 23 + 273.15
	kinds := map[string]*honesty{"V_GS(th)": {}, "gate bias": {}, "V_T": {}, "beta": {}, "g_m": {}, "recorded": {}, "not recorded": {}}
	var within honesty
	for k := range 900 {
		d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()), n: 1.1 + 0.7*r.Float64(), theta: 0.15 * r.Float64()}
		b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
		recorded := k%2 == 0
		now := sit(r, recorded)
		warm, bench := d, b
		warm.vt -= now.kappa * now.kelvin
		warm.beta *= math.Pow((room+now.kelvin)/room, -now.alpha)
		bench.rl *= 1 + now.rl
		meters := handheld()
		gate, load, current := setMeter{meters.gate, now.gate}, setMeter{meters.load, now.load}, setMeter{meters.current, now.current}
		var c, still Curve // as read, and without noise, counts and offsets
		for v := d.vt - 0.8; v < d.vt+0.9; v += 0.05 {
			at := v + 0.016*(2*r.Float64()-1)
			i := warm.at(bench, at)
			c.Vg = append(c.Vg, gate.read(r, at))
			still.Vg, still.Id = append(still.Vg, at), append(still.Id, d.at(b, at))
			if b.circuit == Load {
				c.Vl = append(c.Vl, load.read(r, i*bench.rl))
			} else {
				c.Id = append(c.Id, current.read(r, i))
			}
		}
		s := b.setup()
		s.TestCurrent, s.IdleCurrent = []float64{1e-3, 10e-3}[k%2], 100e-3
		s.Gate, s.Load, s.Current = meters.gate.statement(0.5, 2), meters.load.statement(0.5, 2), meters.current.statement(1, 3)
		if recorded {
			s.Temperature = room - 273.15
		}
		q := One(c, s)
		add := func(kind string, q Quantity, truth float64) {
			if !q.Ok() {
				t.Fatalf("%s: no value", kind)
			}
			kinds[kind].add(q.Value-truth, q.UBetween)
		}
		test, idle := d.gateFor(b, s.TestCurrent), d.gateFor(b, s.IdleCurrent)
		add("V_GS(th)", q.Vgsth, test)
		add("gate bias", q.VgsIdle, idle)
		within.add(q.VgsIdle.Value-idle, q.VgsIdle.U)
		if recorded {
			add("recorded", q.VgsIdle, idle)
		} else {
			add("not recorded", q.VgsIdle, idle)
		}
		add("g_m", q.GmIdle, (d.at(b, idle+1e-5)-d.at(b, idle-1e-5))/2e-5)
		// What the equation makes of the curve is the same in every session.
		if mean := One(still, b.setup()); q.Method == "curve" && mean.Method == "curve" {
			add("V_T", q.Vt, mean.Vt.Value)
			add("beta", q.Beta, mean.Beta.Value)
		}
	}
	for name, h := range kinds {
		h.check(t, name)
	}
	t.Logf("by U alone: %s", &within)
	if within.within(2) > 0.6 {
		t.Errorf("U alone covers what changes between sessions: %s", &within)
	}
}
