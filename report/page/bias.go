package page

import (
	"fmt"
	"html/template"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit/bias"
	"gatesill/report"
	"gatesill/report/svg"
	"gatesill/store/record"
)

// biasView is the page of the gate bias of a lot.
type biasView struct {
	sheet
	Coverage *figure
	Draws    *figure
	NoDraws  template.HTML
	Drawing  string // the circuit in lines of text; "" none
	Says     []group
	Ways     []template.HTML
	Against  []template.HTML
	Choices  *table
	Bins     *table
	Lines    []lineView
	Units    []*table // the bias sheet, in pieces that stand side by side
	UnitsTo  template.HTML
	Assumed  []template.HTML
	Apart    bool // the bias sheet begins a printed page of its own
}

// lineView is devices on one gate line.
type lineView struct {
	Head   template.HTML
	Says   []group
	Figure *figure
	Table  *table
}

// unitsInPlace is up to how many devices the bias sheet stands on the printed page
// of the rest, and columnUnits how many stand in one piece of it.
const (
	unitsInPlace = 40
	columnUnits  = 50
)

// biased is a plan with what several parts of its page look up.
type biased struct {
	*report.Bias
	p        *bias.Plan
	pchannel bool
	quantity string
}

// WriteBias writes the gate bias of a lot as one HTML page. What was computed for
// the terminal is shown; nothing is computed anew.
func WriteBias(w io.Writer, r report.Bias) error {
	if r.Sheet == nil || r.Plan == nil {
		return fmt.Errorf("page of the gate bias: no lot")
	}
	b := &biased{&r, r.Plan, r.Sheet.Part.Channel == record.PChannel, "gate bias at " + report.FormatGiven(r.Plan.Idle, "A")}
	title := "Lot " + report.Clean(r.Sheet.Lot.Name)
	v := &biasView{sheet: newSheet("Gate bias at "+report.FormatGiven(b.p.Idle, "A"), title, []*report.Sheet{r.Sheet})}
	b.tiles(v)
	b.coverage(v)
	b.draws(v)
	b.says(v)
	b.tables(v)
	b.lines(v)
	b.units(v)
	v.Notes = notes(r.Sheet, r.Warnings)
	return writeSheet(w, "bias", &v.sheet, v, title+"  ·  gate bias")
}

// gate writes a gate voltage to the millivolt.
func gate(v float64) string {
	if !isNumber(v) {
		return report.NotAvailable
	}
	return strconv.FormatFloat(v, 'f', 3, 64) + " V"
}

func (b *biased) tiles(v *biasView) {
	p := b.p
	v.Lead = append(v.Lead, richf("%s of lot %s have a gate voltage at %s; their %s is %s.", plural(p.N, "device"), report.Clean(p.Lot), report.FormatGiven(p.Idle, "A"), p.By, gate(p.Centre)))
	sd := template.HTML("spread not known")
	if isNumber(p.SD) {
		sd = richf("sd %s, n = %d", report.FormatTwoDigits(p.SD, "V"), p.N)
	}
	v.Tiles = append(v.Tiles, tile{"centre of the lot", gate(p.Centre), sd})
	n := p.Now
	switch {
	case n == nil:
		v.Tiles = append(v.Tiles, tile{"network", "none given", "nothing is said of coverage"})
	case n.CoveredBy == "":
		v.Tiles = append(v.Tiles, tile{"covers", "not said", "how far the current may be off was not given"})
	default:
		c, by := n.Covered, n.CoveredBy
		if n.Trimmed && !n.Given && n.Always.Of > 0 {
			c, by = n.Always, fmt.Sprintf("on every board; %d where all is nominal", n.Covered.Count)
		}
		v.Tiles = append(v.Tiles, tile{"covers", fmt.Sprintf("%d of %d", c.Count, c.Of), rich(by)})
		if isNumber(c.Upper) {
			v.Tiles = append(v.Tiles, tile{"outside, of such parts", "up to " + report.Chance(c.Upper), "95 % confidence"})
		}
	}
	if n != nil && n.Idle.Known > 0 {
		v.Tiles = append(v.Tiles, tile{"if left unadjusted", bias.DrawnWords(n.Idle.Median), richf("%s to %s at %s", bias.DrawnWords(n.Idle.Least), bias.DrawnWords(n.Idle.Most), gate(n.Middle))})
	}
}

