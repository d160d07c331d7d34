package table

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"slices"
	"strconv"
	"strings"
)

const maxColumns = 20000 // of one file; a wide file of more devices is refused

// column is one column of the file and what it is taken for.
type column struct {
	heading
	index    int    // from 0
	as       string // short name or role that it is read as; "" for none
	how      string
	inCells  bool // no unit is known for it but those in its cells
	numbers  int  // cells of the sample by kind
	states   int
	texts    int
	empties  int
	distinct map[string]int // cells of the sample, at most 1000
	counting bool           // 1, 2, 3 ... down the sample
	repeats  bool           // a cell stands twice
}

// numeric reports whether the column holds numbers.
func (c *column) numeric() bool { return c.numbers > c.texts }

// title names the column in messages: 3 "Id".
func (c *column) title() string {
	if c.text == "" {
		return strconv.Itoa(c.index + 1)
	}
	return fmt.Sprintf("%d %q", c.index+1, cut(c.text, 60))
}

// findColumns makes the columns from headers and sample.
func (r *reader) findColumns() error {
	n := len(r.headings)
	for _, s := range r.body {
		if r.headerLine == 0 {
			n = max(n, len(s.cells))
		}
	}
	if n > maxColumns {
		return r.refused(r.headerLine, "it has %d columns, at most %d", n, maxColumns)
	}
	if err := r.checkWidth(n); err != nil {
		return err
	}
	r.cols = make([]column, n)
	for j := range r.cols {
		c := &r.cols[j]
		c.index = j
		if j < len(r.headings) {
			c.heading = r.headings[j]
		}
		if j < len(r.unitCells) {
			r.takeUnitCell(c, r.unitCells[j])
		}
		if n <= 200 {
			c.distinct = map[string]int{}
		}
		c.look(r.body)
	}
	return nil
}

// checkWidth refuses a file whose rows have more cells than its header names:
// most often a decimal comma in a file cut at commas.
func (r *reader) checkWidth(n int) error {
	if r.headerLine == 0 {
		return nil
	}
	longer, most := 0, 0
	for _, s := range r.body {
		cells := len(s.cells)
		for cells > n && len(trim(s.cells[cells-1])) == 0 {
			cells--
		}
		if cells > n {
			longer++
			most = max(most, cells)
		}
	}
	if longer <= len(r.body)/2 {
		return nil
	}
	if r.delim == ',' {
		return r.refused(r.body[0].line, "rows have up to %d cells under a header of %d: the comma seems to be delimiter and decimal mark at once; save it with another delimiter", most, n)
	}
	return r.refused(r.body[0].line, "rows have up to %d cells under a header of %d", most, n)
}

func (r *reader) takeUnitCell(c *column, cell string) {
	u, ok := readUnit(strings.Trim(cell, "()[]{}<> "))
	if !ok || c.hasUnit {
		return
	}
	c.unit, c.hasUnit = u, true
	c.settleUnit()
}

// look counts what the column holds in the sample.
func (c *column) look(body []sampled) {
	c.counting = len(body) >= 3
	last := 0
	for i, s := range body {
		if c.index >= len(s.cells) {
			c.counting = false
			continue
		}
		t := trim(s.cells[c.index])
		switch kindOf(t) {
		case number:
			c.numbers++
		case state:
			c.states++
		case text:
			c.texts++
		case empty:
			c.empties++
		}
		n, err := strconv.Atoi(string(t))
		if err != nil || i > 0 && n != last+1 {
			c.counting = false
		}
		last = n
		if c.distinct != nil && len(c.distinct) < 1000 && len(t) < 100 {
			c.distinct[string(t)]++
			c.repeats = c.repeats || c.distinct[string(t)] > 1
		}
	}
}

