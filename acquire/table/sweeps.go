package table

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// readRows reads the rows by the layout and makes sweeps of them.
func (r *reader) readRows() error {
	var list []*builder
	var err error
	var q []record.Quantity
	switch r.layout {
	case layoutWide:
		list, err = r.readWide()
		q = r.wideQuantities()
	case layoutSpot:
		list, err = r.readSpot()
		q = r.spotQuantities()
	default:
		list, err = r.readLong()
		for _, f := range fields(r.numberColumns()) {
			q = append(q, f.q)
		}
	}
	if err != nil {
		return err
	}
	return r.assemble(r.dropSummaries(list), q)
}

// assemble cuts the points of every device into sweeps, in the order of the
// file.
func (r *reader) assemble(list []*builder, q []record.Quantity) error {
	join := r.layout != layoutSpot && interleaved(list, q)
	if join {
		r.note("the rows go from device to device at every gate voltage")
	}
	sign := r.gateSign(list, q)
	sweeps := make([]Sweep, 0, len(list))
	var known []float64 // gate of the builder before: devices of a wide file share one
	var cuts []pass
	for _, b := range list {
		if b.len() == 0 || b.bad != "" {
			continue
		}
		for j := range b.cols {
			b.cols[j].close()
		}
		switch vg := b.gate(q); {
		case b.sweep == "spot" && r.layout == layoutSpot:
			cuts = []pass{{0, b.len(), record.Spot}}
		case len(known) > 0 && len(vg) == len(known) && &vg[0] == &known[0]:
		default:
			known = vg
			cuts = b.passes(vg, sign, join)
		}
		sweeps = b.sweeps(sweeps, q, cuts)
		if len(sweeps) > maxSweeps {
			return r.refused(0, "it holds more than %d sweeps", maxSweeps)
		}
	}
	slices.SortStableFunc(sweeps, func(a, b Sweep) int { return cmp.Compare(firstLine(&a), firstLine(&b)) })
	r.file.Sweeps = sweeps
	return nil
}

func firstLine(s *Sweep) int {
	if len(s.Lines) == 0 {
		return 0
	}
	return s.Lines[0].Line
}

// gateSign is -1 for a p-channel part whose gate voltages stand there with
// their sign: then a falling gate voltage turns it on, which is 'up'.
func (r *reader) gateSign(list []*builder, q []record.Quantity) float64 {
	if !r.opt.PChannel {
		return 1
	}
	negative, positive := 0, 0
	for _, b := range list {
		for _, v := range b.gate(q) {
			if v < 0 {
				negative++
			} else if v > 0 {
				positive++
			}
		}
	}
	if negative > positive {
		return -1
	}
	return 1
}

// gate is the gate voltage of a builder.
func (b *builder) gate(q []record.Quantity) []float64 {
	for j := range b.cols {
		if q[j] == record.VG {
			return b.cols[j].values
		}
	}
	return nil
}

// passes cuts the points where the file breaks, where the device comes back
// after others (unless the rows go from device to device at every gate
// voltage), and where the gate turns.
func (b *builder) passes(vg []float64, sign float64, join bool) []pass {
	at := slices.Clone(b.breaks)
	if !join {
		at = append(at, b.returns...)
	}
	slices.Sort(at)
	at = append(slices.Compact(at), len(vg))
	var list []pass
	lo := 0
	for _, hi := range at {
		if hi <= lo {
			continue
		}
		for _, p := range passes(vg[lo:hi], sign) {
			list = append(list, pass{p.lo + lo, p.hi + lo, p.dir})
		}
		lo = hi
	}
	for i := range list {
		if list[i].dir == record.Spot { // one point of a sweep is no spot
			list[i].dir = record.Up
		}
	}
	return list
}

