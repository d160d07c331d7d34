package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
)

// soundPair is an up and a down sweep of one sound device, with what would be a
// false alarm on them.
type soundPair struct {
	name  string
	curve [2]Curve
	setup Setup
	leaks bool // the drain really leaks more than is allowed
}

// turnedGrid is from…to in steps, each up to a share of a step off.
func turnedGrid(r *rand.Rand, from, to, step, off float64) []float64 {
	var v []float64
	for x := from; x <= to+1e-9; x += step {
		v = append(v, x+step*off*(2*r.Float64()-1))
	}
	return v
}

// statementOf is what a simulated meter's data sheet would say: its ranges, 0.5 %
// and two counts.
func statementOf(m simMeter) []Accuracy {
	var a []Accuracy
	for _, top := range m.tops {
		a = append(a, Accuracy{Top: top, Percent: 0.5, Counts: 2, Resolution: top / m.counts})
	}
	return a
}

// within gives a meter a gain and a zero inside its statement of 0.5 % and two
// counts, each a rectangle of its own.
type within struct {
	simMeter
	zero float64 // counts
}

func (m simMeter) somewhereWithin(r *rand.Rand) within {
	m.gain = 0.005 * (2*r.Float64() - 1)
	return within{m, 2 * (2*r.Float64() - 1)}
}

func (m within) read(r *rand.Rand, x float64) float64 {
	if m.counts == 0 {
		return x
	}
	return m.simMeter.read(r, x+m.zero*m.tops[m.rangeOf(x)]/m.counts)
}

// soundSelfMade draws pairs of sweeps of self-made devices: three laws, five
// circuits, steps of 20 to 120 mV set exactly or turned by hand, beginning at 0 V,
// or 2 V below the threshold to just at it; read by two classes of meters, anywhere
// within their statements (which are given or not), or exactly. The load circuit
// is read at the resistor, at the drain, by an ammeter, or by two of these.
func soundSelfMade(seed uint64, n int, visit func(p soundPair)) {
	r := randomSource(seed)
	for k := range n {
		d := simDevice{
			law: law(r.IntN(3)), vt: 0.7 + 3.5*r.Float64(), beta: math.Exp(-1 + 4*r.Float64()), n: 1.1 + r.Float64()*0.7,
			theta: 0.3 * r.Float64(), rs: []float64{0, 0.1}[r.IntN(2)], leak: []float64{0, 0, 0, 2e-6, 30e-6}[r.IntN(5)],
		}
		b := []simBench{
			{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Load, rl: 1000, vdd: 12},
			{circuit: Load, rl: []float64{4.7, 22, 100}[r.IntN(3)], vdd: []float64{5, 13.8, 28}[r.IntN(3)]},
			{circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1},
		}[r.IntN(6)]
		which := r.IntN(3)
		m := []simMeters{handheld(), fineMeters(), exact()}[which]
		gate, current, load := m.gate.somewhereWithin(r), m.current.somewhereWithin(r), m.load.somewhereWithin(r)
		step := 0.02 + 0.1*r.Float64()
		off := []float64{0, 0.3}[r.IntN(2)]
		if off == 0 {
			step = math.Round(step*1e2) / 1e2
		}
		s := b.setup()
		s.TestCurrent, s.IdleCurrent = []float64{250e-6, 1e-3, 10e-3}[r.IntN(3)], 100e-3
		if which < 2 && r.IntN(2) == 0 {
			s.Gate, s.Current, s.Load, s.Drain = statementOf(m.gate), statementOf(m.current), statementOf(m.load), statementOf(m.load)
		}
		fromOff := r.IntN(8) == 0
		columns := "i"
		if b.circuit == Load {
			columns = []string{"i", "l", "l", "il", "d", "id", "dv"}[r.IntN(7)]
		}
		p := soundPair{setup: s, leaks: d.leak > 0.5*math.Max(leakShare*s.TestCurrent, leakLeast)}
		p.name = fmt.Sprintf("self-made %d: %s %g Ω %g V, law %d, V_T %.2f, β %.2f, leak %g, meters %d, columns %s, stated %v, step %.3f off %g",
			k, b.circuit, b.rl, b.vdd, d.law, d.vt, d.beta, d.leak, which, columns, s.Gate != nil, step, off)
		for j := range p.curve {
			from := d.vt - 2*r.Float64()*r.Float64()
			switch {
			case fromOff:
				from = 0
			case r.IntN(4) == 0:
				from = d.vt - 0.05*r.Float64()
			}
			grid := turnedGrid(r, math.Max(0, from), d.vt+0.5+1.2*r.Float64(), step, off)
			if j == 1 {
				slices.Reverse(grid)
			}
			c := &p.curve[j]
			for _, v := range grid {
				i := d.at(b, v)
				c.Vg = append(c.Vg, gate.read(r, v))
				for _, column := range columns {
					switch column {
					case 'i':
						c.Id = append(c.Id, current.read(r, i))
					case 'l':
						c.Vl = append(c.Vl, load.read(r, i*b.rl))
					case 'd':
						c.Vd = append(c.Vd, load.read(r, b.vdd-i*b.rl))
					case 'v':
						c.Vdd = append(c.Vdd, load.read(r, b.vdd))
					}
				}
			}
		}
		visit(p)
	}
}

