package report

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
)

// CompareTable writes a comparison of lots for people: the quantity first, then
// verdict, shift and margin, what else differs, the tests beside the one that
// decides, and the ways to go on. Several lots get the run of lots before that, and
// what is said of all of them once at the end.
func CompareTable(w io.Writer, c ComparedLots, style Style) error {
	p := &printer{w: w}
	wrapped(p, "", "", c.ComparedLine(), style.Width)
	if c.Trend != nil {
		p.line("")
		p.grid(verdictGrid(c.Candidates, style))
		trendTable(p, c.Trend, style)
	}
	ofAll := c.saidOfAll()
	for i := range c.Candidates {
		p.line("")
		if c.Trend != nil {
			oneOfSeveral(p, &c.Candidates[i], ofAll, style)
			continue
		}
		comparedLot(p, &c.Candidates[i], ofAll, style)
	}
	if c.Trend != nil {
		p.line("")
		p.line("More of a lot is told where it alone is compared.")
	}
	if len(ofAll) > 0 {
		p.line("")
		lotWarnings(p, *c.Reference, ofAll, style)
	}
	return p.err
}

// saidOfAll are the warnings that every comparison has.
func (c *ComparedLots) saidOfAll() []fit.Warning {
	if len(c.Candidates) == 0 {
		return nil
	}
	return slices.DeleteFunc(slices.Clone(c.Candidates[0].Compared.Warnings), func(w fit.Warning) bool {
		return slices.ContainsFunc(c.Candidates, func(s Sheet) bool { return !slices.Contains(s.Compared.Warnings, w) })
	})
}

// quantity is what was compared.
func (c *ComparedLots) quantity() fit.Key {
	if len(c.Candidates) > 0 && c.Candidates[0].Compared != nil {
		return c.Candidates[0].Compared.Quantity
	}
	return c.Reference.SortedBy
}

// labels of the facts of a comparison take this many columns.
const labelWidth = 16

// fact writes one labelled line; nothing where there are no words.
func fact(p *printer, label, words string, style Style) {
	if words == "" {
		return
	}
	if p.facts != nil {
		*p.facts = append(*p.facts, Field{label, words})
		return
	}
	head := "  " + label
	if n := labelWidth - displayWidth(head); n > 0 {
		head += strings.Repeat(" ", n)
	}
	wrapped(p, head, strings.Repeat(" ", labelWidth), words, style.Width)
}

// headline writes the verdict with its sentence and, where something beside it says
// otherwise, which counts.
func headline(p *printer, c *Compared, style Style) {
	sgr := bold
	if c.No() {
		sgr = red
	}
	wrapped(p, style.paint(fmt.Sprintf("%s against %s: %s.", Clean(c.Candidate), Clean(c.Reference.Lot.Name), c.Verdict), sgr)+" ", "  ", Clean(Sentence(c.Reason())), style.Width)
	if c.Beside != "" {
		wrapped(p, "  ", "  ", Clean(Sentence(c.Beside)), style.Width)
	}
}

// ownWarnings writes the warnings that do not hold for all lots.
func ownWarnings(p *printer, s *Sheet, ofAll []fit.Warning, style Style) {
	own := slices.DeleteFunc(slices.Clone(s.Compared.Warnings), func(w fit.Warning) bool { return slices.Contains(ofAll, w) })
	if len(own) > 0 {
		p.line("")
		lotWarnings(p, *s, own, style)
	}
}

// oneOfSeveral is what a lot among several gets beside its line in the table: the
// sentence of its verdict, a stored rule, and what is doubtful of it alone.
func oneOfSeveral(p *printer, s *Sheet, ofAll []fit.Warning, style Style) {
	headline(p, s.Compared, style)
	for _, o := range s.Compared.Options {
		if o.Rule != "" {
			wrapped(p, "  "+Clean(o.Name)+": ", "    ", Clean(Sentence(o.Text)), style.Width)
		}
	}
	ownWarnings(p, s, ofAll, style)
}

// comparedLot writes one comparison, warnings that hold for all of them left out.
func comparedLot(p *printer, s *Sheet, ofAll []fit.Warning, style Style) {
	c := s.Compared
	headline(p, c, style)
	p.line("")
	p.grid(countsGrid(s, style))
	p.line("")
	fact(p, "shift", shiftFact(c), style)
	fact(p, "as read", rawFact(c), style)
	if m := c.MarginWords(); m != "" {
		fact(p, "margin", m, style)
	}
	if isNumber(c.NotExcluded) && c.Verdict == compare.TooFew {
		fact(p, "not excluded", "shifts up to "+FormatTwoDigits(c.NotExcluded, "V"), style)
	}
	if (c.More > 0 || c.MoreText != "") && !(c.MoreText != "" && strings.Contains(c.Sentence, c.MoreText)) {
		words := Clean(c.MoreText)
		if c.More > 0 && !strings.Contains(words, strconv.Itoa(c.More)) {
			words = strings.TrimSpace(strconv.Itoa(c.More) + " devices a lot would tell. " + words)
		}
		fact(p, "to tell", Sentence(words), style)
	}
	fact(p, "common error", commonFact(c), style)
	if isNumber(c.Spread.Value) {
		fact(p, "spread", "ratio of the standard deviations "+RatioWords(c.Spread), style)
	}
	if c.Paired != nil {
		fact(p, "pairs", pairedFact(c), style)
	}
	if c.Gain != nil {
		fact(p, "gain", gainFact(c.Gain), style)
	}
	if c.Curves != nil {
		fact(p, "curves", Clean(Sentence(c.Curves.Text)), style)
		if len(c.Curves.Points) > 0 && (c.Curves.Changes || c.Curves.Differs && c.Verdict == compare.NoDifference && c.ForTemp == 0) {
			p.line("")
			p.grid(bandGrid(c.Curves, style))
		}
	}
	if len(c.Secondary) > 0 {
		p.line("")
		p.line("%s", style.paint("Secondary tests (they decide nothing; p adjusted for their number)", bold))
		p.grid(secondaryGrid(c.Secondary, c.Level, style))
	}
	waysOn(p, s, style)
	ownWarnings(p, s, ofAll, style)
}