// interleaved reports whether the devices take turns at every gate voltage,
// instead of being swept one after the other: most times that a device has its
// turn, its gate stands still.
func interleaved(list []*builder, q []record.Quantity) bool {
	turns, still, most := 0, 0, 0
	for _, b := range list {
		vg := b.gate(q)
		if len(vg) == 0 || b.bad != "" {
			continue
		}
		span := spanOf(vg)
		lo := 0
		for _, hi := range append(slices.Clone(b.returns), len(vg)) {
			turns++
			if hi-lo == 1 || spanOf(vg[lo:hi]) <= 0.1*span {
				still++
			}
			lo = hi
		}
		most = max(most, len(b.returns)+1)
	}
	if most < 2 || still*2 <= turns {
		return false
	}
	return most > 2 || !sameCurrents(list, q)
}

// sameCurrents reports whether devices that have two single points were read at
// the same current twice, which is a repeat and no sweep.
func sameCurrents(list []*builder, q []record.Quantity) bool {
	same, differ := 0, 0
	for _, b := range list {
		if b.len() != 2 {
			continue
		}
		for j := range b.cols {
			if q[j] != record.ID {
				continue
			}
			x, y := math.Abs(b.cols[j].values[0]), math.Abs(b.cols[j].values[1])
			if math.Abs(x-y) <= 0.2*max(x, y) {
				same++
			} else {
				differ++
			}
		}
	}
	return same >= differ
}

func spanOf(v []float64) float64 {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, x := range v {
		if x == x {
			lo, hi = min(lo, x), max(hi, x)
		}
	}
	return max(0, hi-lo)
}

// close ends the JSON array.
func (c *buffer) close() {
	if n := len(c.text); n > 0 && c.text[n-1] == ',' {
		c.text[n-1] = ']'
	}
}

// sweeps appends one sweep for each pass.
func (b *builder) sweeps(to []Sweep, q []record.Quantity, cuts []pass) []Sweep {
	from := len(to)
	for range cuts {
		to = append(to, Sweep{Device: b.device, Lot: b.lot, Package: b.pkg, Side: b.side})
	}
	made := to[from:]
	for j := range b.cols {
		texts := [][]byte{b.cols[j].text}
		if len(cuts) > 1 {
			texts = cutText(b.cols[j].text, cuts)
		}
		for i, p := range cuts {
			made[i].Columns = append(made[i].Columns, record.Column{
				Quantity: q[j], Values: b.cols[j].values[p.lo:p.hi:p.hi], Text: texts[i],
			})
		}
	}
	for i, p := range cuts {
		s := &made[i]
		s.Direction = p.dir
		s.Lines = cutLines(b.lines, p.lo, p.hi)
		for _, m := range b.marks {
			if m.Index >= p.lo && m.Index < p.hi {
				m.Index -= p.lo
				s.Marks = append(s.Marks, m)
			}
		}
		sortMarks(s.Marks)
	}
	return to
}

// sortMarks orders marks by point, then by quantity.
func sortMarks(m []record.Mark) {
	slices.SortStableFunc(m, func(a, b record.Mark) int { return cmp.Compare(a.Index, b.Index) })
}

// cutText cuts a JSON array of numbers into one for each pass. The passes cover
// it in order.
func cutText(text []byte, cuts []pass) [][]byte {
	list := make([][]byte, 0, len(cuts))
	body := text[1:]
	for _, p := range cuts {
		n, end := p.hi-p.lo, 0
		for end < len(body) {
			if c := body[end]; c == ',' || c == ']' {
				if n--; n == 0 {
					break
				}
			}
			end++
		}
		one := make([]byte, 0, end+2)
		one = append(append(append(one, '['), body[:end]...), ']')
		list = append(list, one)
		body = body[min(end+1, len(body)):]
	}
	return list
}

// cutLines gives the source lines of the points [lo, hi).
func cutLines(lines []record.Lines, lo, hi int) []record.Lines {
	var list []record.Lines
	for _, l := range lines {
		from, to := max(lo, l.Point), min(hi, l.Point+l.Count)
		if from < to {
			list = append(list, record.Lines{Point: from - lo, Line: l.Line + from - l.Point, Count: to - from})
		}
	}
	return list
}

// wideQuantities are the quantities of a builder of a wide file.
func (r *reader) wideQuantities() []record.Quantity {
	var shared []*column
	last := record.VL
	for _, c := range r.numberColumns() {
		switch c.as {
		case "id", "vl", "vd":
			last = quantities[c.as]
		case roleLoad:
		default:
			shared = append(shared, c)
		}
	}
	var q []record.Quantity
	for _, f := range fields(shared) {
		q = append(q, f.q)
	}
	return append(q, last)
}

