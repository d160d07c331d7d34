package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// cleanCases are self-made curves without any fault, over laws, circuits,
// meters and steps.
func cleanCases(seed uint64, n int, visit func(name string, c Curve, s Setup, d simDevice, b simBench)) {
	r := randomSource(seed)
	meters := map[string]simMeters{"6000": handheld(), "20000": fineMeters(), "exact": exact(), "coarse": coarseMeters()}
	for _, name := range []string{"6000", "20000", "exact", "coarse"} {
		for k := range n {
			d := simDevice{
				law: law(r.IntN(3)), vt: 0.7 + 3*r.Float64(), beta: math.Exp(-1 + 4*r.Float64()), n: 1.1 + r.Float64()*0.7,
				theta: 0.3 * r.Float64(), rs: []float64{0, 0.1}[r.IntN(2)], leak: []float64{0, 0, 2e-6, 30e-6}[r.IntN(4)],
			}
			b := []simBench{
				{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Load, rl: 1000, vdd: 12},
				{circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1},
			}[r.IntN(5)]
			step := []float64{0.005, 0.01, 0.02, 0.05, 0.1}[r.IntN(5)]
			from := math.Max(0, d.vt-1.2+0.4*r.Float64())
			to := d.vt + 0.7 + r.Float64()
			c := d.sweep(r, b, meters[name], from, to, step, step*[]float64{0, 0.3}[r.IntN(2)])
			s := b.setup()
			s.TestCurrent = []float64{250e-6, 1e-3, 10e-3}[r.IntN(3)]
			visit(fmt.Sprintf("%s %d: %s law %d β %.2f step %g leak %g", name, k, b.circuit, d.law, d.beta, step, d.leak), c, s, d, b)
		}
	}
}

// coarseMeters have one range only: 10 mV at the load and at the gate, 1 mA.
func coarseMeters() simMeters {
	return simMeters{
		gate:    simMeter{tops: []float64{60}, counts: 6000, digit: 0.3},
		current: simMeter{tops: []float64{6}, counts: 6000, share: 1e-3, digit: 0.3},
		load:    simMeter{tops: []float64{60}, counts: 6000, share: 1e-3, digit: 0.3},
	}
}

func TestCleanCurvesStayWhole(t *testing.T) {
	curves, points := 0, 0
	cleanCases(11, 250, func(name string, c Curve, s Setup, d simDevice, b simBench) {
		curves++
		_, left, warns := Clean(c, s)
		if len(left) > 0 {
			points += len(left)
			t.Errorf("%s: %v", name, left)
		}
		for _, w := range warns {
			switch w.Code {
			case CodeStuckReading, CodeDecadeSpike, CodeRangeGlitch, CodeOutOfLine, CodeOscillation, CodeSignTurned, CodePrefixLost, CodeCurrentMismatch:
				t.Errorf("%s: %s", name, w.Text)
			}
		}
	})
	t.Logf("%d curves, %d points left out", curves, points)
}

func TestCleanCurvesHaveNoFalseState(t *testing.T) {
	n := map[State]int{}
	cleanCases(12, 250, func(name string, c Curve, s Setup, d simDevice, b simBench) {
		for _, p := range []bool{false, true} {
			if p {
				c, s = mirrored(c), mirroredSetup(s)
			}
			r := One(c, s)
			n[r.State]++
			switch r.State {
			case Open, Shorted, WrongWayRound:
				t.Errorf("%s: %s: %s", name, r.State, r.Why)
			}
		}
	})
	t.Log(n)
	if n[Measured] < n[Above]+n[Declined] {
		t.Errorf("few curves are measured: %v", n)
	}
}

// mirrored turns the curve into that of a p-channel part.
func mirrored(c Curve) Curve {
	turn := func(x []float64) []float64 {
		if x == nil {
			return nil
		}
		y := make([]float64, len(x))
		for k, v := range x {
			y[k] = -v
		}
		return y
	}
	return Curve{Vg: turn(c.Vg), Id: turn(c.Id), Vl: turn(c.Vl), Vd: turn(c.Vd), Vdd: turn(c.Vdd), Gm: c.Gm}
}

func mirroredSetup(s Setup) Setup {
	s.PChannel = !s.PChannel
	s.OffV = -s.OffV
	s.Vdd, s.Vds = -s.Vdd, -s.Vds
	return s
}

// faulty plants one kind of fault in good curves and counts how often it is
// found, under the right code, without any other point lost.
func faulty(t *testing.T, code string, plant func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int) (found, planted, others, wrongCode int) {
	t.Helper()
	r := randomSource(77)
	for k := range 400 {
		d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 4*r.Float64(), n: 1.2 + r.Float64()*0.4, theta: 0.1 * r.Float64()}
		b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
		c := d.sweep(r, b, handheld(), d.vt-1, d.vt+0.9, 0.05, 0.01)
		ids := c.Id
		if ids == nil {
			ids = c.Vl
		}
		s := b.setup()
		s.TestCurrent = 10e-3
		want := plant(r, &c, ids, b)
		if len(want) == 0 {
			continue
		}
		_, left, _ := Clean(c, s)
		is := map[int]bool{}
		for _, j := range want {
			is[j] = true
			planted++
		}
		for _, l := range left {
			switch {
			case !is[l.Index]:
				others++
				if others < 4 {
					t.Logf("also left out: %v", l)
				}
			case l.Code == code:
				found++
			default:
				wrongCode++
				if wrongCode < 4 {
					t.Logf("under another code: %v", l)
				}
			}
		}
	}
	t.Logf("%s: %d of %d found, %d under another code, %d sound points lost", code, found, planted, wrongCode, others)
	return
}

