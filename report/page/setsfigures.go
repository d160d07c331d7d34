package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"

	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/report/svg"
)

// mostPanels is up to how many sets have their curves drawn.
const mostPanels = 12

func (m *matched) figures(v *setsView) {
	m.strip(v)
	m.tradeOff(v)
	m.curves(v)
}

// place is where a device lies on the axis: its first value, by magnitude in
// complementary sets.
func (m *matched) place(member int, value float64) (x float64, hollow bool) {
	hollow = m.Complementary && member >= 0 && member < len(m.Members) && m.Members[member].PChannel
	if hollow {
		value = -value
	}
	return value, hollow
}

func (m *matched) strip(v *setsView) {
	words, unit := m.quantity()
	o := svg.SetsOptions{
		Frame:    svg.Frame{ID: "sets-axis", Title: "The sets along the axis of " + words},
		Quantity: words, Unit: unit, Within: m.By[0].Within,
	}
	if m.Complementary {
		o.Quantity += ", by magnitude"
	}
	var groups []svg.Group
	for i := range m.Sets {
		s := &m.Sets[i]
		g := svg.Group{Name: m.NameOfSet(s.Number), Apart: !s.Within && m.HasTolerance(), Note: report.SpreadWords(s.Spread) + " mV"}
		if isNumber(s.Sharing.Imbalance) {
			g.Note += ", imbalance " + report.FormatTwoDigits(s.Sharing.Imbalance, "A")
		}
		for _, d := range s.Devices {
			x := math.NaN()
			if len(d.Values) > 0 {
				x = d.Values[0]
			}
			x, hollow := m.place(d.Member, x)
			g.Mates = append(g.Mates, svg.Mate{Name: m.names(d.Lot, d.Name), X: x, Hollow: hollow, Ref: d.Member + 1})
		}
		groups = append(groups, g)
	}
	key := m.By[0].Key
	for _, l := range m.LeftOver {
		if l.Out || l.Member < 0 || l.Member >= len(m.Members) {
			continue
		}
		q := m.Members[l.Member].Result.At(key)
		if key == match.KeyCurve {
			q = &m.Members[l.Member].Result.VgsIdle
		}
		if q == nil || !q.Ok() {
			continue
		}
		x, hollow := m.place(l.Member, q.Value)
		o.Left = append(o.Left, svg.Mate{Name: m.names(l.Lot, l.Name), X: x, Hollow: hollow, Ref: l.Member + 1})
	}
	if len(groups)+len(o.Left) == 0 {
		return
	}
	o.Desc = fmt.Sprintf("%s and %s in no set. The numbers stand in the table of sets.", plural(len(groups), "set"), plural(len(o.Left), "device"))
	b, drawn := svg.AppendSets(nil, groups, o)
	note := "Each set is a bar from its least to its greatest value with a mark for each device and the number of the set; neighbours differ by the shape of their marks."
	if m.Complementary {
		note += " Filled marks are n-channel, hollow ones p-channel."
	}
	if m.HasTolerance() && slices.ContainsFunc(groups, func(g svg.Group) bool { return g.Apart }) {
		note += " Dashed bars are beyond the tolerance."
	}
	if len(o.Left) > 0 {
		note += " Crosses below are devices in no set"
		if drawn.Beyond > 0 {
			note += fmt.Sprintf("; there was no room for the names of %d of them", drawn.Beyond)
		}
		note += "."
	}
	if drawn.Unlabeled > 0 {
		note += fmt.Sprintf(" There is room for %d of %d sets: the widest are drawn, the devices of the others are strokes above the axis.", drawn.Labels, len(groups))
	}
	v.Strip = &figure{Label: "sets along the axis", SVG: template.HTML(b), Caption: rich(note)}
}

func (m *matched) tradeOff(v *setsView) {
	rows := m.TradeRows()
	if len(rows) < 2 {
		return
	}
	chosen := m.By[0].Within
	if m.Aim != match.Most {
		chosen = math.NaN()
	}
	b, _ := svg.AppendTradeOff(nil, rows, svg.TradeOffOptions{
		Frame:  svg.Frame{ID: "sets-tradeoff", Title: "Sets against tolerance", Desc: fmt.Sprintf("Number of sets at %d tolerances. The numbers stand in the table below.", len(rows))},
		Chosen: chosen, Most: m.Offered / m.Size, Size: m.Size,
	})
	note := "Sets that a tolerance gives"
	if isNumber(chosen) && chosen > 0 {
		note += "; the one chosen is marked"
	}
	note += "."
	t := &table{Caption: "Sets by tolerance", Heads: []head{{"within (mV)", true}, {"sets", true}, {"sum (mV)", true}, {"mean (mV)", true}, {"left over", true}, {"imbalance", true}},
		Note: "imbalance: of two devices that far apart on one gate line, with the lot's median transconductance."}
	for _, r := range rows {
		sets := strconv.Itoa(r.Sets)
		if !r.Exact {
			sets += " or more"
			note += map[bool]string{true: "", false: " A hollow mark: there may be more sets than were found."}[slices.ContainsFunc(t.Rows, func(c []cell) bool { return len(c[1].Text) > 7 })]
		}
		amps := report.NotAvailable
		if isNumber(r.Imbalance) {
			amps = report.FormatTwoDigits(r.Imbalance, "A")
		}
		t.Rows = append(t.Rows, []cell{{Text: rich(report.SpreadWords(r.Within)), Head: true}, number(sets), number(report.SpreadWords(r.Total)), number(report.SpreadWords(r.Mean)), number(strconv.Itoa(r.Left)), number(amps)})
	}
	v.TradeOff = &figure{Label: "sets against tolerance", SVG: template.HTML(b), Caption: rich(note), Data: t}
}

