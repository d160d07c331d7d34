package report

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/bias"
	"gatesill/fit/lot"
)

// Bias is the gate bias of a lot, ready to be laid out.
type Bias struct {
	Sheet     *Sheet
	Plan      *bias.Plan
	Reference *bias.Plan   // of the reference lot; nil: none
	Change    *bias.Change // against it; nil: none
	Lines     []*bias.Line // devices on one gate line that were asked for
	Extremes  *bias.Line   // the devices at the ends of the lot on one; nil: not known, or not shown
	Warnings  []fit.Warning

	AssumedTrimmer             bool // the trimmer's tolerance is a usual one
	NoSupplyTol, NoResistorTol bool // not given: taken as 0
}

// BiasTable writes the gate bias of a lot for people: centre, spread and temperature, what
// the network gives and whom it serves, the resistors that would serve better, and the sheet
// of the devices. With lines asked for it writes those and leaves out what is of the lot.
func BiasTable(w io.Writer, b Bias, style Style) error {
	p := &printer{w: w}
	biasTable(p, b, style)
	return p.err
}

func biasTable(p *printer, b Bias, style Style) {
	pl := b.Plan
	p.line("%s", style.paint(fmt.Sprintf("Gate bias of lot %s at %s.", Clean(pl.Lot), FormatGiven(pl.Idle, "A")), bold))
	if len(b.Lines) > 0 {
		for _, l := range b.Lines {
			p.line("")
			lineTable(p, b, l, style)
		}
		if len(b.Lines) > 1 {
			p.line("")
			p.line("%s", style.paint("Bias sheet", bold))
			p.grid(biasSheetGrid(b, style))
		}
		biasNotes(p, b, style)
		return
	}
	p.line("")
	fact(p, "centre", centreFact(b), style)
	fact(p, "band", bandFact(&pl.Band), style)
	thermalFacts(p, &pl.Thermal, style)
	if l := b.Extremes; l != nil && l.Cold.Err == nil {
		fact(p, "on one line", fmt.Sprintf("%s and %s, the devices at the ends, share %s as %s and %s (%s)", Clean(l.Names[0]), Clean(l.Names[1]),
			FormatGiven(l.LineOptions.Total, "A"), bias.DrawnWords(l.Cold.Devices[0].Told), bias.DrawnWords(l.Cold.Devices[1].Told), sourceWords(l.Source)), style)
	}
	if pl.Network != nil {
		p.line("")
		for _, line := range pl.Network.Drawing() {
			p.line("  %s", line)
		}
	}
	if pl.Now != nil {
		p.line("")
		nowFacts(p, b, style)
	}
	if b.Change != nil {
		p.line("")
		p.line("%s", style.paint("Against lot "+Clean(b.Change.Reference), bold))
		for _, t := range b.Change.Text {
			wrapped(p, "  ", "    ", Clean(t), style.Width)
		}
	}
	if ways := pl.Ways(); len(ways) > 0 {
		p.line("")
		p.line("%s", style.paint("Ways to serve this lot", bold))
		for _, t := range ways {
			wrapped(p, "  ", "    ", Clean(t), style.Width)
		}
	}
	if len(pl.Choices) > 0 {
		p.line("")
		p.line("%s", style.paint("Resistors for the centre"+middleWords(pl), bold))
		p.grid(choiceGrid(pl, style))
	}
	if len(pl.Bins) > 0 {
		p.line("")
		p.line("%s", style.paint("One resistor a bin, of "+string(pl.Bins[0].Series)+middleWords(pl), bold))
		p.grid(biasBinGrid(pl, style))
	}
	p.line("")
	p.grid(unitGrid(b, style))
	biasNotes(p, b, style)
}

// middleWords says what a trimmer is taken for.
func middleWords(pl *bias.Plan) string {
	if pl.Network != nil && pl.Network.Trimmer > 0 {
		return ", the trimmer in its middle"
	}
	return ""
}

