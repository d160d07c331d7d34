package acquire

import (
	"fmt"
	"math"
)

// head sets where the next point is wanted (V in the direction that turns on, NaN
// by hand: where current shows) and goes there, or says so.
func (r *Runner) head(goal float64) {
	r.goal, r.passing, r.wanted = goal, false, false
	if r.plan.driven() {
		r.move()
		return
	}
	r.setAt, r.arrivedAt, r.ripe = r.now, math.NaN(), false
	r.ears.mark()
	r.fresh()
	r.say("%s", r.instruction())
}

// move goes towards the goal as far as the prediction allows: downwards at once,
// upwards in steps.
func (r *Runner) move() {
	far := r.goal - r.target
	if far <= 0 {
		r.passing = false
		r.setGate(r.goal)
		return
	}
	step, why := r.reach(math.Min(far, approach), math.Inf(1))
	if r.passing = step < far-1e-9; r.passing {
		step = whole(step, 0.001)
	} else {
		step = far
	}
	if step < math.Min(r.plan.MinStep, far)-1e-9 {
		r.nearLimit(why)
		return
	}
	r.setGate(r.target + step)
}

// whole rounds x down to a multiple of unit.
func whole(x, unit float64) float64 { return unit * math.Floor(x/unit+1e-6) }

// nearLimit ends the way up because no step is small enough.
func (r *Runner) nearLimit(limit string) {
	why := fmt.Sprintf("the next step would pass %.0f %% of the limit of %s", 100*stepShare, limit)
	if limit == "V_GS" {
		why = "the greatest gate voltage is reached"
	}
	if limit == "" {
		why = "no step is small enough"
	}
	r.turn(why, !r.plan.To.IsKnown() && len(r.points) > 0)
}

// arrival notices since when the gate is where it is wanted.
func (r *Runner) arrival() {
	u := r.sign * r.ears.number(Gate, r.now)
	var near bool
	switch {
	case r.plan.driven():
		near = math.Abs(u-r.target) <= math.Max(0.02, 0.01*math.Abs(r.target))
	case math.IsNaN(r.goal):
		near = r.idNow() >= r.floor()
	case r.phase == phReturn:
		near = u <= r.goal+r.window
	default:
		near = u >= r.goal-r.window
	}
	switch {
	case !near && !math.IsNaN(u):
		r.arrivedAt, r.ripe = math.NaN(), false
	case near && math.IsNaN(r.arrivedAt):
		r.arrivedAt = r.ears.of(Gate).at
	}
}

// ripen ends the fixed wait, if there is one and its time has come, and begins to
// look for a plateau then.
func (r *Runner) ripen() {
	settle, fixed := r.plan.Settle.Get()
	if !fixed || r.ripe || r.phase != phClimb && r.phase != phReturn && r.phase != phSoak {
		return
	}
	since := r.arrivedAt
	if r.plan.driven() && !math.IsNaN(since) {
		since = r.setAt // the moment is known better than by its meter
	}
	over := r.now-since >= settle // false while it has not arrived
	if r.phase == phSoak {
		over = r.soak.series.Settled(r.now) // from reaching the current, for every part alike
	}
	if over {
		r.ripe, r.soak.latest = true, nil
		r.fresh()
	}
}

// waited reports whether no fixed wait lasts.
func (r *Runner) waited() bool { return r.ripe || !r.plan.Settle.IsKnown() }

// walked reports whether, after the gate was sent on, every meter has said a number
// that belongs to its new place.
func (r *Runner) walked() bool {
	if math.IsNaN(r.arrivedAt) || r.now-r.setAt < 0.2 || !r.all() {
		return false
	}
	for _, role := range r.plan.Roles {
		if v := r.ears.of(role); role != Temperature && (v.count < 2 || !v.number) {
			return false
		}
	}
	return true
}

// climb looks whether the way up can go on.
func (r *Runner) climb(points []Point) {
	switch {
	case r.plan.Mode == AtSpot:
		r.bringing()
		return
	case r.plan.Mode == Free:
		r.follow(points)
		return
	}
	r.arrival()
	if r.plan.driven() {
		if math.IsNaN(r.arrivedAt) {
			return
		}
		if r.regain && !r.passing {
			if r.walked() {
				r.regain = false
				r.next()
			}
			return
		}
		shows := r.idNow() >= r.floor()
		if r.passing && (r.seen || !shows) || !r.passing && r.walks() && !shows {
			if !r.walked() {
				return
			}
			if r.passing {
				r.move()
			} else {
				r.next()
			}
			return
		}
	} else if math.IsNaN(r.goal) && !r.cued && r.idNow() >= r.floor() {
		r.cued = true
		r.say("current shows: stand still until the point is taken")
		r.sound(SoundAttention)
	}
	if !r.waited() {
		return
	}
	for _, p := range points {
		if r.consider(p) {
			return
		}
	}
}

