package report

import (
	"cmp"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/gauge"
)

// Gauge is what the measurings of a lot say of its bench by one quantity.
type Gauge struct {
	By fit.Key
	gauge.Finding
	Used gauge.Repeatability // that u holds: of this lot, of another, or given; Value NaN: none
}

// GaugeTable writes for people what the bench can tell apart: repeatability with
// what follows from it, operators and fixtures, drift, control parts, and what
// became of the devices since they were measured first.
func GaugeTable(w io.Writer, s Sheet, g Gauge, style Style) error {
	p := &printer{w: w}
	phrase := s.KeyPhrase(g.By)
	if from := s.currentFrom(g.By); from != "" {
		phrase += " (" + from + ")"
	}
	p.line("By %s.", phrase)
	st := &g.Study
	if st.Repeatability.DF > 0 {
		p.line("")
		p.grid(gaugeGrid(g, style))
		p.line("")
		gaugeMeaning(p, g, style)
	} else {
		p.line("")
		wrapped(p, "", "", gaugeNone(s, g), style.Width)
	}
	gaugeLevels(p, g, style)
	gaugeDrifts(p, g, style)
	gaugeCharts(p, g, style)
	for i := range g.History {
		gaugeHistory(p, &s, &g.History[i], style)
	}
	if len(g.Warnings) > 0 {
		p.line("")
		p.line("%s", style.paint("Mind", bold))
		gaugeWarnings(p, s, g.Warnings, style)
	}
	return p.err
}

// toldAbove are the codes whose sentence stands above in the part that it is about:
// of these only what to do next is said.
var toldAbove = []string{
	fit.CodeOrderNotRandom, fit.CodeOperatorsDiffer, fit.CodeBenchCoarse, fit.CodeBenchDrift, fit.CodeControlOutside, fit.CodeControlTrend,
	fit.CodeDeviceChanged, fit.CodeAllShifted,
}

func gaugeWarnings(p *printer, s Sheet, list []fit.Warning, style Style) {
	var rest []fit.Warning
	var said []string
	for _, w := range list {
		switch {
		case !slices.Contains(toldAbove, w.Code):
			rest = append(rest, w)
		case !slices.Contains(said, w.Code):
			said = append(said, w.Code)
			wrapped(p, "", "  ", Clean(w.Code)+": "+Clean(s.Advice(w.Code).Next), style.Width)
		}
	}
	lotWarnings(p, s, rest, style)
}

// gaugeNone says what to measure where no device was put in twice.
func gaugeNone(s Sheet, g Gauge) string {
	text := "No device was put in twice in one session: how well the bench repeats is not known from this lot. Put 10 devices in three times each, in random order: gatesill gauge " +
		Clean(quotedName(s.Lot.Name)) + " --rounds 3 writes one. "
	if len(g.History) > 0 {
		text += "Rounds on several days do not count for that, each day is a session of its own: what days differ by would be taken for the bench's; the changes between them stand below."
	} else {
		text += "All rounds belong in one session: one day, one operator, one fixture; of files without dates those with the same import --session NAME."
	}
	if g.Used.Value > 0 {
		text += fmt.Sprintf(" Used here: %s (%s).", FormatTwoDigits(g.Used.Value, "V"), Clean(g.Used.Basis))
	}
	return text
}

func quotedName(name string) string {
	if strings.ContainsAny(name, " \t'\"") {
		return fmt.Sprintf("%q", name)
	}
	return name
}

// gaugeGrid is the table of standard deviations.
func gaugeGrid(g Gauge, style Style) grid {
	st := &g.Study
	var what, value, low, high, df, n []string
	type line struct {
		what string
		e    gauge.Estimate
		n    string
	}
	list := []line{{"same device put in again", st.Repeatability.Estimate, st.Repeatability.Basis}}
	if len(st.Odd) > 0 {
		list = append(list, line{"the same with all devices", st.Whole.Estimate, st.Whole.Basis})
	}
	for _, f := range st.Factors {
		list = append(list, line{"between " + f.Name + "s", f.SD, fmt.Sprintf("%d %ss", len(f.Levels), f.Name)})
	}
	list = append(list, line{"between devices of the lot", st.Lot, fmt.Sprintf("%d devices", st.LotDevices)})
	sc := ScaleOf("V", st.Repeatability.Value)
	for _, l := range list {
		what, n = append(what, l.what), append(n, Clean(l.n))
		value, low, high = append(value, plainNumber(sc, l.e.Value)), append(low, plainNumber(sc, l.e.Low)), append(high, plainNumber(sc, l.e.High))
		d := NotAvailable
		if isNumber(l.e.DF) {
			d = fmt.Sprintf("%.0f", l.e.DF)
		}
		df = append(df, d)
	}
	unit := sc.Unit("V")
	return grid{style: style, cols: []column{
		{head: "standard deviation", cells: what}, {head: "value", unit: unit, cells: value, right: true},
		{head: "95 % from", unit: unit, cells: low, right: true}, {head: "to", unit: unit, cells: high, right: true},
		{head: "df", cells: df, right: true, rank: 1}, {head: "from", cells: n, rank: 2},
	}}
}

