package report

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit/bias"
	"gatesill/store/record"
)

// lineTable writes devices on one gate line: their gate voltage, and what each draws
// cold, warmed up, and without the source resistors.
func lineTable(p *printer, b Bias, l *bias.Line, style Style) {
	p.line("%s", style.paint(fmt.Sprintf("On one gate line: %s", namesWords(l.Names, len(l.Names))), bold))
	fact(p, "total", fmt.Sprintf("%s, %s", FormatGiven(l.LineOptions.Total, "A"), sourceWords(l.Source)), style)
	stateFact(p, b, "cold", fmt.Sprintf("at %s", FormatGiven(math.Round(l.Temp*10)/10, "°C")), l, &l.Cold, style)
	hot := l.Hot.Err != nil || l.Hot.Devices != nil
	if hot {
		sink := l.Sink
		if !isNumber(sink) {
			sink = l.Temp
		}
		stateFact(p, b, "warmed up", fmt.Sprintf("over a heat sink of %s, %s K/W to each, %s, gate set again", FormatGiven(math.Round(sink*10)/10, "°C"), fmt.Sprintf("%.3g", l.Rth), slopeWords(l.Tempco)), l, &l.Hot, style)
		if l.Kept.Err == nil && l.Kept.Devices != nil {
			fact(p, "gate kept", fmt.Sprintf("left at %s it would draw %s when warm", gateWords(l.Kept.Gate), bias.AmpWords(l.Kept.Total)), style)
		} else if l.Kept.Err != nil && l.Cold.Err == nil {
			fact(p, "gate kept", fmt.Sprintf("left at %s: %s", gateWords(l.Cold.Gate), stateTrouble(l.Kept.Err)), style)
		}
	} else {
		var missing []string
		for _, m := range []struct {
			x    float64
			flag string
		}{{l.VDS, "--vds"}, {l.Rth, "--rth"}, {l.Tempco, "--tempco"}} {
			if !isNumber(m.x) {
				missing = append(missing, m.flag)
			}
		}
		fact(p, "warmed up", "not told without "+strings.Join(missing, ", "), style)
	}
	if l.Bare != nil && l.Bare.Err == nil && l.Cold.Err == nil {
		fact(p, "resistors", fmt.Sprintf("greatest to least current %s with them, %s without", ratioWords(l.Cold.Ratio()), ratioWords(l.Bare.Ratio())), style)
	}
	if l.Cold.Err != nil {
		return
	}
	p.line("")
	p.grid(lineGrid(l, style))
	seen := map[string]bool{}
	var by []string
	for _, w := range l.By {
		if !seen[w] {
			seen[w] = true
			by = append(by, w)
		}
	}
	p.line("")
	wrapped(p, "", "", "Currents by "+strings.Join(by, " or ")+", taken at the V_DS of the readings.", style.Width)
}

func ratioWords(x float64) string {
	if !isNumber(x) || x > 1e4 {
		return "no end"
	}
	return fmt.Sprintf("%.3g", x)
}

// stateTrouble says why a state has no operating point.
func stateTrouble(err error) string {
	switch {
	case err == nil:
		return ""
	case errors.Is(err, bias.ErrRunaway):
		return "no stable operating point, the devices heat up faster than the circuit holds them (larger source resistors or better cooling would)"
	case errors.Is(err, bias.ErrBeyond):
		return "a device would carry more than its sweep reaches"
	}
	return Clean(err.Error())
}

// stateFact says at which gate voltage a line carries its total, the worst
// dissipation, and where the trimmer of the network has to be.
func stateFact(p *printer, b Bias, label, how string, l *bias.Line, s *bias.State, style Style) {
	if s.Err != nil {
		fact(p, label, how+": "+stateTrouble(s.Err), style)
		return
	}
	words := fmt.Sprintf("%s: gate at %s", how, gateWords(s.Gate))
	if n := b.Plan.Network; n != nil && n.Trimmer > 0 && n.Complete() {
		if x := n.Setting(s.Gate); x >= 0 && x <= 1 {
			words += ", trimmer at " + settingCell(x, b.Plan.Turns)
		} else {
			words += ", which the trimmer does not reach"
		}
	}
	w := s.Worst()
	if q := s.Devices[w]; isNumber(q.Power) {
		words += fmt.Sprintf("; most in %s, %s", Clean(l.Names[w]), powerWords(q.Power))
		if q.Temp != l.Temp {
			words += fmt.Sprintf(" at %.0f °C", q.Temp)
		}
		words += overLimits(b.Sheet, s)
	}
	fact(p, label, words, style)
}

