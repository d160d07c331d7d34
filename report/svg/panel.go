package svg

import (
	"math"
	"strconv"

	"gatesill/report"
)

// grid draws the lines of a plotting area with two axes and labels their
// values; minor ticks of the upright axis are short strokes.
func (c *canvas) grid(x, y *scale, xs, ys []tick) {
	c.raw(`<path class="grid" d="`)
	for _, k := range xs {
		if !k.minor {
			c.upright(x.at(k.value), c.t, c.d)
		}
	}
	for _, k := range ys {
		if !k.minor {
			c.level(c.l, c.r, y.at(k.value))
		}
	}
	c.raw(`"/><path class="axis" d="M`)
	c.num(c.l)
	c.raw(" ")
	c.num(c.t)
	c.raw("V")
	c.num(c.d)
	c.raw("H")
	c.num(c.r)
	for _, k := range ys {
		if k.minor {
			c.raw("M")
			c.num(c.l)
			c.raw(" ")
			c.num(y.at(k.value))
			c.raw("h4")
		}
	}
	for _, k := range xs {
		if k.minor {
			c.raw("M")
			c.num(x.at(k.value))
			c.raw(" ")
			c.num(c.d)
			c.raw("v-4")
		}
	}
	c.raw(`"/>`)
	for _, k := range xs {
		if !k.minor && k.label != "" {
			c.text("tick", x.at(k.value), c.d+17, "middle", k.label)
		}
	}
	for _, k := range ys {
		if !k.minor && k.label != "" {
			c.text("tick", c.l-7, y.at(k.value)+4, "end", k.label)
		}
	}
}

// axisNames writes what the axes are: x below the picture, y along its left
// side.
func (c *canvas) axisNames(x, y string) {
	c.text("", (c.l+c.r)/2, c.d+38, "middle", x)
	c.raw(`<g transform="translate(15 `)
	c.num((c.t + c.d) / 2)
	c.raw(`) rotate(-90)">`)
	c.text("", 0, 0, "middle", y)
	c.raw("</g>")
}

// upright and level append a straight line to path data.
func (c *canvas) upright(x, from, to float64) {
	c.raw("M")
	c.num(x)
	c.raw(" ")
	c.num(from)
	c.raw("V")
	c.num(to)
}

func (c *canvas) level(from, to, y float64) {
	c.raw("M")
	c.num(from)
	c.raw(" ")
	c.num(y)
	c.raw("H")
	c.num(to)
}

// rect fills a piece of the plotting area.
func (c *canvas) rect(class string, x0, y0, x1, y1 float64) {
	c.raw(`<rect class="`, class, `"`)
	c.attr("x", min(x0, x1))
	c.attr("y", min(y0, y1))
	c.attr("width", math.Abs(x1-x0))
	c.attr("height", math.Abs(y1-y0))
	c.raw("/>")
}

// inside holds a place within the plotting area.
func (c *canvas) inside(x float64) float64 { return max(c.l, min(x, c.r)) }

// post marks a value by an upright line with words at its head, or at its foot,
// in the first of some rows that is free; to the right of it, or, if that is
// asked for or there is no room, to the left.
func (c *canvas) post(s *scale, x float64, line, text, words string, foot, left bool) {
	p := s.at(x)
	if !drawable(x) || !(p >= c.l-0.5 && p <= c.r+0.5) {
		return
	}
	c.raw(`<path class="`, line, `" d="`)
	c.upright(p, c.t, c.d)
	c.raw(`"/>`)
	var places []label
	for row := range 4 {
		y := c.t + 13 + float64(row)*16
		if foot {
			y = c.d - 12 - float64(row)*16
		}
		at := []label{{p + 5, y, false}, {p - 5, y, true}}
		if left {
			at[0], at[1] = at[1], at[0]
		}
		places = append(places, at...)
	}
	if at, ok := c.place(words, places); ok {
		c.text(text+" halo", at.x, at.y, anchorOf(at), words)
	}
}

