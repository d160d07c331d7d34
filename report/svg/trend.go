package svg

import (
	"io"
	"math"
	"strconv"

	"gatesill/fit/compare"
	"gatesill/report"
)

// TrendOptions lay out the run of lots.
type TrendOptions struct {
	Frame
	Quantity string // axis title without unit
	This     string // name of the lot that the page is about; "" none
}

// Trend draws the centres of lots in the order of time with their standard
// errors, the mean of the centres and the control limits. Lots outside the
// limits are hollow triangles with their names.
func Trend(w io.Writer, t *compare.Trend, o TrendOptions) (Drawn, error) {
	b, drawn := AppendTrend(nil, t, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendTrend appends the plot that [Trend] writes.
func AppendTrend(dst []byte, t *compare.Trend, o TrendOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 340
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 84, 14, o.Width-100, o.Height-84
	r := &trend{canvas: c, o: o, run: t}
	r.ranges()
	c.open("img")
	r.draw()
	c.close()
	return c.b, r.drawn
}

type trend struct {
	*canvas
	o     TrendOptions
	run   *compare.Trend
	y     scale
	drawn Drawn
}

func (r *trend) ranges() {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, l := range r.run.Lots {
		if !drawable(l.Centre) {
			continue
		}
		u := 0.0
		if drawable(l.U) {
			u = l.U
		}
		lo, hi = min(lo, l.Centre-u), max(hi, l.Centre+u)
	}
	lo, hi = widen(lo, hi)
	span := hi - lo
	for _, v := range []float64{r.run.Low, r.run.High, r.run.Centre} {
		if drawable(v) && v > lo-2*span && v < hi+2*span {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	pad := 0.08 * (hi - lo)
	r.y = newScale(Linear, lo-pad, hi+pad, r.d, r.t)
}

// at is the place of a lot along the run.
func (r *trend) at(i int) float64 {
	return r.l + (r.r-r.l)*(float64(i)+0.5)/float64(max(1, len(r.run.Lots)))
}

func (r *trend) draw() {
	u := report.ScaleOf("V", max(math.Abs(r.y.lo), math.Abs(r.y.hi)))
	x := newScale(Linear, 0, 1, r.l, r.r)
	r.grid(&x, &r.y, nil, r.y.ticks(44, u))
	along := "lots in the order of time"
	if r.run.Untimed {
		along = "lots; the order in time is not known of all"
	}
	r.text("", (r.l+r.r)/2, r.f.Height-6, "middle", along)
	r.raw(`<g transform="translate(15 `)
	r.num((r.t + r.d) / 2)
	r.raw(`) rotate(-90)">`)
	r.text("", 0, 0, "middle", r.o.Quantity+" ("+u.Unit("V")+")")
	r.raw("</g>")
	r.beside(r.run.Centre, "ref", "reft", "mean")
	r.beside(r.run.High, "lim", "limt", "upper limit")
	r.beside(r.run.Low, "lim", "limt", "lower limit")
	r.line()
	every := max(1, int(math.Ceil(float64(len(r.run.Lots))*26/(r.r-r.l))))
	for i, l := range r.run.Lots { // words keep clear of the marks
		if x, y := r.at(i), r.y.at(l.Centre); drawable(l.Centre) {
			r.taken = append(r.taken, box{x - 6, y - 6, x + 6, y + 6})
		}
	}
	for i, l := range r.run.Lots {
		if i%every == 0 {
			r.lotName(i, l.Name)
		}
		r.lot(i, l)
	}
	if r.drawn.Shown == 0 {
		r.text("tick", (r.l+r.r)/2, (r.t+r.d)/2, "middle", "No centres to draw.")
	}
}

// beside marks a value across the picture, its words at the right of it.
func (r *trend) beside(v float64, line, text, words string) {
	y := r.y.at(v)
	if !drawable(v) || !(y >= r.t-0.5 && y <= r.d+0.5) {
		return
	}
	r.raw(`<path class="`, line, `" d="`)
	r.level(r.l, r.r, y)
	r.raw(`"/>`)
	if p, ok := r.place(words, []label{{r.r + 6, y + 4, false}, {r.r + 6, y - 11, false}, {r.r + 6, y + 19, false}}); ok {
		r.text(text, p.x, p.y, "", words)
	}
}

// line joins lots that follow each other.
func (r *trend) line() {
	var points []place
	var keep []bool
	brk := true
	for i, l := range r.run.Lots {
		if !drawable(l.Centre) {
			brk = true
			continue
		}
		points, keep = append(points, place{fineUnits(r.at(i)), fineUnits(r.y.at(l.Centre)), brk}), append(keep, true)
		brk = false
	}
	if len(points) < 2 {
		return
	}
	r.fineGroup()
	r.raw(`<path class="this thin" d="`)
	r.b = appendPath(r.b, points, keep)
	r.raw(`"/></g>`)
}

func (r *trend) lot(i int, l compare.TrendLot) {
	if !drawable(l.Centre) {
		r.drawn.Empty++
		return
	}
	r.drawn.Shown++
	x, y := r.at(i), r.y.at(l.Centre)
	words := l.Name + ": " + report.FormatPlain(l.Centre, l.U, "V") + ", n = " + strconv.Itoa(l.N)
	if l.At != "" {
		words += ", " + l.At
	}
	if drawable(l.U) && l.U > 0 {
		r.raw(`<path class="span" d="`)
		r.upright(x, r.y.at(l.Centre-l.U), r.y.at(l.Centre+l.U))
		r.raw(`"/>`)
	}
	this := l.Name == r.o.This
	if this {
		words += " (this lot)"
	}
	if !l.Outside {
		size := 4.0
		if this {
			size = 6
		}
		r.mark(candidate, x, y, size, 0, words)
		if !this {
			return
		}
		if p, ok := r.place("this lot", around(x, y)); ok {
			r.text("halo", p.x, p.y, anchorOf(p), "this lot")
		}
		return
	}
	r.apart(x, y, words+" (outside the control limits)")
	name := shorten(l.Name, 18)
	if p, ok := r.place(name, around(x, y)); ok {
		r.name(p, name)
		r.drawn.Labels++
	} else {
		r.drawn.Unlabeled++
	}
}

// around lists places for a name beside a mark.
func around(x, y float64) []label {
	return []label{{x - 26, y - 12, false}, {x - 26, y + 22, false}, {x + 9, y - 7, false}, {x - 9, y - 7, true}, {x + 9, y + 18, false}, {x - 9, y + 18, true}}
}

// lotName writes the name of a lot aslant below its place.
func (r *trend) lotName(i int, name string) {
	r.raw(`<g transform="translate(`)
	r.num(r.at(i) + 4)
	r.raw(" ")
	r.num(r.d + 14)
	r.raw(`) rotate(-40)">`)
	r.text("tick", 0, 0, "end", escapeRich(shorten(name, 14)))
	r.raw("</g>")
}
