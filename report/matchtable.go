package report

import (
	"fmt"
	"io"
	"math"
	"strings"

	"gatesill/fit/lot"
	"gatesill/fit/match"
)

// MatchTable writes sets for people: quantity and aim first, then the sets, what
// would put right those that share badly, what is left over and why, how far from
// the best possible it is, and what other tolerances or more devices would give.
func MatchTable(w io.Writer, m Matched, style Style) error {
	p := &printer{w: w}
	wrapped(p, "", "", m.MatchLine(), style.Width)
	if len(m.Sets) == 0 {
		p.line("")
		wrapped(p, "", "", "No set: "+Clean(Sentence(m.Text)), style.Width)
	} else {
		p.line("")
		p.grid(setsGrid(&m, style))
		p.line("")
		wrapped(p, "", "  ", m.setsNote(), style.Width)
		if basis := m.sharingBasis(); basis != "" {
			wrapped(p, "", "  ", Clean(Sentence(basis)), style.Width)
		}
		p.line("")
		wrapped(p, "", "  ", m.boundWords(), style.Width)
		inPackages(p, &m, style)
		repairs(p, &m, style)
	}
	leftOver(p, &m, style)
	if len(m.TradeOff) > 1 {
		p.line("")
		p.line("%s", style.paint("Sets by tolerance", bold))
		p.grid(tradeOffGrid(&m, style))
	}
	for _, more := range m.More {
		wrapped(p, "", "  ", Clean(Sentence(more.Text)), style.Width)
	}
	if m.Cut {
		p.line("")
		wrapped(p, "", "  ", style.paint("Interrupted: these are the best sets found until then.", bold), style.Width)
	}
	if list := m.warnings(); len(list) > 0 {
		p.line("")
		lotWarnings(p, *m.Sheets[0], list, style)
	}
	return p.err
}

// setsGrid lists the sets. Values are shown once a device, the spread of each
// quantity in a column of its own.
func setsGrid(m *Matched, style Style) grid {
	n := len(m.Sets)
	numbers, members, alike, within, hot := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	power := make([]float64, n)
	imbalance, share := make([]float64, n), make([]float64, n)
	claimed, powered, beyond := false, false, false
	many := manyLots(m.Members)
	values := m.valueWriter()
	for i := range m.Sets {
		s := &m.Sets[i]
		numbers[i] = m.setLabel(s.Number)
		var words []string
		for _, d := range s.Devices {
			words = append(words, deviceName(d.Lot, d.Name, many)+" "+values(d))
		}
		members[i] = strings.Join(words, ", ")
		alike[i] = alikeWord(s.Alike, s.Limit)
		if !s.Within && m.hasTolerance() {
			within[i], beyond = "beyond", true
		}
		imbalance[i], share[i], power[i] = s.Sharing.Imbalance, s.Sharing.Share, s.Sharing.Power
		claimed = claimed || isNumber(s.Sharing.Imbalance)
		if h := s.Sharing.Hottest; h >= 0 && h < len(s.Devices) && isNumber(s.Sharing.Power) {
			hot[i], powered = deviceName(s.Devices[h].Lot, s.Devices[h].Name, many), true
		}
	}
	g := grid{style: style, cols: []column{
		{head: "set", cells: numbers, right: len(m.Locked) == 0}, {head: "devices", unit: m.valueUnits(), cells: members, wrap: 24},
	}}
	for c, crit := range m.By {
		g.cols = append(g.cols, spreadColumn(m, c, crit))
	}
	if claimed {
		g.cols = append(g.cols, sizeColumn("imbalance", "A", imbalance), column{head: "of idle", unit: "%", cells: percents(share), right: true})
	}
	if powered {
		c := sizeColumn("at most", "W", power)
		g.cols = append(g.cols, column{head: "hottest", cells: hot, rank: 1}, c)
	}
	g.cols = append(g.cols, column{head: "alike", cells: alike})
	if beyond {
		g.cols = append(g.cols, column{head: "tolerance", cells: within})
	}
	return g
}

func alikeWord(alike bool, limit float64) string {
	switch {
	case alike:
		return "yes"
	case !isNumber(limit):
		return "not known"
	}
	return "no"
}

// hasTolerance reports whether any tolerance was asked for.
func (m *Matched) hasTolerance() bool {
	for _, c := range m.By {
		if c.Within > 0 {
			return true
		}
	}
	return false
}

// valueUnits are the units in which values stand behind the devices.
func (m *Matched) valueUnits() string {
	var units []string
	for _, c := range m.By {
		units = append(units, valueInfo(c).Unit)
	}
	return strings.Join(units, ", ")
}

