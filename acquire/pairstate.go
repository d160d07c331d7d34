package acquire

import (
	"math"

	"gatesill/store/record"
)

// Last is what a meter said last, for display only.
type Last struct {
	Value   float64 // SI unit; NaN with a State
	Unit    string
	State   record.PointState
	Digit   float64 // one count; 0 not known
	At      float64 // s, arrival
	Refused string  // why it cannot stand for its quantity; "" it can
}

// Age is how long ago that was at the elapsed time at, s.
func (l Last) Age(at float64) float64 { return at - l.At }

// Latest is the last word of every meter, by role. It never makes a point: the
// readings are of different instants.
type Latest map[string]Last

// Now gives the last value of every role that was heard.
func (q *Pairer) Now() Latest {
	out := Latest{}
	for role, c := range q.channels {
		if c.latest.Role == "" {
			continue
		}
		r := c.latest
		v, ok := r.Value.Get()
		if !ok {
			v = math.NaN()
		}
		out[role] = Last{Value: v, Unit: r.Unit, State: r.State, Digit: r.Digit.Or(0), At: r.At, Refused: r.Refused}
	}
	return out
}

// PairState is how the meters stand at one time.
type PairState struct {
	Lost    []string // roles of which nothing usable has come for three cycles, or 1 s
	Stuck   []string // roles that repeat their digits though another moved: to be looked at
	Settled bool     // all stand still
	Taken   bool     // and the plateau has given its point
	Wait    float64  // s, until all will have stood still for long enough if nothing moves; NaN: not to be told
	Why     string   // what keeps it from being settled; "" nothing
}

// State says how the meters stand at the elapsed time at, s.
func (q *Pairer) State(at float64) PairState {
	s := PairState{Settled: q.state.settled, Taken: q.state.taken, Why: q.state.why, Wait: math.NaN()}
	for _, role := range []string{Gate, Current, Load, Drain, Supply, Temperature} {
		c := q.channels[role]
		if c == nil {
			continue
		}
		if at-c.since(q.first) > c.silence() || math.IsNaN(q.first) {
			s.Lost = append(s.Lost, role)
		}
		if q.stuck(c) {
			s.Stuck = append(s.Stuck, role)
		}
	}
	for _, role := range s.Lost {
		if pace := q.pace(); role == Gate || pace != nil && role == pace.role {
			s.Settled, s.Why = false, "the "+role+" meter is lost"
			return s
		}
	}
	g := q.channels[Gate]
	switch {
	case s.Settled:
		s.Wait = 0
	case g == nil || len(g.convs) == 0:
	case q.state.stands:
		// What is still missing is not the gate's: it cannot be told how long it takes.
	default:
		s.Wait = q.stillFor(g, at)
	}
	if s.Why == "" && !s.Settled {
		s.Why = "few readings"
	}
	return s
}

// stillFor is how long the gate has yet to stand still, s.
func (q *Pairer) stillFor(g *channel, at float64) float64 {
	k := len(g.convs) - 1
	last := &g.convs[k]
	if !last.number() {
		return math.NaN()
	}
	lo, hi := last.v, last.v
	for k > 0 && g.convs[k].whole && g.convs[k-1].number() {
		v := g.convs[k-1].v
		if math.Max(hi, v)-math.Min(lo, v) > q.band(last.digit) {
			break
		}
		lo, hi = math.Min(lo, v), math.Max(hi, v)
		k--
	}
	return math.Max(0, q.window(last.t)-(at-g.convs[k].t))
}

const (
	stuckCount  = 5    // conversions of the same digits
	stuckCounts = 5    // by which another must have moved
	stuckShare  = 0.05 // or by this share of a current
	slowestGain = 0.035
)

// stuck reports whether the meter repeats its digits though another moved by more than that
// allows: the gate, though the current moved by more than 5 % and more than a gate within
// one count explains in weak inversion; the current, though load or drain voltage moved by five
// counts, or nothing but the gate can tell and that moved by five; the load voltage, well above its last digits, though the
// current moved by a fifth. A drain voltage alone is not judged: near V_DD and
// near 0 it rests by itself. It is a suspicion: a part that warms up looks the same as a gate meter that froze.
func (q *Pairer) stuck(c *channel) bool {
	n := len(c.convs)
	if n == 0 {
		return false
	}
	end := &c.convs[n-1]
	if !end.number() || end.n < stuckCount {
		return false
	}
	moved := func(role string) (by, lo, digit float64) {
		o := q.channels[role]
		if o == nil || o == c {
			return 0, 0, 0
		}
		guard := c.unsure(end.cycle) + o.unsure(o.cycle()) + (c.timing.Integration+o.timing.Integration)/2
		lo, hi := math.Inf(1), math.Inf(-1)
		for i := o.from(end.run + guard); i < len(o.convs) && o.convs[i].t <= end.t-guard; i++ {
			if x := &o.convs[i]; x.number() {
				lo, hi, digit = math.Min(lo, x.v), math.Max(hi, x.v), x.digit
			}
		}
		if hi < lo {
			return 0, 0, digit
		}
		return hi - lo, math.Min(math.Abs(lo), math.Abs(hi)), digit
	}
	i, least, count := moved(Current)
	switch c.role {
	case Gate:
		share := math.Max(stuckShare, 2*end.digit/slowestGain)
		return i > stuckCounts*count && i > share*least && i > 0
	case Current:
		if math.Abs(end.v) <= frozenLeast*end.digit {
			return false // nothing flows yet
		}
		by, _, digit := moved(Load)
		if q.channels[Load] == nil {
			by, _, digit = moved(Drain)
		}
		if q.channels[Load] == nil && q.channels[Drain] == nil {
			by, _, digit = moved(Gate)
		}
		return by > stuckCounts*digit && by > 0
	case Load:
		return math.Abs(end.v) > frozenLeast*end.digit && i > stuckCounts*count && i > 0.2*least
	}
	return false
}
