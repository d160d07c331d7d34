package svg

import (
	"cmp"
	"io"
	"math"
	"slices"
	"strconv"

	"gatesill/report"
)

// Spot is one device on a strip plot.
type Spot struct {
	Name string
	X    float64 // value of the quantity, base unit
	Flag string  // why it is flagged, in a few words; "" when it is not
	Ref  int     // as of [Curve]
}

// Bin is one bin on a strip plot: Low <= value < High.
type Bin struct {
	Name      string
	Low, High float64
}

// StripOptions lay out a strip plot.
type StripOptions struct {
	Frame
	Quantity string   // axis title without unit: "V_GS(th) at 1 mA"
	Unit     string   // base unit: "V"
	Bins     []Bin    // ascending; none: no bins drawn
	Median   float64  // NaN: not marked
	Low      float64  // limits outside which devices are flagged; NaN: not marked
	High     float64  //
	Above    []string // devices that never reach the current: no place on the axis, shown at its far end
	Negative bool     // values of a p-channel part: 'above' lies at the left
}

// Strip draws every device as a mark along the axis of one quantity, marks that
// would cover each other stacked above and below the middle, with the bins,
// the median and the limits. Flagged devices are hollow triangles with their
// names; every mark names its device when pointed at. The same input always
// gives the same picture.
func Strip(w io.Writer, spots []Spot, o StripOptions) (Drawn, error) {
	b, drawn := AppendStrip(nil, spots, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendStrip appends the plot that [Strip] writes.
func AppendStrip(dst []byte, spots []Spot, o StripOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 270
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 20, 30, o.Width-20, o.Height-46
	s := &strip{canvas: c, o: o, why: "flagged: "}
	flagged := s.take(spots)
	s.room()
	s.ranges()
	role := "img"
	if o.Focus > 0 && flagged > 0 {
		role = "group"
	}
	c.open(role)
	s.bins()
	s.axis()
	s.marks()
	if len(s.spots) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No values to draw.")
	} else {
		s.dots()
	}
	s.aboves()
	c.close()
	return c.b, s.drawn
}

type strip struct {
	*canvas
	o     StripOptions
	why   string // before the reason of a flag
	spots []Spot // ascending
	x     scale
	drawn Drawn
}

// take keeps what can be drawn, by value, then by name: the order of the input does
// not matter. It counts the flagged ones.
func (s *strip) take(spots []Spot) (flagged int) {
	for _, p := range spots {
		if !drawable(p.X) {
			s.drawn.Empty++
			continue
		}
		s.spots = append(s.spots, p)
		if p.Flag != "" {
			flagged++
		}
	}
	slices.SortStableFunc(s.spots, func(a, b Spot) int {
		return cmp.Or(cmp.Compare(a.X, b.X), cmp.Compare(a.Name, b.Name))
	})
	return flagged
}

// room leaves place beyond the end of the axis for devices above every value.
func (s *strip) room() {
	if len(s.o.Above) == 0 {
		return
	}
	if s.o.Negative {
		s.l += 92
	} else {
		s.r -= 92
	}
}

// ranges decides the axis: all values, and limits and bin edges near them.
func (s *strip) ranges() {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, p := range s.spots {
		lo, hi = min(lo, p.X), max(hi, p.X)
	}
	if len(s.spots) == 0 && drawable(s.o.Median) {
		lo, hi = s.o.Median, s.o.Median
	}
	lo, hi = widen(lo, hi)
	span := hi - lo
	for _, v := range []float64{s.o.Low, s.o.High, s.o.Median} {
		if drawable(v) && v > lo-span && v < hi+span {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	for _, b := range s.o.Bins {
		for _, v := range []float64{b.Low, b.High} {
			if drawable(v) && v > lo-0.2*span && v < hi+0.2*span {
				lo, hi = min(lo, v), max(hi, v)
			}
		}
	}
	pad := (hi - lo) * 0.02
	s.x = newScale(Linear, lo-pad, hi+pad, s.l, s.r)
}

// inside holds a place within the plotting area.
func (s *strip) inside(x float64) float64 { return max(s.l, min(x, s.r)) }

// bins shades every other bin, marks the edges and names those with room.
func (s *strip) bins() {
	if len(s.o.Bins) == 0 {
		return
	}
	for i, b := range s.o.Bins {
		if !drawable(b.Low) || !drawable(b.High) {
			continue
		}
		x0, x1 := s.inside(s.x.at(b.Low)), s.inside(s.x.at(b.High))
		if x1-x0 < 0.3 {
			continue
		}
		if i%2 == 0 {
			s.raw(`<rect class="band"`)
			s.attr("x", x0)
			s.attr("y", s.t-14)
			s.attr("width", x1-x0)
			s.attr("height", s.d-s.t+14)
			s.raw("/>")
		}
		if name := shorten(b.Name, 8); textWidth(name, 13) < x1-x0-2 {
			s.text("tick", (x0+x1)/2, s.t-18, "middle", escapeRich(name))
		}
	}
	s.raw(`<path class="edge" d="`)
	last := math.Inf(-1)
	for _, b := range s.o.Bins {
		for _, v := range []float64{b.Low, b.High} {
			x := s.x.at(v)
			if !(x >= s.l-0.5 && x <= s.r+0.5) || x-last < 0.5 {
				continue
			}
			last = x
			s.raw("M")
			s.num(x)
			s.raw(" ")
			s.num(s.t - 14)
			s.raw("V")
			s.num(s.d)
		}
	}
	s.raw(`"/>`)
}

// escapeRich keeps an underscore in a name from lowering what follows.
func escapeRich(name string) string {
	b := []rune(name)
	for i, r := range b {
		if r == '_' {
			b[i] = '\uff3f' // full-width low line
		}
	}
	return string(b)
}

func (s *strip) axis() {
	u := report.ScaleOf(s.o.Unit, max(math.Abs(s.x.lo), math.Abs(s.x.hi)))
	ticks := s.x.ticks(80, u)
	s.raw(`<path class="axis" d="M`)
	s.num(s.l)
	s.raw(" ")
	s.num(s.d)
	s.raw("H")
	s.num(s.r)
	for _, k := range ticks {
		s.raw("M")
		s.num(s.x.at(k.value))
		s.raw(" ")
		s.num(s.d)
		s.raw("v5")
	}
	s.raw(`"/>`)
	for _, k := range ticks {
		s.text("tick", s.x.at(k.value), s.d+18, "middle", k.label)
	}
	title := s.o.Quantity
	if unit := u.Unit(s.o.Unit); unit != "" {
		title += " (" + unit + ")"
	}
	s.text("", (s.l+s.r)/2, s.d+38, "middle", title)
}

// marks draws the median and the limits over the whole height, with words.
func (s *strip) marks() {
	for _, m := range []struct {
		x                float64
		line, text, word string
	}{{s.o.Low, "lim", "limt", "limit"}, {s.o.High, "lim", "limt", "limit"}, {s.o.Median, "ref", "reft", "median"}} {
		x := s.x.at(m.x)
		if !drawable(m.x) || !(x >= s.l && x <= s.r) {
			continue
		}
		s.raw(`<path class="`, m.line, `" d="M`)
		s.num(x)
		s.raw(" ")
		s.num(s.t - 12)
		s.raw("V")
		s.num(s.d)
		s.raw(`"/>`)
		w := textWidth(m.word, 12)
		p := label{x + 4, s.t + 1, false}
		if x+w+8 > s.r {
			p = label{x - 4, s.t + 1, true}
		}
		anchor := ""
		b := box{p.x, p.y - 11, p.x + w, p.y + 3}
		if p.right {
			anchor = "end"
			b.x0, b.x1 = p.x-w, p.x
		}
		s.taken = append(s.taken, b)
		s.text(m.text, p.x, p.y, anchor, m.word)
	}
}

// dots draws the marks. Their size is the greatest, within reason, at which the
// fullest stack still fits the height.
func (s *strip) dots() {
	top, bottom := s.t+6, s.d-6
	middle := (top + bottom) / 2
	size, lanes := 9.0, []int(nil)
	for {
		var deepest int
		lanes, deepest = s.stack(size)
		if float64(deepest)*(size*0.92)+size <= bottom-top || size <= 1.5 {
			break
		}
		size *= 0.9
	}
	at := func(i int) (float64, float64) {
		n := lanes[i]
		off := float64((n + 1) / 2)
		if n%2 == 1 {
			off = -off
		}
		return s.x.at(s.spots[i].X), max(top, min(bottom, middle+off*size*0.92))
	}
	s.raw(`<g class="dots"><g stroke-width="`, strconv.FormatFloat(max(size*0.86, 1.4), 'f', 2, 64), `" stroke-opacity="`)
	if len(s.spots) > 250 {
		s.raw(".55")
	} else {
		s.raw(".75")
	}
	s.raw(`">`)
	for i, p := range s.spots {
		if p.Flag != "" {
			continue
		}
		x, y := at(i)
		s.raw(`<path`)
		s.ref(p.Ref)
		s.raw(` d="M`)
		s.num(x)
		s.raw(" ")
		s.num(y)
		s.raw(`h0"><title>`)
		s.words(p.Name)
		s.raw(`</title></path>`)
		s.drawn.Shown++
	}
	s.raw("</g>")
	s.flagged(at, max(size, 7))
	s.raw("</g>")
}

// flagged draws the flagged devices as triangles and writes their names.
func (s *strip) flagged(at func(int) (float64, float64), size float64) {
	type named struct {
		x, y float64
		name string
	}
	var names []named
	k := 0
	for i, p := range s.spots {
		if p.Flag == "" {
			continue
		}
		x, y := at(i)
		r := size * 0.62
		s.raw(`<path class="flag"`)
		s.ref(p.Ref)
		if k < s.f.Focus {
			s.raw(` tabindex="0" role="img" aria-label="`)
			s.words(p.Name + ", " + s.why + p.Flag)
			s.raw(`"`)
		}
		s.raw(` d="M`)
		s.num(x)
		s.raw(" ")
		s.num(y - r)
		s.raw("l")
		s.num(r * 1.05)
		s.raw(" ")
		s.num(r * 1.8)
		s.raw("h")
		s.num(-2.1 * r)
		s.raw(`z"><title>`)
		s.words(p.Name + " (" + s.why + p.Flag + ")")
		s.raw(`</title></path>`)
		s.drawn.Shown++
		k++
		s.taken = append(s.taken, box{x - r, y - r, x + r, y + r})
		names = append(names, named{x, y, shorten(p.Name, 18)})
	}
	for _, n := range names {
		var places []label
		for _, dy := range []float64{-10, 20, -24, 34, -38, 48, -52, 62, -66, 76} {
			w := textWidth(n.name, 12) / 2
			places = append(places, label{n.x - w, n.y + dy, false}, label{n.x + 6, n.y + dy, false}, label{n.x - 6, n.y + dy, true})
		}
		p, ok := s.place(n.name, places)
		if !ok {
			s.drawn.Unlabeled++
			continue
		}
		s.drawn.Labels++
		s.name(p, n.name)
	}
}

// stack gives each mark a lane, 0 the middle, odd ones above, even ones below,
// the first in which it does not touch the mark before it.
func (s *strip) stack(size float64) (lanes []int, deepest int) {
	lanes = make([]int, len(s.spots))
	var last []float64 // right end of each lane
	for i, p := range s.spots {
		x := s.x.at(p.X)
		lane := -1
		for k, end := range last {
			if x >= end {
				lane = k
				break
			}
		}
		if lane < 0 {
			lane = len(last)
			last = append(last, 0)
		}
		last[lane] = x + size
		lanes[i] = lane
		deepest = max(deepest, lane)
	}
	return lanes, deepest
}

// aboves shows the devices that never reach the current beyond the end of the
// axis.
func (s *strip) aboves() {
	n := len(s.o.Above)
	if n == 0 {
		return
	}
	x, arrow := s.r+14.0, "l9 5-9 5z"
	if s.o.Negative {
		x, arrow = 8, "l-9 5 9 5z"
	}
	s.raw(`<path class="edge" d="M`)
	edge := s.r + 6
	if s.o.Negative {
		edge = s.l - 6
	}
	s.num(edge)
	s.raw(" ")
	s.num(s.t - 14)
	s.raw("V")
	s.num(s.d)
	s.raw(`"/>`)
	s.text("tick", x, s.t-2, "", "above: "+strconv.Itoa(n))
	const room = 9
	s.raw(`<g class="dots">`)
	for i, name := range s.o.Above {
		if i == room {
			break
		}
		y := s.t + 10 + float64(i)*18
		s.raw(`<path class="flag" d="M`)
		ax := x
		if s.o.Negative {
			ax += 9
		}
		s.num(ax)
		s.raw(" ")
		s.num(y)
		s.raw(arrow, `"><title>`)
		s.words(name + " (never reaches the current)")
		s.raw(`</title></path>`)
	}
	s.raw("</g>")
	for i, name := range s.o.Above {
		y := s.t + 19 + float64(i)*18
		if i == room {
			s.text("tick", x, y, "", "and "+strconv.Itoa(n-room)+" more")
			break
		}
		s.text("tick", x+14, y, "", escapeRich(shorten(name, 9)))
	}
}
