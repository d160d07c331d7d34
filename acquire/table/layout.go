package table

import (
	"fmt"
	"slices"
	"strings"

	"gatesill/store/record"
)

// The layouts, as [File] names them.
const (
	layoutLong      = "long"
	layoutWide      = "wide"
	layoutPerDevice = "per-device"
	layoutSpot      = "spot"
)

// findLayout decides how rows become sweeps, and drops the columns that the
// layout has no use for.
func (r *reader) findLayout() error {
	device, gates := r.first(string(RoleDevice)), r.mapped("vg")
	vth := r.mapped(roleVth)
	current := r.first("id") != nil || r.first("vl") != nil || r.first("vd") != nil || r.first(roleLoad) != nil
	spots := slices.ContainsFunc(gates, func(c *column) bool { return c.spot.IsKnown() })
	plain := slices.ContainsFunc(gates, func(c *column) bool { return !c.spot.IsKnown() })
	free := r.freeColumns()
	if !plain && !spots && len(vth) > 0 {
		for _, c := range vth[:1] {
			c.as = "vg"
		}
		gates, vth, plain = vth[:1], vth[1:], true
		current = false // whatever else stands there, thresholds are no sweep
	}
	r.drop(vth, "a threshold beside sweeps")
	switch {
	case len(gates) == 0:
		return r.askGate()
	case plain && current:
		r.dropSpots(gates)
		if device != nil && r.isCounter(device) {
			r.note("column %s counts the rows: it is not the device", device.title())
			device.as = string(RoleIgnore)
			device = nil
		}
		if device == nil && !r.bySides() {
			r.layout = layoutPerDevice
			return r.fileDevice()
		}
		r.layout = layoutLong
	case spots, (device != nil || len(free) == 0) && r.spotCurrent().IsKnown():
		return r.spotLayout(device)
	case device == nil && len(free) > 0:
		r.layout = layoutWide
		return r.wideColumns(free)
	case device != nil && len(free) == 1 && (free[0].unit.dim == "A" || r.isGiven("id")):
		free[0].as, free[0].how = "id", "unit"
		r.layout = layoutLong
	default:
		return r.askCurrent(device, free)
	}
	return nil
}

// askCurrent asks for the current of gate voltages that stand alone: another
// column, or the one that all were read at.
func (r *reader) askCurrent(device *column, free []*column) error {
	const text = "there is a gate voltage, but no current: at which current was it read?"
	const hint = "--spot-current 10mA, or --map id=COLUMN"
	if len(free) > 0 {
		return r.ambiguous(r.headerLine, hint, text)
	}
	answer, err := r.ask(Question{Text: text, Flag: "--spot-current"}, r.headerLine, hint)
	if err != nil {
		return err
	}
	x, err := record.ParseNumber(answer, "A")
	if err != nil || x <= 0 {
		return r.ambiguous(r.headerLine, hint, "%q is no current", answer)
	}
	r.opt.SpotCurrent = record.Known(x)
	return r.spotLayout(device)
}

func (r *reader) isGiven(short string) bool {
	_, ok := r.unitOption(short)
	return ok
}

// freeColumns are columns of numbers that no word or flag claims.
func (r *reader) freeColumns() []*column {
	var free []*column
	for j := range r.cols {
		c := &r.cols[j]
		if c.as != "" || c.role != "" || c.text == "" && r.headerLine > 0 {
			continue
		}
		if c.texts <= c.numbers && (c.texts == 0 || c.numbers > 0) {
			free = append(free, c)
		}
	}
	return free
}

// askGate asks which column holds the gate voltage when none is recognised.
func (r *reader) askGate() error {
	text := "no column is recognised as the gate voltage; the columns are " + r.listColumns()
	var list []*column
	for j := range r.cols {
		if c := &r.cols[j]; c.numeric() && (c.how == "" || c.how == "header" && dimOf(c.as) == "V") {
			list = append(list, c)
		}
	}
	if r.opt.Ask == nil || len(list) == 0 {
		return r.ambiguous(r.headerLine, r.gateHint(list), "%s", text)
	}
	c, err := r.askColumn("vg", list, text)
	if err != nil {
		return err
	}
	c.as, c.how = "vg", "asked"
	return r.findLayout()
}

// gateHint is what settles which column is the gate voltage.
func (r *reader) gateHint(list []*column) string {
	switch {
	case len(list) != 1:
		return "--map vg=COLUMN,id=COLUMN"
	case r.spotCurrent().IsKnown():
		return fmt.Sprintf("--map vg=%d", list[0].index+1)
	}
	return fmt.Sprintf("--map vg=%d --spot-current 10mA", list[0].index+1)
}

// drop leaves columns out and says so.
func (r *reader) drop(cols []*column, why string) {
	for _, c := range cols {
		c.as = string(RoleIgnore)
		r.note("column %s is not used: %s", c.title(), why)
	}
}

func (r *reader) dropSpots(gates []*column) {
	for _, c := range gates {
		if c.spot.IsKnown() {
			r.drop([]*column{c}, "a spot beside sweeps")
		}
	}
}

