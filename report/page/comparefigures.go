package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/report/svg"
	"gatesill/store/record"
)

const (
	singleCurves = 12 // up to so many a lot are drawn one by one
	fanShare     = 20 // devices from which the range of a fan leaves out the outermost twentieths
)

func (p *pair) figures(d *compared) {
	c := p.c
	if isNumber(c.Shift) {
		margin := ""
		if p.margin {
			margin = fmt.Sprintf(", against a margin of %s", p.plusMinus())
		}
		d.Interval = &figure{Label: "shift with its intervals", Marks: true, SVG: template.HTML(svg.AppendInterval(nil, svg.IntervalOptions{
			Frame: svg.Frame{ID: "compare-interval", Title: "Shift of this lot with its intervals", Desc: fmt.Sprintf("Shift %s, %s interval %s%s.", p.shift(c.Shift), percent(c.Level), p.interval(c.Low, c.High), margin)},
			Value: c.Shift, Low: c.Low, High: c.High, Level: c.Level, MarginLow: c.MarginLow, MarginHigh: c.MarginHigh, Margin: c.Margin,
		}))}
	}
	p.steps(d)
	p.curves(d)
	p.band(d)
}

// takesPart gathers the devices of a lot that the comparison counts.
func (p *pair) takesPart(i int) (list []svg.Spot, above int) {
	s := p.lots[i]
	for j := range s.Devices {
		dev := &s.Devices[j]
		if dev.Role == record.Control {
			continue
		}
		if dev.State() == fit.Above {
			above++
		} else if x := p.value(dev); isNumber(x) {
			spot := svg.Spot{Name: dev.Name, X: x}
			if i == 1 {
				spot.Ref, spot.Flag = j+1, p.flag(dev.Name)
			}
			list = append(list, spot)
		}
	}
	return list, above
}

func (p *pair) steps(d *compared) {
	c := p.c
	var lots [2]svg.Steps
	for i := range lots {
		spots, above := p.takesPart(i)
		lots[i] = svg.Steps{Name: [...]string{c.Reference, c.Candidate}[i], Spots: spots, Above: above, Centre: c.Centre[i]}
	}
	if len(lots[0].Spots)+len(lots[1].Spots) == 0 {
		return
	}
	o := svg.DistributionOptions{
		Frame:    svg.Frame{ID: "compare-steps", Title: "Both lots by " + p.KeyPhrase(c.Quantity)},
		Quantity: p.KeyPhrase(c.Quantity), Unit: p.unit, Negative: p.negative(),
		Margin: c.Margin, Low: math.NaN(), High: math.NaN(),
	}
	if c.Quantity == fit.KeyVgsth { // the data-sheet limits are of the threshold
		o.Low, o.High = p.Part.VgsthMin.Float(), p.Part.VgsthMax.Float()
	}
	o.Desc = fmt.Sprintf("Share of each lot's devices against gate voltage: reference %s, n = %d, %d above; this lot %s, n = %d, %d above. The numbers stand in the table below.",
		c.Reference, len(lots[0].Spots), lots[0].Above, c.Candidate, len(lots[1].Spots), lots[1].Above)
	b, drawn := svg.AppendDistribution(nil, lots[0], lots[1], o)
	note := "Each line goes up by one step a device: how far to the side one line lies of the other is the shift, how steep it is the spread. The reference is dashed with squares, this lot is drawn through with round marks; the marks on the axis are the centres."
	if max(len(lots[0].Spots), len(lots[1].Spots)) > 150 {
		note += " In a lot of many devices the marks stand at every tenth of them."
	}
	if lots[0].Above+lots[1].Above > 0 {
		note += " Devices that never reach the current count as above every value: their line does not reach 100 %."
	}
	if drawn.Beyond > 0 {
		note += fmt.Sprintf(" %s much further out than the others: the lines step at the edge of the picture for them.", lie(drawn.Beyond))
	}
	if c.Paired != nil {
		note += " The verdict rests on the differences of the same devices, which are listed below, not on these lines."
	}
	if p.margin {
		note += " The shaded stretch is the margin about the centre of the reference."
	}
	d.Steps = &figure{Label: "distributions of both lots", SVG: template.HTML(b), Caption: rich(note), Data: p.shares(lots, o.Negative)}
}

func lie(n int) string {
	if n == 1 {
		return "1 device lies"
	}
	return strconv.Itoa(n) + " devices lie"
}

