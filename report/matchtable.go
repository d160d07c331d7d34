package report

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/match"
)

// MatchTable writes sets for people: quantity and aim first, then the sets, what
// would put right those that share badly, what is left over and why, how far from
// the best possible it is, and what other tolerances or more devices would give.
func MatchTable(w io.Writer, m Matched, style Style) error {
	p := &printer{w: w}
	wrapped(p, "", "", m.MatchLine(), style.Width)
	if text := m.toleranceLine(); text != "" {
		wrapped(p, "", "", text, style.Width)
	}
	if len(m.Sets) == 0 {
		p.line("")
		wrapped(p, "", "", "No set: "+Clean(Sentence(m.Text)), style.Width)
	} else {
		p.line("")
		p.grid(setsGrid(&m, style))
		p.line("")
		wrapped(p, "", "  ", m.setsNote(), style.Width)
		if basis := m.sharingBasis(); basis != "" {
			wrapped(p, "", "  ", "Currents: "+Clean(basis)+".", style.Width)
		}
		p.line("")
		wrapped(p, "", "  ", m.boundWords(), style.Width)
		if m.TimeEnded {
			wrapped(p, "", "  ", "The search was ended by its time limit: another run may find and number other sets. --lock takes those of its own run, and shows them.", style.Width)
		}
		inPackages(p, &m, style)
	}
	repairs(p, &m, style)
	leftOver(p, &m, style)
	if len(m.TradeOff) > 1 {
		p.line("")
		p.line("%s", style.paint("Sets by tolerance", bold))
		claimed := p.tradeOff(&m, style)
		p.line("")
		if claimed {
			wrapped(p, "", "  ", "imbalance: of two devices that far apart, with the lot's median transconductance.", style.Width)
		}
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
		members[i] = listCell(words, style.Width)
		alike[i] = alikeWord(s.Alike, s.Limit)
		if !s.Within && m.hasTolerance() {
			within[i], beyond = "beyond", true
		}
		imbalance[i], share[i] = s.Sharing.Imbalance, s.Sharing.Share
		claimed = claimed || isNumber(s.Sharing.Imbalance)
		if h := s.Sharing.Hottest; h >= 0 && h < len(s.Devices) && isNumber(s.Sharing.Power) {
			hot[i], powered = deviceName(s.Devices[h].Lot, s.Devices[h].Name, many)+" "+FormatTwoDigits(s.Sharing.Power, "W"), true
		}
	}
	g := grid{style: style, cols: []column{
		{head: "set", cells: numbers, right: len(m.Locked) == 0}, {head: "devices", unit: m.valueUnits(), cells: members},
	}}
	for c, crit := range m.By {
		g.cols = append(g.cols, spreadColumn(m, c, crit))
	}
	if claimed {
		g.cols = append(g.cols, sizeColumn("imbalance", "A", imbalance), column{head: "of idle", unit: "%", cells: percents(share), right: true})
	}
	if powered {
		g.cols = append(g.cols, column{head: "hottest", cells: hot, rank: 1})
	}
	g.cols = append(g.cols, column{head: "alike", cells: alike})
	if beyond {
		g.cols = append(g.cols, column{head: "tolerance", cells: within})
	}
	return g
}

// besides is what the columns beside a list of devices take.
const besides = 54

// listCell joins words for a cell, broken between them where the terminal is narrow:
// a value stays beside its device.
func listCell(words []string, width int) string {
	var b strings.Builder
	used := 0
	for i, word := range words {
		n := displayWidth(word)
		switch {
		case i == 0:
		case width > 0 && used+2+n > max(24, width-besides):
			b.WriteString(",\n")
			used = 0
		default:
			b.WriteString(", ")
			used += 2
		}
		b.WriteString(word)
		used += n
	}
	return b.String()
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
		units = append(units, KeyOf(valueKey(c)).Unit)
	}
	return strings.Join(units, ", ")
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
		return min(max(d-1, 3), max(3, writtenDecimals(v)), 6)
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
	return column{head: "spread", unit: "mV", cells: spreadCells(x), right: true}
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
	if m.inSteps() {
		text = "The gate voltages were read in steps of " + FormatGiven(max(m.Step, m.Coarsest), "V") + map[bool]string{true: " (coarsest)"}[m.Coarsest > m.Step] + ", which is all that can be claimed. spread: greatest less least."
	}
	if m.Complementary {
		text += " Voltages are compared by magnitude; each set has as many n-channel as p-channel devices."
	}
	for _, s := range m.Sets {
		if isNumber(s.Sharing.Imbalance) {
			text += " imbalance: greatest less least current on one gate line that carries " + FormatGiven(m.At, "A") + " a device," + m.resistorWords() + "."
			break
		}
	}
	if isNumber(m.Vds) {
		text += " hottest: the device that carries most, and its power at " + FormatGiven(m.Vds, "V") + orNothing(", ", Clean(m.VdsFrom)) + "."
	}
	return text + " alike: no two differ by more than 2·√2 standard uncertainties."
}