// plainNumber writes a standard deviation with three significant digits at most.
func plainNumber(sc Scale, x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	x = sc.Of(x)
	if math.Abs(x) < 1e-9 {
		return "0"
	}
	return fixed(x, max(0, min(2, significant(x, 3))))
}

// gaugeMeaning says what follows from the repeatability.
func gaugeMeaning(p *printer, g Gauge, style Style) {
	st, say := &g.Study, func(format string, args ...any) { wrapped(p, "", "  ", fmt.Sprintf(format, args...), style.Width) }
	r := st.Repeatability
	if !r.Enough() {
		if r.Value > 0 {
			say("Too few to tell: no limit follows from this, and no u holds it.")
		} else {
			say("The readings repeat to their last digit: how well the bench repeats is hidden by the step of its display.")
		}
		if g.Used.Value > 0 {
			say("Used for what follows: %s (%s).", FormatTwoDigits(g.Used.Value, "V"), Clean(g.Used.Basis))
		}
		return
	}
	say("Two devices read once each differ when they lie more than %s apart (2·√2·sigma; at exactly 95 %% 1.96·√2·sigma, %s).", FormatTwoDigits(r.Counts(), "V"), FormatTwoDigits(r.Counts95(), "V"))
	say("A bin narrower than %s would sort noise (4 sigma).", FormatTwoDigits(r.Width(), "V"))
	if isNumber(st.Share.Value) {
		verdict := "too few to tell whether it is under a tenth"
		switch {
		case st.Share.High < 0.1:
			verdict = "under a tenth: it does not blur the lot"
		case st.Share.Low > 0.1:
			verdict = "more than a tenth"
		}
		say("The bench's part of the spread of this lot is %s (95 %%: %s to %s), %s.", percent(st.Share.Value), percent(st.Share.Low), percent(st.Share.High), verdict)
	}
	if isNumber(st.SharedBy) {
		say("With operators and fixtures in it, it is %s.", percent(st.SharedBy))
	}
	switch {
	case st.Categories == 0 || st.Categories == 1:
		say("It cannot tell the devices of this lot apart.")
	case st.Categories > 1:
		say("It can tell apart about %d groups of devices in this lot (5 or more are wanted).", st.Categories)
	}
	switch {
	case st.Order.Known:
		say("Order: %s.", Clean(st.Order.Text))
	default:
		say("Order: too few in each round to see whether it was random.")
	}
	say("The u of every device of this lot holds this repeatability.")
}

func percent(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	x *= 100
	return fixed(x, max(0, min(1, significant(x, 2)))) + " %"
}

// signedMillivolts writes a difference with its sign, in mV to a tenth.
func signedMillivolts(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	text := fixed(x*1e3, 1)
	if x > 0 && text != "0.0" {
		text = "+" + text
	}
	return text
}

func gaugeLevels(p *printer, g Gauge, style Style) {
	for _, f := range g.Study.Factors {
		// Dates of a history are told as such.
		if len(f.Levels) < 2 || f.Name == "session" && !(g.Study.Repeatability.DF > 0) {
			continue
		}
		p.line("")
		p.line("%s", style.paint(fmt.Sprintf("By %s", f.Name), bold))
		var names, ns, offs []string
		for _, l := range f.Levels {
			names, ns, offs = append(names, Clean(l.Name)), append(ns, itoa(l.Measurings)), append(offs, signedMillivolts(l.Off))
		}
		p.grid(grid{style: style, cols: []column{
			{head: f.Name, cells: names}, {head: "n", cells: ns, right: true}, {head: "off the mean", unit: "mV", cells: offs, right: true},
		}})
		verdict := "no difference seen"
		switch {
		case !isNumber(f.P):
			verdict = "too few to tell"
		case f.P < 0.05:
			verdict = "they differ"
		}
		text := "On the same devices: " + verdict
		if isNumber(f.P) {
			text += " (p " + pText(f.P) + ")"
		}
		if f.With != "" {
			text += "; " + f.Name + " and " + f.With + " change together and cannot be told apart"
		}
		wrapped(p, "", "  ", text+g.Study.FactorWords()+".", style.Width)
	}
}

