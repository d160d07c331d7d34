package fit

import (
	"cmp"
	"math"
	"slices"
)

// Cleaned is the points of a curve that may be used, in the order in which the
// part turns on: ascending |V_GS| for an enhancement part. All slices have the
// same length and carry the device's own signs.
type Cleaned struct {
	Index []int     // of the curve's slices; the first of several points averaged because they share a gate voltage
	Vg    []float64 // V
	I     []float64 // A, drain current used: by ammeter, V_L/R_L, or their mean where they agree
	U     []float64 // A, its standard uncertainty, random part as far as stated or seen in the digits; 0: not known
	Vds   []float64 // V, drain to source, NaN where it is not known
}

// Clean gives the points of a curve that may be used, those that may not with
// the reason, and what is to be said of the readings.
//
// Points are left out when a reading is missing or over the range, stands still
// while the other moves, or is not among the largest set of points that one transfer
// curve can hold: ten times off, left over from before a change of range, or merely out
// of line. Where an ammeter and a load resistor both tell the current, either reading
// of a point may be the one that fits, see [Warning] codes current-mismatch and
// prefix-lost. c is not modified.
//
// Source: common practice, no source; the bracket that a transfer curve must
// keep between two of its points follows from the square law and its
// exponential foot (Shichman and Hodges 1968; Enz, Krummenacher and Vittoz
// 1995). Checked: TestPlantedFaults, TestGlitchedRangeChanges,
// TestCleanCurvesStayWhole, TestFalseAlarms.
func Clean(c Curve, s Setup) (Cleaned, []LeftOut, []Warning) {
	w := newWork(c, s)
	w.settleCurrents()
	w.clean()
	return w.cleaned(), w.sortedLeft(), w.warns
}

// sortedLeft gives the points left out ascending by index.
func (w *work) sortedLeft() []LeftOut {
	slices.SortStableFunc(w.left, func(a, b LeftOut) int { return cmp.Compare(a.Index, b.Index) })
	return w.left
}

// cleaned puts the device's own signs back.
func (w *work) cleaned() Cleaned {
	n := len(w.pts)
	f := make([]float64, 4*n)
	c := Cleaned{Index: make([]int, n), Vg: f[:n:n], I: f[n : 2*n : 2*n], U: f[2*n : 3*n : 3*n], Vds: f[3*n:]}
	for j := range w.pts {
		p := &w.pts[j]
		c.Index[j], c.Vg[j], c.I[j], c.U[j], c.Vds[j] = p.k, w.sign*p.vg, w.sign*p.i, p.u, w.sign*p.vds
	}
	return c
}

// clean leaves out what cannot be a reading of this curve, averages points of
// one gate voltage and sets the drain voltages.
func (w *work) clean() {
	w.dropStuck()
	w.dropGateSpikes()
	w.survey()
	w.findJumps()
	w.mergeEqual(true)
	if !w.falling {
		w.dropFaults()
		w.dropLast()
	}
	w.mergeEqual(false)
	for j := range w.pts {
		p := &w.pts[j]
		p.vds = w.drainVoltage(p)
	}
	w.tellDisputes()
	w.tellLeftOut()
}

// drop leaves point j out of the usable ones.
func (w *work) drop(j int, code, text string) {
	w.leave(w.pts[j].k, code, text)
	w.pts = slices.Delete(w.pts, j, j+1)
}

// leftOutFor says, by code, why several points were left out.
var leftOutFor = [...]struct{ code, why string }{
	{CodeOverload, "a meter was over its range"},
	{CodeMissingReading, "a reading is missing"},
	{CodeDecadeSpike, "ten times too large or too small"},
	{CodeRangeGlitch, "a jump where the meter changed its range"},
	{CodeStuckReading, "a reading stands still while the rest moves"},
	{CodeOutOfLine, "they contradict the points around them"},
	{CodeCurrentMismatch, "the two readings of the current disagree and fit neither neighbour"},
	{CodePrefixLost, "the two readings of the current are a factor of a thousand apart and fit neither neighbour"},
}

// tellLeftOut sums the points left out up in one warning a code.
func (w *work) tellLeftOut() {
	for _, kind := range leftOutFor {
		var at []float64
		n, why := 0, ""
		for _, l := range w.left {
			if l.Code != kind.code {
				continue
			}
			n++
			why = l.Text
			if v := w.c.Vg[l.Index]; finiteNumber(v) {
				at = append(at, v)
			}
		}
		if n == 0 {
			continue
		}
		text := count(n, "point", "points") + " left out"
		if len(at) > 0 {
			text += " at " + places(at)
		}
		if n > 1 {
			why = kind.why
		}
		w.warns = append(w.warns, Warning{kind.code, text + ": " + why + "."})
	}
}

// mergeEqual averages points of exactly one gate voltage; with alike only those
// of them whose currents agree.
func (w *work) mergeEqual(alike bool) {
	if !w.ties {
		return
	}
	out := w.pts[:0]
	for j := 0; j < len(w.pts); {
		e := j + 1
		for e < len(w.pts) && w.pts[e].vg == w.pts[j].vg && !(alike && !w.alike(&w.pts[j], &w.pts[e])) {
			e++
		}
		p := w.pts[j]
		if n := float64(e - j); n > 1 {
			sum, uu := 0.0, 0.0
			for _, v := range w.pts[j:e] {
				sum += v.i
				uu += v.u * v.u
				p.room = max(p.room, v.room)
				p.k = min(p.k, v.k)
			}
			// Readings that stand within the same count share its error.
			p.i = sum / n
			p.u = max(math.Sqrt(uu)/n, p.q/math.Sqrt(12)/math.Sqrt(n))
			p.ux /= math.Sqrt(n)
			w.shape(&p)
		}
		out = append(out, p)
		j = e
	}
	w.pts = out
}

