package screen

import (
	"math"
	"strconv"
)

const (
	plotLeast = 7  // rows without which no curve is drawn
	labels    = 8  // columns for the labels of the current axis
	tickEvery = 12 // columns between two labels of the voltage axis at least
)

// axis takes values to places on one side of the picture.
type axis struct {
	lo, hi float64 // values at the ends, as they are laid out (logarithms on a logarithmic one)
	log    bool
}

// share gives the place of a value from 0 to 1, NaN where it has none.
func (a axis) share(x float64) float64 {
	if a.log {
		if !(x > 0) {
			return math.NaN()
		}
		x = math.Log10(x)
	}
	s := (x - a.lo) / (a.hi - a.lo)
	if math.IsInf(s, 0) || s < -1e-9 || s > 1+1e-9 {
		return math.NaN()
	}
	return s
}

// ends finds least and greatest of numbers that the axis can show.
type ends struct{ lo, hi float64 }

func (e *ends) take(log bool, xs ...float64) {
	for _, x := range xs {
		if math.IsNaN(x) || math.IsInf(x, 0) || math.Abs(x) > 1e15 || log && !(x > 0) {
			continue
		}
		e.lo, e.hi = min(e.lo, x), max(e.hi, x)
	}
}

// axes find the ranges of the plot, and false when there is nothing to show.
func (p Plot) axes() (x, y axis, ok bool) {
	ex, ey := ends{math.Inf(1), math.Inf(-1)}, ends{math.Inf(1), math.Inf(-1)}
	for _, q := range p.Points {
		ex.take(false, q.X)
		ey.take(p.Log, q.Y)
	}
	ex.take(false, p.Fan.X...)
	for _, ys := range [][]float64{p.Fan.Low, p.Fan.Mid, p.Fan.High} {
		ey.take(p.Log, ys...)
	}
	if ex.lo > ex.hi || ey.lo > ey.hi {
		return x, y, false
	}
	x = whole(ex, 0.05)
	if p.Log {
		y = axis{math.Floor(math.Log10(ey.lo)), math.Ceil(math.Log10(ey.hi)), true}
		if y.hi <= y.lo {
			y.hi = y.lo + 1
		}
		y.lo = max(y.lo, y.hi-8) // more decades cannot be read
		return x, y, true
	}
	ey.take(false, 0)
	return x, whole(ey, 1e-6), true
}

// whole widens a range to whole steps of its labels, at least to a width.
func whole(e ends, least float64) axis {
	if e.hi-e.lo < least {
		mid := (e.lo + e.hi) / 2
		e.lo, e.hi = mid-least/2, mid+least/2
	}
	step := niceStep((e.hi - e.lo) / 5)
	return axis{lo: math.Floor(e.lo/step+1e-9) * step, hi: math.Ceil(e.hi/step-1e-9) * step}
}

// niceStep is the least of 1, 2, 5 times a power of ten that is not below x.
func niceStep(x float64) float64 {
	p := math.Pow(10, math.Floor(math.Log10(x)))
	for _, k := range []float64{1, 2, 5} {
		if k*p >= x*(1-1e-9) {
			return k * p
		}
	}
	return 10 * p
}

// ticks are the values that get labels when there is room for n.
func (a axis) ticks(n int) []float64 {
	var out []float64
	step := niceStep((a.hi - a.lo) / float64(max(n, 1)))
	if a.log {
		step = max(math.Ceil((a.hi-a.lo)/float64(max(n, 1))), 1)
	}
	for i := math.Ceil(a.lo/step - 1e-9); i*step <= a.hi+1e-9*step; i++ {
		v := i * step
		if a.log {
			v = math.Pow(10, v)
		}
		out = append(out, v)
	}
	return out
}

