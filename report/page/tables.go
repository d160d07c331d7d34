package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

func text(words string) cell    { return cell{Text: rich(words)} }
func nameCell(name string) cell { return cell{Text: plain(name), Head: true} }
func number(words string) cell {
	return cell{Text: rich(words), Right: true, None: words == report.NotAvailable}
}

func optional(words string) cell {
	if words == "" {
		return cell{Text: report.NotGiven, None: true}
	}
	return text(words)
}

func (v *view) spread(k *known) {
	t := &table{
		Caption: "Spread of the lot",
		Heads: []head{{"quantity", false}, {"unit", false}, {"n", true}, {"above", true}, {"median", true}, {"robust sd", true},
			{"mean", true}, {"± (mean)", true}, {"sd", true}, {"least", true}, {"greatest", true}},
	}
	for _, key := range fit.Keys {
		m, ok := k.Spread.Summary[key]
		if !ok || m.N == 0 && m.Above == 0 {
			continue
		}
		sc, se := report.SummaryScale(key, m), report.StandardError(m)
		num := func(x float64) cell { return number(sc.FormatNumber(x, se, 0)) }
		t.Rows = append(t.Rows, []cell{
			{Text: rich(k.KeyPhrase(key)), Head: true}, text(sc.Unit(report.KeyOf(key).Unit)), number(strconv.Itoa(m.N)), number(strconv.Itoa(m.Above)),
			num(m.Median), num(m.RobustSD), num(m.Mean), number(sc.FormatNumber(se, se, 0)), num(m.SD), num(m.Min), num(m.Max),
		})
	}
	if len(t.Rows) > 0 {
		note := "± (mean) is the standard uncertainty of the mean, sd/√n. Devices above the range count as above every value in medians."
		if k.Spread.Estimator != "" {
			note = "Robust sd: " + k.Spread.Estimator + ". " + note
		}
		t.Note = rich(note)
		v.Spread = t
	}
	l := &table{Caption: "Limits behind the flags", Heads: []head{{"quantity", false}, {"unit", false}, {"low", true}, {"high", true}, {"× robust sd", true}, {"basis", false}}}
	for _, key := range fit.Keys {
		lim, ok := k.Spread.Limits[key]
		if !ok {
			continue
		}
		m := k.Spread.Summary[key]
		sc, se := report.SummaryScale(key, m), report.StandardError(m)
		width := report.NotAvailable
		if isNumber(lim.K) {
			width = "± " + strconv.FormatFloat(lim.K, 'g', 3, 64)
		}
		l.Rows = append(l.Rows, []cell{
			{Text: rich(k.KeyPhrase(key)), Head: true}, text(sc.Unit(report.KeyOf(key).Unit)),
			number(sc.FormatNumber(lim.Low, se, 0)), number(sc.FormatNumber(lim.High, se, 0)), number(width), text(lim.Basis),
		})
	}
	if len(l.Rows) > 0 {
		v.Limits = l
	}
}

func (v *view) bins(k *known) {
	srt := k.Sorting
	if srt == nil {
		return
	}
	sc := report.BinScale(srt)
	unit := sc.Unit(report.KeyOf(srt.By).Unit)
	t := &table{Caption: richf("Bins by %s", k.KeyPhrase(srt.By)), Heads: []head{{"bin", false}, {richf("from (%s)", unit), true}, {richf("below (%s)", unit), true}, {"devices", true}, {"which", false}}}
	for _, b := range srt.Bins {
		var names []string
		for _, d := range b.Devices {
			name := report.Clean(d.Name)
			if d.Maybe != "" {
				name += " (or " + report.Clean(d.Maybe) + ")"
			}
			names = append(names, name)
		}
		list := cell{Text: plain(strings.Join(names, ", "))}
		if len(names) == 0 {
			list = cell{Text: "none", None: true}
		}
		t.Rows = append(t.Rows, []cell{nameCell(b.Name), number(report.EdgeText(srt, sc, b.Low)), number(report.EdgeText(srt, sc, b.High)), number(strconv.Itoa(len(b.Devices))), list})
	}
	note := "How narrow a bin may be is not known, because no uncertainty of the readings is known."
	if isNumber(srt.SmallestWidth) && srt.SmallestWidth > 0 {
		note = fmt.Sprintf("A bin narrower than %s would sort noise (4 standard uncertainties of a device).", twoDigits(srt.SmallestWidth, report.KeyOf(srt.By).Unit))
	}
	t.Note = rich(note + " A device within 2 standard uncertainties of an edge names the bin across it as well.")
	v.Bins = t
	for _, u := range k.Unsorted() {
		v.Unsorted = append(v.Unsorted, named{Name: report.Clean(u.Name), Texts: []template.HTML{rich(u.Why)}})
	}
}