func centreFact(b Bias) string {
	pl := b.Plan
	if !isNumber(pl.Centre) {
		return "none: half of the devices never reach the current"
	}
	text := fmt.Sprintf("%s, the %s of %s", withDigits(pl.Centre, pl.SD/math.Sqrt(float64(pl.N))), pl.By, count(pl.N, "device"))
	if isNumber(pl.SD) {
		text += ", sd " + FormatTwoDigits(pl.SD, "V")
	}
	flagged := 0
	for _, v := range b.Sheet.Verdicts() {
		if v.Flagged && slices.ContainsFunc(pl.Units, func(u bias.Unit) bool { return u.Name == v.Name && u.Counts && u.Gate.Ok() }) {
			flagged++
		}
	}
	if flagged > 0 {
		text += fmt.Sprintf("; %d of them flagged (gatesill spread says why)", flagged)
	}
	if pl.Above > 0 {
		text += fmt.Sprintf("; %d more above, not reaching the current", pl.Above)
	}
	return text
}

func bandFact(t *lot.ToleranceBand) string {
	if t.Declined != "" {
		return "no interval for the lot: " + Clean(t.Declined)
	}
	text := fmt.Sprintf("%s hold %s of %s with %s confidence", rangeVolts(bias.Range{Low: t.Low, High: t.High}), LevelWords(t.Share), Clean(t.Of), LevelWords(t.Level))
	if t.Kind == lot.BandNormal {
		return text + fmt.Sprintf(" (mean ± %s sd, n = %d)", factor(t.Factor), t.N)
	}
	return text + fmt.Sprintf(" (distribution-free, n = %d)", t.N)
}

// slopeWords writes a change with temperature.
func slopeWords(x float64) string {
	return signed(fmt.Sprintf("%.1f", 1e3*x)) + " mV/K"
}

func thermalFacts(p *printer, t *bias.Thermal, style Style) {
	var words string
	switch t.Basis {
	case bias.TempcoGiven:
		words = slopeWords(t.Value) + ", as given"
	case bias.TempcoMeasured:
		words = fmt.Sprintf("%s, measured with %s of this lot from %s to %s", slopeWords(t.Value), count(t.N, "device"), FormatGiven(math.Round(t.From*10)/10, "°C"), FormatGiven(math.Round(t.To*10)/10, "°C"))
		if t.N > 1 {
			words += fmt.Sprintf(" (%s to %s)", slopeWords(t.Low), slopeWords(t.High))
		}
	default:
		words = "not measured, and not applied to anything"
	}
	if isNumber(t.Rate) {
		words += fmt.Sprintf("; at a constant gate voltage the idle current changes by %s %%/K", signed(fmt.Sprintf("%.2g", 100*t.Rate)))
	}
	if isNumber(t.Typical) {
		words += fmt.Sprintf("; typical at an overdrive of %s: %s (%.1f to %.1f; common practice, only shown)", FormatTwoDigits(t.Overdrive, "V"), slopeWords(t.Typical), 1e3*t.TypicalLow, 1e3*t.TypicalHigh)
	}
	fact(p, "temperature", words, style)
	if isNumber(t.ZeroGate) {
		side := "below it: at a constant gate voltage it rises with heat"
		if !t.Rises {
			side = "above it: at a constant gate voltage it falls with heat"
		}
		from := "κ of 4 mV/K and α of 1.7, typical"
		if t.Basis != "" {
			from = "that slope and an α of 1.7, typical"
		}
		fact(p, "zero point", fmt.Sprintf("about %s at %s, where the current does not change with temperature (overdrive 2κT/α; %s); the idle current lies %s",
			FormatTwoDigits(t.ZeroCurrent, "A"), fmt.Sprintf("%.1f V", t.ZeroGate), from, side), style)
	}
}

func sourceWords(ohm float64) string {
	if ohm > 0 {
		return bias.Ohms(ohm) + " in each source"
	}
	return "no source resistors"
}

// gateWords writes a gate voltage that was worked out.
func gateWords(v float64) string {
	if !isNumber(v) {
		return NotAvailable
	}
	return fmt.Sprintf("%.3f V", v)
}

func rangeVolts(r bias.Range) string { return fmt.Sprintf("%.3f to %.3f V", r.Low, r.High) }

