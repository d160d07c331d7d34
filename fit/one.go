package fit

import "math"

// One evaluates one sweep: threshold and gate bias by constant current,
// extrapolated threshold and gain factor in the region the points are in,
// transconductance and drain leakage, each with its uncertainties, the number
// of points behind it and what must be said of it. A curve of one or two points
// is a spot. c is not modified.
//
// A part that does nothing a transistor does, and readings that cannot be
// believed, give a state with one sentence and no numbers. Currents asked for
// that are not positive are not looked for.
func One(c Curve, s Setup) Result {
	w := newWork(c, s)
	r := NewResult()
	w.settleCurrents()
	back, ok := w.takeReturn()
	w.evaluate(&r)
	r.Returned = ok && r.State == Measured && w.judgeReturn(back)
	dropInfinite(&r)
	r.LeftOut, r.Warnings = w.sortedLeft(), w.warns
	return r
}

// dropInfinite takes out what overflowed on absurd readings: no number is
// better than none that can be written.
func dropInfinite(r *Result) {
	for _, k := range Keys {
		q := r.At(k)
		if math.IsInf(q.Value, 0) {
			*q = None()
		}
		for _, u := range [...]*float64{&q.U, &q.UBetween, &q.UAbsolute} {
			if math.IsInf(*u, 0) {
				*u = math.NaN()
			}
		}
	}
}

func (w *work) evaluate(r *Result) {
	if state, why := w.dead(); state != "" {
		r.State, r.Why = state, why
		if code := stateCode(state); code != "" {
			w.warn(code, why)
		}
		w.tellLeftOut()
		return
	}
	w.raiseToFoot()
	w.clean()
	if w.falling {
		r.State = Declined
		r.Why = "The current falls as the gate is driven harder: check the channel type and the sign of the gate voltage."
		w.warn(CodeFallingCurve, r.Why)
		return
	}
	if len(w.pts) == 0 {
		r.State, r.Why = Declined, "No point has a reading that can be used."
		w.warn(CodeFewPoints, r.Why)
		return
	}
	if w.oscillates() {
		r.State = Declined
		r.Why = "Too many readings contradict a rising curve."
		return
	}
	w.tellAccuracy()
	if w.isSpot() {
		w.spot(r)
		if r.Vt.Ok() || r.Vgsth.Ok() || r.VgsIdle.Ok() {
			r.Method = "current"
		}
		if code := stateCode(r.State); code != "" {
			w.warn(code, r.Why)
		}
		return
	}
	w.byCurrent(r)
	w.leakage(r)
	w.extrapolated(r)
}

// stateCode is the warning that goes with a state.
func stateCode(s State) string {
	switch s {
	case Open:
		return CodeOpen
	case Shorted:
		return CodeShorted
	case WrongWayRound:
		return CodeWrongWayRound
	case Above:
		return CodeAboveRange
	}
	return ""
}

// tellAccuracy says which statement is missing for the uncertainties that need them.
func (w *work) tellAccuracy() {
	missing, between := "", false // the tolerance of R_L alone does not matter between sessions
	if p := w.pts[len(w.pts)-1]; math.IsNaN(rangeFor(w.s.Gate, p.vg).absolute(p.vg)) {
		missing, between = "the gate meter's accuracy", true
	}
	if math.IsNaN(w.relativeUsed(w.pts[len(w.pts)-1].i)) {
		if missing != "" {
			missing += " and "
		}
		onLoad := w.onScaleOfLoad()
		stated := !math.IsNaN(w.scaleAt(w.pts[len(w.pts)-1].i, onLoad).offset)
		between = between || !stated
		switch {
		case !onLoad:
			missing += "the ammeter's accuracy"
		case stated:
			missing += "the tolerance of R_L"
		default:
			missing += "the accuracy of the meter at the load resistor"
		}
	}
	switch {
	case missing == "":
	case between:
		w.warn(CodeNoAccuracy, "Not given: "+missing+"; no uncertainty between sessions and no absolute one.")
	default:
		w.warn(CodeNoAccuracy, "Not given: "+missing+"; no absolute uncertainty.")
	}
}

