package acquire

import (
	"math"
	"slices"

	"gatesill/store/record"
)

// ears know what every role said last, how often it speaks, and whether it is
// fresh, silent or stuck.
type ears struct {
	voices map[string]*voice
	cycle  map[string]float64 // s, given
	silent map[string]float64 // s, given
}

func newEars(cycle, silent map[string]float64) *ears {
	return &ears{voices: map[string]*voice{}, cycle: cycle, silent: silent}
}

// voice is what is known of one role.
type voice struct {
	value, digit float64 // of the last number; digit NaN not known
	at           float64 // s, when it came
	heard        float64 // s, when the last number or overload came
	any          float64 // s, when the last frame came that could be read, refused ones too
	state        record.PointState
	refused      string
	ranging      bool // the last frame was an overload, or the first on another range
	number       bool // the last frame was a number that counts
	frames       int
	count        int                // numbers since the last call of mark
	gaps         []float64          // s, between the last frames
	gap          float64            // s, their median; NaN none yet
	same         int                // equal numbers in a row
	others       map[string]float64 // what the other roles said when they began to be equal
	against      int                // of these, the last ones during which another role had moved away
	bad          int                // frames in a row that could not be read
}

// begin makes silence count from at on for the roles listed.
func (e *ears) begin(roles []string, at float64) {
	for _, r := range roles {
		v := e.of(r)
		v.heard, v.any = math.Max(v.heard, at), math.Max(v.any, at)
	}
}

func (e *ears) of(role string) *voice {
	v := e.voices[role]
	if v == nil {
		v = &voice{value: math.NaN(), digit: math.NaN(), gap: math.NaN(), at: math.Inf(-1), heard: math.Inf(-1), any: math.Inf(-1)}
		e.voices[role] = v
	}
	return v
}

// hear takes a reading.
func (e *ears) hear(r record.Reading) {
	v := e.of(r.Role)
	v.bad = 0
	if gap := r.At - v.any; v.frames > 0 && gap > 0.002 {
		v.gaps = append(v.gaps, gap)
		if len(v.gaps) > 9 {
			v.gaps = v.gaps[1:]
		}
		sorted := slices.Clone(v.gaps)
		slices.Sort(sorted)
		v.gap = sorted[len(sorted)/2]
	}
	v.frames++
	v.any = math.Max(v.any, r.At)
	v.state, v.refused = r.State, r.Refused
	x, known := r.Value.Get()
	v.number = known && r.State == "" && r.Refused == ""
	// A meter that changes its range is not silent.
	v.ranging = r.State == record.Overload || r.State == record.Underload || r.Refused == "range changed"
	if r.Refused == "" && v.number || v.ranging {
		v.heard = r.At
	}
	if !v.number {
		return
	}
	if x == v.value {
		if v.same++; v.same == 1 {
			v.others = map[string]float64{}
			for name, o := range e.voices {
				v.others[name] = o.value
			}
		}
		if v.against++; !e.contradicted(r.Role) {
			v.against = 0
		}
	} else {
		v.same, v.against = 0, 0
	}
	v.value, v.digit, v.at = x, r.Digit.Float(), r.At
	v.count++
}

// period is the time between readings of a role, s; NaN not known yet.
func (e *ears) period(role string) float64 {
	if t := e.cycle[role]; t > 0 {
		return t
	}
	return e.of(role).gap
}

// number gives the last number of a role, NaN when there is none or it is not
// fresh: older than two cycles or 0.5 s, whichever is longer, or followed by
// something that is no number.
func (e *ears) number(role string, now float64) float64 {
	v := e.of(role)
	limit := 0.5
	if t := e.period(role); 2*t > limit {
		limit = 2 * t
	}
	if !v.number || now-v.at > limit {
		return math.NaN()
	}
	return v.value
}

// isSilent reports whether nothing that counts came from a role for too long.
func (e *ears) isSilent(role string, now float64) bool {
	limit := e.silent[role]
	if limit <= 0 {
		limit = 1
		t := e.period(role)
		cycles := 3.5 // three, and what arrives late: a change to a lower range costs two conversions
		if e.of(role).ranging {
			cycles += 2
		}
		switch {
		case cycles*t > 1:
			limit = cycles * t
		case math.IsNaN(t):
			limit = 3 // how often it speaks is not known yet
		}
	}
	return now-e.of(role).heard > limit
}

// stuck reports whether the digits of a role stand still although another role
// says that they cannot, and has said so for several of its conversions. Equal digits alone
// are nothing: a device that is off draws no current at any gate voltage.
func (e *ears) stuck(role string) bool {
	v := e.of(role)
	return v.number && v.same >= 8 && v.against >= 3
}

// contradicted reports whether another role has moved since the digits of this one
// began to be equal.
func (e *ears) contradicted(role string) bool {
	v := e.of(role)
	moved := func(other string, least float64) bool {
		o := e.of(other)
		was, ok := v.others[other]
		d := math.Abs(o.value - was)
		return ok && o.number && d > least && !(d <= 5*o.digit)
	}
	switch role {
	case Gate:
		return moved(Current, 0.05*math.Abs(e.of(Current).value)) || moved(Load, 0.05*math.Abs(e.of(Load).value))
	case Current, Load:
		// Below ten counts a current may stand still on its display, and where a count
		// is not known, below what counts as a current at all.
		least := noCurrent
		if v.digit > 0 {
			least = 10 * v.digit
		}
		return math.Abs(v.value) > least && moved(Gate, 0.02)
	}
	return false
}

// frozen reports whether the current stands still on its display while the voltage
// across the load resistor has moved by a tenth or more.
func (e *ears) frozen() bool {
	v, o := e.of(Current), e.of(Load)
	was, ok := v.others[Load]
	d := math.Abs(o.value - was)
	return v.same >= 3 && ok && o.number && d > 0.1*math.Abs(o.value) && !(d <= 5*o.digit)
}

// mark makes counts of numbers start again.
func (e *ears) mark() {
	for _, v := range e.voices {
		v.count = 0
	}
}

// forget drops what a role said so far.
func (e *ears) forget(role string) { delete(e.voices, role) }
