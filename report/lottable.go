package report

import (
	"fmt"
	"io"
	"strings"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/store/record"
)

// LotRow is one lot with its part, for a list of lots.
type LotRow struct {
	Lot  record.Lot // DevicesCount and SweepsCount filled
	Part record.Part
}

// LotsTable lists lots for people.
func LotsTable(w io.Writer, rows []LotRow, style Style) error {
	p := &printer{w: w}
	if len(rows) == 0 {
		p.line("No lots yet.")
		return p.err
	}
	var names, parts, devices, sweeps, suppliers, codes, made []string
	for _, r := range rows {
		names, parts = append(names, Clean(r.Lot.Name)), append(parts, Clean(r.Part.Name))
		devices, sweeps = append(devices, itoa(r.Lot.DevicesCount)), append(sweeps, itoa(r.Lot.SweepsCount))
		suppliers, codes = append(suppliers, Clean(r.Lot.Supplier)), append(codes, Clean(r.Lot.DateCode))
		made = append(made, day(r.Lot.CreatedAt))
	}
	p.grid(grid{style: style, cols: []column{
		{head: "lot", cells: names, wrap: 20}, {head: "part", cells: parts, wrap: 16},
		{head: "devices", cells: devices, right: true}, {head: "sweeps", cells: sweeps, right: true},
		{head: "supplier", cells: suppliers, rank: 2, wrap: 16}, {head: "date code", cells: codes, rank: 1}, {head: "since", cells: made, rank: 3},
	}})
	return p.err
}

// day is the date of a stamp.
func day(stamp string) string {
	date, _, _ := strings.Cut(stamp, "T")
	return Clean(date)
}

// NotGiven stands where something that belongs to the record was not given.
const NotGiven = "not given"

// Field is one line of a description: Value "" means that it was not given.
type Field struct {
	Label string
	Value string
}

// PartFields describes a part, all its fields in a fixed order.
func PartFields(p record.Part) []Field {
	num := func(n record.Num, unit string) string {
		if x, ok := n.Get(); ok {
			return FormatGiven(x, unit)
		}
		return ""
	}
	limits := ""
	if p.VgsthMin.IsKnown() || p.VgsthMax.IsKnown() {
		limits = orNotGiven(num(p.VgsthMin, "V")) + " to " + orNotGiven(num(p.VgsthMax, "V"))
	}
	return []Field{
		{"part", p.Name},
		{"channel", string(p.Channel)},
		{"mode", string(p.Mode)},
		{"off voltage", num(p.OffVoltage, "V")},
		{"test current", num(p.TestCurrent, "A")},
		{"test V_DS", num(p.TestVDS, "V")},
		{"idle current", num(p.IdleCurrent, "A")},
		{"V_GS(th) limits", limits},
		{"greatest V_GS", num(p.MaxVgs, "V")},
		{"greatest V_DS", num(p.MaxVds, "V")},
		{"greatest I_D", num(p.MaxID, "A")},
		{"greatest P_D", num(p.MaxPD, "W")},
		{"greatest temperature", num(p.MaxTemp, "°C")},
		{"R_th junction to case", num(p.Rth, "K/W")},
	}
}

// LotFields describes a lot, all its fields in a fixed order.
func LotFields(l record.Lot) []Field {
	quantity := ""
	if q, ok := l.Quantity.Get(); ok {
		quantity = FormatGiven(q, "")
	}
	set := func(text, at string) string {
		if text != "" && at != "" {
			return text + ", set " + at
		}
		return text
	}
	guard := AmountWords(l.Guard)
	return []Field{
		{"lot", l.Name},
		{"supplier", l.Supplier},
		{"date code", l.DateCode},
		{"marking", l.Marking},
		{"quantity", quantity},
		{"sample taken", l.Sampled},
		{"margin", set(AmountWords(l.Margin), l.MarginSetAt)},
		{"guard band", set(guard, l.DecidedAt)},
		{"send back", set(SendBackWords(l.SendBack), l.DecidedAt)},
		{"note", l.Note},
		{"known since", l.CreatedAt},
	}
}

// SendBackWords tells the user's own rule for sending a lot back.
func SendBackWords(rule string) string {
	switch rule {
	case "outside-limits":
		return "a device outside the data-sheet limits"
	case "outside-margin":
		return "a shift outside the margin"
	}
	return rule
}

func orNotGiven(text string) string {
	if text == "" {
		return NotGiven
	}
	return text
}

// LotCard describes one lot with its part for people. Fields that were not
// given say so.
func LotCard(w io.Writer, row LotRow, style Style) error {
	p := &printer{w: w}
	fields(p, LotFields(row.Lot), style)
	p.line("%-22s %s, %s", "holds", count(row.Lot.DevicesCount, "device"), count(row.Lot.SweepsCount, "sweep"))
	p.line("")
	p.line("%s", style.paint("The part (holds for every lot of it)", bold))
	fields(p, PartFields(row.Part), style)
	return p.err
}

func fields(p *printer, list []Field, style Style) {
	for _, f := range list {
		value := Clean(f.Value)
		if value == "" {
			value = style.paint(NotGiven, faint)
		}
		wrapped(p, fmt.Sprintf("%-22s ", f.Label), strings.Repeat(" ", 23), value, style.Width)
	}
}

