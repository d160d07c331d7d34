package page

import (
	"fmt"
	"html/template"
	"io"
	"math"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/report"
)

// setsView is the page of sets.
type setsView struct {
	sheet
	Strip    *figure
	TradeOff *figure
	Curves   *curvesFigure
	NoCurves template.HTML
	Sets     *table
	NoSets   template.HTML
	Says     []group
	Left     []group
	Repairs  []group
	Labels   []tag
	NoLabels template.HTML
	Apart    bool // the labels begin a printed page of their own
}

// tag is one label to cut out.
type tag struct {
	Name, Value, Set string
}

const (
	mostTags    = 400 // devices from which labels are left to the file of labels
	tagsInPlace = 24  // devices up to which labels stand on the page of the sets
	mostRepairs = 4
	longTable   = 60 // sets from which their table scrolls
)

// matched is a matching with what several parts of its page look up.
type matched struct {
	*report.Matched
	first  *report.Sheet
	values func(match.Placed) string
	names  func(lot, name string) string
}

// WriteSets writes sets as one HTML page. What was computed for the terminal is
// shown; nothing is computed anew.
func WriteSets(w io.Writer, r report.Matched) error {
	if len(r.Sheets) == 0 {
		return fmt.Errorf("page of sets: no lot")
	}
	m := &matched{&r, r.Sheets[0], r.ValuesOf(), r.Names()}
	v := &setsView{sheet: newSheet("Matched sets", r.Title(), r.Sheets)}
	m.lead(v)
	m.figures(v)
	m.table(v)
	m.says(v)
	m.labels(v)
	v.Notes = notes(m.first, r.AllWarnings())
	return writeSheet(w, "sets", &v.sheet, v, r.Title()+"  ·  matched sets")
}

// noun names sets of this size.
func (m *matched) noun(n int) string {
	if m.Size == 2 {
		return plural(n, "pair")
	}
	return fmt.Sprintf("%s of %d", plural(n, "set"), m.Size)
}

func (m *matched) lead(v *setsView) {
	v.Lead = append(v.Lead, rich(m.MatchLine()))
	if t := m.ToleranceLine(); t != "" {
		v.Lead = append(v.Lead, rich(t))
	}
	if len(m.Sets) > 0 {
		v.Lead = append(v.Lead, rich(m.BoundLine()))
	}
	if m.Cut {
		v.Lead = append(v.Lead, "The search was interrupted: these are the best sets found until then.")
	}
	v.Tiles = append(v.Tiles, tile{template.HTML("sets"), strconv.Itoa(len(m.Sets)), richf("%s, of %s", m.noun(len(m.Sets)), plural(m.Offered, "device"))})
	worst, total := report.NotAvailable, template.HTML("no set")
	if isNumber(m.Worst) {
		worst, total = report.SpreadWords(m.Worst)+" mV", richf("all together %s mV", report.SpreadWords(m.Total))
	}
	v.Tiles = append(v.Tiles, tile{"widest set", worst, total})
	most, at := math.NaN(), 0
	for i := range m.Sets {
		if x := m.Sets[i].Sharing.Imbalance; isNumber(x) && !(x <= most) {
			most, at = x, i
		}
	}
	if isNumber(most) {
		v.Tiles = append(v.Tiles, tile{"greatest imbalance", report.FormatTwoDigits(most, "A"), richf("set %s, %s %% of %s", m.NameOfSet(m.Sets[at].Number), report.PercentColumn([]float64{m.Sets[at].Sharing.Share})[0], report.FormatGiven(m.At, "A"))})
	} else {
		v.Tiles = append(v.Tiles, tile{"imbalance", "not claimed", "see below"})
	}
	free, out := 0, 0
	for _, l := range m.LeftOver {
		if l.Out {
			out++
		} else {
			free++
		}
	}
	v.Tiles = append(v.Tiles, tile{"in no set", strconv.Itoa(free), richf("and %d not given out", out)})
}

// table lists the sets. What is the same for all stands in the notes.
func (m *matched) table(v *setsView) {
	if len(m.Sets) == 0 {
		v.NoSets = rich("No set: " + report.Sentence(m.Text))
		return
	}
	n := len(m.Sets)
	spreads := make([][]string, len(m.By))
	for c := range m.By {
		x := make([]float64, n)
		for i := range m.Sets {
			if x[i] = math.NaN(); c < len(m.Sets[i].Spreads) {
				x[i] = m.Sets[i].Spreads[c]
			}
		}
		if report.IsGain(m.By[c].Key) {
			spreads[c] = report.PercentColumn(x)
		} else {
			spreads[c] = report.SpreadColumn(x)
		}
	}
	imbalance, share, power := make([]float64, n), make([]float64, n), make([]float64, n)
	claimed, powered, beyond := false, false, false
	for i := range m.Sets {
		s := &m.Sets[i]
		imbalance[i], share[i], power[i] = s.Sharing.Imbalance, s.Sharing.Share, s.Sharing.Power
		claimed, powered = claimed || isNumber(imbalance[i]), powered || isNumber(power[i])
		beyond = beyond || !s.Within && m.HasTolerance()
	}
	amps, ampUnit := report.SizeColumn("A", imbalance)
	watts, wattUnit := report.SizeColumn("W", power)
	shares := report.PercentColumn(share)
	t := &table{Class: "sets", Caption: "The sets, the best first", Heads: []head{{"set", false}, {richf("devices (%s)", m.ValueUnits()), false}}}
	if n > longTable {
		t.Class = "sets long"
	}
	for _, c := range m.By {
		name := "spread (mV)"
		if report.IsGain(c.Key) {
			name = "gain spread (%)"
		}
		t.Heads = append(t.Heads, head{rich(name), true})
	}
	if claimed {
		t.Heads = append(t.Heads, head{richf("imbalance (%s)", ampUnit), true}, head{"of idle (%)", true})
	}
	if powered {
		t.Heads = append(t.Heads, head{"hottest", false}, head{richf("at most (%s)", wattUnit), true})
	}
	t.Heads = append(t.Heads, head{"alike", false})
	if beyond {
		t.Heads = append(t.Heads, head{"tolerance", false})
	}
	for i := range m.Sets {
		s := &m.Sets[i]
		row := []cell{{Text: plain(m.SetColumn(s.Number)), Head: true}, {Text: m.members(s)}}
		for c := range m.By {
			row = append(row, number(spreads[c][i]))
		}
		if claimed {
			row = append(row, number(amps[i]), number(shares[i]))
		}
		if powered {
			row = append(row, m.hottest(s), number(watts[i]))
		}
		row = append(row, text(report.AlikeWord(s)))
		if beyond {
			word := "within"
			if !s.Within {
				word = "beyond"
			}
			row = append(row, text(word))
		}
		t.Rows = append(t.Rows, row)
	}
	words := m.ColumnsLine()
	if b := m.BasisLine(); b != "" {
		words += " Currents: " + report.Clean(b) + "."
	}
	t.Note = rich(words)
	v.Sets = t
}