// overLimits says which limits of the part a line goes beyond.
func overLimits(sheet *Sheet, s *bias.State) string {
	text := ""
	for _, m := range []struct {
		limit record.Num
		unit  string
		of    func(d bias.On) float64
	}{
		{sheet.Part.MaxPD, "W", func(d bias.On) float64 { return d.Power }}, {sheet.Part.MaxID, "A", func(d bias.On) float64 { return d.I }},
		{sheet.Part.MaxTemp, "°C", func(d bias.On) float64 { return d.Temp }},
	} {
		limit, ok := m.limit.Get()
		if ok && slices.ContainsFunc(s.Devices, func(d bias.On) bool { return m.of(d) > limit }) {
			text += ", beyond the part's limit of " + FormatGiven(limit, m.unit)
		}
	}
	return text
}

func lineGrid(l *bias.Line, style Style) grid {
	var values, us []float64
	for _, q := range l.Gates {
		values, us = append(values, q.Value), append(us, q.U)
	}
	cells, unit := numbers("V", values, us, func(int) string { return NotAvailable })
	g := grid{style: style, cols: []column{{head: "device", cells: cleanAll(l.Names), wrap: 20}, {head: "alone at idle", unit: unit, cells: cells, rank: 1}}}
	state := func(head string, s *bias.State, rank int) {
		if s == nil || s.Err != nil || s.Devices == nil {
			return
		}
		var i, w, t []string
		for _, d := range s.Devices {
			i = append(i, drawnCell(d.Told))
			if isNumber(d.Power) {
				w = append(w, powerWords(d.Power))
			}
			t = append(t, fmt.Sprintf("%.0f °C", d.Temp))
		}
		g.cols = append(g.cols, column{head: head, cells: i, right: true, rank: rank})
		if w != nil && rank == 0 {
			g.cols = append(g.cols, column{head: "power", cells: w, right: true, rank: 2})
		}
		if s == &l.Hot {
			g.cols = append(g.cols, column{head: "device at", cells: t, right: true, rank: 2})
		}
	}
	state("cold", &l.Cold, 0)
	state("warmed up", &l.Hot, 0)
	state("without resistors", l.Bare, 3)
	return g
}

func cleanAll(names []string) []string {
	out := make([]string, len(names))
	for i, n := range names {
		out[i] = Clean(n)
	}
	return out
}

// biasSheetGrid is one row a unit: its devices, the common gate voltage cold, what they
// draw, and where the trimmer has to be.
func biasSheetGrid(b Bias, style Style) grid {
	cols := []column{{head: "unit", right: true}, {head: "devices", wrap: 24}, {head: "gate", unit: "V", right: true}, {head: "idle, each"}, {head: "trimmer", right: true, rank: 1}}
	for k, l := range b.Lines {
		gate, idle, setting := NotAvailable, stateTrouble(l.Cold.Err), ""
		if l.Cold.Err == nil {
			gate = fmt.Sprintf("%.3f", l.Cold.Gate)
			var each []string
			for _, d := range l.Cold.Devices {
				each = append(each, drawnCell(d.Told))
			}
			idle = strings.Join(each, ", ")
			if n := b.Plan.Network; n != nil {
				if x := n.Setting(l.Cold.Gate); x >= 0 && x <= 1 {
					setting = settingCell(x, b.Plan.Turns)
				} else if n.Trimmer > 0 {
					setting = "out of reach"
				}
			}
		}
		for i, cell := range []string{itoa(k + 1), strings.Join(cleanAll(l.Names), ", "), gate, idle, setting} {
			cols[i].cells = append(cols[i].cells, cell)
		}
	}
	return grid{style: style, cols: cols}
}

// powerWords writes a dissipation; what no curve tells is not written out.
func powerWords(w float64) string {
	if w > 0 && w < 1e-6 {
		return "< 1 µW"
	}
	return FormatTwoDigits(w, "W")
}
