package bias

import (
	"fmt"
	"math"
	"strings"
)

// Change is what a lot needs other than its reference lot, whose bias network is there
// already.
type Change struct {
	Reference string
	Shift     float64 // V, between the centres
	OldGate   float64 // V, the centre of the reference lot
	AtOld     float64 // A, of a device at the lot's centre there; NaN: not known, or beyond its curve
	Text      []string
}

// Against says what a lot needs other than its reference lot, in sentences. Both
// plans are made with the same options. It prefers none of the ways.
//
// Checked: TestAgainst.
func Against(ref, p *Plan) *Change {
	c := &Change{Reference: ref.Lot, Shift: p.Centre - ref.Centre, OldGate: ref.Centre, AtOld: math.NaN()}
	say := func(format string, args ...any) { c.Text = append(c.Text, fmt.Sprintf(format, args...)) }
	say("The centre of lot %s lies %s from that of lot %s (%s to %s).", p.Lot, millivolts(c.Shift), ref.Lot, volts(ref.Centre), volts(p.Centre))
	if i := p.AtCentre(ref.Centre); !math.IsNaN(i.I) {
		if i.Beyond == 0 {
			c.AtOld = i.I
		}
		say("At %s, the centre of lot %s, a device at the centre of lot %s draws %s instead of %s.", volts(ref.Centre), ref.Lot, p.Lot, DrawnWords(i), AmpWords(p.Idle))
	} else {
		say("What a device draws at %s, the centre of lot %s, is not known: neither curve nor gain of lot %s tells.", volts(ref.Centre), ref.Lot, p.Lot)
	}
	if n, r := p.Now, ref.Now; n != nil && r != nil {
		if n.Trimmed {
			say("The trimmer reaches %s of lot %s, and %s of lot %s.", coverWords(r.Covered), ref.Lot, coverWords(n.Covered), p.Lot)
		}
		if n.Idle.Known > 0 && r.Idle.Known > 0 {
			say("Left as it is, at %s, it gives lot %s %s in the median and lot %s %s (least %s, greatest %s).", volts(n.Middle),
				ref.Lot, DrawnWords(r.Idle.Median), p.Lot, DrawnWords(n.Idle.Median), DrawnWords(n.Idle.Least), DrawnWords(n.Idle.Most))
		}
	}
	return c
}

func coverWords(c Covered) string {
	text := fmt.Sprintf("%d of %d", c.Count, c.Of)
	if c.Count < c.Of {
		text += fmt.Sprintf(" (up to %.0f %% of its parts outside, %s confidence)", math.Ceil(100*c.Upper-0.5), percent(level))
	}
	return text
}

// Ways are the ways to serve the lot, in sentences, none preferred: as it is where that
// does, another resistor, another trimmer, one resistor a bin. Empty without a network.
func (p *Plan) Ways() []string {
	var out []string
	if n := p.Now; n != nil && n.Trimmed && isNumber(p.Band.Low) {
		reach, whose := n.Sure, "every board reaches"
		if n.Given {
			reach, whose = n.Reach, "the trimmer reaches"
		}
		if reach.Holds(p.Band.Low) && reach.Holds(p.Band.High) {
			out = append(out, fmt.Sprintf("As it is, %s %.3f to %s, what 95 %% of the lot need: nothing has to change.", whose, p.Band.Low, volts(p.Band.High)))
		}
	}
	if n := p.Network; n != nil {
		if text := ResistorWords(p.Choices, n); text != "" {
			out = append(out, text)
		}
	}
	if t := p.Trim; t != nil && t.Found {
		kept, changed := "bottom "+Ohms(t.Network.Bottom), "top "+Ohms(t.Network.Top)
		if t.Change == ChangeBottom {
			kept, changed = "top "+Ohms(t.Network.Top), "bottom "+Ohms(t.Network.Bottom)
		}
		out = append(out, fmt.Sprintf("Use a trimmer of %s with %s (%s) and %s: every board reaches %.3f to %s; %.3f to %s lie between %.0f and %.0f %% of its travel.", Ohms(t.Network.Trimmer), changed, t.Series, kept,
			t.Sure.Low, volts(t.Sure.High), t.Wanted.Low, volts(t.Wanted.High), 100*t.From, 100*t.To))
	} else if t != nil {
		out = append(out, fmt.Sprintf("No trimmer reaches %.3f to %s on every board with these tolerances.", t.Wanted.Low, volts(t.Wanted.High)))
	} else if p.Reach != nil && isNumber(p.Band.Low) && len(out) == 0 {
		out = append(out, fmt.Sprintf("Re-centre the trimmer: it has to reach %.3f to %s.", p.Band.Low, volts(p.Band.High)))
	}
	if len(p.Bins) > 1 {
		least, most := math.Inf(1), math.Inf(-1)
		for _, b := range p.Bins {
			least, most = math.Min(least, b.worst(-1)), math.Max(most, b.worst(1))
		}
		text := fmt.Sprintf("Sort: %d bins with a resistor each", len(p.Bins))
		if isNumber(least) && isNumber(most) {
			text += fmt.Sprintf(" give idle currents from %s to %s%s, tolerances aside", AmpWords(least), AmpWords(most), p.untouched())
		}
		out = append(out, text+".")
	}
	return out
}

