package acquire

import (
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// Interlock says whether a part may be touched, removed or inserted: only when its
// gate is seen within 0.2 V of the off voltage and its drain current seen below
// 1 mA, both in fresh readings (younger than two cycles or 0.5 s); or when the
// gate is seen there and the drain supply is seen to be off. It trusts no memory: what was
// seen earlier does not count.
type Interlock struct {
	off    float64
	roles  []string
	rl     float64
	ears   *ears
	drain  float64 // s, when the drain supply was read back as off; -Inf never
	prefix *PrefixCheck
}

// NewInterlock makes an interlock for the part and circuit of a plan.
func NewInterlock(p Plan) *Interlock {
	l := &Interlock{off: p.Off(), roles: p.Roles, rl: p.Circuit.RL.Float(), ears: newEars(p.Cycle, nil),
		drain: math.Inf(-1), prefix: NewPrefixCheck(p.Circuit)}
	for role, f := range p.Scale {
		l.prefix.SetScale(role, f)
	}
	return l
}

// SetScale makes the readings of a role count by a factor, as of [Rescaled].
func (l *Interlock) SetScale(role string, factor float64) { l.prefix.SetScale(role, factor) }

// Event takes what happened on a line.
func (l *Interlock) Event(e Event) {
	for _, r := range e.Readings {
		l.ears.hear(l.prefix.Apply(r))
	}
}

// DrainOff tells that the drain supply was read back at that time: off, or on.
func (l *Interlock) DrainOff(off bool, at float64) {
	l.drain = math.Inf(-1)
	if off {
		l.drain = at
	}
}

// Missing lists what is not seen yet at that time; nothing is missing when a part
// may be touched.
func (l *Interlock) Missing(at float64) []string {
	var out []string
	switch vg := l.ears.number(Gate, at); {
	case math.IsNaN(vg):
		out = append(out, "a fresh reading of the gate meter"+l.because(Gate))
	case math.Abs(vg-l.off) >= nearOff:
		out = append(out, fmt.Sprintf("the gate at its off voltage %s: it is at %s", show(l.off, "V"), show(vg, "V")))
	}
	if l.drainIsOff(at) {
		return out
	}
	id, role := l.current(at)
	switch {
	case role == "":
		out = append(out, "the drain supply seen off: no meter tells the drain current")
	case math.IsNaN(id):
		out = append(out, "a fresh reading of the "+role+" meter"+l.because(role))
	case id >= noCurrent:
		out = append(out, fmt.Sprintf("a drain current below %s: it is %s", show(noCurrent, "A"), show(id, "A")))
	}
	return out
}

// Open reports whether a part may be touched.
func (l *Interlock) Open(at float64) bool { return len(l.Missing(at)) == 0 }

// Blind reports that the meters at hand can never show that a part may be touched: a
// drain meter tells neither a small current nor a supply that is off.
func (l *Interlock) Blind() bool {
	return !l.has(Current) && !(l.has(Load) && l.rl > 0) && !l.has(Supply)
}

// current gives the drain current's magnitude (A), the greatest of what the
// meters say, and the role it is missing from.
func (l *Interlock) current(at float64) (float64, string) {
	id, role := math.NaN(), ""
	if l.has(Current) {
		if id = math.Abs(l.ears.number(Current, at)); math.IsNaN(id) {
			return id, Current
		}
		role = Current
	}
	if l.has(Load) && l.rl > 0 {
		il := math.Abs(l.ears.number(Load, at)) / l.rl
		if math.IsNaN(il) {
			return il, Load
		}
		id, role = greater(id, il), Load
	}
	return id, role
}

// drainIsOff reports whether the drain supply is seen to be off now. A drain meter
// at zero does not show that: a shorted device holds it there.
func (l *Interlock) drainIsOff(at float64) bool {
	if at-l.drain <= 0.5 {
		return true
	}
	return l.has(Supply) && math.Abs(l.ears.number(Supply, at)) < 0.5
}

func (l *Interlock) has(role string) bool { return slices.Contains(l.roles, role) }

// because says why a role has no fresh number.
func (l *Interlock) because(role string) string {
	switch v := l.ears.of(role); {
	case v.refused != "":
		return ": it says " + v.refused
	case v.state == record.Overload || v.state == record.Underload:
		return ": it is over its range"
	}
	return ""
}