// clearOf picks a point whose current is at least i.
func clearOf(r *rand.Rand, x []float64, i float64, b simBench) int {
	if b.circuit == Load {
		i *= b.rl
	}
	first := 0
	for first < len(x)-1 && x[first] < i {
		first++
	}
	if first >= len(x)-3 {
		return -1
	}
	return first + r.IntN(len(x)-2-first)
}

func TestPlantedFaults(t *testing.T) {
	least := func(what string, got, of int, share float64) {
		t.Helper()
		if float64(got) < share*float64(of) {
			t.Errorf("%s: %d of %d found, want %g %%", what, got, of, 100*share)
		}
	}
	most := func(what string, got, of int, share float64) {
		t.Helper()
		if float64(got) > share*float64(of) {
			t.Errorf("%s: %d for %d, want at most %g %%", what, got, of, 100*share)
		}
	}
	for name, factor := range map[string]float64{"ten times": 10, "a tenth": 0.1} {
		found, n, others, other := faulty(t, CodeDecadeSpike, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
			k := clearOf(r, ids, 2e-3, b)
			if k < 0 {
				return nil
			}
			ids[k] *= factor
			return []int{k}
		})
		least(name+" current", found, n, 0.95)
		least(name+" current, any code", found+other, n, 0.99)
		most(name+" current: sound points lost", others, n, 0.02)
	}
	for name, factor := range map[string]float64{"ten times": 10, "a tenth": 0.1} {
		found, n, others, other := faulty(t, CodeDecadeSpike, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
			k := clearOf(r, ids, 2e-3, b)
			if k < 0 {
				return nil
			}
			c.Vg[k] *= factor
			return []int{k}
		})
		least(name+" gate", found, n, 0.9)
		least(name+" gate, any code", found+other, n, 0.99)
		most(name+" gate: sound points lost", others, n, 0.02)
	}
	found, n, others, _ := faulty(t, CodeStuckReading, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
		k := clearOf(r, ids, 2e-3, b)
		if k < 0 || k > len(ids)-6 || b.circuit == Load && ids[k] > 6 {
			return nil
		}
		var stuck []int
		for j := k + 1; j < k+4; j++ {
			ids[j] = ids[k]
			stuck = append(stuck, j)
		}
		return stuck
	})
	least("stuck", found, n, 0.97)
	most("stuck: sound points lost", others, n, 0.02)

	// A frozen meter up to the end of the sweep.
	found, n, others, _ = faulty(t, CodeStuckReading, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
		k := clearOf(r, ids, 5e-3, b)
		if k < 0 || k > len(ids)-6 || b.circuit == Load && ids[k] > 6 {
			return nil
		}
		var stuck []int
		for j := k + 1; j < len(ids); j++ {
			ids[j] = ids[k]
			stuck = append(stuck, j)
		}
		return stuck
	})
	least("frozen to the end", found, n, 0.97)
	most("frozen: sound points lost", others, n, 0.02)

	// A jump by a third where the meter changes its range: at 6, 60 or 600 mA by
	// the ammeter, 0.6 or 6 V at the load.
	found, n, others, other := faulty(t, CodeRangeGlitch, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
		at := 60e-3
		if b.circuit == Load {
			at = 0.6
		}
		for k := range ids {
			if ids[k] > at {
				ids[k] *= 0.6
				return []int{k}
			}
		}
		return nil
	})
	least("range glitch", found, n, 0.85)
	least("range glitch, any code", found+other, n, 0.9)
	most("range glitch: sound points lost", others, n, 0.05)

	found, n, others, _ = faulty(t, CodeOverload, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
		k := len(ids) - 1 - r.IntN(4)
		ids[k] = math.Inf(1)
		return []int{k}
	})
	least("overload", found, n, 1)
	most("overload: sound points lost", others, n, 0)
	found, n, others, _ = faulty(t, CodeMissingReading, func(r *rand.Rand, c *Curve, ids []float64, b simBench) []int {
		j, k := r.IntN(len(ids)), r.IntN(len(ids)/2)
		ids[j] = math.NaN()
		if k == j {
			return []int{j}
		}
		c.Vg[k] = math.NaN()
		return []int{j, k}
	})
	least("missing", found, n, 1)
	most("missing: sound points lost", others, n, 0)
}

// One gate reading ten times too large ruins whatever is fitted to it; here it
// must not move anything.
func TestOneGateSpikeMovesNothing(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4, theta: 0.05}
	b := simBench{circuit: Diode}
	c := d.sweep(randomSource(3), b, handheld(), 2, 4, 0.05, 0.01)
	s := b.setup()
	s.TestCurrent = 1e-3
	want := One(c, s)
	for _, k := range []int{24, 30, len(c.Vg) - 1} {
		v := append([]float64(nil), c.Vg...)
		v[k] *= 10
		r := One(Curve{Vg: v, Id: c.Id}, s)
		near(t, "V_GS(th)", r.Vgsth.Value, want.Vgsth.Value, 1e-3)
		// Without its top point the window of the line is another.
		near(t, "V_T", r.Vt.Value, want.Vt.Value, 5e-3)
		if len(r.LeftOut) != 1 || r.LeftOut[0].Index != k {
			t.Errorf("point %d: left out %v", k, r.LeftOut)
		}
	}
}

func TestOscillationIsSaid(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	c := d.sweep(randomSource(5), b, handheld(), 2, 4, 0.05, 0.01)
	for k := 24; k < len(c.Id); k += 3 {
		c.Id[k] *= 0.45
	}
	s := b.setup()
	s.TestCurrent = 10e-3
	if r := One(c, s); !r.Has(CodeOscillation) {
		t.Errorf("state %s, codes %s", r.State, codesOf(r))
	}
}
