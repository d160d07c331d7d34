package acquire

import (
	"bytes"
	"math"
	"slices"
	"sort"

	"gatesill/store/record"
)

// conversion is what one meter found once, with the instant at which it did.
type conversion struct {
	at    float64           // s, arrival
	t     float64           // s, middle of the conversion
	v     float64           // SI unit; NaN with a state
	state record.PointState // why there is no number
	raw   string            // as it was written, of a state
	digit float64           // one count; 0 not known
	cycle float64           // s, of the meter when this came; 0 not known
	whole bool              // nothing was lost or left out between the conversion before and this
	run   float64           // s, instant of the first of the conversions in a row that say the same
	n     int               // how many of these there were, with this
}

func (c *conversion) number() bool { return c.state == "" }

// channel is the conversions of one role, in their order, after what is not to be
// believed was left out.
type channel struct {
	role   string
	timing Timing
	known  bool // the timing is
	twice  bool
	report *Report

	convs     []conversion
	meter     string
	heard     float64        // s, arrival of the last reading that stood for the quantity; -Inf: none
	broken    bool           // something was lost or left out since the last conversion
	skip      int            // numbers still to be left out after a change of range
	digit     float64        // of the last reading with a number
	intervals []float64      // s, the latest
	pending   *conversion    // jumped, not yet confirmed
	frame     record.Reading // last one accepted, for telling duplicates
	paired    bool           // the last frame was the second of its conversion
	latest    record.Reading // the last one that came, whatever it was
	changes   int            // of digits
	numbers   int            // readings with a number
}

const (
	medianOf    = 9    // intervals
	sameCycles  = 0.75 // a like frame within this many cycles is the same conversion
	jumpShare   = 0.2
	jumpCounts  = 400 // a fifth of the smallest display, 2000 counts
	lostCycles  = 3
	lostSeconds = 1.0
)

func newChannel(role string, p Pairing, report *Report) *channel {
	t, known := p.Timing[role]
	return &channel{role: role, timing: t, known: known, twice: p.Twice[role], report: report, heard: math.Inf(-1)}
}

// cycle is the time from one conversion to the next, s: the median of the latest
// intervals, the upper of the two middle ones (frames sent twice shorten every other
// interval before they are known to be). 0: not known.
func (c *channel) cycle() float64 {
	if len(c.intervals) < 2 {
		return 0
	}
	var buf [medianOf]float64
	s := append(buf[:0], c.intervals...)
	slices.Sort(s)
	return s[len(s)/2]
}

// unsure is the greatest error of the instant of a conversion, s. Batching makes a
// frame late by 0 to Jitter; half of it is taken off by [channel.instant].
func (c *channel) unsure(cycle float64) float64 {
	if !c.known || math.IsNaN(c.timing.LagU) {
		return cycle + c.timing.Jitter/2
	}
	return c.timing.LagU + c.timing.Jitter/2
}

func (c *channel) instant(at float64) float64 { return c.timing.Instant(at) - c.timing.Jitter/2 }

// silence is after how long a meter counts as lost, s.
func (c *channel) silence() float64 { return math.Max(lostCycles*c.cycle(), lostSeconds) }

// since is when the meter was last heard, s, or when all began.
func (c *channel) since(first float64) float64 { return math.Max(c.heard, first) }

// sameLine reports whether both roles are columns of one line.
func (c *channel) sameLine(o *channel) bool { return c.meter != "" && c.meter == o.meter }

// add takes the next reading of the role.
func (c *channel) add(r record.Reading) {
	c.latest = r
	c.meter = r.Meter
	if r.Refused != "" || r.At < c.heard {
		c.report.Refused++
		c.broken = true
		return
	}
	cycle := c.cycle()
	interval := r.At - c.heard
	if c.duplicate(r, interval, cycle) {
		c.report.Duplicates++
		return
	}
	if !math.IsInf(interval, 0) {
		if len(c.intervals) == medianOf {
			c.intervals = append(c.intervals[:0], c.intervals[1:]...)
		}
		c.intervals = append(c.intervals, interval)
		if cycle > 0 && interval > gapCycles*cycle+c.timing.Jitter {
			c.report.Gaps++
			c.broken = true
			c.pending = nil // who jumped and then fell silent is not believed
		}
	}
	c.frame, c.heard = r, r.At
	v, ok := r.Value.Get()
	n := conversion{at: r.At, t: c.instant(r.At), v: v, digit: r.Digit.Or(0), cycle: c.cycle()}
	if r.State != "" || !ok {
		c.report.States++
		n.v, n.state, n.raw = math.NaN(), r.State, string(r.Raw)
		if n.state == "" {
			n.state = record.Missing
		}
		c.confirm()
		c.keep(n)
		c.skip = max(c.skip, 1)
		return
	}
	c.numbers++
	changed := c.rangeChanged(n.digit)
	if changed || c.skip > 0 {
		c.report.RangeChanges++
		if c.skip > 0 { // after an overload the first on the new range is this one
			c.skip--
		} else {
			c.skip = 1
		}
		c.pending = nil
		c.broken = true
		return
	}
	if p := c.pending; p != nil {
		before := c.convs[len(c.convs)-1].v
		if math.Abs(n.v-before) < math.Abs(p.v-before)/2 {
			c.report.Jumps++
			c.pending = nil
			c.broken = true
		} else {
			c.confirm()
		}
	}
	if c.jumps(n) {
		c.pending = &n
		return
	}
	c.keep(n)
}

