package report

import (
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
)

func itoa(n int) string { return strconv.Itoa(n) }

// printer writes text and remembers the first error, so that a layout reads as
// what it lays out.
type printer struct {
	w     io.Writer
	err   error
	facts *[]Field // gathers what fact would write; nil: it is written
}

func (p *printer) line(format string, args ...any) {
	if p.err == nil {
		_, p.err = fmt.Fprintf(p.w, format+"\n", args...)
	}
}

func (p *printer) grid(g grid) (dropped []string) {
	if p.err != nil {
		return nil
	}
	dropped, p.err = g.write(p.w)
	return dropped
}

// FitTable writes what the fits of a lot found, one line a device, for people:
// the quantity that sorting uses first, each value with its standard
// uncertainty within the session and its n, then why numbers are missing and
// what the warnings mean.
func FitTable(w io.Writer, s Sheet, style Style) error {
	p := &printer{w: w}
	p.line("%s", s.SortedLine())
	repeatabilityLine(p, s, s.SortedBy, style)
	if len(s.Devices) == 0 {
		p.line("The lot has no devices yet.")
		return p.err
	}
	p.line("")
	dropped := p.grid(fitGrid(s, style))
	p.line("")
	wrapped(p, "", "  ", "± is one standard uncertainty within the session (k = 1); n is the number of points a value rests on. What the equation or line behind V_T, beta and theta is itself wrong by is in the absolute uncertainty only (--budget, --json).", style.Width)
	leakage := KeyOf(fit.KeyIdss).Symbol
	if i := slices.Index(dropped, leakage); i >= 0 {
		dropped[i] = SymbolWords(fit.KeyIdss)
	} else if slices.ContainsFunc(s.Devices, func(d Device) bool { return d.Result.Idss.Ok() }) {
		wrapped(p, "", "  ", LeakageNote, style.Width)
	}
	if len(dropped) > 0 {
		wrapped(p, "", "  ", "No room for: "+strings.Join(dropped, ", ")+". A wider terminal or --json shows them.", style.Width)
	}
	notMeasured(p, s, style)
	remarks(p, s, style)
	if s.Budget {
		for i := range s.Devices {
			budgets(p, &s, &s.Devices[i], style)
		}
	}
	return p.err
}

func fitGrid(s Sheet, style Style) grid {
	n := len(s.Devices)
	names, states, methods, codes := make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	results := make([]*fit.Result, n)
	common := commonCodes(s)
	for i := range s.Devices {
		d := &s.Devices[i]
		results[i] = &d.Result
		names[i] = Clean(d.Name)
		states[i] = stateCell(d, style)
		if d.Result.Vt.Ok() {
			methods[i] = Clean(d.Result.Method)
		}
		var own []string
		for _, w := range beyondState(d) {
			if !slices.Contains(common, w.Code) && !slices.Contains(own, w.Code) {
				own = append(own, w.Code)
			}
		}
		codes[i] = Clean(strings.Join(own, ", "))
	}
	g := grid{style: style, cols: []column{
		{head: "device", cells: names, wrap: 12},
		{head: "state", cells: states},
	}}
	absent := func(i int, key fit.Key) string {
		if s.Devices[i].State() == fit.Above && countsAbove(key) {
			return "above"
		}
		return NotAvailable
	}
	// The sorting quantity is always there; the others go when there is no room.
	g.cols = append(g.cols, quantityColumns(results, s.SortedBy, 0, absent)...)
	ranks := map[fit.Key]int{
		fit.KeyVgsth: 1, fit.KeyVgsIdle: 1, fit.KeyVt: 3, fit.KeyGmIdle: 4,
		fit.KeyIdss: 5, fit.KeyBeta: 6, fit.KeyGmMax: 7, fit.KeyTheta: 8,
	}
	for _, key := range fit.Keys {
		if key == s.SortedBy {
			continue
		}
		g.cols = append(g.cols, quantityColumns(results, key, ranks[key], absent)...)
		if key == fit.KeyVt {
			g.cols = append(g.cols, column{head: "V_T by", cells: methods, rank: ranks[key]})
		}
	}
	g.cols = append(g.cols, column{head: "remarks", cells: codes, wrap: 22, rank: 2})
	return g
}

