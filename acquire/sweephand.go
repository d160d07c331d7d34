package acquire

import "math"

// Hand is what the operator's hand does at the knob, for a rehearsal: where it
// turns to, and how fast.
type Hand struct {
	To    float64 // V, sign of the part; NaN: it leaves the knob where it is
	Creep bool    // slowly, with an eye on the current
}

// Hand gives what the operator is asked to do with the knob now. A driven gate has
// no knob.
func (r *Runner) Hand() Hand {
	stay := Hand{To: math.NaN()}
	off := Hand{To: r.plan.Off()}
	up := Hand{To: r.sign * math.Min(r.end(), r.target+r.sign*r.plan.Off()+20), Creep: true}
	if r.plan.driven() {
		return stay
	}
	if r.paused != "" && r.phase > phPower {
		return off
	}
	at := r.plan.At.Float()
	within := r.plan.AtWithin * at
	switch r.phase {
	case phStart, phEnd, phOver:
		return off
	case phClimb:
		switch {
		case r.plan.Mode == AtSpot && !(at > 0), r.verdict.Refuse:
			return stay
		case r.plan.Mode == AtSpot && r.idNow() > at+within:
			return Hand{To: r.plan.Off(), Creep: true}
		case r.plan.Mode == AtSpot && r.idNow() > at-within:
			return stay
		case r.plan.Mode == AtSpot, r.plan.Mode == Free:
			return up
		case math.IsNaN(r.goal) && (r.cued || r.idNow() >= r.floor()):
			return stay
		case math.IsNaN(r.goal):
			return up
		}
		return Hand{To: r.sign * r.goal}
	case phReturn:
		return Hand{To: r.sign * r.goal}
	}
	return stay
}
