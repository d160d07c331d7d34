package bias

import (
	"cmp"
	"math"
	"slices"

	"gatesill/fit/lot"
)

// What a [Choice] changes.
const (
	ChangeTop    = "top"
	ChangeBottom = "bottom"
	ChangeBoth   = "top and bottom"
)

// Choice is a network with resistors of a series for one gate voltage.
type Choice struct {
	Series  Series
	Change  string
	Network Network
	Gate    float64 // V, nominal, the trimmer in the middle
	Off     float64 // V, from the gate voltage wanted
	Idle    Spread  // of the devices it is for
}

// choose proposes values for the lot's centre.
func (p *Plan) choose() {
	n := p.Network
	if n == nil {
		return
	}
	units := p.counted()
	for _, s := range p.Series {
		p.Choices = append(p.Choices, n.choices(s, p.Centre, units)...)
	}
	if isNumber(p.Band.Low) && (n.Top > 0 || n.Bottom > 0) {
		t := n.recentre(p.Series, Range{p.Band.Low, p.Band.High})
		p.Trim = &t
	}
}

// choices are the values of one series that bring the gate voltage nearest to v: top
// changed, bottom changed, and both with their sum within a fifth of what it was.
// Checked: TestChoicesAreNearest.
func (n *Network) choices(s Series, v float64, units []*Unit) []Choice {
	var out []Choice
	add := func(what string, m Network) {
		// The same resistors again are no choice more.
		if slices.ContainsFunc(out, func(c Choice) bool { return c.Network == m }) {
			return
		}
		out = append(out, choiceOf(s, what, m, v, units))
	}
	if m, ok := n.nearestTop(s, v); ok {
		add(ChangeTop, m)
	}
	if m, ok := n.nearestBottom(s, v); ok {
		add(ChangeBottom, m)
	}
	if m, ok := n.nearestBoth(s, v); ok {
		add(ChangeBoth, m)
	}
	return out
}

// choiceOf is network m, chosen for gate voltage v.
func choiceOf(s Series, what string, m Network, v float64, units []*Unit) Choice {
	gate := m.At(0.5)
	return Choice{Series: s, Change: what, Network: m, Gate: gate, Off: gate - v, Idle: spreadAt(units, gate)}
}

// idealTop gives the top resistor with which the network gives v, the trimmer in its
// middle; at or below 0 where none does.
func (n *Network) idealTop(v float64) float64 {
	low, share := n.Bottom+n.Trimmer/2, v/n.Supply
	top := low * (1/share - 1)
	if n.In == AtGate {
		top -= n.Trimmer / 2
	}
	return top
}

// idealBottom is the same for the bottom resistor.
func (n *Network) idealBottom(v float64) float64 {
	share := v / n.Supply
	above := n.Top
	if n.In == AtGate {
		above += n.Trimmer / 2
	}
	return above*share/(1-share) - n.Trimmer/2
}

func (n *Network) nearestTop(s Series, v float64) (Network, bool) {
	if !(n.Bottom > 0) {
		return *n, false
	}
	return n.nearest(s.Around(n.idealTop(v), 1), v, func(m *Network, r float64) { m.Top = r })
}

func (n *Network) nearestBottom(s Series, v float64) (Network, bool) {
	if !(n.Top > 0) {
		return *n, false
	}
	return n.nearest(s.Around(n.idealBottom(v), 1), v, func(m *Network, r float64) { m.Bottom = r })
}

// nearest is the network with that of the values that brings it nearest to v.
func (n *Network) nearest(values []float64, v float64, set func(m *Network, r float64)) (Network, bool) {
	best, off := *n, math.Inf(1)
	for _, r := range values {
		m := *n
		set(&m, r)
		if d := math.Abs(m.At(0.5) - v); d < off {
			best, off = m, d
		}
	}
	return best, len(values) > 0
}

// mostChange is by what factor the sum of both resistors may grow, so that the current
// through the divider stays about what it was (judgement).
const mostChange = 1.2

