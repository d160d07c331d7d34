package fit

import (
	"fmt"
	"math"
	"slices"
	"testing"
)

// honesty gathers errors with their stated uncertainties.
type honesty struct{ ratio, errors []float64 }

func (h *honesty) add(err, u float64) {
	h.ratio = append(h.ratio, math.Abs(err)/u)
	h.errors = append(h.errors, err)
}

func (h *honesty) String() string {
	sum := 0.0
	for _, e := range h.errors {
		sum += e * e
	}
	return fmt.Sprintf("n %d, rms error %.3g, median |error|/u %.2f, within 2u %.1f %%",
		len(h.ratio), math.Sqrt(sum/float64(len(h.errors))), h.median(), 100*h.within(2))
}

func (h *honesty) median() float64 { return median(slices.Clone(h.ratio)) }

func (h *honesty) within(k float64) float64 {
	n := 0
	for _, r := range h.ratio {
		if r <= k {
			n++
		}
	}
	return float64(n) / float64(len(h.ratio))
}

// check holds the stated u to be neither too small nor too large: the median of
// |error|/u between 0.3 and 0.82 (0.67 for normal errors known exactly), at least
// 90 % within 2u. Both limits are our own definition of an honest u.
func (h *honesty) check(t *testing.T, what string) {
	t.Helper()
	t.Logf("%s: %s", what, h)
	if m := h.median(); m < 0.3 || m > 0.82 {
		t.Errorf("%s: median |error|/u %.2f", what, m)
	}
	if w := h.within(2); w < 0.9 {
		t.Errorf("%s: %.1f %% within 2u", what, 100*w)
	}
}

// Self-made curves of a smooth knee and of a kinked one in three circuits, read
// at 50 mV hand-turned steps by 6,000-count meters; the truth is solved from the
// equations. Nothing is stated of the meters: resolution and noise come from the
// readings.
func TestUncertaintyIsHonest(t *testing.T) {
	r := randomSource(2024)
	var all, gm honesty
	at := map[float64]*honesty{1e-3: {}, 10e-3: {}, 100e-3: {}}
	for k := range 600 {
		d := simDevice{
			law: []law{smoothLaw, smoothLaw, kinkedLaw}[k%3], vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()),
			n: 1.1 + 0.7*r.Float64(), theta: 0.15 * r.Float64(),
		}
		b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[r.IntN(3)]
		c := d.sweep(r, b, handheld(), d.vt-0.8, d.vt+0.9, 0.05, 0.016)
		for i, h := range at {
			s := b.setup()
			s.TestCurrent, s.IdleCurrent = i, i
			q := One(c, s)
			if !q.Vgsth.Ok() {
				t.Fatalf("nothing at %g A: %s", i, q.Why)
			}
			err := q.Vgsth.Value - d.gateFor(b, i)
			h.add(err, q.Vgsth.U)
			all.add(err, q.Vgsth.U)
			if i == 100e-3 && q.GmIdle.Ok() {
				v := q.VgsIdle.Value
				g := (d.at(b, v+1e-5) - d.at(b, v-1e-5)) / 2e-5
				gm.add(q.GmIdle.Value/g-1, q.GmIdle.U/g)
			}
		}
	}
	for _, i := range []float64{1e-3, 10e-3, 100e-3} {
		at[i].check(t, amps(i))
	}
	all.check(t, "all")
	gm.check(t, "g_m at 100 mA")
}

// Finer steps, where many points are averaged.
func TestUncertaintyIsHonestAtFineSteps(t *testing.T) {
	r := randomSource(7)
	for _, step := range []float64{0.005, 0.01, 0.02} {
		var h honesty
		for k := range 200 {
			d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()), n: 1.1 + 0.7*r.Float64(), theta: 0.15 * r.Float64()}
			b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
			c := d.sweep(r, b, handheld(), d.vt-0.5, d.vt+0.6, step, step/5)
			s := b.setup()
			s.TestCurrent = []float64{1e-3, 10e-3, 100e-3}[r.IntN(3)]
			q := One(c, s).Vgsth
			h.add(q.Value-d.gateFor(b, s.TestCurrent), q.U)
		}
		h.check(t, fmt.Sprintf("%g mV", 1e3*step))
	}
}

