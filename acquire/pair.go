package acquire

import (
	"math"

	"gatesill/store/record"
)

// Pairing says how readings of meters that do not read at one instant are brought
// together. The zero value of every number stands for what is written beside it.
type Pairing struct {
	// Timing is what is known of the meters, by role; it also names the roles that
	// are waited for. A role that is heard and not named here is taken with an error
	// of one cycle of its meter.
	Timing    map[string]Timing
	Tolerance float64         // V, greatest bound of an interpolated point; 0: 5 mV
	Window    float64         // s, how long all must have stood still; 0: 1.6 s, or four cycles of the slowest meter
	SlopeMax  float64         // V/s, of the gate while it stands still; 0: 1 mV/s
	Step      float64         // V, least step of the gate that is to give a point of its own; 0: three bands of standing still
	Free      bool            // points on the move are wanted
	Twice     map[string]bool // roles whose meter sends each conversion twice
}

const (
	tolerance   = 5e-3 // V
	leastWindow = 1.6  // s
	slopeMax    = 1e-3 // V/s
	bandVolts   = 2.5e-3
	bandCounts  = 2.5
	rearmBands  = 3
	gapCycles   = 1.6 // an interval longer than this many cycles has lost a conversion
	leastCount  = 3   // conversions of each meter in a point that stands still
	halvesShare = 0.02
)

// paces are the roles whose conversions points are made at, the best first.
var paces = []string{Current, Load, Drain, Gate}

// joined are the roles that must stand still for a settled point; the others are
// joined to it as they come.
var joined = []string{Gate, Current, Load, Drain}

// Report counts what became of the readings, and of the instants at which points
// could have been.
type Report struct {
	Readings      int // that came
	Refused       int // that cannot stand for their quantity, or came out of order
	Duplicates    int // the same frame once more
	Jumps         int // a single reading far off, with those around it alike
	RangeChanges  int // left out because the display had changed its digits or come back from overload
	States        int // without a number: overload, underload, missing
	Gaps          int // intervals in which a conversion was lost
	Settled       int // points
	Interpolated  int // points
	OverTolerance int // instants on the move whose bound was over the tolerance
	Unpaired      int // instants on the move without whole readings of the gate around them
	Frozen        int // instants left out because the gate meter repeated itself while the current moved
}

// Pairer brings readings together as they come. Which points come out depends on
// the readings of every meter and their times only, not on how they are dealt out,
// nor on the order in which meters are heard within half a second.
type Pairer struct {
	p        Pairing
	channels map[string]*channel
	report   Report
	first    float64 // s, arrival of the first reading; NaN: none yet
	newest   float64 // s, latest arrival
	done     float64 // s, instant of the pace that was judged last
	ended    bool
	held     []instant // on the move, until it is certain that no plateau holds them
	points   []Point   // finished, not yet taken
	last     float64   // V, gate voltage of the last settled point; NaN: none

	frozenRun float64   // s, start of the run of like gate readings during which the current moved; NaN: none
	state     judgement // of the last instant
}

// instant is a conversion of the pace, at which a point may be.
type instant struct {
	pace *channel
	c    conversion
}

// NewPairer is a Pairer without readings.
func NewPairer(p Pairing) *Pairer {
	orElse(&p.Tolerance, tolerance)
	orElse(&p.SlopeMax, slopeMax)
	q := &Pairer{p: p, channels: map[string]*channel{}, first: math.NaN(), newest: math.Inf(-1), done: math.Inf(-1), last: math.NaN(), frozenRun: math.NaN(), state: judgement{t: math.Inf(-1)}}
	for role := range p.Timing {
		q.channel(role)
	}
	return q
}

func orElse(x *float64, other float64) {
	if !(*x > 0) {
		*x = other
	}
}

// Pair brings a stored list of readings together, in the order in which they came:
// the same points as a [Pairer] gave while they were taken.
func Pair(readings []record.Reading, p Pairing) ([]Point, Report) {
	q := NewPairer(p)
	for _, r := range readings {
		q.Add(r)
	}
	q.Flush()
	return q.Take(), q.report
}

// channel is that of a role, made when it is first asked for.
func (q *Pairer) channel(role string) *channel {
	c := q.channels[role]
	if c == nil {
		c = newChannel(role, q.p, &q.report)
		q.channels[role] = c
	}
	return c
}

// Add takes the next reading.
func (q *Pairer) Add(r record.Reading) {
	q.report.Readings++
	if math.IsNaN(r.At) || math.IsInf(r.At, 0) {
		q.report.Refused++
		return
	}
	if math.IsNaN(q.first) {
		q.first = r.At
	}
	q.channel(r.Role).add(r)
	q.newest = math.Max(q.newest, r.At)
	q.advance()
}

// Take hands over the points that were finished since the last call, in the order
// of their instants.
func (q *Pairer) Take() []Point {
	points := q.points
	q.points = nil
	return points
}

// Flush finishes what can be finished without further readings. A last conversion
// that jumped and was not confirmed is left out.
func (q *Pairer) Flush() {
	q.ended = true
	q.advance()
	q.release(math.Inf(1))
	q.ended = false
}

// Report gives the counts so far.
func (q *Pairer) Report() Report { return q.report }

// pace is the channel at whose conversions points are made; nil when there is none.
func (q *Pairer) pace() *channel {
	for _, role := range paces {
		if c := q.channels[role]; c != nil {
			return c
		}
	}
	return nil
}

// advance judges the instants for which every other meter has said what it had to.
func (q *Pairer) advance() {
	pace := q.pace()
	if pace == nil {
		return
	}
	for i := pace.after(q.done); i < len(pace.convs); i++ {
		c := pace.convs[i]
		if !q.ended && !q.resolved(pace, c) {
			return
		}
		q.done = c.t
		q.judge(instant{pace, c})
	}
	q.trim()
}

// resolved reports whether nothing that is still to come can change the judgement of
// the instant c of the pace: every joined meter has a later conversion, or has been
// silent for so long that it counts as lost.
func (q *Pairer) resolved(pace *channel, c conversion) bool {
	for _, role := range joined {
		o := q.channels[role]
		if o == nil || o == pace {
			continue
		}
		if o.sameLine(pace) && o.heard >= c.at {
			continue
		}
		if n := len(o.convs); n > 0 && o.convs[n-1].t >= c.t+q.apart(o, pace, c) {
			continue
		}
		if q.newest > o.since(q.first)+o.silence()+outOfOrder {
			continue
		}
		return false
	}
	return true
}

// apart is by how much a conversion of o must be later than the conversion c of the
// pace to be so for certain, s.
func (q *Pairer) apart(o, pace *channel, c conversion) float64 {
	if o.role != Gate || o == pace || o.sameLine(pace) {
		return 0
	}
	return o.unsure(o.cycleAt(c.t)) + pace.unsure(c.cycle)
}

// outOfOrder is by how much meters may be heard out of order, s.
const outOfOrder = 0.5

// trim forgets conversions that no later judgement looks at.
func (q *Pairer) trim() {
	keep := q.done - 2*q.window(q.done) - 2*frozenSpan
	for _, h := range q.held {
		keep = math.Min(keep, h.c.t-q.window(h.c.t))
	}
	for _, c := range q.channels {
		c.trim(keep)
	}
}

// window is how long all must have stood still at instant t, s.
func (q *Pairer) window(t float64) float64 {
	if q.p.Window > 0 {
		return q.p.Window
	}
	w := leastWindow
	for _, role := range joined {
		if c := q.channels[role]; c != nil && !c.away(t, t) {
			w = math.Max(w, 4*c.cycleAt(t))
		}
	}
	return w
}
