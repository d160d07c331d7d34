package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// offMeter is what a cheap meter adds to a current: an offset, noise and a step
// of 10 µA (self-made).
type offMeter struct{ offset, noise float64 }

func (m offMeter) read(r *rand.Rand, i float64) float64 {
	return math.Round((i+m.offset+m.noise*r.NormFloat64())*1e5) / 1e5
}

// fromOff sweeps a self-made device by an ammeter from a gate voltage far below
// threshold up to a current.
func fromOff(r *rand.Rand, d simDevice, b simBench, m offMeter, from, step, most float64) Curve {
	var c Curve
	for k := 0; ; k++ {
		v := from + float64(k)*step
		i := d.at(b, v)
		if i > most || v > 12 {
			return c
		}
		c.Vg = append(c.Vg, math.Round((v+0.5e-3*r.NormFloat64())*1e3)/1e3)
		c.Id = append(c.Id, m.read(r, i))
	}
}

func without(c Curve, below float64) Curve {
	var out Curve
	for k, v := range c.Vg {
		if v >= below {
			out.Vg, out.Id = append(out.Vg, v), append(out.Id, c.Id[k])
		}
	}
	return out
}

var offBenches = []simBench{{circuit: Load, rl: 10, vdd: 12}, {circuit: Diode}, {circuit: Fixed, vds: 10}}

// trueGm is the slope of the circuit at a gate voltage.
func trueGm(d simDevice, b simBench, v float64) float64 {
	return (d.at(b, v+1e-5) - d.at(b, v-1e-5)) / 2e-5
}

// greatestGm is the greatest slope at the points where the greatest may be
// looked for: up to half of the supply across R_L and not among the last three.
func greatestGm(d simDevice, b simBench, c Curve) float64 {
	top := 0.0
	for _, v := range c.Vg[:len(c.Vg)-3] {
		if b.circuit == Load && d.at(b, v)*b.rl > b.vdd/2 {
			continue
		}
		top = math.Max(top, trueGm(d, b, v))
	}
	return top
}

// Self-made sweeps that begin far below threshold with meter noise and offset:
// most of the points tell nothing of the part, and must not decide about the
// transconductance.
func TestTransconductanceFromFarBelow(t *testing.T) {
	r := randomSource(31)
	worstMax, worstIdle, n, far := 0.0, 0.0, 0, 0
	for _, b := range offBenches {
		for _, step := range []float64{0.02, 0.05, 0.1} {
			for _, m := range []offMeter{{50e-6, 20e-6}, {0, 20e-6}, {100e-6, 50e-6}} {
				for _, from := range []float64{0, 1, 2} {
					d := simDevice{law: smoothLaw, vt: 3.3 + 0.1*r.Float64(), beta: 4.8, n: 1.4, theta: 0.05}
					c := fromOff(r, d, b, m, from, step, 1)
					s := b.setup()
					s.TestCurrent, s.IdleCurrent = 10e-3, 250e-3
					q := One(c, s)
					name := fmt.Sprintf("%s, %g V steps from %g V, %v", b.circuit, step, from, m)
					if q.State != Measured || !q.GmMax.Ok() || !q.GmIdle.Ok() {
						t.Errorf("%s: %s %s g_m %v %v", name, q.State, q.Why, q.GmMax, q.GmIdle)
						continue
					}
					most, idle := greatestGm(d, b, c), trueGm(d, b, d.gateFor(b, 250e-3))
					for _, x := range []struct {
						what string
						q    Quantity
						want float64
						bad  *float64
					}{{"g_m(max)", q.GmMax, math.Max(most, idle), &worstMax}, {"g_m(idle)", q.GmIdle, idle, &worstIdle}} {
						e := math.Abs(x.q.Value/x.want - 1)
						*x.bad = math.Max(*x.bad, e)
						if !(e <= 0.05) {
							t.Errorf("%s: %s %.4f S ± %.2g, want %.4f", name, x.what, x.q.Value, x.q.U, x.want)
						}
						n++
						if math.Abs(x.q.Value-x.want) > 3*x.q.U {
							far++
							t.Logf("%s: %s %.4f S ± %.2g, want %.4f: beyond 3u", name, x.what, x.q.Value, x.q.U, x.want)
						}
					}
				}
			}
		}
	}
	t.Logf("%d values, worst g_m(max) %.1f %%, g_m(idle) %.1f %%, %d beyond 3u", n, 100*worstMax, 100*worstIdle, far)
	if far*50 > n {
		t.Errorf("%d of %d beyond 3u", far, n)
	}
}