// nowFacts says what the network gives and whom it serves.
func nowFacts(p *printer, b Bias, style Style) {
	n := b.Plan.Now
	at := "gate voltage " + gateWords(n.Middle)
	if n.Trimmed {
		at = "the trimmer reaches " + rangeVolts(n.Reach) + "; in its middle " + gateWords(n.Middle)
		if n.Given {
			at = "the trimmer reaches " + rangeVolts(n.Reach) + ", as given"
		}
	}
	fact(p, "network", at, style)
	if len(n.Parts) > 0 {
		var parts []string
		for _, q := range n.Parts {
			parts = append(parts, q.Name+" ± "+FormatTwoDigits(q.Volts, "V"))
		}
		fact(p, "tolerances", fmt.Sprintf("%s at worst, ± %s as root-sum-square (%s)", rangeVolts(n.Tolerated), FormatTwoDigits(n.RSS, "V"), strings.Join(parts, ", ")), style)
		if n.Trimmed {
			words := "reaches " + rangeVolts(n.Sure) + ", whatever its supply and resistors within their tolerances"
			if n.Sure.Low > n.Sure.High {
				words = "no gate voltage is reached by all, with supply and resistors anywhere in their tolerances"
			}
			fact(p, "every board", words, style)
		}
	}
	if n.CoveredBy != "" {
		words := fmt.Sprintf("%d of %d devices (%s)", n.Covered.Count, n.Covered.Of, n.CoveredBy)
		words += fmt.Sprintf("; up to %s of such parts lie outside (%s confidence)", shareUp(n.Covered.Upper), LevelWords(0.95))
		if n.Trimmed && !n.Given && len(n.Parts) > 0 {
			words += fmt.Sprintf("; on every board %d of %d, up to %s outside", n.Always.Count, n.Always.Of, shareUp(n.Always.Upper))
		}
		fact(p, "covers", words, style)
		if len(n.Covered.Outside) > 0 {
			fact(p, "outside", namesWords(n.Covered.Outside, shownNames), style)
		}
	} else {
		fact(p, "covers", "not said for a fixed gate voltage without --idle-tol, by how much the idle current may be off", style)
	}
	where := "unadjusted"
	if n.Trimmed {
		where = "trimmer left in its middle"
	}
	switch i := n.Idle; {
	case i.Known == 0:
		fact(p, "idle current", where+": not known, the curve, gain factor or transconductance of every device is missing (--beta gives one)", style)
	default:
		words := fmt.Sprintf("%s: %s in the median, %s to %s (%s by %s)", where, bias.DrawnWords(i.Median), bias.DrawnWords(i.Least), bias.DrawnWords(i.Most), count(i.Known, "device"), strings.Join(i.By, " or "))
		if i.Unknown > 0 {
			words += fmt.Sprintf("; of %d nothing tells", i.Unknown)
		}
		if len(n.Parts) > 0 {
			words += fmt.Sprintf("; with the tolerances at worst %s to %s, a device at the centre %s to %s", bias.DrawnWords(n.Worst.Least), bias.DrawnWords(n.Worst.Most), bias.DrawnWords(n.CentreLow), bias.DrawnWords(n.CentreHigh))
		}
		fact(p, "idle current", words, style)
	}
	if isNumber(n.Share) && len(n.Parts) > 0 {
		words := fmt.Sprintf("the tolerances make %.0f %% of the variance (each taken as evenly spread), the devices the rest", 100*n.Share)
		if n.Dominant != "" {
			words += fmt.Sprintf("; they dominate, the %s most of all, and sorting does not mend that", n.Dominant)
		}
		fact(p, "share", words, style)
	}
}

// shareUp writes the upper bound of a share.
func shareUp(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	if x < 0.1 {
		return fmt.Sprintf("%.1f %%", 100*x)
	}
	return fmt.Sprintf("%.0f %%", 100*x)
}

// travel writes the setting of a trimmer.
func travel(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return fmt.Sprintf("%.0f %%", 100*x)
}

