package table

import (
	"bytes"
	"strings"

	"gatesill/store/record"
)

// field is one column of numbers as the rows are read.
type field struct {
	*column
	q     record.Quantity
	scale scale
}

// fields makes the fields of columns, in the order in which quantities are
// stored. A load column is read as the voltage across R_L until what it does is
// known.
func fields(cols []*column) []field {
	var list []field
	for _, q := range record.Quantities {
		for _, c := range cols {
			have := quantities[c.as]
			if c.as == roleLoad {
				have = record.VL
			}
			if have != q || len(list) > 0 && list[len(list)-1].q == q {
				continue
			}
			list = append(list, field{column: c, q: q, scale: newScale(dimOf(c.as), c.unit.exp, c.inCells)})
		}
	}
	return list
}

// names is who a row is about.
type names struct {
	device, lot, pkg, side string
}

// builder gathers the points of one device.
type builder struct {
	names
	bad     string // why every row of this device is refused
	cols    []buffer
	marks   []record.Mark
	lines   []record.Lines
	returns []int  // points at which the device came back after others
	breaks  []int  // points at which the file says that another sweep begins
	sweep   string // of the sweep column, last row
	states  int    // cells with a state
}

func (b *builder) len() int {
	if len(b.cols) == 0 {
		return 0
	}
	return len(b.cols[0].values)
}

// addLine says that the last point stands on that line.
func (b *builder) addLine(line int) {
	if n := len(b.lines); n > 0 && b.lines[n-1].Line+b.lines[n-1].Count == line {
		b.lines[n-1].Count++
		return
	}
	b.lines = append(b.lines, record.Lines{Point: b.len() - 1, Line: line, Count: 1})
}

// longReader reads rows that hold one point each, of many devices or of one.
type longReader struct {
	r        *reader
	w        *rows
	fields   []field
	who      []*column // device, lot, package, side; nil where there is none
	only     *column   // the one of them, when there is but one
	sweep    *column
	width    int // cells that a row must have
	builders []*builder
	byKey    map[string]*builder
	raw      []byte   // names of the last row as they stand there
	key      []byte   // names of the last row, trimmed
	last     *builder // of the last row
	filled   *builder // of the last row that was kept
	device   string   // of a file without device column
}

// readLong reads the layouts long and per-device.
func (r *reader) readLong() ([]*builder, error) {
	l := &longReader{r: r, w: r.rowsOfData(), fields: fields(r.numberColumns()), byKey: map[string]*builder{}, device: r.talkDevice}
	for _, role := range []Role{RoleDevice, RoleLot, RolePackage, RoleSide} {
		l.who = append(l.who, r.first(string(role)))
	}
	if l.who[1] == nil && l.who[2] == nil && l.who[3] == nil {
		l.only = l.who[0]
	}
	l.sweep = r.first(string(RoleSweep))
	for _, f := range l.fields {
		l.width = max(l.width, f.index+1)
	}
	for _, c := range append(l.who, l.sweep) {
		if c != nil {
			l.width = max(l.width, c.index+1)
		}
	}
	l.w.onTalk = l.talk
	l.w.onBreak = func() {
		if l.last != nil && r.layout == layoutPerDevice {
			l.breakAt(l.last)
		}
	}
	for l.w.nextRow() {
		if why := l.w.misfit(l.width); why != "" {
			l.w.refuseUnlessHeader(why)
			continue
		}
		b := l.builder()
		if len(l.builders) > maxSweeps {
			return nil, r.refused(l.w.at, "it names more than %d devices", maxSweeps)
		}
		if b.bad != "" {
			l.w.refuseUnlessHeader(b.bad)
			continue
		}
		l.point(b)
	}
	return l.builders, nil
}

// point adds the row to its device, or refuses it.
func (l *longReader) point(b *builder) {
	cells, marks, states := l.w.cells, len(b.marks), l.r.file.States
	for j := range l.fields {
		f := &l.fields[j]
		col := &b.cols[j]
		if col.fast(cells[f.index], l.r.num, &f.scale) {
			continue
		}
		st, why := col.put(cells[f.index], l.r.num, &f.scale)
		if why != "" {
			for i := range l.fields[:j] {
				b.cols[i].drop()
			}
			b.states -= l.r.file.States - states
			b.marks, l.r.file.States = b.marks[:marks], states
			l.w.refuseUnlessHeader(f.as + " " + why)
			return
		}
		if st != "" {
			b.states++
			b.marks = append(b.marks, record.Mark{Index: len(col.values) - 1, Quantity: f.q, State: st, Raw: cut(string(trim(cells[f.index])), 40)})
			l.r.file.States++
		}
	}
	if l.sweep != nil {
		if s := trim(cells[l.sweep.index]); string(s) != b.sweep {
			if b.len() > 1 {
				b.breaks = append(b.breaks, b.len()-1)
			}
			b.sweep = string(s)
		}
	}
	b.addLine(l.w.at)
	l.filled = b
}

