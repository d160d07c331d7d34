package fit

import (
	"fmt"
	"math"
	"os"
	"sort"
	"testing"
)

func stats(e, u []float64) string {
	var r []float64
	in := 0
	s := 0.0
	for k := range e {
		r = append(r, e[k]/u[k])
		if e[k] <= 2*u[k] {
			in++
		}
		s += e[k] * e[k]
	}
	sort.Float64s(r)
	uu := append([]float64{}, u...)
	sort.Float64s(uu)
	n := len(r)
	if n == 0 {
		return "none"
	}
	return fmt.Sprintf("n %4d rms %6.3f mV medu %6.3f med|e|/u %.2f in2u %.2f", n, 1e3*math.Sqrt(s/float64(n)), 1e3*uu[n/2], r[n/2], float64(in)/float64(n))
}
func TestSimExplore(t *testing.T) {
	r := randomSource(1)
	N := 200
	if os.Getenv("N") != "" {
		fmt.Sscan(os.Getenv("N"), &N)
	}
	for _, mm := range []struct {
		n       string
		m       simMeters
		step, j float64
	}{{"6000/50", handheld(), .05, .016}, {"20000/60", fineMeters(), .06, .02}, {"6000/10", handheld(), .01, 0}, {"6000/5", handheld(), .005, 0.001}, {"6000/20", handheld(), .02, .004}, {"exact/50", exact(), .05, .016}, {"exact/10", exact(), .01, 0}} {
		for _, l := range []law{squareLaw, smoothLaw, kinkedLaw} {
			for _, i := range []float64{1e-3, 10e-3, 100e-3} {
				var e, u []float64
				for k := 0; k < N; k++ {
					d := simDevice{law: l, vt: 2.5 + r.Float64(), beta: 1.5 + 3*r.Float64(), n: 1.1 + r.Float64()*.7, theta: .15 * r.Float64()}
					b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
					c := d.sweep(r, b, mm.m, d.vt-1, d.vt+.9, mm.step, mm.j)
					s := b.setup()
					s.TestCurrent = i
					q := One(c, s).Vgsth
					if !q.Ok() {
						continue
					}
					e = append(e, math.Abs(q.Value-d.gateFor(b, i)))
					u = append(u, q.U)
				}
				fmt.Printf("%-9s law %d %4.0f mA %s\n", mm.n, l, i*1e3, stats(e, u))
			}
		}
	}
}
func TestGmExplore(t *testing.T) {
	r := randomSource(3)
	N := 300
	for _, mm := range []struct {
		n       string
		m       simMeters
		step, j float64
	}{{"6000/50", handheld(), .05, .016}, {"20000/60", fineMeters(), .06, .02}, {"6000/10", handheld(), .01, 0}, {"6000/5", handheld(), .005, 0.001}, {"6000/20", handheld(), .02, .004}, {"exact/50", exact(), .05, .016}} {
		for _, l := range []law{squareLaw, smoothLaw, kinkedLaw} {
			for kind := 0; kind < 4; kind++ {
				var e, u, e2, u2, e3, u3, ec, uc []float64
				for k := 0; k < N; k++ {
					d := simDevice{law: l, vt: 2.5 + r.Float64(), beta: 1.5 + 3*r.Float64(), n: 1.1 + r.Float64()*.7, theta: .15 * r.Float64()}
					b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: .1}}[kind]
					c := d.sweep(r, b, mm.m, d.vt-1, d.vt+1.5, mm.step, mm.j)
					s := b.setup()
					s.IdleCurrent = []float64{.1, .1, .1, .02}[kind]
					q := One(c, s)
					if q.GmIdle.Ok() {
						v := q.VgsIdle.Value
						g := (d.at(b, v+1e-5) - d.at(b, v-1e-5)) / 2e-5
						w := newWork(c, s)
						w.settleCurrents()
						w.clean()
						cg := w.gateAt(w.s.IdleCurrent).gm
						ec = append(ec, math.Abs(cg/g-1)*.1)
						uc = append(uc, 1)
						e = append(e, math.Abs(q.GmIdle.Value/g-1)*.1)
						u = append(u, .1*q.GmIdle.U/g)
					}
					if q.GmMax.Ok() {
						gm := 0.0
						top := c.Vg[len(c.Vg)-4]
						if b.circuit == Load {
							for d.at(b, top)*b.rl > 6 {
								top -= .01
							}
						}
						for v := d.vt - .9; v < top; v += .01 {
							gm = math.Max(gm, (d.at(b, v+1e-5)-d.at(b, v-1e-5))/2e-5)
						}
						e2 = append(e2, math.Abs(q.GmMax.Value/gm-1)*.1)
						u2 = append(u2, .1*q.GmMax.U/gm)
					}
					if q.Vt.Ok() {
						e3 = append(e3, math.Abs(q.Vt.Value-d.vt))
						u3 = append(u3, q.Vt.U)
					}
				}
				fmt.Printf("%-9s law %d kind %d idle(%%) %s by crossing %s\n   max(%%) %s\n     vt %s\n", mm.n, l, kind, stats(e, u), stats(ec, uc), stats(e2, u2), stats(e3, u3))
			}
		}
	}
}