// countsAbove tells which quantities a device above the range has no value of
// because it never reaches the current.
func countsAbove(key fit.Key) bool { return key == fit.KeyVgsth || key == fit.KeyVgsIdle }

func stateCell(d *Device, style Style) string {
	word := WordsOf(d.State()).Word
	switch d.State() {
	case fit.Measured, fit.Excluded:
		return word
	case fit.Above, fit.Declined:
		return style.paint(word, yellow)
	}
	return style.paint(word, red)
}

// commonCodes lists the warning codes that every measured device carries: they
// are said once.
func commonCodes(s Sheet) []string {
	seen, devices := map[string]int{}, 0
	for i := range s.Devices {
		if d := &s.Devices[i]; d.State() == fit.Measured {
			devices++
			for _, code := range deviceCodes(d) {
				seen[code]++
			}
		}
	}
	var common []string
	for code, n := range seen {
		if n == devices && devices > 1 {
			common = append(common, code)
		}
	}
	slices.Sort(common)
	return common
}

// deviceCodes lists the codes of a device's warnings, each once.
func deviceCodes(d *Device) []string {
	var codes []string
	for _, w := range d.Result.Warnings {
		if !slices.Contains(codes, w.Code) {
			codes = append(codes, w.Code)
		}
	}
	return codes
}

// RemarkGroup is one warning code with the devices that carry it.
type RemarkGroup struct {
	Code    string
	Meaning string // of the code, or the text itself when all devices share one
	Next    string // what to do next; ""
	Devices []string
	All     bool // every measured device carries it
}

// RemarkGroups gathers the warnings of the devices by code, in order of the
// code.
func (s *Sheet) RemarkGroups() []RemarkGroup {
	return s.remarkGroups(func(d *Device) []fit.Warning { return d.Result.Warnings })
}

func (s *Sheet) remarkGroups(warnings func(*Device) []fit.Warning) []RemarkGroup {
	byCode := map[string]*RemarkGroup{}
	texts := map[string]string{}
	common := commonCodes(*s)
	for i := range s.Devices {
		d := &s.Devices[i]
		for _, w := range warnings(d) {
			g := byCode[w.Code]
			if g == nil {
				advice := s.Advice(w.Code)
				g = &RemarkGroup{Code: w.Code, Meaning: advice.Meaning, Next: advice.Next, All: slices.Contains(common, w.Code)}
				byCode[w.Code], texts[w.Code] = g, w.Text
			}
			if texts[w.Code] != w.Text {
				texts[w.Code] = ""
			}
			if k := len(g.Devices); k == 0 || g.Devices[k-1] != d.Name {
				g.Devices = append(g.Devices, d.Name)
			}
		}
	}
	var list []RemarkGroup
	for code, g := range byCode {
		if texts[code] != "" { // the same sentence for all says more than the code's meaning
			g.Meaning = texts[code]
		}
		list = append(list, *g)
	}
	slices.SortFunc(list, func(a, b RemarkGroup) int { return strings.Compare(a.Code, b.Code) })
	return list
}

// remarks follow the reasons of devices without a value: they do not say those
// again.
func remarks(p *printer, s Sheet, style Style) {
	groups := s.remarkGroups(beyondState)
	if len(groups) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint("Remarks", bold))
	for _, g := range groups {
		who := namesWords(g.Devices, 8)
		if g.All {
			who = "every measured device"
		}
		head := fmt.Sprintf("%s (%s)", Clean(g.Code), who)
		if g.Meaning != "" {
			head += ": " + Clean(Sentence(g.Meaning))
		}
		wrapped(p, "  ", "    ", head, style.Width)
		if g.Next != "" {
			wrapped(p, "    next: ", "    ", Clean(g.Next), style.Width)
		}
	}
}

// wrapped writes words in lines of at most width columns (0: one line), the
// first behind first, the others behind rest.
func wrapped(p *printer, first, rest, words string, width int) {
	lines := wrap(words, width, displayWidth(first), displayWidth(rest))
	for i, l := range lines {
		if i == 0 {
			p.line("%s%s", first, l)
		} else {
			p.line("%s%s", rest, l)
		}
	}
}
