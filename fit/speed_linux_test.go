package fit

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"sync"
	"syscall"
	"testing"
	"time"
)

// speedLot is the curves of one kind and what their fits cost, as
// scripts/bench.d/fit.py reads it.
type speedLot struct {
	Kind   string       `json:"kind"`
	Tied   bool         `json:"tied"`   // drain at the gate
	Vdd    float64      `json:"vdd"`    // V
	Rl     float64      `json:"rl"`     // ohm
	CPU    float64      `json:"cpu"`    // s of processor a fit, one thread
	Wall2  float64      `json:"wall2"`  // s of wall a fit, two threads
	Evals  float64      `json:"evals"`  // evaluations of the curve a fit
	Allocs float64      `json:"allocs"` // pieces of memory a fit
	Curves []speedCurve `json:"curves"`
}

type speedCurve struct {
	Vg    []float64 `json:"vg"`    // V
	I     []float64 `json:"i"`     // A
	Sigma []float64 `json:"sigma"` // A
	Start []float64 `json:"start"` // of V_T, ln β, ln n, θ and, behind a resistor, λ
	Vt    float64   `json:"vt"`    // V, fitted
}

// TestWholeCurveSpeed measures whole-curve fits: start values from the points, and
// one least-squares solution at given weights. GATESILL_SPEED names the folder
// that it writes curves and times to; scripts/bench runs it.
//
// The curves are self-made, by the model itself with parameters and reading noise
// drawn at random: they tell speed and agreement with another solver, not truth.
func TestWholeCurveSpeed(t *testing.T) {
	folder := os.Getenv("GATESILL_SPEED")
	if folder == "" {
		t.Skip("a measurement: scripts/bench fit")
	}
	for _, lot := range []*speedLot{{Kind: "load line", Vdd: 12, Rl: 10}, {Kind: "diode-connected", Tied: true}} {
		r := randomSource(20240611)
		for range 1000 {
			lot.Curves = append(lot.Curves, lot.draw(r, 100))
		}
		lot.measure(t)
		text, err := json.Marshal(lot)
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(folder, lot.Kind+".json"), text, 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// draw makes a curve of n points, from below the threshold up; behind a resistor
// to well beyond the corner of saturation and triode.
func (l *speedLot) draw(r *rand.Rand, n int) (c speedCurve) {
	d := Model{Vt: 1 + 4*r.Float64(), Beta: 0.5 * math.Pow(20, r.Float64()), N: 0.5 + 2*r.Float64(), Theta: 0.3 * r.Float64()}
	span := 1.7
	if !l.Tied {
		d.Lambda = 0.03 * r.Float64()
		span = 0.3 + 1.6*(math.Sqrt(1+2*d.Beta*l.Rl*l.Vdd)-1)/(d.Beta*l.Rl)
	}
	for j := range n {
		vg := d.Vt - 0.3 + span*float64(j)/float64(n-1)
		c.Vg = append(c.Vg, vg)
		c.I = append(c.I, d.Solve(vg, l.top(vg), l.Rl))
	}
	most := c.I[n-1]
	for j, i := range c.I {
		vg := c.Vg[j] + 1e-4
		slope := (d.Solve(vg, l.top(vg), l.Rl) - i) / 1e-4
		random := rss(slope*0.3e-3, rss(3e-4*i, 2e-5*most))
		c.Sigma = append(c.Sigma, rss(random, rss(modelShare*i, modelOfTop*most)))
		c.I[j] = i + random*r.NormFloat64()
	}
	return c
}

// top is the voltage above the drain resistor, V.
func (l *speedLot) top(vg float64) float64 {
	if l.Tied {
		return vg
	}
	return l.Vdd
}

// measure fits all curves many times over, first in one thread and then in two.
func (l *speedLot) measure(t *testing.T) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1))
	const seconds = 2
	var tr transfer
	l.pass(t, &tr) // warm
	fits, evals := 0, 0
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	var took []float64
	for begin := cpuSeconds(t); cpuSeconds(t) < begin+seconds; {
		start := cpuSeconds(t)
		evals += l.pass(t, &tr)
		fits += len(l.Curves)
		took = append(took, (cpuSeconds(t)-start)/float64(len(l.Curves)))
	}
	runtime.ReadMemStats(&after)
	slices.Sort(took)
	l.CPU = took[len(took)/2]
	l.Allocs = float64(after.Mallocs-before.Mallocs) / float64(fits)
	l.Evals = float64(evals) / float64(fits)

	runtime.GOMAXPROCS(2)
	halves := []speedLot{*l, *l}
	halves[0].Curves, halves[1].Curves = l.Curves[:len(l.Curves)/2], l.Curves[len(l.Curves)/2:]
	passes := fits / len(l.Curves)
	start := time.Now()
	var both sync.WaitGroup
	for k := range halves {
		both.Go(func() {
			var tr transfer
			for range passes {
				halves[k].pass(t, &tr)
			}
		})
	}
	both.Wait()
	l.Wall2 = time.Since(start).Seconds() / float64(fits)
}

// pass fits every curve once and gives the number of evaluations.
func (l *speedLot) pass(t *testing.T, tr *transfer) (evals int) {
	tr.f = feed{tied: l.Tied, drain: l.Rl}
	tr.free = append(tr.free[:0], parVt, parBeta, parN, parTheta)
	if !l.Tied {
		tr.free = append(tr.free, parLambda)
	}
	for k := range l.Curves {
		c := &l.Curves[k]
		tr.size(len(c.Vg))
		copy(tr.vg, c.Vg)
		copy(tr.i, c.I)
		copy(tr.sigma, c.Sigma)
		for j, vg := range c.Vg {
			tr.vtop[j] = l.top(vg)
		}
		if !tr.start(false) {
			t.Errorf("%s %d: no start", l.Kind, k)
			return evals
		}
		if c.Start == nil {
			for _, par := range tr.free {
				c.Start = append(c.Start, tr.p[par])
			}
		}
		got := tr.fit(wholeOptions)
		if !got.Reason.Converged() {
			t.Errorf("%s %d: %s", l.Kind, k, got.Reason)
		}
		c.Vt = tr.p[parVt]
		evals += got.Evals
	}
	return evals
}

// cpuSeconds is the processor time that this process has taken, user and system.
func cpuSeconds(t *testing.T) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return float64(u.Utime.Sec+u.Stime.Sec) + float64(u.Utime.Usec+u.Stime.Usec)/1e6
}
