package fit

import (
	"slices"
	"testing"
)

// Curves with bad neighbours, which hide one another from a search for the worst
// single point. Self-made: β 6 A/V², V_T 3 V, n 1.4, steps of 50 mV, saturated; then
// readings are replaced.
func TestBadNeighbours(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 6, n: 1.4, theta: 0.05}
	b := simBench{circuit: Fixed, vds: 10}
	grid := steps(2.7, 3.8, 0.05)
	sweep := func(down bool) Curve {
		v := slices.Clone(grid)
		if down {
			slices.Reverse(v)
		}
		r, m := randomSource(831), handheld()
		var c Curve
		for _, x := range v {
			c.Vg = append(c.Vg, m.gate.read(r, x))
			c.Id = append(c.Id, m.current.read(r, d.at(b, x)))
		}
		return c
	}
	for _, x := range []struct {
		name  string
		down  bool
		spoil func(id []float64, k int)
		bad   int // readings spoiled from k on
	}{
		{"nothing", false, func([]float64, int) {}, 0},
		{"the reading before, twice", false, func(id []float64, k int) { id[k], id[k+1] = id[k-1], id[k-1] }, 2},
		{"the reading before, twice, on the way down", true, func(id []float64, k int) { id[k], id[k+1] = id[k-1], id[k-1] }, 2},
		{"ten times, twice", false, func(id []float64, k int) { id[k], id[k+1] = 10*id[k], 10*id[k+1] }, 2},
		{"a tenth, twice", false, func(id []float64, k int) { id[k], id[k+1] = id[k]/10, id[k+1]/10 }, 2},
		{"a tenth, twice, on the way down", true, func(id []float64, k int) { id[k], id[k+1] = id[k]/10, id[k+1]/10 }, 2},
		{"ten times and the reading before", false, func(id []float64, k int) { id[k], id[k+1] = 10*id[k], id[k-1] }, 2},
		{"four in a row", false, func(id []float64, k int) {
			id[k], id[k+1], id[k+2], id[k+3] = id[k-1], 10*id[k+1], 60e-3, id[k+3]/10
		}, 4},
	} {
		for _, k := range []int{9, 11, 13} {
			c := sweep(x.down)
			x.spoil(c.Id, k)
			s := b.setup()
			s.TestCurrent = 10e-3
			q := One(c, s)
			var left []int
			for _, l := range q.LeftOut {
				left = append(left, l.Index)
			}
			want := []int{k, k + 1, k + 2, k + 3}[:x.bad]
			if !slices.Equal(left, want) {
				t.Errorf("%s from %.3f V on: left out %v, want %v (%v)", x.name, c.Vg[k], left, want, q.LeftOut)
			}
		}
	}
}

// The edges of the bracket, on both sides: the chord in ln I below, that in √I
// above, a twentieth of leeway, and the corner of a load line.
func TestBracket(t *testing.T) {
	w := &work{s: Setup{Circuit: Diode}, limit: 1e-6, pts: make([]point, 1)}
	at := func(vg, i float64) *point {
		p := &point{vg: vg, i: i}
		w.shape(p)
		return p
	}
	a, c := at(3.2, 10e-3), at(3.4, 90e-3) // ln chord 30 mA, √ chord 40 mA, straight 50 mA
	for _, x := range []struct {
		i       float64
		circuit Circuit
		breach  int
	}{
		{30e-3, Diode, 0}, {28.4e-3, Diode, 0}, {28.1e-3, Diode, -1}, {10e-3, Diode, -1},
		{40e-3, Diode, 0}, {42.4e-3, Diode, 0}, {42.9e-3, Diode, 1}, {80e-3, Diode, 1}, {600e-3, Diode, 1},
		{50e-3, Load, 0}, {53e-3, Load, 0}, {53.5e-3, Load, 1}, // not known to be saturated
		{89e-3, Load, 0}, // the plateau of a load line has begun
	} {
		w.s.Circuit = x.circuit
		e := w.breachOf(nil, a, at(3.3, x.i), c)
		if got := sgn(e); got != x.breach {
			t.Errorf("%g mA, %s: %+.3f, want sign %d", 1e3*x.i, x.circuit, e, x.breach)
		}
	}
	// Goes on as the root before it: a curve that bends over.
	w.s.Circuit = Load
	if e := w.breachOf(at(3.1, 1e-3), a, at(3.3, 28e-3), at(3.4, 29e-3)); e != 0 {
		t.Errorf("a corner: %+.3f", e)
	}
}

func sgn(x float64) int {
	switch {
	case x > 0:
		return 1
	case x < 0:
		return -1
	}
	return 0
}