// valueInfo is what stands beside a device for a criterion: of a curve the gate
// bias at the idle current.
func valueInfo(c match.Criterion) KeyInfo {
	if c.Key == match.KeyCurve {
		return KeyInfo{Unit: "V"}
	}
	return KeyOf(c.Key)
}

// valueWriter writes the values of a device, without a prefix, so that they can be
// read off against each other.
func (m *Matched) valueWriter() func(match.Placed) string {
	return func(d match.Placed) string {
		var words []string
		for c, v := range d.Values {
			switch {
			case !isNumber(v):
				words = append(words, NotAvailable)
			case c == 0:
				words = append(words, fixed(v, valueDecimals(v, d.U, m.Step)))
			default:
				words = append(words, fixed(v, max(0, min(writtenDecimals(v), significant(v, 4)))))
			}
		}
		return strings.Join(words, " ")
	}
}

// valueDecimals is how many decimals a gate voltage gets: those of the display
// where it was read off one, else what its u leaves, at least to the millivolt.
func valueDecimals(v, u, step float64) int {
	if x := v / step; step > 0 && isNumber(x) && math.Abs(x-math.Round(x)) < 0.01 {
		return min(wholeSteps(step), 6)
	}
	if d, ok := DecimalsFor(u); ok {
		return min(max(d-1, 3), 6)
	}
	return max(0, min(max(3, writtenDecimals(v)), significant(v, 6)))
}

// spreadColumn is the spread of one criterion in every set.
func spreadColumn(m *Matched, c int, crit match.Criterion) column {
	x := make([]float64, len(m.Sets))
	for i, s := range m.Sets {
		x[i] = math.NaN()
		if c < len(s.Spreads) {
			x[i] = s.Spreads[c]
		}
	}
	if isGain(crit.Key) {
		return column{head: "gain spread", unit: "%", cells: percents(x), right: true}
	}
	cells := make([]string, len(x))
	for i, v := range x {
		cells[i] = spreadText(v)
	}
	return column{head: "spread", unit: "mV", cells: cells, right: true}
}

// spreadText writes a difference of gate voltages in millivolts, to a tenth where
// it is small.
func spreadText(v float64) string {
	if !isNumber(v) {
		return NotAvailable
	}
	mv := v * 1e3
	if d := writtenDecimals(math.Round(mv*10) / 10); mv < 100 && d > 0 {
		return fixed(mv, 1)
	}
	return fixed(mv, 0)
}

func percents(x []float64) []string {
	cells := make([]string, len(x))
	for i, v := range x {
		cells[i] = NotAvailable
		if isNumber(v) {
			d := 1
			if math.Abs(v) >= 0.0995 {
				d = 0
			}
			cells[i] = fixed(100*v, d)
		}
	}
	return cells
}

// sizeColumn is a column of sizes with two or three digits under one prefix.
func sizeColumn(head, unit string, x []float64) column {
	s := ScaleOf(unit, x...)
	cells := make([]string, len(x))
	for i, v := range x {
		cells[i] = NotAvailable
		if isNumber(v) {
			d := 1
			if math.Abs(s.Of(v)) >= 99.5 {
				d = 0
			}
			cells[i] = fixed(s.Of(v), d)
		}
	}
	return column{head: head, unit: s.Unit(unit), cells: cells, right: true}
}

// setsNote explains the columns.
func (m *Matched) setsNote() string {
	text := "spread: greatest less least."
	if m.Complementary {
		text = "spread: greatest less least, by magnitude; each set has as many n-channel as p-channel devices."
	}
	for _, s := range m.Sets {
		if isNumber(s.Sharing.Imbalance) {
			text += " imbalance: greatest less least current on one gate line that carries " + FormatGiven(m.At, "A") + " a device" + m.resistorWords() + "."
			break
		}
	}
	if isNumber(m.Vds) {
		text += " hottest, at most: the device that carries most, and its power at " + FormatGiven(m.Vds, "V") + orNothing(", ", Clean(m.VdsFrom)) + "."
	}
	return text + " alike: no two differ by more than 2·√2 standard uncertainties."
}

// resistorWords is the source resistor that the currents go with.
func (m *Matched) resistorWords() string {
	if m.SourceOhms > 0 {
		return " with " + FormatGiven(m.SourceOhms, "Ω") + " in each source"
	}
	return " without source resistors"
}

// sharingBasis is what the currents rest on, or why there are none.
func (m *Matched) sharingBasis() string {
	basis := ""
	for _, s := range m.Sets {
		if s.Sharing.Basis != "" && (basis == "" || isNumber(s.Sharing.Imbalance)) {
			basis = s.Sharing.Basis
			if isNumber(s.Sharing.Imbalance) {
				break
			}
		}
	}
	if isNumber(m.Gm) {
		return strings.TrimSuffix(basis, ".") + orNothing("; ", "g_m of "+FormatGiven(m.Gm, "S")+" as given, where readings tell none")
	}
	return basis
}