func choiceGrid(pl *bias.Plan, style Style) grid {
	cols := make([]column, 8)
	for i, h := range []string{"series", "change", "top", "bottom", "gate", "off centre", "idle from", "to"} {
		cols[i] = column{head: h, right: i > 1}
	}
	cols[4].unit, cols[5].unit = "V", "mV"
	for i := range pl.Choices {
		c := &pl.Choices[i]
		for k, cell := range []string{string(c.Series), c.Change, FormatGiven(c.Network.Top, "Ω"), FormatGiven(c.Network.Bottom, "Ω"),
			fmt.Sprintf("%.3f", c.Gate), signed(fmt.Sprintf("%.1f", 1e3*c.Off)), drawnCell(c.Idle.Least), drawnCell(c.Idle.Most)} {
			cols[k].cells = append(cols[k].cells, cell)
		}
	}
	return grid{style: style, cols: cols}
}

// drawnCell writes a current in a table.
func drawnCell(i fit.Drawn) string {
	switch {
	case math.IsNaN(i.I):
		return NotAvailable
	case i.Beyond > 0:
		return "> " + bias.AmpWords(i.I)
	case i.Beyond < 0:
		return "< " + bias.AmpWords(i.I)
	}
	return bias.AmpWords(i.I)
}

func biasBinGrid(pl *bias.Plan, style Style) grid {
	what := pl.Bins[0].Change
	cols := make([]column, 8)
	for i, h := range []string{"bin", "from", "below", "devices", what, "gate", "idle from", "to"} {
		cols[i] = column{head: h, right: i > 0}
	}
	cols[1].unit, cols[2].unit, cols[5].unit = "V", "V", "V"
	for i := range pl.Bins {
		c := &pl.Bins[i]
		r := c.Network.Top
		if what == bias.ChangeBottom {
			r = c.Network.Bottom
		}
		for k, cell := range []string{Clean(c.Bin), fmt.Sprintf("%.3f", c.Low), fmt.Sprintf("%.3f", c.High), itoa(len(c.Devices)), FormatGiven(r, "Ω"),
			fmt.Sprintf("%.3f", c.Gate), drawnCell(c.Idle.Least), drawnCell(c.Idle.Most)} {
			cols[k].cells = append(cols[k].cells, cell)
		}
	}
	return grid{style: style, cols: cols}
}

// unitGrid is the sheet of the devices: gate voltage of each, what it draws with the
// network as it is, where its trimmer has to be, and in one word why something is missing.
func unitGrid(b Bias, style Style) grid {
	pl := b.Plan
	var names, notes, draws, settings []string
	var values, us []float64
	note := b.UnitNotes()
	for i := range pl.Units {
		u := &pl.Units[i]
		names, values, us = append(names, Clean(u.Name)), append(values, u.Gate.Value), append(us, u.Gate.U)
		notes = append(notes, note(u))
		draw, setting := "", ""
		if pl.Now != nil && u.Gate.Ok() {
			draw = drawnCell(u.At)
			if pl.Now.Idle.Known == 0 {
				draw = ""
			}
			if pl.Now.Trimmed && isNumber(u.Setting) {
				setting = settingCell(u.Setting, pl.Turns)
			}
		}
		draws, settings = append(draws, draw), append(settings, setting)
	}
	cells, unit := numbers("V", values, us, func(int) string { return NotAvailable })
	g := grid{style: style, cols: []column{{head: "device", cells: names, wrap: 20}, {head: "gate voltage", unit: unit, cells: cells}}}
	if n := pl.Now; n != nil {
		g.cols = append(g.cols, column{head: "idle at " + fmt.Sprintf("%.3f V", n.Middle), cells: draws, right: true, rank: 1},
			column{head: "trimmer", cells: settings, right: true, rank: 2})
	}
	if note := (column{head: "note", cells: notes}); !note.empty() {
		g.cols = append(g.cols, note)
	}
	return g
}

func settingCell(x, turns float64) string {
	if turns > 0 {
		return fmt.Sprintf("%.0f %%, %.1f turns", 100*x, x*turns)
	}
	return travel(x)
}

// biasNotes writes what was taken for granted, and the warnings.
func biasNotes(p *printer, b Bias, style Style) {
	if notes := b.TakenForGranted(); len(notes) > 0 {
		p.line("")
		for _, n := range notes {
			wrapped(p, "", "", n, style.Width)
		}
	}
	if len(b.Warnings) > 0 {
		lotWarnings(p, *b.Sheet, b.Warnings, style)
	}
}
