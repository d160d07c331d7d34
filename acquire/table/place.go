package table

import (
	"math"
	"slices"
)

// placeColumns takes the columns of a file without header for what they are by
// their place, when what they hold leaves no doubt; else the file is ambiguous
// until --map settles it. Order is that of common lists: device, gate voltage,
// then the one quantity read at it.
func (r *reader) placeColumns(claimed map[string]bool) error {
	r.byCellUnits(claimed)
	var texts, free []*column
	for j := range r.cols {
		c := &r.cols[j]
		switch {
		case c.how != "":
		case c.texts > c.numbers:
			texts = append(texts, c)
		case c.numbers > 0 || c.states > 0:
			free = append(free, c)
		}
	}
	if !claimed[string(RoleDevice)] && len(texts) == 1 {
		texts[0].as, texts[0].how = string(RoleDevice), "position"
		claimed[string(RoleDevice)] = true
	}
	if claimed["vg"] {
		return nil
	}
	spot := r.spotCurrent().IsKnown()
	switch {
	case spot && !claimed[string(RoleDevice)] && len(free) == 2 && !free[0].repeats && whole(free[0]):
		free[0].as, free[0].how = string(RoleDevice), "position" // devices are numbered
		free[1].as, free[1].how = "vg", "position"
		return nil
	case spot && len(free) == 1 && (claimed[string(RoleDevice)] || len(texts) == 0):
		free[0].as, free[0].how = "vg", "position"
		return nil
	case len(free) == 2 && !claimed["id"] && len(texts) <= 1 && r.looksSwept(free[0], free[1]):
		free[0].as, free[0].how = "vg", "position"
		free[1].as, free[1].how = r.secondQuantity(), "position"
		r.note("the file has no header: column %s is taken for the gate voltage, since it goes in even steps, and column %s for %s", free[0].title(), free[1].title(), free[1].as)
		return nil
	}
	hint := "--map device=1,vg=2,id=3"
	switch {
	case len(free) == 1 && len(texts) <= 1 && !spot:
		hint = "--spot-current 10mA"
	case len(r.cols) == 2 && r.delim == ',' && r.opt.Decimal == "" && whole(&r.cols[0]) && whole(&r.cols[1]):
		hint = "--decimal comma for one column of numbers, or --map device=1,vg=2 for two"
	case len(r.cols) == 2 && spot:
		hint = "--map device=1,vg=2"
	case len(r.cols) == 2:
		hint = "--map vg=1,id=2, or --map device=1,vg=2 --spot-current 10mA"
	case len(r.cols) == 1:
		hint = "--map vg=1 --spot-current 10mA"
	}
	if len(r.cols) == 1 {
		return r.ambiguous(0, hint, "the file has no header, and its one column does not tell what it is")
	}
	return r.ambiguous(0, hint, "the file has no header, and its %d columns do not tell what they are", len(r.cols))
}

// byCellUnits takes columns whose cells carry units for what the units say,
// when there is one such column: the only volts are the gate voltage, the only
// amperes the drain current.
func (r *reader) byCellUnits(claimed map[string]bool) {
	by := map[string][]*column{}
	for j := range r.cols {
		c := &r.cols[j]
		if c.how == "" && c.numbers > c.texts {
			dim := r.cellDim(c)
			by[dim] = append(by[dim], c)
		}
	}
	for dim, as := range map[string]string{"V": "vg", "A": "id"} {
		if list := by[dim]; len(list) == 1 && !claimed[as] {
			list[0].as, list[0].how = as, "behaviour"
			claimed[as] = true
			r.note("column %s is taken for %s: the only one whose cells say %s", list[0].title(), as, dim)
		}
	}
}

// cellDim is the dimension of the first unit that stands in the cells, "" for
// none.
func (r *reader) cellDim(c *column) string {
	for _, s := range r.body {
		if c.index >= len(s.cells) {
			continue
		}
		t := strip(string(trim(s.cells[c.index])))
		for _, n := range []numeral{{mark: '.'}, {mark: ','}} {
			if _, rest, ok := n.decimal(t); ok && rest != "" {
				if u, ok := readUnit(rest); ok {
					return u.dim
				}
			}
		}
	}
	return ""
}

// secondQuantity is what the column beside the gate holds: what --units names,
// else the drain current.
func (r *reader) secondQuantity() string {
	for _, q := range []string{"id", "vl", "vd"} {
		if _, ok := r.opt.Units[q]; ok {
			return q
		}
	}
	return "id"
}

// whole reports whether the column holds nothing but whole numbers.
func whole(c *column) bool {
	for t := range c.distinct {
		if slices.ContainsFunc([]byte(t), func(b byte) bool { return b-'0' > 9 }) {
			return false
		}
	}
	return c.texts == 0 && c.states == 0
}

// looksSwept reports whether gate goes in even steps and other does not: a gate
// is set step by step, what depends on it goes by its own law.
func (r *reader) looksSwept(gate, other *column) bool {
	if len(r.body) < 5 {
		return false
	}
	for _, n := range []numeral{{mark: '.'}, {mark: ','}} {
		a, b := columnValues(r.body, gate.index, n), columnValues(r.body, other.index, n)
		if len(a) < len(r.body)*4/5 || len(b) < len(r.body)*4/5 {
			continue
		}
		return unevenness(a) < 0.3 && unevenness(b) > 2*unevenness(a)+0.1
	}
	return false
}

// unevenness is the median deviation of the steps from the usual one, as a
// fraction of it. Steps back to the start are few and do not count.
func unevenness(v []float64) float64 {
	step := usualStep(v)
	if step == 0 {
		return math.Inf(1)
	}
	var d []float64
	for i := 1; i < len(v); i++ {
		d = append(d, math.Abs(math.Abs(v[i]-v[i-1])-step)/step)
	}
	return median(d)
}