// signature names the header for remembering what its columns were taken for;
// "" when there is no header.
func (r *reader) signature() string {
	if r.headerLine == 0 {
		return ""
	}
	var b strings.Builder
	for _, h := range r.headings {
		b.WriteString(h.text)
		b.WriteByte('\x1f')
	}
	sum := sha256.Sum256([]byte(b.String()))
	return hex.EncodeToString(sum[:16])
}

// mapColumns decides what every column is taken for: --map first, then the
// headers; where they leave it open, what was settled for this header earlier.
func (r *reader) mapColumns() error {
	claimed := map[string]bool{}
	if err := r.take(r.opt.Map, "--map", claimed); err != nil {
		return err
	}
	if r.opt.LotColumn != "" && !claimed[string(RoleLot)] {
		if err := r.take(map[string]string{string(RoleLot): r.opt.LotColumn}, "--lot-column", claimed); err != nil {
			return err
		}
	}
	if err := r.takeRemembered(claimed); err != nil {
		return err
	}
	if r.headerLine == 0 {
		return r.placeColumns(claimed)
	}
	r.settleBehaviour()
	return r.takeHeaders(claimed)
}

// take maps columns by name or number.
func (r *reader) take(m map[string]string, how string, claimed map[string]bool) error {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	for _, k := range keys {
		name, err := r.shortName(k)
		if err != nil {
			return err
		}
		j, err := r.columnNamed(m[k], k)
		if err != nil {
			return err
		}
		c := &r.cols[j]
		if c.how != "" && c.as != name {
			return r.refused(r.headerLine, "column %s is mapped to %s and to %s", c.title(), c.as, name)
		}
		if err := r.checkMapUnit(c, name, how); err != nil {
			return err
		}
		c.as, c.how = name, how
		if dim := dimOf(name); dim != "" && c.hasUnit {
			if u, ok := c.unit.as(dim); ok {
				c.unit = u
			} else {
				c.hasUnit = false
			}
		}
		claimed[name] = true
	}
	return nil
}

// shortName reads the left side of --map and --units: vg, vgs, ugs, device, lot.
func (r *reader) shortName(key string) (string, error) {
	k := strings.ToLower(strings.TrimSpace(key))
	if _, ok := quantities[k]; ok {
		return k, nil
	}
	switch Role(k) {
	case RoleDevice, RoleLot, RolePackage, RoleSide, RoleDate, RoleOperator, RoleFixture, RoleDateCode, RoleMarking, RoleTube, RoleNote, RoleIgnore, RoleSweep, RoleRL:
		return k, nil
	}
	if w, ok := words[fold(k)]; ok {
		switch {
		case w.role == roleVth:
			return "vg", nil
		case w.role == roleLoad:
			return roleLoad, nil
		case w.rank < weaker && w.role != roleDrain && w.role != roleTime && w.role != roleTorT:
			return w.role, nil
		}
	}
	return "", r.refused(0, "%q names no quantity: vg, id, vl, vd, vdd, ig, gm, temp, t, or device, lot, package, side, date, operator, fixture, ...", key)
}

// columnNamed finds a column by its header or its number.
func (r *reader) columnNamed(want, key string) (int, error) {
	found := []int{}
	for _, same := range []func(c *column) bool{
		func(c *column) bool { return c.text == want },
		func(c *column) bool { return fold(c.text) == fold(want) && fold(want) != "" },
		func(c *column) bool { return fold(c.name) == fold(want) && fold(want) != "" },
	} {
		for j := range r.cols {
			if r.headerLine > 0 && same(&r.cols[j]) {
				found = append(found, j)
			}
		}
		if len(found) > 0 {
			break
		}
	}
	if len(found) == 1 {
		return found[0], nil
	}
	if n, err := strconv.Atoi(strings.TrimSpace(want)); err == nil && len(found) == 0 {
		if n >= 1 && n <= len(r.cols) {
			return n - 1, nil
		}
		return 0, r.refused(r.headerLine, "%s=%s: there is no column %d, the file has %d", key, want, n, len(r.cols))
	}
	if len(found) > 1 {
		return 0, r.ambiguous(r.headerLine, fmt.Sprintf("--map %s=%d or --map %s=%d", key, found[0]+1, key, found[1]+1), "%d columns are headed %q", len(found), cut(want, 60))
	}
	return 0, r.refused(r.headerLine, "%s=%s: no column is headed so; the columns are %s", key, cut(want, 60), r.listColumns())
}

