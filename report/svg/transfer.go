package svg

import (
	"io"
	"math"
	"strconv"

	"gatesill/report"
)

// Curve is one sweep to draw. X and Y have the same length; entries that are not
// finite are gaps.
type Curve struct {
	Name string
	X    []float64 // V, gate voltage with its sign
	Y    []float64 // A, drain current with its sign
	Flag string    // why it is flagged, in a few words; "" when it is not
	Out  []int     // ascending: points that the fit left out; shown as crosses, not joined
	Ref  int       // above 0: written as data-d, by which a page finds what belongs together
}

// Level is a current to mark across the picture.
type Level struct {
	Current float64 // A, magnitude
	Label   string
}

// TransferOptions lay out a plot of transfer curves.
type TransferOptions struct {
	Frame
	Axis     Axis
	PChannel bool // draw -I_D, so that the curves of a p-channel part rise as well
	Levels   []Level
}

// Transfer draws transfer curves over each other: gate voltage to the right,
// drain current upwards. Flagged curves are dashed, in the second colour, and
// carry their names; every curve names its device when pointed at. The scale is
// that of the curves that are not flagged, widened for flagged ones up to twice
// as far.
func Transfer(w io.Writer, curves []Curve, o TransferOptions) (Drawn, error) {
	b, drawn := AppendTransfer(nil, curves, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendTransfer appends the plot that [Transfer] writes.
func AppendTransfer(dst []byte, curves []Curve, o TransferOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 500
	}
	if dst == nil {
		dst = make([]byte, 0, 4096+len(curves)*200)
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 84, 14, o.Width-16, o.Height-46
	t := &transfer{canvas: c, o: o, curves: curves}
	t.sign = 1
	if o.PChannel {
		t.sign = -1
	}
	t.ranges()
	flagged := 0
	for i := range curves {
		if curves[i].Flag != "" {
			flagged++
		}
	}
	role := "img"
	if o.Focus > 0 && flagged > 0 {
		role = "group"
	}
	c.open(role)
	t.axes()
	t.levels()
	if len(curves) > 0 {
		t.lines(flagged)
		t.crosses()
		t.names()
	}
	if t.drawn.Shown == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No curves to draw.")
	}
	c.close()
	return c.b, t.drawn
}

type transfer struct {
	*canvas
	o      TransferOptions
	curves []Curve
	sign   float64
	x, y   scale
	unit   report.Scale // of the current axis
	drawn  Drawn
	points []place // of the curve at hand
	keep   []bool
	stack  [][2]int
	ends   []end // of flagged curves, for their names

	levelsRight bool // words of the levels stand at the right
}

// place is a point of a curve in fine units; brk: the curve does not come from
// the point before.
type place struct {
	x, y int
	brk  bool
}

type end struct {
	curve  int
	places []place
	cut    bool // leaves the picture
}

// extent is the range of the drawable points of one curve.
func (t *transfer) extent(cv *Curve) (x0, x1, y0, y1, positive float64) {
	x0, y0, positive = math.Inf(1), math.Inf(1), math.Inf(1)
	x1, y1 = math.Inf(-1), math.Inf(-1)
	out := cv.Out
	for i := range min(len(cv.X), len(cv.Y)) {
		if len(out) > 0 && out[0] <= i {
			skip := out[0] == i
			for len(out) > 0 && out[0] <= i {
				out = out[1:]
			}
			if skip {
				continue
			}
		}
		x, y := cv.X[i], t.sign*cv.Y[i]
		if !drawable(x) || !drawable(y) {
			continue
		}
		x0, x1, y0, y1 = min(x0, x), max(x1, x), min(y0, y), max(y1, y)
		if y > tiny {
			positive = min(positive, y)
		}
	}
	return x0, x1, y0, y1, positive
}

// ranges decides both axes.
func (t *transfer) ranges() {
	inf := math.Inf(1)
	type span struct{ lo, hi, pos float64 }
	x, plain, flagged := span{inf, -inf, inf}, span{inf, -inf, inf}, span{inf, -inf, inf}
	for i := range t.curves {
		x0, x1, y0, y1, pos := t.extent(&t.curves[i])
		x.lo, x.hi = min(x.lo, x0), max(x.hi, x1)
		s := &plain
		if t.curves[i].Flag != "" {
			s = &flagged
		}
		s.lo, s.hi, s.pos = min(s.lo, y0), max(s.hi, y1), min(s.pos, pos)
	}
	lo, hi, pos := plain.lo, plain.hi, plain.pos
	if !(hi > 0) { // nothing but flagged curves, or none that conducts
		lo, hi, pos = min(lo, flagged.lo), max(hi, flagged.hi), min(pos, flagged.pos)
	} else {
		hi = max(hi, min(flagged.hi, 2*hi))
		// Below zero the square-root axis spreads what is least of interest.
		room := 0.25
		if t.o.Axis == SquareRoot {
			room = 0.01
		}
		lo = min(lo, max(flagged.lo, -room*hi))
		pos = min(pos, flagged.pos)
	}
	if t.o.Axis != Logarithmic {
		x.lo, x.hi = t.conducting(x.lo, x.hi, hi)
	}
	xlo, xhi := widen(x.lo, x.hi)
	pad := (xhi - xlo) * 0.015
	t.x = newScale(Linear, xlo-pad, xhi+pad, t.l, t.r)
	switch t.o.Axis {
	case Logarithmic:
		if !(hi > tiny) || !(pos <= hi) {
			pos, hi = 1e-6, 1
		}
		// Nine decades hold every bench; below lies the noise of the meter's zero.
		lo = max(pos, hi*1e-9)
		lo, hi = widenLog(lo, hi)
	default:
		lo, hi = widen(min(lo, 0), max(hi, 0))
		// Noise about zero earns no room below the axis.
		if lo < 0 && lo > -0.01*hi {
			lo = 0
		}
		if t.o.Axis == Linear {
			step := niceStep((hi - lo) / 10)
			hi = math.Ceil(hi/step-1e-6) * step
			if lo < 0 {
				lo = math.Floor(lo/step+1e-6) * step
			}
		} else {
			hi = max(hi*1.03, -lo*0.1)
		}
	}
	t.y = newScale(t.o.Axis, lo, hi, t.d, t.t)
	t.unit = report.ScaleOf("A", max(math.Abs(hi), math.Abs(lo)))
}

// conducting narrows the range of gate voltages to where current flows, with a
// third of it beside, on a side where no current flows over a longer range than
// that: a reading at the off voltage, far below, would take most of the picture
// and show nothing on these axes. The logarithmic axis keeps it.
func (t *transfer) conducting(lo, hi, top float64) (float64, float64) {
	const some = 0.003 // of the greatest current: less than two pixels
	a, b := math.Inf(1), math.Inf(-1)
	for i := range t.curves {
		cv := &t.curves[i]
		for j := range min(len(cv.X), len(cv.Y)) {
			if y := t.sign * cv.Y[j]; drawable(cv.X[j]) && y > some*top && drawable(y) {
				a, b = min(a, cv.X[j]), max(b, cv.X[j])
			}
		}
	}
	if span := b - a; span > 0 {
		if a-lo > span {
			lo = a - span/3
		}
		if hi-b > span {
			hi = b + span/3
		}
	}
	return lo, hi
}

// widenLog takes a range outwards to 1, 2 or 5 times a power of ten.
func widenLog(lo, hi float64) (float64, float64) {
	hi = niceStep(hi)
	p := math.Pow(10, math.Floor(math.Log10(lo)))
	for _, m := range []float64{5, 2, 1} {
		if m*p <= lo*(1+1e-9) {
			lo = m * p
			break
		}
	}
	if hi/lo < 10 {
		lo = hi / 10
	}
	return lo, hi
}

func (t *transfer) axes() {
	xs, ys := t.x.ticks(90, report.ScaleOf("V", max(math.Abs(t.x.lo), math.Abs(t.x.hi)))), t.y.ticks(44, t.unit)
	xu := report.ScaleOf("V", max(math.Abs(t.x.lo), math.Abs(t.x.hi)))
	t.grid(&t.x, &t.y, xs, ys)
	name := "drain current I_D"
	if t.sign < 0 {
		name = "drain current \u2212I_D"
	}
	unit := t.unit.Unit("A")
	if t.o.Axis == Logarithmic {
		unit = "A"
	}
	t.axisNames("gate voltage V_GS ("+xu.Unit("V")+")", name+" ("+unit+", "+t.o.Axis.String()+")")
}

// levels marks currents across the picture, their words at one side.
func (t *transfer) levels() {
	for _, l := range t.o.Levels {
		y := t.y.at(l.Current)
		if !(y >= t.t-0.5 && y <= t.d+0.5) || !drawable(l.Current) {
			continue
		}
		t.raw(`<path class="ref" d="M`)
		t.num(t.l)
		t.raw(" ")
		t.num(y)
		t.raw("H")
		t.num(t.r)
		t.raw(`"/>`)
		if y > t.d-14 { // no room between the line and the axis
			y = t.d - 1
		}
		w := 8 + textWidth(l.Label, 12)
		if t.levelsRight {
			t.text("reft halo", t.r-8, y-4, "end", l.Label)
			t.taken = append(t.taken, box{t.r - w, y - 16, t.r, y})
			continue
		}
		t.text("reft halo", t.l+8, y-4, "", l.Label)
		t.taken = append(t.taken, box{t.l, y - 16, t.l + w, y})
	}
}

// strokes gives width (px) and opacity for n curves over each other.
func strokes(n int) (width, opacity float64) {
	switch {
	case n <= 12:
		return 1.8, 0.9
	case n <= 60:
		return 1.4, 0.6
	case n <= 250:
		return 1.1, 0.42
	case n <= 600:
		return 0.9, 0.25
	}
	return 0.8, 0.15
}

// dashes tells flagged curves apart from the others and, a little, from each
// other: dash lengths in px, drawn in fine units.
var dashes = []string{"35 20", "10 15", "60 20 10 20"}

func (t *transfer) lines(flagged int) {
	width, opacity := strokes(len(t.curves))
	clip := safeID(t.f.ID) + "-c"
	t.raw(`<clipPath id="`, clip, `"><path d="M`)
	t.num(t.l)
	t.raw(" ")
	t.num(t.t - 6)
	t.raw("H")
	t.num(t.r)
	t.raw("V")
	t.num(t.d + 4)
	t.raw("H")
	t.num(t.l)
	t.raw(`z"/></clipPath><g clip-path="url(#`, clip, `)"><g class="lines" transform="scale(`, strconv.FormatFloat(1.0/fine, 'g', -1, 64), `)">`)
	t.raw(`<g stroke-width="`, strconv.FormatFloat(width*fine, 'g', 4, 64), `" stroke-opacity="`, strconv.FormatFloat(opacity, 'g', 3, 64), `">`)
	for i := range t.curves {
		if cv := &t.curves[i]; cv.Flag == "" && t.path(cv) {
			t.raw(`<path`)
			t.ref(cv.Ref)
			t.raw(` d="`)
			t.b = appendPath(t.b, t.points, t.keep)
			t.raw(`"><title>`)
			t.words(cv.Name)
			t.raw(`</title></path>`)
			t.drawn.Shown++
		} else if cv.Flag == "" {
			t.drawn.Empty++
		}
	}
	t.raw("</g>")
	if flagged > 0 {
		t.flaggedLines(width)
	}
	t.raw("</g></g>")
}

func (t *transfer) flaggedLines(width float64) {
	t.raw(`<g stroke-width="`, strconv.FormatFloat(max(1.5, width)*fine, 'g', 4, 64), `">`)
	k := 0
	for i := range t.curves {
		cv := &t.curves[i]
		if cv.Flag == "" {
			continue
		}
		if !t.path(cv) {
			t.drawn.Empty++
			continue
		}
		t.raw(`<path class="flag" stroke-dasharray="`, dashes[k%len(dashes)], `"`)
		t.ref(cv.Ref)
		if k < t.f.Focus {
			t.raw(` tabindex="0" role="img" aria-label="`)
			t.words(cv.Name + ", flagged: " + cv.Flag)
			t.raw(`"`)
		}
		t.raw(` d="`)
		t.b = appendPath(t.b, t.points, t.keep)
		t.raw(`"><title>`)
		t.words(cv.Name + " (flagged: " + cv.Flag + ")")
		t.raw(`</title></path>`)
		t.drawn.Shown++
		k++
		e := end{curve: i, places: append([]place(nil), t.points...)}
		for _, p := range t.points {
			if py := float64(p.y) / fine; py < t.t-8 || py > t.d+8 {
				e.cut = true
			}
		}
		if e.cut {
			t.drawn.Beyond++
		}
		t.ends = append(t.ends, e)
	}
	t.raw("</g>")
}

// maxCrosses bounds the crosses drawn; the rest stand in lists.
const maxCrosses = 400

// crosses shows the points that were left out, where they lie in the picture.
func (t *transfer) crosses() {
	n := 0
	for i := range t.curves {
		cv := &t.curves[i]
		for _, k := range cv.Out {
			if k < 0 || k >= min(len(cv.X), len(cv.Y)) || n >= maxCrosses {
				continue
			}
			x, y := t.x.at(cv.X[k]), t.y.at(t.sign*cv.Y[k])
			if !(x >= t.l && x <= t.r && y >= t.t && y <= t.d) {
				continue
			}
			if n == 0 {
				t.raw(`<g class="out">`)
			}
			n++
			t.raw(`<path d="M`)
			t.num(x - 3)
			t.raw(" ")
			t.num(y - 3)
			t.raw(`l6 6m0-6l-6 6"><title>`)
			t.words(cv.Name + ": point " + strconv.Itoa(k+1) + ", left out of the fit")
			t.raw(`</title></path>`)
		}
	}
	if n > 0 {
		t.raw("</g>")
	}
}

// names writes the names of the flagged curves beside them, where they do not
// cover each other.
func (t *transfer) names() {
	for _, e := range t.ends {
		cv := &t.curves[e.curve]
		name := shorten(cv.Name, 18)
		p, ok := t.place(name, t.besides(e))
		if !ok {
			t.drawn.Unlabeled++
			continue
		}
		t.drawn.Labels++
		t.name(p, name)
	}
}

// besides lists places for a name along a curve, its end first.
func (t *transfer) besides(e end) []label {
	var list []label
	n := len(e.places)
	for _, share := range []float64{1, 0.95, 0.9, 0.84, 0.78, 0.7, 0.6, 0.5, 0.4, 0.3, 0.2, 0.1, 0} {
		p := e.places[int(share*float64(n-1)+0.5)]
		x, y := float64(p.x)/fine, float64(p.y)/fine
		if y < t.t-2 || y > t.d+2 || x < t.l-2 || x > t.r+2 {
			continue
		}
		list = append(list, label{x + 7, y + 12, false}, label{x - 7, y - 3, true}, label{x + 6, y - 5, false}, label{x - 7, y + 12, true})
	}
	return list
}
