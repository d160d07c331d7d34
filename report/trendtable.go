package report

import (
	"fmt"
	"math"
	"strconv"

	"gatesill/fit/compare"
)

// verdictGrid is one line a lot: verdict, shift, interval.
func verdictGrid(cands []Sheet, style Style) grid {
	var names, verdicts, shifts, intervals, margins, ns []string
	for i := range cands {
		c := cands[i].Compared
		v, l, h, unit := ShiftTexts(c.Shift, c.Low, c.High, "V")
		names, verdicts = append(names, Clean(c.Candidate)), append(verdicts, string(c.Verdict))
		shifts = append(shifts, withUnit(v, unit))
		intervals = append(intervals, l+" to "+withUnit(h, unit))
		margin := "none"
		if isNumber(c.Margin) {
			margin = "± " + FormatTwoDigits(c.Margin, "V") + ", " + c.MarginSet
		}
		margins = append(margins, margin)
		ns = append(ns, strconv.Itoa(c.Counts[1].WithValue))
	}
	level := 0.95
	if len(cands) > 0 {
		level = cands[0].Compared.Level
	}
	return grid{style: style, cols: []column{
		{head: "lot", cells: names, wrap: 20}, {head: "verdict", cells: verdicts}, {head: "shift", cells: shifts, right: true},
		{head: LevelWords(level) + " interval", cells: intervals, right: true}, {head: "n", cells: ns, right: true},
		{head: "margin, set", cells: margins, rank: 1},
	}}
}

// trendTable writes the lots in the order of time, and all pairs of them.
func trendTable(p *printer, t *compare.Trend, style Style) {
	p.line("")
	order := "in the order of their first readings"
	if t.Untimed {
		order = "those without a time last: their order is not known"
	}
	p.line("%s", style.paint("The run of lots, "+order, bold))
	p.grid(trendGrid(t, style))
	for _, words := range t.Text {
		wrapped(p, "", "  ", Clean(Sentence(words)), style.Width)
	}
	if len(t.Pairs) == 0 {
		return
	}
	var shown []compare.PairOfLots
	apart := 0
	for _, q := range t.Pairs {
		if q.PAdjusted < 0.05 {
			if apart++; len(shown) < shownPairs {
				shown = append(shown, q)
			}
		}
	}
	if apart == 0 {
		return // the sentence above says so
	}
	p.line("")
	p.line("%s", style.paint(fmt.Sprintf("Pairs of lots that differ (%d of %d; intervals and p adjusted for all)", apart, len(t.Pairs)), bold))
	p.grid(pairsGrid(shown, style))
	if rest := apart - len(shown); rest > 0 {
		p.line("%s more that differ: --json has them.", count(rest, "pair"))
	}
}

// shownPairs is how many pairs of lots are listed.
const shownPairs = 10

func trendGrid(t *compare.Trend, style Style) grid {
	n := len(t.Lots)
	names, codes, times, ns, sds, marks := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	centres, us, spreads := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, l := range t.Lots {
		names[i], codes[i], ns[i] = Clean(l.Name), Clean(l.DateCode), strconv.Itoa(l.N)
		times[i] = "not known"
		if l.At != "" {
			times[i] = Clean(l.At[:min(10, len(l.At))])
		}
		if l.Outside {
			marks[i] = "outside the limits"
		}
		centres[i], us[i], spreads[i] = l.Centre, l.U, l.SD
	}
	cells, unit := numbers("V", centres, us, func(int) string { return NotAvailable })
	sc := ScaleOf("V", spreads...)
	for i, l := range t.Lots {
		sds[i] = sc.FormatNumber(l.SD, l.SD/math.Sqrt(2*float64(max(1, l.N))), 0)
	}
	return grid{style: style, cols: []column{
		{head: "lot", cells: names, wrap: 20}, {head: "date code", cells: codes, rank: 1}, {head: "measured", cells: times}, {head: "n", cells: ns, right: true},
		{head: "centre", unit: unit, cells: cells}, {head: "sd", unit: sc.Unit("V"), cells: sds, right: true}, {head: "", cells: marks, rank: 1},
	}}
}

func pairsGrid(pairs []compare.PairOfLots, style Style) grid {
	var names, shifts, intervals, ps []string
	for _, q := range pairs {
		v, l, h, unit := ShiftTexts(q.Shift, q.Low, q.High, "V")
		names = append(names, Clean(q.B)+" - "+Clean(q.A))
		shifts, intervals = append(shifts, withUnit(v, unit)), append(intervals, l+" to "+withUnit(h, unit))
		ps = append(ps, ProbabilityWords(q.PAdjusted))
	}
	return grid{style: style, cols: []column{
		{head: "lots", cells: names, wrap: 30}, {head: "shift", cells: shifts, right: true}, {head: "interval", cells: intervals, right: true}, {head: "p", cells: ps, right: true},
	}}
}
