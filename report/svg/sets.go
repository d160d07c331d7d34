package svg

import (
	"cmp"
	"io"
	"math"
	"slices"
	"strconv"

	"gatesill/report"
)

// Mate is one device of a set on the axis.
type Mate struct {
	Name   string
	X      float64 // value of the quantity, base unit
	Hollow bool    // of the other channel, in complementary sets
	Ref    int     // as of [Curve]
}

// Group is one set on the axis.
type Group struct {
	Name  string // beside its marks; short
	Mates []Mate
	Note  string // said when it is pointed at, besides its name and devices
	Apart bool   // beyond a tolerance: dashed, in the second colour
}

// SetsOptions lay out a plot of sets.
type SetsOptions struct {
	Frame
	Quantity string  // axis title without unit
	Unit     string  // base unit
	Left     []Mate  // devices in no set
	Within   float64 // base unit: the tolerance, drawn to scale in the corner; 0 or NaN: none
}

// Sets draws sets along the axis of one quantity, each as marks on a bar from its
// least to its greatest value, with its name beside it and a shape that its
// neighbours do not have; sets that would cover each other stand in rows of their
// own. Devices in no set are crosses in a row below. Where there are more sets than
// room, the widest are drawn and the others are strokes on the axis: Drawn.Labels
// counts the ones drawn, Drawn.Unlabeled the others, Drawn.Beyond the devices in no
// set whose names found no room.
func Sets(w io.Writer, groups []Group, o SetsOptions) (Drawn, error) {
	b, drawn := AppendSets(nil, groups, o)
	_, err := w.Write(b)
	return drawn, err
}

const (
	setRow      = 18.0 // px, height of a row
	mostSetRows = 20
	shapeCount  = 6
)

// AppendSets appends the plot that [Sets] writes.
func AppendSets(dst []byte, groups []Group, o SetsOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	c := &canvas{b: dst, f: o.Frame}
	s := &sets{canvas: c, o: o}
	c.l, c.t, c.r = 24, 30, o.Width-24
	for _, g := range groups {
		g.Mates = slices.DeleteFunc(slices.Clone(g.Mates), func(m Mate) bool { return !drawable(m.X) })
		if len(g.Mates) == 0 {
			s.drawn.Empty++
			continue
		}
		slices.SortStableFunc(g.Mates, func(a, b Mate) int { return cmp.Compare(a.X, b.X) })
		s.groups = append(s.groups, g)
	}
	for _, m := range o.Left {
		if drawable(m.X) {
			s.left = append(s.left, m)
		}
	}
	slices.SortStableFunc(s.left, func(a, b Mate) int { return cmp.Compare(a.X, b.X) })
	s.ranges()
	rows := s.pack()
	s.foot = c.t + math.Max(2, float64(rows))*setRow + 4
	c.d = s.foot
	if len(s.left) > 0 {
		c.d += 56
	}
	c.f.Height = c.d + 46
	c.open("img")
	s.axis()
	s.tolerance()
	if len(s.groups)+len(s.left) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No sets to draw.")
	}
	s.rug()
	for _, p := range s.placed {
		s.group(p)
	}
	s.leftOver()
	c.close()
	return c.b, s.drawn
}

type sets struct {
	*canvas
	o      SetsOptions
	groups []Group
	left   []Mate
	placed []placedGroup
	rest   []Group // drawn as strokes only
	x      scale
	foot   float64 // below the last row of sets
	drawn  Drawn
}

type placedGroup struct {
	Group
	row   int
	shape int // of its marks
}

func (g *Group) width() float64 { return g.Mates[len(g.Mates)-1].X - g.Mates[0].X }

func (s *sets) ranges() {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, g := range s.groups {
		lo, hi = min(lo, g.Mates[0].X), max(hi, g.Mates[len(g.Mates)-1].X)
	}
	for _, m := range s.left {
		lo, hi = min(lo, m.X), max(hi, m.X)
	}
	lo, hi = widen(lo, hi)
	pad := 0.02 * (hi - lo)
	s.x = newScale(Linear, lo-pad, hi+pad, s.l, s.r-10)
}