func span(r bias.Range) svg.Span {
	if !(r.Low <= r.High) {
		return noSpan
	}
	return svg.Span{Low: r.Low, High: r.High}
}

var noSpan = svg.Span{Low: math.NaN(), High: math.NaN()}

func (b *biased) coverage(v *biasView) {
	p := b.p
	o := svg.CoverageOptions{
		Frame:    svg.Frame{ID: "bias-coverage", Title: "Gate bias of every device and what the network covers"},
		Quantity: b.quantity, Unit: "V", Reach: noSpan, Sure: noSpan, Band: noSpan, Centre: p.Centre, CentreIs: p.By, Negative: b.pchannel,
	}
	if p.Band.Declined == "" && isNumber(p.Band.Low) && isNumber(p.Band.High) {
		o.Band, o.BandIs = svg.Span{Low: p.Band.Low, High: p.Band.High}, report.BandWords(p)
	}
	note := "One mark a device."
	if n := p.Now; n != nil {
		switch {
		case n.Trimmed:
			o.Reach, o.ReachIs = span(n.Reach), "the trimmer reaches"
			note += " Shaded: what the trimmer reaches"
			if !n.Given {
				o.Sure = span(n.Sure)
				note += ", more strongly what it reaches on every board"
			}
			note += "."
		default:
			o.Reach, o.ReachIs = span(n.Tolerated), "the network gives"
			note += " Shaded: the gate voltage of the network with supply and resistors anywhere in their tolerances."
		}
	}
	var spots []svg.Spot
	outside := 0
	for i := range p.Units {
		u := &p.Units[i]
		switch {
		case u.Above && u.Counts:
			o.Above = append(o.Above, u.Name)
		case u.Gate.Ok() && u.Counts:
			s := svg.Spot{Name: u.Name, X: u.Gate.Value, Ref: i + 1}
			if n := p.Now; n != nil && n.CoveredBy != "" && !u.Covered {
				s.Flag = "outside"
				outside++
			}
			spots = append(spots, s)
		}
	}
	o.Desc = fmt.Sprintf("%s along the axis of the gate bias, %d of them outside what the network covers. The numbers stand in the bias sheet.", plural(len(spots), "device"), outside)
	pic, drawn := svg.AppendCoverage(nil, spots, o)
	if outside > 0 {
		note += " A hollow triangle: outside"
		if drawn.Unlabeled > 0 {
			note += fmt.Sprintf(", %d of them without room for a name", drawn.Unlabeled)
		}
		note += "."
	}
	if o.BandIs != "" {
		note += " The bar above is the tolerance interval of the lot."
	} else if p.Band.Declined != "" {
		note += " No tolerance interval: " + report.Sentence(p.Band.Declined)
	}
	v.Coverage = &figure{Label: "coverage", SVG: template.HTML(pic), Caption: rich(note), Data: b.counts(o.Reach)}
}

// counts is the picture in numbers: how many devices lie where.
func (b *biased) counts(reach svg.Span) *table {
	t := &table{Caption: "Devices by gate bias", Heads: []head{{"from", true}, {"to", true}, {"devices", true}, {"inside", true}}}
	var x []float64
	for i := range b.p.Units {
		if u := &b.p.Units[i]; u.Counts && u.Gate.Ok() {
			x = append(x, u.Gate.Value)
		}
	}
	if len(x) == 0 {
		return nil
	}
	slices.Sort(x)
	lo, hi := x[0], x[len(x)-1]
	const classes = 10
	for k := range classes {
		from, to := lo+(hi-lo)*float64(k)/classes, lo+(hi-lo)*float64(k+1)/classes
		n, in := 0, 0
		for _, g := range x {
			if g >= from && (g < to || k == classes-1) {
				n++
				if g >= reach.Low && g <= reach.High {
					in++
				}
			}
		}
		inside := report.NotAvailable
		if isNumber(reach.Low) {
			inside = strconv.Itoa(in)
		}
		t.Rows = append(t.Rows, []cell{number(gate(from)), number(gate(to)), number(strconv.Itoa(n)), number(inside)})
		if hi == lo {
			break
		}
	}
	return t
}

