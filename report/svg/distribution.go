package svg

import (
	"io"
	"math"
	"slices"
	"strconv"

	"gatesill/report"
)

// Steps is one lot of a plot of distributions.
type Steps struct {
	Name   string  // of the lot
	Spots  []Spot  // devices with a value; others are left out
	Above  int     // devices that never reach the current: above every value
	Centre float64 // base unit; NaN: not marked
}

// DistributionOptions lay out a plot of distributions.
type DistributionOptions struct {
	Frame
	Quantity string  // axis title without unit
	Unit     string  // base unit: "V"
	Negative bool    // values of a p-channel part: counted from the least negative one, 'above' lies at the left
	Margin   float64 // base unit, about the reference's centre; NaN: none
	Low      float64 // data-sheet limits; NaN: none
	High     float64
}

// mostMarks is up to how many devices of a lot have a mark of their own; larger
// lots are marked at every tenth of their devices.
const mostMarks = 150

// Distribution draws the empirical distributions of two lots over each other:
// for every value the share of the lot's devices that need no more gate
// voltage. Devices that never reach the current count in the share and have no
// step, so that their lot stays below 100 %. The picture is that of all values
// but those much further out than the others; these count as [Drawn].Beyond
// and step at its edge.
func Distribution(w io.Writer, ref, cand Steps, o DistributionOptions) (Drawn, error) {
	b, drawn := AppendDistribution(nil, ref, cand, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendDistribution appends the plot that [Distribution] writes.
func AppendDistribution(dst []byte, ref, cand Steps, o DistributionOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 400
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 66, 52, o.Width-16, o.Height-46
	d := &distribution{canvas: c, o: o, lots: [2]Steps{ref, cand}}
	for s := range d.lots {
		d.sort(side(s))
	}
	d.ranges()
	c.open("img")
	d.axes()
	var words [2]string
	for s := range d.lots {
		words[s] = lotWords(d.lots[s].Name, side(s), len(d.lots[s].Spots), d.lots[s].Above)
	}
	c.legend(words)
	d.posts(ref.Centre)
	for s := range d.lots {
		d.steps(side(s))
	}
	for s := range d.lots {
		d.marks(side(s))
	}
	if d.drawn.Shown == 0 && ref.Above+cand.Above == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No values to draw.")
	}
	c.close()
	return c.b, d.drawn
}

type distribution struct {
	*canvas
	o     DistributionOptions
	lots  [2]Steps // spots that can be drawn, in the order in which they are counted
	x, y  scale
	drawn Drawn
}

// sort takes the values that can be drawn in the order in which they are
// counted, by name where they are equal.
func (d *distribution) sort(s side) {
	var list []Spot
	for _, p := range d.lots[s].Spots {
		if !drawable(p.X) {
			d.drawn.Empty++
			continue
		}
		list = append(list, p)
	}
	slices.SortStableFunc(list, func(a, b Spot) int {
		x, y := a.X, b.X
		if d.o.Negative {
			x, y = y, x
		}
		switch {
		case x < y:
			return -1
		case x > y:
			return 1
		case a.Name < b.Name:
			return -1
		case a.Name > b.Name:
			return 1
		}
		return 0
	})
	d.lots[s].Spots = list
}

func (d *distribution) ranges() {
	lo, hi := math.Inf(1), math.Inf(-1)
	for s := range d.lots {
		list := d.lots[s].Spots
		if len(list) == 0 {
			continue
		}
		n := len(list) - 1
		first, last := list[0].X, list[n].X
		a, b := list[n/20].X, list[n-n/20].X
		if n >= 7 && n < 20 { // small lots: their ends aside
			a, b = list[1].X, list[n-1].X
		}
		first, last = min(first, last), max(first, last)
		a, b = min(a, b), max(a, b)
		room := 0.75 * (b - a)
		lo, hi = min(lo, max(first, a-room)), max(hi, min(last, b+room))
	}
	lo, hi = widen(lo, hi)
	span := hi - lo
	c := d.lots[reference].Centre
	for _, v := range []float64{d.o.Low, d.o.High, c - d.o.Margin, c + d.o.Margin, c, d.lots[candidate].Centre} {
		if drawable(v) && v > lo-span && v < hi+span {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	pad := (hi - lo) * 0.05
	d.x = newScale(Linear, lo-pad, hi+pad, d.l, d.r)
	d.y = newScale(Linear, 0, 1, d.d, d.t+8)
}

func (d *distribution) axes() {
	u := report.ScaleOf(d.o.Unit, max(math.Abs(d.x.lo), math.Abs(d.x.hi)))
	c, m := d.lots[reference].Centre, d.o.Margin
	if drawable(c) && m > 0 && drawable(m) {
		if x0, x1 := d.inside(d.x.at(c-m)), d.inside(d.x.at(c+m)); x1 > x0 {
			d.rect("room", x0, d.t, x1, d.d)
		}
	}
	var ys []tick
	for k := range 5 {
		ys = append(ys, tick{value: float64(k) / 4, label: strconv.Itoa(25*k) + " %"})
	}
	d.grid(&d.x, &d.y, d.x.ticks(80, u), ys)
	title := d.o.Quantity
	if unit := u.Unit(d.o.Unit); unit != "" {
		title += " (" + unit + ")"
	}
	share := "share of devices at or below"
	if d.o.Negative {
		share = "share of devices at or above"
	}
	d.axisNames(title, share)
}

// posts marks the margin about the reference's centre and the limits, each with
// its words where the lines of the lots do not run.
func (d *distribution) posts(centre float64) {
	if m := d.o.Margin; m > 0 {
		d.post(&d.x, centre-m, "ref", "reft", "margin "+signed(-m), d.o.Negative, true)
		d.post(&d.x, centre+m, "ref", "reft", "margin "+signed(m), !d.o.Negative, false)
	}
	d.post(&d.x, d.o.Low, "lim", "limt", "lower limit", d.o.Negative, true)
	d.post(&d.x, d.o.High, "lim", "limt", "upper limit", !d.o.Negative, false)
}

// share is how high the line stands behind the first k devices of a lot.
func (d *distribution) share(s side, k int) float64 {
	return d.y.at(float64(k) / float64(max(1, len(d.lots[s].Spots)+d.lots[s].Above)))
}

// steps draws the line of a lot. In whole fine units it has no more steps than
// the picture has places, however many devices there are.
func (d *distribution) steps(s side) {
	list := d.lots[s].Spots
	from, to := fineUnits(d.l), fineUnits(d.r)
	if d.o.Negative {
		from, to = to, from
	}
	if len(list)+d.lots[s].Above == 0 {
		return
	}
	x, y := from, fineUnits(d.d)
	d.fineGroup()
	d.raw(`<path class="`, s.class(), `" d="M`)
	d.b = strconv.AppendInt(d.b, int64(x), 10)
	d.b = appendNext(d.b, y)
	for i, p := range list {
		px, py := fineUnits(d.inside(d.x.at(p.X))), fineUnits(d.share(s, i+1))
		if i+1 < len(list) && (py == y || fineUnits(d.inside(d.x.at(list[i+1].X))) == px) {
			continue // goes up with the next
		}
		if px != x {
			d.b = append(d.b, 'h')
			d.b = strconv.AppendInt(d.b, int64(px-x), 10)
		}
		if py != y {
			d.b = append(d.b, 'v')
			d.b = strconv.AppendInt(d.b, int64(py-y), 10)
		}
		x, y = px, py
	}
	d.b = append(d.b, 'h')
	d.b = strconv.AppendInt(d.b, int64(to-x), 10)
	d.raw(`"><title>`)
	d.words("lot " + d.lots[s].Name)
	d.raw(`</title></path></g>`)
	if n := d.lots[s].Above; n > 0 {
		d.beyond(s, float64(y)/fine, n)
	}
}

// beyond ends the line of a lot with a tip: there are devices further on.
func (d *distribution) beyond(s side, y float64, n int) {
	x, tip := d.r, "l-9 5v-10z"
	if d.o.Negative {
		x, tip = d.l, "l9 5v-10z"
	}
	d.raw(`<path class="m`, s.class(), `" d="M`)
	d.num(x)
	d.raw(" ")
	d.num(y)
	d.raw(tip, `"><title>`)
	d.words(d.lots[s].Name + ": " + strconv.Itoa(n) + " above, whose gate voltage is not known")
	d.raw(`</title></path>`)
}

// marks draws a mark for every device of a small lot and for every tenth of a
// large one.
func (d *distribution) marks(s side) {
	list := d.lots[s].Spots
	d.drawn.Shown += len(list)
	for _, p := range list {
		if p.X < d.x.lo || p.X > d.x.hi {
			d.drawn.Beyond++
		}
	}
	lot := d.lots[s].Name
	if len(list) > mostMarks {
		all := len(list) + d.lots[s].Above
		for k := 1; k <= 9; k++ {
			n := (k*all + 9) / 10
			if n > len(list) || list[n-1].X < d.x.lo || list[n-1].X > d.x.hi {
				continue
			}
			d.mark(s, d.x.at(list[n-1].X), d.share(s, n), 4, 0, lot+": "+strconv.Itoa(10*k)+" % of "+strconv.Itoa(all)+" devices need no more than "+report.FormatPlain(list[n-1].X, math.NaN(), d.o.Unit))
		}
	} else {
		r := 3.6
		switch {
		case len(list) > 90:
			r = 1.6
		case len(list) > 40:
			r = 2.4
		}
		for i, p := range list {
			if p.X < d.x.lo || p.X > d.x.hi {
				continue
			}
			words := p.Name + " of " + lot + ": " + report.FormatPlain(p.X, math.NaN(), d.o.Unit)
			if p.Flag != "" {
				words += " (flagged: " + p.Flag + ")"
			}
			d.mark(s, d.x.at(p.X), d.share(s, i+1), r, p.Ref, words)
		}
	}
	c := d.lots[s].Centre
	if x := d.x.at(c); drawable(c) && x >= d.l && x <= d.r {
		d.mark(s, x, d.d, 5.5, 0, "centre of "+lot+": "+report.FormatPlain(c, math.NaN(), d.o.Unit))
	}
}
