// Package screen draws a live bench on a terminal: what to do now, the readings in
// digits that can be read from two metres, the age of each, the limits, and the
// curve as it grows over the lot that was measured before.
//
// It measures and judges nothing: what it shows was put into words and numbers
// by its caller. It draws with block and Braille characters of its own, and moves
// the cursor only on a terminal.
package screen

import (
	"io"
	"math"
	"strings"
)

// Model is all that is shown at one moment.
type Model struct {
	Title       string // what is being done: "sweep  lot bag1  device D7"
	Status      string // at the right of the title: "7 of 25"
	Instruction string // what to do now, one line
	Keys        string // the keys that do something now, one line; "" not shown

	Waiting float64 // s still to wait; 0: nothing is waited for
	Wait    float64 // s, the whole of it; 0 not known

	Values  []Value // the first ones are drawn large, as many as fit
	Power   Power
	Notices []Notice
	Plot    Plot
	Lines   []string // further lines, the first ones first when there is no room for all
}

// Value is one quantity as it is shown.
type Value struct {
	Role  string  // "gate"
	Label string  // name of the meter
	Text  string  // the number with fixed decimals, as of [Fixed]; "" nothing has come yet
	Unit  string  // with its prefix
	Age   float64 // s since it came; NaN not shown
	Stale bool    // it is too old to be believed
	Note  string  // what else is to be said of it: "held", "over range", "line lost"
}

// Power is the power in the device against its limit.
type Power struct {
	Watts float64 // NaN not known
	Limit float64 // W; 0 not known: no bar is drawn
}

// Notice is something that must not be missed.
type Notice struct {
	Stop bool // everything must stop; else a caution
	Text string
}

// XY is one point of a curve.
type XY struct {
	X, Y float64 // gate voltage in V, drain current in A
	Open bool    // interpolated while something moved; drawn hollow
}

// Fan is what the lot did so far: for each gate voltage the median and the spread
// of the drain current. All slices have one length.
type Fan struct {
	X, Low, Mid, High []float64 // V, A
}

// Plot is the growing curve. No points and no fan: it is not drawn.
type Plot struct {
	Points []XY // in the order of measuring; the last one is marked
	Fan    Fan
	Log    bool // logarithmic current; currents that are not above 0 are left out
}

// Draw draws the model as text of at most width columns and height lines, each
// ended by a line feed but the last. It moves no cursor; with colour, words are
// emphasised by terminal codes. Nothing is said by colour alone.
func Draw(w io.Writer, m Model, width, height int, colour bool) error {
	_, err := io.WriteString(w, strings.Join(draw(m, width, height, colour), "\n"))
	return err
}

// draw gives the lines of a picture, without trailing blanks.
func draw(m Model, width, height int, colour bool) []string {
	if width < 1 || height < 1 {
		return nil
	}
	c := layout(m, width, height)
	lines := make([]string, 0, height)
	for y := range c.rows {
		lines = append(lines, c.line(y, colour))
	}
	return lines
}

// part is a stack of rows of the picture.
type part struct {
	rows int
	draw func(c *canvas, y int)
}

// layout puts the parts below one another and gives what is left to the curve.
// Without room for all, the curve goes first, then further lines from the end,
// then the large digits become small ones.
func layout(m Model, width, height int) *canvas {
	head := headParts(m, width)
	notices := noticeParts(m.Notices, width)
	large, rest := largePart(m.Values, width)
	small := smallParts(rest, width)
	power := powerParts(m.Power, width)
	lines := lineParts(m.Lines, width)

	used := func(lists ...[]part) int {
		n := 0
		for _, l := range lists {
			for _, p := range l {
				n += p.rows
			}
		}
		return n
	}
	if used(head, notices, large, small, power) > height {
		large, small = nil, smallParts(m.Values, width)
	}
	all := spaced([][]part{head, notices, large, small, power}, height-used(head, notices, large, small, power))
	room := height - used(all...)
	if len(m.Plot.Points) > 0 || len(m.Plot.Fan.X) > 0 {
		keep, taken := 0, 0
		for keep < len(lines) && taken+lines[keep].rows <= room-plotLeast {
			taken += lines[keep].rows
			keep++
		}
		if n := room - taken; n >= plotLeast {
			lines = lines[:keep]
			all = append(all, []part{{n, func(c *canvas, y int) { drawPlot(c, m.Plot, y, n) }}})
		}
	}
	all = append(all, lines)
	total := min(used(all...), height)
	c := newCanvas(width, total)
	y := 0
	for _, l := range all {
		for _, p := range l {
			if y+p.rows > total {
				break
			}
			p.draw(c, y)
			y += p.rows
		}
	}
	return c
}