func (b *biased) draws(v *biasView) {
	p, n := b.p, b.p.Now
	if n == nil {
		v.NoDraws = "What the devices draw unadjusted is told where a network is given."
		return
	}
	if n.Idle.Known == 0 {
		v.NoDraws = "What the devices draw unadjusted is not known: neither curve nor gain of any device is."
		return
	}
	o := svg.DrawsOptions{
		Frame: svg.Frame{ID: "bias-draws", Title: "Drain current of each device if left unadjusted", Desc: fmt.Sprintf("Drain current of %s at %s. The numbers stand in the bias sheet.", plural(n.Idle.Known, "device"), gate(n.Middle))},
		Gate:  n.Middle, Wanted: p.Idle, Allowed: noSpan,
	}
	if p.IdleTol > 0 {
		o.Allowed = svg.Span{Low: p.Idle * (1 - p.IdleTol), High: p.Idle * (1 + p.IdleTol)}
	}
	var list []svg.Draw
	arrows := false
	for i := range p.Units {
		u := &p.Units[i]
		if !u.Gate.Ok() || !u.Counts {
			continue
		}
		arrows = arrows || u.At.Beyond != 0 && isNumber(u.At.I)
		list = append(list, svg.Draw{Name: u.Name, X: u.Gate.Value, Y: u.At.I, Beyond: u.At.Beyond, Out: n.CoveredBy != "" && !u.Covered, Ref: i + 1})
	}
	pic, drawn := svg.AppendDraws(nil, list, o)
	where := "the gate at " + gate(n.Middle)
	if n.Trimmed {
		where = "the trimmer left in its middle, " + gate(n.Middle)
	}
	note := "What each device would draw with " + where + "."
	if arrows {
		note += " Arrowheads: more, or less, than its curve tells."
	}
	if drawn.Empty > 0 {
		note += fmt.Sprintf(" Of %s nothing tells.", plural(drawn.Empty, "device"))
	}
	if p.IdleTol > 0 {
		note += " Shaded: how far the current may be off."
	}
	v.Draws = &figure{Label: "currents unadjusted", SVG: template.HTML(pic), Caption: rich(note)}
}

func (b *biased) says(v *biasView) {
	for _, f := range b.Facts() {
		if f.Label == "centre" {
			continue // stands in the summary
		}
		v.Says = append(v.Says, group{rich(f.Label), rich(report.Sentence(f.Value))})
	}
	if b.p.Network != nil {
		v.Drawing = strings.Join(b.p.Network.Drawing(), "\n")
	}
	for _, t := range b.p.Ways() {
		v.Ways = append(v.Ways, rich(t))
	}
	if b.Change != nil {
		for _, t := range b.Change.Text {
			v.Against = append(v.Against, rich(t))
		}
	}
	for _, t := range b.TakenForGranted() {
		v.Assumed = append(v.Assumed, rich(report.Sentence(t)))
	}
}