// waysOn writes the ways to go on; those that need the idle current only say so
// where there is none.
func waysOn(p *printer, s *Sheet, style Style) {
	c := s.Compared
	if len(c.Options) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint("Ways to go on", bold))
	var need []string
	for _, o := range c.Options {
		if o.Name == compare.SendBack && o.Rule == "" {
			continue // nothing asks for it
		}
		if !isNumber(c.Reference.IdleCurrent) && o.Name != compare.SortFirst && o.Name != compare.SendBack {
			need = append(need, Clean(o.Name))
			continue
		}
		wrapped(p, "  "+Clean(o.Name)+": ", "    ", Clean(Sentence(o.Text)), style.Width)
	}
	if need != nil {
		wrapped(p, "  "+strings.Join(need, ", ")+": ", "    ", "Told when the idle current is given (gatesill lot edit LOT --idle-current).", style.Width)
	}
}

func orNothing(lead, words string) string {
	if lead == "" || words == "" {
		return ""
	}
	return lead + words
}

// shiftFact is the shift with its interval and its test.
func shiftFact(c *Compared) string {
	if !isNumber(c.Shift) {
		return ""
	}
	text := ShiftWords(c.Shift, c.Low, c.High, "V")
	if isNumber(c.Low) && isNumber(c.High) {
		text += " at " + LevelWords(c.Level)
	}
	if isNumber(c.P) {
		text += ", " + PWords(c.P)
	}
	return text + orNothing(", by ", Clean(c.Test))
}

// rawFact is the shift as it was read, where something was taken off it.
func rawFact(c *Compared) string {
	if !isNumber(c.Raw) {
		return ""
	}
	text := ShiftWords(c.Raw, c.Raw+c.Low-c.Shift, c.Raw+c.High-c.Shift, "V")
	if c.ForTemp != 0 {
		text += "; taken off for the temperature: " + offsetWords(c.ForTemp, c.TempU)
	}
	return text
}

// commonFact is the error that a whole lot shares, and what it rests on.
func commonFact(c *Compared) string {
	e := c.Common
	text := "not known, so that it is not in the interval"
	if slices.ContainsFunc(c.Warnings, func(w fit.Warning) bool { return w.Code == fit.CodeCommonUnknown }) || !isNumber(e.U) && !isNumber(c.Shift) {
		text = "" // said there, or there is no interval
	}
	switch {
	case isNumber(e.U) && e.U == 0:
		text = "none" + orNothing(": ", Clean(e.Basis))
	case isNumber(e.U):
		text = "± " + FormatTwoDigits(e.U, "V") + " shared by a whole lot, in the interval" + orNothing("; ", Clean(e.Basis))
	}
	if e.Controls > 0 {
		text = orNothing(text, "; ") + fmt.Sprintf("%s tie the lots together", count(e.Controls, "control part"))
		if e.Offset != 0 {
			text += ", " + offsetWords(e.Offset, e.OffsetU) + " taken off"
		}
	}
	return text
}

// offsetWords writes a voltage with its sign and uncertainty.
func offsetWords(x, u float64) string {
	text := FormatPlain(x, u, "V")
	if x > 0 {
		text = "+" + text
	}
	return text
}

func pairedFact(c *Compared) string {
	q := c.Paired
	text := fmt.Sprintf("%s by serial", count(q.Pairs, "pair"))
	text += orNothing(": ", Clean(q.Why))
	if isNumber(q.SD) {
		text += "; differences have a standard deviation of " + FormatTwoDigits(q.SD, "V")
	}
	if isNumber(q.Own.Value) && c.Common.U > 0 {
		text += "; by themselves, nothing taken off: " + ShiftWords(q.Own.Value, q.Own.Low, q.Own.High, "V")
	}
	for _, o := range []struct {
		where string
		names []string
	}{{"reference", q.OnlyRef}, {"new lot", q.OnlyNew}} {
		if len(o.names) > 0 {
			text += fmt.Sprintf("; only in the %s: %s", o.where, namesWords(o.names, 8))
		}
	}
	return text
}

