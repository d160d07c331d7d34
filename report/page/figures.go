package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/svg"
	"gatesill/store/record"
)

type figure struct {
	Label   string // what it shows, in a few words
	Marks   bool   // its marks are no devices
	SVG     template.HTML
	Caption template.HTML
	Data    *table
}

type picture struct {
	ID      string // of its switch
	Label   string
	SVG     template.HTML
	Note    template.HTML
	Checked bool
}

type curvesFigure struct {
	Switch   string // name of the switch between its pictures
	Of       string // whose curves; "" of the lot of the page
	Choice   string // what the switch chooses; "": the current axis
	Pictures []picture
	Caption  template.HTML
	Data     *table
}

// maxCurves bounds the curves in one picture: a picture with more of them shows
// no more and makes the page heavy. Which are drawn is said below it.
const maxCurves = 1000

// maxDataRows bounds the table of points behind the picture; beyond it the table
// has one row a sweep.
const maxDataRows = 600

// drawnSweep is a sweep that has a curve, with its device.
type drawnSweep struct {
	device int
	sweep  int
	curve  svg.Curve
}

// currents gives the drain current of every point with its sign: as read, or
// where no ammeter was read, from the voltage across R_L.
func currents(sw *report.Sweep) []float64 {
	c := &sw.Curve
	if c.Id != nil {
		return c.Id
	}
	rl, ok := sw.Condition.RL.Get()
	if !ok || rl <= 0 {
		return nil
	}
	id := make([]float64, len(c.Vg))
	vdd := sw.Condition.VDD.Float()
	for i := range id {
		switch {
		case c.Vl != nil:
			id[i] = c.Vl[i] / rl
		case c.Vd != nil && c.Vdd != nil:
			id[i] = (c.Vdd[i] - c.Vd[i]) / rl
		case c.Vd != nil:
			id[i] = (vdd - c.Vd[i]) / rl
		default:
			return nil
		}
	}
	return id
}

// sweeps gathers what can be drawn: every sweep of two points or more of every
// device that is not excluded.
func (k *known) sweeps() (list []drawnSweep, spots int) {
	for i := range k.Devices {
		d := &k.Devices[i]
		if d.State() == fit.Excluded {
			continue
		}
		drawn := 0
		for j := range d.Sweeps {
			sw := &d.Sweeps[j]
			id := currents(sw)
			if sw.Excluded || len(id) == 0 {
				continue
			}
			if len(id) < 2 || sw.Direction == record.Spot {
				spots++
				continue
			}
			drawn++
			vg := sw.Curve.Vg
			if sw.Curve.Returned { // a line from the end back to it would look like a curve
				vg, id = vg[:len(vg)-1], id[:len(id)-1]
			}
			cv := svg.Curve{Name: d.Name, X: vg, Y: id, Flag: k.flag(d.Name), Ref: i + 1}
			for _, l := range sw.Result.LeftOut {
				if l.Index >= len(id) {
					continue
				}
				cv.Out = append(cv.Out, l.Index)
			}
			slices.Sort(cv.Out)
			if drawn > 1 {
				cv.Name += fmt.Sprintf(" (sweep %d, %s)", drawn, sw.Direction)
			}
			list = append(list, drawnSweep{i, j, cv})
		}
	}
	return list, spots
}

// thinned takes at most limit sweeps: every flagged one, and of the others an
// even choice along the quantity sorted by, lowest and highest included.
func (k *known) thinned(list []drawnSweep, limit int) []drawnSweep {
	if len(list) <= limit {
		return list
	}
	var flagged, rest []drawnSweep
	for _, s := range list {
		if s.curve.Flag != "" {
			flagged = append(flagged, s)
		} else {
			rest = append(rest, s)
		}
	}
	value := func(s drawnSweep) float64 {
		if q := k.Devices[s.device].Result.At(k.by); q != nil && q.Ok() {
			return q.Value
		}
		return math.Inf(1)
	}
	slices.SortStableFunc(rest, func(a, b drawnSweep) int {
		switch x, y := value(a), value(b); {
		case x < y:
			return -1
		case x > y:
			return 1
		}
		return 0
	})
	room := max(limit-len(flagged), min(limit/10, len(rest)))
	var chosen []drawnSweep
	for i := range room {
		chosen = append(chosen, rest[i*(len(rest)-1)/max(1, room-1)])
	}
	// Back in the order of the lot.
	chosen = append(chosen, flagged...)
	slices.SortStableFunc(chosen, func(a, b drawnSweep) int {
		if a.device != b.device {
			return a.device - b.device
		}
		return a.sweep - b.sweep
	})
	return slices.CompactFunc(chosen, func(a, b drawnSweep) bool { return a.device == b.device && a.sweep == b.sweep })
}