// duplicate reports whether r is the frame before it once more: the same bytes too
// early for another conversion, or the second of a meter that sends everything twice.
func (c *channel) duplicate(r record.Reading, interval, cycle float64) bool {
	again := !c.paired && c.heard > math.Inf(-1) && bytes.Equal(r.Raw, c.frame.Raw) && r.State == c.frame.State && r.Value == c.frame.Value &&
		(c.twice && !(cycle > 0 && interval > sameCycles*cycle) || cycle > 0 && interval < sameCycles*cycle-c.timing.Jitter)
	c.paired = again && c.twice
	return again
}

// rangeChanged reports whether the digits of the display changed. Text whose trailing
// zeros were dropped changes them all the time; then it means nothing.
func (c *channel) rangeChanged(digit float64) bool {
	before := c.digit
	if digit > 0 {
		c.digit = digit
	}
	if !(digit > 0 && before > 0) || math.Abs(digit-before) <= 0.01*before {
		return false
	}
	c.changes++
	return c.changes <= 4 || 5*c.changes <= c.numbers
}

// jumps reports whether n lies so far from the conversion before it that it is only
// believed with the next.
func (c *channel) jumps(n conversion) bool {
	if len(c.convs) == 0 || c.broken {
		return false
	}
	p := &c.convs[len(c.convs)-1]
	return p.number() && math.Abs(n.v-p.v) > math.Max(jumpShare*math.Max(math.Abs(n.v), math.Abs(p.v)), jumpCounts*n.digit)
}

// confirm believes the conversion that jumped.
func (c *channel) confirm() {
	if p := c.pending; p != nil {
		c.pending = nil
		broken := c.broken
		c.broken = false
		c.keep(*p)
		c.broken = broken
	}
}

// keep appends a conversion.
func (c *channel) keep(n conversion) {
	n.whole = !c.broken && len(c.convs) > 0
	c.broken = false
	n.run, n.n = n.t, 1
	if k := len(c.convs); k > 0 && n.number() && n.v == c.convs[k-1].v {
		n.run, n.n = c.convs[k-1].run, c.convs[k-1].n+1
	}
	c.convs = append(c.convs, n)
}

// after is the index of the first conversion later than t.
func (c *channel) after(t float64) int {
	return sort.Search(len(c.convs), func(i int) bool { return c.convs[i].t > t })
}

// from is the index of the first conversion at t or later.
func (c *channel) from(t float64) int {
	return sort.Search(len(c.convs), func(i int) bool { return c.convs[i].t >= t })
}

// cycleAt is the cycle of the meter as it was known at instant t, s; 0 not known.
func (c *channel) cycleAt(t float64) float64 {
	if len(c.convs) == 0 {
		return 0
	}
	return c.convs[min(c.from(t), len(c.convs)-1)].cycle
}

// away reports whether the meter was lost all the time from one instant to another.
func (c *channel) away(from, to float64) bool {
	i, n := c.from(from), len(c.convs)
	if i < n && c.convs[i].t <= to {
		return false
	}
	switch {
	case i == 0:
		return true // nothing heard yet
	case i == n:
		return true // nothing heard since, and it was waited for
	}
	return c.convs[i].at-c.convs[i-1].at > math.Max(lostCycles*c.convs[i-1].cycle, lostSeconds)
}

// trim forgets conversions before t, when that is worth the copying.
func (c *channel) trim(t float64) {
	if i := c.from(t) - 2; i > 64 && i > len(c.convs)/2 {
		c.convs = append(c.convs[:0], c.convs[i:]...)
	}
}
