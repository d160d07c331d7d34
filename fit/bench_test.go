package fit

import "testing"

// thirtyPoints is a diode-connected and a load curve of thirty points as a hand
// turns them.
func thirtyPoints(c Circuit) (Curve, Setup) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4, theta: 0.1}
	b := simBench{circuit: c, rl: 10, vdd: 12, vds: 0.1}
	s := b.setup()
	s.TestCurrent, s.IdleCurrent = 1e-3, 100e-3
	s.Gate = []Accuracy{{Top: 6, Percent: 0.5, Counts: 2, Resolution: 1e-3}}
	s.Current = []Accuracy{{Top: 6e-3, Percent: 0.8, Counts: 2, Resolution: 1e-6}, {Top: 6, Percent: 0.8, Counts: 2, Resolution: 1e-3}}
	s.Load = []Accuracy{{Top: 0.6, Percent: 0.5, Counts: 2, Resolution: 1e-4}, {Top: 60, Percent: 0.5, Counts: 2, Resolution: 1e-2}}
	return d.sweep(randomSource(7), b, handheld(), 2.4, 3.85, 0.05, 0.01), s
}

func BenchmarkOne(b *testing.B) {
	for _, circuit := range []Circuit{Diode, Load, Fixed} {
		c, s := thirtyPoints(circuit)
		b.Run(string(circuit), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				One(c, s)
			}
		})
	}
}

// A curve with most of its range changes spoiled costs a search for the points that
// fit together; up and down sweep cost a comparison.
func BenchmarkFaults(b *testing.B) {
	g := glitchCase{simBench{circuit: Fixed, vds: 10}, 0.05, "A", 10e-3}
	bad, _, _, _ := g.draw(randomSource(8), handheld(), 0.8)
	s := g.bench.setup()
	s.TestCurrent = 10e-3
	b.Run("glitched", func(b *testing.B) {
		b.ReportAllocs()
		for b.Loop() {
			One(bad, s)
		}
	})
	c, t := thirtyPoints(Diode)
	b.Run("drift", func(b *testing.B) {
		b.ReportAllocs()
		r := One(c, t)
		sweeps := []Swept{{c, t, "up", r}, {c, t, "down", r}}
		for b.Loop() {
			Drift(sweeps, &r)
		}
	})
}