// soundSpice draws the same from the dense curves of the circuit simulator.
func soundSpice(t *testing.T, seed uint64, n int, visit func(p soundPair)) {
	var dense []outsideCurve
	for _, o := range outsideCurves(t) {
		if o.step == "dense" {
			dense = append(dense, o)
		}
	}
	r := randomSource(seed)
	for k := range n {
		o := dense[r.IntN(len(dense))]
		which := r.IntN(3)
		m := []simMeters{handheld(), fineMeters(), exact()}[which]
		gate, current, load := m.gate.somewhereWithin(r), m.current.somewhereWithin(r), m.load.somewhereWithin(r)
		step := 0.02 + 0.1*r.Float64()
		both := r.IntN(3) == 0
		s := o.setup
		s.TestCurrent, s.IdleCurrent = []float64{250e-6, 1e-3, 10e-3}[r.IntN(3)], 100e-3
		if which < 2 && r.IntN(2) == 0 {
			s.Gate, s.Current, s.Load = statementOf(m.gate), statementOf(m.current), statementOf(m.load)
		}
		p := soundPair{setup: s, name: fmt.Sprintf("%s %d, meters %d, step %.3f", o.file, k, which, step)}
		sign := 1.0
		if o.channelP {
			sign = -1
		}
		for j := range p.curve {
			from, to := o.vto*sign-2*r.Float64()*r.Float64(), o.vto*sign+0.5+1.2*r.Float64()
			if r.IntN(4) == 0 {
				from = o.vto*sign - 0.05*r.Float64()
			}
			from = math.Max(from, sign*o.vg[0])
			var c Curve
			for _, v := range turnedGrid(r, from, to, step, 0.3*float64(r.IntN(2))) {
				q := nearestOf(o.vg, sign*v)
				c.Vg = append(c.Vg, gate.read(r, o.vg[q]))
				if both || o.curve.Vl == nil {
					c.Id = append(c.Id, current.read(r, o.id[q]))
				}
				if o.curve.Vl != nil {
					c.Vl = append(c.Vl, load.read(r, o.curve.Vl[q]))
				}
			}
			if j == 1 {
				slices.Reverse(c.Vg)
				slices.Reverse(c.Id)
				slices.Reverse(c.Vl)
			}
			p.curve[j] = c
		}
		visit(p)
	}
}

func nearestOf(x []float64, v float64) int {
	best := 0
	for k := range x {
		if math.Abs(x[k]-v) < math.Abs(x[best]-v) {
			best = k
		}
	}
	return best
}

// alarmCodes are those that must not stand on a sound sweep.
var alarmCodes = []string{
	CodeOutOfLine, CodeDecadeSpike, CodeRangeGlitch, CodeStuckReading, CodeOscillation, CodeDrainLeakage,
	CodeCurrentMismatch, CodePrefixLost, CodeSignTurned, CodeFallingCurve, CodeOpen, CodeShorted, CodeWrongWayRound,
	CodeSweepsDisagree, CodeHeating, CodeGateHistory,
}

// alarmRates counts, by code, the sweeps (pairs for the last two) on which it
// stands.
type alarmRates struct {
	sweeps, pairs int
	n             map[string]int
	said          map[string]int
}

