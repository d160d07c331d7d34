package svg

import (
	"io"
	"math"

	"gatesill/report"
)

// Panel is one small picture among several: curves of devices that belong
// together. Flag and Out of a curve are not used.
type Panel struct {
	Title  string
	Curves []Curve
}

// PanelsOptions lay out small pictures side by side, all on the same axes.
type PanelsOptions struct {
	Frame
	XAxis, YAxis Axis
	XName, YName string // titles without unit
	XUnit, YUnit string // base units; that of a logarithmic axis is A
	MarkX, MarkY float64
	Columns      int     // 0: by how many there are
	Least        float64 // smallest height of the y axis in values; 0: none
}

// Panels draws small pictures of curves over each other, on the same axes for all.
// The curves of one picture differ by their dashes.
func Panels(w io.Writer, list []Panel, o PanelsOptions) (Drawn, error) {
	b, drawn := AppendPanels(nil, list, o)
	_, err := w.Write(b)
	return drawn, err
}

// panelDashes, in fine units.
var panelDashes = []string{"", "30 15", "8 14", "40 12 8 12"}

// AppendPanels appends the pictures that [Panels] writes.
func AppendPanels(dst []byte, list []Panel, o PanelsOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 440
	}
	cols := o.Columns
	if cols <= 0 {
		cols = min(4, max(1, int(math.Ceil(math.Sqrt(float64(len(list)))))))
	}
	rows := max(1, (len(list)+cols-1)/cols)
	c := &canvas{b: dst, f: o.Frame}
	const left, foot, gapX, gapY = 58.0, 48.0, 10.0, 20.0
	if o.Height <= 0 {
		o.Height = math.Max(250, foot+float64(rows)*(62+gapY))
		c.f.Height = o.Height
	}
	w := (o.Width - left - 10 - gapX*float64(cols-1)) / float64(cols)
	h := (o.Height - foot - gapY*float64(rows)) / float64(rows)
	p := &panels{canvas: c, o: o}
	p.ranges(list)
	c.open("img")
	if len(list) == 0 {
		c.text("tick", o.Width/2, o.Height/2, "middle", "No curves to draw.")
	}
	u := report.ScaleOf(o.YUnit, max(math.Abs(p.ylo), math.Abs(p.yhi)))
	for i := range list {
		c.l = left + float64(i%cols)*(w+gapX)
		c.t = gapY + float64(i/cols)*(h+gapY)
		c.r, c.d = c.l+w, c.t+h
		below := i+cols >= len(list)
		p.panel(&list[i], u, i%cols == 0, below)
	}
	c.l, c.t, c.r, c.d = left, gapY, o.Width-10, o.Height-foot
	if len(list) > 0 {
		x, y := o.XName, o.YName
		if o.XAxis != Logarithmic {
			x += " (" + o.XUnit + ")"
		} else {
			x += ", logarithmic"
		}
		if unit := u.Unit(o.YUnit); unit != "" {
			y += " (" + unit + ")"
		}
		c.axisNames(x, y)
	}
	c.close()
	return c.b, p.drawn
}

type panels struct {
	*canvas
	o                  PanelsOptions
	xlo, xhi, ylo, yhi float64
	drawn              Drawn
}

func (p *panels) ranges(list []Panel) {
	inf := math.Inf(1)
	p.xlo, p.xhi, p.ylo, p.yhi = inf, -inf, inf, -inf
	for i := range list {
		for j := range list[i].Curves {
			cv := &list[i].Curves[j]
			for k := range min(len(cv.X), len(cv.Y)) {
				if p.shown(cv.X[k], cv.Y[k]) {
					p.xlo, p.xhi = min(p.xlo, cv.X[k]), max(p.xhi, cv.X[k])
					p.ylo, p.yhi = min(p.ylo, cv.Y[k]), max(p.yhi, cv.Y[k])
				}
			}
		}
	}
	if p.o.XAxis == Logarithmic {
		if !(p.xlo <= p.xhi) {
			p.xlo, p.xhi = 1e-3, 1
		}
		p.xlo, p.xhi = p.xlo/1.3, p.xhi*1.3
	} else {
		p.xlo, p.xhi = widen(p.xlo, p.xhi)
		pad := 0.03 * (p.xhi - p.xlo)
		p.xlo, p.xhi = p.xlo-pad, p.xhi+pad
	}
	p.ylo, p.yhi = widen(p.ylo, p.yhi)
	if more := (p.o.Least - (p.yhi - p.ylo)) / 2; more > 0 {
		p.ylo, p.yhi = p.ylo-more, p.yhi+more
	}
	pad := 0.06 * (p.yhi - p.ylo)
	if p.ylo-pad < 0 && p.ylo >= 0 {
		p.ylo = 0
	} else {
		p.ylo -= pad
	}
	p.yhi += pad
}