// pText writes a probability.
func pText(p float64) string {
	switch {
	case p < 0.0001:
		return "< 0.0001"
	case p < 0.0995:
		return fmt.Sprintf("%.2g", p)
	}
	return fmt.Sprintf("%.2f", p)
}

func gaugeDrifts(p *printer, g Gauge, style Style) {
	if len(g.Drifts) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint("Drift along a session", bold))
	gaugeBlind(p, g.Drifts, style)
	for _, d := range g.Drifts {
		if d.Blind() && d.First == nil && blindOnes(g.Drifts) > 1 {
			continue
		}
		wrapped(p, "  "+Clean(d.Sitting)+": ", "    ", Clean(Sentence(d.Text)), style.Width)
	}
}

// blindOnes counts the sessions that could show a large drift only, with nothing else
// to say of them.
func blindOnes(list []gauge.Drift) int {
	n := 0
	for i := range list {
		if list[i].Blind() && list[i].First == nil {
			n++
		}
	}
	return n
}

// gaugeBlind says of all such sessions in one line what they could not show.
func gaugeBlind(p *printer, list []gauge.Drift, style Style) {
	n := blindOnes(list)
	if n < 2 {
		return
	}
	var names []string
	low, high := math.Inf(1), 0.0
	for i := range list {
		if d := &list[i]; d.Blind() && d.First == nil {
			names = append(names, d.Sitting)
			if x := d.Large(); isNumber(x) {
				low, high = min(low, x), max(high, x)
			}
		}
	}
	large := ""
	if high > 0 {
		large = " (of some " + FormatTwoDigits(low, "V")
		if most := FormatTwoDigits(high, "V"); most != FormatTwoDigits(low, "V") {
			large += " to " + most
		}
		large += ")"
	}
	wrapped(p, fmt.Sprintf("  %d sessions: ", n), "    ", fmt.Sprintf("No drift seen, but with each device measured once only a large one would show%s: put the first one in again at the end. (%s)",
		large, namesWords(names, shownNames)), style.Width)
}

func gaugeCharts(p *printer, g Gauge, style Style) {
	for _, c := range g.Charts {
		p.line("")
		head := "Control part " + Clean(c.Device) + ", by " + c.By
		if c.Corrected {
			head += ", brought to the temperature of the first"
		}
		p.line("%s", style.paint(head, bold))
		var at, when, value, moved, out []string
		sc := ScaleOf("V", c.Centre)
		var values []float64
		for _, pt := range c.Points {
			values = append(values, pt.Value)
		}
		step := readTo(values)
		for i, pt := range c.Points {
			at, when = append(at, itoa(i+1)), append(when, Clean(pt.Label))
			value = append(value, sc.FormatNumber(pt.Value, math.NaN(), step))
			r := ""
			if i > 0 {
				r = fixed(pt.Range*1e3, 1)
			}
			moved = append(moved, r)
			mark := ""
			if pt.Outside {
				mark = "outside"
			}
			out = append(out, mark)
		}
		p.grid(grid{style: style, cols: []column{
			{head: "point", cells: at, right: true}, {head: "when", cells: when}, {head: "value", unit: sc.Unit("V"), cells: value, right: true},
			{head: "moved", unit: "mV", cells: moved, right: true}, {head: "", cells: out, rank: 1},
		}})
		if isNumber(c.Low) {
			wrapped(p, "", "  ", fmt.Sprintf("Mean %s, limits %s to %s, of one step %s.", withUnit(sc.FormatNumber(c.Centre, math.NaN(), step), sc.Unit("V")),
				sc.FormatNumber(c.Low, math.NaN(), step), withUnit(sc.FormatNumber(c.High, math.NaN(), step), sc.Unit("V")), FormatTwoDigits(c.RangeHigh, "V")), style.Width)
		}
		for _, t := range c.Texts {
			wrapped(p, "", "  ", Clean(Sentence(t)), style.Width)
		}
	}
}

// soon is within how many days two occasions are rather one study than a history:
// its devices are listed only where one moved.
const soon = 7

