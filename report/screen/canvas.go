package screen

import (
	"strings"
	"unicode"

	"gatesill/report"
)

// style is how a character is emphasised on a terminal with colour.
type style byte

const (
	plain style = iota
	bold
	faint
	caution
	alarm
	curve
)

// codes are the terminal codes of the styles; what they say, words and shapes
// beside them say too.
var codes = map[style]string{bold: "1", faint: "2", caution: "1;33", alarm: "1;7", curve: "1;36"}

// cell is one place of the picture: a character with the marks combined into
// it, or the right half of a wide one.
type cell struct {
	text  string // "" blank
	right bool   // covered by the wide character before
	style style
}

type canvas struct {
	width, rows int
	cells       []cell
}

func newCanvas(width, rows int) *canvas {
	return &canvas{width, rows, make([]cell, width*rows)}
}

// set puts one character of one column; outside the picture it does nothing.
func (c *canvas) set(x, y int, r rune, st style) {
	if x >= 0 && x < c.width && y >= 0 && y < c.rows {
		c.cells[y*c.width+x] = cell{text: string(r), style: st}
	}
}

// text writes from x on, at most to the right edge.
func (c *canvas) text(x, y int, text string, st style) { c.textIn(x, y, c.width-x, text, st) }

// textIn writes at most room columns; what is longer ends in an ellipsis. What
// could move the cursor or change colours is shown as an escape.
func (c *canvas) textIn(x, y, room int, text string, st style) {
	if y < 0 || y >= c.rows {
		return
	}
	text = shorten(clean(text), min(room, c.width-x))
	last := -1
	for _, r := range text {
		w := runeWidth(r)
		if w == 0 {
			if last >= 0 {
				c.cells[last].text += string(r)
			}
			continue
		}
		last = y*c.width + x
		c.cells[last] = cell{text: string(r), style: st}
		if w == 2 {
			c.cells[last+1] = cell{right: true, style: st}
		}
		x += w
	}
}

// bar draws a share of 1 as a filled bar of n columns; above 1 it is full.
func (c *canvas) bar(x, y, n int, share float64, st style) {
	full := int(min(max(share, 0), 1)*float64(n) + 0.5)
	for i := range n {
		if i < full {
			c.set(x+i, y, '█', st)
		} else {
			c.set(x+i, y, '░', st)
		}
	}
}

// line gives one line, without the blanks at its end.
func (c *canvas) line(y int, colour bool) string {
	row := c.cells[y*c.width : (y+1)*c.width]
	for len(row) > 0 && row[len(row)-1].text == "" && !row[len(row)-1].right {
		row = row[:len(row)-1]
	}
	var b strings.Builder
	now := plain
	for _, k := range row {
		if k.right {
			continue
		}
		st := k.style
		if k.text == "" {
			st = plain
		}
		if colour && st != now {
			if now != plain {
				b.WriteString("\x1b[0m")
			}
			if st != plain {
				b.WriteString("\x1b[" + codes[st] + "m")
			}
			now = st
		}
		if k.text == "" {
			b.WriteByte(' ')
		} else {
			b.WriteString(k.text)
		}
	}
	if now != plain {
		b.WriteString("\x1b[0m")
	}
	return b.String()
}

func clean(text string) string { return report.Clean(text) }

// runeWidth is how many columns a character takes. Wide are the blocks of East
// Asian scripts and of pictographs that Unicode's annex 11 calls wide or full
// width; from memory, and coarser than its table.
func runeWidth(r rune) int {
	switch {
	case r < 0x300:
		return 1
	case unicode.In(r, unicode.Mn, unicode.Me):
		return 0
	case r >= 0x1100 && r <= 0x115f, r >= 0x2e80 && r <= 0xa4cf && r != 0x303f, r >= 0xa960 && r <= 0xa97c, r >= 0xac00 && r <= 0xd7a3,
		r >= 0xf900 && r <= 0xfaff, r >= 0xfe30 && r <= 0xfe6f, r >= 0xff00 && r <= 0xff60, r >= 0xffe0 && r <= 0xffe6,
		r >= 0x1f300 && r <= 0x1f64f, r >= 0x1f680 && r <= 0x1f6ff, r >= 0x1f900 && r <= 0x1faff, r >= 0x20000 && r <= 0x3fffd:
		return 2
	}
	return 1
}

func textWidth(text string) int {
	n := 0
	for _, r := range text {
		n += runeWidth(r)
	}
	return n
}

// shorten cuts text to n columns, with an ellipsis where something is missing.
func shorten(text string, n int) string {
	if textWidth(text) <= n {
		return text
	}
	if n <= 0 {
		return ""
	}
	w := 0
	for i, r := range text {
		k := runeWidth(r)
		if w+k > n-1 {
			return text[:i] + "…"
		}
		w += k
	}
	return text
}

// wrap breaks text at blanks into lines of at most n columns; a word that is
// longer is cut.
func wrap(text string, n int) []string { return wrapHanging(text, n, 0) }

// wrapHanging indents all lines but the first.
func wrapHanging(text string, n, indent int) []string {
	var out []string
	line := ""
	for _, word := range strings.Fields(clean(text)) {
		switch lead := strings.Repeat(" ", indent); {
		case line == "":
			line = word
		case textWidth(line)+1+textWidth(word) <= n:
			line += " " + word
		default:
			out = append(out, shorten(line, n))
			line = lead + word
		}
	}
	return append(out, shorten(line, n))
}
