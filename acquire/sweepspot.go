package acquire

import (
	"fmt"
	"math"
)

// noAhead is an end value that cannot be told.
var noAhead = Ahead{Value: math.NaN(), U: math.NaN(), Tau: math.NaN()}

// soak is how a spot settles.
type soak struct {
	series *Settling
	heard  float64 // s, of the last gate reading in it
	latest *Point  // the last plateau
	end    Ahead
	endAt  float64
	in     int // readings in a row near the current, on the way there
	told   bool
}

// bring begins the way to the current of a spot.
func (r *Runner) bring() {
	r.goal, r.passing = math.NaN(), false
	r.setAt, r.arrivedAt = r.now, math.NaN()
	r.ears.mark()
	if !r.plan.driven() {
		r.say("%s", r.instruction())
		return
	}
	r.target = r.sign * r.plan.Off()
	r.arrivedAt = r.now
}

// bringing brings the device to the current of the spot, or sees it brought there.
func (r *Runner) bringing() {
	at, ok := r.plan.At.Get()
	u, id := r.sign*r.ears.number(Gate, r.now), r.idNow()
	if math.IsNaN(u) {
		return
	}
	if !ok { // the circuit sets the current
		if u > 0.1 {
			r.settle()
		}
		return
	}
	if math.IsNaN(id) {
		return
	}
	within := r.within(at)
	if !r.plan.driven() {
		r.trace(u)
		if math.Abs(id-at) > within {
			r.soak.in = 0
			return
		}
		if r.ears.of(Gate).count > 0 { // one look for each gate reading
			r.ears.mark()
			r.soak.in++
		}
		if r.soak.in >= 2 {
			r.settle()
		}
		return
	}
	r.arrival()
	if !r.walked() {
		return
	}
	p := r.latest()
	r.curve = append(r.curve, p)
	r.seen = r.seen || id >= r.floor()
	switch {
	case math.Abs(id-at) <= within:
		r.settle()
	case id > at:
		r.setGate(r.target - r.trim(id-at))
	default:
		far := approach
		if r.seen {
			far = coarse
		}
		if u >= r.end()-0.001 {
			r.nearLimit("V_GS")
			return
		}
		step, _ := r.reach(math.Min(far, r.end()-u), at)
		if step = whole(step, 0.001); step < 0.001 {
			var why string
			if step, why = r.reach(0.001, math.Inf(1)); step < 0.001-1e-9 {
				r.nearLimit(why)
				return
			}
		}
		r.setGate(r.target + step)
	}
}

// trace keeps what is read on the way to the current, for the slope.
func (r *Runner) trace(u float64) {
	if n := len(r.curve); n == 0 || u-r.sign*r.curve[n-1].Vg >= 0.003 { // on the way up
		r.curve = append(r.curve, r.latest())
		if len(r.curve) > 400 {
			r.curve = r.curve[200:]
		}
	}
}

// slopeAt is dI_D/dV_GS at the current of the spot (A/V): a straight line of sqrt I_D
// through what was read on the way there, from 0.4 of the current on, so that
// readings which do not belong to one instant shift the line but hardly tilt it.
// NaN not known.
func (r *Runner) slopeAt() float64 {
	at := r.plan.At.Float()
	var n, su, sy, suu, suy float64
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, p := range r.curve {
		u, i := r.sign*p.Vg, r.idOf(p)
		if !(i >= 0.4*at && i <= 1.1*at) || math.IsNaN(u) {
			continue
		}
		y := math.Sqrt(i)
		n, su, sy, suu, suy = n+1, su+u, sy+y, suu+u*u, suy+u*y
		lo, hi = math.Min(lo, u), math.Max(hi, u)
	}
	if n < 2 || hi-lo < 0.01 {
		return math.NaN()
	}
	if b := (n*suy - su*sy) / (n*suu - su*su); b > 0 {
		return 2 * b * math.Sqrt(at)
	}
	return math.NaN()
}

// within is how far the current may be from that of the spot, A: a supply that goes
// in steps of 1 mV comes no nearer than half of one.
func (r *Runner) within(at float64) float64 {
	w := r.plan.AtWithin * at
	if g := r.slopeAt(); r.plan.driven() && g > 0 {
		w = math.Max(w, 0.0006*g)
	}
	return w
}

