package acquire

import (
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// Shown is what the screen shows of one meter.
type Shown struct {
	Value float64           // SI unit; NaN: never said a number
	Unit  string            // SI unit
	Digit float64           // one count, SI unit; NaN not known
	State record.PointState // of the last frame, when it was no number
	Why   string            // why the last frame does not count (held, relative ...); "" it does
	Age   float64           // s since the number came; +Inf never
	Stale bool              // older than two cycles or 0.5 s, or the last frame does not count
	Stuck bool              // its digits stand still although they cannot
}

// View is what a terminal or a page shows of a sweep.
type View struct {
	Instruction string  // one line: what to do now, or what is waited for
	Said        string  // the last line that was said
	Waiting     float64 // s that a fixed wait still lasts; NaN there is none
	Target      float64 // V, where the gate shall be, sign of the part; NaN not said
	Latest      map[string]Shown
	Points      []Point
	Returned    bool    // the last of Points is the return reading
	ID          float64 // A, magnitude now; NaN not fresh
	PD          float64 // W, on the safe side; NaN not known
	Shares      []Share // of the limits that are known
	Level       Level
	Warnings    []string
	Paused      string  // why nothing is taken; "" it runs
	Fix         string  // what [KeyFix] would put right; "" nothing
	Beep        Sound   // of the last call
	End         Ahead   // of a spot that settles: where it would end; shown only, NaN not known
	Slope       float64 // V/s, of a spot that settles; NaN otherwise
	Over        bool
	Complete    bool
	Why         string // why it is over
}

// View gives what is to be shown at that time.
func (r *Runner) View(at float64) View {
	now := math.Max(at, r.now)
	w := r.guard.Look()
	nan := math.NaN()
	v := View{Instruction: r.instruction(), Said: r.said, Waiting: nan, Target: nan, Latest: map[string]Shown{},
		Points: slices.Clone(r.points), Returned: r.back && r.plan.Mode != AtSpot, ID: r.idNow(), PD: w.PD, Shares: w.Shares, Level: w.Level,
		Warnings: slices.Clone(r.warnings), Paused: r.paused, Beep: r.beep,
		End: noAhead, Slope: nan, Over: r.phase == phOver, Complete: r.complete, Why: r.why}
	if s, ok := w.Worst(); ok && w.Level > Within {
		v.Warnings = append(v.Warnings, s.String())
	}
	if r.verdict.Text != "" {
		v.Warnings = append(v.Warnings, r.verdict.Text)
	}
	if r.verdict.Refuse {
		v.Fix, v.Paused = r.verdict.Key, r.verdict.Text
	}
	for _, role := range r.plan.Roles {
		o := r.ears.of(role)
		s := Shown{Value: o.value, Unit: unitOf(role), Digit: o.digit, State: o.state, Why: o.refused, Age: now - o.at,
			Stale: math.IsNaN(r.ears.number(role, now)), Stuck: r.ears.stuck(role)}
		if s.Stuck && (role != Current || r.currentStuck()) {
			v.Warnings = append(v.Warnings, fmt.Sprintf("the %s meter shows the same digits while another moves: is it on hold?", role))
		}
		v.Latest[role] = s
	}
	switch r.phase {
	case phClimb, phReturn:
		switch {
		case r.plan.driven():
			v.Target = r.sign * r.target
		case r.plan.Mode != AtSpot && r.plan.Mode != Free || r.phase == phReturn:
			v.Target = r.sign * r.goal
		}
		if s, ok := r.plan.Settle.Get(); ok && r.plan.Mode != AtSpot && r.plan.Mode != Free && !math.IsNaN(r.arrivedAt) {
			since := r.arrivedAt
			if r.plan.driven() {
				since = r.setAt
			}
			v.Waiting = math.Max(0, s-(now-since))
		}
	case phSoak:
		v.End, v.Slope = r.soak.end, r.soak.series.Slope()*r.sign
		if s, ok := r.plan.Settle.Get(); ok {
			v.Waiting = math.Max(0, s-(now-r.phaseAt))
		}
	}
	return v
}

// Points gives the points so far, the return reading last. The slice is the
// caller's.
func (r *Runner) Points() []Point { return slices.Clone(r.points) }

// Scale gives the factor that the readings of a role count by.
func (r *Runner) Scale(role string) float64 {
	if f, ok := r.prefix.scale[role]; ok {
		return f
	}
	return 1
}

func unitOf(role string) string {
	switch role {
	case Current:
		return "A"
	case Temperature:
		return "degC"
	}
	return "V"
}

// instruction is one line: what to do now, or what is waited for.
func (r *Runner) instruction() string {
	off := show(r.plan.Off(), "V")
	switch {
	case r.phase == phOver && r.plan.DrivesGate:
		if r.offGone {
			return "off"
		}
		return "wait until the drain current is gone"
	case r.phase == phOver && r.complete && r.atOff():
		return "done; the gate is at its off voltage"
	case r.phase == phOver && r.complete:
		return "done: turn the gate to " + off
	case r.phase == phOver:
		return "turn the gate back to " + off
	case r.paused != "" && r.phase > phPower:
		return "stop: turn the gate back: " + r.paused
	case r.paused != "":
		return r.paused
	case r.verdict.Refuse:
		return r.verdict.Text
	}
	switch r.phase {
	case phStart:
		if r.atOff() {
			return "wait until every meter has spoken"
		}
		if r.plan.driven() {
			return "the gate goes to its off voltage, " + off
		}
		return "turn the gate to its off voltage, " + off
	case phPower:
		if r.plan.DrivesDrain {
			return "the drain supply is switched on"
		}
		return "switch the drain supply on"
	case phClimb:
		return r.climbing()
	case phSoak:
		return r.settling()
	case phReturn:
		if r.plan.driven() {
			return "back at " + show(r.sign*r.target, "V") + " for the return reading"
		}
		return "turn back to " + show(r.sign*r.goal, "V") + " and stand still"
	}
	return "the gate goes to its off voltage, the current dies away"
}

func (r *Runner) climbing() string {
	more := "up"
	if r.sign < 0 {
		more = "more negative"
	}
	switch {
	case r.plan.Mode == AtSpot:
		at, ok := r.plan.At.Get()
		switch {
		case !ok:
			return "switch the supply on"
		case r.plan.driven():
			return "the gate goes to where it draws " + show(at, "A")
		case r.idNow() > at*(1+r.plan.AtWithin):
			return fmt.Sprintf("turn back until the current is %s; it is %s", show(at, "A"), show(r.idNow(), "A"))
		}
		return fmt.Sprintf("turn the gate slowly %s until the current is %s; it is %s", more, show(at, "A"), show(r.idNow(), "A"))
	case r.plan.driven():
		return "at " + show(r.sign*r.target, "V") + ", waiting until it has settled"
	case r.plan.Mode == Free:
		if end := r.lastCurrent(); !math.IsInf(end, 1) {
			return fmt.Sprintf("turn the gate slowly %s, to about %s", more, show(end, "A"))
		}
		return "turn the gate slowly " + more
	case math.IsNaN(r.goal) && r.cued:
		return "stand still until the point is taken"
	case math.IsNaN(r.goal):
		return fmt.Sprintf("turn the gate slowly %s until current shows (%s), then stand still", more, show(r.floor(), "A"))
	case math.Abs(r.sign*r.ears.number(Gate, r.now)-r.goal) <= math.Min(r.window, 0.004):
		return "stand still at " + show(r.sign*r.goal, "V")
	}
	return "turn to " + show(r.sign*r.goal, "V")
}

func (r *Runner) settling() string {
	at, has := r.plan.At.Get()
	if id := r.idNow(); has && !r.plan.driven() && math.Abs(id-at) > 1.5*r.within(at) {
		return fmt.Sprintf("bring the current back to %s; it is %s", show(at, "A"), show(id, "A"))
	}
	if s, ok := r.plan.Settle.Get(); ok && !r.ripe {
		return fmt.Sprintf("wait %.0f s", math.Ceil(math.Max(0, s-(r.now-r.phaseAt))))
	}
	if e := r.soak.end; !math.IsNaN(e.Value) {
		return fmt.Sprintf("wait until it has settled; it seems to end at %s ± %s", show(e.Value, "V"), show(e.U, "V"))
	}
	return "wait until it has settled"
}

// Replay brings the runner to where a sweep stood, from the readings that were
// kept of it, in the order of their arrival. Limits and silences of that time are
// not acted upon and nothing is ordered. Keys were no readings: points taken back
// then come back, and a scale that was set then must be in the plan. A driven gate
// is taken to be at its off voltage again, and is led back up by the next calls.
func (r *Runner) Replay(readings []record.Reading) {
	r.replaying = true
	for _, rd := range readings {
		if r.begun && rd.At > r.now {
			// As the clock would have: no step may be missed for want of a tick.
			for t := r.now + 0.1; t < rd.At && t < r.now+2; t += 0.1 {
				r.Tick(t)
			}
		}
		r.Event(Event{At: rd.At, Meter: rd.Meter, Role: rd.Role, Readings: []record.Reading{rd}})
	}
	r.out, r.replaying, r.level = nil, false, Within
	points, targets, curve, seen := r.points, r.targets, r.curve, r.seen
	over, complete, why, back := r.phase >= phEnd, r.complete, r.why, r.back
	scale := r.prefix
	*r = Runner{plan: r.plan, sign: r.sign, lostLines: map[string]bool{}, prefix: scale, now: r.now,
		ears: newEars(r.plan.Cycle, r.plan.Silent), guard: NewGuard(r.plan.Limits, r.plan.Circuit, r.plan.Overloads)}
	r.reset()
	r.points, r.targets, r.curve, r.seen = points, targets, curve, seen
	if over || back {
		r.phase, r.complete, r.why, r.back = phOver, complete, why, back
	}
}