// walks reports whether a driven sweep passes places without waiting for a point:
// above its first one, until current shows.
func (r *Runner) walks() bool {
	return !r.seen && !r.plan.Step.IsKnown() && len(r.points) > 0
}

// consider takes a plateau when it is where one is wanted.
func (r *Runner) consider(p Point) bool {
	u := r.sign * p.Vg
	if !p.Settled || math.IsNaN(u) || math.IsNaN(r.idOf(p)) || !r.all() {
		if p.Settled && !r.plan.driven() {
			r.fresh() // a plateau comes once only: look again
		}
		return false
	}
	var near bool
	switch {
	case r.wanted:
		near = true
	case r.plan.driven():
		near = p.At >= r.setAt && math.Abs(u-r.target) <= math.Max(0.02, 0.01*math.Abs(r.target))
	case math.IsNaN(r.goal):
		near = r.idOf(p) >= r.floor() || u >= r.end()-0.025
	default:
		near = u >= r.goal-r.window
	}
	if !near {
		r.offered = &p
		return false
	}
	r.take(p)
	return true
}

// take makes p a point of the sweep and goes on.
func (r *Runner) take(p Point) {
	if !r.plan.driven() {
		r.target = r.sign * p.Vg
	}
	r.keep(p)
	r.emit(Taken{Point: p})
	if !r.plan.driven() {
		r.sound(SoundAccept)
	}
	r.next()
}

func (r *Runner) keep(p Point) {
	r.points = append(r.points, p)
	r.targets = append(r.targets, r.target)
	r.curve = append(r.curve, p)
	r.seen = r.seen || r.idOf(p) >= r.floor()
}

// end is the gate voltage (V in the direction that turns on) at which the way up
// ends at the latest; +Inf not known.
func (r *Runner) end() float64 {
	if to, ok := r.plan.To.Get(); ok {
		return r.sign * to
	}
	if m := r.plan.Limits.Vgs; m > 0 {
		return gateShare * m
	}
	return math.Inf(1)
}

// lastCurrent is the drain current (A) at which the way up has gone far enough;
// +Inf not known.
func (r *Runner) lastCurrent() float64 {
	i := math.Inf(1)
	if r.plan.To.IsKnown() {
		return i
	}
	if idle, ok := r.plan.Idle.Get(); ok {
		i = beyond * math.Abs(idle)
	}
	if m := r.plan.Limits.ID; m > 0 {
		i = math.Min(i, stepShare*m)
	}
	if m, vds := r.plan.Limits.PD, r.guard.open(); m > 0 && vds > 0 && !(r.guard.mostPower() <= stepShare*m) {
		i = math.Min(i, stepShare*m/vds)
	}
	return i
}

// far says whether the way up has gone far enough at a current, and why.
func (r *Runner) far(u, id float64) (why string, ok bool) {
	switch {
	case u >= r.end()-1e-6 && r.plan.To.IsKnown():
		return "the end of the sweep", true
	case u >= r.end()-1e-6:
		return "the greatest gate voltage is reached", true
	case !r.plan.To.IsKnown() && id >= ohmic*r.guard.most():
		return "the load resistor sets the current", true
	case id >= r.lastCurrent()*0.98:
		if idle, known := r.plan.Idle.Get(); known && id >= beyond*math.Abs(idle)*0.98 {
			return fmt.Sprintf("the idle current is passed by %.0f %%", 100*(beyond-1)), true
		}
		return "as near to the limits as a sweep goes", true
	}
	return "", false
}

// next chooses where the next point is wanted.
func (r *Runner) next() {
	u, id := r.target, r.idNow()
	if n := len(r.points); n > 0 && r.targets[n-1] == r.target {
		id = r.idOf(r.points[n-1])
	}
	at := u
	if !r.passing && !math.IsNaN(r.goal) {
		at = math.Max(at, r.goal)
	}
	if why, ok := r.far(at, id); ok {
		r.turn(why, true)
		return
	}
	hand := !r.plan.driven()
	given, stepped := r.plan.Step.Get()
	if hand && !stepped && !r.seen {
		r.cued = false
		r.head(math.NaN())
		return
	}
	far, soft, unit := coarse, math.Inf(1), 0.001
	if hand {
		unit = 0.005
	}
	if stepped {
		// The next place of the grid that is not where the gate stands already.
		from := r.sign * r.plan.From.Or(r.plan.Off())
		far = from + given*math.Ceil((u-from)/given+0.25) - u
		unit = 0.0001
	} else if r.seen {
		base := math.Max(id, r.floor())
		soft = 2 * base
		if hand {
			soft = 3 * base // a point by hand costs more
		}
		if last := r.lastCurrent(); !math.IsInf(last, 1) {
			soft = math.Min(soft, base+last/float64(r.plan.Points))
		} else if base > 0.01 {
			soft = 1.25 * base
		}
	}
	far = math.Min(far, r.end()-u)
	step, why := r.reach(far, soft)
	if step < far-1e-9 || hand && !stepped {
		// Round the place, not the way: 3.150 V is easier to turn to than 3.147 V.
		if rounded := whole(u+step, unit) - u; rounded >= r.plan.MinStep {
			step = rounded
		} else {
			step = whole(step, 0.001)
		}
	}
	if step < math.Min(r.plan.MinStep, far)-1e-9 {
		step = math.Min(r.plan.MinStep, far)
		if got, limit := r.reach(step, math.Inf(1)); got < step-1e-9 {
			if why == "" {
				why = limit
			}
			r.nearLimit(why)
			return
		}
	}
	r.window = step / 2
	if w := r.plan.Window; w > 0 {
		r.window = math.Min(w, step/2)
	}
	r.head(u + step)
}