// DeviceFile is all that is known of one device: its sweeps with their results
// and its audit trail.
type DeviceFile struct {
	Lot     record.Lot
	Device  Device
	Changes []record.Change // ascending by time: of the device and of its sweeps
	Sets    []record.Set    // that it is or was in, by number

	By       fit.Key        // quantity of the timeline
	Timeline []gauge.Moment // sitting by sitting; shown from two on
	Tempco   float64        // V/K, behind its corrected numbers; NaN: none given
	History  []string       // sentences on what became of it
}

// DeviceHistory writes the history and the audit trail of one device for
// people.
func DeviceHistory(w io.Writer, f DeviceFile, s Sheet, style Style) error {
	p := &printer{w: w}
	d := &f.Device
	role := ""
	if d.Role == record.Control {
		role = "control: kept for checking the bench"
	}
	fields(p, []Field{
		{"device", d.Name}, {"lot", f.Lot.Name}, {"package", packageWords(d.Device)},
		{"date code", d.DateCode}, {"marking", d.Marking}, {"tube", d.Tube}, {"note", d.Note},
	}, style)
	if role != "" {
		p.line("%-22s %s", "role", role)
	}
	if len(f.Sets) > 0 {
		p.line("%-22s %s", "set", setLines(f.Sets))
	}
	p.line("%-22s %s", "state", stateCell(d, style))
	if why := d.Reason(); why != "" {
		wrapped(p, strings.Repeat(" ", 23), strings.Repeat(" ", 23), Clean(why), style.Width)
	}
	for _, k := range fit.Keys {
		if q := d.Result.At(k); q.Ok() {
			wrapped(p, fmt.Sprintf("%-22s ", SymbolWords(k)), strings.Repeat(" ", 23), FormatWithAbsolute(*q, KeyOf(k).Unit), style.Width)
		}
	}
	p.line("")
	p.line("%s", style.paint("Sweeps", bold))
	if len(d.Sweeps) == 0 {
		p.line("None yet.")
	} else {
		p.grid(sweepGrid(d, style))
	}
	deviceTimeline(p, &f, &s, style)
	p.line("")
	p.line("%s", style.paint("Changes", bold))
	if len(f.Changes) == 0 {
		p.line("None.")
	}
	for _, c := range f.Changes {
		wrapped(p, "  ", "    ", changeWords(c), style.Width)
	}
	s.Devices = []Device{f.Device}
	remarks(p, s, style)
	return p.err
}

func packageWords(d record.Device) string {
	switch {
	case d.Package != "" && d.Side != "":
		return d.Package + ", side " + d.Side
	case d.Side != "":
		return "side " + d.Side
	}
	return d.Package
}

func changeWords(c record.Change) string {
	text := c.At + "  "
	switch {
	case c.Field == "created":
		text += c.What + " created"
	default:
		text += fmt.Sprintf("%s %s: %s -> %s", c.What, c.Field, changedValue(c, c.Old), changedValue(c, c.New))
	}
	if c.Who != "" {
		text += ", by " + c.Who
	}
	if c.Reason != "" {
		text += ", because: " + c.Reason
	}
	return Clean(text)
}

// changedValue writes a value of the audit trail; amounts, which it has in base units,
// as they are set.
func changedValue(c record.Change, s string) string {
	if c.What == "lot" && (c.Field == "margin" || c.Field == "guard") {
		if a, err := record.ParseAmount(s, "V", "%", "A", "u"); err == nil && a.String() == s && s != "" {
			return AmountWords(a)
		}
	}
	return quoted(s)
}

func quoted(s string) string {
	if s == "" {
		return "nothing"
	}
	return `"` + s + `"`
}

func sweepGrid(d *Device, style Style) grid {
	n := len(d.Sweeps)
	when, dirs, points, files, conds, states := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	results := make([]*fit.Result, n)
	for i := range d.Sweeps {
		sw := &d.Sweeps[i]
		results[i] = &sw.Result
		when[i], dirs[i] = Clean(orNotGiven(sw.MeasuredAt)), string(sw.Direction)
		points[i] = itoa(max(sw.Len(), len(sw.Curve.Vg)))
		files[i] = Clean(sw.SourceName)
		conds[i] = shortList(append([]string{orNotGiven(string(sw.Condition.Circuit))}, ConditionWords(sw.Condition)...))
		states[i] = WordsOf(sw.Result.State).Word
		if sw.Excluded {
			states[i] = "excluded"
		}
	}
	absent := func(int, fit.Key) string { return NotAvailable }
	g := grid{style: style, cols: []column{
		{head: "measured", cells: when}, {head: "direction", cells: dirs}, {head: "points", cells: points, right: true}, {head: "state", cells: states},
	}}
	g.cols = append(g.cols, quantityColumns(results, fit.KeyVgsth, 1, absent)...)
	g.cols = append(g.cols, quantityColumns(results, fit.KeyVgsIdle, 3, absent)...)
	g.cols = append(g.cols, quantityColumns(results, fit.KeyVt, 4, absent)...)
	g.cols = append(g.cols, column{head: "file", cells: files, rank: 2}, column{head: "conditions", cells: conds, rank: 5, wrap: 24})
	return g
}
