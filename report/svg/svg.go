// Package svg draws the plots: transfer curves over the gate voltage, the strip
// plot of one quantity with its bins, and of two lots their distributions, their
// curves, the shift between them and the run of lots it stands in; of matched
// devices the sets along the axis, what a tolerance gives and their curves side by
// side; of a bias network what it covers and what devices draw. It is the one
// renderer for files, for the report page and for the bench page.
//
// It computes nothing but positions on the paper, needs no script and no font,
// and fetches nothing. Whatever it is given, it writes well-formed XML with
// finite numbers; names are data and are escaped.
package svg

import (
	"math"
	"strconv"
	"unicode/utf8"

	"gatesill/report"
)

// Drawn says what stands in a picture and what does not, so that the caller can
// say it in words.
type Drawn struct {
	Shown     int // curves or devices drawn
	Empty     int // those without a single drawable point
	Labels    int // flagged ones with their name beside them
	Unlabeled int // flagged ones for whose name there was no room
	Beyond    int // flagged ones that leave the picture, whose scale is that of the others
}

// Style is the style sheet of every picture. A page that holds pictures includes
// it once; a picture of its own file carries it. Colours are custom properties,
// which a page may set: --plot-ink, --plot-quiet, --plot-paper, --plot-line,
// --plot-flag, --plot-mark.
const Style = `.plot{--plot-ink:#1b1f24;--plot-quiet:#d9dde1;--plot-soft:#5a6470;--plot-paper:#fff;--plot-line:#0072b2;--plot-flag:#c04f00;--plot-mark:#007a5a;color:var(--plot-ink);font:13px/1.2 system-ui,"Segoe UI",Roboto,"Noto Sans",sans-serif;font-variant-numeric:tabular-nums}
@media (prefers-color-scheme:dark){.plot{--plot-ink:#eceff2;--plot-quiet:#343a41;--plot-soft:#a3adb8;--plot-paper:#14171a;--plot-line:#56b4e9;--plot-flag:#f0803c;--plot-mark:#2fc39a}}
@media print{.plot{--plot-ink:#000;--plot-quiet:#d0d0d0;--plot-soft:#444;--plot-paper:#fff;--plot-line:#0072b2;--plot-flag:#c04f00;--plot-mark:#00694d}}
.plot text{fill:currentColor}
.plot .grid{fill:none;stroke:var(--plot-quiet);stroke-width:1}
.plot .axis{fill:none;stroke:var(--plot-soft);stroke-width:1}
.plot .tick{fill:var(--plot-soft)}
.plot .ref{fill:none;stroke:var(--plot-mark);stroke-width:1.2;stroke-dasharray:1 3;stroke-linecap:round}
.plot .reft{fill:var(--plot-mark);font-size:12px}
.plot .lim{fill:none;stroke:var(--plot-flag);stroke-width:1.2;stroke-dasharray:5 3}
.plot .limt{fill:var(--plot-flag);font-size:12px}
.plot .plain{fill:currentColor}
.plot .sub{font-size:76%}
.plot .lines path{fill:none;stroke:var(--plot-line);stroke-linejoin:round;stroke-linecap:round}
.plot .lines .flag{stroke:var(--plot-flag);stroke-opacity:1}
.plot .dots path{fill:none;stroke:var(--plot-line);stroke-linecap:round}
.plot .dots .flag{fill:var(--plot-paper);stroke:var(--plot-flag);stroke-width:1.8;stroke-linejoin:round;stroke-linecap:butt}
.plot .out{fill:none;stroke:var(--plot-soft);stroke-width:1.3}
.plot .band{fill:var(--plot-line);fill-opacity:.06}
.plot .edge{fill:none;stroke:var(--plot-soft);stroke-width:.7;stroke-opacity:.7}
.plot .name{fill:var(--plot-flag);font-size:12px;font-weight:600;paint-order:stroke;stroke:var(--plot-paper);stroke-width:3.5px;stroke-linejoin:round}
.plot .lines path:hover,.plot .lines path:focus,.plot .lines .on{stroke:var(--plot-ink);stroke-opacity:1;stroke-width:var(--plot-strong,16);outline:none}
.plot .dots path:hover,.plot .dots path:focus,.plot .dots .on{stroke:var(--plot-ink);stroke-opacity:1;outline:none}
.plot .dots .flag:hover,.plot .dots .flag:focus,.plot .dots .flag.on{stroke-width:3.4}
.plot .this{fill:none;stroke:var(--plot-line);stroke-width:2;stroke-linejoin:round}
.plot .that{fill:none;stroke:var(--plot-ink);stroke-width:1.8;stroke-linejoin:round;stroke-dasharray:7 4}
.plot .fine .this{stroke-width:10}
.plot .fine .that{stroke-width:9;stroke-dasharray:35 20}
.plot .fthis{fill:var(--plot-line);fill-opacity:.2}
.plot .fthat{fill:var(--plot-ink);fill-opacity:.1}
.plot .fine .thin{stroke-width:4.5;stroke-opacity:.45}
.plot .fine .thin.that{stroke-dasharray:20 12}
.plot .mthis{fill:var(--plot-line);stroke:var(--plot-line);stroke-width:1.6}
.plot .mthat{fill:var(--plot-paper);stroke:var(--plot-ink);stroke-width:1.6}
.plot .far{fill:var(--plot-paper);stroke:var(--plot-flag);stroke-width:2}
.plot .span{fill:none;stroke:var(--plot-ink);stroke-width:1.4}
.plot .faint{stroke-width:1;stroke-opacity:.55}
.plot .halo{paint-order:stroke;stroke:var(--plot-paper);stroke-width:3.5px;stroke-linejoin:round}
.plot .strong{stroke-width:3.2}
.plot .zero{fill:none;stroke:var(--plot-ink);stroke-width:1.4}
.plot .room{fill:var(--plot-mark);fill-opacity:.12}
.plot .mthis:hover,.plot .mthat:hover,.plot .mthis.on{stroke:var(--plot-flag);stroke-width:3}
.plot .fine .thin:hover,.plot .fine .thin.on{stroke:var(--plot-flag);stroke-opacity:1;stroke-width:11}
.plot .rule{fill:none;stroke:var(--plot-mark);stroke-width:2}
.plot .bar{fill:none;stroke:var(--plot-line);stroke-width:2.4;stroke-linecap:round;stroke-opacity:.55}
.plot .bar.apart{stroke:var(--plot-flag);stroke-dasharray:3 4;stroke-opacity:1}
.plot .mhollow{fill:var(--plot-paper);stroke:var(--plot-line);stroke-width:1.6}
.plot .gname{font-size:12px;font-weight:600}
.plot .grp:hover .bar,.plot .bar.on{stroke:var(--plot-flag);stroke-opacity:1}
.plot .left path{fill:none;stroke:var(--plot-soft);stroke-width:1.7}
.plot .left path:hover,.plot .left .on{stroke:var(--plot-flag)}
.plot .mhollow:hover,.plot .mhollow.on{stroke:var(--plot-flag);stroke-width:3}
.plot .mate{fill:none;stroke:var(--plot-line);stroke-width:7.5;stroke-linejoin:round}
.plot .mate:hover,.plot .mate.on{stroke:var(--plot-flag);stroke-width:13}
.plot .sure{fill:var(--plot-mark);fill-opacity:.16}
@media (forced-colors:active){.plot{--plot-ink:CanvasText;--plot-quiet:GrayText;--plot-soft:CanvasText;--plot-paper:Canvas;--plot-line:LinkText;--plot-flag:Highlight;--plot-mark:CanvasText}}
`