// Coarse counts: one range of 10 mV at gate and load.
func TestCoarseCounts(t *testing.T) {
	r := randomSource(8)
	for _, step := range []float64{0.005, 0.05} {
		var h honesty
		for k := range 200 {
			d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()), n: 1.4}
			b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}}[k%2]
			c := d.sweep(r, b, coarseMeters(), d.vt-0.5, d.vt+0.6, step, step/3)
			s := b.setup()
			s.TestCurrent = 50e-3
			q := One(c, s).Vgsth
			h.add(q.Value-d.gateFor(b, s.TestCurrent), q.U)
		}
		t.Logf("step %g: %s", step, &h)
		// Counts are shared by neighbours at 5 mV, so their errors are no longer
		// independent: two thirds of the usual bound.
		if m := h.median(); m < 0.3 || m > 1 {
			t.Errorf("step %g: median |error|/u %.2f", step, m)
		}
		if w := h.within(2); w < 0.8 {
			t.Errorf("step %g: %.0f %% within 2u", step, 100*w)
		}
	}
}

// With gains in all meters and the resistor, the absolute uncertainty covers the
// error, and the random part does not.
func TestAbsoluteUncertaintyIsHonest(t *testing.T) {
	r := randomSource(99)
	var abs honesty
	rect := func(a float64) float64 { return a * (2*r.Float64() - 1) }
	for range 400 {
		d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 3*r.Float64(), n: 1.4, theta: 0.1}
		b := simBench{circuit: Load, rl: 10, vdd: 12}
		m := handheld()
		m.gate.gain, m.load.gain = rect(0.005), rect(0.005)
		rl := b.rl * (1 + rect(0.01))
		c := d.sweep(r, simBench{circuit: Load, rl: rl, vdd: 12}, m, d.vt-0.8, d.vt+0.9, 0.05, 0.016)
		s := b.setup()
		s.TestCurrent = 100e-3
		s.Gate = []Accuracy{{Top: 6, Percent: 0.5, Resolution: 1e-3}}
		s.Load = []Accuracy{{Top: 0.6, Percent: 0.5, Resolution: 1e-4}, {Top: 6, Percent: 0.5, Resolution: 1e-3}, {Top: 60, Percent: 0.5, Resolution: 1e-2}}
		q := One(c, s).Vgsth
		abs.add(q.Value-d.gateFor(simBench{circuit: Load, rl: rl, vdd: 12}, 100e-3), q.UAbsolute)
		if q.U > 2.5e-3 {
			t.Errorf("random u %g V holds the gains", q.U)
		}
	}
	// Errors of rectangles: their median is 0.87 of a standard deviation.
	t.Log(&abs)
	if m := abs.median(); m < 0.4 || m > 1.0 {
		t.Errorf("median |error|/u %.2f", m)
	}
	if w := abs.within(2); w < 0.97 {
		t.Errorf("%.1f %% within 2u", 100*w)
	}
}

// The scatter that is found is that which was put in.
func TestScatter(t *testing.T) {
	for _, noise := range []float64{0.2e-3, 1e-3, 5e-3} {
		sum, n := 0.0, 0
		for seed := range uint64(40) {
			d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
			b := simBench{circuit: Fixed, vds: 10}
			r := randomSource(seed)
			var c Curve
			for v := 2.2; v < 4; v += 0.04 {
				c.Vg = append(c.Vg, v+noise*r.NormFloat64())
				c.Id = append(c.Id, d.at(b, v))
			}
			w := newWork(c, b.setup())
			w.settleCurrents()
			w.clean()
			e := w.scatterNear(len(w.pts) * 2 / 3)
			sum += e * e
			n++
		}
		near(t, "scatter", math.Sqrt(sum/float64(n)), noise, 0.2*noise)
	}
}