// nearestBoth changes both resistors; of the pairs within 0.1 mV of the nearest, that
// with the least change of their sum.
func (n *Network) nearestBoth(s Series, v float64) (Network, bool) {
	if !n.Complete() {
		return *n, false
	}
	sum := n.Top + n.Bottom
	type pair struct {
		Network
		off, change float64
	}
	var pairs []pair
	least := math.Inf(1)
	for _, b := range s.Around(mostChange*sum, 2*len(s.Decade())) {
		m := *n
		m.Bottom = b
		m, ok := m.nearestTop(s, v)
		q := pair{m, math.Abs(m.At(0.5) - v), math.Abs(m.Top+m.Bottom-sum) / sum}
		if !ok || q.change > mostChange-1 {
			continue
		}
		pairs, least = append(pairs, q), math.Min(least, q.off)
	}
	pairs = slices.DeleteFunc(pairs, func(q pair) bool { return q.off > least+1e-4 })
	if len(pairs) == 0 {
		return *n, false
	}
	return slices.MinFunc(pairs, func(a, b pair) int { return cmp.Compare(a.change, b.change) }).Network, true
}

// trimmers are the values that trimmers come in, per decade (common practice, no source).
var trimmers = []float64{1, 2, 5}

// Trim is a trimmer between top and bottom, or in bottom where the network has it there, that
// covers a range.
type Trim struct {
	Wanted  Range   // V
	Network Network // the least trimmer that does, with a top resistor of Series
	Series  Series
	Change  string  // the resistor that was chosen beside it, ChangeTop or ChangeBottom
	Reach   Range   // V, nominal
	Sure    Range   // V, of every board, supply and resistors in their tolerances
	From    float64 // settings of the trimmer, nominal, at the ends of the range wanted
	To      float64
	Found   bool
}

// recentre finds the least trimmer, with a resistor of the first series that will do,
// of which every board covers the range wanted; bottom stays, or top where there is no bottom.
//
// Of the resistors that do, that with the most room at the tighter end is taken. Checked: TestRecentre.
func (n *Network) recentre(series []Series, want Range) Trim {
	t := Trim{Wanted: want, Change: ChangeTop}
	if !(n.Bottom > 0) {
		t.Change = ChangeBottom
	}
	middle := (want.Low + want.High) / 2
	for decade := 10.0; decade <= 1e5; decade *= 10 {
		for _, f := range trimmers {
			for _, s := range series {
				m := *n
				m.Trimmer, m.In = f*decade, cmp.Or(n.In, AtGate)
				if best, ok := m.covering(s, t.Change, want, middle); ok {
					t.Network, t.Series, t.Found = best, s, true
					t.Reach, t.Sure = best.Reach(), best.Sure()
					from, to := best.Setting(want.Low), best.Setting(want.High)
					t.From, t.To = math.Min(from, to), math.Max(from, to)
					return t
				}
			}
		}
	}
	return t
}

func (n *Network) covering(s Series, change string, want Range, middle float64) (Network, bool) {
	ideal := n.idealTop(middle)
	if change == ChangeBottom {
		ideal = n.idealBottom(middle)
	}
	best, room := *n, -slack
	found := false
	for _, r := range s.Around(ideal, 6) {
		m := *n
		if change == ChangeTop {
			m.Top = r
		} else {
			m.Bottom = r
		}
		sure := m.Sure()
		if d := math.Min(want.Low-sure.Low, sure.High-want.High); d >= room {
			best, room, found = m, d, true
		}
	}
	return best, found
}

// BinChoice is the resistor for one bin of a sorted lot.
type BinChoice struct {
	Bin     string
	Low     float64 // V, edges
	High    float64
	Devices []string
	Choice
}

// ForBins proposes, for every bin that has devices, a value of the finest series for
// its middle; the idle current is that of its devices.
func (p *Plan) ForBins(bins []lot.Bin) {
	n := p.Network
	if n == nil {
		return
	}
	finest := slices.MaxFunc(p.Series, func(a, b Series) int { return cmp.Compare(len(a.Decade()), len(b.Decade())) })
	for _, b := range bins {
		if len(b.Devices) == 0 {
			continue
		}
		var names []string
		for _, d := range b.Devices {
			names = append(names, d.Name)
		}
		var units []*Unit
		for _, u := range p.counted() {
			if slices.Contains(names, u.Name) {
				units = append(units, u)
			}
		}
		middle, change := (b.Low+b.High)/2, ChangeTop
		m, ok := n.nearestTop(finest, middle)
		if !(n.Bottom > 0) {
			change = ChangeBottom
			m, ok = n.nearestBottom(finest, middle)
		}
		if ok {
			p.Bins = append(p.Bins, BinChoice{b.Name, b.Low, b.High, names, choiceOf(finest, change, m, middle, units)})
		}
	}
}