// Frame is what all pictures share.
type Frame struct {
	ID         string  // begins the ids in the picture; unique on its page; letters, digits and - only
	Width      float64 // px; 0: 880
	Height     float64 // px; 0: the picture's own
	Title      string  // read aloud and shown on hovering
	Desc       string  // read aloud: what is to be seen
	Standalone bool    // a file of its own: carries the style sheet
	Focus      int     // at most so many flagged ones can be reached with the Tab key; 0: none
}

// canvas is a picture in the making.
type canvas struct {
	b          []byte
	f          Frame
	l, t, r, d float64 // edges of the plotting area, px
	taken      []box   // by names, for placing the next
}

// fine is how many units of a drawn curve make one pixel: curves are drawn in
// whole units, a fifth of a pixel, which the eye cannot tell from exact.
const fine = 5

func (c *canvas) raw(parts ...string) {
	for _, p := range parts {
		c.b = append(c.b, p...)
	}
}

// num writes a coordinate with at most one decimal.
func (c *canvas) num(x float64) { c.b = appendCoord(c.b, x) }

// appendCoord writes x rounded to a tenth. Anything that is not a sensible place
// on paper is held within it.
func appendCoord(b []byte, x float64) []byte {
	if !(x > -1e6) {
		x = -1e6
	}
	n := int64(math.Round(min(x, 1e6) * 10))
	if n < 0 {
		b = append(b, '-')
		n = -n
	}
	b = strconv.AppendInt(b, n/10, 10)
	if n%10 != 0 {
		b = append(b, '.', byte('0'+n%10))
	}
	return b
}