func (a *alarmRates) take(t *testing.T, p soundPair) {
	if a.n == nil {
		a.n, a.said = map[string]int{}, map[string]int{}
	}
	var rs []Result
	for j := range p.curve {
		r := One(p.curve[j], p.setup)
		rs = append(rs, r)
		a.sweeps++
		for _, code := range alarmCodes {
			if !r.Has(code) || code == CodeDrainLeakage && p.leaks {
				continue
			}
			a.count(t, code, p.name+" "+[]string{"up", "down"}[j]+": "+string(r.State)+" "+warningText(r, code))
		}
	}
	a.pairs++
	r := Combine(rs, []string{"up", "down"})
	Drift([]Swept{{p.curve[0], p.setup, "up", rs[0]}, {p.curve[1], p.setup, "down", rs[1]}}, &r)
	for _, code := range []string{CodeSweepsDisagree, CodeHeating, CodeGateHistory} {
		if r.Has(code) && rs[0].State == rs[1].State {
			a.count(t, code, p.name+": "+warningText(r, code))
		}
	}
}

func (a *alarmRates) count(t *testing.T, code, text string) {
	a.n[code]++
	if a.said[code]++; a.said[code] <= 6 && testing.Verbose() {
		t.Logf("%s: %s", code, text)
	}
}

// of is how many sweeps, or pairs of them, could have raised a code.
func (a *alarmRates) of(code string) int {
	switch code {
	case CodeSweepsDisagree, CodeHeating, CodeGateHistory:
		return a.pairs
	}
	return a.sweeps
}

func (a *alarmRates) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%d sweeps, %d pairs:", a.sweeps, a.pairs)
	for _, code := range alarmCodes {
		if a.n[code] > 0 {
			fmt.Fprintf(&b, " %s %.2f %% (%d)", code, 100*float64(a.n[code])/float64(a.of(code)), a.n[code])
		}
	}
	return b.String()
}

// Sound sweeps raise no alarm: each code on less than one in two hundred.
func TestFalseAlarms(t *testing.T) {
	pairs := 400 // tell gross errors
	if os.Getenv("GATESILL_LONG") != "" {
		pairs = 3000
	}
	var own, spice alarmRates
	soundSelfMade(101, pairs, func(p soundPair) { own.take(t, p) })
	soundSpice(t, 102, pairs/2, func(p soundPair) { spice.take(t, p) })
	t.Logf("self-made: %s", &own)
	t.Logf("simulator: %s", &spice)
	for _, a := range []*alarmRates{&own, &spice} {
		for _, code := range alarmCodes {
			// One in two hundred, and two standard errors of the count.
			if limit := float64(a.of(code)) / 200; float64(a.n[code]) > limit+2*math.Sqrt(limit) {
				t.Errorf("%s on %d of %d", code, a.n[code], a.of(code))
			}
		}
	}
}

// Lots of twelve devices swept in steps of 50 and 100 mV from just below or at the
// threshold, by a cheap meter: a step of 10 µA, noise of several steps, an offset
// (self-made). There is no foot that would tell of its noise, and none of it is a
// fault.
func TestFalseAlarmsOfCheapMeters(t *testing.T) {
	r := randomSource(103)
	codes := map[string]int{}
	n, lots, hit := 0, 100, 0
	for range lots {
		b := offBenches[r.IntN(3)]
		m := offMeter{[]float64{0, 50e-6, 100e-6}[r.IntN(3)], []float64{0, 20e-6, 50e-6}[r.IntN(3)]}
		step, start := []float64{0.05, 0.1}[r.IntN(2)], 2.9+0.4*r.Float64()
		s := b.setup()
		s.TestCurrent, s.IdleCurrent = []float64{1e-3, 10e-3}[r.IntN(2)], 250e-3
		any := false
		for range 12 {
			d := simDevice{law: smoothLaw, vt: 3.3 + 0.08*r.NormFloat64(), beta: 4.8, n: 1.4, theta: 0.05}
			q := One(fromOff(r, d, b, m, start, step, 1), s)
			n++
			for _, code := range alarmCodes {
				if q.Has(code) {
					codes[code]++
					any = true
				}
			}
		}
		if any {
			hit++
		}
	}
	t.Logf("%d sweeps, %d of %d lots with an alarm: %v", n, hit, lots, codes)
	for code, k := range codes {
		if k*200 > n {
			t.Errorf("%s on %d of %d", code, k, n)
		}
	}
}
