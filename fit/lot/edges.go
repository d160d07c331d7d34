package lot

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// rangeEdges warns where the devices of a lot were read on different ranges of one
// meter at the current compared: the gain and offset of a range are common to all
// that is read on it and cancel between devices, those of two ranges do not.
//
// The size told is the greatest step that the statements of both ranges allow between
// them: their sum at the top of the lower one, for a current over the slope of the
// devices. Gate voltages only; devices without a value do not count. Source: common
// practice, no source. Checked: TestRangeEdge.
func rangeEdges(devs []Device, by fit.Key) []fit.Warning {
	name := "V_GS(th)"
	switch by {
	case fit.KeyVgsth:
	case fit.KeyVgsIdle:
		name = "gate bias at the idle current"
	default:
		return nil
	}
	var gates, currents []fit.Accuracy
	var per []float64
	meter := ""
	for i := range devs {
		d := &devs[i]
		if x, _ := valueOf(&d.Result, by); !counts(d) || math.IsNaN(x) {
			continue
		}
		on := d.Result.ReadTest
		if by == fit.KeyVgsIdle {
			on = d.Result.ReadIdle
		}
		gates, currents, meter = append(gates, on.Gate), append(currents, on.Current), on.Meter
		if !math.IsNaN(on.PerCurrent) {
			per = append(per, on.PerCurrent)
		}
	}
	var out []fit.Warning
	if e, ok := edgeOf(gates); ok {
		out = append(out, fit.Warning{Code: fit.CodeRangeEdge, Text: fmt.Sprintf("%s: %s; the statements allow a step of %s there.",
			name, e.words("gate meter", "V"), millivolts(e.step))})
	}
	if e, ok := edgeOf(currents); ok {
		share := e.step / e.low.Top
		size := fmt.Sprintf("%.2g %% of current", 100*share)
		if len(per) > 0 {
			size += ", " + millivolts(share*math.Abs(stats.Median(per)))
		}
		out = append(out, fit.Warning{Code: fit.CodeRangeEdge, Text: fmt.Sprintf("%s: %s; the statements allow a step of %s there.",
			name, e.words(meter, "A"), size)})
	}
	return out
}

// edge is the edge between two ranges on which the devices of a lot were read.
type edge struct {
	low, high   fit.Accuracy
	below, over int     // devices on either
	step        float64 // unit of the readings
}

// edgeOf finds the lowest edge between the ranges used; false where there is none, or
// a range has no statement or no top.
func edgeOf(used []fit.Accuracy) (e edge, ok bool) {
	for _, a := range used {
		if math.IsNaN(a.Stated(0)) || !(a.Top > 0) || math.IsInf(a.Top, 0) {
			return e, false
		}
		if e.below == 0 || a.Top < e.low.Top {
			e.low, e.below = a, 1
		}
	}
	e.below = 0
	for _, a := range used {
		switch {
		case a.Top == e.low.Top:
			e.below++
		case e.over == 0 || a.Top < e.high.Top:
			e.high = a
			e.over++
		default:
			e.over++
		}
	}
	e.step = e.low.Stated(e.low.Top) + e.high.Stated(e.low.Top)
	return e, e.over > 0
}

func (e edge) words(meter, unit string) string {
	return fmt.Sprintf("%s read on the %s's range to %.4g %s, %d on a higher one", devicesWere(e.below), meter, e.low.Top, unit, e.over)
}

func devicesWere(n int) string {
	if n == 1 {
		return "1 device was"
	}
	return fmt.Sprintf("%d devices were", n)
}
