package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// oscillating spoils a good curve (self-made) as a part that oscillates does.
type oscillating struct {
	name  string
	least float64 // share that must be found
	spoil func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters)
}

// mostly scales the readings above a current by something.
func mostly(ids []float64, from float64, by func(k int) float64) {
	for k := range ids {
		if ids[k] > from {
			ids[k] = math.Round(ids[k]*by(k)*1e6) / 1e6
		}
	}
}

func oscillations() []oscillating {
	from := func(b simBench) float64 {
		if b.circuit == Load {
			return 10e-3 * b.rl
		}
		return 10e-3
	}
	return []oscillating{
		{"every third point low", 0.9, func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters) {
			mostly(ids, from(b), func(k int) float64 {
				if k%3 == 0 {
					return 0.45
				}
				return 1
			})
		}},
		{"10 % scatter", 0.8, func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters) {
			mostly(ids, from(b), func(k int) float64 { return 1 + 0.1*r.NormFloat64() })
		}},
		{"25 % scatter", 0.9, func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters) {
			mostly(ids, from(b), func(k int) float64 { return math.Exp(0.25 * r.NormFloat64()) })
		}},
		{"jumps between two states", 0.9, func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters) {
			mostly(ids, from(b), func(k int) float64 { return []float64{0.75, 1}[r.IntN(2)] })
		}},
		{"three readings at one gate voltage", 0.8, func(r *rand.Rand, c *Curve, ids []float64, d simDevice, b simBench, m simMeters) {
			at := d.gateFor(b, 100e-3)
			for _, f := range []float64{0.8, 1, 1.25} {
				v := at + 0.5e-3*r.NormFloat64()
				i := d.at(b, v) * f
				c.Vg = append(c.Vg, m.gate.read(r, v))
				if b.circuit == Load {
					c.Vl = append(c.Vl, m.load.read(r, i*b.rl))
				} else {
					c.Id = append(c.Id, m.current.read(r, i))
				}
			}
		}},
	}
}

// Oscillation is found in every form it is planted in.
func TestOscillationIsFound(t *testing.T) {
	for _, o := range oscillations() {
		r := randomSource(801)
		n, found := 0, 0
		for k := range 90 {
			d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 4*r.Float64(), n: 1.2 + 0.4*r.Float64(), theta: 0.1 * r.Float64()}
			b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
			m := []simMeters{handheld(), fineMeters()}[r.IntN(2)]
			c := d.sweep(r, b, m, d.vt-0.5, d.vt+0.9, []float64{0.02, 0.05}[r.IntN(2)], 0.005)
			ids := c.Id
			if b.circuit == Load {
				ids = c.Vl
			}
			o.spoil(r, &c, ids, d, b, m)
			s := b.setup()
			s.TestCurrent = 10e-3
			n++
			q := One(c, s)
			if q.Has(CodeOscillation) {
				found++
			}
			if n == 1 {
				t.Log(q.State, warningText(q, CodeOscillation))
			}
		}
		t.Logf("%s: found in %d of %d", o.name, found, n)
		if float64(found) < o.least*float64(n) {
			t.Errorf("%s: found in %d of %d", o.name, found, n)
		}
	}
}
