package fit

import (
	"math"
)

// What is taken for what, by the physics behind it. All are judgements.
const (
	// deadShare of the test current, and five counts, is no current at all.
	deadShare = 0.01
	// manyCounts of the meter are a current, whatever the test current.
	manyCounts = 50
	// wellUp is how far above its off voltage, V, the gate of an enhancement part
	// must have been for 'no current' to mean 'open': data sheets of power and RF
	// parts end at 4 to 5 V.
	wellUp = 4.0
	// offNear and offFar are how far above the off voltage, V, the first point of
	// a sweep may lie for it to tell what the part does when off: within offNear
	// it does; within offFar only a current that the gate does not move at all
	// does, for no sound part is fully on there and yet unmoved.
	offNear = 0.5
	offFar  = 2.0
	// shortSiemens is the conductance that no sound part reaches within offFar.
	shortSiemens = 10.0
	// A body diode in forward direction, V.
	diodeLow  = 0.35
	diodeHigh = 1.1
	// noDrain is a drain voltage, V, that says that nothing feeds the drain.
	noDrain = 0.05
)

// dead looks for a part that does nothing a transistor does, before its points
// are cleaned; it gives the state and one sentence, or "" for a part that the
// gate moves. It needs three points.
//
// A sound part is off at its off voltage and is moved by its gate by decades.
// Shorted: the current is there at the off voltage and the gate does not move
// it. Wrong way round: the same, but the body diode's forward voltage remains
// between drain and source, and falls once the channel opens beside it; or the
// current flows the other way. Open: no current although the gate went well up
// and the drain had its voltage.
func (w *work) dead() (State, string) {
	n := len(w.pts)
	if n == 0 {
		return w.unread()
	}
	if n < 3 {
		return "", ""
	}
	third := max(1, n/3)
	low, high := w.medianOf(0, third), w.medianOf(n-third, n)
	if w.nothingFlows() {
		return w.openState()
	}
	if w.turned && low < 2*high { // else it falls, as a part of the other channel does
		if state, why := w.deadTurned(low, high); state != "" {
			return state, why
		}
	}
	if w.s.Circuit == Diode {
		return w.deadDiode()
	}
	if !(low > 0.5*high && low < 2*high) || !(low > 5*w.pts[0].q) {
		return "", ""
	}
	if low < w.s.TestCurrent/2 && !w.wentWellUp() {
		return "", "" // a leakage, and the sweep may have ended before turn-on
	}
	if w.scattered() || w.medianOf(n-3, n) > 2*high {
		return "", "" // the gate moves it at the end: most of the sweep is foot
	}
	return w.deadOn(low, high, third)
}

// deadTurned judges a current of the other sign. Exchanged leads of the meter are
// taken for it only where the magnitude rises from near nothing: a body diode's
// current flows at every gate voltage. It warns sign-turned when it gives no
// state.
func (w *work) deadTurned(low, high float64) (State, string) {
	n := len(w.pts)
	begins := w.medianOf(0, min(3, n))
	const nearNothing = 0.1
	if begins < nearNothing*w.medianOf(max(0, n-3), n) {
		w.warn(CodeSignTurned, "The readings of the current carry the other sign than that of "+w.channel()+" parts; their magnitudes were used.")
		return "", ""
	}
	left := w.medianDrain(0, n)
	switch {
	case !(low > 0.5*high):
		return Declined, "The current carries the other sign than that of " + w.channel() + " parts and is " + amps(begins) +
			" at the first points already: exchanged leads cannot be told from a part that conducts backwards; start the sweep at the off voltage."
	case !w.startsOff(offFar) && w.s.Circuit == Load && math.Abs(left) < diodeLow:
		return Declined, "The current flows the other way and the load resistor takes nearly the whole supply at every gate voltage: the part is shorted or was fully on at the first point, " +
			volts(w.gate*w.pts[0].vg) + ", with leads exchanged; start the sweep at the off voltage."
	}
	return WrongWayRound, "The current flows the other way at every gate voltage: the body diode conducts, so drain and source are exchanged or the drain supply has the wrong polarity."
}

// flat is the current that flows at every gate voltage alike; ok is false where
// the gate moves it by a tenth.
func (w *work) flat() (i float64, ok bool) {
	n := len(w.pts)
	if n < 3 {
		return 0, false
	}
	third := max(1, n/3)
	low, high := w.medianOf(0, third), w.medianOf(n-third, n)
	i = w.medianOf(0, n)
	return i, i > 0 && math.Abs(high-low) < 0.1*i && math.Abs(w.medianOf(n-3, n)-w.medianOf(0, 3)) < 0.1*i
}