func gainFact(g *compare.Gain) string {
	if g.Text != "" {
		return Clean(Sentence(g.Text))
	}
	return fmt.Sprintf("%s %s, %s (n = %d and %d)", KeyOf(g.Key).Name, ShiftWords(g.Percent.Value, g.Percent.Low, g.Percent.High, "%"), PWords(g.P), g.N[0], g.N[1])
}

// countsGrid shows centre, spread and counts of both lots.
func countsGrid(s *Sheet, style Style) grid {
	c := s.Compared
	names := []string{Clean(c.Reference.Lot.Name) + " (reference)", Clean(s.Lot.Name)}
	ses := make([]float64, 2)
	for i := range ses {
		ses[i] = c.SD[i] / math.Sqrt(float64(c.Counts[i].WithValue))
	}
	centre, unit := numbers("V", c.Centre[:], ses, func(int) string { return NotAvailable })
	sc := ScaleOf("V", c.SD[:]...)
	sds := make([]string, 2)
	for i, sd := range c.SD {
		centre[i], _, _ = strings.Cut(centre[i], " ±")     // the shift has an interval; this only says where
		sds[i] = sc.FormatNumber(sd, ses[i]/math.Sqrt2, 0) // that of a standard deviation: sd/√(2n)
	}
	g := grid{style: style, cols: []column{
		{head: "lot", cells: names, wrap: 20}, {head: centreHead(c), unit: unit, cells: centre}, {head: "sd", unit: sc.Unit("V"), cells: sds, right: true},
	}}
	valued, besides := make([]string, 2), make([]string, 2)
	for i, k := range c.Counts {
		valued[i] = fmt.Sprintf("%d of %d", k.WithValue, k.N)
		var words []string
		for _, b := range []struct {
			n    int
			what string
		}{
			{k.Above, "above"}, {k.Without, "without a value"}, {k.Flagged, "flagged"}, {k.Aside, "set aside"}, {k.Control, "control"},
		} {
			if b.n > 0 {
				words = append(words, fmt.Sprintf("%d %s", b.n, b.what))
			}
		}
		besides[i] = strings.Join(words, ", ")
	}
	g.cols = append(g.cols, column{head: "with value", cells: valued, right: true})
	if besides[0]+besides[1] != "" {
		g.cols = append(g.cols, column{head: "besides", cells: besides, wrap: 9})
	}
	return g
}

// centreHead says that centres are as read where the shift is not their difference.
func centreHead(c *Compared) string {
	if isNumber(c.Raw) {
		return "centre as read"
	}
	return "centre"
}

func bandGrid(b *compare.Band, style Style) grid {
	points := ShownBand(b.Points)
	var currents, shifts, bands, refs, news []string
	shift := make([]float64, len(points))
	least := 0.0
	for i, q := range points {
		shift[i] = q.Shift
		if w := (q.High - q.Low) / 4; w > 0 && (least == 0 || w < least) {
			least = w
		}
	}
	sc := ScaleOf("V", append(shift, least)...)
	for _, q := range points {
		num := func(x float64) string { return signed(sc.FormatNumber(x, (q.High-q.Low)/4, 0)) }
		currents = append(currents, FormatGiven(q.I, "A"))
		shifts = append(shifts, num(q.Shift))
		bands = append(bands, num(q.Low)+" to "+num(q.High))
		refs, news = append(refs, strconv.Itoa(q.Reference)), append(news, strconv.Itoa(q.Candidate))
	}
	head := LevelWords(b.Level) + " band of all"
	if n := len(b.Points); n > len(points) {
		head = fmt.Sprintf("%s band of all %d currents", LevelWords(b.Level), n)
	}
	return grid{style: style, cols: []column{
		{head: "at", cells: currents}, {head: "shift", unit: sc.Unit("V"), cells: shifts, right: true},
		{head: head, unit: sc.Unit("V"), cells: bands, right: true},
		{head: "n reference", cells: refs, right: true, rank: 1}, {head: "n compared", cells: news, right: true, rank: 1},
	}}
}

func secondaryGrid(list []compare.Secondary, level float64, style Style) grid {
	var tests, shifts, stats, ps, adjusted []string
	for _, t := range list {
		tests = append(tests, Clean(t.Test))
		stat := ""
		if isNumber(t.Statistic) {
			stat = strconv.FormatFloat(roundTo(t.Statistic, 3), 'g', -1, 64)
		}
		stats = append(stats, stat)
		shift := ""
		if isNumber(t.Shift.Value) {
			shift = ShiftWords(t.Shift.Value, t.Shift.Low, t.Shift.High, "V")
		}
		shifts = append(shifts, shift)
		ps, adjusted = append(ps, ProbabilityWords(t.P)), append(adjusted, ProbabilityWords(t.PAdjusted))
	}
	return grid{style: style, cols: []column{
		{head: "test", cells: tests, wrap: 32}, {head: "shift (" + LevelWords(level) + " interval)", cells: shifts, right: true},
		{head: "statistic", cells: stats, right: true, rank: 1},
		{head: "p", cells: ps, right: true}, {head: "adjusted", cells: adjusted, right: true},
	}}
}