func (v *view) figures(k *known) {
	all, spots := k.sweeps()
	if len(all) == 0 {
		v.NoCurves = "No curves: no device has a sweep of two points or more."
		if spots > 0 {
			v.NoCurves = "No curves: the devices were read at single currents only."
		}
	} else {
		v.curves(k, all)
	}
	v.strip(k)
}

func (v *view) curves(k *known, all []drawnSweep) {
	chosen := k.thinned(all, maxCurves)
	curves := make([]svg.Curve, len(chosen))
	flagged := 0
	for i, s := range chosen {
		curves[i] = s.curve
		if s.curve.Flag != "" {
			flagged++
		}
	}
	levels := k.marked()
	f := &curvesFigure{Switch: "axis"}
	desc := fmt.Sprintf("Drain current over gate voltage, %s, %d of them flagged. The numbers stand in the tables below.", plural(len(curves), "curve"), flagged)
	unlabeled := 0
	for _, axis := range []svg.Axis{svg.Linear, svg.SquareRoot, svg.Logarithmic} {
		b, drawn := svg.AppendTransfer(nil, curves, svg.TransferOptions{
			Frame:    svg.Frame{ID: "curves-" + axis.String(), Title: "Transfer curves, " + axis.String() + " current axis", Desc: desc, Focus: 20},
			Axis:     axis,
			PChannel: k.Part.Channel == record.PChannel, Levels: levels,
		})
		unlabeled = max(unlabeled, drawn.Unlabeled)
		f.Pictures = append(f.Pictures, picture{"axis-" + axis.String(), axis.String(), template.HTML(b), rich(axisNote(axis, drawn)), axis == svg.Linear})
	}
	text := plural(len(curves), "curve") + "."
	if len(curves) < len(all) {
		text = fmt.Sprintf("%d of %d curves are drawn: every flagged one, and of the others an even choice from the lowest to the highest %s.", len(curves), len(all), report.KeyOf(k.by).Symbol)
	}
	if flagged > 0 {
		text += " Flagged devices are dashed and carry their names"
		if unlabeled > 0 {
			text += ", where there is room for them"
		}
		text += "."
	}
	text += " Points left out of a fit are small crosses."
	for _, s := range chosen {
		if k.Devices[s.device].Sweeps[s.sweep].Curve.Returned {
			text += " The point taken again after a sweep is not drawn."
			break
		}
	}
	f.Caption = rich(text)
	f.Data = k.curveData(chosen)
	v.Curves = f
}

// axisNote says what a picture cannot show.
func axisNote(axis svg.Axis, drawn svg.Drawn) string {
	text := ""
	if axis == svg.Logarithmic {
		text = "Currents that are not above zero have no place here."
		if drawn.Empty > 0 {
			text += fmt.Sprintf(" %s no other.", has(drawn.Empty, "curve"))
		}
	}
	if drawn.Beyond > 0 {
		text += fmt.Sprintf(" The scale is that of the curves that are not flagged; %s out of the picture in part.", runs(drawn.Beyond))
	}
	return text
}

func runs(n int) string {
	if n == 1 {
		return "1 flagged curve runs"
	}
	return strconv.Itoa(n) + " flagged curves run"
}

func has(n int, noun string) string {
	if n == 1 {
		return "1 " + noun + " has"
	}
	return strconv.Itoa(n) + " " + noun + "s have"
}

