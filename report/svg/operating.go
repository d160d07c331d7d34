package svg

import (
	"fmt"
	"io"
	"math"

	"gatesill/fit/plan"
	"gatesill/report"
)

// Operating draws the operating characteristic of a plan: how often a lot is
// accepted, by the share of bad parts in it, with the agreed points of a good and
// of a bad lot where they are known.
func Operating(w io.Writer, a *plan.Accept, f Frame) error {
	_, err := w.Write(appendOperating(nil, a, f))
	return err
}

func appendOperating(dst []byte, a *plan.Accept, f Frame) []byte {
	if f.Width == 0 {
		f.Width = 640
	}
	if f.Height == 0 {
		f.Height = 400
	}
	if f.Title == "" {
		f.Title = fmt.Sprintf("Operating characteristic: %d parts, k = %.3f", a.Plan.N, a.Plan.K)
	}
	if f.Desc == "" {
		f.Desc = fmt.Sprintf("How often a lot is accepted, by the share of bad parts in it: %s of lots with %s bad, %s of lots with %s bad.", "95 %", report.Chance(a.Often), "10 %", report.Chance(a.Seldom))
	}
	c := &canvas{b: dst, f: f, l: 62, t: 54, r: f.Width - 22, d: f.Height - 52}
	end := 1.0
	if n := len(a.Curve); n > 0 && drawable(a.Curve[n-1].Bad) && a.Curve[n-1].Bad > 0 {
		end = a.Curve[n-1].Bad
	}
	x, y := newScale(Linear, 0, 100*end, c.l, c.r), newScale(Linear, 0, 100, c.d, c.t)
	c.open("img")
	c.text("", c.l, 22, "", f.Title)
	c.raw(`<path class="grid" d="`)
	xs, ys := x.ticks(80, report.Scale{}), y.ticks(50, report.Scale{})
	for _, t := range xs {
		c.stroke(x.at(t.value), c.t, x.at(t.value), c.d)
	}
	for _, t := range ys {
		c.stroke(c.l, y.at(t.value), c.r, y.at(t.value))
	}
	c.raw(`"/>`)
	for _, t := range xs {
		c.text("tick", x.at(t.value), c.d+18, "middle", t.label)
	}
	for _, t := range ys {
		c.text("tick", c.l-8, y.at(t.value)+4, "end", t.label)
	}
	c.text("", (c.l+c.r)/2, f.Height-12, "middle", "bad in the lot, %")
	c.text("", c.l-50, c.t-12, "", "accepted, %")
	c.raw(`<g class="lines"><path stroke-width="2" d="`)
	pen := "M"
	for _, q := range a.Curve {
		if drawable(q.Bad) && drawable(q.Accepts) {
			c.raw(pen)
			c.num(x.at(100 * q.Bad))
			c.raw(" ")
			c.num(y.at(100 * q.Accepts))
			pen = "L"
		}
	}
	if pen == "M" {
		c.raw("M0 0")
	}
	c.raw(`"/></g>`)
	for _, q := range []struct {
		bad, accepts float64
	}{{a.Good, a.AtGood}, {a.Bad, a.AtBad}} {
		if math.IsNaN(q.bad) || math.IsNaN(q.accepts) || q.bad > end {
			continue
		}
		px, py := x.at(100*q.bad), y.at(100*q.accepts)
		c.raw(`<circle class="out"`)
		c.attr("cx", px)
		c.attr("cy", py)
		c.raw(` r="5"/>`)
		// Above and to the right of a curve that falls nothing is in the way.
		words := fmt.Sprintf("%s bad: accepted %s", report.Chance(q.bad), report.Chance(q.accepts))
		if px+10+textWidth(words, 12) <= c.r {
			c.text("reft", px+10, py-6, "", words)
		} else {
			c.text("reft", c.r, py-14, "end", words)
		}
	}
	c.close()
	return c.b
}

// stroke adds one straight line to a path.
func (c *canvas) stroke(x0, y0, x1, y1 float64) {
	c.raw("M")
	c.num(x0)
	c.raw(" ")
	c.num(y0)
	c.raw("L")
	c.num(x1)
	c.raw(" ")
	c.num(y1)
}
