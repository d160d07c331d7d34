package svg

import (
	"io"
	"math"

	"gatesill/report"
)

// Share is one device on a gate line with others.
type Share struct {
	Name            string
	Cold, Hot, Bare float64 // A; NaN: not told. Bare is cold without the source resistors
}

// LineOptions lay out a plot of devices on one gate line.
type LineOptions struct {
	Frame
	Each float64 // A, of each if they shared equally; NaN: not marked
}

// Line draws what the devices on one gate line carry, a row each: round when cold,
// a triangle when warm, a hollow square without the source resistors.
func Line(w io.Writer, list []Share, o LineOptions) (Drawn, error) {
	b, drawn := AppendLine(nil, list, o)
	_, err := w.Write(b)
	return drawn, err
}

// mostShares bounds the rows of the picture.
const mostShares = 40

// AppendLine appends the plot that [Line] writes.
func AppendLine(dst []byte, list []Share, o LineOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	shown := list[:min(len(list), mostShares)]
	const row = 17.0
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r = 120, 34, o.Width-20
	c.d = c.t + row*math.Max(2, float64(len(shown)))
	c.f.Height = c.d + 46
	drawn := Drawn{Beyond: len(list) - len(shown)}
	top := 0.0
	states := [3]bool{}
	at := func(s *Share) [3]float64 { return [3]float64{s.Cold, s.Hot, s.Bare} }
	for i := range shown {
		for k, v := range at(&shown[i]) {
			if drawable(v) {
				top, states[k] = max(top, v), true
			}
		}
	}
	if drawable(o.Each) {
		top = max(top, o.Each)
	}
	_, top = widen(0, 1.04*top)
	x := newScale(Linear, 0, top, c.l, c.r)
	u := report.ScaleOf("A", top)
	c.open("img")
	c.grid(&x, &scale{}, x.ticks(70, u), nil)
	c.text("", (c.l+c.r)/2, c.d+38, "middle", "drain current ("+u.Unit("A")+")")
	if p := x.at(o.Each); drawable(o.Each) {
		c.raw(`<path class="ref" d="`)
		c.upright(p, c.t, c.d)
		c.raw(`"/>`)
	}
	place := c.l
	for k, words := range []string{"cold", "warmed up", "cold, without the source resistors"} {
		if states[k] {
			c.state(k, place+6, 14, "")
			c.text("", place+16, 18.5, "", words)
			place += 40 + textWidth(words, 13)
		}
	}
	if drawable(o.Each) {
		c.text("reft", place, 18.5, "", "dotted: shared equally")
	}
	if len(shown) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No currents to draw.")
	}
	for i := range shown {
		s := &shown[i]
		y := c.t + row*(float64(i)+0.5)
		c.text("tick", c.l-8, y+4, "end", escapeRich(shorten(s.Name, 14)))
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, v := range at(s) {
			if drawable(v) {
				lo, hi = min(lo, x.at(v)), max(hi, x.at(v))
			}
		}
		if lo > hi {
			drawn.Empty++
			continue
		}
		c.raw(`<path class="edge" d="`)
		c.level(lo, hi, y)
		c.raw(`"/>`)
		for _, k := range []int{2, 1, 0} { // the cold one on top
			if v := at(s)[k]; drawable(v) {
				c.state(k, x.at(v), y, s.Name+" "+[]string{"cold", "warmed up", "cold without the source resistors"}[k]+": "+report.FormatPlain(v, math.NaN(), "A"))
			}
		}
		drawn.Shown++
	}
	c.close()
	return c.b, drawn
}

// state is the mark of one state of a line.
func (c *canvas) state(k int, x, y float64, words string) {
	switch k {
	case 0:
		c.shape(0, x, y, 4, false, 0, words)
	case 1:
		c.apart(x, y, words)
	case 2:
		c.shape(1, x, y, 4, true, 0, words)
	}
}