// members are the devices of a set with their values, each on one line.
func (m *matched) members(s *match.Set) template.HTML {
	var b strings.Builder
	for i, d := range s.Devices {
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(`<span class="dev"><b><bdi>`)
		b.WriteString(string(plain(m.names(d.Lot, d.Name))))
		b.WriteString(`</bdi></b> `)
		b.WriteString(string(plain(m.values(d))))
		b.WriteString(`</span>`)
	}
	return template.HTML(b.String())
}

func (m *matched) hottest(s *match.Set) cell {
	h := s.Sharing.Hottest
	if h < 0 || h >= len(s.Devices) || !isNumber(s.Sharing.Power) {
		return cell{Text: "–", None: true}
	}
	return cell{Text: plain(m.names(s.Devices[h].Lot, s.Devices[h].Name))}
}

// says lists what is left over, what would repair sets and near misses, and what
// more devices would give.
func (m *matched) says(v *setsView) {
	free, out := m.LeftNames()
	for k, list := range [][]report.NameGroup{free, out} {
		for _, g := range list {
			head := [...]string{"In no set", "Not given out"}[k]
			v.Left = append(v.Left, group{richf("%s, %s", head, plural(len(g.Names), "device")), foldNames(g.Names) + ": " + rich(report.Sentence(g.Text))})
		}
	}
	seen := 0
	for i := range m.Sets { // the worst come last
		s := &m.Sets[len(m.Sets)-1-i]
		words := m.RepairLine(s)
		if s.Alike || s.Within && m.HasTolerance() || words == "" {
			continue
		}
		if seen++; seen <= mostRepairs {
			v.Repairs = append(v.Repairs, group{richf("Set %s", m.SetColumn(s.Number)), rich(report.Sentence(words))})
		}
	}
	near := 0
	for i := range m.Near {
		s := &m.Near[i]
		words := m.RepairLine(s)
		if words == "" {
			continue
		}
		var names []string
		for _, d := range s.Devices {
			names = append(names, m.names(d.Lot, d.Name))
		}
		if near++; near <= mostRepairs {
			v.Repairs = append(v.Repairs, group{plain(strings.Join(names, ", ")), richf("%s mV apart. %s", report.SpreadWords(s.Spread), report.Sentence(words))})
		}
	}
	if more := max(0, seen-mostRepairs) + max(0, near-mostRepairs); more > 0 {
		v.Repairs = append(v.Repairs, group{richf("%d more", more), "stand in the JSON of the matching."})
	}
	for _, s := range m.Sets {
		for _, in := range s.Inside {
			v.Says = append(v.Says, group{richf("Inside package %s", report.Clean(in.Package)), richf("Its sides are %s mV apart, whatever they are set with (set %s).", report.SpreadWords(in.Spread), m.SetColumn(s.Number))})
		}
	}
	var more []string
	for _, x := range m.More {
		more = append(more, report.Sentence(x.Text))
	}
	if len(more) > 0 {
		v.Says = append(v.Says, group{"More devices", rich(strings.Join(more, " "))})
	}
}

// labels are rows to cut out: serial, gate bias, set.
func (m *matched) labels(v *setsView) {
	n := 0
	for i := range m.Sets {
		n += len(m.Sets[i].Devices)
	}
	if n > mostTags {
		v.NoLabels = richf("Labels of %d devices would make a heavy page: gatesill match --labels FILE writes them as rows of text.", n)
		return
	}
	v.Apart = n > tagsInPlace
	unit, _, _ := strings.Cut(m.ValueUnits(), ",")
	for i := range m.Sets {
		s := &m.Sets[i]
		name := m.NameOfSet(s.Number)
		if _, ok := m.Locked[s.Number]; !ok {
			name = "set " + name
		}
		for _, d := range s.Devices {
			value, _, _ := strings.Cut(m.values(d), " ")
			if value != report.NotAvailable {
				value += "\u00a0" + unit
			}
			v.Labels = append(v.Labels, tag{report.Clean(d.Name), value, name})
		}
	}
}

// quantity names what sets were matched by first.
func (m *matched) quantity() (words, unit string) {
	key := m.By[0].Key
	if key == match.KeyCurve {
		key = fit.KeyVgsIdle
	}
	return m.first.KeyPhrase(key), report.KeyOf(key).Unit
}