// Points in the off region put before a sweep change nothing by more than its
// uncertainty, and no state (self-made curves).
func TestOffRegionDecidesNothing(t *testing.T) {
	r := randomSource(32)
	for _, b := range offBenches {
		for _, step := range []float64{0.02, 0.05, 0.1} {
			for _, m := range []offMeter{{50e-6, 20e-6}, {0, 0}, {100e-6, 0}, {100e-6, 50e-6}} {
				d := simDevice{law: smoothLaw, vt: 3.3 + 0.1*r.Float64(), beta: 4.8, n: 1.4, theta: 0.05}
				long := fromOff(r, d, b, m, 0, step, 1)
				short := without(long, d.vt-0.7)
				s := b.setup()
				s.TestCurrent, s.IdleCurrent = 10e-3, 250e-3
				p, q := One(long, s), One(short, s)
				name := fmt.Sprintf("%s, %g V steps, %v", b.circuit, step, m)
				if p.State != q.State || p.State != Measured || p.Method != q.Method {
					t.Errorf("%s: %s (%s, %s) and %s (%s)", name, p.State, p.Why, p.Method, q.State, q.Method)
					continue
				}
				for _, k := range []Key{KeyVgsth, KeyVgsIdle, KeyVt, KeyBeta, KeyGmMax, KeyGmIdle} {
					x, y := *p.At(k), *q.At(k)
					if x.Ok() != y.Ok() {
						t.Errorf("%s: %s %v from 0 V, %v without", name, k, x.Value, y.Value)
					}
					if !x.Ok() || !y.Ok() {
						continue
					}
					if !(math.Abs(x.Value-y.Value) <= math.Min(x.U, y.U)+1e-12) {
						t.Errorf("%s: %s %.5g ± %.2g from 0 V, %.5g ± %.2g without", name, k, x.Value, x.U, y.Value, y.U)
					}
					// A long foot tells of the meter's noise, a short one does not: the
					// uncertainties may differ, but not by more than three.
					if x.U > 3*y.U+1e-9 || y.U > 3*x.U+1e-9 {
						t.Errorf("%s: u of %s %.2g from 0 V, %.2g without", name, k, x.U, y.U)
					}
				}
			}
		}
	}
}

// The noise put in comes out, and does not look like oscillation or faults
// (self-made curves).
func TestFootNoise(t *testing.T) {
	r := randomSource(33)
	for _, step := range []float64{0.02, 0.05} {
		for _, noise := range []float64{20e-6, 50e-6, 200e-6} {
			left, all := 0, 0
			for range 20 {
				d := simDevice{law: smoothLaw, vt: 3.3 + 0.1*r.Float64(), beta: 4.8, n: 1.4, theta: 0.05}
				b := offBenches[r.IntN(3)]
				c := fromOff(r, d, b, offMeter{50e-6, noise}, 0, step, 1)
				s := b.setup()
				s.TestCurrent, s.IdleCurrent = 10e-3, 250e-3
				w := newWork(c, s)
				w.settleCurrents()
				near(t, "noise at the foot", w.footNoise(footLeast), noise, 0.6*noise)
				q := One(c, s)
				if q.Has(CodeOscillation) || q.State != Measured {
					t.Errorf("%g A of noise, %g V steps: %s, codes %s", noise, step, q.State, codesOf(q))
				}
				left += len(q.LeftOut)
				all += len(c.Vg)
			}
			t.Logf("%g A of noise, %g V steps: %d of %d points left out", noise, step, left, all)
			if left*100 > all {
				t.Errorf("%g A of noise, %g V steps: %d of %d points left out", noise, step, left, all)
			}
		}
	}
}

// A leaky part of high threshold, whose sweep is mostly foot, is not shorted
// (self-made).
func TestMostlyFootIsNotShorted(t *testing.T) {
	r := randomSource(34)
	for _, b := range offBenches {
		for _, offset := range []float64{100e-6, 2e-3, 8e-3} {
			d := simDevice{law: smoothLaw, vt: 4.6, beta: 4.8, n: 1.4}
			s := b.setup()
			s.TestCurrent = 10e-3
			if q := One(fromOff(r, d, b, offMeter{offset: offset}, 0, 0.02, 0.2), s); q.State != Measured {
				t.Errorf("%s, %g A at the foot: %s: %s", b.circuit, offset, q.State, q.Why)
			}
		}
	}
}