// curveData is the picture in numbers: every point of a small lot, of a larger
// one the ends of every curve drawn.
func (k *known) curveData(list []drawnSweep) *table {
	points := 0
	for _, s := range list {
		points += len(s.curve.X)
	}
	vs := report.ScaleOf("V", 1)
	var maxID []float64
	for _, s := range list {
		top := 0.0
		for _, y := range s.curve.Y {
			if isNumber(y) {
				top = math.Max(top, math.Abs(y))
			}
		}
		maxID = append(maxID, top)
	}
	as := report.ScaleOf("A", maxID...)
	num := func(sc report.Scale, x float64) cell {
		if !isNumber(x) {
			return cell{Text: "–", Right: true, None: true}
		}
		return cell{Text: template.HTML(sc.FormatNumber(x, math.NaN(), 0)), Right: true}
	}
	if points <= maxDataRows {
		t := &table{
			Caption: "Every point drawn",
			Heads:   []head{{"device", false}, {rich("V_GS (" + vs.Unit("V") + ")"), true}, {rich("I_D (" + as.Unit("A") + ")"), true}, {"left out", false}},
		}
		for _, s := range list {
			for i := range s.curve.X {
				out := template.HTML("")
				if slices.Contains(s.curve.Out, i) {
					out = "left out"
				}
				t.Rows = append(t.Rows, []cell{{Text: plain(s.curve.Name), Head: true}, num(vs, s.curve.X[i]), num(as, s.curve.Y[i]), {Text: out}})
			}
		}
		return t
	}
	t := &table{
		Caption: "The ends of every curve drawn",
		Heads: []head{{"device", false}, {"points", true}, {rich("first V_GS (" + vs.Unit("V") + ")"), true}, {rich("last V_GS (" + vs.Unit("V") + ")"), true},
			{rich("first I_D (" + as.Unit("A") + ")"), true}, {rich("last I_D (" + as.Unit("A") + ")"), true}},
		Note: "Every single point stands in the CSV and JSON exports of the lot.",
	}
	for _, s := range list {
		n := len(s.curve.X)
		t.Rows = append(t.Rows, []cell{{Text: plain(s.curve.Name), Head: true}, {Text: template.HTML(strconv.Itoa(n)), Right: true},
			num(vs, s.curve.X[0]), num(vs, s.curve.X[n-1]), num(as, s.curve.Y[0]), num(as, s.curve.Y[n-1])})
	}
	return t
}

func (v *view) strip(k *known) {
	info := report.KeyOf(k.by)
	o := svg.StripOptions{
		Frame:    svg.Frame{ID: "strip", Title: "Every device by " + k.KeyPhrase(k.by), Focus: 20},
		Quantity: k.KeyPhrase(k.by), Unit: info.Unit, Median: math.NaN(), Low: math.NaN(), High: math.NaN(),
		Negative: k.Part.Channel == record.PChannel && info.Unit == "V",
	}
	var spots []svg.Spot
	aside := 0
	for i := range k.Devices {
		d := &k.Devices[i]
		switch q := d.Result.At(k.by); {
		case d.State() == fit.Excluded || d.Role == record.Control:
			aside++
		case q != nil && q.Ok():
			spots = append(spots, svg.Spot{Name: d.Name, X: q.Value, Flag: k.flag(d.Name), Ref: i + 1})
		case d.State() == fit.Above:
			o.Above = append(o.Above, d.Name)
		}
	}
	if len(spots) == 0 {
		return
	}
	if m, ok := k.Spread.Summary[k.by]; ok {
		o.Median = m.Median
	}
	if l, ok := k.Spread.Limits[k.by]; ok {
		o.Low, o.High = l.Low, l.High
	}
	if k.Sorting != nil {
		for _, b := range k.Sorting.Bins {
			o.Bins = append(o.Bins, svg.Bin{Name: b.Name, Low: b.Low, High: b.High})
		}
	}
	o.Desc = fmt.Sprintf("%s along the axis of %s. The numbers stand in the table of devices.", plural(len(spots), "device"), o.Quantity)
	b, drawn := svg.AppendStrip(nil, spots, o)
	text := "One mark a device; marks that would cover each other are stacked, which shows how many lie where."
	if len(o.Bins) > 0 {
		text += " Bins are shaded in turn and carry their letters where there is room."
	}
	if len(k.flagged) > 0 {
		text += " Flagged devices are hollow triangles with their names."
	}
	if drawn.Unlabeled > 0 {
		text += fmt.Sprintf(" There was no room for the names of %d of them.", drawn.Unlabeled)
	}
	if isNumber(o.Low) || isNumber(o.High) {
		text += " Outside the dashed limits a device is flagged."
	}
	if aside > 0 {
		text += fmt.Sprintf(" Not shown: %s excluded or kept as control.", plural(aside, "device"))
	}
	v.Strip = &figure{SVG: template.HTML(b), Caption: rich(text)}
}

func isNumber(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
