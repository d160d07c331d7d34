package fit

import "math"

// ReadOn is on which ranges of the meters the reading nearest to a current was
// taken, as an autoranging meter chooses them; the zero Accuracy: nothing stated.
type ReadOn struct {
	Gate       Accuracy
	Current    Accuracy // of the meter of the current, in A also where that is read across R_L
	Meter      string   // the meter of the current: "ammeter", "load meter", "drain meter"
	PerCurrent float64  // V, what the gate voltage changes by per unit of relative current
}

// readOn looks among the points from…to-1 for the reading nearest to current i.
func (w *work) readOn(from, to int, i, perCurrent float64) ReadOn {
	out := ReadOn{Meter: w.currentMeter(), PerCurrent: perCurrent}
	near := -1
	for j := max(0, from); j < min(to, len(w.pts)); j++ {
		if near < 0 || math.Abs(w.pts[j].i-i) < math.Abs(w.pts[near].i-i) {
			near = j
		}
	}
	if near < 0 {
		return out
	}
	p := &w.pts[near]
	out.Gate = rangeFor(w.s.Gate, p.vg)
	switch {
	case !w.onScaleOfLoad():
		out.Current = rangeFor(w.s.Current, p.i)
	case w.byDrain: // near V_DD whatever the current
	default:
		a := rangeFor(w.s.Load, p.i*w.s.RL)
		a.Top, a.Resolution, a.Noise = a.Top/w.s.RL, a.Resolution/w.s.RL, a.Noise/w.s.RL
		out.Current = a
	}
	return out
}

// Stated is the whole statement at a reading x, not yet divided: ± so much; NaN where
// there is none.
func (a Accuracy) Stated(x float64) float64 {
	if !a.stated() {
		return math.NaN()
	}
	return a.Percent/100*math.Abs(x) + a.Counts*a.Resolution
}
