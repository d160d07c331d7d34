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