// pack gives each set a row, the first in which it and its name have room, and
// keeps the widest sets when there are too many.
func (s *sets) pack() int {
	order := slices.Clone(s.groups)
	slices.SortStableFunc(order, func(a, b Group) int { return cmp.Compare(b.width(), a.width()) })
	for keep := len(order); ; keep = keep * 4 / 5 {
		chosen := slices.Clone(order[:keep])
		slices.SortStableFunc(chosen, func(a, b Group) int { return cmp.Compare(a.Mates[0].X, b.Mates[0].X) })
		s.placed = s.placed[:0]
		var ends []float64
		for i, g := range chosen {
			from := s.x.at(g.Mates[0].X) - 7
			to := s.x.at(g.Mates[len(g.Mates)-1].X) + 10 + textWidth(shorten(g.Name, 12), 12)
			if to > s.r { // the name stands to the left
				from, to = from-textWidth(shorten(g.Name, 12), 12)-4, to-textWidth(shorten(g.Name, 12), 12)
			}
			row := slices.IndexFunc(ends, func(e float64) bool { return from >= e })
			if row < 0 {
				row = len(ends)
				ends = append(ends, 0)
			}
			ends[row] = to
			s.placed = append(s.placed, placedGroup{g, row, i % shapeCount})
		}
		if len(ends) <= mostSetRows || keep < 2 {
			s.rest = order[keep:]
			s.drawn.Unlabeled = len(s.rest)
			return len(ends)
		}
	}
}