// curves draws the curves of each set over each other: their differences from the
// set's mean, and the curves themselves.
func (m *matched) curves(v *setsView) {
	var drawn []*match.Set
	for i := range m.Sets { // the worst come last
		s := &m.Sets[len(m.Sets)-1-i]
		if len(m.common(s)) > 1 {
			drawn = append(drawn, s)
		}
	}
	if len(drawn) == 0 {
		v.NoCurves = "No curves to lay over each other: the devices of no set have values at two currents."
		return
	}
	note := "Gate voltage of each device less the mean of its set at the same current, all sets on the same axes, the worst first."
	if with := len(drawn); with > mostPanels {
		drawn = drawn[:mostPanels]
		note = fmt.Sprintf("The %d worst of %d sets with curves are drawn. ", mostPanels, with) + note
	} else if with < len(m.Sets) {
		note += fmt.Sprintf(" %d of %d sets have curves.", with, len(m.Sets))
	}
	f := &curvesFigure{Switch: "sets", Of: "the sets", Choice: "Show"}
	t := &table{Caption: "Greatest difference in a set at each current (mV)", Heads: []head{{"current", false}}}
	var apart, whole []svg.Panel
	byCurrent := map[float64][]string{}
	var currents []float64
	for k, s := range drawn {
		a, b := m.panels(s)
		apart, whole = append(apart, a), append(whole, b)
		t.Heads = append(t.Heads, head{plain("set " + m.NameOfSet(s.Number)), true})
		for i, c := range a.Curves[0].X {
			lo, hi := math.Inf(1), math.Inf(-1)
			for _, cv := range a.Curves {
				lo, hi = math.Min(lo, cv.Y[i]), math.Max(hi, cv.Y[i])
			}
			if byCurrent[c] == nil {
				byCurrent[c] = make([]string, len(drawn))
				currents = append(currents, c)
			}
			byCurrent[c][k] = report.SpreadWords(hi - lo)
		}
	}
	slices.Sort(currents)
	for _, c := range currents {
		row := []cell{{Text: rich(report.FormatGiven(c, "A")), Head: true}}
		for _, words := range byCurrent[c] {
			if words == "" {
				words = report.NotAvailable
			}
			row = append(row, number(words))
		}
		t.Rows = append(t.Rows, row)
	}
	mark := m.At
	desc := fmt.Sprintf("Curves of the devices of %s over each other. The numbers stand in the table below.", plural(len(drawn), "set"))
	b, _ := svg.AppendPanels(nil, apart, svg.PanelsOptions{
		Frame: svg.Frame{ID: "sets-apart", Title: "Difference from the mean of the set", Desc: desc},
		XAxis: svg.Logarithmic, XName: "drain current (A)", YName: "less the set's mean", XUnit: "A", YUnit: "V", MarkX: mark, MarkY: 0, Least: m.By[0].Within,
	})
	f.Pictures = append(f.Pictures, picture{ID: "sets-difference", Label: "differences", SVG: template.HTML(b), Checked: true})
	b, _ = svg.AppendPanels(nil, whole, svg.PanelsOptions{
		Frame: svg.Frame{ID: "sets-whole", Title: "Transfer curves of the sets", Desc: desc},
		YAxis: svg.SquareRoot, XName: "gate voltage V_GS", YName: "I_D, square root", XUnit: "V", YUnit: "A", MarkX: math.NaN(), MarkY: mark,
	})
	f.Pictures = append(f.Pictures, picture{ID: "sets-curves", Label: "curves", SVG: template.HTML(b)})
	if isNumber(mark) {
		note += " Dotted: the idle current."
	}
	f.Caption, f.Data = rich(note), t
	v.Curves = f
}

// level gives the gate voltage of a member at a current of its curve, more meaning
// more current.
func (m *matched) level(member int) map[float64]float64 {
	at := map[float64]float64{}
	if member < 0 || member >= len(m.Members) {
		return at
	}
	for _, l := range m.Members[member].Result.Levels {
		if !isNumber(l.Vg) || !(l.I > 0) {
			continue
		}
		at[l.I] = l.Vg
		if m.Members[member].PChannel {
			at[l.I] = -l.Vg
		}
	}
	return at
}

// common are the currents at which every device of a set has a gate voltage.
func (m *matched) common(s *match.Set) []float64 {
	seen := map[float64]int{}
	for _, d := range s.Devices {
		for i := range m.level(d.Member) {
			seen[i]++
		}
	}
	var list []float64
	for i, n := range seen {
		if n == len(s.Devices) {
			list = append(list, i)
		}
	}
	slices.Sort(list)
	return list
}

// panels are the small pictures of one set: differences from its mean, and curves.
func (m *matched) panels(s *match.Set) (apart, whole svg.Panel) {
	title := "set " + m.NameOfSet(s.Number)
	apart.Title, whole.Title = title, title
	currents := m.common(s)
	mean := make([]float64, len(currents))
	levels := make([]map[float64]float64, len(s.Devices))
	for k, d := range s.Devices {
		levels[k] = m.level(d.Member)
		for i, c := range currents {
			mean[i] += levels[k][c] / float64(len(s.Devices))
		}
	}
	for k, d := range s.Devices {
		diff := svg.Curve{Name: m.names(d.Lot, d.Name), X: currents, Ref: d.Member + 1}
		all := svg.Curve{Name: diff.Name, Y: currents, Ref: diff.Ref}
		for i, c := range currents {
			diff.Y = append(diff.Y, levels[k][c]-mean[i])
			all.X = append(all.X, levels[k][c])
		}
		apart.Curves, whole.Curves = append(apart.Curves, diff), append(whole.Curves, all)
	}
	return apart, whole
}