// isCounter reports whether a column headed 'no.' numbers the readings of one
// sweep and not the devices: it counts up by one while the gate goes one way,
// and the current with it. In a list of devices it does not, but by chance in a
// very short one.
func (r *reader) isCounter(c *column) bool {
	gate := r.first("vg")
	if c.rank != weaker || c.how != "header" || !c.counting || gate == nil {
		return false
	}
	vg := r.sampleValues(gate)
	if len(vg) < 3 {
		return false
	}
	if id := r.first("id"); id != nil {
		i := r.sampleValues(id)
		way, ok := monotone(vg, 1)
		same, also := monotone(i, 1)
		if ok && also && way == same && len(i) == len(vg) && spanOf(vg) > 0 && spanOf(i) > greatest(i)/2 {
			return true
		}
	}
	return len(vg) >= 6*len(passes(vg, 1))
}

// sampleValues reads a column of the sample before the decimal mark is known.
func (r *reader) sampleValues(c *column) []float64 {
	v := columnValues(r.body, c.index, numeral{mark: '.'})
	if w := columnValues(r.body, c.index, numeral{mark: ','}); len(w) > len(v) {
		return w
	}
	return v
}

// columnValues reads a column of the sample, leaving out what is no number.
func columnValues(rows []sampled, j int, n numeral) []float64 {
	var b buffer
	s := newScale("V", 0, true)
	for _, row := range rows {
		if j < len(row.cells) && kindOf(row.cells[j]) == number {
			b.put(row.cells[j], n, &s)
		}
	}
	return b.values
}

// fileDevice names the one device of the file: by a comment, else by the stem
// of its name.
func (r *reader) fileDevice() error {
	if r.talkDevice != "" {
		return nil
	}
	stem := r.file.Name
	if i := strings.LastIndexByte(stem, '.'); i > 0 {
		stem = stem[:i]
	}
	if stem == "" || stem == "-" {
		return r.ambiguous(0, "--map device=COLUMN, or a first line '# device: D07'", "the file has no device column and no name to take for the device")
	}
	if err := record.CheckName("device", stem); err != nil {
		return r.refused(0, "its name gives the device name: %v", err)
	}
	r.talkDevice = stem
	r.note("the device is named by the file: %s", cut(stem, 60))
	return nil
}

// numberDevices names the devices of a spot list without device column by their
// rows: 1, 2, ... in the order of the file. A row that is refused keeps its
// number. The device of a single row is named as that of a file is.
func (r *reader) numberDevices() error {
	if len(r.body) == 1 && (r.talkDevice != "" || strings.Trim(r.file.Name, "-") != "") {
		return r.fileDevice()
	}
	r.numbered = true
	r.note("no column names the devices: they are numbered by their rows, 1, 2, ... in the order of the file")
	return nil
}

// spotCurrent is the current of gate voltages that have none in their header.
func (r *reader) spotCurrent() record.Num {
	return r.opt.SpotCurrent.Else(r.opt.Given.SpotCurrent).Else(r.talkCond.SpotCurrent)
}

// bySides names the devices by package and side where both have a column and
// nothing else names them.
func (r *reader) bySides() bool {
	r.sided = r.first(string(RolePackage)) != nil && r.first(string(RoleSide)) != nil
	if r.sided {
		r.note("no column names the devices: they are named by package and side, P1A, P1B, ...")
	}
	return r.sided
}

// spotLayout settles the currents of the spot columns.
func (r *reader) spotLayout(device *column) error {
	r.layout = layoutSpot
	if device == nil && !r.bySides() {
		if err := r.numberDevices(); err != nil {
			return err
		}
	}
	flag := r.opt.SpotCurrent.Else(r.opt.Given.SpotCurrent)
	gates := r.mapped("vg")
	for _, c := range append(gates, r.mapped("gm")...) {
		had, known := c.spot.Get()
		given, ok := flag.Get()
		switch {
		case known && ok && c.as == "vg" && given != had && len(gates) == 1:
			r.remark(CodeFlagWins, "column %s says %g A, read as %g A, as --spot-current says", c.title(), had, given)
			c.setSpot(flag)
		case known && ok && c.as == "vg" && given != had:
			r.remark(CodeFlagWins, "column %s keeps its own current of %g A: --spot-current cannot stand for %d columns", c.title(), had, len(gates))
		case !known && r.spotCurrent().IsKnown():
			c.setSpot(r.spotCurrent())
		case !known && c.as == "gm" && len(gates) == 1:
			c.spot, c.spotNum, c.spotExp = gates[0].spot, gates[0].spotNum, gates[0].spotExp
		case !known:
			return r.ambiguous(r.headerLine, "--spot-current 10mA", "column %s: at which current?", c.title())
		}
	}
	for i, c := range gates {
		for _, d := range gates[:i] {
			if c.spot == d.spot {
				return r.ambiguous(r.headerLine, fmt.Sprintf("--map vg=%d or --map vg=%d", d.index+1, c.index+1), "columns %s and %s are spots at the same current", d.title(), c.title())
			}
		}
	}
	return nil
}

func (c *column) setSpot(n record.Num) {
	c.spot, c.spotNum, c.spotExp = n, "", 0
}

// spotText is the current of a spot column as a JSON number.
func (c *column) spotText() string {
	switch {
	case c.spotNum == "":
		return c.spot.String()
	case c.spotExp == 0:
		return c.spotNum
	}
	return fmt.Sprintf("%se%d", c.spotNum, c.spotExp)
}
