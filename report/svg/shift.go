package svg

import (
	"io"
	"math"
	"strconv"

	"gatesill/fit/compare"
	"gatesill/report"
)

// ShiftOptions lay out a plot of the gate-voltage shift against current.
type ShiftOptions struct {
	Frame
	Margin float64 // V; NaN: none
	Level  float64 // of the band: 0.95
	Levels []Level // currents to mark
}

// Shift draws the shift of the gate voltage between two lots against the
// current, with its simultaneous band, the line of no shift and the margin.
// Where the band leaves that line out, the mark is a hollow triangle.
func Shift(w io.Writer, points []compare.BandPoint, o ShiftOptions) (Drawn, error) {
	b, drawn := AppendShift(nil, points, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendShift appends the plot that [Shift] writes.
func AppendShift(dst []byte, points []compare.BandPoint, o ShiftOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 320
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 84, 14, o.Width-24, o.Height-46
	s := &shift{canvas: c, o: o}
	for _, p := range points {
		if drawable(p.I) && p.I > tiny && drawable(p.Shift) {
			s.points = append(s.points, p)
		} else {
			s.drawn.Empty++
		}
	}
	s.ranges()
	c.open("img")
	s.draw()
	c.close()
	return c.b, s.drawn
}

type shift struct {
	*canvas
	o      ShiftOptions
	points []compare.BandPoint
	x, y   scale
	drawn  Drawn
}

// ranges decides the axes: the band, no shift, and the margin unless it would
// take most of the picture.
func (s *shift) ranges() {
	a, b := math.Inf(1), math.Inf(-1)
	lo, hi := 0.0, 0.0
	for _, p := range s.points {
		a, b = min(a, p.I), max(b, p.I)
		for _, v := range []float64{p.Shift, p.Low, p.High} {
			if drawable(v) {
				lo, hi = min(lo, v), max(hi, v)
			}
		}
	}
	if !(a <= b) {
		a, b = 1e-3, 1
	}
	if span := hi - lo; s.o.Margin > 0 && (span == 0 || s.o.Margin < 3*span) {
		lo, hi = min(lo, -s.o.Margin), max(hi, s.o.Margin)
	}
	if lo == 0 && hi == 0 {
		lo, hi = -1e-3, 1e-3
	}
	pad := 0.08 * (hi - lo)
	s.y = newScale(Linear, lo-pad, hi+pad, s.d, s.t)
	s.x = newScale(Logarithmic, a/1.25, b*1.25, s.l, s.r)
}

func (s *shift) draw() {
	u := report.ScaleOf("V", max(math.Abs(s.y.lo), math.Abs(s.y.hi)))
	if m := s.o.Margin; m > 0 && drawable(m) {
		if y0, y1 := s.y.at(min(m, s.y.hi)), s.y.at(max(-m, s.y.lo)); y1 > y0 {
			s.rect("room", s.l, y0, s.r, y1)
		}
	}
	s.grid(&s.x, &s.y, s.x.ticks(90, report.Scale{}), s.y.ticks(44, u))
	s.axisNames("drain current (A, logarithmic)", "shift of V_GS ("+u.Unit("V")+")")
	for _, l := range s.o.Levels {
		s.post(&s.x, l.Current, "ref", "reft", l.Label, false, false)
	}
	if m := s.o.Margin; m > 0 {
		s.rail(&s.y, m, "ref", "reft", "margin "+signed(m))
		s.rail(&s.y, -m, "ref", "reft", "margin "+signed(-m))
	}
	s.rail(&s.y, 0, "zero", "", "no shift")
	if len(s.points) == 0 {
		s.text("tick", (s.l+s.r)/2, (s.t+s.d)/2, "middle", "No currents in common.")
		return
	}
	s.band()
}

func (s *shift) band() {
	at := func(i, v float64) [2]int { return [2]int{fineUnits(s.x.at(i)), fineUnits(s.y.at(v))} }
	var outline, back [][2]int
	var line []place
	var keep []bool
	for _, p := range s.points {
		m := at(p.I, p.Shift)
		line, keep = append(line, place{m[0], m[1], len(line) == 0}), append(keep, true)
		if drawable(p.Low) && drawable(p.High) {
			outline, back = append(outline, at(p.I, p.Low)), append(back, at(p.I, p.High))
		}
	}
	s.fineGroup()
	if len(outline) > 1 {
		for i := len(back) - 1; i >= 0; i-- {
			outline = append(outline, back[i])
		}
		s.raw(`<path class="fthis" d="`)
		s.b = appendPolygon(s.b, outline)
		s.raw(`"/>`)
	}
	s.raw(`<path class="this" d="`)
	s.b = appendPath(s.b, line, keep)
	s.raw(`"/></g>`)
	percent := levelWords(s.o.Level, "band")
	for _, p := range s.points {
		x, y := s.x.at(p.I), s.y.at(p.Shift)
		words := "at " + report.FormatGiven(p.I, "A") + ": " + signed(p.Shift)
		out := false
		if drawable(p.Low) && drawable(p.High) {
			words += ", " + percent + " " + signed(p.Low) + " to " + signed(p.High)
			out = p.Low > 0 || p.High < 0
			s.raw(`<path class="span faint" d="`)
			s.upright(x, s.y.at(p.Low), s.y.at(p.High))
			s.raw(`"/>`)
		}
		words += ", n = " + strconv.Itoa(p.Reference) + " and " + strconv.Itoa(p.Candidate)
		if out {
			s.apart(x, y, words+" (0 left out)")
		} else {
			s.mark(candidate, x, y, 4, 0, words)
		}
		s.drawn.Shown++
	}
}

// levelWords is "95 % band", and "band" where the level is not known.
func levelWords(level float64, what string) string {
	if level > 0 && level < 1 {
		return strconv.FormatFloat(100*level, 'g', 4, 64) + " % " + what
	}
	return what
}

// IntervalOptions lay out the plot of one shift with its intervals.
type IntervalOptions struct {
	Frame
	Value, Low, High      float64 // V, at Level
	Level                 float64
	MarginLow, MarginHigh float64 // V, the 90 % interval; NaN: there is no margin
	Margin                float64 // V; NaN: none
}

// Interval draws the shift between two lots with its intervals against no shift
// and the margin.
func Interval(w io.Writer, o IntervalOptions) error {
	_, err := w.Write(AppendInterval(nil, o))
	return err
}

// AppendInterval appends the plot that [Interval] writes.
func AppendInterval(dst []byte, o IntervalOptions) []byte {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 170
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 16, 26, o.Width-16, o.Height-44
	lo, hi := 0.0, 0.0
	for _, v := range []float64{o.Value, o.Low, o.High, o.MarginLow, o.MarginHigh, o.Margin, -o.Margin} {
		if drawable(v) {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	if lo == 0 && hi == 0 {
		lo, hi = -1e-3, 1e-3
	}
	pad := 0.06 * (hi - lo)
	x := newScale(Linear, lo-pad, hi+pad, c.l, c.r)
	c.open("img")
	u := report.ScaleOf("V", max(math.Abs(lo), math.Abs(hi)))
	margin := o.Margin > 0 && drawable(o.Margin)
	if margin {
		c.rect("room", x.at(-o.Margin), c.t, x.at(o.Margin), c.d)
	}
	y := newScale(Linear, 0, 1, c.d, c.t)
	c.grid(&x, &y, x.ticks(80, u), nil)
	c.text("", (c.l+c.r)/2, c.d+38, "middle", "shift, this lot less the reference ("+u.Unit("V")+")")
	for _, m := range []struct {
		v                 float64
		line, text, words string
	}{{0, "zero", "", "no shift"}, {-o.Margin, "ref", "reft", "margin " + signed(-o.Margin)}, {o.Margin, "ref", "reft", "margin " + signed(o.Margin)}} {
		if !drawable(m.v) || m.v != 0 && !margin {
			continue
		}
		p := x.at(m.v)
		c.raw(`<path class="`, m.line, `" d="`)
		c.upright(p, c.t, c.d)
		c.raw(`"/>`)
		w := textWidth(m.words, 12) / 2
		if at, ok := c.place(m.words, []label{{max(c.l, p-w), c.t - 8, false}, {p + 4, c.t - 8, false}, {p - 4, c.t - 8, true}}); ok {
			c.text(m.text+" halo", at.x, at.y, anchorOf(at), m.words)
		}
	}
	percent := levelWords(o.Level, "interval")
	rows := []struct {
		low, high float64
		words     string
		strong    string
	}{{o.Low, o.High, percent, ""}}
	if margin {
		rows = append(rows, rows[0])
		rows[0].low, rows[0].high, rows[0].words, rows[0].strong = o.MarginLow, o.MarginHigh, "90 % interval, held against the margin", " strong"
	} else {
		rows[0].strong = " strong"
	}
	for i, r := range rows {
		h := c.t + (c.d-c.t)*(float64(i)+0.62)/float64(len(rows))
		if drawable(r.low) && drawable(r.high) {
			c.raw(`<path class="span`, r.strong, `" d="`)
			c.level(x.at(r.low), x.at(r.high), h)
			c.upright(x.at(r.low), h-5, h+5)
			c.upright(x.at(r.high), h-5, h+5)
			c.raw(`"><title>`)
			c.words(r.words + ": " + signed(r.low) + " to " + signed(r.high))
			c.raw(`</title></path>`)
		}
		if drawable(o.Value) {
			c.mark(candidate, x.at(o.Value), h, 5, 0, "shift "+signed(o.Value))
			mid := min(max(x.at(o.Value), c.l+textWidth(r.words, 13)/2), c.r-textWidth(r.words, 13)/2)
			c.text("halo", mid, h-11, "middle", r.words)
		}
	}
	if !drawable(o.Value) {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No shift could be had.")
	}
	c.close()
	return c.b
}