// flatSentence says what a sweep may be that begins above the off voltage and
// carries one current throughout.
func (w *work) flatSentence(i float64) string {
	n := len(w.pts)
	s := "The part carries " + amps(i) + " at every gate voltage from " + volts(w.gate*w.pts[0].vg) + " on"
	left := w.medianDrain(0, n)
	if v := w.supplyAt(w.pts[0].k); w.s.Circuit == Load && finiteNumber(v) && i*w.s.RL > 0.9*v {
		s += ", about all that the load resistor lets through"
	}
	s += ": it may be shorted, or fully on at the first point"
	if left >= diodeLow && left <= diodeHigh {
		s += ", or the wrong way round (" + si(left, "V") + " remain across it, as a body diode leaves)"
	}
	return s + "; start the sweep at the off voltage."
}

// scattered reports whether the middle half of the currents spans more than a
// fifth of their median: then they are no one current.
func (w *work) scattered() bool {
	n := len(w.pts)
	v := make([]float64, n)
	for j := range w.pts {
		v[j] = w.pts[j].i
	}
	m := median(v) // sorts v
	return v[3*n/4]-v[n/4] > 0.2*m
}

func (w *work) channel() string {
	if w.s.PChannel {
		return "p-channel"
	}
	return "n-channel"
}

// deadOn judges a part that conducts from the first point on about as much as
// at the last.
func (w *work) deadOn(low, high float64, third int) (State, string) {
	vLow, vHigh := w.medianDrain(0, third), w.medianDrain(len(w.pts)-third, len(w.pts))
	diode := vLow >= diodeLow && vLow <= diodeHigh && !(vHigh > vLow+0.15)
	steady := math.Abs(w.medianDrain(third, 2*third)-vLow) < 0.1*vLow
	step := math.Max(0.005*high, 3*w.pts[0].q)
	unmoved := math.Abs(high-low) <= step && w.tooGood(high, step)
	switch {
	case diode && (w.startsOff(offNear) || w.startsOff(offFar) && steady):
		return WrongWayRound, "At the off voltage " + si(vLow, "V") + " remain between drain and source, a body diode's forward voltage: drain and source are exchanged."
	case w.startsOff(offNear) && math.Abs(high-low) < 0.1*high:
		return Shorted, w.shortSentence(low, vLow)
	case w.startsOff(offFar) && unmoved:
		return Shorted, w.shortSentence(low, vLow)
	}
	return "", ""
}

// tooGood reports whether a part fully on at the first point would conduct
// better than any sound one does so near its off voltage. Behind a large load
// resistor a sound part that is on cannot be told from a short: the resistor
// carries the whole supply either way, within the given step of current.
func (w *work) tooGood(i, step float64) bool {
	if w.s.Circuit != Load {
		return true
	}
	return positive(w.s.RL) && i/(step*w.s.RL) >= shortSiemens
}

func (w *work) shortSentence(i, vds float64) string {
	s := "The drain carries " + amps(i) + " at every gate voltage"
	if w.s.Circuit == Load && math.Abs(vds) < 0.03*w.vdd {
		s += ", all that the load resistor lets through"
	}
	return s + ": drain and source are joined."
}

// startsOff reports whether the sweep begins within that distance above the off
// voltage.
func (w *work) startsOff(within float64) bool {
	return !math.IsNaN(w.s.OffV) && w.pts[0].vg <= w.s.OffV+within
}

// medianOf is the median current of points from…to-1.
func (w *work) medianOf(from, to int) float64 {
	v := make([]float64, 0, to-from)
	for j := from; j < to; j++ {
		v = append(v, w.pts[j].i)
	}
	return median(v)
}

// medianDrain is the median drain voltage of points from…to-1 as far as it is
// really known: read, or from a supply that is known.
func (w *work) medianDrain(from, to int) float64 {
	v := make([]float64, 0, to-from)
	for j := from; j < to; j++ {
		p := &w.pts[j]
		x := w.drainAt(p.k)
		if !finiteNumber(x) && w.s.Circuit == Load && positive(w.s.RL) {
			x = w.supplyAt(p.k) - p.i*w.s.RL
		}
		if finiteNumber(x) {
			v = append(v, x)
		}
	}
	return median(v)
}

// nothingFlows reports whether no two points show a current: one may be a
// spike. A hundredth of the test current is none, unless that is a current of
// many counts: who asks for kiloamperes has no open part for that.
func (w *work) nothingFlows() bool {
	limit := 0.0
	if positive(w.s.TestCurrent) {
		limit = deadShare * w.s.TestCurrent
	}
	seen := 0
	for j := range w.pts {
		p := &w.pts[j]
		if i := math.Abs(p.i); i > math.Max(limit, 5*p.q) || p.q > 0 && i > manyCounts*p.q {
			seen++
		}
	}
	return seen < 2 && !w.rising()
}

