package acquire

import (
	"math"
	"slices"

	"gatesill/store/record"
)

// coarsely is the share of the window within which one instant is judged like the one before.
const coarsely = 1.0 / 64

// judgement is what was found at one instant.
type judgement struct {
	t       float64 // s, the instant
	stands  bool    // the gate stands still
	settled bool    // all does
	taken   bool    // the plateau has given its point
	why     string  // what keeps it from being settled
}

// span is the conversions of one channel within a window.
type span struct {
	c     *channel
	convs []conversion
	state record.PointState // all are in this state; "": all are numbers
}

// inWindow gives the conversions of c from one instant to another when they are
// whole: none lost, none left out, all numbers or all in one state, reaching from end
// to end.
func (c *channel) inWindow(from, to float64) (span, bool) {
	convs := c.convs[c.from(from):c.after(to)]
	s := span{c: c, convs: convs}
	if len(convs) < leastCount {
		return s, false
	}
	s.state = convs[0].state
	for i := range convs {
		if convs[i].state != s.state || i > 0 && !convs[i].whole {
			return s, false
		}
	}
	last := &convs[len(convs)-1]
	far := gapCycles*last.cycle + c.timing.Jitter
	if c.role == Gate && c.from(from) == 0 && convs[0].t-from > last.cycle/2 {
		return s, false // what was before the first reading is not known
	}
	return s, last.cycle > 0 && convs[0].t-from <= far && to-last.t <= far
}

func (s span) mean() (v, t float64) {
	for i := range s.convs {
		v += s.convs[i].v
		t += s.convs[i].t
	}
	n := float64(len(s.convs))
	return v / n, t / n
}

// extent is the least and the greatest.
func (s span) extent() (lo, hi float64) {
	lo, hi = s.convs[0].v, s.convs[0].v
	for i := range s.convs {
		lo, hi = math.Min(lo, s.convs[i].v), math.Max(hi, s.convs[i].v)
	}
	return lo, hi
}

// slope is that of the line of least squares, unit/s.
func (s span) slope() float64 {
	mv, mt := s.mean()
	var up, down float64
	for i := range s.convs {
		d := s.convs[i].t - mt
		up += d * (s.convs[i].v - mv)
		down += d * d
	}
	if down == 0 {
		return 0
	}
	return up / down
}

// digit is one count of the last conversion.
func (s span) digit() float64 { return s.convs[len(s.convs)-1].digit }

// steady reports whether the means of the first and of the second half of the window
// differ by no more than 2 %. At small readings 2 % is less than the display can show: what 1.5 counts
// explain, or the scatter of many readings, is no drift. The scatter is that of the
// middle one of the differences from one conversion to the next, which a single step
// does not change; it takes eight to tell it from a drift.
func (s span) steady(from, to float64) bool {
	if s.state != "" {
		return true
	}
	middle := (from + to) / 2
	k := 0
	for k < len(s.convs) && s.convs[k].t < middle {
		k++
	}
	if k == 0 || k == len(s.convs) {
		return false
	}
	a, _ := span{convs: s.convs[:k]}.mean()
	b, _ := span{convs: s.convs[k:]}.mean()
	mean, _ := s.mean()
	room := math.Max(halvesShare*math.Abs(mean), 1.5*s.digit())
	if len(s.convs) >= 8 {
		n := float64(len(s.convs))
		room = math.Max(room, 3*s.scatter()*math.Sqrt(1/float64(k)+1/(n-float64(k))))
	}
	return math.Abs(b-a) <= room
}

// scatter is the standard deviation of single conversions about a smooth course: the
// median of the differences d of neighbours over 0.6745 √2 (normal distribution).
func (s span) scatter() float64 {
	step := max(1, len(s.convs)/200) // 200 tell it well enough
	d := make([]float64, 0, len(s.convs)/step+1)
	for i := 1; i < len(s.convs); i += step {
		d = append(d, math.Abs(s.convs[i].v-s.convs[i-1].v))
	}
	slices.Sort(d)
	return d[len(d)/2] / (0.6745 * math.Sqrt2)
}

