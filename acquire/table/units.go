package table

import (
	"fmt"
	"math"
)

// unitOption gives the unit that --units states for a quantity. A load column
// may be given as vl or vd.
func (r *reader) unitOption(short string) (string, bool) {
	keys := []string{short}
	switch short {
	case roleLoad:
		keys = append(keys, "vl", "vd")
	case "vl", "vd":
		keys = append(keys, roleLoad)
	}
	for _, k := range keys {
		for given, u := range r.opt.Units {
			if name, err := r.shortName(given); err == nil && name == k {
				return u, true
			}
		}
	}
	return "", false
}

// checkUnitOptions refuses a --units that says nothing.
func (r *reader) checkUnitOptions() error {
	for k, v := range r.opt.Units {
		name, err := r.shortName(k)
		if err != nil {
			return err
		}
		dim := dimOf(name)
		u, ok := readUnit(v)
		if ok {
			_, ok = u.as(dim)
		}
		if !ok || dim == "" {
			return r.refused(0, "unit %q does not fit %s", v, k)
		}
	}
	return nil
}

// settleUnits finds the unit of every column of numbers: --units, header or
// unit line, the cells. Columns without any are asked about or ambiguous, but
// for temperature and time.
func (r *reader) settleUnits(cols []*column) error {
	var open []*column
	told := map[string]bool{} // a wide file has one unit for thousands of columns
	for _, c := range cols {
		dim := dimOf(c.as)
		if given, ok := r.unitOption(c.as); ok {
			u, _ := readUnit(given)
			u, _ = u.as(dim)
			if c.hasUnit && c.unit != u && !told[c.as] {
				told[c.as] = true
				r.remark(CodeFlagWins, "column %s is headed in %s and read in %s, as --units says", c.title(), c.unit.text, u.text)
			}
			c.unit, c.hasUnit, c.odd = u, true, ""
			continue
		}
		if c.odd != "" {
			return r.ambiguous(r.headerLine, fmt.Sprintf("--units %s=m%s", c.as, dim), "column %s is in %s, which cannot be meant", c.title(), c.odd)
		}
		if c.hasUnit {
			if _, ok := c.unit.as(dim); !ok {
				return r.ambiguous(r.headerLine, fmt.Sprintf("--map %s=COLUMN or --units %s=%s", c.as, c.as, dim), "column %s is read as %s, but %s is no unit of it", c.title(), c.as, c.unit.text)
			}
			continue
		}
		if r.unitsInCells(c, dim) {
			c.inCells = true
			continue
		}
		switch c.as {
		case "temp", "t":
			c.unit, c.hasUnit = unit{text: shown("", dim), dim: dim}, true
			r.note("column %s has no unit and is taken in %s", c.title(), c.unit.text)
		default:
			open = append(open, c)
		}
	}
	return r.askUnits(open)
}

// unitsInCells reports whether cells of the column carry a prefix or unit of
// their own; bare numbers among them are in the base unit.
func (r *reader) unitsInCells(c *column, dim string) bool {
	s := newScale(dim, 0, true)
	for _, row := range r.body {
		if c.index >= len(row.cells) {
			continue
		}
		t := trim(row.cells[c.index])
		if kindOf(t) != number {
			continue
		}
		d, rest, ok := r.num.decimal(strip(string(t)))
		if ok && rest != "" {
			if _, why := d.suffix(rest, &s); why == "" {
				return true
			}
		}
	}
	return false
}

// doubtUnits remarks on columns whose numbers no bench gives in the unit of
// their header. The limits are generous: beyond any part that is sorted by
// threshold (common practice, no source).
func (r *reader) doubtUnits() {
	most := map[string]float64{}
	for i := range r.file.Sweeps {
		for _, c := range r.file.Sweeps[i].Columns {
			short := shortOf(c.Quantity)
			most[short] = max(most[short], greatest(c.Values))
		}
	}
	for _, l := range []struct {
		short     string
		low, high float64
	}{{"vg", 0.05, 60}, {"id", 1e-7, 300}, {"vl", 0, 3000}, {"vd", 0.005, 3000}, {"vdd", 0.1, 3000}} {
		x, ok := most[l.short]
		if !ok || x == 0 {
			continue
		}
		c := r.first(l.short)
		if c == nil {
			c = r.first(roleLoad)
		}
		where := l.short
		if c != nil {
			where = "column " + c.title()
		}
		if x > l.high {
			r.remark(CodeUnitDoubtful, "%s goes up to %.3g %s: is its unit right?", where, x, dimOf(l.short))
		} else if x < l.low {
			r.remark(CodeUnitDoubtful, "%s never gets beyond %.3g %s: is its unit right?", where, x, dimOf(l.short))
		}
	}
}

// greatest is the greatest magnitude among the numbers.
func greatest(v []float64) float64 {
	m := 0.0
	for _, x := range v {
		if a := math.Abs(x); a > m {
			m = a
		}
	}
	return m
}
