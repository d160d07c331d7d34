package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store/record"
)

// most pairs that stand open on the page, and in it at all.
const (
	openPairs = 40
	maxPairs  = 1000
)

// shiftHead heads shifts with their intervals.
func shiftHead(level float64) string {
	if !isNumber(level) {
		return "shift"
	}
	return "shift (" + report.LevelWords(level) + " interval)"
}

func (p *pair) tables(d *compared) {
	d.Counts = p.counts()
	c := p.c
	if len(c.Secondary) > 0 {
		t := &table{Caption: "Secondary tests", Heads: []head{{"test", false}, {rich(shiftHead(c.Level)), true}, {"statistic", true}, {"p", true}, {"p adjusted", true}},
			Note: "They decide nothing: the verdict is that of the primary test alone. p adjusted is by Holm over all secondary tests. The error that whole lots share is in none of them."}
		for _, s := range c.Secondary {
			stat, shift := report.NotAvailable, ""
			if isNumber(s.Shift.Value) {
				shift = report.ShiftWords(s.Shift.Value, s.Shift.Low, s.Shift.High, "V")
			}
			if isNumber(s.Statistic) {
				stat = strconv.FormatFloat(s.Statistic, 'g', 4, 64)
			}
			t.Rows = append(t.Rows, []cell{{Text: rich(s.Test), Head: true}, number(shift), number(stat), number(report.ProbabilityWords(s.P)), number(report.ProbabilityWords(s.PAdjusted))})
		}
		d.Secondary = t
	}
	if len(c.Options) > 0 {
		t := &table{Class: "words", Caption: "Ways to go on", Heads: []head{{"way", false}, {"what follows", false}}, Note: "The person decides; the numbers are what follows from each way."}
		rules := slices.ContainsFunc(c.Options, func(o compare.Option) bool { return o.Rule != "" })
		if rules {
			t.Heads = append(t.Heads, head{"your stored rule", false})
		} else {
			t.Note += " No rule of yours is stored for any of them."
		}
		for _, o := range c.Options {
			row := []cell{{Text: rich(o.Name), Head: true}, text(report.Sentence(o.Text))}
			switch {
			case o.Rule != "":
				row = append(row, text(report.Sentence(report.SendBackWords(o.Rule))))
			case rules:
				row = append(row, cell{Text: "none stored", None: true})
			}
			t.Rows = append(t.Rows, row)
		}
		d.Options = t
	}
}

// counts is what stands behind either lot.
func (p *pair) counts() *table {
	t := &table{Class: "words", Caption: "Both lots", Heads: []head{{"of each lot", false}, {richf("reference, lot %s", p.c.Reference), false}, {richf("this lot, %s", p.c.Candidate), false}}}
	row := func(label string, of func(i int) string) {
		r := []cell{{Text: rich(label), Head: true}}
		for i := range p.lots {
			w := of(i)
			c := optional(w)
			c.None = c.None || w == report.NotAvailable
			r = append(r, c)
		}
		t.Rows = append(t.Rows, r)
	}
	whole := func(get func(i int) int) func(int) string {
		return func(i int) string { return strconv.Itoa(get(i)) }
	}
	c := p.c
	row("devices that take part", whole(func(i int) int { return c.Counts[i].N }))
	row("with a value (n)", whole(func(i int) int { return c.Counts[i].WithValue }))
	row("above: never reach the current", whole(func(i int) int { return c.Counts[i].Above }))
	row("with neither", whole(func(i int) int { return c.Counts[i].Without }))
	row("flagged: counted, never left out for that", whole(func(i int) int { return c.Counts[i].Flagged }))
	row("set aside: open, shorted, wrong way round, excluded", whole(func(i int) int { return c.Counts[i].Aside }))
	row("control parts, in no statistic", whole(func(i int) int { return c.Counts[i].Control }))
	centre := "centre (trimmed mean)"
	if isNumber(c.Raw) {
		centre += ", as read"
	}
	row(centre, func(i int) string {
		n := c.Counts[i].WithValue
		if !isNumber(c.Centre[i]) {
			return report.NotAvailable
		}
		sc := report.ScaleOf(p.unit, c.Centre[i])
		return fmt.Sprintf("%s %s (n = %d)", sc.FormatNumber(c.Centre[i], c.SD[i]/math.Sqrt(float64(n)), 0), sc.Unit(p.unit), n)
	})
	row("standard deviation", func(i int) string {
		if !isNumber(c.SD[i]) {
			return report.NotAvailable
		}
		return fmt.Sprintf("%s (n = %d)", report.FormatTwoDigits(c.SD[i], p.unit), c.Counts[i].WithValue)
	})
	row("parts in the lot", func(i int) string {
		if q, ok := p.lots[i].Lot.Quantity.Get(); ok {
			return report.FormatGiven(q, "")
		}
		return ""
	})
	row("how the sample was taken", func(i int) string { return p.lots[i].Lot.Sampled })
	row("date code", func(i int) string { return p.lots[i].Lot.DateCode })
	row("supplier", func(i int) string { return p.lots[i].Lot.Supplier })
	row("measured", func(i int) string { return measuredOn(p.lots[i]) })
	t.Note = "What the comparison says of the parts that were not measured depends on how both samples were taken."
	return t
}

