package fit

import (
	"fmt"
	"hash/fnv"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// The sweeps under testdata/faults are made here: curves of the circuit simulator
// (testdata/spice), or of our own equations where it has none, read by simulated
// 6,000-count meters, with one fault planted in each. GATESILL_UPDATE=1 writes them
// anew.
const faultFolder = "../testdata/faults"

// faultFile is one device with one fault.
type faultFile struct {
	device string
	fault  string // told in the file
	from   string // dense curve of testdata/spice; "": by law
	law    func(v float64) float64
	bench  simBench
	grid   []float64 // V above the threshold of the card
	down   []float64 // of a down sweep after it; nil: none
	// by plants a fault in what the meters would read: the gate voltage at which the
	// curve is looked up (late: in the down sweep), and the readings themselves.
	gate  func(v, watts float64, late bool) float64
	spoil func(r *rand.Rand, m simMeters, c *Curve, truth []float64)
	both  bool // read the load circuit by an ammeter as well
	state State
	codes []string // that stand on it
	also  []string // that may stand on it besides
}

func steps(from, to, step float64) []float64 {
	var v []float64
	for k := 0; from+float64(k)*step <= to+1e-9; k++ {
		v = append(v, from+float64(k)*step)
	}
	return v
}

func reversed(v []float64) []float64 {
	v = slices.Clone(v)
	slices.Reverse(v)
	return v
}

func faultFiles() []faultFile {
	load := simBench{circuit: Load, rl: 10, vdd: 12}
	fixed := simBench{circuit: Fixed, vds: 10}
	usual := steps(-1, 0.8, 0.05)
	dead := steps(-3, 3, 0.15) // from 0 to 6 V
	law := func(b simBench) func(v float64) float64 {
		return func(v float64) float64 {
			return simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}.at(b, v)
		}
	}
	small := simBench{circuit: Fixed, vds: 0.8}
	first := func(x []float64, over float64) int {
		return slices.IndexFunc(x, func(v float64) bool { return v > over })
	}
	return []faultFile{
		{device: "sound-load", from: "l3_load10", bench: load, grid: usual, down: reversed(usual), both: true, state: Measured},
		{device: "sound-diode", from: "l3_diode", bench: simBench{circuit: Diode}, grid: usual, down: reversed(usual), state: Measured},
		{device: "sound-fixed", from: "l3_fixed10", bench: fixed, grid: usual, down: reversed(usual), state: Measured},
		{device: "sound-small", from: "l3_fixed0v1", bench: simBench{circuit: Fixed, vds: 0.1}, grid: steps(-0.6, 1.2, 0.05), state: Measured, also: []string{CodeHeatingNotChecked}},
		{device: "open", fault: "no current at any gate voltage", law: func(float64) float64 { return 0 }, bench: load, grid: dead, state: Open, codes: []string{CodeOpen}},
		{device: "shorted", fault: "drain and source joined", law: func(float64) float64 { return 12 / 10.05 }, bench: load, grid: dead, state: Shorted, codes: []string{CodeShorted}},
		{device: "wrong-way-round", fault: "the body diode conducts at every gate voltage", law: func(float64) float64 { i, _ := bodyDiode(12, 10); return -i }, bench: load, grid: dead,
			state: WrongWayRound, codes: []string{CodeWrongWayRound}},
		{device: "above-range", fault: "the sweep ends below the test current", from: "l3_diode", bench: simBench{circuit: Diode}, grid: steps(-0.6, 0.04, 0.02), state: Above, codes: []string{CodeAboveRange, CodeSubThresholdOnly}},
		{device: "few-points", fault: "four points only", from: "l3_fixed10", bench: fixed, grid: []float64{0, 0.1, 0.25, 0.6}, state: Measured, codes: []string{CodeFewPoints}},
		{device: "sub-threshold-only", fault: "the sweep ends at the knee", from: "l3_load1k", bench: simBench{circuit: Load, rl: 1000, vdd: 12}, grid: steps(-0.6, 0.12, 0.02), state: Measured, codes: []string{CodeSubThresholdOnly}},
		{device: "not-saturated", fault: "the supply was 0.5 V: the channel is a resistor", law: func(v float64) float64 {
			return simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}.at(simBench{circuit: Fixed, vds: 1.2}, v)
		}, bench: simBench{circuit: Fixed, vds: 1.2}, grid: append(steps(-0.2, 0, 0.1), steps(1.3, 3, 0.1)...), state: Measured, codes: []string{CodeNotSaturated}, also: []string{CodeFewPoints}},
		{device: "not-linear", fault: "the overdrive stays below the drain voltage", law: law(small), bench: small, grid: steps(-0.6, 0.5, 0.02), state: Measured, codes: []string{CodeNotLinear}},
		{device: "heating", fault: "the part warms up by 6 K/W with a lag of two points, 4 mV/K", from: "l3_fixed10", bench: fixed, grid: usual, down: reversed(usual),
			gate:  warming(2, 6*4e-3),
			state: Measured, codes: []string{CodeHeating}, also: []string{CodeSweepsDisagree, CodeModelMisfit}},
		{device: "gate-history", fault: "the down sweep needs 20 mV more gate voltage", from: "l3_fixed10", bench: fixed, grid: usual, down: reversed(usual),
			gate: func(v, _ float64, late bool) float64 {
				if late {
					return v - 20e-3
				}
				return v
			},
			state: Measured, codes: []string{CodeGateHistory}, also: []string{CodeSweepsDisagree}},
		{device: "oscillation", fault: "above 20 mA every other reading is a quarter low", from: "l3_fixed10", bench: fixed, grid: usual,
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				for k := range c.Id {
					if k%2 == 0 && truth[k] > 20e-3 {
						c.Id[k] = m.current.read(r, 0.75*truth[k])
					}
				}
			}, state: Measured, codes: []string{CodeOscillation}, also: []string{CodeOutOfLine, CodeRangeGlitch, CodeDecadeSpike}},
		{device: "jumps", fault: "three readings at one gate voltage differ by up to 40 %", from: "l3_fixed10", bench: fixed, grid: append(slices.Clone(usual), usual[28], usual[28]),
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				const held = 28 // 0.4 V above the threshold
				for k := len(c.Id) - 2; k < len(c.Id); k++ {
					c.Vg[k] = c.Vg[held]
					c.Id[k] = m.current.read(r, truth[held]*[]float64{0.8, 1.25}[k%2])
				}
			}, state: Measured, codes: []string{CodeOscillation}, also: []string{CodeOutOfLine, CodeRangeGlitch}},
		{device: "prefix-lost", fault: "the current column is a thousand times too small", from: "l3_load10", bench: load, grid: usual, both: true,
			spoil: func(_ *rand.Rand, _ simMeters, c *Curve, _ []float64) {
				for k := range c.Id {
					c.Id[k] = math.Round(c.Id[k]*1e6) / 1e9
				}
			}, state: Measured, codes: []string{CodePrefixLost}},
		{device: "current-mismatch", fault: "R_L is 8 % more than was said", from: "l3_load10", bench: load, grid: usual, both: true,
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				for k := range c.Vl {
					c.Vl[k] = m.load.read(r, 10.8*truth[k])
				}
			}, state: Measured, codes: []string{CodeCurrentMismatch}},
		{device: "load-warms-up", fault: "R_L grows by 6 % at full power", from: "l3_load10", bench: load, grid: usual, both: true,
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				top := slices.Max(truth)
				for k, i := range truth {
					c.Vl[k] = m.load.read(r, 10*i*(1+0.06*i*i/(top*top)))
				}
			}, state: Measured, codes: []string{CodeCurrentMismatch}},
		{device: "range-glitch", fault: "four fifths of the ammeter's range changes leave one or two readings behind", from: "l3_fixed10", bench: fixed, grid: usual,
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				m.current.glitch(r, c.Id, truth, 0.8)
			}, state: Measured, codes: []string{CodeRangeGlitch}, also: []string{CodeDecadeSpike, CodeOutOfLine, CodeOverload, CodeStuckReading}},
		{device: "decade-spike", fault: "one current ten times too large, one gate voltage ten times too small", from: "l3_diode", bench: simBench{circuit: Diode}, grid: usual,
			spoil: func(_ *rand.Rand, _ simMeters, c *Curve, truth []float64) {
				k := first(truth, 50e-3)
				c.Id[k] *= 10
				c.Vg[k+3] /= 10
			}, state: Measured, codes: []string{CodeDecadeSpike}},
		{device: "stuck-reading", fault: "four readings of the current stand still", from: "l3_diode", bench: simBench{circuit: Diode}, grid: usual,
			spoil: func(_ *rand.Rand, _ simMeters, c *Curve, truth []float64) {
				k := first(truth, 50e-3)
				for j := k + 1; j < k+5; j++ {
					c.Id[j] = c.Id[k]
				}
			}, state: Measured, codes: []string{CodeStuckReading}},
		{device: "overload", fault: "the ammeter is over its range at the last two points, one reading is missing", from: "l3_diode", bench: simBench{circuit: Diode}, grid: usual,
			spoil: func(_ *rand.Rand, _ simMeters, c *Curve, truth []float64) {
				n := len(c.Id)
				c.Id[n-1], c.Id[n-2], c.Id[n-5] = math.Inf(1), math.Inf(1), math.NaN()
			}, state: Measured, codes: []string{CodeOverload, CodeMissingReading}},
		{device: "drain-leakage", fault: "1 mA flows at the off voltage", from: "l3_fixed10", bench: fixed, grid: steps(-3, 0.8, 0.1),
			spoil: func(r *rand.Rand, m simMeters, c *Curve, truth []float64) {
				for k := range c.Id {
					c.Id[k] = m.current.read(r, truth[k]+1e-3)
				}
			}, state: Measured, codes: []string{CodeDrainLeakage}},
		{device: "sign-turned", fault: "the ammeter's leads are exchanged", from: "l3_fixed10", bench: fixed, grid: usual,
			spoil: func(_ *rand.Rand, _ simMeters, c *Curve, _ []float64) {
				for k := range c.Id {
					c.Id[k] = -c.Id[k]
				}
			}, state: Measured, codes: []string{CodeSignTurned}},
	}
}

