package replay

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gatesill/acquire/table"
	"gatesill/store/record"
)

// assumedBound is the greatest error taken for clocks that were not held against
// each other: that of clocks set by a network or by hand with care (common
// practice, no source).
const assumedBound = 1.0

// Join brings logs to one time base. notesLog and notes may be nil.
func Join(logs []*Log, notesLog *Log, notes []Note, opt Options) (*Session, error) {
	j := &joiner{opt: opt, s: &Session{Logs: logs, Notes: notes, NotesLog: notesLog}}
	j.o = &origins{opt: opt, logs: slices.Clone(logs)}
	if notesLog != nil {
		j.o.logs = append(j.o.logs, notesLog)
	}
	for _, l := range logs {
		if len(l.Entries) == 0 {
			return nil, refuse(l, "", "it holds no readings")
		}
	}
	if err := j.reference(); err != nil {
		return nil, err
	}
	if err := j.o.settle(); err != nil {
		return nil, err
	}
	j.o.clocksForward()
	if err := j.checkOverlap(); err != nil {
		return nil, err
	}
	for _, l := range logs {
		if l != j.ref {
			if err := j.align(l); err != nil {
				return nil, err
			}
		}
	}
	if err := j.checkSwapped(); err != nil {
		return nil, err
	}
	return j.s, j.finish()
}

func refuse(l *Log, hint, format string, args ...any) error {
	return &table.Error{File: l.Path, Hint: hint, Err: fmt.Errorf("%w: %s", table.ErrRefused, fmt.Sprintf(format, args...))}
}

// joiner brings logs together.
type joiner struct {
	opt Options
	o   *origins
	s   *Session
	ref *Log // the others are held against it
}

func (j *joiner) log(role string) *Log {
	for _, l := range j.s.Logs {
		if l.Role == role {
			return l
		}
	}
	return nil
}

// reference is the log that the others are held against: that of the current, else
// of the load, else of the drain.
func (j *joiner) reference() error {
	if j.log("gate") == nil {
		return fmt.Errorf("%w: no log of the gate meter", table.ErrRefused)
	}
	for _, role := range []string{"current", "load", "drain"} {
		if l := j.log(role); l != nil {
			j.ref = l
			return nil
		}
	}
	return refuse(j.log("gate"), "--meter-logs gate=FILE,current=FILE", "the log of the gate meter alone makes no curve")
}

// checkOverlap refuses logs that were not recorded at the same time.
func (j *joiner) checkOverlap() error {
	for _, l := range j.s.Logs {
		if l == j.ref || j.o.kinds[l] == fromZero || j.o.kinds[j.ref] == fromZero {
			continue
		}
		if l.from() > j.ref.to()+nearRange || l.to() < j.ref.from()-nearRange {
			hint := "are they logs of one sitting?"
			if !l.Found.Form.absolute() || !j.ref.Found.Form.absolute() {
				hint = "--log-zone +02:00 if the zone of the times without one is another; " + hint
			}
			return refuse(l, hint, "it runs from %s and %s from %s: they do not overlap", j.o.span(l), j.ref.Name, j.o.span(j.ref))
		}
	}
	return nil
}

// numbers gives the readings of a log that stand for its quantity.
func (l *Log) numbers() *series {
	s := &series{cycle: l.Found.Cycle}
	for i := range l.Entries {
		if r := &l.Entries[i].Reading; r.Refused == "" && r.Value.IsKnown() {
			s.t, s.v = append(s.t, r.At), append(s.v, r.Value.Float())
		}
	}
	return s
}

// floor is the magnitude of the readings below which their digits tell nothing.
func (l *Log) floor() float64 {
	digit, most := 0.0, 0.0
	for i := range l.Entries {
		r := &l.Entries[i].Reading
		if r.Refused == "" && r.Value.IsKnown() {
			most = max(most, math.Abs(r.Value.Float()))
			if d := r.Digit.Or(0); digit == 0 || d > 0 && d < digit {
				digit = d
			}
		}
	}
	return max(20*digit, 1e-4*most)
}

// digit is the finest last digit of the readings.
func (l *Log) digit() float64 {
	least := 0.0
	for i := range l.Entries {
		if d := l.Entries[i].Digit.Or(0); d > 0 && (least == 0 || d < least) {
			least = d
		}
	}
	return least
}