// attr writes an attribute with a coordinate.
func (c *canvas) attr(name string, x float64) {
	c.raw(" ", name, `="`)
	c.num(x)
	c.raw(`"`)
}

// ref writes the reference of a device, if it has one.
func (c *canvas) ref(n int) {
	if n > 0 {
		c.raw(` data-d="`)
		c.b = strconv.AppendInt(c.b, int64(n), 10)
		c.raw(`"`)
	}
}

// words writes text as character data: escaped, and with nothing in it that
// would not show.
func (c *canvas) words(s string) { c.b = appendText(c.b, s) }

func appendText(b []byte, s string) []byte {
	s = report.Clean(s)
	for i := 0; i < len(s); i++ {
		switch s[i] {
		case '<':
			b = append(b, "&lt;"...)
		case '>':
			b = append(b, "&gt;"...)
		case '&':
			b = append(b, "&amp;"...)
		case '"':
			b = append(b, "&#34;"...)
		case '\'':
			b = append(b, "&#39;"...)
		default:
			b = append(b, s[i])
		}
	}
	return b
}

// rich writes words in which _ lowers what follows, up to the next blank or
// comma: I_D, V_GS(th).
func (c *canvas) rich(s string) {
	for {
		i := indexByte(s, '_')
		if i < 0 || i == len(s)-1 {
			c.words(s)
			return
		}
		c.words(s[:i])
		s = s[i+1:]
		end := len(s)
		for j := 0; j < len(s); j++ {
			if s[j] == ' ' || s[j] == ',' {
				end = j
				break
			}
		}
		c.raw(`<tspan class="sub" dy="3">`)
		c.words(s[:end])
		c.raw(`</tspan>`)
		s = s[end:]
		if s != "" {
			// What follows goes back up.
			c.raw(`<tspan dy="-3">`)
			c.words(s[:1])
			c.raw(`</tspan>`)
			s = s[1:]
		}
	}
}

func indexByte(s string, b byte) int {
	for i := 0; i < len(s); i++ {
		if s[i] == b {
			return i
		}
	}
	return -1
}

// open writes everything up to the picture's content. Pictures with parts that
// take the focus are groups, others are images to a screen reader: what is
// inside an image cannot be reached.
func (c *canvas) open(role string) {
	id := safeID(c.f.ID)
	c.raw(`<svg xmlns="http://www.w3.org/2000/svg" class="plot" id="`, id, `" viewBox="0 0 `)
	c.num(c.f.Width)
	c.raw(" ")
	c.num(c.f.Height)
	c.raw(`" role="`, role, `" aria-labelledby="`, id, `-t `, id, `-d">`)
	c.raw(`<title id="`, id, `-t">`)
	c.words(c.f.Title)
	c.raw(`</title><desc id="`, id, `-d">`)
	c.words(c.f.Desc)
	c.raw(`</desc>`)
	if c.f.Standalone {
		c.raw("<style>", Style, `svg{background:var(--plot-paper)}</style>`)
	}
}