// warming lets the threshold of a part fall with its power, which the temperature
// follows with a lag in points; perWatt in V/W. The gain's own coefficient is left
// out.
func warming(lag, perWatt float64) func(v, watts float64, late bool) float64 {
	t, share := 0.0, 1-math.Exp(-1/lag)
	return func(v, watts float64, _ bool) float64 {
		t += share * (watts - t)
		return v + perWatt*t
	}
}

// make reads the device by meters. The up and the down sweep stand one after the
// other, as in the file.
func (f *faultFile) make(t *testing.T, dense map[string]*outsideCurve) (up, down Curve) {
	h := fnv.New64a()
	h.Write([]byte(f.device))
	r := randomSource(h.Sum64())
	m := handheld()
	at := f.law
	vto := 3.0
	if f.from != "" {
		o := dense[f.from+"_dense.csv"]
		if o == nil {
			t.Fatalf("%s: no curve %s", f.device, f.from)
		}
		at, vto = func(v float64) float64 {
			k := below(o.vg, v)
			a, b := o.vg[k], o.vg[k+1]
			return o.id[k] + (o.id[k+1]-o.id[k])*(v-a)/(b-a)
		}, o.vto
	}
	gate := f.gate
	if gate == nil {
		gate = func(v, _ float64, _ bool) float64 { return v }
	}
	watts := 0.0
	read := func(grid []float64, late bool) (c Curve, truth []float64) {
		for _, x := range grid {
			v := vto + x + 5e-3*(2*r.Float64()-1)
			i := at(gate(v, watts, late))
			watts = i * f.bench.vds
			truth = append(truth, i)
			c.Vg = append(c.Vg, m.gate.read(r, v))
			if f.bench.circuit == Load {
				c.Vl = append(c.Vl, m.load.read(r, i*f.bench.rl))
			}
			if f.bench.circuit != Load || f.both {
				c.Id = append(c.Id, m.current.read(r, i))
			}
		}
		if f.spoil != nil {
			f.spoil(r, m, &c, truth)
		}
		return c, truth
	}
	up, _ = read(f.grid, false)
	if f.down != nil {
		down, _ = read(f.down, true)
	}
	return up, down
}