func (r *reader) listColumns() string {
	var t []string
	for j := range r.cols {
		if j == 20 {
			t = append(t, fmt.Sprintf("... (%d)", len(r.cols)))
			break
		}
		t = append(t, r.cols[j].title())
	}
	return strings.Join(t, ", ")
}

// settleBehaviour corrects what a header seems to say by what its column holds.
func (r *reader) settleBehaviour() {
	spots := r.spotCurrent().IsKnown() || r.has(roleVth) && !r.has("vg") || slices.ContainsFunc(r.cols, func(c column) bool { return c.spot.IsKnown() })
	device := slices.ContainsFunc(r.cols, func(c column) bool { return c.role == string(RoleDevice) && c.rank == sure })
	for j := range r.cols {
		c := &r.cols[j]
		if c.how != "" {
			continue
		}
		switch {
		case c.role == "id" && fold(c.text) == "id" && !device && (c.texts > c.numbers || spots && !c.hasUnit):
			c.role, c.rank = string(RoleDevice), sure // ID: the identifier, not the drain current
		case c.hasUnit && (c.unit.dim == "K" || c.unit.dim == "degF" || c.unit.dim == "min") && (c.role == "temp" || c.role == "t") && !r.isGiven(c.role):
			c.as, c.how, c.role = string(RoleIgnore), "header", ""
			r.remark(CodeColumnNotUsed, "column %s is not used: %s is not read, only °C and seconds are", c.title(), c.unit.text)
		case c.role == roleTime && !c.numeric():
			c.role = string(RoleDate)
		case c.role == roleTime:
			c.role = "t"
		case c.role == roleTorT:
			c.as, c.how = string(RoleIgnore), "header"
			r.note("column %s is not used: temperature and time have the same letter; --map temp=%d or --map t=%d settles it", c.title(), c.index+1, c.index+1)
		case c.rank == weaker && dimOf(c.role) != "" && !c.numeric() && c.texts > 0:
			c.role = ""
		}
	}
}

// takeHeaders maps the columns that are left by their headers. Of several
// columns with one role the surest word wins; equally sure ones are ambiguous,
// but for spots, and for texts, where the first wins.
func (r *reader) takeHeaders(claimed map[string]bool) error {
	by := map[string][]*column{}
	for j := range r.cols {
		c := &r.cols[j]
		if c.how == "" && c.role != "" && !r.isClaimed(c, claimed) {
			by[c.role] = append(by[c.role], c)
		}
	}
	r.settleGeneric(by, claimed)
	if err := r.settleDrain(by); err != nil {
		return err
	}
	for _, role := range sortedKeys(by) {
		list := by[role]
		if (role == "vg" || role == "gm") && slices.ContainsFunc(list, func(c *column) bool { return c.spot.IsKnown() }) {
			for _, c := range list {
				c.as, c.how = role, "header"
			}
			continue
		}
		best := []*column{list[0]}
		for _, c := range list[1:] {
			if c.rank < best[0].rank {
				best = best[:0]
			}
			if len(best) == 0 || c.rank == best[0].rank {
				best = append(best, c)
			}
		}
		if role == string(RoleDevice) {
			best = r.pickDevice(list, best)
		}
		best[0].as, best[0].how = role, "header"
		if len(best) > 1 && quantities[role] != "" {
			c, err := r.askColumn(role, best, fmt.Sprintf("columns %s and %s both look like %s", best[0].title(), best[1].title(), role))
			if err != nil {
				return err
			}
			best[0].as, best[0].how = "", ""
			c.as, c.how = role, "asked"
		}
	}
	return nil
}

