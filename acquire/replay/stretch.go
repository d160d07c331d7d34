package replay

import (
	"fmt"
	"math"
	"strconv"

	"gatesill/acquire/table"
)

// offRoom is how far from the off voltage a gate still counts as off, in volts.
const offRoom = 0.2

// Socket says what is known of the devices of a session.
type Socket struct {
	Device   string  // the one device of the whole session, "" not said
	Off      float64 // V at which the gate is off; NaN not known
	PChannel bool
}

// Cut finds the stretches of the devices: by the notes, by the name that was given
// for all, or where the gate comes back to off and the drain current falls to
// zero; then they are numbered D1, D2 ...
func (s *Session) Cut(k Socket) error {
	s.Stretches = nil
	for _, n := range s.Notes {
		if n.In != "" {
			if k.Device != "" {
				return &table.Error{File: s.NotesLog.Path, Line: n.Line, Hint: "leave --device out, or leave the notes out",
					Err: fmt.Errorf("%w: the notes name the devices, and --device names one for all", table.ErrRefused)}
			}
			s.byNotes()
			return nil
		}
	}
	if k.Device != "" {
		s.Stretches = []Stretch{{Device: k.Device, From: 0, To: s.Span}}
		return nil
	}
	if k.Off != k.Off {
		return &table.Error{File: s.Logs[0].Path, Hint: "gatesill lot edit LOT --off-voltage -5V, or --device NAME, or notes=FILE among the --meter-logs",
			Err: fmt.Errorf("%w: which device was measured is not said, and where the gate of this part is off is not known", table.ErrRefused)}
	}
	s.byOff(k)
	return nil
}

// byNotes cuts at the notes by which devices go in and out.
func (s *Session) byNotes() {
	zero := s.quiet()
	open := false
	end := func(at float64) {
		if open {
			s.Stretches[len(s.Stretches)-1].To = at
		}
		open = false
	}
	first := math.Inf(1)
	for _, n := range s.Notes {
		if n.In == "" && !n.Out {
			continue
		}
		end(n.At)
		if n.In == "" {
			continue
		}
		first = min(first, n.At)
		if flows, known := zero.flows(n.At); known && flows {
			s.warn("%s:%d: %q, but the drain current flows at that moment: is the clock of the notes that of the logs?", s.NotesLog.Name, n.Line, n.Text)
		}
		s.Stretches = append(s.Stretches, Stretch{Device: n.In, From: n.At, To: s.Span, Line: n.Line})
		open = true
	}
	if n := len(s.Readings(0, first)); first > 0 && n > 0 {
		s.Remarks = append(s.Remarks, fmt.Sprintf("%d readings before the first device of the notes are left out", n))
	}
	var kept []Stretch
	for _, st := range s.Stretches {
		if len(s.Readings(st.From, st.To)) == 0 {
			s.warn("%s:%d: device %s: no readings before the next note", s.NotesLog.Name, st.Line, st.Device)
			continue
		}
		kept = append(kept, st)
	}
	s.Stretches = kept
}

func (s *Session) warn(format string, args ...any) {
	s.Warnings = append(s.Warnings, fmt.Sprintf(format, args...))
}

// byOff cuts where the gate is off and no current flows.
func (s *Session) byOff(k Socket) {
	gate := s.role("gate")
	sign := 1.0
	if k.PChannel {
		sign = -1
	}
	zero := s.quiet()
	active, from, last, n := false, 0.0, 0.0, 0
	begin := func(at float64) { active, from, n = true, at, 0 }
	end := func(at float64) {
		if active && n >= 3 {
			s.Stretches = append(s.Stretches, Stretch{Device: "D" + strconv.Itoa(len(s.Stretches)+1), From: from, To: at})
		}
		active = false
	}
	for i := range gate.Entries {
		e := &gate.Entries[i]
		v, ok := e.Value.Get()
		flows, known := zero.flows(e.At)
		off := ok && e.Refused == "" && sign*(v-k.Off) <= offRoom && known && !flows
		switch {
		case off && active:
			end(e.At)
		case !off && !active:
			begin(last)
		}
		n++
		last = e.At
	}
	end(s.Span)
	if len(s.Stretches) == 0 {
		s.Stretches = []Stretch{{Device: "D1", From: 0, To: s.Span}}
	}
	what := "never comes back to off in between: all readings are taken for one device, D1"
	if n := len(s.Stretches); n > 1 {
		what = fmt.Sprintf("comes back to off %d times without drain current in between: %d devices, D1 to D%d", n-1, n, n)
	}
	s.Remarks = append(s.Remarks, "the gate "+what+"; --device or notes name them")
}

func (s *Session) role(role string) *Log {
	for _, l := range s.Logs {
		if l.Role == role {
			return l
		}
	}
	return nil
}

// quiet tells whether the drain current flows.
type quiet struct {
	at      []float64
	size    []float64 // of the current, or of what stands for it; +Inf over the range
	limit   float64
	longest float64 // s between readings that still say something
}

// quiet looks at the first of current, load and drain that there is.
func (s *Session) quiet() *quiet {
	q := &quiet{}
	for _, role := range []string{"current", "load", "drain"} {
		l := s.role(role)
		if l == nil {
			continue
		}
		top := 0.0
		for i := range l.Entries {
			if x, ok := l.Entries[i].Value.Get(); ok {
				top = max(top, math.Abs(x))
			}
		}
		for i := range l.Entries {
			e := &l.Entries[i]
			if e.Refused != "" {
				continue
			}
			x, ok := e.Value.Get()
			x = math.Abs(x)
			if role == "drain" {
				x = top - x
			}
			if !ok {
				x = math.Inf(1)
			}
			q.at, q.size = append(q.at, e.At), append(q.size, x)
		}
		q.limit, q.longest = max(l.floor(), 0.01*top), max(3*l.Found.Cycle, 3)
		break
	}
	return q
}

// flows reports whether current flows at a time, by the reading next to it.
func (q *quiet) flows(at float64) (flows, known bool) {
	lo, hi := 0, len(q.at)
	for lo < hi {
		if m := (lo + hi) / 2; q.at[m] < at {
			lo = m + 1
		} else {
			hi = m
		}
	}
	best := math.Inf(1)
	for _, i := range []int{lo - 1, lo} {
		if i >= 0 && i < len(q.at) && math.Abs(q.at[i]-at) < best {
			best, flows = math.Abs(q.at[i]-at), q.size[i] > q.limit
		}
	}
	return flows, best <= q.longest
}