// band is the range within which the gate counts as standing still, V.
func (q *Pairer) band(digit float64) float64 {
	b := math.Max(bandVolts, bandCounts*digit)
	if q.p.Step > 0 {
		b = math.Min(b, math.Max(q.p.Step/2, bandCounts*digit))
	}
	return b
}

// rearm is by how much the gate must move for the next settled point, V.
func (q *Pairer) rearm(digit float64) float64 {
	r := rearmBands * q.band(digit)
	if q.p.Step > 0 {
		r = math.Min(r, math.Max(q.p.Step/2, digit))
	}
	return r
}

// gateStands looks at the gate from one instant to another, and at the conversion
// that is later than the end by more than apart, for the gate may have begun to move
// before the end. extent is the range of all of these, V.
func (q *Pairer) gateStands(from, to, apart float64) (s span, extent float64, why string) {
	g := q.channels[Gate]
	if g == nil {
		return s, 0, "no gate meter"
	}
	s, ok := g.inWindow(from, to)
	switch {
	case !ok:
		return s, 0, "few readings of the gate"
	case s.state != "":
		return s, 0, "no number of the gate"
	}
	lo, hi := s.extent()
	end := to
	last := g.from(to + apart)
	if last == len(g.convs) && !q.ended {
		return s, 0, "the gate meter is silent"
	}
	for i := g.after(to); i <= last && i < len(g.convs); i++ {
		next := &g.convs[i]
		if !next.whole || !next.number() {
			return s, 0, "a reading of the gate was lost"
		}
		lo, hi, end = math.Min(lo, next.v), math.Max(hi, next.v), next.t
	}
	extent = hi - lo
	digit := s.digit()
	// A display that flickers between two counts has a slope of up to 0.75 counts a second
	// in 1.6 s; coarse ones must not be refused for that.
	steep := math.Max(q.p.SlopeMax, 1.2*digit/(end-from))
	if extent > q.band(digit)*(1+1e-9) || math.Abs(s.slope()) > steep {
		return s, extent, "the gate moves"
	}
	return s, extent, ""
}

// judge decides what the instant is: of a plateau, or on the move.
func (q *Pairer) judge(i instant) {
	to := i.c.t
	w := q.window(to)
	if to-q.state.t < w*coarsely && to >= q.state.t {
		if !q.state.stands {
			q.hold(i) // fast meters: what was so a moment ago still is
		}
		return
	}
	from := to - w
	j := judgement{t: to}
	frozen := q.isFrozen(to)
	g, apart := q.channels[Gate], 0.0
	if g != nil {
		apart = q.apart(g, i.pace, i.c)
	}
	gate, extent, why := q.gateStands(from, to, apart)
	j.why = why
	if j.stands = why == ""; !j.stands {
		q.release(from)
		q.hold(i)
		q.state = j
		return
	}
	q.release(from)
	q.held = q.held[:0] // what is left of them is of this plateau
	var spans []span
	// What the others said before the first reading of the gate was not watched.
	from = gate.convs[0].t + apart
	for _, role := range joined {
		c := q.channels[role]
		if c == nil || role == Gate || c != i.pace && c.away(from, to) {
			continue
		}
		s, ok := c.inWindow(from, to)
		switch {
		case !ok:
			j.why = "few readings of the " + role + " meter"
		case !s.steady(from, to):
			j.why = "the " + role + " reading drifts"
		default:
			spans = append(spans, s)
			continue
		}
		q.state = j
		return
	}
	vg, _ := gate.mean()
	j.settled = true
	j.taken = !(math.IsNaN(q.last) || math.Abs(vg-q.last) > q.rearm(gate.digit()))
	if frozen {
		j.settled, j.why = false, "the gate meter repeats itself while the current moves"
		if !j.taken {
			q.report.Frozen++
		}
	} else if !j.taken {
		q.last, j.taken = vg, true
		q.report.Settled++
		q.points = append(q.points, q.settledPoint(i, gate, spans, extent, from))
	}
	q.state = j
}

// hold keeps an instant on the move until it is known what came after it.
func (q *Pairer) hold(i instant) {
	if q.p.Free && i.c.number() && i.pace.role != Gate {
		q.held = append(q.held, i)
	}
}