// byCurrent fills in the gate voltages at the test and the idle current, and
// what depends on them.
func (w *work) byCurrent(r *Result) {
	test, idle := w.gateAt(w.s.TestCurrent), w.gateAt(w.s.IdleCurrent)
	r.Crossings = test.count
	if r.Own = test.own; !r.Own.Ok || idle.own.Sparse && idle.own.Ok {
		r.Own = idle.own
	}
	if !r.Own.Ok && w.standing() < sparseOn {
		r.Own.Sparse = true
	}
	r.Vgsth = w.crossingQuantity(test, w.s.TestCurrent)
	r.VgsIdle = w.crossingQuantity(idle, w.s.IdleCurrent)
	r.ReadTest = w.readOn(test.b-1, test.b+1, w.s.TestCurrent, w.s.TestCurrent/test.gm)
	r.ReadIdle = w.readOn(idle.b-1, idle.b+1, w.s.IdleCurrent, w.s.IdleCurrent/idle.gm)
	w.transconductances(r, idle)

	why := ""
	if positive(w.s.TestCurrent) {
		why = w.tellCrossing(test, w.s.TestCurrent)
	}
	if positive(w.s.IdleCurrent) && w.s.IdleCurrent != w.s.TestCurrent {
		if more := w.tellCrossing(idle, w.s.IdleCurrent); why == "" || idle.never {
			why = more
		}
	}
	switch {
	case test.never || idle.never:
		r.State, r.Why = Above, why
		w.warn(CodeAboveRange, why)
	case r.Vgsth.Ok() || r.VgsIdle.Ok():
		r.State = Measured
	case why != "":
		r.State, r.Why = Declined, why
	default:
		r.State, r.Why = Declined, "No current was asked for."
	}
	if r.Vgsth.Ok() {
		w.diodeLike(test.v)
	}
}

// tellCrossing warns of what is wrong with a crossing and gives the sentence
// for the state when it has no value.
func (w *work) tellCrossing(c crossing, i float64) (why string) {
	first, last := &w.pts[0], &w.pts[len(w.pts)-1]
	switch {
	case c.below:
		why = "The part already carries " + amps(first.i) + " at the first point, " + volts(w.gate*first.vg) + ", more than " + amps(i) + "."
		if all, ok := w.flat(); ok {
			why = w.flatSentence(all)
		}
		w.warn(CodeBelowSweep, why)
		return why
	case c.never:
		top := math.Inf(-1)
		for j := range w.pts {
			top = math.Max(top, w.pts[j].i)
		}
		return "The part reaches " + amps(top) + " at the end of the sweep, " + volts(w.gate*last.vg) + ", not " + amps(i) + "."
	case c.limited:
		why = amps(i) + " is below three counts of the meter"
		if math.IsNaN(c.v) {
			why += ": no value."
		} else {
			why += "; read off by averaging several points."
		}
		w.warn(CodeBenchLimited, why)
		return why
	}
	if c.coarse {
		p := &w.pts[c.b-1]
		q := &w.pts[c.b]
		w.warn(CodeCoarseNearCurrent, "Near "+amps(i)+" the points lie "+si(q.vg-p.vg, "V")+" apart ("+amps(p.i)+" and "+amps(q.i)+").")
	}
	if c.count > 1 {
		w.warn(CodeManyCrossings, "The curve crosses "+amps(i)+" upward "+count(c.count, "time", "times")+" between "+
			volts(w.gate*c.lo)+" and "+volts(w.gate*c.hi)+" ("+si(c.hi-c.lo, "V")+"): noise, hysteresis or oscillation.")
	}
	return ""
}

// extrapolated fills in the thresholds that are valid in the region the points
// are in, and chooses the one to show: the model laid through the whole curve; where
// there is none, the ratio where the channel is a resistor and the square-root line
// where it is saturated.
func (w *work) extrapolated(r *Result) {
	if r.Vgsth.Ok() || r.VgsIdle.Ok() {
		r.Method = "current"
	}
	set := func(method string, t Threshold) {
		if r.VtBy == nil {
			r.VtBy = make(map[string]Threshold, 3)
		}
		r.VtBy[method] = t
		r.Vt, r.Beta, r.Theta, r.Method = t.Vt, t.Beta, t.Theta, method
	}
	r.Levels, r.Top = w.levels(), w.highest()
	if w.s.Circuit == NoCircuit {
		w.warn(CodeNoCircuit, "The circuit is not given: constant-current values only.")
		return
	}
	small := w.s.Circuit == Fixed && w.fixedVds() < unreadVds
	never, root := false, true
	if small {
		never, root = w.neverLinear()
	}
	if small && !never {
		w.resistiveThresholds(set)
	} else if root && w.leavesKnee() {
		if t, ok := w.squareRoot(); ok {
			t.Theta = None()
			set("sqrt", t)
		}
	}
	if t, ok := w.curveThreshold(r); ok {
		set("curve", t)
	}
}

// resistiveThresholds are those of a channel that is a resistor.
func (w *work) resistiveThresholds(set func(string, Threshold)) {
	curve, ok := w.resistiveCurve()
	if !ok {
		return
	}
	if t, ok := w.tangent(curve); ok {
		t.Theta = None()
		set("linear", t)
	}
	if t, theta, ok := w.ratioMethod(curve); ok {
		t.Theta = theta
		set("ratio", t)
	}
}
