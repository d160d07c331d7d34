package acquire

import "math"

// Hand is what the operator's hand does at the knob, for a rehearsal: where it
// turns to, and how fast.
type Hand struct {
	To   float64 // V, sign of the part; NaN: it leaves the knob where it is
	Rate float64 // V/s
}

// How fast a hand turns, V/s.
const (
	handBack  = 1    // to the off voltage
	handTurn  = 0.25 // to a voltage that was said
	handCreep = 0.08 // with an eye on the current
	handCrawl = 0.01 // while points are taken on the move, or a current is trimmed
)

// Hand gives what the operator is asked to do with the knob now. A driven gate has
// no knob.
func (r *Runner) Hand() Hand {
	off := Hand{r.plan.Off(), handBack}
	switch {
	case r.plan.driven():
		return stay
	case r.paused != "" && r.phase > phPower, r.phase == phStart, r.phase >= phEnd:
		return off
	case r.verdict.Refuse, r.phase == phPower:
		return stay
	case r.plan.Mode == AtSpot:
		return r.trimming()
	case r.phase == phReturn:
		return Hand{r.sign * r.goal, handTurn}
	case r.plan.Mode == Free && r.idNow() >= r.floor():
		return Hand{r.upmost(), handCrawl}
	case r.plan.Mode == Free:
		return Hand{r.upmost(), handCreep}
	case !math.IsNaN(r.goal):
		return Hand{r.sign * r.goal, handTurn}
	case r.cued || r.idNow() >= r.floor():
		return stay
	}
	return Hand{r.upmost(), handCreep}
}

var stay = Hand{To: math.NaN()}

// upmost is as far as the gate may be turned, V.
func (r *Runner) upmost() float64 {
	return r.sign * math.Min(r.end(), r.sign*r.plan.Off()+20)
}

// trimming brings the current of a spot to where it shall be, and keeps it there.
func (r *Runner) trimming() Hand {
	at := r.plan.At.Float()
	id, within := r.idNow(), r.plan.AtWithin*at/2
	switch {
	case !(at > 0) || math.IsNaN(id):
		return stay
	case id > at+within:
		return Hand{r.plan.Off(), handCrawl}
	case id > at-within:
		return stay
	case id > at/5:
		return Hand{r.upmost(), handCrawl}
	}
	return Hand{r.upmost(), handCreep}
}