// deviceTable is the table of all devices.
type deviceTable struct {
	Heads []deviceHead
	Rows  []deviceRow
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
	packages, methods := false, false
	for i := range k.Devices {
		d := &k.Devices[i]
		packages = packages || d.Package != "" || d.Side != ""
		methods = methods || d.Result.Vt.Ok()
	}
	rows := make([]deviceRow, len(k.Devices))
	for i := range k.Devices {
		d := &k.Devices[i]
		rows[i] = deviceRow{Ref: i + 1, Name: report.Clean(d.Name)}
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
		column(deviceHead{Text: rich(report.KeyOf(key).Symbol), Unit: c.unit, Class: "r", Numeric: true}, func(i int, _ *report.Device) deviceCell { return c.cells[i] })
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
	t.Rows = rows
	t.Note = "± is one standard uncertainty within the session (k = 1), the one that counts when devices of this lot are compared with each other; n is the number of points a value rests on."
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

// decimals counts what stands from the decimal mark on, the mark included.
func decimals(number string) int {
	if i := strings.IndexByte(number, '.'); i >= 0 {
		return len(number) - i
	}
	return 0
}

func padding(n int) string { return strings.Repeat(figureSpace, max(0, n)) }

func (v *view) flags(k *known) {
	for _, vd := range k.Spread.Devices {
		if !vd.Flagged {
			continue
		}
		n := named{Name: report.Clean(vd.Name)}
		for _, r := range vd.Reasons {
			text := rich(r.Text)
			if next := k.Advice(r.Code).Next; next != "" {
				text += " " + rich(next)
			} else if next := stateNext(r.Code); next != "" {
				text += " " + rich(next)
			}
			n.Texts = append(n.Texts, text)
			n.Codes = append(n.Codes, report.Clean(r.Code))
		}
		v.Flags = append(v.Flags, n)
	}
	v.FlagCount = fmt.Sprintf("%s of %d", none(len(v.Flags)), len(k.Spread.Devices))
}

// stateNext tells what to do about a flag that is a state.
func stateNext(code string) string {
	switch s := fit.State(code); s {
	case fit.Open, fit.Shorted, fit.WrongWayRound:
		return report.WordsOf(s).Next
	}
	return ""
}

// maxLeftOut bounds the table of points left out.
const maxLeftOut = 1000

func (v *view) leftOut(k *known) {
	t := &table{Caption: "Points left out of a fit", Heads: []head{{"device", false}, {"sweep", true}, {"point", true}, {"source line", true}, {rich("V_GS (V)"), true}, {rich("I_D (A)"), true}, {"why", false}}}
	total := 0
	at := func(x []float64, i int) cell {
		if i < 0 || i >= len(x) || math.IsNaN(x[i]) {
			return cell{Text: "none", Right: true, None: true}
		}
		if math.IsInf(x[i], 0) {
			return cell{Text: "beyond the range", Right: true, None: true}
		}
		return number(strconv.FormatFloat(x[i], 'g', 6, 64))
	}
	for i := range k.Devices {
		d := &k.Devices[i]
		for j := range d.Sweeps {
			sw := &d.Sweeps[j]
			id := currents(sw)
			for _, l := range sw.Result.LeftOut {
				if total++; total > maxLeftOut {
					continue
				}
				line := cell{Text: "–", Right: true, None: true}
				if n := sw.Line(l.Index); n > 0 {
					line = number(strconv.Itoa(n))
				}
				t.Rows = append(t.Rows, []cell{nameCell(d.Name), number(strconv.Itoa(j + 1)), number(strconv.Itoa(l.Index + 1)), line, at(sw.Curve.Vg, l.Index), at(id, l.Index), {Text: rich(l.Text) + " (" + plain(l.Code) + ")"}})
			}
		}
	}
	if total == 0 {
		return
	}
	if total > maxLeftOut {
		t.Note = richf("The first %d of %d; all of them stand in the JSON export of the lot.", maxLeftOut, total)
	}
	v.LeftOut = t
}

// circumstances tells under what the sweeps were taken, each different condition
// once.
func (v *view) circumstances(k *known) {
	type group struct {
		cond  record.Condition
		n     int
		dirs  map[record.Direction]int
		first string
		last  string
	}
	var groups []*group
	at := map[record.Condition]*group{}
	for i := range k.Devices {
		for j := range k.Devices[i].Sweeps {
			sw := &k.Devices[i].Sweeps[j]
			g := at[sw.Condition]
			if g == nil {
				g = &group{cond: sw.Condition, dirs: map[record.Direction]int{}, first: sw.MeasuredAt, last: sw.MeasuredAt}
				at[sw.Condition] = g
				groups = append(groups, g)
			}
			g.n++
			g.dirs[sw.Direction]++
			if sw.MeasuredAt != "" && (g.first == "" || sw.MeasuredAt < g.first) {
				g.first = sw.MeasuredAt
			}
			g.last = max(g.last, sw.MeasuredAt)
		}
	}
	t := &table{Caption: "Conditions of the sweeps", Heads: []head{{"circuit", false}, {"details", false}, {"temperature", false}, {"sweeps", true}, {"measured", false}}}
	for _, g := range groups {
		var dirs []string
		for _, d := range []record.Direction{record.Up, record.Down, record.Spot} {
			if g.dirs[d] > 0 {
				dirs = append(dirs, fmt.Sprintf("%d %s", g.dirs[d], d))
			}
		}
		cond := g.cond
		temp := ""
		if x, ok := cond.Temp.Get(); ok {
			temp = strings.TrimSpace(report.FormatGiven(x, "°C") + " " + cond.TempOf)
		}
		cond.Temp = record.Num{}
		when := g.first
		if g.last != g.first {
			when += " to " + g.last
		}
		t.Rows = append(t.Rows, []cell{optional(report.CircuitWords(cond.Circuit)), optional(strings.Join(report.ConditionWords(cond), "; ")), optional(temp), number(strings.Join(dirs, ", ")), optional(when)})
	}
	if len(t.Rows) > 0 {
		v.Conditions = t
		if len(groups) > 1 {
			t.Note = "The sweeps were not all taken under one condition. Values under unlike conditions are not comparable without more."
		}
	}
	v.meters(k)
	v.sessions(k)
	v.budget(k)
}

func (v *view) meters(k *known) {
	list := instruments(k.Sheet)
	if len(list) == 0 {
		return
	}
	t := &table{Caption: "Instruments", Heads: []head{{"role", false}, {"instrument", false}, {"accuracy statement", false}, {"calibrated", false}, {"due", false}, {"sweeps", true}}}
	for _, m := range list {
		var ranges []string
		for _, r := range m.Ranges {
			unit := map[string]string{"gate": "V", "load": "V", "drain": "V", "supply": "V", "current": "A", "temperature": "°C"}[m.Role]
			text := fmt.Sprintf("± (%s %% + %s counts of %s)", strconv.FormatFloat(r.Percent, 'g', -1, 64), strconv.FormatFloat(r.Counts, 'g', -1, 64), report.FormatGiven(r.Resolution, unit))
			if r.Top > 0 && isNumber(r.Top) {
				text += " up to " + report.FormatGiven(r.Top, unit)
			}
			ranges = append(ranges, text)
		}
		statement := strings.Join(ranges, "; ")
		if statement != "" && m.Coverage != "" {
			statement += " (" + coverageWords(m.Coverage) + ")"
		}
		due := optional(m.Due)
		if m.overdue != "" {
			due = cell{Text: plain(m.Due) + "<strong> overdue when used</strong>"}
		}
		t.Rows = append(t.Rows, []cell{{Text: rich(m.Role), Head: true}, {Text: plain(meterName(m.Instrument))}, optional(statement), optional(m.Calibrated), due, number(strconv.Itoa(m.sweeps))})
	}
	v.Meters = t
}

func coverageWords(c string) string {
	switch c {
	case "limit":
		return "limit of error"
	case "k2":
		return "k = 2"
	}
	return c
}

func (v *view) sessions(k *known) {
	if len(k.Sessions) > 0 {
		t := &table{Caption: "Sessions", Heads: []head{{"session", false}, {"bench", false}, {"operator", false}, {"fixture", false}, {"ambient", false}, {"begun", false}}}
		for _, s := range k.Sessions {
			ambient := ""
			if x, ok := s.Ambient.Get(); ok {
				ambient = report.FormatGiven(x, "°C")
			}
			t.Rows = append(t.Rows, []cell{optional(s.Name), optional(s.Bench), optional(s.Operator), optional(s.Fixture), optional(ambient), optional(s.StartedAt)})
		}
		v.Sessions = t
	}
	if len(k.Sheet.Sources) > 0 {
		t := &table{Caption: "Files", Heads: []head{{"file", false}, {"layout", false}, {"bytes", true}, {"SHA-256", false}, {"imported", false}}}
		for _, s := range k.Sheet.Sources {
			t.Rows = append(t.Rows, []cell{nameCell(s.Name), optional(s.Layout), number(strconv.FormatInt(s.Size, 10)), {Text: "<code>" + plain(s.Hash) + "</code>"}, optional(s.ImportedAt)})
		}
		v.Sources = t
	}
}

// budget shows the three standard uncertainties of each quantity, the median
// over the devices.
func (v *view) budget(k *known) {
	t := &table{Caption: "Standard uncertainties (k = 1), median over the devices", Heads: []head{{"quantity", false}, {"devices", true}, {"within the session", true}, {"between sessions", true}, {"absolute", true}}}
	for _, key := range fit.Keys {
		var within, between, absolute []float64
		for i := range k.Devices {
			q := k.Devices[i].Result.At(key)
			if !q.Ok() || k.Devices[i].Excluded {
				continue
			}
			within, between, absolute = append(within, q.U), append(between, q.UBetween), append(absolute, q.UAbsolute)
		}
		if len(within) == 0 {
			continue
		}
		unit := report.KeyOf(key).Unit
		med := func(x []float64) cell {
			x = slices.DeleteFunc(slices.Clone(x), func(u float64) bool { return !isNumber(u) })
			if len(x) == 0 {
				return cell{Text: "not known", Right: true, None: true}
			}
			slices.Sort(x)
			return number(twoDigits(x[len(x)/2], unit))
		}
		t.Rows = append(t.Rows, []cell{{Text: rich(k.KeyPhrase(key)), Head: true}, number(strconv.Itoa(len(within))), med(within), med(between), med(absolute)})
	}
	if len(t.Rows) == 0 {
		return
	}
	t.Note = "Within the session: the random part on one meter and range; it decides what can be told apart in this lot. Between sessions: drift, putting in again and temperature added. Absolute: gain of the meters, tolerance of the load resistor and burden added; it decides what can be said against a data-sheet limit. For two independent readings the uncertainty of their difference is √2 times that of one."
	v.Budget = t
}

func (v *view) facts(k *known) {
	operators, benches, days := []string{}, []string{}, []string{}
	add := func(list *[]string, s string) {
		if s != "" && !slices.Contains(*list, s) {
			*list = append(*list, s)
		}
	}
	for _, s := range k.Sessions {
		add(&operators, s.Operator)
		add(&benches, s.Bench)
	}
	for i := range k.Devices {
		for j := range k.Devices[i].Sweeps {
			add(&days, firstDay(k.Devices[i].Sweeps[j].MeasuredAt))
		}
	}
	slices.Sort(days)
	when := ""
	switch {
	case len(days) == 1:
		when = days[0]
	case len(days) > 1:
		when = days[0] + " to " + days[len(days)-1]
	}
	for _, f := range []struct {
		label, value string
		pen          bool
	}{
		{"report on", "lot " + k.Sheet.Lot.Name, false},
		{"made by (laboratory or firm, address)", "", true},
		{"for (customer, contact)", "", true},
		{"place of measurement", strings.Join(benches, ", "), true},
		{"operator", strings.Join(operators, ", "), true},
		{"measured on", when, true},
		{"devices received on", "", true},
		{"issued on", "", true},
		{"released by", "", true},
	} {
		v.About = append(v.About, field{rich(f.label), given(f.value), f.value != "", f.pen})
	}
	for _, f := range report.PartFields(k.Part) {
		v.PartFacts = append(v.PartFacts, field{rich(f.Label), given(f.Value), f.Value != "", false})
	}
	for _, f := range report.LotFields(k.Sheet.Lot) {
		v.LotFacts = append(v.LotFacts, field{rich(f.Label), given(f.Value), f.Value != "", false})
	}
}

// rules says by which rules the report judges, and which were not set.
func (v *view) rules(k *known) {
	add := func(format string, args ...any) {
		text := strings.ReplaceAll(string(richf(format, args...)), report.NotGiven, `<span class="missing">`+report.NotGiven+`</span>`)
		v.Rules = append(v.Rules, template.HTML(text))
	}
	if len(k.Spread.Limits) > 0 {
		add("A device is flagged as out of family when a quantity lies outside the limits of the table above; a device that is open, shorted, wrong way round or leaks is flagged for that alone.")
	} else {
		add("No limits were drawn from this lot: only devices that are open, shorted, wrong way round or leak are flagged.")
	}
	lo, okLo := k.Part.VgsthMin.Get()
	hi, okHi := k.Part.VgsthMax.Get()
	if okLo || okHi {
		low, high := report.NotGiven, report.NotGiven
		if okLo {
			low = report.FormatGiven(lo, "V")
		}
		if okHi {
			high = report.FormatGiven(hi, "V")
		}
		add("Data-sheet limits of V_GS(th): %s to %s.", low, high)
	} else {
		add("Data-sheet limits of V_GS(th): %s.", report.NotGiven)
	}
	add("Guard band at a limit: %s.", orNotGiven(report.AmountWords(k.Sheet.Lot.Guard)))
	margin := orNotGiven(report.AmountWords(k.Sheet.Lot.Margin))
	if at := k.Sheet.Lot.MarginSetAt; at != "" && !k.Sheet.Lot.Margin.IsZero() {
		margin += ", set " + report.Clean(at)
	}
	add("Largest shift that does not matter: %s.", margin)
	add("Sent back when: %s.", orNotGiven(report.SendBackWords(k.Sheet.Lot.SendBack)))
	add("The results hold for the devices listed, as they were measured under the conditions given. What they say of the rest of the lot depends on how the sample was taken: %s.", orNotGiven(k.Sheet.Lot.Sampled))
	add("They do not say that a part is genuine.")
}

func orNotGiven(s string) string {
	if s == "" {
		return report.NotGiven
	}
	return s
}