// measuredOn is the day or the days of a lot's sweeps.
func measuredOn(s *report.Sheet) string {
	first, last := "", ""
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			if day := firstDay(s.Devices[i].Sweeps[j].MeasuredAt); day != "" {
				if first == "" || day < first {
					first = day
				}
				last = max(last, day)
			}
		}
	}
	if first == last {
		return first
	}
	return first + " to " + last
}

// pairs lists the devices that stand in both lots.
func (p *pair) pairs(d *compared) {
	q := p.c.Paired
	if q == nil {
		return
	}
	in := map[string]fit.Quantity{}
	for i := range p.ref.Devices {
		r := &p.ref.Devices[i]
		if x := p.value(r); isNumber(x) && r.Role != record.Control {
			in[r.Name] = *r.Result.At(p.c.Quantity)
		}
	}
	vs := report.ScaleOf(p.unit, 1)
	t := &table{Caption: "Devices in both lots", Heads: []head{{"device", false}, {richf("reference (%s)", vs.Unit(p.unit)), true}, {richf("this lot (%s)", vs.Unit(p.unit)), true}, {richf("difference (%s)", p.scale.Unit(p.unit)), true}}}
	// One number of digits for the whole column: that of the surest difference.
	least := math.NaN()
	for i := range p.Devices {
		n := &p.Devices[i]
		if r, ok := in[n.Name]; ok && isNumber(p.value(n)) {
			if u := math.Hypot(r.U, n.Result.At(p.c.Quantity).U); u > 0 && !(least <= u) {
				least = u
			}
		}
	}
	total := 0
	for i := range p.Devices {
		n := &p.Devices[i]
		r, ok := in[n.Name]
		x, y := r.Value, p.value(n)
		if !ok || !isNumber(y) || n.Role == record.Control {
			continue
		}
		if total++; total > maxPairs {
			continue
		}
		u := n.Result.At(p.c.Quantity).U
		diff := plus(p.scale.FormatNumber(y-x, least, 0))
		t.Rows = append(t.Rows, []cell{nameCell(n.Name), number(vs.FormatNumber(x, r.U, 0)), number(vs.FormatNumber(y, u, 0)), number(diff)})
	}
	if total > 0 {
		note := fmt.Sprintf("This lot less the reference, as measured (n = %d).", total)
		if isNumber(p.c.Raw) {
			note += " Nothing is taken off these differences."
		}
		if total > maxPairs {
			note += fmt.Sprintf(" The first %d of %d.", maxPairs, total)
		}
		t.Note = rich(note)
		d.Pairs, d.Folded = t, total > openPairs
	}
	if len(q.OnlyRef) > 0 {
		d.Unpaired = append(d.Unpaired, group{richf("Only in the reference, %s", plural(len(q.OnlyRef), "device")), foldNames(q.OnlyRef)})
	}
	if len(q.OnlyNew) > 0 {
		d.Unpaired = append(d.Unpaired, group{richf("Only in this lot, %s", plural(len(q.OnlyNew), "device")), foldNames(q.OnlyNew)})
	}
}

