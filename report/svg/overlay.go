package svg

import (
	"io"
	"math"
	"strconv"

	"gatesill/report"
)

// Fan is the transfer curves of one lot: at each current the middle and the
// range of the gate voltages of its devices. The slices have one length; an
// entry that is not finite is a gap.
type Fan struct {
	Name      string    // of the lot
	N         int       // devices with a curve
	Currents  []float64 // A, magnitudes, ascending
	Middle    []float64 // V, median, with its sign
	Low, High []float64 // V, least and greatest, or what else [OverlayOptions] says
	Count     []int     // devices that reach the current
	Curves    []Curve   // single curves drawn thin behind; none: the range is shaded instead
}

// OverlayOptions lay out the transfer curves of two lots.
type OverlayOptions struct {
	Frame
	Axis     Axis
	PChannel bool // as of [TransferOptions]
	Levels   []Level
}

// Overlay draws the transfer curves of two lots over each other: the medians
// as thick lines with a mark at each current, behind them the single curves or
// the range of the lot.
func Overlay(w io.Writer, ref, cand Fan, o OverlayOptions) (Drawn, error) {
	b, drawn := AppendOverlay(nil, ref, cand, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendOverlay appends the plot that [Overlay] writes.
func AppendOverlay(dst []byte, ref, cand Fan, o OverlayOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 880
	}
	if o.Height <= 0 {
		o.Height = 460
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 84, 52, o.Width-16, o.Height-46
	v := &overlay{transfer: &transfer{canvas: c, o: TransferOptions(o), sign: 1}, fans: [2]Fan{ref, cand}}
	if o.PChannel {
		v.sign = -1
	}
	for s := range v.fans {
		v.curves = append(v.curves, v.fans[s].Curves...)
		for _, x := range [][]float64{v.fans[s].Middle, v.fans[s].Low, v.fans[s].High} {
			v.curves = append(v.curves, Curve{X: x, Y: v.signed(v.fans[s].Currents)})
		}
	}
	v.ranges()
	c.open("img")
	v.axes()
	// The medians begin at the one edge of the picture: beside their foot, on the
	// side to which they rise, there is room.
	v.levelsRight = !o.PChannel
	v.levels()
	var words [2]string
	for s := range v.fans {
		words[s] = lotWords(v.fans[s].Name, side(s), v.fans[s].N, 0)
	}
	c.legend(words)
	v.lots()
	if v.drawn.Shown == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No curves to draw.")
	}
	c.close()
	return c.b, v.drawn
}

type overlay struct {
	*transfer
	fans [2]Fan
}

// signed gives currents the sign of the part.
func (v *overlay) signed(currents []float64) []float64 {
	out := make([]float64, len(currents))
	for i, x := range currents {
		out[i] = v.sign * x
	}
	return out
}

func (v *overlay) lots() {
	clip := safeID(v.f.ID) + "-c"
	v.raw(`<clipPath id="`, clip, `"><path d="M`)
	v.num(v.l)
	v.raw(" ")
	v.num(v.t - 6)
	v.raw("H")
	v.num(v.r)
	v.raw("V")
	v.num(v.d + 4)
	v.raw("H")
	v.num(v.l)
	v.raw(`z"/></clipPath><g clip-path="url(#`, clip, `)">`)
	v.fineGroup()
	for s := range v.fans {
		if len(v.fans[s].Curves) == 0 {
			v.shade(side(s))
		}
	}
	for s := range v.fans {
		for i := range v.fans[s].Curves {
			v.line(side(s), &v.fans[s].Curves[i], " thin")
		}
	}
	for s := range v.fans {
		f := &v.fans[s]
		v.line(side(s), &Curve{Name: "median of lot " + f.Name, X: f.Middle, Y: v.signed(f.Currents)}, "")
	}
	v.raw("</g></g>")
	for s := range v.fans {
		v.dots(side(s))
	}
}

// line draws one curve in the style of its lot.
func (v *overlay) line(s side, cv *Curve, more string) {
	if !v.path(cv) {
		v.drawn.Empty++
		return
	}
	v.drawn.Shown++
	v.raw(`<path class="`, s.class(), more, `"`)
	v.ref(cv.Ref)
	v.raw(` d="`)
	v.b = appendPath(v.b, v.points, v.keep)
	v.raw(`"><title>`)
	v.words(cv.Name)
	v.raw(`</title></path>`)
}

// shade fills the range of a lot, in pieces where there are gaps.
func (v *overlay) shade(s side) {
	f := &v.fans[s]
	var low, high [][2]int
	flush := func() {
		if len(low) > 1 {
			for i := len(high) - 1; i >= 0; i-- {
				low = append(low, high[i])
			}
			v.raw(`<path class="f`, s.class(), `" d="`)
			v.b = appendPolygon(v.b, low)
			v.raw(`"/>`)
		}
		low, high = nil, nil
	}
	for i := range min(len(f.Currents), len(f.Low), len(f.High)) {
		y := f.Currents[i]
		if !drawable(f.Low[i]) || !drawable(f.High[i]) || !drawable(y) || v.o.Axis == Logarithmic && !(y >= v.y.lo*(1-1e-9)) {
			flush()
			continue
		}
		py := fineUnits(v.y.at(y))
		low, high = append(low, [2]int{fineUnits(v.x.at(f.Low[i])), py}), append(high, [2]int{fineUnits(v.x.at(f.High[i])), py})
	}
	flush()
}

// dots marks the median at each current and says what it is.
func (v *overlay) dots(s side) {
	f := &v.fans[s]
	lx, ly := math.Inf(-1), math.Inf(-1)
	for i := range min(len(f.Currents), len(f.Middle)) {
		if !drawable(f.Middle[i]) || !drawable(f.Currents[i]) {
			continue
		}
		x, y := v.x.at(f.Middle[i]), v.y.at(f.Currents[i])
		if !(x >= v.l && x <= v.r && y >= v.t && y <= v.d) {
			continue
		}
		if math.Hypot(x-lx, y-ly) < 9 {
			continue // the marks would run together; the line goes on
		}
		lx, ly = x, y
		words := f.Name + " at " + report.FormatGiven(f.Currents[i], "A") + ": median " + volts(f.Middle[i])
		if i < len(f.Low) && i < len(f.High) && drawable(f.Low[i]) && drawable(f.High[i]) {
			words += ", " + volts(math.Min(f.Low[i], f.High[i])) + " to " + volts(math.Max(f.Low[i], f.High[i]))
		}
		if i < len(f.Count) {
			words += ", n = " + strconv.Itoa(f.Count[i])
		}
		v.mark(s, x, y, 3.6, 0, words)
	}
}