// inSteps reports whether the values are readings of a display, not read between
// its steps.
func (m *Matched) inSteps() bool {
	if !(m.Step > 0) || m.By[0].Key == match.KeyCurve {
		return false
	}
	for _, s := range m.Sets {
		for _, d := range s.Devices {
			if x := d.Values[0] / m.Step; !(math.Abs(x-math.Round(x)) < 0.01) {
				return false
			}
		}
	}
	return true
}

// resistorWords is the source resistor that the currents go with.
func (m *Matched) resistorWords() string {
	if m.SourceOhms > 0 {
		return " with " + FormatGiven(m.SourceOhms, "Ω") + " in each source"
	}
	return " without source resistors"
}

// sharingBasis is what the currents rest on; where there are none, and no warning
// tells it, why.
func (m *Matched) sharingBasis() string {
	basis := ""
	for _, s := range m.Sets {
		if isNumber(s.Sharing.Imbalance) {
			basis = strings.TrimSuffix(s.Sharing.Basis, ".")
			if isNumber(m.Gm) {
				basis += "; g_m " + FormatGiven(m.Gm, "S") + " as given, where the readings tell none"
			}
			return basis
		}
		basis = s.Sharing.Basis
	}
	if slices.ContainsFunc(m.Matching.Warnings, func(w fit.Warning) bool { return w.Code == fit.CodeSpotOnly }) {
		return ""
	}
	return strings.TrimSuffix(basis, ".")
}

// perVolt is by how much the currents of two devices differ for a volt of gate
// voltage, A/V, by the median transconductance and the source resistors; NaN: not
// known.
func (m *Matched) perVolt() float64 {
	for _, t := range m.TradeOff {
		if isNumber(t.Imbalance) && t.Within > 0 {
			return t.Imbalance / t.Within
		}
	}
	return math.NaN()
}

// toleranceLine says what the tolerance means in milliamperes.
func (m *Matched) toleranceLine() string {
	within := m.By[0].Within
	i := within * m.perVolt()
	if !(within > 0) || !isNumber(i) {
		return ""
	}
	return fmt.Sprintf("Two devices %s apart differ by about %s on one gate line, %s %% of %s.", FormatGiven(within, "V"), FormatTwoDigits(i, "A"), percents([]float64{i / m.At})[0], FormatGiven(m.At, "A"))
}

// boundWords say how good the sets are and what that rests on.
func (m *Matched) boundWords() string {
	text := Clean(Sentence(m.Text))
	if m.Bound.Kind == match.LowerBound && m.Bound.Gap > 0 && m.Total > 0 {
		text += fmt.Sprintf(" Its sum lies %s %% above that bound.", percents([]float64{m.Bound.Gap})[0])
	}
	if m.Bound.Proof != "" {
		text += " Proof: " + Clean(strings.TrimSuffix(m.Bound.Proof, ".")) + "."
	}
	return text
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

// spreadCells is a column of differences in millivolts, all with a tenth where one
// needs it.
func spreadCells(x []float64) []string {
	tenths := false
	for _, v := range x {
		tenths = tenths || isNumber(v) && strings.Contains(spreadText(v), ".")
	}
	cells := make([]string, len(x))
	for i, v := range x {
		if cells[i] = spreadText(v); tenths && isNumber(v) {
			cells[i] = fixed(v*1e3, 1)
		}
	}
	return cells
}
