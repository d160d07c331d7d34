package table

import (
	"fmt"
	"slices"
)

// takeRemembered maps columns as --map settled them earlier for this header. It
// serves where the header leaves something open; a column whose name and unit
// say what it is stays that, for what was settled earlier may have been a slip.
func (r *reader) takeRemembered(claimed map[string]bool) error {
	if r.opt.Remembered == nil || r.headerLine == 0 {
		return nil
	}
	known, ok := r.opt.Remembered(r.file.Dialect.Signature)
	if !ok {
		return nil
	}
	fresh := map[string]string{}
	for k, v := range known {
		name, err := r.shortName(k)
		if err != nil || claimed[name] {
			continue
		}
		j, err := r.columnNamed(v, k)
		if err != nil {
			return err
		}
		if r.leftOpen(&r.cols[j], name) {
			fresh[k] = v
		}
	}
	if len(fresh) == 0 {
		return nil
	}
	r.note("columns as settled earlier for this header by --map")
	return r.take(fresh, "remembered", claimed)
}

// leftOpen reports whether the header leaves open if the column is that
// quantity: by its name, by its unit, or since another column is headed so too.
func (r *reader) leftOpen(c *column, name string) bool {
	if c.how != "" { // a flag has it
		return false
	}
	if !c.fits(name) && !r.isGiven(name) {
		return false
	}
	if !c.settled() {
		return true
	}
	return headedAs(c, name) && slices.ContainsFunc(r.cols, func(o column) bool {
		return o.index != c.index && o.role == c.role && o.rank == c.rank
	})
}

// settled reports whether the header alone says which quantity the column
// holds, and in which unit.
func (c *column) settled() bool {
	if c.rank != sure || !c.hasUnit || c.odd != "" {
		return false
	}
	_, ok := quantities[c.role]
	return (ok || c.role == roleVth) && c.fits(c.role)
}

// headedAs reports whether the header names that quantity.
func headedAs(c *column, name string) bool {
	return c.role == name || c.role == roleVth && name == "vg"
}

// fits reports whether the unit of the header, if any, is one of that quantity.
func (c *column) fits(name string) bool {
	dim := dimOf(name)
	if dim == "" || !c.hasUnit {
		return true
	}
	_, ok := c.unit.as(dim)
	return ok
}

// checkMapUnit refuses a mapping that the unit in the header contradicts, unless
// --units says that the header is wrong.
func (r *reader) checkMapUnit(c *column, name, how string) error {
	if c.fits(name) {
		return nil
	}
	dim := dimOf(name)
	if given, ok := r.unitOption(name); ok {
		r.remark(CodeFlagWins, "column %s is headed in %s and read as %s in %s, as %s and --units say", c.title(), c.unit.text, name, given, how)
		return nil
	}
	hint := fmt.Sprintf("--units %s=%s if the header is wrong", name, dim)
	for j := range r.cols {
		if o := &r.cols[j]; o.settled() && headedAs(o, name) {
			hint = fmt.Sprintf("--map %s=%d, or %s", name, j+1, hint)
			break
		}
	}
	return r.ambiguous(r.headerLine, hint, "column %s is to be read as %s, but its header says %s, which is no unit of it", c.title(), name, c.unit.text)
}