func (p *panels) shown(x, y float64) bool {
	return drawable(x) && drawable(y) && (p.o.XAxis != Logarithmic || x > tiny)
}

func (p *panels) panel(one *Panel, u report.Scale, left, below bool) {
	x := newScale(p.o.XAxis, p.xlo, p.xhi, p.l, p.r)
	y := newScale(p.o.YAxis, p.ylo, p.yhi, p.d, p.t)
	xs := p.within(&x, x.ticks(60, report.Scale{}))
	ys := y.ticks(20, u)
	if !left {
		ys = bare(ys)
	}
	if !below {
		xs = bare(xs)
	}
	p.grid(&x, &y, xs, ys)
	for _, m := range []struct {
		s        *scale
		v        float64
		from, to float64
		up       bool
	}{{&x, p.o.MarkX, p.t, p.d, true}, {&y, p.o.MarkY, p.l, p.r, false}} {
		at := m.s.at(m.v)
		if !drawable(m.v) || !(m.v >= m.s.lo && m.v <= m.s.hi) || m.v == 0 && m.s.kind == Logarithmic {
			continue
		}
		p.raw(`<path class="ref" d="`)
		if m.up {
			p.upright(at, m.from, m.to)
		} else {
			p.level(m.from, m.to, at)
		}
		p.raw(`"/>`)
	}
	p.text("gname", p.l+1, p.t-5, "", escapeRich(shorten(one.Title, max(4, int((p.r-p.l)/7)))))
	p.fineGroup()
	for i := range one.Curves {
		cv := &one.Curves[i]
		var line []place
		var keep []bool
		brk := true
		for k := range min(len(cv.X), len(cv.Y)) {
			if !p.shown(cv.X[k], cv.Y[k]) {
				brk = true
				continue
			}
			line, keep = append(line, place{fineUnits(x.at(cv.X[k])), fineUnits(y.at(cv.Y[k])), brk}), append(keep, true)
			brk = false
		}
		if len(line) == 0 {
			p.drawn.Empty++
			continue
		}
		p.raw(`<path class="mate"`)
		if d := panelDashes[i%len(panelDashes)]; d != "" {
			p.raw(` stroke-dasharray="`, d, `"`)
		}
		p.ref(cv.Ref)
		p.raw(` d="`)
		p.b = appendPath(p.b, line, keep)
		p.raw(`"><title>`)
		p.words(cv.Name + " in " + one.Title)
		p.raw(`</title></path>`)
		p.drawn.Shown++
	}
	p.raw(`</g>`)
}

// bare keeps the lines of ticks without their words.
func bare(list []tick) []tick {
	out := make([]tick, len(list))
	for i, k := range list {
		out[i] = k
		out[i].label = ""
	}
	return out
}

// within keeps the words of ticks that stand below their own picture and do not
// touch, and leaves out minor ones.
func (p *panels) within(s *scale, list []tick) []tick {
	var out []tick
	last := p.l - 12
	for _, k := range list {
		if k.minor {
			continue
		}
		half := textWidth(k.label, 13) / 2
		if at := s.at(k.value); at-half < last+3 || at+half > p.r+6 {
			k.label = ""
		} else {
			last = at + half
		}
		out = append(out, k)
	}
	return out
}
