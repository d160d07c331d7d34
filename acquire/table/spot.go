package table

import (
	"cmp"
	"math"
	"slices"
	"strconv"

	"gatesill/store/record"
)

// spotPoint is what one row of a spot list says of one current.
type spotPoint struct {
	current record.Num
	text    string // the current as a JSON number
	vg, gm  *field // nil: not in the file at this current
}

// spotPoints arranges the columns of a spot list by their currents, ascending.
func (r *reader) spotPoints() []spotPoint {
	var list []spotPoint
	for _, c := range append(r.mapped("vg"), r.mapped("gm")...) {
		i := slices.IndexFunc(list, func(p spotPoint) bool { return p.current == c.spot })
		if i < 0 {
			i = len(list)
			list = append(list, spotPoint{current: c.spot, text: c.spotText()})
		}
		f := &field{column: c, q: quantities[c.as], scale: newScale(dimOf(c.as), c.unit.exp, c.inCells)}
		if c.as == "vg" {
			list[i].vg = f
		} else {
			list[i].gm = f
		}
	}
	slices.SortStableFunc(list, func(a, b spotPoint) int { return cmp.Compare(a.current.Or(0), b.current.Or(0)) })
	return list
}

// spotReader makes a sweep of every row of a spot list.
type spotReader struct {
	longReader
	points  []spotPoint
	shared  []field // temperature and the like, the same at every point
	hasGM   bool
	current record.Num // of the only gate voltage, unknown when there are several
}

// readSpot reads a spot list. The columns of a spot are the gate voltage, the
// current it was stated at and, where given, the transconductance. A
// transconductance at a current of its own is a point of its own, without gate
// voltage.
func (r *reader) readSpot() ([]*builder, error) {
	s := &spotReader{points: r.spotPoints()}
	s.r, s.w, s.device, s.byKey = r, r.rowsOfData(), r.talkDevice, map[string]*builder{}
	s.w.onTalk = r.addTalk
	for _, role := range []Role{RoleDevice, RoleLot, RolePackage, RoleSide} {
		s.who = append(s.who, r.first(string(role)))
	}
	gates := 0
	for _, p := range s.points {
		for _, f := range []*field{p.vg, p.gm} {
			if f != nil {
				s.width = max(s.width, f.index+1)
			}
		}
		if p.vg != nil {
			s.current = p.current
			gates++
		}
		s.hasGM = s.hasGM || p.gm != nil
	}
	if gates > 1 {
		s.current = record.Num{}
	}
	for _, f := range fields(r.numberColumns()) {
		if f.q != record.VG && f.q != record.GM && f.q != record.ID {
			s.shared = append(s.shared, f)
			s.width = max(s.width, f.index+1)
		}
	}
	for _, c := range s.who {
		if c != nil {
			s.width = max(s.width, c.index+1)
		}
	}
	var list []*builder
	for s.w.nextRow() {
		if why := s.w.misfit(s.width); why != "" {
			s.w.refuseUnlessHeader(why)
			continue
		}
		if len(list) == maxSweeps {
			return nil, r.refused(s.w.at, "it holds more than %d spots", maxSweeps)
		}
		if b := s.row(); b != nil {
			list = append(list, b)
		}
	}
	return list, nil
}

// row makes a builder of one row; nil when the row was refused.
func (s *spotReader) row() *builder {
	who := names{device: s.device}
	if s.r.numbered {
		who.device = strconv.Itoa(s.r.file.Rows)
	}
	for i, c := range s.who {
		if c != nil {
			*who.at(i) = string(trim(s.w.cells[c.index]))
		}
	}
	if s.r.sided {
		who.device = who.pkg + who.side
	}
	bad := who.check()
	b := &builder{names: who, sweep: "spot"}
	gm := 2
	if s.hasGM {
		gm = 3
	}
	b.cols = make([]buffer, gm+len(s.shared))
	for j := range b.cols {
		b.cols[j].text = append(make([]byte, 0, 16), '[')
	}
	states := s.r.file.States
	for _, p := range s.points {
		if bad == "" {
			bad = s.cell(b, 0, p.vg, record.VG)
		}
		if s.hasGM && bad == "" {
			bad = s.cell(b, 2, p.gm, record.GM)
		}
		for j := range s.shared {
			if bad == "" {
				bad = s.cell(b, gm+j, &s.shared[j], s.shared[j].q)
			}
		}
	}
	if bad != "" {
		s.r.file.States = states
		s.w.refuseUnlessHeader(bad)
		return nil
	}
	s.currents(b)
	b.states = s.r.file.States - states
	b.lines = []record.Lines{}
	for i := range s.points {
		b.lines = append(b.lines, record.Lines{Point: i, Line: s.w.at, Count: 1})
	}
	return b
}

// cell adds one cell to a column of the spot, or a missing reading where the
// file has no such column.
func (s *spotReader) cell(b *builder, j int, f *field, q record.Quantity) (why string) {
	col := &b.cols[j]
	if f == nil {
		col.null()
		b.marks = append(b.marks, record.Mark{Index: len(col.values) - 1, Quantity: q, State: record.Missing})
		return ""
	}
	cell := s.w.cells[f.index]
	st, why := col.put(cell, s.r.num, &f.scale)
	if why != "" {
		return f.as + " " + why
	}
	if st != "" {
		b.marks = append(b.marks, record.Mark{Index: len(col.values) - 1, Quantity: q, State: st, Raw: cut(string(trim(cell)), 40)})
		s.r.file.States++
	}
	return ""
}

// currents fills the current column: the stated currents, with the sign of the
// gate voltage for a p-channel part.
func (s *spotReader) currents(b *builder) {
	col := &b.cols[1]
	minus := false
	if s.r.opt.PChannel {
		for _, v := range b.cols[0].values {
			minus = minus || v < 0
		}
	}
	for _, p := range s.points {
		x := p.current.Or(math.NaN())
		if minus {
			x = -x
			col.text = append(col.text, '-')
		}
		col.text = append(append(col.text, p.text...), ',')
		col.values = append(col.values, x)
	}
}