// spaced puts blank lines between the lists where there is plenty of room.
func spaced(lists [][]part, room int) [][]part {
	if room < 2*plotLeast {
		return lists
	}
	var out [][]part
	for _, l := range lists {
		if len(l) > 0 {
			out = append(out, l, []part{{1, func(*canvas, int) {}}})
		}
	}
	return out
}

func headParts(m Model, width int) []part {
	var out []part
	if m.Title != "" || m.Status != "" {
		out = append(out, part{1, func(c *canvas, y int) {
			room := width
			if n := textWidth(clean(m.Status)); n > 0 && n+2 < width {
				c.text(width-n, y, m.Status, plain)
				room = width - n - 2
			}
			c.textIn(0, y, room, m.Title, faint)
		}})
	}
	if m.Instruction != "" {
		rows := wrap(m.Instruction, max(width-2, 1))
		rows = rows[:min(len(rows), 2)]
		out = append(out, part{len(rows), func(c *canvas, y int) {
			c.text(0, y, "▶", bold)
			for i, r := range rows {
				c.text(2, y+i, r, bold)
			}
		}})
	}
	if m.Keys != "" {
		out = append(out, part{1, func(c *canvas, y int) { c.textIn(2, y, width-2, m.Keys, faint) }})
	}
	if m.Waiting > 0 {
		out = append(out, part{1, func(c *canvas, y int) {
			text := "wait " + seconds(m.Waiting)
			c.text(2, y, text, plain)
			if n := min(width-14, 40); m.Wait > 0 && n >= 8 {
				c.bar(14, y, n, 1-m.Waiting/m.Wait, plain)
			}
		}})
	}
	return out
}

// noticeParts show cautions by a triangle and a word, orders to stop by a square
// and a word.
func noticeParts(list []Notice, width int) []part {
	var out []part
	for _, stop := range []bool{true, false} {
		for _, n := range list {
			if n.Stop != stop {
				continue
			}
			lead, st := "▲ CAUTION  ", caution
			if n.Stop {
				lead, st = "■ STOP  ", alarm
			}
			indent := textWidth(lead)
			if width < 3*indent {
				indent = 2
			}
			rows := wrap(lead+n.Text, width)
			if len(rows) > 1 {
				rows = append(rows[:0:0], wrapHanging(lead+n.Text, width, indent)...)
			}
			out = append(out, part{len(rows), func(c *canvas, y int) {
				for i, r := range rows {
					c.text(0, y+i, r, st)
				}
			}})
		}
	}
	return out
}

func powerParts(p Power, width int) []part {
	if math.IsNaN(p.Watts) || p.Watts == 0 && p.Limit == 0 {
		return nil
	}
	return []part{{1, func(c *canvas, y int) {
		text, unit := Fixed(p.Watts, 0.001, "W")
		line := "power  " + text + " " + unit
		st := plain
		if p.Limit > 0 {
			limit, unit := FixedShort(p.Limit, "W")
			line += " of " + limit + " " + unit
			switch share := p.Watts / p.Limit; {
			case share >= 1:
				line, st = "■ "+line+"  OVER THE LIMIT", alarm
			case share >= 0.8:
				line, st = "▲ "+line+"  near the limit", caution
			}
		}
		c.textIn(0, y, width, line, st)
		if at := max(textWidth(line)+2, 28); p.Limit > 0 && width-at >= 12 {
			c.bar(at, y, min(width-at, 30), p.Watts/p.Limit, st)
		}
	}}}
}

func lineParts(lines []string, width int) []part {
	var out []part
	for _, l := range lines {
		for _, row := range wrapHanging(l, width, min(2, width-1)) {
			out = append(out, part{1, func(c *canvas, y int) { c.text(0, y, row, plain) }})
		}
	}
	return out
}