func (s *sets) axis() {
	u := report.ScaleOf(s.o.Unit, max(math.Abs(s.x.lo), math.Abs(s.x.hi)))
	s.raw(`<path class="grid" d="`)
	ticks := s.x.ticks(80, u)
	for _, k := range ticks {
		s.upright(s.x.at(k.value), s.t-6, s.d)
	}
	s.raw(`"/><path class="axis" d="`)
	s.level(s.l, s.r, s.d)
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

// tolerance draws the tolerance to scale.
func (s *sets) tolerance() {
	w := s.o.Within
	if !(w > 0) || !drawable(w) {
		return
	}
	px := w * s.x.b
	if px > (s.r-s.l)*0.6 {
		return
	}
	words := "tolerance " + report.FormatGiven(w, s.o.Unit)
	x := s.r - textWidth(words, 12) - px - 10
	s.raw(`<path class="rule" d="`)
	s.level(x, x+px, 13)
	s.upright(x, 9, 17)
	s.upright(x+px, 9, 17)
	s.raw(`"/>`)
	s.text("reft", x+px+7, 17, "", words)
}

// rug is a stroke on the axis for each device of a set that is not drawn.
func (s *sets) rug() {
	if len(s.rest) == 0 {
		return
	}
	at := map[int]bool{}
	for _, g := range s.rest {
		for _, m := range g.Mates {
			at[int(math.Round(s.x.at(m.X)*2))] = true
		}
	}
	places := make([]int, 0, len(at))
	for x := range at {
		places = append(places, x)
	}
	slices.Sort(places)
	s.raw(`<path class="edge" d="`)
	for _, x := range places {
		s.upright(float64(x)/2, s.foot-6, s.foot)
	}
	s.raw(`"/>`)
}

func (s *sets) group(p placedGroup) {
	y := s.t + (float64(p.row)+0.5)*setRow
	x0, x1 := s.x.at(p.Mates[0].X), s.x.at(p.Mates[len(p.Mates)-1].X)
	class := "bar"
	if p.Apart {
		class = "bar apart"
	}
	s.raw(`<g class="grp"><path class="`, class, `" d="`)
	s.level(x0-5, x1+5, y)
	s.raw(`"><title>`)
	s.words("set " + p.Name + s.names(p.Mates))
	if p.Note != "" {
		s.words(": " + p.Note)
	}
	s.raw(`</title></path>`)
	last, side := math.Inf(-1), 0.0
	for _, m := range p.Mates {
		x := s.x.at(m.X)
		switch { // marks that would cover each other stand above and below the bar
		case x-last > 7.5:
			side = 0
		case side <= 0:
			side = 4
		default:
			side = -4
		}
		last = x
		s.shape(p.shape, x, y+side, 3.6, m.Hollow, m.Ref, m.Name+" in set "+p.Name+": "+report.FormatPlain(m.X, math.NaN(), s.o.Unit))
		s.drawn.Shown++
	}
	s.drawn.Labels++
	name := shorten(p.Name, 12)
	if x1+10+textWidth(name, 12) > s.r {
		s.text("gname", x0-9, y+4, "end", escapeRich(name))
	} else {
		s.text("gname", x1+9, y+4, "", escapeRich(name))
	}
	s.raw(`</g>`)
}

// names lists the devices of a set.
func (s *sets) names(mates []Mate) string {
	text := ""
	for i, m := range mates {
		if i == 8 {
			return text + " and " + strconv.Itoa(len(mates)-i) + " more"
		}
		text += map[bool]string{true: " of ", false: ", "}[i == 0] + m.Name
	}
	return text
}

// shape draws the mark of a set: round, square, diamond, triangle up, triangle
// down, cross.
func (c *canvas) shape(kind int, x, y, r float64, hollow bool, ref int, words string) {
	class := "mthis"
	if hollow {
		class = "mhollow"
	}
	d := func(k float64) string { return strconv.FormatFloat(math.Round(10*k*r)/10, 'f', -1, 64) }
	path := ""
	switch ((kind % shapeCount) + shapeCount) % shapeCount {
	case 0:
		x -= r
		path = "a" + d(1) + " " + d(1) + " 0 1 0 " + d(2) + " 0a" + d(1) + " " + d(1) + " 0 1 0 -" + d(2) + " 0z"
	case 1:
		x, y = x-0.9*r, y-0.9*r
		path = "h" + d(1.8) + "v" + d(1.8) + "h-" + d(1.8) + "z"
	case 2:
		y -= 1.3 * r
		path = "l" + d(1.3) + " " + d(1.3) + "l-" + d(1.3) + " " + d(1.3) + "l-" + d(1.3) + " -" + d(1.3) + "z"
	case 3:
		y -= 1.2 * r
		path = "l" + d(1.25) + " " + d(2.1) + "h-" + d(2.5) + "z"
	case 4:
		y += 1.2 * r
		path = "l" + d(1.25) + " -" + d(2.1) + "h-" + d(2.5) + "z"
	case 5:
		x, y = x-0.42*r, y-1.25*r
		a, b := d(0.84), d(0.83)
		path = "h" + a + "v" + b + "h" + b + "v" + a + "h-" + b + "v" + b + "h-" + a + "v-" + b + "h-" + b + "v-" + a + "h" + b + "z"
	}
	c.raw(`<path class="`, class, `"`)
	c.ref(ref)
	c.raw(` d="M`)
	c.num(x)
	c.raw(" ")
	c.num(y)
	c.raw(path, `">`)
	if words != "" {
		c.raw(`<title>`)
		c.words(words)
		c.raw(`</title>`)
	}
	c.raw(`</path>`)
}

// mostLeftNames is up to how many devices in no set are named in the picture.
const mostLeftNames = 60

func (s *sets) leftOver() {
	if len(s.left) == 0 {
		return
	}
	s.raw(`<path class="axis" stroke-dasharray="2 3" d="`)
	s.level(s.l, s.r, s.foot+1)
	s.raw(`"/>`)
	words := "in no set: " + strconv.Itoa(len(s.left))
	s.text("tick halo", s.l, s.foot+14, "", words)
	s.taken = append(s.taken, box{s.l, s.foot + 2, s.l + textWidth(words, 13) + 4, s.foot + 18})
	s.raw(`<g class="left">`)
	type mark struct{ x, y float64 }
	var marks []mark
	var ends []float64
	for _, m := range s.left {
		x := s.x.at(m.X)
		row := slices.IndexFunc(ends, func(e float64) bool { return x >= e })
		if row < 0 && len(ends) < 4 {
			row = len(ends)
			ends = append(ends, 0)
		}
		row = max(0, row)
		ends[row] = x + 9
		y := s.d - 8 - float64(row)*10
		s.raw(`<path`)
		s.ref(m.Ref)
		s.raw(` d="M`)
		s.num(x - 3.5)
		s.raw(" ")
		s.num(y - 3.5)
		s.raw(`l7 7m0-7l-7 7"><title>`)
		s.words(m.Name + ", in no set: " + report.FormatPlain(m.X, math.NaN(), s.o.Unit))
		s.raw(`</title></path>`)
		s.taken = append(s.taken, box{x - 4, y - 4, x + 4, y + 4})
		marks = append(marks, mark{x, y})
	}
	s.raw(`</g>`)
	for i, m := range s.left {
		name := shorten(m.Name, 14)
		x, y := marks[i].x, marks[i].y
		w := textWidth(name, 12) / 2
		var places []label
		for _, dy := range []float64{-7, -20, -33} {
			places = append(places, label{x - w, y + dy, false}, label{x + 6, y + dy, false}, label{x - 6, y + dy, true})
		}
		places = append(places, label{x + 7, y + 4, false}, label{x - 7, y + 4, true})
		places = slices.DeleteFunc(places, func(p label) bool { return p.y-10 < s.foot+2 })
		p, ok := label{}, false
		if i < mostLeftNames {
			p, ok = s.place(name, places)
		}
		if !ok {
			s.drawn.Beyond++
			continue
		}
		s.text("tick halo", p.x, p.y, anchorOf(p), escapeRich(name))
	}
}
