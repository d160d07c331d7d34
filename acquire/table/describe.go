package table

import (
	"bytes"
	"slices"

	"gatesill/store/record"
)

const maxListed = 60 // columns that are described one by one

// describe writes down what was recognised.
func (r *reader) describe() {
	d := &r.file.Dialect
	d.Delimiter = delimiterName(r.delim)
	d.Decimal = markName(r.num.mark)
	d.Header, d.UnitLine = r.headerLine, r.unitLine
	for _, t := range r.talk {
		if r.marks.is([]byte(t.text)) {
			d.Comments++
		}
	}
	left, unused := 0, 0
	for j := range r.cols {
		c := &r.cols[j]
		if c.as == "" && c.numbers > 0 && c.text != "" {
			if unused++; unused <= keptRows {
				r.note("column %s is not used", c.title())
			}
		}
		if len(d.Columns) == maxListed {
			left++
			continue
		}
		as, how := c.as, c.how
		if as == "" {
			as, how = string(RoleIgnore), "header"
		}
		found := ColumnFound{Number: c.index + 1, Header: cut(c.text, 80), As: as, How: how}
		switch {
		case dimOf(as) == "":
		case c.inCells:
			found.Unit = "in the cells"
		default:
			found.Unit = c.unit.text
		}
		d.Columns = append(d.Columns, found)
	}
	if left > 0 {
		r.note("%d more columns like the last one listed", left)
	}
	if unused > keptRows {
		r.note("%d more columns are not used", unused-keptRows)
	}
	r.checkEnd()
}

// checkEnd looks at a last line that has no line end: where its last number has
// fewer decimals than the rows above, the file was cut off within it.
func (r *reader) checkEnd() {
	n := len(r.text)
	if n == 0 || bytes.ContainsAny(r.text[n-1:], "\r\n") {
		return
	}
	r.note("the last line has no line end")
	lines := bytes.FieldsFunc(r.text[max(0, n-4096):], func(c rune) bool { return c == '\n' || c == '\r' })
	if len(lines) < 4 {
		return
	}
	last := r.decimals(lines[len(lines)-1])
	for _, l := range lines[len(lines)-3 : len(lines)-1] {
		if d := r.decimals(l); d < 0 || d <= last || last < 0 {
			return
		}
	}
	r.remark(CodeCutOff, "the last line has no line end, and its last number has fewer decimals than those above: the file may be cut off")
}

// decimals counts the digits behind the decimal mark at the end of a row, -1
// when it does not end in a number.
func (r *reader) decimals(row []byte) int {
	digits := 0
	for i := len(row) - 1; i >= 0; i-- {
		switch c := row[i]; {
		case c-'0' <= 9:
			digits++
		case c == r.num.mark:
			return digits
		case digits > 0 && (c == r.delim || c == '"' || c == '-'):
			return 0
		default:
			return -1
		}
	}
	return -1
}

// sameRows remarks on sweeps of two devices that hold the very same readings.
// Readings repeat by chance where there are few or where they stand still, so
// it takes five points with four different readings beside the gate.
func (r *reader) sameRows() {
	seen := map[string]int{}
	told := 0
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		if s.Len() < 5 || !lively(s) {
			continue
		}
		j, ok := seen[s.DataHash]
		if !ok {
			seen[s.DataHash] = i
			continue
		}
		o := &r.file.Sweeps[j]
		if o.Device == s.Device && o.Lot == s.Lot && o.Package == s.Package && o.Side == s.Side {
			continue
		}
		if told++; told <= keptRows {
			r.remark(CodeSameRows, "devices %s (line %d on) and %s (line %d on) have the same %d rows of readings",
				cut(o.Device, 60), firstLine(o), cut(s.Device, 60), firstLine(s), s.Len())
		}
	}
	if told > keptRows {
		r.remark(CodeSameRows, "%d more pairs of devices have the same rows of readings", told-keptRows)
	}
}

// lively reports whether a column beside gate, temperature and time has four
// different numbers.
func lively(s *Sweep) bool {
	for _, c := range s.Columns {
		switch c.Quantity {
		case record.VG, record.Temp, record.T, record.VDD:
			continue
		}
		different := make([]float64, 0, 4)
		for _, x := range c.Values {
			if x == x && !slices.Contains(different, x) {
				different = append(different, x)
			}
			if len(different) >= 4 {
				return true
			}
		}
	}
	return false
}
