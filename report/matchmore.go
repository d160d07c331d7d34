package report

import (
	"math"
	"slices"

	"gatesill/fit/match"
)

// shownRepairs is how many repairs of each kind the terminal lists; --json has all.
const shownRepairs = 4

// repairs lists what would make sets equal that are beyond the tolerance, or where
// there is none cannot pass for alike, the worst first; and what left-over devices
// would need that nearly go together.
func repairs(p *printer, m *Matched, style Style) {
	var list []*match.Set
	for i := range m.Sets {
		if s := &m.Sets[i]; !s.Alike && (!s.Within || !m.hasTolerance()) && repairWords(s, m.At, m.SourceOhms) != "" {
			list = append(list, s)
		}
	}
	if len(list) > 0 {
		p.line("")
		p.line("%s", style.paint("What would make the others equal at the idle current, the worst first", bold))
	}
	for k := range list {
		if k == shownRepairs {
			p.line("  and %d more (--json)", len(list)-k)
			break
		}
		s := list[len(list)-1-k] // the best come first in a matching
		wrapped(p, "  set "+m.setLabel(s.Number)+": ", "    ", repairWords(s, m.At, m.SourceOhms)+".", style.Width)
	}
	if len(m.Near) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint("Near misses, and what would make them equal at the idle current", bold))
	many := manyLots(m.Members)
	for k := range m.Near {
		if k == shownRepairs {
			p.line("  and %d more (--json)", len(m.Near)-k)
			break
		}
		s := &m.Near[k]
		var names []string
		for _, d := range s.Devices {
			names = append(names, deviceName(d.Lot, d.Name, many))
		}
		text := spreadText(s.Spread) + " mV apart"
		if isNumber(s.Sharing.Imbalance) {
			text += ", " + FormatTwoDigits(s.Sharing.Imbalance, "A") + " on one gate line"
		}
		wrapped(p, "  "+andList(names)+": ", "    ", text+orNothing(". To repair: ", repairWords(s, m.At, m.SourceOhms))+".", style.Width)
	}
}

// repairWords say what makes a set equal: "+26 mV at the gate of P16, or 0.10 Ω in
// the source of P12".
func repairWords(s *match.Set, at, there float64) string {
	var gates, sources []string
	for k, d := range s.Devices {
		if k < len(s.Repair.Trim) && s.Repair.Trim[k] > 5e-7 {
			gates = append(gates, "+"+spreadText(s.Repair.Trim[k])+" mV at "+Clean(d.Name))
		}
		if k < len(s.Repair.Resistors) && s.Repair.Resistors[k]*at > 5e-7 {
			sources = append(sources, FormatTwoDigits(s.Repair.Resistors[k], "Ω")+" at "+Clean(d.Name))
		}
	}
	if len(gates) == 0 {
		return ""
	}
	text := "gate trimmed by " + andList(gates)
	if len(sources) > 0 {
		text += "; or in the source " + andList(sources)
		if there > 0 {
			text += ", in addition"
		}
	}
	return text
}

// tradeOff writes the sets by tolerance, the tolerance asked for among them, and
// reports whether currents are in it.
func (p *printer) tradeOff(m *Matched, style Style) (claimed bool) {
	rows := m.tradeRows()
	n := len(rows)
	sets, left, exact := make([]string, n), make([]string, n), make([]string, n)
	within, total, mean, imbalance := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i, t := range rows {
		sets[i], left[i] = itoa(t.Sets), itoa(t.Left)
		if !t.Exact {
			exact[i] = "or more"
		}
		within[i], total[i], mean[i], imbalance[i] = t.Within, t.Total, t.Mean, t.Imbalance
		claimed = claimed || isNumber(t.Imbalance)
	}
	g := grid{style: style, cols: []column{
		{head: "within", unit: "mV", cells: spreadCells(within), right: true}, {head: "sets", cells: sets, right: true}, {head: "", cells: exact, rank: 1},
		{head: "sum", unit: "mV", cells: spreadCells(total), right: true}, {head: "mean", unit: "mV", cells: spreadCells(mean), right: true, rank: 2},
		{head: "left over", cells: left, right: true},
	}}
	if claimed {
		g.cols = append(g.cols, sizeColumn("imbalance", "A", imbalance))
	}
	p.grid(g)
	return claimed
}

// tradeRows are the rows of the trade-off with the answer itself among them.
func (m *Matched) tradeRows() []match.TradeOff {
	rows := slices.Clone(m.TradeOff)
	own := match.TradeOff{Within: m.By[0].Within, Sets: len(m.Sets), Total: m.Total, Mean: math.NaN(), Exact: m.Bound.Sets == len(m.Sets), Imbalance: m.By[0].Within * m.perVolt()}
	if own.Sets > 0 {
		own.Mean = own.Total / float64(own.Sets)
	}
	own.Left = m.Offered - own.Sets*m.Size
	if m.Aim != match.Most || len(rows) == 0 {
		return rows
	}
	i := 0
	for i < len(rows) && rows[i].Within < own.Within-1e-9 {
		i++
	}
	if i < len(rows) && math.Abs(rows[i].Within-own.Within) <= 1e-9 {
		if rows[i].Sets <= own.Sets { // the answer itself was searched for longer
			rows[i] = own
		}
		return rows
	}
	return slices.Insert(rows, i, own)
}