// spotQuantities are the quantities of a builder of a spot list.
func (r *reader) spotQuantities() []record.Quantity {
	q := []record.Quantity{record.VG, record.ID}
	if r.first("gm") != nil {
		q = append(q, record.GM)
	}
	for _, f := range fields(r.numberColumns()) {
		if f.q != record.VG && f.q != record.GM && f.q != record.ID {
			q = append(q, f.q)
		}
	}
	return q
}

// finish gives every sweep what it was taken under, and looks at the whole.
func (r *reader) finish() error {
	f := r.file
	f.Layout = r.layout
	if err := r.checkCounts(); err != nil {
		return err
	}
	if err := r.settleLoad(); err != nil {
		return err
	}
	r.settleSpots()
	r.settlePackages()
	r.settleConditions()
	for i := range f.Sweeps {
		s := &f.Sweeps[i]
		slices.SortStableFunc(s.Columns, func(a, b record.Column) int {
			return cmp.Compare(slices.Index(record.Quantities, a.Quantity), slices.Index(record.Quantities, b.Quantity))
		})
		s.Position = i + 1
		s.DataHash = s.Hash()
		f.Points += s.Len()
	}
	r.readAttributes()
	r.settleDates()
	r.sameRows()
	r.doubtUnits()
	r.describe()
	if r.opt.Progress != nil {
		r.opt.Progress(f.Size, f.Size)
	}
	return nil
}

// checkCounts fails a file of which too many rows were refused, or any when
// Strict.
func (r *reader) checkCounts() error {
	f := r.file
	tooMany := (f.Refused-r.footer)*5 > f.Rows-r.footer // the foot of a spreadsheet says nothing against its rows
	if f.Refused > 0 && (tooMany || r.opt.Strict) {
		first := f.Refusals[0]
		why := fmt.Sprintf("%d of %d rows refused", f.Refused, f.Rows)
		if !tooMany {
			why += ", and none may be"
		}
		for i, x := range f.Refusals[:min(3, len(f.Refusals))] {
			if i > 0 {
				why += "; "
			} else {
				why += ": "
			}
			why += fmt.Sprintf("line %d: %s", x.Line, x.Reason)
		}
		return &Error{File: r.place, Line: first.Line, Err: fmt.Errorf("%w: %s", ErrTooMany, why)}
	}
	if len(f.Sweeps) == 0 {
		return r.refused(0, "it holds no rows of readings")
	}
	return nil
}

// settleSpots takes a table of single points, or of two, for spots: devices
// with the current each was read at.
func (r *reader) settleSpots() {
	f := r.file
	for i := range f.Sweeps {
		if s := &f.Sweeps[i]; r.layout == layoutWide || r.layout == layoutSpot || s.Len() > 2 || s.Column(record.ID) == nil {
			return
		}
	}
	f.Layout = layoutSpot
	for i := range f.Sweeps {
		s := &f.Sweeps[i]
		s.Direction = record.Spot
	}
}

// settlePackages takes a package column for the outline (TO-220), and leaves it
// out, when it has no sides beside it and one package would hold more than two
// devices.
func (r *reader) settlePackages() {
	c := r.first(string(RolePackage))
	if c == nil || c.how == "--map" || r.first(string(RoleSide)) != nil {
		return
	}
	type in struct{ lot, pkg string }
	held := map[in]map[string]bool{}
	outline := false
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		if s.Package == "" {
			continue
		}
		k := in{s.Lot, s.Package}
		if held[k] == nil {
			held[k] = map[string]bool{}
		}
		held[k][s.Device] = true
		outline = outline || len(held[k]) > 2
	}
	if !outline {
		return
	}
	c.as = string(RoleIgnore)
	r.note("column %s is not used: it names the outline, since more than two devices share one", c.title())
	for i := range r.file.Sweeps {
		r.file.Sweeps[i].Package = ""
	}
}