// askColumn asks which of several columns holds a quantity.
func (r *reader) askColumn(role string, list []*column, text string) (*column, error) {
	q := Question{Text: text, Flag: "--map " + role + "="}
	var flags []string
	for _, c := range list {
		n := strconv.Itoa(c.index + 1)
		q.Choices = append(q.Choices, n)
		if len(flags) < 3 {
			flags = append(flags, "--map "+role+"="+n)
		}
	}
	answer, err := r.ask(q, r.headerLine, strings.Join(flags, " or "))
	if err != nil {
		return nil, err
	}
	return list[slices.Index(q.Choices, answer)], nil
}

// isClaimed reports whether the role of the column is taken by a flag. A load
// column is settled by vl or vd; a spot column by vg.
func (r *reader) isClaimed(c *column, claimed map[string]bool) bool {
	switch c.role {
	case roleLoad:
		return claimed["vl"] || claimed[roleLoad]
	case roleVth:
		return claimed["vg"]
	}
	return claimed[c.role]
}

// settleGeneric takes columns headed just 'voltage' and 'current' for gate
// voltage and drain current when nothing else is.
func (r *reader) settleGeneric(by map[string][]*column, claimed map[string]bool) {
	for _, g := range []struct {
		generic, role string
		others        []string
	}{
		{roleVolt, "vg", []string{"vg", roleVth}},
		{roleAmp, "id", []string{"id"}},
	} {
		list := by[g.generic]
		delete(by, g.generic)
		taken := false
		for _, o := range g.others {
			taken = taken || claimed[o] || len(by[o]) > 0
		}
		if !taken && len(list) == 1 {
			by[g.role] = list
			r.note("column %s is taken for %s, since no other is", list[0].title(), g.role)
		}
	}
}

// settleDrain takes a column headed just 'drain' for the quantity that --units
// names.
func (r *reader) settleDrain(by map[string][]*column) error {
	list := by[roleDrain]
	delete(by, roleDrain)
	if len(list) == 0 {
		return nil
	}
	for _, q := range []string{"id", "vd"} {
		if _, ok := r.unitOption(q); ok && len(by[q]) == 0 {
			by[q] = list
			return nil
		}
	}
	n := list[0].index + 1
	return r.ambiguous(r.headerLine, fmt.Sprintf("--map id=%d or --map vd=%d", n, n), "column %s may be drain current or drain voltage", list[0].title())
}

// pickDevice chooses between several columns that may name the device. A column
// that is the same all the way down (the type printed on the bag) yields to one
// that differs from row to row.
func (r *reader) pickDevice(all, best []*column) []*column {
	if len(all) == 1 || len(r.body) < 2 {
		return best[:1]
	}
	pick := best[0]
	if len(pick.distinct) == 1 {
		for _, c := range all {
			if len(c.distinct) > 1 && !(c.counting && (r.has("id") || r.has("vl") || r.has("vd") || r.has(roleLoad))) {
				pick = c
				r.note("column %s names the device: %s is the same in every row", c.title(), best[0].title())
				break
			}
		}
	}
	return []*column{pick}
}

// has reports whether any column may be that quantity by its header.
func (r *reader) has(role string) bool {
	return slices.ContainsFunc(r.cols, func(c column) bool { return c.role == role || c.as == role })
}

func sortedKeys(m map[string][]*column) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// mapped gives the columns that are read as that, in file order.
func (r *reader) mapped(as string) []*column {
	var list []*column
	for j := range r.cols {
		if r.cols[j].as == as {
			list = append(list, &r.cols[j])
		}
	}
	return list
}

// first gives the first column that is read as that, nil for none.
func (r *reader) first(as string) *column {
	if l := r.mapped(as); len(l) > 0 {
		return l[0]
	}
	return nil
}