func gaugeHistory(p *printer, s *Sheet, h *gauge.History, style Style) {
	p.line("")
	p.line("%s", style.paint(fmt.Sprintf("From %s to %s", occasionText(h.From), occasionText(h.To)), bold))
	if len(h.ChangedDevices()) > 0 || !(h.Days < soon) {
		p.grid(changeGrid(s, h, style))
	}
	for _, t := range h.Texts {
		wrapped(p, "", "  ", Clean(Sentence(t)), style.Width)
	}
	if h.FromDiffs >= 0 {
		wrapped(p, "", "  ", "Repeatability from the differences: "+FormatTwoDigits(h.FromDiffs, "V")+" (robust).", style.Width)
	}
	if isNumber(h.Limit) {
		wrapped(p, "", "  ", fmt.Sprintf("A device changed when its own change is beyond %s, corrected for %s; for one alone 2·√2·sigma is %s (sigma %s: %s).",
			FormatTwoDigits(h.Limit, "V"), count(len(h.Changes), "device"), FormatTwoDigits(h.LimitOne, "V"), FormatTwoDigits(h.Sigma, "V"), Clean(h.SigmaBasis)), style.Width)
	}
	if names := h.ChangedDevices(); len(names) > 0 {
		wrapped(p, "", "  ", style.paint("Changed or mixed up", red)+": "+namesWords(names, shownNames)+": check the serial, measure again.", style.Width)
	} else if isNumber(h.Limit) {
		wrapped(p, "", "  ", fmt.Sprintf("None of %d devices moved by itself.", len(h.Changes)), style.Width)
	}
}

// readTo is the step to which voltages are shown: that of the finest, between 1 mV
// and 0.1 mV.
func readTo(values []float64) float64 {
	for _, v := range values {
		if isNumber(v) && writtenDecimals(v) > 3 {
			return 1e-4
		}
	}
	return 1e-3
}

// changeGrid lists the devices of a history.
func changeGrid(s *Sheet, h *gauge.History, style Style) grid {
	var names, raws, corrs, owns, marks []string
	var values []float64
	changes := inOrder(s, h.Changes)
	for _, c := range changes {
		names, values = append(names, Clean(c.Device)), append(values, c.First)
		raws, corrs, owns = append(raws, signedMillivolts(c.Raw)), append(corrs, signedMillivolts(c.Corrected)), append(owns, signedMillivolts(c.Own))
		mark := ""
		if c.Changed {
			mark = style.paint("changed or mixed up", red)
		}
		marks = append(marks, mark)
	}
	for _, c := range changes {
		values = append(values, c.Last)
	}
	cells, unit := numbersAt("V", values, nil, readTo(values), func(int) string { return NotAvailable })
	n := len(h.Changes)
	cols := []column{
		{head: "device", cells: names}, {head: "first", unit: unit, cells: cells[:n]}, {head: "last", unit: unit, cells: cells[n:]},
		{head: "change", unit: "mV", cells: raws, right: true},
	}
	if isNumber(h.Corrected.Value) {
		cols = append(cols, column{head: "corrected", unit: "mV", cells: corrs, right: true})
	}
	cols = append(cols, column{head: "its own", unit: "mV", cells: owns, right: true}, column{head: "", cells: marks, rank: 1})
	return grid{style: style, cols: cols}
}

// inOrder puts changes in the order of the lot's devices.
func inOrder(s *Sheet, list []gauge.Change) []gauge.Change {
	at := map[string]int{}
	for i, d := range s.Devices {
		at[d.Name] = i
	}
	list = slices.Clone(list)
	slices.SortStableFunc(list, func(a, b gauge.Change) int { return cmp.Compare(at[a.Device], at[b.Device]) })
	return list
}

// occasionText names a date with its temperature.
func occasionText(o gauge.Occasion) string {
	text := Clean(o.Name)
	switch {
	case !isNumber(o.TempLow):
		return text
	case o.TempLow == o.TempTop:
		return fmt.Sprintf("%s (%.1f °C)", text, o.TempLow)
	}
	return fmt.Sprintf("%s (%.1f to %.1f °C)", text, o.TempLow, o.TempTop)
}

// repeatabilityLine says in one line that u holds the repeatability of the bench,
// of a quantity of the sheet; nothing where none is known.
func repeatabilityLine(p *printer, s Sheet, by fit.Key, style Style) {
	if r, ok := s.Repeatability[by]; ok {
		wrapped(p, "", "  ", "u holds the repeatability of the bench: "+FormatTwoDigits(r.Value, "V")+" from "+Clean(r.Basis)+".", style.Width)
	}
}