// below is the index of the last of ascending x, but for the very last, not above v.
func below(x []float64, v float64) int {
	k, _ := slices.BinarySearch(x, v)
	return max(0, min(k-1, len(x)-2))
}

// file writes both sweeps as a table.
func (f *faultFile) file(up, down Curve) string {
	var b strings.Builder
	fault, made := f.fault, "by our own equations"
	if fault == "" {
		fault = "none"
	}
	if f.from != "" {
		made = "from testdata/spice/" + f.from + "_dense.csv"
	}
	fmt.Fprintf(&b, "# device: %s\n# planted fault: %s (invented data, %s)\n# circuit: %s\n", f.device, fault, made, f.bench.circuit)
	switch f.bench.circuit {
	case Load:
		fmt.Fprintf(&b, "# rl: %g\n# vdd: %g\n", f.bench.rl, f.bench.vdd)
	case Fixed:
		fmt.Fprintf(&b, "# vds: %g\n# ammeter: none\n", f.bench.vds)
	}
	b.WriteString("# meter: 6000 counts, simulated\n# generated-by: go test ./fit -run TestFaultFiles, with GATESILL_UPDATE=1\nvg_V")
	cell := func(x float64) string {
		switch {
		case math.IsNaN(x):
			return ","
		case math.IsInf(x, 0):
			return ",OL"
		}
		return "," + strconv.FormatFloat(math.Round(x*1e9)/1e9+0, 'f', -1, 64) // + 0: no minus before a zero
	}
	columns := [][2][]float64{}
	for _, c := range []struct {
		name     string
		up, down []float64
	}{{"id_A", up.Id, down.Id}, {"vl_V", up.Vl, down.Vl}} {
		if c.up != nil {
			b.WriteString("," + c.name)
			columns = append(columns, [2][]float64{c.up, c.down})
		}
	}
	b.WriteString("\n")
	for j, c := range []Curve{up, down} {
		for k, v := range c.Vg {
			b.WriteString(strings.TrimPrefix(cell(v), ","))
			for _, x := range columns {
				b.WriteString(cell(x[j][k]))
			}
			b.WriteString("\n")
		}
	}
	return b.String()
}