// rising reports whether the last points stand out of the rest as the foot of a
// curve does: each above the one before, and the last ten times the median.
func (w *work) rising() bool {
	n := len(w.pts)
	if n < 5 {
		return false
	}
	p := w.pts[n-3:]
	m := math.Abs(w.medianOf(0, n))
	return p[2].i > p[1].i && p[1].i > p[0].i && p[2].i > 10*m && p[1].i > 4*m && p[2].above()
}

// openState tells an open part from a sweep that did not go far enough, and
// from a drain that had no supply.
func (w *work) openState() (State, string) {
	n := len(w.pts)
	top := w.pts[n-1].vg
	if v := w.medianDrain(0, n); v < noDrain && len(w.c.Vd) > 0 && !(w.s.Circuit == Fixed && w.s.Vds <= 2*noDrain) {
		return Declined, "No current flows and the drain has no voltage: the supply is off or its lead is open."
	}
	if w.wentWellUp() {
		return Open, "No drain current flows up to " + volts(w.gate*top) + ": drain, source or gate is open."
	}
	return Above, "No drain current flows up to " + volts(w.gate*top) + ", where the sweep ends: the part turns on above, or is open."
}

// wentWellUp reports whether the gate went so far that a sound part conducts.
func (w *work) wentWellUp() bool {
	top := w.pts[len(w.pts)-1].vg
	switch limit := math.Abs(w.s.VgsthMax); {
	case w.s.Depletion:
		return top >= -offReach // a depletion part conducts with its gate at 0 V
	case positive(limit):
		return top >= limit
	}
	return top-w.s.OffV >= wellUp
}

// deadDiode judges a part whose drain is tied to its gate. Joined drain and
// source are a resistor there: the current follows the voltage, from the first
// point on. A depletion part is in its resistive region and is not judged.
func (w *work) deadDiode() (State, string) {
	if w.s.Depletion {
		return "", ""
	}
	n := len(w.pts)
	var r []float64
	lowest := math.Inf(1)
	for j := range w.pts {
		p := &w.pts[j]
		if p.i > clearCounts*p.q && p.i > 0 && p.vg > 0 {
			r = append(r, p.vg/p.i)
			lowest = math.Min(lowest, p.vg)
		}
	}
	top := w.pts[n-1].vg
	if len(r) < max(3, n/2) || !(lowest < 0.3) {
		return "", ""
	}
	m := median(r)
	// Ohmic within a factor of 1.3 over the middle half, or never above 0.3 V.
	if r[len(r)/4] > m/1.3 && r[3*len(r)/4] < m*1.3 || top < 0.3 {
		return Shorted, "Drain and source behave as a resistor of " + si(m, "Ω") + ": they are joined."
	}
	return "", ""
}

// unread tells why a curve has no point at all.
func (w *work) unread() (State, string) {
	over := 0
	for _, l := range w.left {
		if l.Code == CodeOverload {
			over++
		}
	}
	if len(w.left) == 0 {
		return Declined, "There are no points."
	}
	if w.noCurrentAtAll() {
		return Declined, "There is no drain current: neither an ammeter's reading nor a load voltage with its resistor."
	}
	if over > len(w.left)/2 && over >= 3 && w.gateWasOff() {
		return Shorted, "The current is beyond the meter's range at every gate voltage: drain and source are joined."
	}
	return Declined, "No point has a reading that can be used."
}

// noCurrentAtAll reports whether no column can tell the current.
func (w *work) noCurrentAtAll() bool {
	return !w.ammeter && !w.byLoad && !w.byDrain
}

// gateWasOff reports whether an overloaded point was taken near the off
// voltage.
func (w *work) gateWasOff() bool {
	for _, l := range w.left {
		if v := w.gate * w.c.Vg[l.Index]; finiteNumber(v) && l.Code == CodeOverload && v <= w.s.OffV+offNear {
			return true
		}
	}
	return false
}

// diodeLike warns where a diode-connected enhancement part reaches the current
// at a body diode's forward voltage and, as far as it was read, rises as
// steeply as one. One reading cannot tell it from a part of very low threshold.
func (w *work) diodeLike(v float64) {
	const perDecade = 0.13 // V, more than a diode with its series resistance takes
	if w.s.Circuit != Diode || w.s.Depletion || v < diodeLow || v > 0.85 {
		return
	}
	last := &w.pts[len(w.pts)-1]
	for j := len(w.pts) - 1; j >= 0; j-- {
		if p := &w.pts[j]; p.i <= last.i/10 {
			if last.vg-p.vg > perDecade {
				return
			}
			break
		}
	}
	w.warn(CodeWrongWayRound, "The part reaches the current at "+volts(w.gate*v)+
		", where a body diode does: drain and source are exchanged, unless parts of this type turn on so low.")
}