// made tells from which data the reference's numbers were made and how both
// lots were measured.
func (p *pair) made(d *compared) {
	for _, f := range []struct{ label, value string }{
		{"lot", p.c.Reference},
		{"part", p.ref.Part.Name},
		{"checksum of its data (SHA-256)", p.ref.Hash},
		{"fitted by", version(p.ref.Version)},
		{"data up to", p.ref.Latest},
		{"devices known", strconv.Itoa(len(p.ref.Devices))},
	} {
		v := given(f.value)
		if f.value != "" && f.value == p.ref.Hash {
			v = "<code>" + plain(f.value) + "</code>"
		}
		d.Facts = append(d.Facts, field{Label: rich(f.label), Value: v, Given: f.value != ""})
	}
	t := &table{Caption: "Conditions of both lots", Heads: append([]head{{"lot", false}}, conditionHeads...)}
	for i, s := range p.lots {
		rows := conditionRows(s)
		if len(rows) == 0 {
			rows = [][]cell{{{Text: "conditions not given", None: true}, {}, {}, {}, {}}}
		}
		name := template.HTML("reference")
		if i == 1 {
			name = "this lot"
		}
		for _, r := range rows {
			t.Rows = append(t.Rows, append([]cell{{Text: name, Head: true}}, r...))
		}
	}
	d.Taken = t
	if m := metersTable(p.ref); m != nil {
		m.Caption = "Instruments of the reference"
		d.Meters = m
	}
}

func version(v string) string {
	if v == "" {
		return ""
	}
	return strings.TrimSpace("gatesill " + v)
}

// trend is the run of lots with its picture.
type trend struct {
	Figure *figure
	Lots   *table
	Pairs  *table // of all lots, folded
	Texts  []template.HTML
}

func (v *view) trend(k *known) {
	t := k.Trend
	if t == nil || len(t.Lots) == 0 {
		return
	}
	d := &trend{Figure: k.trendFigure(t)}
	d.Lots, d.Figure.Data = d.Figure.Data, nil
	if t.Untimed {
		d.Texts = append(d.Texts, "The time of some lot is not known: the order of the lots is not that of their making.")
	}
	for _, s := range t.Text {
		d.Texts = append(d.Texts, rich(report.Sentence(s)))
	}
	if len(t.Pairs) > 0 {
		unit := report.KeyOf(t.By).Unit
		all := []float64{}
		for _, p := range t.Pairs {
			all = append(all, p.Shift)
		}
		sc := report.ScaleOf(unit, largest(all...))
		pt := &table{Caption: "Lot against lot", Heads: []head{{"lots", false}, {richf("shift (%s)", sc.Unit(unit)), true}, {"interval", true}, {"p", true}, {"p adjusted", true}},
			Note: "The shift is the second lot less the first. The intervals hold together (Bonferroni); p adjusted is by Holm over all pairs here, so that a pair that differs by itself need not differ among so many."}
		for i, p := range t.Pairs {
			if i == maxPairs {
				pt.Note += richf(" The first %d of %d.", maxPairs, len(t.Pairs))
				break
			}
			u := (p.High - p.Low) / 4
			pt.Rows = append(pt.Rows, []cell{nameCell(p.A + ", " + p.B), number(sc.FormatNumber(p.Shift, u, 0)), number(sc.FormatNumber(p.Low, u, 0) + " to " + sc.FormatNumber(p.High, u, 0)), number(report.ProbabilityWords(p.P)), number(report.ProbabilityWords(p.PAdjusted))})
		}
		d.Pairs = pt
	}
	v.Trend = d
}
