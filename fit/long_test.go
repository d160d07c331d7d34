package fit

import (
	"testing"
	"time"
)

// A hundred thousand logged points, sound or senseless, are dealt with in
// seconds. The bound is generous: it tells a quadratic search from a linear one
// (100 s), not a fast machine from a slow one.
func TestVeryLongCurves(t *testing.T) {
	if testing.Short() {
		t.Skip("long curves")
	}
	const n = 100_000
	r := randomSource(1)
	b := simBench{circuit: Fixed, vds: 10}
	s := b.setup()
	s.TestCurrent = 1e-3
	var noise Curve
	for range n {
		noise.Vg, noise.Id = append(noise.Vg, r.Float64()*5), append(noise.Id, r.Float64())
	}
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	sound := d.sweep(r, b, handheld(), 0, 4, 4./n, 0)
	start := time.Now()
	if got := One(noise, s); got.State != Declined {
		t.Errorf("noise: %s: %s", got.State, got.Why)
	}
	got := One(sound, s)
	if got.State != Measured {
		t.Errorf("%s: %s", got.State, got.Why)
	}
	near(t, "V_GS(th)", got.Vgsth.Value, d.gateFor(b, 1e-3), 0.5e-3)
	if took := time.Since(start); took > 20*time.Second {
		t.Errorf("took %v", took)
	}
}