// drawPlot draws the curve in n rows from y on: axes with labels at left and
// below, the lot's fan in fine dots, the points as signs over it.
func drawPlot(c *canvas, p Plot, y, n int) {
	ax, ay, ok := p.axes()
	left, right := labels+1, c.width-1
	top, bottom := y+1, y+n-3 // rows of the field
	if !ok || right-left < 10 || bottom <= top {
		c.textIn(0, y, c.width, "no point yet that could be drawn", faint)
		return
	}
	c.textIn(0, y, c.width, "drain current", faint)
	key := "● settled  ○ interpolated  ◆ last"
	if len(p.Fan.X) > 0 {
		key += "  ⠒ lot: median, spread"
	}
	if k := c.width - textWidth(key); k > 16 {
		c.text(k, y, key, faint)
	}
	for r := top; r <= bottom; r++ {
		c.set(labels, r, '│', faint)
	}
	c.set(labels, bottom+1, '└', faint)
	for k := left; k <= right; k++ {
		c.set(k, bottom+1, '─', faint)
	}
	rowOf := func(v float64) int { return bottom - int(math.Round(ay.share(v)*float64(bottom-top))) }
	colOf := func(v float64) int { return left + int(math.Round(ax.share(v)*float64(right-left))) }
	exp := 0
	if !ay.log {
		exp = engineering(ay.hi)
	}
	for _, v := range ay.ticks(max((bottom-top)/2, 3)) {
		if math.IsNaN(ay.share(v)) {
			continue
		}
		text := ""
		if ay.log {
			t, unit := FixedShort(v, "A")
			text = t + " " + unit
		} else {
			text = trimmed(v/math.Pow10(exp)) + " " + prefixed(exp, "A")
		}
		row := rowOf(v)
		c.textIn(max(labels-1-textWidth(text), 0), row, labels-1, text, faint)
		c.set(labels, row, '┤', faint)
	}
	for _, v := range ax.ticks((right - left) / tickEvery) {
		if math.IsNaN(ax.share(v)) {
			continue
		}
		text := trimmed(v)
		k := colOf(v)
		c.set(k, bottom+1, '┴', faint)
		if at := k - textWidth(text)/2; at+textWidth(text) <= c.width-2 {
			c.text(at, bottom+2, text, faint)
		}
	}
	c.text(c.width-1, bottom+2, "V", faint)

	fine := newDots(left, top, right-left+1, bottom-top+1)
	fine.fan(p.Fan, ax, ay)
	fine.draw(c)
	for i, q := range p.Points {
		if math.IsNaN(ax.share(q.X)) || math.IsNaN(ay.share(q.Y)) {
			continue
		}
		sign := '●'
		switch {
		case i == len(p.Points)-1:
			sign = '◆'
		case q.Open:
			sign = '○'
		}
		c.set(colOf(q.X), rowOf(q.Y), sign, curve)
	}
}

// engineering is the power of ten of the prefix for x.
func engineering(x float64) int {
	if x == 0 {
		return 0
	}
	return min(max(int(math.Floor(math.Log10(math.Abs(x))/3+1e-9))*3, -12), 9)
}

// trimmed writes a label without the noise of binary steps.
func trimmed(x float64) string {
	if math.Abs(x) < 1e-12 {
		return "0"
	}
	return strconv.FormatFloat(x, 'g', 6, 64)
}

// dots is a field of Braille characters: two by four dots a place.
type dots struct {
	x, y, w, h int
	bits       []byte
}

func newDots(x, y, w, h int) *dots { return &dots{x, y, w, h, make([]byte, w*h)} }

// dotBits are the bits of the Braille block (U+2800 on) by row and column.
var dotBits = [4][2]byte{{0x01, 0x08}, {0x02, 0x10}, {0x04, 0x20}, {0x40, 0x80}}

// set takes dots from the lower left corner.
func (d *dots) set(col, row int) {
	row = 4*d.h - 1 - row
	if col >= 0 && col < 2*d.w && row >= 0 && row < 4*d.h {
		d.bits[row/4*d.w+col/2] |= dotBits[row%4][col%2]
	}
}

// fan draws the median as a line, low and high as broken ones.
func (d *dots) fan(f Fan, ax, ay axis) {
	n := min(len(f.X), len(f.Low), len(f.Mid), len(f.High))
	for k, ys := range [][]float64{f.Mid[:n], f.Low[:n], f.High[:n]} {
		for col := range 2 * d.w {
			v := ax.lo + (ax.hi-ax.lo)*float64(col)/float64(2*d.w-1)
			s := ay.share(along(f.X[:n], ys, v, ay.log))
			if math.IsNaN(s) || k > 0 && col%4 > 1 {
				continue
			}
			d.set(col, int(math.Round(s*float64(4*d.h-1))))
		}
	}
}

// along reads a curve between its points; NaN outside.
func along(xs, ys []float64, x float64, log bool) float64 {
	for i := 1; i < len(xs); i++ {
		if x < xs[i-1] || x > xs[i] || xs[i] == xs[i-1] {
			continue
		}
		t := (x - xs[i-1]) / (xs[i] - xs[i-1])
		if log && ys[i-1] > 0 && ys[i] > 0 {
			return ys[i-1] * math.Pow(ys[i]/ys[i-1], t)
		}
		return ys[i-1] + t*(ys[i]-ys[i-1])
	}
	return math.NaN()
}

func (d *dots) draw(c *canvas) {
	for i, b := range d.bits {
		if b != 0 {
			c.set(d.x+i%d.w, d.y+i/d.w, 0x2800+rune(b), faint)
		}
	}
}