// untouched are words for a trimmer that nobody turns.
func (p *Plan) untouched() string {
	if p.Network != nil && p.Network.Trimmer > 0 {
		return " with the trimmer in its middle"
	}
	return ""
}

// worst is the least (side -1) or greatest current in a bin; NaN beyond a curve.
func (b *BinChoice) worst(side int) float64 {
	i := b.Idle.Most
	if side < 0 {
		i = b.Idle.Least
	}
	if i.Beyond != 0 {
		return math.NaN()
	}
	return i.I
}

// ResistorWords says which value of one resistor brings the gate voltage to where it is
// wanted: "Change the top resistor from 1.96 kΩ to 1.82 kΩ (E96): 3.179 V, -9.4 mV from
// the centre; ...". "" where no choice changes only one.
func ResistorWords(choices []Choice, from *Network) string {
	for _, what := range []string{ChangeTop, ChangeBottom} {
		value := func(n *Network) float64 {
			if what == ChangeTop {
				return n.Top
			}
			return n.Bottom
		}
		var parts, kept []string
		found := false
		for i := range choices {
			c := &choices[i]
			if c.Change != what {
				continue
			}
			found = true
			if old := value(from); math.Abs(value(&c.Network)-old) < 1e-6*old {
				kept = append(kept, fmt.Sprintf("%s has nothing nearer than the %s that it is: %s, %s from the centre", c.Series, Ohms(old), volts(c.Gate), millivolts(c.Off)))
			} else {
				parts = append(parts, fmt.Sprintf("%s (%s): %s, %s from the centre", Ohms(value(&c.Network)), c.Series, volts(c.Gate), millivolts(c.Off)))
			}
		}
		if !found {
			continue
		}
		if len(parts) == 0 {
			return "Keep the " + what + " resistor: " + strings.Join(kept, "; ") + "."
		}
		head, also := "Choose as the "+what+" resistor ", "; or "
		if old := value(from); old > 0 {
			also = "; to "
			head = fmt.Sprintf("Change the %s resistor from %s to ", what, Ohms(old))
		}
		return head + strings.Join(append([]string{strings.Join(parts, also)}, kept...), "; ") + "."
	}
	return ""
}

// ResistorFor is [ResistorWords] for a network and the gate voltage wanted, with values
// of these series: for a comparison that says a bias resistor has to change. "" where
// the network is not complete or cannot give it. Checked: TestAgainst.
func ResistorFor(n *Network, gate float64, series []Series) string {
	if n.Check() != nil || !n.Complete() || !(gate/n.Supply > 0 && gate/n.Supply < 1) {
		return ""
	}
	var all []Choice
	for _, s := range series {
		all = append(all, n.choices(s, gate, nil)...)
	}
	return ResistorWords(all, n)
}

// ExtremeLine is the devices with the least and the greatest gate voltage on one line;
// nil where fewer than two have a current that is told. The total is twice the idle
// current where o has none.
func (p *Plan) ExtremeLine(o LineOptions) *Line {
	var lo, hi *Unit
	for _, u := range p.counted() {
		if u.drain.By == "" {
			continue
		}
		if lo == nil || u.Gate.Value < lo.Gate.Value {
			lo = u
		}
		if hi == nil || u.Gate.Value > hi.Gate.Value {
			hi = u
		}
	}
	if lo == nil || lo == hi {
		return nil
	}
	if !(o.Total > 0) {
		o.Total = 2 * p.Idle
	}
	l, err := LineOf([]Member{{lo.Name, lo.result}, {hi.Name, hi.result}}, p.Idle, p.Beta, p.pchannel, o)
	if err != nil {
		return nil
	}
	return l
}
