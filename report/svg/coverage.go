package svg

import (
	"io"
	"math"

	"gatesill/report"
)

// Span is from where to where a value lies; Low is NaN where there is none.
type Span struct{ Low, High float64 }

func (s Span) drawable() bool { return drawable(s.Low) && drawable(s.High) && s.Low <= s.High }

// CoverageOptions lay out a plot of what a bias network covers.
type CoverageOptions struct {
	Frame
	Quantity string // axis title without unit
	Unit     string // base unit
	Reach    Span   // of the network with everything nominal
	ReachIs  string // what the reach is, in a few words
	Sure     Span   // that every board reaches
	Band     Span   // tolerance interval of the lot
	BandIs   string // what it holds: "95 % of all parts, 95 % confidence"
	Centre   float64
	CentreIs string   // "mean"
	Above    []string // as of [StripOptions]
	Negative bool
}

// Coverage draws every device along the axis of the gate bias, the range that a
// network reaches shaded, more strongly where every board reaches it, and the tolerance
// interval of the lot as a bar above. Flagged devices are those outside: hollow
// triangles with their names.
func Coverage(w io.Writer, spots []Spot, o CoverageOptions) (Drawn, error) {
	b, drawn := AppendCoverage(nil, spots, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendCoverage appends the plot that [Coverage] writes.
func AppendCoverage(dst []byte, spots []Spot, o CoverageOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 240
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 20, 56, o.Width-20, o.Height-46
	s := &strip{canvas: c, o: StripOptions{Frame: o.Frame, Quantity: o.Quantity, Unit: o.Unit, Above: o.Above, Negative: o.Negative}}
	s.take(spots)
	s.room()
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, p := range s.spots {
		lo, hi = min(lo, p.X), max(hi, p.X)
	}
	lo, hi = widen(lo, hi)
	span := hi - lo
	for _, v := range []float64{o.Reach.Low, o.Reach.High, o.Sure.Low, o.Sure.High, o.Band.Low, o.Band.High, o.Centre} {
		if drawable(v) && v > lo-span && v < hi+span {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	pad := (hi - lo) * 0.03
	s.x = newScale(Linear, lo-pad, hi+pad, s.l, s.r)
	c.open("img")
	for _, r := range []struct {
		Span
		class string
	}{{o.Reach, "room"}, {o.Sure, "sure"}} {
		if x0, x1 := s.inside(s.x.at(r.Low)), s.inside(s.x.at(r.High)); r.drawable() && x1 > x0 {
			s.rect(r.class, x0, s.t-14, x1, s.d)
		}
	}
	s.edges(o)
	s.axis()
	if x := s.x.at(o.Centre); drawable(o.Centre) && x >= s.l && x <= s.r {
		s.raw(`<path class="ref" d="`)
		s.upright(x, s.t-12, s.d)
		s.raw(`"/>`)
		if p, ok := s.place(o.CentreIs, []label{{x + 4, s.d - 6, false}, {x - 4, s.d - 6, true}}); ok {
			s.text("reft halo", p.x, p.y, anchorOf(p), o.CentreIs)
		}
	}
	if len(s.spots) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No values to draw.")
	} else {
		s.dots()
	}
	s.aboves()
	c.close()
	return c.b, s.drawn
}

// edges writes what the spans are: the reach by lines at its ends, the interval of
// the lot as a bar.
func (s *strip) edges(o CoverageOptions) {
	if o.Reach.drawable() {
		s.raw(`<path class="lim" d="`)
		for _, v := range []float64{o.Reach.Low, o.Reach.High} {
			if x := s.x.at(v); x >= s.l-0.5 && x <= s.r+0.5 {
				s.upright(x, s.t-14, s.d)
			}
		}
		s.raw(`"/>`)
		words := o.ReachIs + " " + report.FormatPlain(o.Reach.Low, math.NaN(), o.Unit)
		if o.Reach.High > o.Reach.Low {
			words += " to " + report.FormatPlain(o.Reach.High, math.NaN(), o.Unit)
		}
		s.over(o.Reach, s.t-19, "limt halo", words)
	}
	if o.Band.drawable() {
		const y = 24
		x0, x1 := s.inside(s.x.at(o.Band.Low)), s.inside(s.x.at(o.Band.High))
		s.raw(`<path class="span strong" d="`)
		s.level(x0, x1, y)
		if o.Band.Low >= s.x.lo { // an end that lies in the picture
			s.upright(x0, y-5, y+5)
		}
		if o.Band.High <= s.x.hi {
			s.upright(x1, y-5, y+5)
		}
		words := report.FormatPlain(o.Band.Low, math.NaN(), o.Unit) + " to " + report.FormatPlain(o.Band.High, math.NaN(), o.Unit) + ": " + o.BandIs
		s.raw(`"><title>`)
		s.words(words)
		s.raw(`</title></path>`)
		s.over(o.Band, y-9, "reft plain halo", words)
	}
}

// over writes words over the middle of a span, within the picture.
func (s *strip) over(r Span, y float64, class, words string) {
	half := textWidth(words, 12) / 2
	x := (s.inside(s.x.at(r.Low)) + s.inside(s.x.at(r.High))) / 2
	s.text(class, max(s.l+half, min(x, s.r-half)), y, "middle", words)
}

// Draw is one device with what it draws at a gate voltage.
type Draw struct {
	Name   string
	X      float64 // V, its own gate bias
	Y      float64 // A; NaN: not known
	Beyond int     // +1: more than Y, -1: less
	Out    bool    // outside what is allowed
	Ref    int     // as of [Curve]
}

// DrawsOptions lay out a plot of what devices draw at one gate voltage.
type DrawsOptions struct {
	Frame
	Gate    float64 // V, at which they draw it
	Wanted  float64 // A
	Allowed Span    // A; none: no bounds were given
}

// Draws draws the drain current of each device at one gate voltage against its own
// gate bias. A current that is only known to be more or less is an arrowhead;
// devices outside what is allowed are hollow triangles.
func Draws(w io.Writer, list []Draw, o DrawsOptions) (Drawn, error) {
	b, drawn := AppendDraws(nil, list, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendDraws appends the plot that [Draws] writes.
func AppendDraws(dst []byte, list []Draw, o DrawsOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 440
	}
	if o.Height <= 0 {
		o.Height = 260
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 62, 16, o.Width-14, o.Height-46
	var drawn Drawn
	xlo, xhi, top := math.Inf(1), math.Inf(-1), 0.0
	var shown []Draw
	for _, d := range list {
		if !drawable(d.X) || !drawable(d.Y) || d.Y < 0 {
			drawn.Empty++
			continue
		}
		shown = append(shown, d)
		xlo, xhi, top = min(xlo, d.X), max(xhi, d.X), max(top, d.Y)
	}
	if drawable(o.Gate) && len(shown) > 0 {
		if span := xhi - xlo; o.Gate > xlo-span && o.Gate < xhi+span {
			xlo, xhi = min(xlo, o.Gate), max(xhi, o.Gate)
		}
	}
	for _, v := range []float64{o.Wanted, o.Allowed.High} {
		if drawable(v) {
			top = max(top, v)
		}
	}
	xlo, xhi = widen(xlo, xhi)
	pad := 0.04 * (xhi - xlo)
	x := newScale(Linear, xlo-pad, xhi+pad, c.l, c.r)
	_, top = widen(0, top*1.08)
	y := newScale(Linear, 0, top, c.d, c.t)
	c.open("img")
	if a := o.Allowed; a.drawable() && a.Low < top {
		c.rect("room", c.l, y.at(max(0, a.Low)), c.r, y.at(min(a.High, top)))
	}
	xu, yu := report.ScaleOf("V", max(math.Abs(x.lo), math.Abs(x.hi))), report.ScaleOf("A", top)
	c.grid(&x, &y, x.ticks(64, xu), y.ticks(40, yu))
	c.axisNames("own gate bias ("+xu.Unit("V")+")", "drain current ("+yu.Unit("A")+")")
	c.rail(&y, o.Wanted, "zero", "", "wanted: "+report.FormatGiven(o.Wanted, "A"))
	if drawable(o.Gate) {
		c.post(&x, o.Gate, "ref", "reft", "gate at "+volts(o.Gate), false, false)
	}
	if len(shown) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No currents to draw.")
	}
	r := 3.6
	if len(shown) > 200 {
		r = 1.8
	}
	for _, d := range shown {
		words := d.Name + ": " + map[int]string{0: "", 1: "more than ", -1: "less than "}[d.Beyond] + report.FormatPlain(d.Y, math.NaN(), "A")
		px, py := x.at(d.X), y.at(d.Y)
		switch {
		case d.Beyond > 0:
			c.tip(px, py, -1, d.Ref, words)
		case d.Beyond < 0:
			c.tip(px, py, 1, d.Ref, words)
		case d.Out:
			c.apart(px, py, words+" (outside)")
		default:
			c.shape(0, px, py, r, false, d.Ref, words)
		}
		drawn.Shown++
	}
	c.close()
	return c.b, drawn
}

// tip draws an arrowhead that points up (way -1) or down.
func (c *canvas) tip(x, y, way float64, ref int, words string) {
	c.raw(`<path class="far"`)
	c.ref(ref)
	c.raw(` d="M`)
	c.num(x - 4)
	c.raw(" ")
	c.num(y)
	c.raw("l4 ")
	c.num(7 * way)
	c.raw("l4 ")
	c.num(-7 * way)
	c.raw(`"><title>`)
	c.words(words)
	c.raw(`</title></path>`)
}