// Every fault has its code on the device in whose readings it was planted, and none
// that does not belong there; and the files that the command line is tested with are
// these.
func TestFaultFiles(t *testing.T) {
	dense := map[string]*outsideCurve{}
	for _, o := range outsideCurves(t) {
		if o.step == "dense" {
			dense[o.file] = &o
		}
	}
	for _, f := range faultFiles() {
		up, down := f.make(t, dense)
		s := f.bench.setup()
		s.TestCurrent, s.RLTol = 10e-3, nan()
		rs, dirs := []Result{One(up, s)}, []string{"up"}
		swept := []Swept{{up, s, "up", rs[0]}}
		if down.Vg != nil {
			rs, dirs = append(rs, One(down, s)), append(dirs, "down")
			swept = append(swept, Swept{down, s, "down", rs[1]})
		}
		r := Combine(rs, dirs)
		Drift(swept, &r)
		if r.State != f.state {
			t.Errorf("%s: %s: %s", f.device, r.State, r.Why)
		}
		for _, code := range f.codes {
			if !r.Has(code) {
				t.Errorf("%s: no %s, codes %s", f.device, code, codesOf(r))
			}
		}
		for _, w := range r.Warnings {
			known := append([]string{CodeNoAccuracy, CodeHeatingNotChecked, CodeCoarseNearCurrent}, append(f.codes, f.also...)...)
			if !slices.Contains(known, w.Code) {
				t.Errorf("%s: %s: %s", f.device, w.Code, w.Text)
			}
		}
		name, text := filepath.Join(faultFolder, f.device+".csv"), f.file(up, down)
		if os.Getenv("GATESILL_UPDATE") != "" {
			if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		if have, err := os.ReadFile(name); err != nil || string(have) != text {
			t.Errorf("%s is not what is made here (%v); GATESILL_UPDATE=1 writes it", name, err)
		}
	}
}
