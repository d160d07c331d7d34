package acquire

import (
	"fmt"
	"math"
)

// Key tells which key the operator pressed.
func (r *Runner) Key(k Key, at float64) []Order {
	r.clock(at)
	r.beep = SoundNone
	switch k.Name {
	case KeyStop:
		r.stopKey()
	case KeySkip:
		r.skipKey(k.Reason)
	case KeyAccept:
		r.acceptKey()
	case KeyFinish:
		r.finishKey()
	case KeyRepeat:
		r.repeatKey()
	case KeyUndo:
		r.undoKey()
	case KeyFix:
		r.fixKey()
	default:
		r.say("no key %q", k.Name)
	}
	return r.give()
}

func (r *Runner) stopKey() {
	if r.phase == phOver {
		if r.plan.drives() { // whoever presses stop wants it off, whatever was said before
			r.emit(Off{Reason: "stopped by the operator", CurrentGone: r.gone(r.now - 1)})
		}
		return
	}
	r.stop("stop", "stopped by the operator")
}

func (r *Runner) skipKey(reason string) {
	switch {
	case r.phase == phOver:
		r.say("the sweep is over already")
	case reason == "":
		r.say("say why this device is skipped")
	default:
		r.emit(Noted{"skip", reason})
		if !r.plan.DrivesGate {
			r.say("skipped: %s; turn the gate to %s", reason, show(r.plan.Off(), "V"))
		}
		r.finish(Done{Why: reason, Skipped: true})
	}
}

func (r *Runner) acceptKey() {
	switch {
	case r.phase == phOver:
		r.say("the sweep is over")
	case r.paused != "":
		r.say("not now: %s", r.paused)
	case r.verdict.Refuse:
		r.say("%s", r.verdict.Text)
	case r.phase == phStart:
		r.say("first the gate must be seen at its off voltage, %s", show(r.plan.Off(), "V"))
	case r.phase == phPower && !r.plan.DrivesDrain:
		r.begin() // the operator says that the drain supply is on
	case r.plan.driven() && r.phase != phSoak:
		r.say("points are taken as they settle")
	case r.phase == phClimb && r.plan.Mode == ByHand, r.phase == phReturn, r.phase == phSoak:
		r.wanted = true
		if o := r.offered; o != nil && r.phase == phClimb && math.Abs(o.Vg-r.ears.number(Gate, r.now)) < 0.003 {
			r.take(*o)
			return
		}
		r.say("it is taken as soon as it stands still")
	default:
		r.say("points are taken as they come")
	}
}

func (r *Runner) finishKey() {
	switch {
	case r.phase != phClimb || r.plan.Mode == AtSpot:
		r.say("nothing to finish now")
	case len(r.points) == 0:
		r.say("no point was taken yet; stop or skip instead")
	default:
		r.turn("finished by the operator", true)
	}
}

func (r *Runner) repeatKey() {
	if r.phase == phOver || r.phase == phEnd {
		r.say("the sweep is over; begin a new one")
		return
	}
	if n := len(r.points); n > 0 {
		r.emit(Undone{n})
	}
	r.paused, r.regain = "", false
	r.reset()
	if r.plan.driven() {
		r.setGate(r.sign * r.plan.Off())
	}
	r.say("again from the beginning: %s", r.instruction())
}

func (r *Runner) undoKey() {
	n := len(r.points)
	switch {
	case r.phase == phOver || r.phase == phEnd:
		r.say("the sweep is over; a point can no longer be taken back here")
		return
	case n == 0 || r.phase == phStart || r.phase == phPower:
		r.say("no point to take back")
		return
	}
	goal := r.targets[n-1]
	r.points, r.targets, r.curve = r.points[:n-1], r.targets[:n-1], r.curve[:n-1]
	r.seen = false
	for _, p := range r.points {
		r.seen = r.seen || r.idOf(p) >= r.floor()
	}
	r.emit(Undone{1})
	if r.phase == phReturn {
		r.enter(phClimb)
	}
	if r.plan.Mode == Free {
		r.target = math.Inf(-1)
		if n > 1 {
			r.target = r.targets[n-2]
		}
		r.say("the last point does not count")
		return
	}
	r.say("the last point does not count: once more at %s", show(r.sign*goal, "V"))
	if !r.plan.driven() && n > 1 {
		r.window = math.Max((goal-r.targets[n-2])/2, r.plan.MinStep/2)
	}
	r.head(goal)
}

func (r *Runner) fixKey() {
	if !r.verdict.Refuse {
		r.say("nothing to put right: the current agrees with the load resistor")
		return
	}
	f := r.prefix.Fix(r.verdict)
	r.emit(Rescaled{Current, f}, Noted{"prefix", fmt.Sprintf("readings of the current meter count times %g from now on", f)})
	r.verdict = PrefixVerdict{}
	r.guard.forget(Current)
	r.ears.forget(Current)
	r.ears.begin(r.plan.Roles, r.now)
	r.fresh()
	r.say("the current meter is read in its right unit now: %s", r.instruction())
}
