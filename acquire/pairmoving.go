package acquire

import (
	"math"
	"sort"

	"gatesill/store/record"
)

const (
	// aliasing multiplies T²/8 of the second difference: the chord of a rate that swings
	// with period P > 2T bends by T²/8 / cos²(πT/2P) of it, at most twice (re-derived).
	aliasing = 2
	// jerky takes its place where the gate started, stopped, turned back or was nudged: between
	// two readings the way may then have been made at any one moment.
	jerky      = 8
	jerkyShare = 0.25 // of the greater rate: the lesser one is below
	// unseen is the share of the way moved in a cycle by which a swing too fast for the
	// second difference may still bend it, see TestBoundsHold.
	unseen = 0.05
	// peakRate is by how much the rate within an interval may be over the greatest mean
	// rate of the intervals around.
	peakRate = 1.15
	// weakInversion is the least gate voltage over which a current grows e-fold, V.
	weakInversion = 0.026
)

// release finishes the instants on the move before t: no plateau can hold them any
// more, and the readings around them are there.
func (q *Pairer) release(t float64) {
	k := 0
	for ; k < len(q.held) && q.held[k].c.t < t; k++ {
		i := q.held[k]
		p, ok := q.between(i)
		switch {
		case !ok:
			q.report.Unpaired++
		case p.Bound > q.p.Tolerance:
			q.report.OverTolerance++
		default:
			q.report.Interpolated++
			q.points = append(q.points, p)
		}
	}
	q.held = append(q.held[:0], q.held[k:]...)
}

// between is the point at a conversion of the pace, the other meters interpolated to
// its instant. It needs a whole reading of the gate on either side and one more beyond each,
// from which its rate and its bends are known.
func (q *Pairer) between(i instant) (Point, bool) {
	g := q.channels[Gate]
	if g == nil {
		return Point{}, false
	}
	t := i.c.t
	p := NewPoint(t)
	p.N = 1
	p.set(i.pace.role, i.c.v, i.c.digit)
	if x, ok := g.on(i); ok {
		p.set(Gate, x.v, x.digit)
	} else {
		k := g.from(t)
		if k < 2 || k+1 >= len(g.convs) {
			return p, false
		}
		for _, x := range g.convs[k-2 : k+2] {
			if !x.number() {
				return p, false
			}
		}
		if !g.convs[k-1].whole || !g.convs[k].whole || !g.convs[k+1].whole {
			return p, false
		}
		p.N = 2
		p.set(Gate, line(&g.convs[k-1], &g.convs[k], t), g.convs[k].digit)
		p.Bound = q.movingBound(i, g, k)
	}
	for _, role := range joined {
		c := q.channels[role]
		if c == nil || c == g || c == i.pace {
			continue
		}
		if x, ok := c.on(i); ok {
			p.set(role, x.v, x.digit)
			continue
		}
		if k := c.from(t); k > 0 && k < len(c.convs) {
			if a, b := &c.convs[k-1], &c.convs[k]; a.number() && b.number() && b.whole {
				p.set(role, line(a, b, t), b.digit)
			}
		}
	}
	q.join(&p, i, t, t)
	return p, true
}

// on is the conversion of c in the same line of text as the instant.
func (c *channel) on(i instant) (conversion, bool) {
	if !c.sameLine(i.pace) {
		return conversion{}, false
	}
	k := sort.Search(len(c.convs), func(k int) bool { return c.convs[k].at >= i.c.at })
	if k == len(c.convs) || c.convs[k].at != i.c.at || !c.convs[k].number() {
		return conversion{}, false
	}
	return c.convs[k], true
}

// line is the straight line through two conversions at t.
func line(a, b *conversion, t float64) float64 {
	if b.t <= a.t {
		return b.v
	}
	return a.v + (b.v-a.v)*(t-a.t)/(b.t-a.t)
}

// movingBound is the greatest error of the gate voltage interpolated between its
// conversions k-1 and k to the instant i, V:
//
//	r (u_gate + u_pace) + bend + r² t_int² / 24 V_0
//
// with r the greatest rate of the intervals around, each widened by one count; u what
// the instants are unsure by; bend what the gate may leave the chord by, from the
// greatest change of the rate between neighbouring intervals; t_int the integration of the
// pace, over which a current that grows e-fold in V_0 is averaged. The last count of
// either display is not in it: it belongs to the readings, paired or not.
//
// Checked: TestBoundsHold, in simulation; no real meter was at hand.
func (q *Pairer) movingBound(i instant, g *channel, k int) float64 {
	around := 2.5 * math.Max(g.convs[k].cycle, i.c.cycle)
	var rate, change, before, beforeDt float64
	a := k - 1
	for a > 0 && g.convs[a].whole && g.convs[a-1].number() && (a > k-2 || i.c.t-g.convs[a-1].t <= around) {
		a--
	}
	for n := a + 1; n < len(g.convs) && (n <= k+1 || g.convs[n].t-i.c.t <= around); n++ {
		x, y := &g.convs[n-1], &g.convs[n]
		if !y.number() || !y.whole {
			break
		}
		dt := y.t - x.t
		if dt <= 0 {
			continue
		}
		s := (y.v - x.v) / dt
		rate = math.Max(rate, (math.Abs(y.v-x.v)+y.digit)/dt)
		if beforeDt > 0 {
			factor := float64(aliasing)
			if lo := min(s*before, s*s, before*before); lo < jerkyShare*max(s*s, before*before) {
				factor = jerky
			}
			change = math.Max(change, factor*math.Abs(s-before)/((dt+beforeDt)/2))
		}
		before, beforeDt = s, dt
	}
	rate *= peakRate
	dt := g.convs[k].t - g.convs[k-1].t
	bend := change*dt*dt/8 + unseen*rate*dt
	smear := rate * i.pace.timing.Integration
	return rate*(g.unsure(g.convs[k].cycle)+i.pace.unsure(i.c.cycle)) + bend + smear*smear/(24*weakInversion)
}

// set puts a number into the column of a role, rounded to a hundredth of its last
// digit: more is not in the mean of a few readings.
func (p *Point) set(role string, v, digit float64) {
	x, quantity := p.column(role)
	if x == nil {
		return
	}
	*x = rounded(v, digit)
	if digit > 0 {
		if p.Digits == nil {
			p.Digits = map[record.Quantity]float64{}
		}
		p.Digits[quantity] = digit
	}
}

func (p *Point) mark(role string, state record.PointState, raw string) {
	if _, quantity := p.column(role); quantity != "" {
		p.Marks = append(p.Marks, record.Mark{Quantity: quantity, State: state, Raw: raw})
	}
}

// has reports whether the column of the role has a number or a mark.
func (p *Point) has(role string) bool {
	x, quantity := p.column(role)
	for _, m := range p.Marks {
		if m.Quantity == quantity {
			return true
		}
	}
	return x == nil || !math.IsNaN(*x)
}

// column is the place of a role in the point; nil for a role that has none.
func (p *Point) column(role string) (*float64, record.Quantity) {
	switch role {
	case Gate:
		return &p.Vg, record.VG
	case Current:
		return &p.Id, record.ID
	case Load:
		return &p.Vl, record.VL
	case Drain:
		return &p.Vd, record.VD
	case Supply:
		return &p.Vdd, record.VDD
	case Temperature:
		return &p.Temp, record.Temp
	}
	return nil, ""
}