// boundWords say how good the sets are and how far from the best possible.
func (m *Matched) boundWords() string {
	var words []string
	if m.Text != "" {
		words = append(words, Clean(Sentence(m.Text)))
	} else {
		words = append(words, fmt.Sprintf("%d %s, sum of spreads %s mV.", len(m.Sets), sizeWords(m.Size), spreadText(m.Total)))
	}
	b := m.Bound
	switch {
	case b.Kind == match.Optimal:
		words = append(words, orNothing("No better answer exists: ", Clean(Sentence(b.Proof))))
	case b.Kind == match.LowerBound && isNumber(b.Total):
		text := "Lower bound: no answer with as many sets has a sum below " + spreadText(b.Total) + " mV"
		if isNumber(b.Gap) {
			text += fmt.Sprintf(", %s below this one", percents([]float64{b.Gap / (1 + b.Gap)})[0]+" %")
		}
		words = append(words, text+orNothing(": ", Clean(Sentence(b.Proof))))
	}
	return strings.Join(words, " ")
}

// inPackages says what the two sides of a package differ by, which no choice of
// sets changes.
func inPackages(p *printer, m *Matched, style Style) {
	said := false
	for _, s := range m.Sets {
		for _, in := range s.Inside {
			if !said {
				said = true
				p.line("")
				p.line("%s", style.paint("Inside packages, whatever they are set with", bold))
			}
			text := Clean(in.Package) + " (set " + itoa(s.Number) + "): its sides are " + spreadText(in.Spread) + " mV apart"
			if isNumber(in.Sharing.Imbalance) {
				text += ", " + FormatTwoDigits(in.Sharing.Imbalance, "A") + " on one gate line"
			}
			wrapped(p, "  ", "    ", text+".", style.Width)
		}
	}
}

// shownRepairs is how many repairs the terminal lists; --json has all.
const shownRepairs = 6

// repairs lists the sets that would need something to share equally, the worst
// first.
func repairs(p *printer, m *Matched, style Style) {
	var list []*match.Set
	for i := range m.Sets {
		if s := &m.Sets[i]; s.Repair.Text != "" && (!s.Within || !s.Alike) {
			list = append(list, s)
		}
	}
	if len(list) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint("To share equally all the same", bold))
	for k := range list {
		if k == shownRepairs {
			p.line("  and %d more (--json)", len(list)-k)
			return
		}
		s := list[len(list)-1-k] // the best come first in a matching
		wrapped(p, "  set "+m.setLabel(s.Number)+": ", "    ", Clean(Sentence(s.Repair.Text)), style.Width)
	}
}

func leftOver(p *printer, m *Matched, style Style) {
	if len(m.LeftOver) == 0 {
		return
	}
	many := manyLots(m.Members)
	var free, out []lot.Unsorted
	for _, l := range m.LeftOver {
		u := lot.Unsorted{Name: deviceName(l.Lot, l.Name, many), Why: Clean(l.Why)}
		if l.Out {
			out = append(out, u)
		} else {
			free = append(free, u)
		}
	}
	for _, part := range []struct {
		head string
		list []lot.Unsorted
	}{{"In no set", free}, {"Not given out", out}} {
		if len(part.list) == 0 {
			continue
		}
		p.line("")
		p.line("%s", style.paint(fmt.Sprintf("%s: %d", part.head, len(part.list)), bold))
		for _, g := range GroupNames(part.list) {
			wrapped(p, "  ", "    ", namesWords(g.Names, shownNames)+": "+Sentence(g.Text), style.Width)
		}
	}
}

func tradeOffGrid(m *Matched, style Style) grid {
	n := len(m.TradeOff)
	within, sets, total, mean, left, exact := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	imbalance := make([]float64, n)
	claimed := false
	for i, t := range m.TradeOff {
		within[i], sets[i], left[i] = spreadText(t.Within), itoa(t.Sets), itoa(t.Left)
		total[i], mean[i] = spreadText(t.Total), spreadText(t.Mean)
		if !t.Exact {
			exact[i] = "or more"
		}
		imbalance[i] = t.Imbalance
		claimed = claimed || isNumber(t.Imbalance)
	}
	g := grid{style: style, cols: []column{
		{head: "within", unit: "mV", cells: within, right: true}, {head: "sets", cells: sets, right: true}, {head: "", cells: exact, rank: 1},
		{head: "sum", unit: "mV", cells: total, right: true}, {head: "mean", unit: "mV", cells: mean, right: true, rank: 2},
		{head: "left over", cells: left, right: true},
	}}
	if claimed {
		g.cols = append(g.cols, sizeColumn("apart by that", "A", imbalance))
	}
	return g
}