// stepRatio is the factor by which two currents at one gate reading may differ
// because of the step of its display: no transistor is steeper than an ideal
// exponential, and three steps allow for noise. A step beyond coarseDisplay is not
// that of a meter but of voltages that were set.
func (w *work) stepRatio() float64 {
	const coarseDisplay = 10e-3
	return 1.3 * math.Exp(3*math.Min(w.grid, coarseDisplay)/thermalVoltage)
}

// alike reports whether two points of one gate voltage may be averaged.
func (w *work) alike(a, b *point) bool {
	return !a.disputed && !b.disputed &&
		math.Abs(a.i-b.i) <= (w.stepRatio()-1)*math.Min(math.Abs(a.i), math.Abs(b.i))+6*rss(a.room, b.room)+3*(a.q+b.q)+2*w.tiny
}

// drainVoltage is V_DS at a point as far as it is known.
func (w *work) drainVoltage(p *point) float64 {
	if v := w.drainAt(p.k); w.s.Circuit == Diode {
		return v
	} else if finiteNumber(v) {
		return v
	}
	switch w.s.Circuit {
	case Fixed:
		if positive(w.s.Burden) {
			return w.s.Vds - p.i*w.s.Burden
		}
		return w.s.Vds
	case Load:
		v := w.supplyAt(p.k)
		if !finiteNumber(v) {
			v = w.least // the supply is at least that
		}
		if positive(w.s.RL) {
			return v - p.i*w.s.RL
		}
	}
	return math.NaN()
}

// stuckRun is the least number of equal readings that is called stuck.
const stuckRun = 3

// dropStuck finds readings that stand still while the rest moves.
func (w *work) dropStuck() {
	w.dropStuckGate()
	for j := 0; j < len(w.pts); {
		e := j + 1
		for e < len(w.pts) && w.pts[e].i == w.pts[j].i {
			e++
		}
		if e-j >= stuckRun && w.isStuck(j, e) {
			text := "the current stands at " + amps(w.pts[j].i) + " while the gate moves"
			read := j // the first of them in time was still read
			for k := j; k < e; k++ {
				if w.pts[k].k < w.pts[read].k {
					read = k
				}
			}
			for k := e - 1; k >= j; k-- {
				if k != read {
					w.drop(k, CodeStuckReading, text)
				}
			}
			e = j + 1
		}
		j = e
	}
}

// isStuck decides whether the equal currents j…e-1 are a frozen reading. A
// plateau, the floor of the counts and coarse counts are none: the curve on
// both sides must rise so steeply that ten counts and 5 % were to be expected.
func (w *work) isStuck(j, e int) bool {
	p := w.pts
	v := p[j].i
	if v <= 5*p[j].q {
		return false
	}
	span := p[e-1].vg - p[j].vg
	slope := math.Inf(1)
	if j >= 1 {
		b := max(0, j-2)
		slope = math.Min(slope, (v-p[b].i)/(p[j].vg-p[b].vg))
	}
	if e < len(p) {
		a := min(len(p)-1, e+1)
		slope = math.Min(slope, (p[a].i-v)/(p[a].vg-p[e-1].vg))
	} else if !w.mayStandAtTheEnd(v) {
		return false
	}
	if j == 0 || math.IsInf(slope, 1) {
		return false // nothing to judge by
	}
	return slope*span > math.Max(10*p[j].q, 0.05*v)
}

// mayStandAtTheEnd reports whether equal currents up to the end of the sweep
// speak of a frozen meter (or a supply at its limit) rather than of the load
// resistor.
func (w *work) mayStandAtTheEnd(i float64) bool {
	switch w.s.Circuit {
	case Diode, Fixed:
		return true
	case Load:
		return w.vdd > 0 && positive(w.s.RL) && i*w.s.RL < 0.9*w.vdd
	}
	return false
}

// dropStuckGate leaves out groups of one gate voltage whose currents differ by
// more than the step of the gate reading explains.
func (w *work) dropStuckGate() {
	for j := 0; j < len(w.pts); {
		e := j + 1
		for e < len(w.pts) && w.pts[e].vg == w.pts[j].vg {
			e++
		}
		if e-j >= stuckRun {
			lo, hi := math.Inf(1), math.Inf(-1)
			for _, v := range w.pts[j:e] {
				lo, hi = math.Min(lo, v.i), math.Max(hi, v.i)
			}
			if lo > 5*w.pts[j].q && hi > lo*w.stepRatio() && hi-lo > 10*w.pts[j].q && w.stoodStill(j, e) {
				text := "the gate reading stands at " + volts(w.gate*w.pts[j].vg) + " while the current goes from " + amps(lo) + " to " + amps(hi)
				for k := e - 1; k >= j; k-- {
					w.drop(k, CodeStuckReading, text)
				}
				e = j
			}
		}
		j = e
	}
}

// dropGateSpikes finds a gate reading ten times too large at the end of the
// sweep, where no current contradicts it.
func (w *work) dropGateSpikes() {
	n := len(w.pts)
	if n < 4 {
		return
	}
	last, prev := w.pts[n-1].vg, w.pts[n-2].vg
	step := (prev - w.pts[0].vg) / float64(n-2)
	tenth := last / 10
	if prev > 0 && last-prev > 20*step && tenth > w.pts[0].vg && tenth < prev+5*step {
		w.drop(n-1, CodeDecadeSpike, "the gate voltage reads "+volts(w.gate*last)+", ten times what it should")
	}
}
