package job

import (
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
	device     string
	truth      float64 // V
	q          fit.Quantity
	error, own float64 // V: without the gate meter's gain; of that, what is not common to the devices of the session
	result     fit.Result
	points     int
	settled    int
	bound      float64 // V, greatest
	done       acquire.Done
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
		sheet := s.w.sheetOf(d.Name, &sw)
		sheet.Budget = true
		r := fit.One(curveOf(&sw), setupOf(&sheet, &sw, lastDigitsOf(&sheet)))
		r.Choose("auto")
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
	for i := range 2 {
		t.Logf("  u of device %s, mV:%s", list[i][0].device, budgetText(list[i][0].q))
	}
	for i := range list[0] {
		a, b := list[0][i], list[1][i]
		t.Logf("  %-4s %3d points %3d settled bound <= %.2f mV | 10 mA %.4f true %.4f error %+.2f own %+.2f u %.2f | 250 mA %.4f true %.4f error %+.2f own %+.2f u %.2f mV | %s %v",
			a.device, a.points, a.settled, 1e3*a.bound, a.q.Value, a.truth, 1e3*a.error, 1e3*a.own, 1e3*a.q.U,
			b.q.Value, b.truth, 1e3*b.error, 1e3*b.own, 1e3*b.q.U, a.done.Why, codesOf(a.result))
	}
}

// budgetText are the contributions within a session, mV.
func budgetText(q fit.Quantity) (out string) {
	for _, l := range q.Budget.Lines {
		if l.Input.In(fit.Within) && l.U*l.C != 0 {
			out += fmt.Sprintf(" %s %.3f", l.Name, 1e3*math.Abs(l.U*l.C))
		}
	}
	return out
}

func codesOf(r fit.Result) (out []string) {
	for _, w := range r.Warnings {
		out = append(out, w.Code)
	}
	return out
}

// sessions is how many of them a test measures.
func sessions(short uint64) uint64 {
	if os.Getenv("GATESILL_LONG") != "" {
		return 12
	}
	return short
}

// judgeSessions measures sessions of twelve devices and gives the verdicts at both
// currents.
func judgeSessions(t *testing.T, k simCase, short uint64) (out [2]simVerdict) {
	t.Helper()
	for seed := uint64(1); seed <= sessions(short); seed++ {
		list := simSession(t, k, seed)
		tellSession(t, seed, list)
		for i := range list {
			for _, m := range list[i] {
				require.True(t, m.q.Ok(), "session %d, device %s: %s", seed, m.device, m.result.Why)
				require.True(t, m.done.Complete, "session %d, device %s: %s", seed, m.device, m.done.Why)
				require.True(t, m.result.Returned, "session %d, device %s: no return reading", seed, m.device)
				heating := slices.Contains(codesOf(m.result), fit.CodeHeating)
				require.Equal(t, k.warm, heating, "session %d, device %s: heating", seed, m.device)
			}
			out[i].add(list[i])
		}
	}
	t.Logf("V_GS(th) at 10 mA: %v", &out[0])
	t.Logf("V_GS at 250 mA:    %v", &out[1])
	return out
}

// hold judges what the whole way makes of the truth. The devices are drawn from the
// model that is fitted to them: what is judged is reading, settling, pairing and
// sealing, and that none of it makes the uncertainty too small. What the equation may be
// wrong by has no share in these errors, but has one in u; so a median of |error|/u below
// 0.3, the lower bar of fit's test set, which has foreign curves, is no fault here. The
// other bars are those of that set, each with four standard errors of slack.
func (v *simVerdict) hold(t *testing.T, name string) {
	t.Helper()
	n := float64(len(v.shares))
	if v.worst > 3e-3 {
		t.Errorf("%s: an error of %.2f mV, more than 3 mV", name, 1e3*v.worst)
	}
	if v.absolute < n {
		t.Errorf("%s: %.0f of %.0f devices within twice u_absolute: the statements of the meters are limits", name, v.absolute, n)
	}
	if m := v.median(); m > 0.82+4*0.82/(2*0.4287*math.Sqrt(n)) || !(m > 0.02) {
		t.Errorf("%s: median |error|/u %.2f", name, m)
	}
	if w := v.within(2); w < 0.9-4*math.Sqrt(0.9*0.1/n) {
		t.Errorf("%s: %.0f %% within 2u", name, 100*w)
	}
}

// Devices measured by hand, from the first frame to the threshold.
func TestHandTurned(t *testing.T) {
	t.Parallel()
	v := judgeSessions(t, simCase{mode: acquire.ByHand, kind: rehearsal.Handheld}, 3)
	v[0].hold(t, "V_GS(th)")
	v[1].hold(t, "V_GS at 250 mA")
}

// The knob is followed while it turns at 10 mV/s; points are interpolated on the move.
func TestKnobFollowed(t *testing.T) {
	t.Parallel()
	v := judgeSessions(t, simCase{mode: acquire.Free, kind: rehearsal.Handheld,
		pairing: func(p *acquire.Pairing) { p.Tolerance = 10e-3 }}, 1) // the bound alone keeps points out at 5 mV
	v[0].hold(t, "V_GS(th)")
	v[1].hold(t, "V_GS at 250 mA")
}

// A supply sets the gate.
func TestDrivenInSimulation(t *testing.T) {
	t.Parallel()
	v := judgeSessions(t, simCase{mode: acquire.Driven, kind: rehearsal.Quick}, 1)
	v[0].hold(t, "V_GS(th)")
	v[1].hold(t, "V_GS at 250 mA")
}

// Devices that warm up by some kelvin: at the small current nothing of it shows, at
// the idle current it does, and the return reading says so for every device (and for none of
// those that stay cold, above).
func TestHandTurnedWarm(t *testing.T) {
	t.Parallel()
	v := judgeSessions(t, simCase{mode: acquire.ByHand, kind: rehearsal.Handheld, warm: true}, 1)
	v[0].hold(t, "V_GS(th)")
	if w := v[1].worst; w < 3e-3 {
		t.Errorf("V_GS at 250 mA is off by %.2f mV at most: these devices do not warm up", 1e3*w)
	}
}