// trim is the way (V) that changes the current by di (A): half of a
// subthreshold decade at most, 20 mV, and 1 mV at least.
func (r *Runner) trim(di float64) float64 {
	g := r.slopeAt()
	d := 0.002
	if g > 0 {
		d = math.Abs(di) / g
	}
	return math.Min(math.Max(math.Round(d*1000)/1000, 0.001), 0.02)
}

// settle begins the wait at the current.
func (r *Runner) settle() {
	r.enter(phSoak)
	gate := r.ears.of(Gate)
	rule := Settle{After: r.plan.Settle}
	if gate.digit > 0 {
		rule.Digit = gate.digit
	}
	r.soak = soak{series: rule.Start(r.now), heard: gate.at, end: noAhead}
	r.ripe, r.arrivedAt = false, r.now
	r.fresh()
	if !r.plan.driven() {
		r.say("%s", r.instruction())
		r.sound(SoundAttention)
	}
	if r.soak.series.Blind() {
		r.warn(fmt.Sprintf("one count of the gate meter, %s, is more than the drift that counts as settled: that it stands still says little, a fixed wait says more", show(gate.digit, "V")))
	}
}

// soaking waits until the gate voltage at the current stands, or until the fixed
// wait is over.
func (r *Runner) soaking(points []Point) {
	s := &r.soak
	if r.plan.driven() {
		r.arrival()
	}
	at, has := r.plan.At.Get()
	id := r.idNow()
	if v := r.ears.of(Gate); v.at > s.heard && v.number {
		s.heard = v.at
		u := r.sign * v.value
		if g := r.slopeAt(); has && g > 0 && !math.IsNaN(id) {
			// What the current is off by is in the gate voltage too.
			u -= math.Max(-0.02, math.Min(0.02, (id-at)/g))
		}
		s.series.Add(v.at, u)
		if v.at >= s.endAt+1 {
			s.endAt, s.end = v.at, noAhead
			if a, ok := s.series.Ahead(); ok && a.U < 0.010 {
				a.Value *= r.sign
				s.end = a
			}
		}
	}
	for _, p := range points {
		if p.Settled {
			s.latest = &p
			r.fresh()
		}
	}
	if has && !math.IsNaN(id) && math.Abs(id-at) > r.within(at) && !r.retrim(id, at) {
		return
	}
	if !r.plan.Settle.IsKnown() {
		r.ripe = s.series.Settled(r.now)
	}
	if s.latest == nil || !r.ripe && !r.wanted || !r.all() {
		return
	}
	if i := r.idOf(*s.latest); has && math.Abs(i-at) > 1.5*r.within(at) {
		s.latest = nil
		return
	}
	p := *s.latest
	r.points, r.targets = append(r.points, p), append(r.targets, r.target)
	slope := r.slopeAt()
	if !(slope > 0) {
		slope = 0
	}
	r.emit(Taken{Point: p, Early: !r.ripe, Slope: slope})
	r.sound(SoundAccept)
	r.why, r.complete = "the gate voltage has settled", true
	switch {
	case r.plan.Settle.IsKnown() && r.ripe:
		r.why = "the wait is over"
	case !r.ripe:
		r.why = "taken before it had settled"
	}
	r.back = true
	r.wind()
}

// retrim brings the current back where a supply can; it reports whether the
// present current may still be used.
func (r *Runner) retrim(id, at float64) bool {
	s := &r.soak
	if !r.plan.driven() {
		if math.Abs(id-at) <= 1.5*r.within(at) {
			return true
		}
		if !s.told {
			s.told = true
			r.say("%s", r.instruction())
			r.sound(SoundAttention)
		}
		s.latest = nil
		return false
	}
	if !r.walked() {
		return true
	}
	d := r.trim(id - at)
	if id > at {
		d = -d
	} else if got, why := r.reach(d, math.Inf(1)); got < d-1e-9 {
		r.nearLimit(why)
		return false
	}
	s.latest = nil
	r.setGate(r.target + d)
	return true
}