// builder finds the device of the row. Most rows are of the same device as the
// one before, so that is looked at first.
func (l *longReader) builder() *builder {
	if l.only != nil && l.last != nil {
		if cell := l.w.cells[l.only.index]; len(cell)+1 == len(l.raw) && string(cell) == string(l.raw[:len(cell)]) {
			return l.last
		}
	}
	n := len(l.raw)
	for _, c := range l.who {
		if c != nil {
			l.raw = append(append(l.raw, l.w.cells[c.index]...), 0x1f)
		}
	}
	same := bytes.Equal(l.raw[:n], l.raw[n:])
	l.raw = l.raw[:copy(l.raw, l.raw[n:])]
	if same && l.last != nil {
		return l.last
	}
	l.enter()
	return l.last
}

// enter makes the device of the row the last one.
func (l *longReader) enter() {
	l.key = append(l.key[:0], l.device...)
	for _, c := range l.who {
		l.key = append(l.key, 0x1f)
		if c != nil {
			l.key = append(l.key, trim(l.w.cells[c.index])...)
		}
	}
	b, known := l.byKey[string(l.key)]
	if !known {
		b = l.newBuilder()
	} else if b != l.filled && b.len() > 0 {
		b.returns = append(b.returns, b.len())
	}
	l.last = b
}

func (l *longReader) newBuilder() *builder {
	who := names{device: l.device}
	for i, c := range l.who {
		if c != nil {
			*who.at(i) = string(trim(l.w.cells[c.index]))
		}
	}
	if l.r.sided {
		who.device = who.pkg + who.side
	}
	bad := who.check()
	b := &builder{names: who, bad: bad, cols: make([]buffer, len(l.fields))}
	if bad == "" {
		l.reserve(b)
	}
	l.byKey[string(l.key)] = b
	l.builders = append(l.builders, b)
	return b
}

// at gives the i-th name: device, lot, package, side.
func (n *names) at(i int) *string {
	return [...]*string{&n.device, &n.lot, &n.pkg, &n.side}[i]
}

// reserve makes room for as many points as the device before had; so all the
// room that is made never exceeds twice what is used.
func (l *longReader) reserve(b *builder) {
	var before *builder
	if n := len(l.builders); n > 0 {
		before = l.builders[n-1]
	}
	for j := range b.cols {
		if before != nil && j < len(before.cols) {
			b.cols[j].values = make([]float64, 0, len(before.cols[j].values))
			n := len(before.cols[j].text)
			b.cols[j].text = make([]byte, 0, n+n/16+16)
		}
		b.cols[j].text = append(b.cols[j].text, '[')
	}
}

// check says why no row may bear these names, and writes the side large.
func (n *names) check() string {
	if err := record.CheckName("device", n.device); err != nil {
		return plainName(err)
	}
	for _, p := range []struct{ what, name string }{{"lot", n.lot}, {"package", n.pkg}} {
		if p.name == "" {
			continue
		}
		if err := record.CheckName(p.what, p.name); err != nil {
			return plainName(err)
		}
	}
	switch strings.ToUpper(n.side) {
	case "", "A", "B":
		n.side = strings.ToUpper(n.side)
		return ""
	}
	return "side " + cut(n.side, 40) + " is neither A nor B"
}

// plainName is the error of a name without the sentinel behind it.
func plainName(err error) string {
	return strings.TrimSuffix(err.Error(), ": "+record.ErrInvalid.Error())
}

func (l *longReader) breakAt(b *builder) {
	if n := b.len(); n > 0 {
		b.breaks = append(b.breaks, n)
	}
}

// talk takes a comment among the rows: another device may begin there.
func (l *longReader) talk(line int, row []byte) {
	l.r.addTalk(line, row)
	if l.r.layout != layoutPerDevice || l.who[0] != nil {
		return
	}
	if name, _ := talkDevice(string(row[:min(len(row), maxTalk)])); name != "" && name != l.device {
		l.device, l.last = name, nil
	} else if name != "" && l.last != nil {
		l.breakAt(l.last)
	}
}