// shares is the picture of both distributions in numbers.
func (p *pair) shares(lots [2]svg.Steps, negative bool) *table {
	t := &table{Caption: richf("Gate voltage that a share of the devices does not need to exceed (%s)", p.unit), Heads: []head{{"share of the lot", false}, {"reference", true}, {"this lot", true}},
		Note: richf("Of %d and %d devices, those above included. Every device of this lot stands in the table of devices.", len(lots[0].Spots)+lots[0].Above, len(lots[1].Spots)+lots[1].Above)}
	var x [2][]float64
	for i := range lots {
		for _, s := range lots[i].Spots {
			x[i] = append(x[i], s.X)
		}
		slices.Sort(x[i])
		if negative {
			slices.Reverse(x[i])
		}
	}
	for _, share := range []int{0, 5, 10, 25, 50, 75, 90, 95, 100} {
		row := []cell{{Text: rich(strconv.Itoa(share) + " %"), Head: true}}
		if share == 0 {
			row[0].Text = "the first device"
		}
		for i := range lots {
			all := len(x[i]) + lots[i].Above
			n := max(1, (share*all+99)/100)
			switch {
			case all == 0:
				row = append(row, number(report.NotAvailable))
			case n > len(x[i]):
				row = append(row, number("above"))
			default:
				row = append(row, number(report.Scale{}.FormatNumber(x[i][n-1], math.NaN(), 0)))
			}
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// fan gathers the curves of a lot at the currents that at least three quarters
// of its devices reach: at the others the middle would be that of the early
// ones only.
func fan(s *report.Sheet, name string) svg.Fan {
	f := svg.Fan{Name: name}
	at := map[float64][]float64{}
	for i := range s.Devices {
		d := &s.Devices[i]
		if d.State() == fit.Excluded || d.Role == record.Control || len(d.Result.Levels) < 2 {
			continue
		}
		f.N++
		for _, l := range d.Result.Levels {
			if isNumber(l.Vg) {
				at[l.I] = append(at[l.I], l.Vg)
			}
		}
	}
	for _, i := range fit.LevelCurrents {
		x := at[i]
		n := len(x)
		if n < 3 || 4*n < 3*f.N {
			continue
		}
		slices.Sort(x)
		out := 0
		if n >= fanShare {
			out = n / 20
		}
		f.Currents, f.Count = append(f.Currents, i), append(f.Count, n)
		f.Middle = append(f.Middle, (x[(n-1)/2]+x[n/2])/2)
		f.Low, f.High = append(f.Low, x[out]), append(f.High, x[n-1-out])
	}
	return f
}

func (p *pair) curves(d *compared) {
	fans := [2]svg.Fan{fan(p.ref, p.c.Reference), fan(p.Sheet, p.c.Candidate)}
	drawn := 0
	for i := range fans {
		k := p.known
		if i == 0 {
			k = newKnown(p.ref)
		}
		all, _ := k.sweeps()
		all = slices.DeleteFunc(all, func(s drawnSweep) bool {
			d := &k.Devices[s.device]
			return d.Role == record.Control || d.State() != fit.Measured && d.State() != fit.Above
		})
		drawn += len(all)
		if len(all) > singleCurves {
			continue
		}
		for _, s := range all {
			cv := s.curve
			if i == 0 {
				cv.Ref = 0
			}
			cv.Name += " of " + fans[i].Name
			fans[i].Curves = append(fans[i].Curves, cv)
		}
	}
	if drawn == 0 || len(fans[0].Currents)+len(fans[0].Curves) == 0 || len(fans[1].Currents)+len(fans[1].Curves) == 0 {
		d.NoCurves = "No curves of both lots to lay over each other."
		return
	}
	f := &curvesFigure{Switch: "two", Of: "both lots", Data: p.fanData(fans)}
	desc := fmt.Sprintf("Median transfer curves of both lots with their ranges: reference, n = %d, and this lot, n = %d. The numbers stand in the table below.", fans[0].N, fans[1].N)
	for _, axis := range []svg.Axis{svg.SquareRoot, svg.Logarithmic} {
		b, _ := svg.AppendOverlay(nil, fans[0], fans[1], svg.OverlayOptions{
			Frame: svg.Frame{ID: "both-" + axis.String(), Title: "Transfer curves of both lots, " + axis.String() + " current axis", Desc: desc},
			Axis:  axis, PChannel: p.Part.Channel == record.PChannel, Levels: p.marked(),
		})
		f.Pictures = append(f.Pictures, picture{ID: "two-" + axis.String(), Label: axis.String(), SVG: template.HTML(b), Checked: axis == svg.SquareRoot})
	}
	note := "Thick lines are the medians of the lots at each current, drawn where at least three quarters of the devices reach it."
	for i, f := range fans {
		name := [...]string{"the reference", "this lot"}[i]
		switch {
		case len(f.Curves) > 0:
			note += fmt.Sprintf(" Thin lines are the single curves of %s.", name)
		case f.N >= fanShare:
			note += fmt.Sprintf(" The shade of %s holds all of its devices but the twentieth at either side (n = %d).", name, f.N)
		default:
			note += fmt.Sprintf(" The shade of %s goes from its least to its greatest (n = %d).", name, f.N)
		}
	}
	f.Caption = rich(note)
	d.Curves = f
}

// marked are the currents marked in the pictures.
func (k *known) marked() (list []svg.Level) {
	if isNumber(k.TestCurrent) {
		list = append(list, svg.Level{Current: k.TestCurrent, Label: "test current " + report.FormatGiven(k.TestCurrent, "A")})
	}
	if isNumber(k.IdleCurrent) {
		list = append(list, svg.Level{Current: k.IdleCurrent, Label: "idle current " + report.FormatGiven(k.IdleCurrent, "A")})
	}
	return list
}

// fanData is the picture of the curves in numbers.
func (p *pair) fanData(fans [2]svg.Fan) *table {
	t := &table{Caption: rich("Gate voltages of both lots at a current (V)"), Heads: []head{{"current", false},
		{"reference, n", true}, {"median", true}, {"range", true}, {"this lot, n", true}, {"median", true}, {"range", true}}}
	num := func(x float64) string { return report.Scale{}.FormatNumber(x, math.NaN(), 0) }
	for _, i := range fit.LevelCurrents {
		row := []cell{{Text: rich(report.FormatGiven(i, "A")), Head: true}}
		found := false
		for _, f := range fans {
			k := slices.Index(f.Currents, i)
			if k < 0 {
				none := cell{Text: "–", Right: true, None: true}
				row = append(row, none, none, none)
				continue
			}
			found = true
			row = append(row, number(strconv.Itoa(f.Count[k])), number(num(f.Middle[k])), number(num(f.Low[k])+" to "+num(f.High[k])))
		}
		if found {
			t.Rows = append(t.Rows, row)
		}
	}
	return t
}

func (p *pair) band(d *compared) {
	b := p.c.Curves
	if b == nil || len(b.Points) == 0 {
		return
	}
	pic, _ := svg.AppendShift(nil, b.Points, svg.ShiftOptions{
		Frame:  svg.Frame{ID: "compare-shift", Title: "Shift of the gate voltage against current", Desc: fmt.Sprintf("Shift between the lots at %s with its %s band. The numbers stand in the table below.", plural(len(b.Points), "current"), percent(b.Level))},
		Margin: p.c.Margin, Level: b.Level, Levels: p.marked(),
	})
	note := fmt.Sprintf("This lot less the reference. The band holds at all currents together with a probability of %s", percent(b.Level))
	if isNumber(b.Critical) {
		note += fmt.Sprintf(" (± %.3g standard errors)", b.Critical)
	}
	note += "; where it leaves 0 out, the mark is a hollow triangle."
	t := &table{Caption: "Shift at each current", Heads: []head{{"current", false}, {richf("shift (%s)", p.scale.Unit(p.unit)), true}, {"band", true}, {"reference, n", true}, {"this lot, n", true}}}
	for _, x := range b.Points {
		u := (x.High - x.Low) / 4
		num := func(v float64) string {
			return plus(p.scale.FormatNumber(v, u, 0))
		}
		t.Rows = append(t.Rows, []cell{{Text: rich(report.FormatGiven(x.I, "A")), Head: true}, number(num(x.Shift)), number(num(x.Low) + " to " + num(x.High)), number(strconv.Itoa(x.Reference)), number(strconv.Itoa(x.Candidate))})
	}
	d.Shift = &figure{Label: "shift against current", Marks: true, SVG: template.HTML(pic), Caption: rich(note), Data: t}
}

func (k *known) trendFigure(t *compare.Trend) *figure {
	b, drawn := svg.AppendTrend(nil, t, svg.TrendOptions{
		Frame:    svg.Frame{ID: "run-of-lots", Title: "Lots in the order of time by " + k.KeyPhrase(t.By), Desc: fmt.Sprintf("Centres of %s with standard errors and control limits. The numbers stand in the table below.", plural(len(t.Lots), "lot"))},
		Quantity: k.KeyPhrase(t.By), This: k.Sheet.Lot.Name,
	})
	unit := report.KeyOf(t.By).Unit
	note := "Marks are the trimmed means of the lots, their bars one standard error to either side."
	if isNumber(t.Low) && isNumber(t.High) {
		note += " The dashed lines are control limits by the moving range of the centres; a lot outside them is a hollow triangle with its name."
	} else {
		note += " With fewer than three lots there are no control limits."
	}
	if t.Provisional {
		note += " With fewer than 20 lots the limits are provisional."
	}
	if drawn.Empty > 0 {
		note += fmt.Sprintf(" %s too few values for a centre.", has(drawn.Empty, "lot"))
	}
	data := &table{Caption: "The run of lots", Heads: []head{{"lot", false}, {"first reading", false}, {"date code", false}, {"n", true}, {richf("centre (%s)", unit), true}, {"standard error", true}, {"sd", true}, {"control limits", false}}}
	for _, l := range t.Lots {
		where := "inside"
		switch {
		case l.Outside:
			where = "outside"
		case !isNumber(t.Low), !isNumber(l.Centre):
			where = "–"
		}
		data.Rows = append(data.Rows, []cell{nameCell(l.Name), optional(l.At), optional(l.DateCode), number(strconv.Itoa(l.N)),
			number(report.Scale{}.FormatNumber(l.Centre, l.U, 0)), number(report.FormatTwoDigits(l.U, unit)), number(report.FormatTwoDigits(l.SD, unit)), text(where)})
	}
	return &figure{Label: "run of lots", Marks: true, SVG: template.HTML(b), Caption: rich(note), Data: data}
}