func (c *canvas) close() { c.raw("</svg>") }

// safeID keeps what may begin an id.
func safeID(id string) string {
	b := make([]byte, 0, len(id)+1)
	for i := 0; i < len(id); i++ {
		ch := id[i]
		if ch >= 'a' && ch <= 'z' || ch >= 'A' && ch <= 'Z' || len(b) > 0 && (ch >= '0' && ch <= '9' || ch == '-') {
			b = append(b, ch)
		}
	}
	if len(b) == 0 {
		return "plot"
	}
	return string(b)
}

// text writes one line of text.
func (c *canvas) text(class string, x, y float64, anchor, s string) {
	c.raw(`<text`)
	if class != "" {
		c.raw(` class="`, class, `"`)
	}
	c.attr("x", x)
	c.attr("y", y)
	if anchor != "" {
		c.raw(` text-anchor="`, anchor, `"`)
	}
	c.raw(">")
	c.rich(s)
	c.raw("</text>")
}

// box is a piece of paper that a name takes.
type box struct{ x0, y0, x1, y1 float64 }

func (a box) meets(b box) bool { return a.x0 < b.x1 && b.x0 < a.x1 && a.y0 < b.y1 && b.y0 < a.y1 }

// label is a place for a name: its baseline and anchor.
type label struct {
	x, y  float64
	right bool // the name ends at x
}

// place puts a name at the first of the places where it is free and inside the
// picture, and reports whether there was one.
func (c *canvas) place(name string, places []label) (label, bool) {
	w := textWidth(name, 12) + 4
	for _, p := range places {
		b := box{p.x - 2, p.y - 11, p.x + w, p.y + 3}
		if p.right {
			b.x0, b.x1 = p.x-w, p.x+2
		}
		if b.x0 < c.l || b.x1 > c.f.Width-2 || b.y0 < 2 || b.y1 > c.d {
			continue
		}
		free := true
		for _, t := range c.taken {
			if b.meets(t) {
				free = false
				break
			}
		}
		if free {
			c.taken = append(c.taken, b)
			return p, true
		}
	}
	return label{}, false
}

// name writes a name at its place.
func (c *canvas) name(p label, s string) {
	anchor := ""
	if p.right {
		anchor = "end"
	}
	c.raw(`<text class="name"`)
	c.attr("x", p.x)
	c.attr("y", p.y)
	if anchor != "" {
		c.raw(` text-anchor="end"`)
	}
	// A name in a right-to-left script must not pull its neighbours along.
	c.raw(` unicode-bidi="isolate">`)
	c.words(s)
	c.raw("</text>")
}

// textWidth is about how wide words are in px, on the safe side.
func textWidth(s string, size float64) float64 {
	w := 0.0
	for _, r := range s {
		switch {
		case r > 0x2e80:
			w += 1.05
		case r == 'i' || r == 'l' || r == '.' || r == ',' || r == '\'' || r == '|' || r == ' ':
			w += 0.34
		case r == 'W' || r == 'M' || r == '@' || r == 'm' || r == 'w':
			w += 0.95
		case r < 0x80 && (r < 'A' || r > 'Z'):
			w += 0.62
		default:
			w += 0.72
		}
	}
	return w * size
}

// shorten cuts a name to n characters for the paper; its title has it whole.
func shorten(s string, n int) string {
	s = report.Clean(s)
	if utf8.RuneCountInString(s) <= n {
		return s
	}
	k := 0
	for i := range s {
		if k == n-1 {
			return s[:i] + "…"
		}
		k++
	}
	return s
}

// drawable reports whether a number can be given a place: finite, and of a size
// that leaves room for differences.
func drawable(x float64) bool { return x > -1e30 && x < 1e30 }