func (b *biased) tables(v *biasView) {
	p := b.p
	if len(p.Choices) > 0 {
		t := &table{Caption: "Resistors that bring the gate to the centre", Heads: []head{{"series", false}, {"change", false}, {"top", true}, {"bottom", true}, {"gate (V)", true}, {"off centre (mV)", true}, {"idle from", true}, {"to", true}}}
		for i := range p.Choices {
			c := &p.Choices[i]
			t.Rows = append(t.Rows, []cell{{Text: rich(string(c.Series)), Head: true}, text(c.Change), number(report.FormatGiven(c.Network.Top, "Ω")), number(report.FormatGiven(c.Network.Bottom, "Ω")),
				number(strconv.FormatFloat(c.Gate, 'f', 3, 64)), number(fmt.Sprintf("%+.1f", 1e3*c.Off)), number(report.DrawnWords(c.Idle.Least)), number(report.DrawnWords(c.Idle.Most))})
		}
		v.Choices = t
	}
	if len(p.Bins) > 0 {
		what := p.Bins[0].Change
		t := &table{Caption: "One resistor a bin", Heads: []head{{"bin", false}, {"from (V)", true}, {"below (V)", true}, {"devices", true}, {rich(what), true}, {"gate (V)", true}, {"idle from", true}, {"to", true}}}
		for i := range p.Bins {
			c := &p.Bins[i]
			r := c.Network.Top
			if what == bias.ChangeBottom {
				r = c.Network.Bottom
			}
			f := func(x float64) cell { return number(strconv.FormatFloat(x, 'f', 3, 64)) }
			t.Rows = append(t.Rows, []cell{nameCell(c.Bin), f(c.Low), f(c.High), number(strconv.Itoa(len(c.Devices))), number(report.FormatGiven(r, "Ω")), f(c.Gate), number(report.DrawnWords(c.Idle.Least)), number(report.DrawnWords(c.Idle.Most))})
		}
		v.Bins = t
	}
}

// units is the bias sheet: one row a device, in pieces that stand side by side.
func (b *biased) units(v *biasView) {
	p, n := b.p, b.p.Now
	all := len(p.Units)
	v.Apart = all > unitsInPlace || len(b.Lines) > 0 || len(p.Choices) > 0
	note := b.UnitNotes()
	noted := false
	for i := range p.Units {
		noted = noted || note(&p.Units[i]) != ""
	}
	heads := []head{{"device", false}, {"gate bias (V)", true}}
	if n != nil && n.Trimmed {
		heads = append(heads, head{"trimmer", true})
	}
	drawn := n != nil && n.Idle.Known > 0
	if drawn {
		heads = append(heads, head{richf("idle at %s", gate(n.Middle)), true})
	}
	if noted {
		heads = append(heads, head{"note", false})
	}
	piece := columnUnits
	if all <= 2*columnUnits {
		piece = max(1, (all+1)/2)
	}
	for from := 0; from < all; from += piece {
		to := min(all, from+piece)
		t := &table{Caption: plain(p.Units[from].Name + " to " + p.Units[to-1].Name), Heads: heads}
		if piece >= all {
			t.Caption = "Every device"
		}
		for i := from; i < to; i++ {
			u := &p.Units[i]
			value := report.NotAvailable
			if u.Gate.Ok() {
				value = strings.TrimSuffix(report.FormatPlain(u.Gate.Value, u.Gate.U, "V"), " V")
			}
			row := []cell{{Text: template.HTML("<bdi>" + string(plain(u.Name)) + "</bdi>"), Head: true}, number(value)}
			if n != nil && n.Trimmed {
				row = append(row, number(report.SettingWords(u.Setting, p.Turns)))
			}
			if drawn {
				at := report.NotAvailable
				if u.Gate.Ok() {
					at = report.DrawnWords(u.At)
				}
				row = append(row, number(at))
			}
			if noted {
				row = append(row, text(note(u)))
			}
			t.Rows = append(t.Rows, row)
		}
		v.Units = append(v.Units, t)
	}
	v.UnitsTo = "Gate bias as measured, at the idle current."
	if n != nil && n.Trimmed {
		v.UnitsTo += " trimmer: where the device draws the idle current; n/a: not within its reach."
	}
	if drawn {
		v.UnitsTo += richf(" idle: what it draws with the gate at %s.", gate(n.Middle))
	}
}
