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
	c.l, c.t, c.r, c.d = 84, 14, o.Width-24, o.Height-90
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
	provisional := ""
	if r.run.Provisional {
		provisional = " (provisional)"
	}
	r.rail(&r.y, r.run.High, "lim", "limt", "upper control limit"+provisional)
	r.rail(&r.y, r.run.Low, "lim", "limt", "lower control limit"+provisional)
	r.rail(&r.y, r.run.Centre, "ref", "reft", "mean of the lots")
	r.line()
	every := max(1, int(math.Ceil(float64(len(r.run.Lots))*18/(r.r-r.l))))
	for i, l := range r.run.Lots {
		if i%every == 0 || l.Name == r.o.This {
			r.lotName(i, l.Name)
		}
		r.lot(i, l)
	}
	if r.drawn.Shown == 0 {
		r.text("tick", (r.l+r.r)/2, (r.t+r.d)/2, "middle", "No centres to draw.")
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
	if !l.Outside {
		r.mark(candidate, x, y, 4, 0, words)
		return
	}
	r.apart(x, y, words+" (outside the control limits)")
	name := shorten(l.Name, 18)
	if p, ok := r.place(name, []label{{x + 9, y - 5, false}, {x - 9, y - 5, true}, {x + 9, y + 16, false}, {x - 9, y + 16, true}}); ok {
		r.name(p, name)
		r.drawn.Labels++
	} else {
		r.drawn.Unlabeled++
	}
}

// lotName writes the name of a lot aslant below its place.
func (r *trend) lotName(i int, name string) {
	class := "tick"
	if name == r.o.This {
		class = ""
		name = shorten(name, 9) + " (this)"
	}
	r.raw(`<g transform="translate(`)
	r.num(r.at(i) + 4)
	r.raw(" ")
	r.num(r.d + 14)
	r.raw(`) rotate(-40)">`)
	r.text(class, 0, 0, "end", escapeRich(shorten(name, 14)))
	r.raw("</g>")
}
