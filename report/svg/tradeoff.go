package svg

import (
	"io"
	"math"
	"slices"
	"strconv"

	"gatesill/fit/match"
	"gatesill/report"
)

// TradeOffOptions lay out a plot of sets against tolerance.
type TradeOffOptions struct {
	Frame
	Chosen float64 // V; NaN or 0: none was
	Most   int     // as many sets as there are devices for; 0: not marked
	Size   int     // devices in a set
}

// TradeOff draws how many sets a tolerance gives, the tolerance that was chosen
// marked. Where there may be more sets than were found the mark is hollow.
func TradeOff(w io.Writer, rows []match.TradeOff, o TradeOffOptions) (Drawn, error) {
	b, drawn := AppendTradeOff(nil, rows, o)
	_, err := w.Write(b)
	return drawn, err
}

// AppendTradeOff appends the plot that [TradeOff] writes.
func AppendTradeOff(dst []byte, rows []match.TradeOff, o TradeOffOptions) ([]byte, Drawn) {
	if o.Width <= 0 {
		o.Width = 440
	}
	if o.Height <= 0 {
		o.Height = 250
	}
	c := &canvas{b: dst, f: o.Frame}
	c.l, c.t, c.r, c.d = 54, 16, o.Width-14, o.Height-46
	var drawn Drawn
	var list []match.TradeOff
	for _, t := range rows {
		if t.Within > 0 && drawable(t.Within) && t.Sets >= 0 {
			list = append(list, t)
		} else {
			drawn.Empty++
		}
	}
	slices.SortStableFunc(list, func(a, b match.TradeOff) int {
		switch {
		case a.Within < b.Within:
			return -1
		case a.Within > b.Within:
			return 1
		}
		return 0
	})
	lo, hi, top := 1e-3, 0.1, o.Most
	if len(list) > 0 {
		lo, hi = list[0].Within, list[len(list)-1].Within
	}
	for _, t := range list {
		top = max(top, t.Sets)
	}
	if o.Chosen > 0 && drawable(o.Chosen) {
		lo, hi = min(lo, o.Chosen), max(hi, o.Chosen)
	}
	x := newScale(Logarithmic, lo/1.25, hi*1.25, c.l, c.r)
	y := newScale(Linear, 0, 1.06*float64(max(1, top)), c.d, c.t)
	c.open("img")
	c.grid(&x, &y, toleranceTicks(&x, list), countTicks(max(1, top)))
	c.axisNames("tolerance ("+report.ScaleOf("V", 1e-3).Unit("V")+", logarithmic)", "sets")
	if o.Most > 0 {
		c.rail(&y, float64(o.Most), "ref", "reft", "devices for "+strconv.Itoa(o.Most))
	}
	c.post(&x, o.Chosen, "lim", "limt", "chosen: "+report.FormatGiven(o.Chosen, "V"), true, false)
	if len(list) == 0 {
		c.text("tick", (c.l+c.r)/2, (c.t+c.d)/2, "middle", "No tolerances to compare.")
	}
	var line []place
	var keep []bool
	for i, t := range list {
		line, keep = append(line, place{fineUnits(x.at(t.Within)), fineUnits(y.at(float64(t.Sets))), i == 0}), append(keep, true)
	}
	if len(line) > 0 {
		c.fineGroup()
		c.raw(`<path class="this" d="`)
		c.b = appendPath(c.b, line, keep)
		c.raw(`"/></g>`)
	}
	for _, t := range list {
		words := "within " + report.FormatGiven(t.Within, "V") + ": " + strconv.Itoa(t.Sets) + " sets"
		if t.Sets == 1 {
			words = words[:len(words)-1]
		}
		if !t.Exact {
			words += " or more"
		}
		words += ", " + strconv.Itoa(t.Left) + " left over"
		if drawable(t.Mean) {
			words += ", mean spread " + report.FormatTwoDigits(t.Mean, "V")
		}
		if drawable(t.Imbalance) {
			words += "; two devices that far apart differ by about " + report.FormatTwoDigits(t.Imbalance, "A")
		}
		c.shape(0, x.at(t.Within), y.at(float64(t.Sets)), 4.2, !t.Exact, 0, words)
		drawn.Shown++
	}
	c.close()
	return c.b, drawn
}

// toleranceTicks labels the tolerances themselves, where they are far enough apart.
func toleranceTicks(x *scale, list []match.TradeOff) []tick {
	var ticks []tick
	last := math.Inf(-1)
	for _, t := range list {
		text := strconv.FormatFloat(t.Within*1e3, 'g', 3, 64)
		w := textWidth(text, 13) + 6
		if p := x.at(t.Within); p-last >= w {
			last = p
			ticks = append(ticks, tick{value: t.Within, label: text})
		}
	}
	return ticks
}

// countTicks are whole numbers from 0 to top.
func countTicks(top int) []tick {
	step := max(1, int(niceStep(float64(top)/6)))
	var ticks []tick
	for k := 0; k <= top; k += step {
		ticks = append(ticks, tick{value: float64(k), label: strconv.Itoa(k)})
	}
	return ticks
}
