package table

import (
	"fmt"
	"strings"

	"gatesill/store/record"
)

// wideColumns takes the free columns for devices, each named by its header, and
// settles what their numbers are: a current or the voltage at the load.
func (r *reader) wideColumns(free []*column) error {
	r.cutNames(free)
	as := ""
	for _, c := range free {
		if c.name == "" {
			c.name = c.text
		}
		switch {
		case !c.hasUnit:
			continue
		case c.unit.dim == "A" && as != roleLoad:
			as = "id"
		case c.unit.dim == "V" && as != "id":
			as = roleLoad
		default:
			return r.ambiguous(r.headerLine, "", "column %s is in %s, other device columns are not", c.title(), c.unit.text)
		}
	}
	if as == "" {
		if as = r.wideByOption(); as == "" {
			as = "id"
			if r.cellsInVolts(free) {
				as = roleLoad
			}
		}
	}
	for _, c := range free {
		c.as, c.how = as, "header"
		if c.hasUnit {
			c.unit, _ = c.unit.as(dimOf(as))
		}
	}
	return nil
}

// wideByOption takes the quantity from --units, when that names one that the
// columns can be.
func (r *reader) wideByOption() string {
	for _, q := range []string{"id", "vl", "vd", roleLoad} {
		for given := range r.opt.Units {
			if name, err := r.shortName(given); err == nil && name == q {
				return q
			}
		}
	}
	return ""
}

// cellsInVolts reports whether the cells themselves say volts.
func (r *reader) cellsInVolts(free []*column) bool {
	for _, s := range r.body {
		for _, c := range free {
			if c.index >= len(s.cells) {
				continue
			}
			t := trim(s.cells[c.index])
			for _, n := range []numeral{{mark: '.'}, {mark: ','}} {
				if _, rest, ok := n.decimal(strip(string(t))); ok && rest != "" {
					if u, ok := readUnit(rest); ok {
						return u.dim == "V"
					}
				}
			}
		}
	}
	return false
}

// cutNames takes units and a common lead off the device names: Id_D07 (mA). A
// unit that is only a last word or letter is one only when every column has it:
// D07_A may be side A of package D07.
func (r *reader) cutNames(free []*column) {
	loose := true
	for _, c := range free {
		name, u, ok := splitUnit(oneLine(c.text))
		loose = loose && ok && name != "" && (u.dim == "A" || u.dim == "V")
	}
	for _, c := range free {
		name, u, ok := marked(oneLine(c.text))
		if !ok && loose {
			name, u, ok = splitUnit(oneLine(c.text))
		}
		if c.name = name; ok {
			c.unit, c.hasUnit = u, true
			continue
		}
		c.unit, c.hasUnit = unit{}, false
		if c.index < len(r.unitCells) {
			c.unit, c.hasUnit = readUnit(strings.Trim(r.unitCells[c.index], "()[]{}<> "))
		}
	}
	r.cutLead(free)
}

