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

// conditionHeads are the heads over the rows of [conditionRows].
var conditionHeads = []head{{"circuit", false}, {"details", false}, {"temperature", false}, {"sweeps", true}, {"measured", false}}

// conditionRows tells under what the sweeps of a lot were taken, each different
// condition once.
func conditionRows(s *report.Sheet) [][]cell {
	type group struct {
		cond  record.Condition
		n     int
		dirs  map[record.Direction]int
		first string
		last  string
	}
	var groups []*group
	at := map[record.Condition]*group{}
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j]
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
	var rows [][]cell
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
		rows = append(rows, []cell{optional(report.CircuitWords(cond.Circuit)), optional(strings.Join(report.ConditionWords(cond), "; ")), optional(temp), number(strings.Join(dirs, ", ")), optional(when)})
	}
	return rows
}

func (v *view) circumstances(k *known) {
	if rows := conditionRows(k.Sheet); len(rows) > 0 {
		v.Conditions = &table{Caption: "Conditions of the sweeps", Heads: conditionHeads, Rows: rows}
		if len(rows) > 1 {
			v.Conditions.Note = "The sweeps were not all taken under one condition. Values under unlike conditions are not comparable without more."
		}
	}
	v.Meters = metersTable(k.Sheet)
	v.sessions(k)
	v.budget(k)
}

// metersTable lists the instruments of a lot; nil when none is known.
func metersTable(s *report.Sheet) *table {
	list := instruments(s)
	if len(list) == 0 {
		return nil
	}
	t := &table{Caption: "Instruments", Heads: []head{{"role", false}, {"instrument", false}, {"accuracy statement", false}, {"calibrated", false}, {"due", false}, {"sweeps", true}}}
	for _, m := range list {
		statement := statementWords(m.Instrument)
		due := optional(m.Due)
		if m.overdue != "" {
			due = cell{Text: plain(m.Due) + "<strong> overdue when used</strong>"}
		}
		t.Rows = append(t.Rows, []cell{{Text: rich(m.Role), Head: true}, {Text: plain(meterName(m.Instrument))}, optional(statement), optional(m.Calibrated), due, number(strconv.Itoa(m.sweeps))})
	}
	return t
}

// statementWords is the accuracy statement of a meter, range by range; where only the
// step of its display is known it says that there is none.
func statementWords(m record.Instrument) string {
	unit := map[string]string{"gate": "V", "load": "V", "drain": "V", "supply": "V", "current": "A", "temperature": "°C"}[m.Role]
	stated := false
	var ranges []string
	for _, r := range m.Ranges {
		text := "display step " + report.FormatGiven(r.Resolution, unit)
		if r.Percent > 0 || r.Counts > 0 {
			stated = true
			text = fmt.Sprintf("± (%s %% + %s counts of %s)", strconv.FormatFloat(r.Percent, 'g', -1, 64), strconv.FormatFloat(r.Counts, 'g', -1, 64), report.FormatGiven(r.Resolution, unit))
		}
		if r.Top > 0 && r.Top < math.MaxFloat64 {
			text += " up to " + report.FormatGiven(r.Top, unit)
		}
		ranges = append(ranges, text)
	}
	statement := strings.Join(ranges, "; ")
	switch {
	case statement == "":
	case !stated:
		statement = "none; " + statement
	case m.Coverage != "":
		statement += " (" + coverageWords(m.Coverage) + ")"
	}
	return statement
}

func coverageWords(c string) string {
	switch c {
	case "limit":
		return "limit of error"
	case "k=2":
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
			return number(report.FormatTwoDigits(x[len(x)/2], unit))
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
	if k.Spec != nil && k.Spec.Why == "" {
		add("Rule at a limit: %s.", k.GuardRule())
	} else {
		add("Guard band at a limit: %s.", orNotGiven(report.AmountWords(k.Sheet.Lot.Guard)))
	}
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
