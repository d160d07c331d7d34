package meter

import (
	"slices"
	"time"
)

// Steady believes a change of unit or range only when two readings running say
// it: one bit turned over on the line makes a milliampere of an ampere. It is for
// one column of one line, and is not asked about repeats of a frame.
//
// It does not judge values: whether a jump that returns was one is told by those
// who see the neighbours.
type Steady struct {
	ranges  bool // the digit is that of a range
	known   bool
	now     manner
	next    manner
	pending bool
}

type manner struct {
	unit  string
	ac    bool
	test  string
	digit float64 // 0 not known
}

// NewSteady judges readings of the format. Where frames are lines the last digit
// is that of the writing, and only units are judged.
func NewSteady(f Format) *Steady { return &Steady{ranges: !f.Lines} }

// Judge takes the next reading and returns why it is not yet to be believed:
// "unit changed", "range changed", or "".
func (s *Steady) Judge(r Reading) string {
	m := manner{unit: r.Unit, ac: r.AC, test: r.Test}
	if s.ranges {
		m.digit = r.Digit
	}
	why := ""
	switch {
	case !s.known:
	case !m.sameUnit(s.now):
		why = "unit changed"
	case !m.sameDigit(s.now):
		why = "range changed"
	}
	if why != "" && !(s.pending && m.sameUnit(s.next) && m.sameDigit(s.next)) {
		s.next, s.pending = m, true
		return why
	}
	if why == "" && m.digit == 0 {
		m.digit = s.now.digit // an overload says nothing of the range
	}
	s.now, s.known, s.pending = m, true, false
	return ""
}

func (m manner) sameUnit(o manner) bool { return m.unit == o.unit && m.ac == o.ac && m.test == o.test }

func (m manner) sameDigit(o manner) bool {
	return m.digit == 0 || o.digit == 0 || m.digit == o.digit
}

// Repeats tells frames that are sent again for one conversion. It is for one line.
type Repeats struct {
	twice    bool
	mask     byte
	last     []byte
	at       time.Time // of the last frame that was none
	have     bool
	repeated bool // the frame before was a repeat
	gaps     []time.Duration
	next     int // place in gaps that is written next
}

const (
	gapsKept    = 15
	repeatShare = 0.75 // of the conversion interval
)

// NewRepeats tells repeats of the format.
func NewRepeats(f Format) *Repeats {
	r := &Repeats{twice: f.Twice, mask: 0xFF}
	if f.Bits == 7 {
		r.mask = 0x7F
	}
	return r
}

// Judge takes a frame that could be read and when it came, and reports whether it
// repeats the one before: the same bytes within 0.75 of the conversion interval,
// or, where every frame is sent twice, the same bytes right after a first frame.
func (r *Repeats) Judge(frame []byte, at time.Time) bool {
	same := r.have && len(frame) == len(r.last)
	for i := 0; same && i < len(frame); i++ {
		same = frame[i]&r.mask == r.last[i]&r.mask
	}
	if same && !r.repeated && r.twice {
		r.repeated = true
		return true
	}
	gap := at.Sub(r.at)
	if same && !r.twice {
		if t := r.Interval(); t > 0 && gap < time.Duration(repeatShare*float64(t)) {
			return true
		}
	}
	if r.have {
		if len(r.gaps) < gapsKept {
			r.gaps = append(r.gaps, 0)
		}
		r.gaps[r.next] = gap
		r.next = (r.next + 1) % gapsKept
	}
	r.last, r.at, r.have, r.repeated = append(r.last[:0], frame...), at, true, false
	return false
}

// Interval is the time from one conversion to the next, the median of those seen
// last; 0 not known. Of two it is the longer, for a repeat that was not yet known
// as one makes them shorter.
func (r *Repeats) Interval() time.Duration {
	if len(r.gaps) == 0 {
		return 0
	}
	sorted := slices.Sorted(slices.Values(r.gaps))
	return sorted[len(sorted)/2]
}

// Lost forgets the frame before, as the line was lost; the interval stays.
func (r *Repeats) Lost() { r.have, r.repeated, r.last = false, false, r.last[:0] }
