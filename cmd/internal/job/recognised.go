package job

import (
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"

	"gatesill/acquire/table"
	"gatesill/report"
)

// recognised tells what a file was taken for: dialect, columns with units,
// circuit, devices, rows, what was refused and why.
//
// like names the file before that was read in the same way, "" for none: then
// only what differs is told.
func recognised(w io.Writer, f *table.File, sweeps []table.Sweep, left map[string]int, like string) error {
	var b strings.Builder
	line := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "  %-10s %s\n", label, report.Clean(fmt.Sprintf(format, args...)))
	}
	devices, points := map[string]bool{}, 0
	for i := range sweeps {
		devices[sweeps[i].Device] = true
		points += sweeps[i].Len()
	}
	what := fmt.Sprintf("%d, in %s of %s", len(devices), count(len(sweeps), "sweep"), count(points, "point"))
	rows := fmt.Sprintf("%d, of them %d refused", f.Rows, f.Refused)
	if like != "" {
		fmt.Fprintf(&b, "%s: read like %s; devices %s; rows %s\n", report.Clean(f.Name), report.Clean(like), what, rows)
	} else {
		fmt.Fprintf(&b, "%s\n", report.Clean(f.Name))
		dialect(line, f, sweeps)
		line("devices", "%s", what)
		line("rows", "%s", rows)
	}
	if f.States > 0 {
		line("", "%s without a number (over range or empty), kept as such", count(f.States, "cell"))
	}
	for _, r := range f.Refusals {
		line("refused", "%s:%d: %s: %s", f.Name, r.Line, r.Reason, r.Text)
	}
	if more := f.Refused - len(f.Refusals); more > 0 {
		line("", "and %d more", more)
	}
	for _, l := range slices.Sorted(maps.Keys(left)) {
		line("left", "%s of lot %s: gatesill import %s ... takes them", count(left[l], "sweep"), l, Quote(l))
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// sameReading is equal for files that were read in the same way.
func sameReading(f *table.File, sweeps []table.Sweep) string {
	var b strings.Builder
	dialect(func(label, format string, args ...any) { fmt.Fprintf(&b, label+format, args...) }, f, sweeps)
	return b.String()
}

// dialect tells how the text was read and what the conditions are.
func dialect(line func(label, format string, args ...any), f *table.File, sweeps []table.Sweep) {
	d := f.Dialect
	header := fmt.Sprintf("header in line %d", d.Header)
	if d.Header == 0 {
		header = "no header"
	}
	if d.UnitLine > 0 {
		header += fmt.Sprintf(", units in line %d", d.UnitLine)
	}
	if d.Comments > 0 {
		header += ", " + count(d.Comments, "comment line")
	}
	line("text", "%s, delimiter %s, decimal %s, %s", d.Encoding, d.Delimiter, d.Decimal, header)
	line("layout", "%s", f.Layout)
	for _, c := range columnsShown(d.Columns) {
		line("column", "%s", c)
	}
	line("circuit", "%s", circuits(sweeps))
	for _, n := range f.Proposed {
		line("comment", "%s", n)
	}
	for _, n := range d.Notes {
		line("note", "%s", n)
	}
}

// columnsShown describes the columns; of a wide table the first and the last of
// the many.
func columnsShown(cs []table.ColumnFound) []string {
	const most = 12
	var out []string
	for i, c := range cs {
		if len(cs) > most && i == most/2 {
			out = append(out, fmt.Sprintf("... and %d more ...", len(cs)-most))
		}
		if len(cs) > most && i >= most/2 && i < len(cs)-most/2 {
			continue
		}
		text := fmt.Sprintf("%d %q: %s", c.Number, c.Header, c.As)
		switch {
		case strings.HasPrefix(c.Unit, "in "): // unit in the cells
			text += ", unit " + c.Unit
		case c.Unit != "":
			text += " in " + c.Unit
		}
		if c.How != "" && c.How != "header" {
			text += ", by " + c.How
		}
		out = append(out, text)
	}
	return out
}

// circuits lists the circuits of the sweeps with their numbers.
func circuits(sweeps []table.Sweep) string {
	seen := map[string]bool{}
	for i := range sweeps {
		c := &sweeps[i].Condition
		name := report.CircuitWords(c.Circuit)
		if name == "" {
			name = report.NotGiven
		}
		text := strings.Join(append([]string{name}, report.ConditionWords(*c)...), ", ")
		seen[text] = true
	}
	all := slices.Sorted(maps.Keys(seen))
	if len(all) > 3 {
		return fmt.Sprintf("%s; and %d others", strings.Join(all[:2], "; "), len(all)-2)
	}
	return strings.Join(all, "; ")
}