// marked takes off a unit that is marked as one: in brackets, or behind a slash
// and longer than a letter.
func marked(t string) (name string, u unit, ok bool) {
	if name, u, ok = bracketUnit(t); ok && name != "" {
		return name, u, true
	}
	if i := strings.LastIndexByte(t, '/'); i > 0 {
		if u, ok = readUnit(t[i+1:]); ok && len(u.text) > 1 {
			return tidy(t[:i]), u, true
		}
	}
	return t, unit{}, false
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// cutLead takes a lead like "Id_" or "I_D " off names that all have the same.
func (r *reader) cutLead(free []*column) {
	names := make([]string, len(free))
	role := ""
	for i, c := range free {
		lead, name := splitLead(c.name)
		w, ok := lookup(lead)
		if !ok || w.rank != sure || name == "" || dimOf(w.role) == "" || w.role == "vg" || role != "" && w.role != role {
			return
		}
		role, names[i] = w.role, name
	}
	for i, c := range free {
		c.name = names[i]
	}
}

// splitLead splits "I_D D07", "Id_D07" and "Id(D07)" behind the quantity.
func splitLead(t string) (lead, name string) {
	const seps = "_ :("
	j := strings.IndexAny(t, seps)
	if j == 1 && t[j] == '_' { // I_D
		if k := strings.IndexAny(t[2:], seps); k >= 0 {
			j = k + 2
		}
	}
	if j <= 0 {
		return "", t
	}
	return t[:j], strings.Trim(t[j:], "_ :()")
}

// readWide reads one gate column and one column per device.
func (r *reader) readWide() ([]*builder, error) {
	var devices, shared []*column
	for _, c := range r.numberColumns() {
		if c.as == "id" || c.as == "vl" || c.as == "vd" || c.as == roleLoad {
			devices = append(devices, c)
		} else {
			shared = append(shared, c)
		}
	}
	q := record.VL
	if real, ok := quantities[devices[0].as]; ok {
		q = real
	}
	common := fields(shared)
	n := len(common)
	w := r.rowsOfData()
	w.onTalk = r.addTalk
	width := 0
	for _, c := range append(shared, devices...) {
		width = max(width, c.index+1)
	}
	all := make([]field, 0, n+len(devices))
	all = append(all, common...)
	for _, c := range devices {
		all = append(all, field{column: c, q: q, scale: newScale(dimOf(c.as), c.unit.exp, c.inCells)})
	}
	cols := make([]buffer, len(all))
	marks := make([][]record.Mark, len(all))
	for j := range cols {
		cols[j].text = append(cols[j].text, '[')
	}
	share := &builder{cols: cols[:1]}
	w.onBreak = func() {
		if k := share.len(); k > 0 {
			share.breaks = append(share.breaks, k)
		}
	}
	for w.nextRow() {
		if why := w.misfit(width); why != "" {
			w.refuseUnlessHeader(why)
			continue
		}
		if why := r.wideRow(w, all, cols, marks); why != "" {
			w.refuseUnlessHeader(why)
			continue
		}
		share.addLine(w.at)
	}
	return r.wideBuilders(all, n, cols, marks, share)
}

// wideRow adds one row to all columns, or to none and says why.
func (r *reader) wideRow(w *rows, all []field, cols []buffer, marks [][]record.Mark) string {
	for j := range all {
		f, cell := &all[j], w.cells[all[j].index]
		if cols[j].fast(cell, r.num, &f.scale) {
			continue
		}
		st, why := cols[j].put(cell, r.num, &f.scale)
		if why == "" && st != "" {
			i := len(cols[j].values) - 1
			marks[j] = append(marks[j], record.Mark{Index: i, Quantity: f.q, State: st, Raw: cut(string(trim(cell)), 40)})
			r.file.States++
		}
		if why == "" {
			continue
		}
		for i := range all[:j] {
			cols[i].drop()
			if m := marks[i]; len(m) > 0 && m[len(m)-1].Index == len(cols[i].values) {
				marks[i] = m[:len(m)-1]
				r.file.States--
			}
		}
		if f.name != "" {
			return fmt.Sprintf("%s %s", cut(f.name, 40), why)
		}
		return f.as + " " + why
	}
	return ""
}

// wideBuilders makes one builder of each device column; they share the others.
func (r *reader) wideBuilders(all []field, n int, cols []buffer, marks [][]record.Mark, share *builder) ([]*builder, error) {
	var list []*builder
	for j := n; j < len(all); j++ {
		who := names{device: strings.TrimSpace(all[j].name)}
		if bad := who.check(); bad != "" {
			return nil, r.refused(r.headerLine, "column %d: %s", all[j].index+1, bad)
		}
		b := &builder{names: who, lines: share.lines, breaks: share.breaks}
		b.cols = append(append(make([]buffer, 0, n+1), cols[:n]...), cols[j])
		b.marks = mergeMarks(marks[:n], marks[j])
		list = append(list, b)
	}
	return list, nil
}

// mergeMarks joins marks of several columns, ascending by point.
func mergeMarks(shared [][]record.Mark, own []record.Mark) []record.Mark {
	count := len(own)
	for _, m := range shared {
		count += len(m)
	}
	if count == len(own) {
		return own
	}
	all := make([]record.Mark, 0, count)
	for _, m := range shared {
		all = append(all, m...)
	}
	all = append(all, own...)
	sortMarks(all)
	return all
}
