package fit

import (
	"math"
	"slices"
)

const (
	// wildScatter is the scatter of the points, V at the gate, from which it is no
	// meter's and no hand's; wildRatio how many times what is known of the meters it
	// must be, and wildShare the scatter of the current that it must amount to
	// (judgements: handhelds scatter by half a millivolt and a tenth of a percent).
	wildScatter = 6e-3
	wildRatio   = 5
	wildShare   = 0.03
	// wildLeast is the fewest places of strong inversion that tell of it.
	wildLeast = 6
	// leastAtOneGate is the fewest points at one gate voltage with unlike currents.
	leastAtOneGate = 3
	// heldGate is how well a gate voltage is held while the meters are read, V, as
	// far as nothing else is known (judgement).
	heldGate = 1.5e-3
)

// oscillates warns where the readings behave as those of a part that oscillates:
// the current jumps at constant gate voltage; points scatter about a smooth curve
// by far more than meters do; or many points contradict a rising curve without a
// sign of a leftover reading. It reports whether the last is so much so that the
// rest cannot be trusted either. A loose contact looks the same.
func (w *work) oscillates() (hopeless bool) {
	all := w.odd
	for j := range w.pts {
		if w.pts[j].i > w.tiny && w.pts[j].above() {
			all++
		}
	}
	switch {
	case w.jumps != "":
		w.warn(CodeOscillation, w.jumps)
	case w.odd >= 3 && 5*w.odd >= all:
		w.warn(CodeOscillation, count(w.odd, "point contradicts", "points contradict")+" a rising curve, as with a part that oscillates.")
	default:
		if s, times, ok := w.wild(); ok {
			text := "The points scatter by " + si(s, "V") + " about a smooth curve"
			if !math.IsInf(times, 0) {
				text += ", " + number(times) + " times what the meters explain"
			}
			w.warn(CodeOscillation, text+": the part oscillates, a contact is loose, or readings were taken before they stood still.")
		}
	}
	// What is left must hold together.
	return w.odd >= 3 && 5*w.odd > 2*all || w.unsettled >= 3 && 4*w.unsettled > len(w.pts)
}

// wild is the scatter of single points about the curve, V, where that is far more
// than the meters' own, and how many times it is. Knee and plateau are left out,
// for a coarse grid cannot follow them, and the median of the rest does not mind a
// single corner or bad point.
func (w *work) wild() (s, times float64, ok bool) {
	n := len(w.pts)
	var r []float64
	known, share, top := 0.0, 0.0, 0.0
	for j := range w.pts {
		top = math.Max(top, w.pts[j].i)
	}
	for j := 2; j+2 < n; j++ {
		a, b := &w.pts[j-2], &w.pts[j+2]
		if !a.above() || a.i < 5*w.base || !(b.i > 1.2*a.i) || 2*(b.vg-a.vg) < knee*(b.ln-a.ln) {
			continue
		}
		if w.s.Circuit == Load && !w.lightlyLoaded(b, top) {
			break
		}
		v, k, ok := w.residual(j)
		if !ok {
			continue
		}
		r = append(r, v)
		known += k
		share += (b.ln - a.ln) / (b.vg - a.vg)
	}
	if len(r) < wildLeast {
		return 0, 0, false
	}
	known, share = math.Sqrt(known/float64(len(r))), share/float64(len(r))
	s = math.Sqrt(median(r)) / 0.6745
	if w.gateDigits() > 0 {
		known = math.Max(known, w.grid/math.Sqrt(12))
	}
	return s, s / known, s > wildScatter && s > wildRatio*known && s*share > wildShare
}

// findJumps looks for currents that jump at constant gate voltage: points whose
// gate readings agree within their step, and whose currents differ by far more than
// that step and the meters explain. Readings that are ten times off, or repeat the
// one before, are leftovers and not looked at. Equal gate voltages whose currents
// rise with time as the curve does are a gate reading that stood still.
func (w *work) findJumps() {
	held := math.Max(w.grid*1.01, heldGate)
	points, where := 0, []float64{}
	lowest, highest := 0.0, 0.0
	n := len(w.pts)
	for j := 0; j < n; {
		e := j + 1
		for e < n && w.pts[e].vg-w.pts[e-1].vg <= held && w.pts[e].vg-w.pts[j].vg <= 3*held {
			e++
		}
		if e-j < 2 || w.pts[e-1].i < w.tiny || j == 0 && e == n {
			j = e
			continue
		}
		slope := w.slopeAround(j, e)
		lo, hi, m := math.Inf(1), math.Inf(-1), 0
		for k := j; k < e; k++ {
			if p := &w.pts[k]; !w.leftover(p) {
				lo, hi, m = math.Min(lo, p.i), math.Max(hi, p.i), m+1
			}
		}
		if m >= 2 && lo > 0 && math.Log(hi/lo) > math.Max(0.05, slope*(3*held+w.pts[e-1].vg-w.pts[j].vg)) && hi-lo > 10*w.pts[j].room+10*w.pts[j].q {
			points += m
			where = append(where, w.gate*w.pts[j].vg)
			if hi-lo > highest-lowest {
				lowest, highest = lo, hi
			}
		}
		j = e
	}
	if points >= leastAtOneGate {
		w.jumps = "At " + places(where) + " the current jumps at constant gate voltage, at most between " + amps(lowest) + " and " + amps(highest) + ", as with a part that oscillates."
	}
}

// slopeAround is d ln I/dV from the point before j to the point at e, 1/V: the
// greater of the two sides where one is missing; that of an ideal exponential
// where it cannot be told.
func (w *work) slopeAround(j, e int) float64 {
	a, b := j-1, e
	if a < 0 {
		a = j
	}
	if b >= len(w.pts) {
		b = len(w.pts) - 1
	}
	if s := w.logSlope(a, b); s > 0 {
		return s
	}
	return 1 / thermalVoltage
}

// stoodStill reports whether the points j…e-1 of one gate voltage were taken while
// the gate moved and its reading did not: their currents follow one another in time
// as they do in size, and continue the curve on both sides.
func (w *work) stoodStill(j, e int) bool {
	p := w.pts[j:e] // ascending by current
	up := slices.IsSortedFunc(p, func(a, b point) int { return a.k - b.k })
	down := slices.IsSortedFunc(p, func(a, b point) int { return b.k - a.k })
	if !up && !down {
		return false
	}
	const noise = 1.1
	return (j == 0 || w.pts[j-1].i <= noise*p[0].i) && (e == len(w.pts) || p[len(p)-1].i <= noise*w.pts[e].i)
}