// keep takes what was found for the clock.
func (j *joiner) keep(l *Log, c *Clock, f found, seen string, span float64, drift bool) {
	u := max(f.offsetU, 0.002)
	slope := f.driftU * span / 2
	if !drift {
		slope = 100e-6 * span / 2 / safety // of two quartz clocks, common practice, no source
	}
	c.Offset, c.OffsetU, c.Drift, c.DriftU = f.offset, u, f.drift*1e6, f.driftU*1e6
	// A step between two conversions may seem displaced by a part of a cycle, the same
	// for all steps when they are as regular as the meters: 3 of 100 clocks needed it
	// in simulation.
	between := 0.05 * (l.Found.Cycle + j.ref.Found.Cycle)
	c.Bound = safety*math.Hypot(u, slope) + between + l.Found.coarse()/2 + j.ref.Found.coarse()/2
	c.Why = seen
	if math.Abs(f.offset) > nearRange && j.o.kinds[l] != fromZero && j.o.kinds[j.ref] != fromZero {
		j.s.Warnings = append(j.s.Warnings, fmt.Sprintf("%s: its clock is off by %s from that of %s; the readings fit there and nowhere nearer", l.Name, seconds(f.offset), j.ref.Name))
	}
	if math.Abs(f.drift) > 0.9*maxDrift {
		j.s.Warnings = append(j.s.Warnings, fmt.Sprintf("%s: its clock drifts by %.0f ppm against that of %s, which no quartz does", l.Name, f.drift*1e6, j.ref.Name))
	}
	l.move(c)
}

// coarse is the step of the last digit of the times, when it is one to count.
func (f *Found) coarse() float64 {
	if f.Resolution > 0.01 && f.Resolution < 100 {
		return f.Resolution
	}
	return 0
}

// move brings the times of the log over.
func (l *Log) move(c *Clock) {
	for i := range l.Entries {
		l.Entries[i].At = c.Correct(l.Entries[i].At)
	}
}

// assume takes an offset of zero, or refuses logs without a common origin.
func (j *joiner) assume(l *Log, apart bool, why string) error {
	c := l.Found.Clock
	if apart {
		count := l
		if j.o.kinds[l] != fromZero {
			count = j.ref
		}
		return refuse(count, fmt.Sprintf("--log-times %s=2026-05-20T10:02:03 says when its time 0 was", count.Role),
			"its times count from a start of their own, and %s to find it against %s by the readings", why, other(count, l, j.ref).Name)
	}
	if l.Role == "supply" || l.Role == "temperature" {
		*c = Clock{Against: j.ref.Role, Assumed: true, Bound: assumedBound, Why: why}
		return nil
	}
	*c = Clock{Against: j.ref.Role, Assumed: true, Why: why, Bound: assumedBound + l.Found.coarse()/2 + j.ref.Found.coarse()/2}
	j.s.Warnings = append(j.s.Warnings, fmt.Sprintf("%s: how far its clock is off that of %s cannot be told, for %s: 0 s was assumed, within %s", l.Name, j.ref.Name, why, seconds(c.Bound)))
	return nil
}

func other(count, a, b *Log) *Log {
	if count == a {
		return b
	}
	return a
}

func noun(role string) string {
	if role == "current" {
		return role
	}
	return role + " voltage"
}

// finish sets time 0 at the first reading.
func (j *joiner) finish() error {
	s := j.s
	first, last := math.Inf(1), math.Inf(-1)
	for _, l := range s.Logs {
		first, last = min(first, l.from()), max(last, l.to())
	}
	s.Started, s.Span = j.o.stamp(first), last-first
	if j.o.kinds[j.ref] == fromZero {
		s.Started = ""
	}
	for _, l := range s.Logs {
		l.shift(-first)
	}
	s.Remarks = append(s.Remarks, j.o.remarks...)
	if s.NotesLog == nil {
		return nil
	}
	n := s.NotesLog
	if on := j.log(n.start); on != nil && j.o.kinds[n] == fromZero {
		for i := range n.Entries {
			n.Entries[i].At = on.Found.Clock.Correct(n.Entries[i].At)
		}
	} else if j.o.kinds[n] == fromZero || j.o.kinds[j.ref] == fromZero {
		return refuse(n, "--log-times notes="+j.ref.Role+" if they count as that log does", "its times have no origin in common with those of %s", j.ref.Name)
	}
	n.shift(-first)
	for i := range s.Notes {
		s.Notes[i].At = n.Entries[i].At
	}
	return nil
}

// checkSwapped refuses logs of gate and load that were given for one another: one
// of the two follows the current in proportion, and it is not the load.
func (j *joiner) checkSwapped() error {
	gate, load, current := j.log("gate"), j.log("load"), j.log("current")
	if gate == nil || load == nil || current == nil {
		return nil
	}
	follows := func(l *Log) float64 {
		h := proportional(l.numbers(), current.numbers(), 0, l.floor(), current.floor(), cuts[0])(0, 0)
		if h.n == 0 {
			return 1
		}
		return h.share()
	}
	if g, l := follows(gate), follows(load); g < 0.05 && l > 5*g {
		return refuse(gate, fmt.Sprintf("--meter-logs gate=%s,load=%s", load.Name, gate.Name), "it follows the current in proportion, and %s does not: the logs of gate and load seem to be exchanged", load.Name)
	}
	return nil
}

// Readings gives the readings of all logs from From to To, by time.
func (s *Session) Readings(from, to float64) []record.Reading {
	var out []record.Reading
	for _, l := range s.Logs {
		for i := range l.Entries {
			if at := l.Entries[i].At; at >= from && at <= to {
				out = append(out, l.Entries[i].Reading)
			}
		}
	}
	slices.SortStableFunc(out, func(a, b record.Reading) int { return cmp.Compare(a.At, b.At) })
	return out
}