// settledPoint is the means over a window: of the gate over all of it, of the others
// from when it was watched.
//
// While the gate stands still it may go anywhere within the extent of its readings, widened by
// one count. The means over two sets of instants, n1 and n2 evenly over the window and shifted by
// their unsure instants, differ by no more than the extent times the greatest difference of
// the shares of the instants before any moment: 1/n of the fewer and the shift over
// the window (re-derived; exact for one step at any moment). Averages of the current
// over a gate that moves so little are off by less than 0.01 mV in weak inversion,
// which is left out.
func (q *Pairer) settledPoint(i instant, gate span, spans []span, extent, from float64) Point {
	vg, t := gate.mean()
	p := NewPoint(t)
	p.Settled, p.N = true, len(gate.convs)
	p.set(gate.c.role, vg, gate.digit())
	fewest := len(gate.convs)
	for _, s := range spans {
		v, mean := s.mean()
		if s.c == i.pace {
			p.At, fewest = mean, min(fewest, len(s.convs))
		}
		if s.state != "" {
			p.mark(s.c.role, s.state, s.convs[0].raw)
			continue
		}
		p.set(s.c.role, v, s.digit())
	}
	if !gate.c.sameLine(i.pace) && gate.c != i.pace {
		u := gate.c.unsure(gate.convs[0].cycle) + i.pace.unsure(i.c.cycle)
		p.Bound = (extent + gate.digit()) * math.Min(1, 1/float64(fewest)+u/(i.c.t-from))
	}
	q.join(&p, i, from, i.c.t)
	return p
}

// join adds the roles that need not stand still, as means of what they said in the
// time given or the latest not long before, and says which of the joined meters are missing.
func (q *Pairer) join(p *Point, i instant, from, to float64) {
	for _, role := range []string{Supply, Temperature} {
		c := q.channels[role]
		if c == nil {
			continue
		}
		sum, n, digit := 0.0, 0.0, 0.0
		add := func(x *conversion) {
			if x.number() {
				sum, n, digit = sum+x.v, n+1, x.digit
			}
		}
		for k := c.from(from); k < c.after(to); k++ {
			add(&c.convs[k])
		}
		if k := c.after(to); n == 0 && k > 0 {
			if x := &c.convs[k-1]; to-x.t <= gapCycles*math.Max(x.cycle, to-from) {
				add(x)
			}
		}
		if n > 0 {
			p.set(role, sum/n, digit)
		} else {
			p.mark(role, record.Missing, "")
		}
	}
	for _, role := range joined {
		if q.channels[role] != nil && !p.has(role) {
			p.mark(role, record.Missing, "")
		}
	}
}

// frozenSpan is how far back a gate meter that repeats itself is held against the
// current, s; a part that warms up does not change its current so fast.
const (
	frozenSpan  = 3.0
	frozenShare = 1.2
	frozenLeast = 20 // counts of the current: what was switched on is no sign
	frozenCount = 4  // conversions of the gate
)

// isFrozen reports whether the gate meter, at instant t, is in a run of like digits
// during which the current moved as it does when the gate is turned.
func (q *Pairer) isFrozen(t float64) bool {
	g, pace := q.channels[Gate], q.pace()
	if g == nil || g == pace {
		return false
	}
	k := g.after(t) - 1
	if k < 0 || !g.convs[k].number() {
		return false
	}
	end := &g.convs[k]
	if !math.IsNaN(q.frozenRun) && q.frozenRun == end.run {
		return true
	}
	if end.n < frozenCount {
		return false
	}
	guard := g.unsure(end.cycle) + pace.unsure(pace.cycleAt(t)) + (g.timing.Integration+pace.timing.Integration)/2
	lo, hi := math.Inf(1), 0.0
	for i := pace.from(math.Max(end.run+guard, t-frozenSpan)); i < len(pace.convs) && pace.convs[i].t <= end.t-guard; i++ {
		if c := &pace.convs[i]; c.number() && math.Abs(c.v) >= frozenLeast*c.digit {
			lo, hi = math.Min(lo, math.Abs(c.v)), math.Max(hi, math.Abs(c.v))
		}
	}
	if hi > frozenShare*lo && lo > 0 {
		q.frozenRun = end.run
		return true
	}
	return false
}