// follow takes what comes while the operator turns as he likes.
func (r *Runner) follow(points []Point) {
	top := math.Inf(-1)
	for _, p := range r.points {
		top = math.Max(top, r.sign*p.Vg)
	}
	took := false
	for _, p := range points {
		u, id := r.sign*p.Vg, r.idOf(p)
		apart := 0.002
		if id < r.floor() {
			apart = 0.02
		}
		if math.IsNaN(u) || math.IsNaN(id) || !p.Settled && u < top+apart {
			continue
		}
		r.target = u
		r.keep(p)
		r.emit(Taken{Point: p})
		top, took = math.Max(top, u), true
		if p.Settled {
			r.sound(SoundAccept)
		}
	}
	now := r.sign * r.ears.number(Gate, r.now)
	if took {
		if why, ok := r.far(r.target, r.idOf(r.points[len(r.points)-1])); ok {
			r.turn(why, true)
			return
		}
	} else if r.slowAt == 0 && r.idNow() >= r.floor() {
		r.slowAt = r.now // points come late, the first ones above all
	} else if r.slowAt > 0 && now > top+0.1 && r.now > r.slowAt+5 {
		r.slowAt = r.now
		r.say("turn slower: nothing can be taken at this rate")
		r.sound(SoundAttention)
	}
	// What moves too fast for points must still be called to its end.
	if why, ok := r.far(now-0.025, r.idNow()/1.1); ok {
		r.turn(why, len(r.points) > 0)
	}
}

// turn ends the way up: back to a low-power point, which is taken again, for what
// it says of heating, drift and damage.
func (r *Runner) turn(why string, complete bool) {
	r.why, r.complete = why, complete
	i, ok := r.lowPower()
	if !ok || r.plan.NoReturn {
		r.wind()
		return
	}
	r.enter(phReturn)
	r.window = 0.010
	if !r.plan.driven() {
		r.say("enough: %s", why)
		r.sound(SoundAttention)
	}
	goal := r.targets[i]
	r.head(goal)
}

// lowPower chooses the point that is taken again: the first one that shows ten
// times the smallest current that counts, at most a fifth of the greatest power; else the
// first that shows any.
func (r *Runner) lowPower() (int, bool) {
	first, most := -1, 0.0
	for _, p := range r.points {
		most = math.Max(most, r.idOf(p))
	}
	for i, p := range r.points {
		id := r.idOf(p)
		if first < 0 && id >= r.floor() && id < most {
			first = i
		}
		if id >= 10*r.floor() && id <= most/5 {
			return i, true
		}
	}
	return first, first >= 0
}

// returning waits for the return reading.
func (r *Runner) returning(points []Point) {
	r.arrival()
	if math.IsNaN(r.arrivedAt) && !r.wanted || !r.waited() {
		return
	}
	for _, p := range points {
		u := r.sign * p.Vg
		near := math.Abs(u-r.goal) <= r.window || u < r.goal && r.idOf(p) >= r.floor()
		if r.plan.driven() {
			near = p.At >= r.setAt && math.Abs(u-r.target) <= math.Max(0.02, 0.01*math.Abs(r.target))
		}
		if !p.Settled || math.IsNaN(r.idOf(p)) || !near && !r.wanted {
			continue
		}
		r.back = true
		r.points = append(r.points, p)
		r.targets = append(r.targets, r.goal)
		r.emit(Taken{Point: p, Return: true})
		r.sound(SoundAccept)
		r.wind()
		return
	}
}

// wind ends the sweep in order: off, and seen to be off where the program can.
func (r *Runner) wind() {
	if !r.plan.drives() {
		if !r.back {
			r.sound(SoundAccept)
		}
		r.finish(Done{Why: r.why, Complete: r.complete})
		return
	}
	r.enter(phEnd)
	if r.plan.DrivesDrain {
		r.emit(SwitchDrain{On: false})
		r.drainOn = false
	}
	if r.plan.DrivesGate {
		r.setGate(r.sign * r.plan.Off())
	}
}
