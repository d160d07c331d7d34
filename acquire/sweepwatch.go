package acquire

import (
	"fmt"
	"slices"
)

// lost deals with a line that failed.
func (r *Runner) lost(e Event) {
	if r.phase == phOver {
		return
	}
	r.lostLines[e.Line] = true
	text := fmt.Sprintf("the line of the %s meter is lost", e.Role)
	switch {
	case e.Role != "" && !slices.Contains(r.plan.Roles, e.Role): // a supply
		text = e.Role
	case e.Role == "":
		text = fmt.Sprintf("line %s is lost", e.Line)
	}
	if e.Err != nil {
		text += ": " + e.Err.Error()
	}
	r.trouble("lost", text)
}

// bad deals with a frame that cannot be read.
func (r *Runner) bad(e Event) {
	v := r.ears.of(e.Role)
	if v.bad++; v.bad == badFrames && r.phase != phOver {
		r.trouble("frames", fmt.Sprintf("the %s meter sends what cannot be read: %v", e.Role, e.Err))
	}
}

// trouble stops a driven sweep, and pauses one by hand.
func (r *Runner) trouble(kind, text string) {
	if r.replaying || r.phase == phOver {
		return
	}
	if r.plan.driven() {
		r.stop(kind, text)
		return
	}
	if r.paused == "" {
		r.emit(Noted{kind, text})
		if r.begun && r.phase > phPower {
			r.say("stop: turn the gate back: %s", text)
			r.sound(SoundStop)
		} else {
			r.say("%s", text)
			r.sound(SoundAttention)
		}
	}
	r.paused = text
}

// watched reports whether a role must be heard.
func (r *Runner) watched(role string) bool {
	return role != Temperature || r.plan.Limits.Temp > 0
}

// silence looks for meters that no longer say anything that counts.
func (r *Runner) silence() {
	if r.phase == phOver || r.replaying {
		return
	}
	for _, role := range r.plan.Roles {
		if !r.watched(role) || !r.ears.isSilent(role, r.now) {
			continue
		}
		v := r.ears.of(role)
		text := fmt.Sprintf("the %s meter is silent for %.1f s", role, r.now-v.heard)
		if v.any > v.heard && v.refused != "" {
			text = fmt.Sprintf("the %s meter says nothing that counts for %.1f s: %s", role, r.now-v.heard, v.refused)
		}
		r.trouble("silent", text)
	}
	if r.plan.driven() && r.currentStuck() {
		r.trouble("stuck", "the current meter shows the same digits while the gate voltage moves: is it on hold?")
	}
}

// currentStuck reports a current that stands still though it cannot; fully on, it
// may, for then the load resistor sets it.
func (r *Runner) currentStuck() bool {
	return r.ears.stuck(Current) && !(r.idNow() > 0.7*r.guard.most())
}

// watch looks at the limits and at the prefix of the current.
func (r *Runner) watch() {
	w := r.guard.Look()
	was := r.verdict
	r.verdict = r.prefix.Look(r.latest(), r.ears.of(Current).digit)
	if r.replaying || r.phase == phOver {
		r.level = w.Level
		return
	}
	if r.verdict.Refuse && r.ears.frozen() {
		// No prefix: to multiply what stands still would make a current of it.
		r.verdict = PrefixVerdict{Ratio: r.verdict.Ratio, Text: "the current meter shows the same digits while the load voltage moves: is it on hold?"}
		r.trouble("stuck", r.verdict.Text)
	}
	if r.verdict.Refuse && !was.Refuse {
		if r.plan.driven() { // nothing may go on by itself, and nobody may be there
			r.stop("prefix", r.verdict.Text)
			return
		}
		r.emit(Noted{"prefix", r.verdict.Text})
		r.say("%s", r.verdict.Text)
		r.sound(SoundAttention)
		r.fresh()
	}
	worst, known := w.Worst()
	if w.Level == Over {
		// By hand a current a thousand times too great is a prefix, not a danger.
		if r.verdict.Refuse && r.verdict.Ratio > 1 && !r.plan.driven() && worst.Name != "V_GS" && worst.Name != "V_DS" {
			return
		}
		r.level = w.Level
		r.limit(worst)
		return
	}
	if w.Level == Warn && r.level < Warn {
		r.say("%s", worst)
		r.sound(SoundAttention)
		r.level = Warn
	}
	if known && worst.Of() < warnShare-0.05 || !known {
		r.level = Within
	}
}

// limit deals with a limit that is reached.
func (r *Runner) limit(s Share) {
	text := "limit reached: " + s.String()
	if r.plan.driven() {
		r.stop("limit", text)
		return
	}
	if r.phase <= phPower && s.Name == "V_GS" && !r.drainOn {
		r.trouble("limit", text)
		return
	}
	r.stop("limit", "turn the gate back to "+show(r.plan.Off(), "V")+": "+text)
}

// stop ends the sweep at once.
func (r *Runner) stop(kind, why string) {
	if r.phase == phOver || r.replaying {
		return
	}
	r.emit(Noted{kind, why})
	r.say("stop: %s", why)
	r.sound(SoundStop)
	if r.phase == phEnd { // all that was wanted is taken
		r.finish(Done{Why: r.why, Complete: r.complete})
		return
	}
	r.finish(Done{Why: why})
}

// finish gives the last orders.
func (r *Runner) finish(d Done) {
	if r.phase == phOver {
		return
	}
	r.enter(phOver)
	r.complete, r.why, r.paused = d.Complete, d.Why, ""
	r.emit(d)
	if r.plan.drives() {
		r.offAt = r.now
		r.offGone = r.gone(r.phaseAt - 1)
		r.emit(Off{Reason: d.Why, CurrentGone: r.offGone})
	}
}

// gone reports whether fresh readings newer than since say that no current flows.
func (r *Runner) gone(since float64) bool {
	for _, role := range []string{Current, Load, Drain} {
		if r.plan.has(role) && r.ears.of(role).at < since {
			return false
		}
	}
	return r.idNow() < noCurrent // false while not known
}

// all reports whether every meter that must be heard was heard lately; what it said
// may still be no number.
func (r *Runner) all() bool {
	for _, role := range r.plan.Roles {
		if role == Temperature {
			continue
		}
		limit := 0.5
		if t := r.ears.period(role); 2*t > limit {
			limit = 2 * t
		}
		if r.now-r.ears.of(role).at > limit {
			return false
		}
	}
	return len(r.lostLines) == 0
}
