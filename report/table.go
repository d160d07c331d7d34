package report

import (
	"io"
	"math"
	"strings"

	"github.com/jedib0t/go-pretty/v6/table"
	"github.com/jedib0t/go-pretty/v6/text"

	"gatesill/fit"
)

// Style is how a table is laid out on the terminal.
type Style struct {
	Width int  // columns of the terminal; 0: no limit, nothing is left out or wrapped
	Color bool // colour may be used; it never says anything that the words do not
}

// column is one column of a terminal table. Its unit stands in the second line
// of the head.
type column struct {
	head  string
	unit  string
	cells []string
	right bool
	rank  int // 0 is always shown; the greatest rank goes first when the width is short
	wrap  int // may be wrapped down to this width; 0: not at all
}

// grid is a table in the making: columns of equal length.
type grid struct {
	style Style
	cols  []column
}

const gap = 2 // blanks between columns

func (c *column) width() int {
	w := max(text.StringWidthWithoutEscSequences(c.head), text.StringWidthWithoutEscSequences(c.unit))
	for _, cell := range c.cells {
		for line := range strings.SplitSeq(cell, "\n") {
			w = max(w, text.StringWidthWithoutEscSequences(line))
		}
	}
	return w
}

// empty reports whether nothing stands in the column.
func (c *column) empty() bool {
	for _, cell := range c.cells {
		if cell != "" {
			return false
		}
	}
	return true
}

// fitWidth drops and narrows columns until the table fits, and returns the
// heads of those dropped.
func (g *grid) fitWidth() (dropped []string) {
	kept := g.cols[:0]
	for _, c := range g.cols {
		if c.rank == 0 || !c.empty() {
			kept = append(kept, c)
		}
	}
	g.cols = kept
	if g.style.Width <= 0 {
		return nil
	}
	need := func() (w int) {
		for i := range g.cols {
			c := &g.cols[i]
			if c.wrap > 0 {
				w += min(c.width(), c.wrap)
			} else {
				w += c.width()
			}
		}
		return w + gap*(len(g.cols)-1)
	}
	for need() > g.style.Width {
		worst := 0
		for _, c := range g.cols {
			worst = max(worst, c.rank)
		}
		if worst == 0 {
			break
		}
		kept := g.cols[:0]
		for _, c := range g.cols {
			if c.rank != worst {
				kept = append(kept, c)
			} else if c.head != "n" && c.head != "V_T by" {
				dropped = append(dropped, c.head)
			}
		}
		g.cols = kept
	}
	// What is left over goes to the columns that may be wrapped.
	spare := g.style.Width - need()
	for i := range g.cols {
		c := &g.cols[i]
		if c.wrap == 0 {
			continue
		}
		w := c.width()
		room := min(w, c.wrap) + max(0, spare)
		spare -= min(w, room) - min(w, c.wrap)
		c.wrap = room
	}
	return dropped
}

// write lays the table out: heads, units, a rule, the rows. It returns the
// heads of the columns that did not fit.
func (g *grid) write(w io.Writer) ([]string, error) {
	dropped := g.fitWidth()
	t := table.NewWriter()
	t.SetStyle(plain)
	t.SuppressTrailingSpaces()
	head := make(table.Row, len(g.cols))
	configs := make([]table.ColumnConfig, len(g.cols))
	units, rows := false, 0
	for i, c := range g.cols {
		units = units || c.unit != ""
		rows = max(rows, len(c.cells))
		configs[i] = table.ColumnConfig{Number: i + 1, VAlignHeader: text.VAlignTop}
		if c.right {
			configs[i].Align, configs[i].AlignHeader = text.AlignRight, text.AlignRight
		}
		if c.wrap > 0 && g.style.Width > 0 {
			configs[i].WidthMax, configs[i].WidthMaxEnforcer = c.wrap, text.WrapSoft
		}
	}
	for i, c := range g.cols {
		head[i] = c.head
		if units {
			head[i] = c.head + "\n" + c.unit
		}
	}
	t.AppendHeader(head)
	t.SetColumnConfigs(configs)
	for r := range rows {
		row := make(table.Row, len(g.cols))
		for i, c := range g.cols {
			row[i] = c.cells[r]
		}
		t.AppendRow(row)
	}
	_, err := io.WriteString(w, t.Render()+"\n")
	return dropped, err
}

// plain is the layout of every table: no frame, two blanks between columns, a
// rule of dashes under the heads.
var plain = table.Style{
	Name: "plain",
	Box: table.BoxStyle{
		MiddleHorizontal: "-", MiddleSeparator: strings.Repeat(" ", gap), MiddleVertical: strings.Repeat(" ", gap),
	},
	Options: table.Options{SeparateColumns: true, SeparateHeader: true},
}

// paint colours words on a terminal that wants it: SGR code, reset.
func (s Style) paint(words, sgr string) string {
	if !s.Color || words == "" {
		return words
	}
	return "\x1b[" + sgr + "m" + words + "\x1b[0m"
}

const (
	bold   = "1"
	red    = "31"
	yellow = "33"
	faint  = "2"
)

// numbers lays out one column of numbers under one SI prefix, decimal marks
// below each other, each with the digits its own u allows: "2.7801 ± 0.0005".
// Absent numbers show the text of absent.
func numbers(unit string, values, us []float64, absent func(i int) string) (cells []string, scaled string) {
	return numbersAt(unit, values, us, 0, absent)
}

func numbersAt(unit string, values, us []float64, resolution float64, absent func(i int) string) (cells []string, scaled string) {
	s := ScaleOf(unit, values...)
	type parts struct{ whole, frac, u string }
	all := make([]parts, len(values))
	left, right, wide := 0, 0, 0
	for i, x := range values {
		u := math.NaN()
		if us != nil {
			u = us[i]
		}
		if !isNumber(x) {
			all[i].whole = absent(i)
			continue
		}
		p := &all[i]
		shown := s.FormatNumber(x, u, resolution)
		p.whole, p.frac = shown, ""
		if dot := strings.IndexByte(shown, '.'); dot >= 0 {
			p.whole, p.frac = shown[:dot], shown[dot:]
		}
		if _, ok := DecimalsFor(s.Of(u)); ok {
			p.u = " ± " + fixed(s.Of(u), max(0, len(p.frac)-1))
		}
		left, right, wide = max(left, len(p.whole)), max(right, len(p.frac)), max(wide, len(p.u))
	}
	cells = make([]string, len(values))
	for i, p := range all {
		pad := strings.Repeat(" ", max(0, left-text.StringWidthWithoutEscSequences(p.whole)))
		cells[i] = strings.TrimRight(pad+p.whole+p.frac+strings.Repeat(" ", right-len(p.frac))+p.u, " ")
	}
	return cells, s.Unit(unit)
}

// quantityColumns lays out one quantity of the devices and its n.
func quantityColumns(results []*fit.Result, key fit.Key, rank int, absent func(i int, key fit.Key) string) []column {
	info := KeyOf(key)
	values, us, ns := make([]float64, len(results)), make([]float64, len(results)), make([]string, len(results))
	found := false
	for i, r := range results {
		values[i], us[i] = math.NaN(), math.NaN()
		if q := r.At(key); q != nil && isNumber(q.Value) {
			values[i], us[i], found = q.Value, q.U, true
			ns[i] = itoa(q.N)
		}
	}
	if !found && rank > 0 {
		return nil
	}
	cells, unit := numbers(info.Unit, values, us, func(i int) string { return absent(i, key) })
	return []column{
		{head: info.Symbol, unit: unit, cells: cells, rank: rank},
		{head: "n", cells: ns, right: true, rank: rank},
	}
}
