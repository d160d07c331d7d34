package job

import (
	"context"
	"fmt"
	"math"
	"os"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/acquire"
	"gatesill/acquire/rehearsal"
	"gatesill/fit"
)

// truthAt is the gate voltage, V, at which the cold device draws that current in the
// circuit of the bench.
func truthAt(c rehearsal.Config, d rehearsal.Device, current float64) float64 {
	series := c.RL
	for _, m := range c.Meters {
		if m.Role == "current" {
			series += m.Burden
		}
	}
	m := fit.Model{Vt: d.Vt, Beta: d.Beta, N: d.N, Theta: d.Theta, Lambda: d.Lambda}
	low, high := 0.0, c.MaxVgs
	for range 80 {
		mid := (low + high) / 2
		if m.Solve(mid, c.VDD, series) < current {
			low = mid
		} else {
			high = mid
		}
	}
	return (low + high) / 2
}

func gateGain(c rehearsal.Config) float64 {
	for _, m := range c.Meters {
		if m.Role == "gate" && m.Gain != 0 {
			return m.Gain
		}
	}
	return 1
}

// simCase is a way to measure, on a simulated bench.
type simCase struct {
	mode    acquire.Mode
	kind    string // of bench
	warm    bool
	pairing func(*acquire.Pairing)
	rate    func(s *simBench) func(acquire.Hand) float64
}

// measured is what was made of one device and one current.
type measured struct {
	device      string
	truth       float64 // V
	q           fit.Quantity
	error, own  float64 // V: without the gate meter's gain; of that, what is not common to the devices of the session
	result      fit.Result
	points      int
	settled     int
	bound       float64 // V, greatest
	done        acquire.Done
	temperature float64
}

const (
	simTest = 10e-3  // A
	simIdle = 250e-3 // A
)

// simSession measures twelve drawn devices; by current.
func simSession(t *testing.T, k simCase, seed uint64) [2][]measured {
	t.Helper()
	c, err := rehearsal.Standard(k.kind)
	require.NoError(t, err)
	c.Seed, c.Devices = seed, drawnDevices(seed, 12, k.warm)
	s := newSimBench(t, c, k.mode, simTest, simIdle)
	if k.rate != nil {
		s.rate = k.rate(s)
	}
	var out [2][]measured
	for _, d := range c.Devices {
		sw, done := s.sweep(d.Name, k.pairing)
		r := s.w.result(context.Background(), d.Name, &sw)
		for i, current := range []float64{simTest, simIdle} {
			m := measured{device: d.Name, truth: truthAt(c, d, current), q: []fit.Quantity{r.Vgsth, r.VgsIdle}[i], result: r, points: sw.Len(), done: done}
			m.error = m.q.Value/gateGain(c) - m.truth
			for j, x := range sw.Values("settled") {
				if x > 0 {
					m.settled++
				}
				m.bound = math.Max(m.bound, sw.Values("pair_bound_v")[j])
			}
			out[i] = append(out[i], m)
		}
	}
	for i := range out {
		mean := 0.0
		for _, m := range out[i] {
			mean += m.error / float64(len(out[i]))
		}
		n := float64(len(out[i]))
		for j := range out[i] {
			// The mean of n takes its share of every error along.
			out[i][j].own = (out[i][j].error - mean) * math.Sqrt(n/(n-1))
		}
	}
	return out
}

// simVerdict is the judgement over several sessions.
type simVerdict struct {
	shares          []float64 // |own error|/u
	own, error      []float64 // V
	absolute, worst float64   // share of devices within twice u_absolute; greatest |error|, V
}

func (v *simVerdict) add(list []measured) {
	for _, m := range list {
		v.shares = append(v.shares, math.Abs(m.own)/m.q.U)
		v.own, v.error = append(v.own, m.own), append(v.error, m.error)
		v.worst = math.Max(v.worst, math.Abs(m.error))
		if math.Abs(m.q.Value-m.truth) <= 2*m.q.UAbsolute {
			v.absolute++
		}
	}
}

