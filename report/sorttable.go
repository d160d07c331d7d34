package report

import (
	"errors"
	"fmt"
	"io"
	"strings"

	"gatesill/fit/lot"
)

// ErrNotSorted is returned where a sheet without a sorting is to be laid out as
// one.
var ErrNotSorted = errors.New("the lot has not been sorted")

// SortTable writes the bins of a lot for people: the bins with their edges,
// then the devices bin by bin, then those in no bin and why.
func SortTable(w io.Writer, s Sheet, style Style) error {
	if s.Sorting == nil {
		return fmt.Errorf("lot %q: %w", s.Lot.Name, ErrNotSorted)
	}
	p := &printer{w: w}
	srt := s.Sorting
	unit := KeyOf(srt.By).Unit
	p.line("%s", s.SortedPhrase(srt.By))
	repeatabilityLine(p, s, srt.By, style)
	p.line("")
	p.grid(binGrid(srt, style))
	p.line("")
	if isNumber(srt.SmallestWidth) && srt.SmallestWidth > 0 {
		wrapped(p, "", "  ", "A bin narrower than "+FormatTwoDigits(srt.SmallestWidth, unit)+" would sort noise (4 standard uncertainties of a device).", style.Width)
	} else {
		wrapped(p, "", "", "How narrow a bin may be is not known: no uncertainty of the readings is known.", style.Width)
	}
	lotWarnings(p, s, srt.Warnings, style)
	doubts(p, s, style)
	p.line("")
	if g := placedGrid(srt, style); len(g.cols[0].cells) > 0 {
		p.grid(g)
		p.line("")
		wrapped(p, "", "", "± is one standard uncertainty within the session (k = 1). maybe: the bin across an edge less than 2 standard uncertainties away.", style.Width)
	} else {
		p.line("No device is in a bin.")
	}
	if left := s.Unsorted(); len(left) > 0 {
		p.line("")
		p.line("%s", style.paint(fmt.Sprintf("In no bin: %d", len(left)), bold))
		for _, g := range GroupNames(left) {
			wrapped(p, "  ", "    ", namesWords(g.Names, shownNames)+": "+Clean(Sentence(g.Text)), style.Width)
		}
	}
	return p.err
}

// Unsorted lists the devices in no bin, in the order of the lot: those that the
// sorting names and those that it never saw, such as excluded ones.
func (s *Sheet) Unsorted() []lot.Unsorted {
	why := map[string]string{}
	for _, u := range s.Sorting.Unsorted {
		why[u.Name] = u.Why
	}
	placed, _ := s.BinOf()
	list := []lot.Unsorted{}
	for _, d := range s.Devices {
		if _, ok := placed[d.Name]; ok {
			continue
		}
		reason, ok := why[d.Name]
		if !ok {
			reason = d.Reason()
			if reason == "" && d.Role == "control" {
				reason = "Control part: kept for checking the bench."
			}
			if reason == "" {
				reason = "No value of " + s.KeyPhrase(s.Sorting.By) + "."
			}
		}
		list = append(list, lot.Unsorted{Name: d.Name, Why: reason})
		delete(why, d.Name)
	}
	for _, u := range s.Sorting.Unsorted { // named by the sorting only
		if _, ok := why[u.Name]; ok {
			list = append(list, u)
		}
	}
	return list
}

// BinScale is the prefix for the edges of the bins.
func BinScale(srt *lot.Sorting) Scale {
	var edges []float64
	for _, b := range srt.Bins {
		edges = append(edges, b.Low, b.High)
	}
	return ScaleOf(KeyOf(srt.By).Unit, edges...)
}

// EdgeText writes a bin edge without more digits than a tenth of the bin.
func EdgeText(srt *lot.Sorting, sc Scale, x float64) string {
	width := 0.0
	for _, b := range srt.Bins {
		if w := b.High - b.Low; w > 0 && (width == 0 || w < width) {
			width = w
		}
	}
	if !isNumber(x) {
		return NotAvailable
	}
	x = sc.Of(x)
	d, ok := DecimalsFor(sc.Of(width))
	if !ok {
		d = 3
	}
	// An edge given with fewer digits needs no more; one given with more keeps
	// them within reason.
	return fixed(x, min(max(d, min(writtenDecimals(x), d+2)), 9))
}

func binGrid(srt *lot.Sorting, style Style) grid {
	sc := BinScale(srt)
	unit := sc.Unit(KeyOf(srt.By).Unit)
	var names, lows, highs, counts []string
	for _, b := range BinRows(srt) {
		names = append(names, Clean(b.Name))
		lows = append(lows, EdgeText(srt, sc, b.Low))
		highs = append(highs, EdgeText(srt, sc, b.High))
		counts = append(counts, b.Count())
	}
	return grid{style: style, cols: []column{
		{head: "bin", cells: names}, {head: "from", unit: unit, cells: lows, right: true},
		{head: "below", unit: unit, cells: highs, right: true}, {head: "devices", cells: counts, right: true},
	}}
}

func placedGrid(srt *lot.Sorting, style Style) grid {
	var bins, names, maybes []string
	var values, us []float64
	for _, b := range srt.Bins {
		for _, d := range b.Devices {
			bins, names = append(bins, Clean(b.Name)), append(names, Clean(d.Name))
			values, us = append(values, d.Value), append(us, d.U)
			maybes = append(maybes, Clean(d.Maybe))
		}
	}
	info := KeyOf(srt.By)
	cells, unit := numbers(info.Unit, values, us, func(int) string { return NotAvailable })
	return grid{style: style, cols: []column{
		{head: "bin", cells: bins}, {head: "device", cells: names, wrap: 30},
		{head: info.Symbol, unit: unit, cells: cells}, {head: "maybe", cells: maybes, rank: 1},
	}}
}

// shortList joins texts for a cell.
func shortList(list []string) string { return Clean(strings.Join(list, "; ")) }
