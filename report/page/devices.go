package page

import (
	"html/template"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

// deviceTable is the table of all devices.
type deviceTable struct {
	Heads []deviceHead
	Body  template.HTML // the rows
	Note  template.HTML
}

type deviceHead struct {
	Text    template.HTML
	Unit    string
	Class   string // "r" stands at the right; "r n" is a count beside its number
	Numeric bool   // sorted as numbers
}

type deviceRow struct {
	Ref   int
	Name  string
	Class string // "flagged", "aside" for one that is excluded, ""
	Cells []deviceCell
}

type deviceCell struct {
	Text  template.HTML
	Sort  string // number to sort by, "" for texts
	Class string // as of the head; "none" for what is not there
}

// devices lays out the table of all devices: the quantity sorted by first, then
// bin, state and flag, then everything else.
func (v *view) devices(k *known) {
	t := &v.Devices
	packages, methods, absolute := false, false, false
	for i := range k.Devices {
		d := &k.Devices[i]
		packages = packages || d.Package != "" || d.Side != ""
		methods = methods || d.Result.Vt.Ok()
	}
	rows := make([]deviceRow, len(k.Devices))
	for i := range k.Devices {
		d := &k.Devices[i]
		rows[i] = deviceRow{Ref: i + 1, Name: d.Name}
		if k.flag(d.Name) != "" {
			rows[i].Class = "flagged"
		} else if d.State() == fit.Excluded {
			rows[i].Class = "aside"
		}
	}
	column := func(h deviceHead, cell func(i int, d *report.Device) deviceCell) {
		t.Heads = append(t.Heads, h)
		for i := range rows {
			rows[i].Cells = append(rows[i].Cells, cell(i, &k.Devices[i]))
		}
	}
	quantity := func(key fit.Key) {
		c := k.column(key)
		absolute = absolute || c.absolute != nil
		column(deviceHead{Text: rich(report.KeyOf(key).Symbol), Unit: c.unit, Class: "r", Numeric: true}, func(i int, _ *report.Device) deviceCell { return c.cells[i] })
		if c.absolute != nil {
			column(deviceHead{Text: "± abs.", Unit: c.unit, Class: absoluteClass(key), Numeric: true}, func(i int, _ *report.Device) deviceCell { return c.absolute[i] })
		}
		column(deviceHead{Text: "n", Class: "r n", Numeric: true}, func(i int, _ *report.Device) deviceCell { return c.ns[i] })
		if key == fit.KeyVt && methods {
			column(deviceHead{Text: rich("V_T by")}, func(_ int, d *report.Device) deviceCell {
				if !d.Result.Vt.Ok() {
					return orDash("")
				}
				return orDash(d.Result.Method)
			})
		}
	}
	t.Heads = append(t.Heads, deviceHead{Text: "device"})
	quantity(k.by)
	if k.Sorting != nil {
		column(deviceHead{Text: "bin"}, func(_ int, d *report.Device) deviceCell {
			bin := k.bin[d.Name]
			if m := k.maybe[d.Name]; m != "" {
				bin += " or " + m
			}
			return orDash(bin)
		})
	}
	column(deviceHead{Text: "state"}, func(_ int, d *report.Device) deviceCell {
		if d.Role == record.Control {
			return deviceCell{Text: "control"}
		}
		return deviceCell{Text: rich(report.WordsOf(d.State()).Word)}
	})
	column(deviceHead{Text: "flag"}, func(_ int, d *report.Device) deviceCell {
		if flag := k.flag(d.Name); flag != "" {
			return deviceCell{Text: `<span class="mark" aria-hidden="true">△</span> ` + plain(flag), Class: "why"}
		}
		return deviceCell{Class: "why"}
	})
	if judged := k.judgements(); judged != nil {
		column(deviceHead{Text: "verdict"}, func(_ int, d *report.Device) deviceCell { return verdictCell(judged[d.Name]) })
	}
	if packages {
		column(deviceHead{Text: "package"}, func(_ int, d *report.Device) deviceCell {
			return orDash(strings.TrimSpace(d.Package + " " + d.Side))
		})
	}
	for _, key := range fit.Keys {
		if key != k.by && k.any(key) {
			quantity(key)
		}
	}
	t.Body = deviceRows(rows)
	t.Note = "± is one standard uncertainty within the session (k = 1), the one that counts when devices of this lot are compared with each other; n is the number of points a value rests on."
	if absolute {
		t.Note += " ± abs. is one standard uncertainty against the SI unit, gain of the meters and tolerance of the load resistor included, the one that counts against a limit of the data sheet."
	}
	if k.judgements() != nil {
		t.Note += " Beside a verdict stands the probability that the device lies within the limits of the data sheet, where its absolute uncertainty is known."
	}
	if k.any(fit.KeyIdss) {
		t.Note += " " + rich(report.LeakageNote)
	}
}

// deviceRows writes the rows of the table. They are the bulk of a large page;
// written here they cost a third of what the layout's own loops would.
func deviceRows(rows []deviceRow) template.HTML {
	var b strings.Builder
	attr := func(name, value string) {
		if value != "" {
			b.WriteString(" " + name + `="` + value + `"`)
		}
	}
	for _, r := range rows {
		b.WriteString("\n<tr")
		attr("data-d", strconv.Itoa(r.Ref))
		attr("class", r.Class)
		b.WriteString(`><th scope="row"><bdi>` + string(plain(r.Name)) + `</bdi></th>`)
		for _, c := range r.Cells {
			b.WriteString("<td")
			attr("class", c.Class)
			attr("data-v", c.Sort)
			b.WriteString(">" + string(c.Text) + "</td>")
		}
		b.WriteString("</tr>")
	}
	return template.HTML(b.String())
}

func orDash(s string) deviceCell {
	if s == "" {
		return deviceCell{Text: "–", Class: "none"}
	}
	return deviceCell{Text: plain(s)}
}

// any reports whether a device has that quantity.
func (k *known) any(key fit.Key) bool {
	for i := range k.Devices {
		if k.Devices[i].Result.At(key).Ok() {
			return true
		}
	}
	return false
}

type quantityColumn struct {
	unit      string
	cells, ns []deviceCell
	absolute  []deviceCell // nil: not known of any device
}

// figureSpace is as wide as a digit: it keeps decimal marks below each other
// where numbers have different digits.
const figureSpace = "\u2007"

// column lays out one quantity of all devices under one prefix, decimal marks
// below each other, each with the digits its own uncertainty allows.
func (k *known) column(key fit.Key) quantityColumn {
	values := make([]float64, 0, len(k.Devices))
	for i := range k.Devices {
		values = append(values, k.Devices[i].Result.At(key).Value)
	}
	sc := report.ScaleOf(report.KeyOf(key).Unit, values...)
	col := quantityColumn{unit: sc.Unit(report.KeyOf(key).Unit)}
	deepest, us, shown := 0, make([]string, len(k.Devices)), make([]string, len(k.Devices))
	for i := range k.Devices {
		d := &k.Devices[i]
		q := d.Result.At(key)
		c, n := deviceCell{Text: report.NotAvailable, Class: "r none"}, deviceCell{Class: "r n"}
		switch {
		case q.Ok() && isNumber(q.Value):
			shown[i] = sc.FormatNumber(q.Value, q.U, 0)
			c = deviceCell{Sort: strconv.FormatFloat(q.Value, 'g', 9, 64), Class: "r"}
			deepest = max(deepest, decimals(shown[i]))
			if _, ok := report.DecimalsFor(sc.Of(q.U)); ok {
				us[i] = strconv.FormatFloat(sc.Of(q.U), 'f', max(0, decimals(shown[i])-1), 64)
			}
			n.Sort = strconv.Itoa(q.N)
			n.Text = template.HTML(n.Sort)
		case d.State() == fit.Above && (key == fit.KeyVgsth || key == fit.KeyVgsIdle):
			c.Text = "above"
		}
		col.cells, col.ns = append(col.cells, c), append(col.ns, n)
	}
	col.absolute = k.absolutes(key, sc)
	for i := range col.cells {
		c := &col.cells[i]
		if c.Sort == "" {
			continue
		}
		text := shown[i] + padding(deepest-decimals(shown[i]))
		if us[i] != "" {
			text += " ± " + us[i] + padding(deepest-decimals(us[i]))
		}
		c.Text = plain(text)
	}
	return col
}

// absoluteClass leaves the absolute uncertainties of gains and leakage out of the
// printed table, which has no room for them: data sheets limit gate voltages, and
// the table of uncertainties has the medians of all.
func absoluteClass(key fit.Key) string {
	if report.KeyOf(key).Unit == "V" {
		return "r n"
	}
	return "r n screen"
}

// absolutes lays out the absolute uncertainties of one quantity; nil where none
// is known.
func (k *known) absolutes(key fit.Key, sc report.Scale) []deviceCell {
	cells, found, deepest := make([]deviceCell, len(k.Devices)), false, 0
	texts := make([]string, len(k.Devices))
	for i := range k.Devices {
		cells[i].Class = absoluteClass(key)
		q := k.Devices[i].Result.At(key)
		d, ok := report.DecimalsFor(sc.Of(q.UAbsolute))
		if !q.Ok() || !ok {
			continue
		}
		found = true
		texts[i] = strconv.FormatFloat(sc.Of(q.UAbsolute), 'f', d, 64)
		deepest = max(deepest, decimals(texts[i]))
		cells[i].Sort = strconv.FormatFloat(q.UAbsolute, 'g', 9, 64)
	}
	if !found {
		return nil
	}
	for i, text := range texts {
		if text != "" {
			cells[i].Text = plain("± " + text + padding(deepest-decimals(text)))
		}
	}
	return cells
}

// decimals counts what stands from the decimal mark on, the mark included.
func decimals(number string) int {
	if i := strings.IndexByte(number, '.'); i >= 0 {
		return len(number) - i
	}
	return 0
}

func padding(n int) string { return strings.Repeat(figureSpace, max(0, n)) }