func (v *simVerdict) median() float64 {
	x := slices.Sorted(slices.Values(v.shares))
	return (x[(len(x)-1)/2] + x[len(x)/2]) / 2
}

func (v *simVerdict) within(k float64) float64 {
	n := 0.0
	for _, x := range v.shares {
		if x <= k {
			n++
		}
	}
	return n / float64(len(v.shares))
}

func rmsOf(x []float64) float64 {
	s := 0.0
	for _, e := range x {
		s += e * e
	}
	return math.Sqrt(s / float64(len(x)))
}

func (v *simVerdict) String() string {
	return fmt.Sprintf("%d devices: error rms %.2f mV, greatest %.2f mV; within the session rms %.2f mV, median |error|/u %.2f, within 2u %.0f %%; within twice u_absolute %.0f %%",
		len(v.own), 1e3*rmsOf(v.error), 1e3*v.worst, 1e3*rmsOf(v.own), v.median(), 100*v.within(2), 100*v.absolute/float64(len(v.own)))
}

func tellSession(t *testing.T, seed uint64, list [2][]measured) {
	t.Logf("session %d", seed)
	for i := range list[0] {
		a, b := list[0][i], list[1][i]
		t.Logf("  %-4s %3d points %3d settled bound <= %.2f mV | 10 mA %.4f true %.4f error %+.2f own %+.2f u %.2f | 250 mA %.4f true %.4f error %+.2f own %+.2f u %.2f mV | %s %v",
			a.device, a.points, a.settled, 1e3*a.bound, a.q.Value, a.truth, 1e3*a.error, 1e3*a.own, 1e3*a.q.U,
			b.q.Value, b.truth, 1e3*b.error, 1e3*b.own, 1e3*b.q.U, a.done.Why, codesOf(a.result))
	}
}

func codesOf(r fit.Result) (out []string) {
	for _, w := range r.Warnings {
		out = append(out, w.Code)
	}
	return out
}

func sessions() uint64 {
	if os.Getenv("GATESILL_LONG") != "" {
		return 12
	}
	return 3
}

// judgeSessions measures sessions of twelve devices and gives the verdicts at both
// currents.
func judgeSessions(t *testing.T, k simCase) (out [2]simVerdict) {
	t.Helper()
	for seed := uint64(1); seed <= sessions(); seed++ {
		list := simSession(t, k, seed)
		tellSession(t, seed, list)
		for i := range list {
			for _, m := range list[i] {
				require.True(t, m.q.Ok(), "session %d, device %s: %s", seed, m.device, m.result.Why)
				require.True(t, m.done.Complete, "session %d, device %s: %s", seed, m.device, m.done.Why)
			}
			out[i].add(list[i])
		}
	}
	t.Logf("V_GS(th) at 10 mA: %v", &out[0])
	t.Logf("V_GS at 250 mA:    %v", &out[1])
	return out
}

func TestHandTurned(t *testing.T) {
	v := judgeSessions(t, simCase{mode: acquire.ByHand, kind: rehearsal.Handheld})
	_ = v
}

func TestKnobFollowed(t *testing.T) {
	v := judgeSessions(t, simCase{mode: acquire.Free, kind: rehearsal.Handheld,
		pairing: func(p *acquire.Pairing) { p.Tolerance = 10e-3 },
		rate: func(s *simBench) func(acquire.Hand) float64 {
			return func(h acquire.Hand) float64 {
				if h.Creep {
					return 10e-3
				}
				return handRate
			}
		}})
	_ = v
}

func TestDrivenInSimulation(t *testing.T) {
	v := judgeSessions(t, simCase{mode: acquire.Driven, kind: rehearsal.Quick})
	_ = v
}

func TestHandTurnedWarm(t *testing.T) {
	v := judgeSessions(t, simCase{mode: acquire.ByHand, kind: rehearsal.Handheld, warm: true})
	_ = v
}