// rail marks a value by a level line with words above its left or right end.
func (c *canvas) rail(s *scale, y float64, line, text, words string) {
	p := s.at(y)
	if !drawable(y) || !(p >= c.t-0.5 && p <= c.d+0.5) {
		return
	}
	c.raw(`<path class="`, line, `" d="`)
	c.level(c.l, c.r, p)
	c.raw(`"/>`)
	if at, ok := c.place(words, []label{{c.r - 6, p - 5, true}, {c.r - 6, p + 14, true}, {c.l + 6, p - 5, false}, {c.l + 6, p + 14, false}}); ok {
		c.text(text+" halo", at.x, at.y, anchorOf(at), words)
	}
}

func anchorOf(p label) string {
	if p.right {
		return "end"
	}
	return ""
}

// side is which of two lots: each has its own colour, line and mark.
type side int

const (
	reference side = iota // dashed, squares
	candidate             // solid, round
)

func (s side) class() string { return [...]string{"that", "this"}[s] }

// mark draws the mark of a side and says what it stands for; ref as of [Curve].
func (c *canvas) mark(s side, x, y, r float64, ref int, words string) {
	c.raw(`<path class="m`, s.class(), `"`)
	c.ref(ref)
	c.raw(` d="M`)
	if s == reference {
		c.num(x - r)
		c.raw(" ")
		c.num(y - r)
		n := strconv.FormatFloat(math.Round(20*r)/10, 'f', -1, 64)
		c.raw("h", n, "v", n, "h-", n, "z")
	} else {
		c.num(x - r)
		c.raw(" ")
		c.num(y)
		a := strconv.FormatFloat(math.Round(10*r)/10, 'f', -1, 64)
		d := strconv.FormatFloat(math.Round(20*r)/10, 'f', -1, 64)
		c.raw("a", a, " ", a, " 0 1 0 ", d, " 0a", a, " ", a, " 0 1 0 -", d, " 0z")
	}
	if words == "" {
		c.raw(`"/>`)
		return
	}
	c.raw(`"><title>`)
	c.words(words)
	c.raw(`</title></path>`)
}

// apart draws the mark of what stands apart, a hollow triangle.
func (c *canvas) apart(x, y float64, words string) {
	c.raw(`<path class="far" d="M`)
	c.num(x)
	c.raw(" ")
	c.num(y - 6)
	c.raw(`l6 10.5h-12z"><title>`)
	c.words(words)
	c.raw(`</title></path>`)
}

// legend is one line for each of the lots, above the plotting area.
func (c *canvas) legend(words [2]string) {
	for s := range words {
		y := 14 + 19*float64(s)
		c.raw(`<path class="`, side(s).class(), `" d="`)
		c.level(c.l, c.l+38, y)
		c.raw(`"/>`)
		c.mark(side(s), c.l+19, y, 3.6, 0, "")
		c.text("", c.l+46, y+4.5, "", escapeRich(words[s]))
	}
}

// lotWords names a lot in a legend with the devices behind it.
func lotWords(name string, s side, n, above int) string {
	text := shorten(name, 28)
	if s == reference {
		text += ", reference"
	} else {
		text += ", this lot"
	}
	text += ": n = " + strconv.Itoa(n)
	if above > 0 {
		text += " and " + strconv.Itoa(above) + " above"
	}
	return text
}

// volts writes a gate voltage or a shift of one, with four digits at most.
func volts(x float64) string { return report.FormatPlain(x, math.NaN(), "V") }

// signed writes a shift with its sign.
func signed(x float64) string {
	if x > 0 {
		return "+" + volts(x)
	}
	return volts(x)
}

// fineGroup opens a group whose content is in fine units.
func (c *canvas) fineGroup() {
	c.raw(`<g class="fine" transform="scale(`, strconv.FormatFloat(1.0/fine, 'g', -1, 64), `)">`)
}

// appendPolygon writes a closed outline in whole units, relative.
func appendPolygon(b []byte, points [][2]int) []byte {
	x, y := 0, 0
	for i, p := range points {
		switch i {
		case 0:
			b = append(b, 'M')
			b = strconv.AppendInt(b, int64(p[0]), 10)
		case 1:
			b = append(b, 'l')
			b = strconv.AppendInt(b, int64(p[0]-x), 10)
		default:
			b = appendNext(b, p[0]-x)
		}
		b = appendNext(b, p[1]-y)
		x, y = p[0], p[1]
	}
	return append(b, 'z')
}
