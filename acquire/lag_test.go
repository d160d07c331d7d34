package acquire

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gatesill/store/record"
)

// lagRun draws true lags of the gate and the current within ±150 ms that the program does not
// know, and finds them from a ramp up and one down at rate r. It returns the error and what was stated, s.
func lagRun(t *testing.T, seed uint64, r float64, meters func(*rand.Rand) []pairMeter) (e, u float64) {
	t.Helper()
	g := rand.New(rand.NewPCG(seed, uint64(1e6*r)))
	ms := meters(g)
	for i := range ms {
		ms[i].lag = 0.15 * (2*g.Float64() - 1)
	}
	up := simulate(g, ramp(g, r, 2.6, 3.3), ms)
	down := simulate(g, ramp(g, r, 3.3, 2.6), ms)
	lag, u, err := FindLag(up.readings, down.readings, up.pairing)
	if err != nil {
		t.Fatalf("seed %d, %g mV/s: %v", seed, 1e3*r, err)
	}
	return lag - (ms[1].lag - ms[0].lag), u
}

// A lag of up to 300 ms between two meters is found to within 20 ms or 0.15 mV of gate
// voltage, and the stated uncertainty is honest.
func TestFindLag(t *testing.T) {
	t.Parallel()
	n := uint64(2)
	if os.Getenv("GATESILL_LONG") != "" {
		n = 60
	}
	runs, within := 0, 0
	for _, b := range benches {
		for _, r := range []float64{5e-3, 10e-3, 20e-3, 50e-3} {
			if r != 20e-3 && n < 10 {
				continue
			}
			worst, sum, stated, square := 0.0, 0.0, 0.0, 0.0
			for seed := range n {
				e, u := lagRun(t, seed, r, b.meters)
				worst, sum, stated = math.Max(worst, math.Abs(e)), sum+e, stated+u
				square += e * e / u / u
				runs++
				if math.Abs(e) <= 2*u {
					within++
				}
			}
			f := float64(n)
			t.Logf("%-22s %2.0f mV/s: worst %5.1f ms, mean %+5.1f, stated %4.1f, rms of error/stated %.2f", b.name, 1e3*r, 1e3*worst, 1e3*sum/f, 1e3*stated/f, math.Sqrt(square/f))
			// 0.15 mV of a slow ramp is less than its display can show.
			if worst > math.Max(20e-3, 0.15e-3/r) {
				t.Errorf("%s at %g mV/s: off by %g ms", b.name, 1e3*r, 1e3*worst)
			}
		}
	}
	if 100*within < 85*runs {
		t.Errorf("%d of %d within twice what was stated", within, runs)
	}
}

// What does not tell a lag is refused with a reason.
func TestFindLagRefuses(t *testing.T) {
	g := rand.New(rand.NewPCG(3, 3))
	ms := handhelds(g)
	up, down := simulate(g, ramp(g, 20e-3, 2.6, 3.3), ms), simulate(g, ramp(g, 20e-3, 3.3, 2.6), ms)
	low := simulate(g, ramp(g, 20e-3, 2.0, 2.6), ms)
	gateOnly := change(up.readings, Current, func(int, *record.Reading) bool { return false })
	gateOnly = change(gateOnly, Load, func(int, *record.Reading) bool { return false })
	far := change(down.readings, Current, func(_ int, r *record.Reading) bool { r.At += 2; return true })
	line := change(change(up.readings, Gate, func(_ int, r *record.Reading) bool { r.Meter = "board"; return true }),
		Current, func(_ int, r *record.Reading) bool { r.Meter = "board"; return true })
	for _, x := range []struct {
		name     string
		up, down []record.Reading
	}{
		{"one direction", up.readings, up.readings}, {"no current", up.readings, low.readings}, {"nothing", nil, down.readings}, {"gate only", gateOnly, down.readings},
		{"a lag of seconds", up.readings, far}, {"one line", line, line},
	} {
		if lag, u, err := FindLag(x.up, x.down, up.pairing); !errors.Is(err, ErrLag) {
			t.Errorf("%s: %g %g %v", x.name, lag, u, err)
		}
	}
}
