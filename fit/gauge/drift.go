package gauge

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gatesill/fit/stats"
)

const (
	// fewestInOrder is how many values of devices that were measured once each may
	// tell of a drift: below, the rank correlation cannot fall under 1 %.
	fewestInOrder = 8
	// mostInOrder is how many of them are looked at: the time grows with the square.
	mostInOrder = 1500
	// fewestDriftDF is how many degrees of freedom a slope needs at least.
	fewestDriftDF = 3
)

// DriftsOf looks for a change of the readings along each sitting.
//
// Where devices were put in again: the slope of value on place within the
// devices, by least squares, s² with N - devices - 1 degrees of freedom, interval
// and p by Student's t. Otherwise the values of the devices in their order: the
// median of the slopes of all pairs with the interval that belongs to the rank
// correlation, and its p; that may be the order of the parts as well. pAdjusted is p
// times the number of sittings looked at.
//
// The first device of a sitting put in again in its last fifth: its change
// against 2·√2·u, u the repeatability; where that is not known nothing follows.
//
// Inputs: measurings in any order, not modified; those without a value are left
// out. Source: H. Theil (1950) and P. K. Sen, J. Am. Stat. Assoc. 63 (1968)
// 1379-1389; M. G. Kendall, Biometrika 30 (1938) 81 (from memory). Checked:
// TestDriftByHand, TestDriftFalseAlarms.
func DriftsOf(ms []Measuring, r Repeatability) []Drift {
	bySitting := map[string][]Measuring{}
	var sittings []string
	for _, m := range withValue(ms) {
		if _, ok := bySitting[m.Sitting]; !ok {
			sittings = append(sittings, m.Sitting)
		}
		bySitting[m.Sitting] = append(bySitting[m.Sitting], m)
	}
	var out []Drift
	tried := 0
	for _, s := range sittings {
		list := bySitting[s]
		slices.SortStableFunc(list, func(a, b Measuring) int { return cmp.Compare(a.Place, b.Place) })
		d := driftIn(list)
		d.Sitting, d.First = s, firstAgain(list, r)
		if !math.IsNaN(d.P) {
			tried++
		}
		if !math.IsNaN(d.P) || d.First != nil {
			out = append(out, d)
		}
	}
	for i := range out {
		out[i].PAdjusted, out[i].Tried = math.Min(1, out[i].P*float64(tried)), tried
		out[i].say()
	}
	return out
}

// Blind reports whether the devices were measured once each, so that no drift was
// seen and only a large one would have been.
func (d *Drift) Blind() bool { return !math.IsNaN(d.P) && !d.Seen() && !d.Again }

// Large is the drift over the sitting that would have been seen at least, V; NaN where
// it could not be had.
func (d *Drift) Large() float64 {
	half := math.Max(math.Abs(d.PerPlace.Low), math.Abs(d.PerPlace.High)) * float64(d.Measurings-1)
	if math.IsInf(half, 0) {
		return math.NaN()
	}
	return half
}

// pText is the probability of no drift, with what it is adjusted for.
func (d *Drift) pText() string {
	if d.Tried > 1 && d.PAdjusted < 1 {
		return fmt.Sprintf("p %s, adjusted for %d sessions", pWords(d.PAdjusted), d.Tried)
	}
	if d.Tried > 1 {
		return fmt.Sprintf("p 1, adjusted for %d sessions", d.Tried)
	}
	return "p " + pWords(d.PAdjusted)
}

// Seen reports whether the drift is more than chance makes (5 % over all
// sittings).
func (d *Drift) Seen() bool { return d.PAdjusted < 1-level }

func driftIn(list []Measuring) Drift {
	d := Drift{Measurings: len(list), PerPlace: noEstimate(), P: math.NaN(), PAdjusted: math.NaN(), Over: math.NaN(), Rest: math.NaN()}
	byDevice := map[string][]Measuring{}
	for _, m := range list {
		byDevice[m.Device] = append(byDevice[m.Device], m)
	}
	d.Devices = len(byDevice)
	if !d.within(list, byDevice) && len(byDevice) == len(list) && len(list) >= fewestInOrder {
		x, y := make([]float64, len(list)), make([]float64, len(list))
		for i, m := range list {
			x[i], y[i] = float64(m.Place), m.Value
		}
		for len(x) > mostInOrder { // every second one
			n := len(x) / 2
			for i := range n {
				x[i], y[i] = x[2*i], y[2*i]
			}
			x, y = x[:n], y[:n]
		}
		d.PerPlace, d.P = medianSlope(x, y)
	}
	if n := len(list); n > 1 {
		d.Over = d.PerPlace.Value * float64(list[n-1].Place-list[0].Place)
	}
	return d
}

// within fits the slope within the devices; false where too few were put in again.
func (d *Drift) within(list []Measuring, byDevice map[string][]Measuring) bool {
	type means struct{ x, y float64 }
	mean := map[string]means{}
	for name, ms := range byDevice {
		var m means
		for _, o := range ms {
			m.x += float64(o.Place) / float64(len(ms))
			m.y += o.Value / float64(len(ms))
		}
		mean[name] = m
	}
	var xx, xy, yy float64
	for _, m := range list {
		c := mean[m.Device]
		x, y := float64(m.Place)-c.x, m.Value-c.y
		xx, xy, yy = xx+x*x, xy+x*y, yy+y*y
	}
	df := float64(len(list) - len(byDevice) - 1)
	if df < fewestDriftDF || !(xx > 0) {
		return false
	}
	slope := xy / xx
	d.Rest = math.Sqrt(math.Max(0, yy-slope*xy) / df)
	se := d.Rest / math.Sqrt(xx)
	t := stats.UpperT((1-level)/2, df)
	d.Again = true
	d.PerPlace = Estimate{Value: slope, Low: slope - t*se, High: slope + t*se, DF: df}
	if se > 0 {
		d.P = 2 * stats.TUpper(math.Abs(slope)/se, df)
	} else if slope == 0 {
		d.P = 1
	} else {
		d.P = 0
	}
	return true
}

// medianSlope is the median of the slopes of all pairs with its interval, and the p
// of the rank correlation.
func medianSlope(x, y []float64) (Estimate, float64) {
	m := stats.MedianSlope(x, y, level)
	return Estimate{Value: m.Slope, Low: m.Low, High: m.High, DF: float64(len(x) - 2)}, m.P
}

// firstAgain compares the first insertion of a sitting with that of the same
// device in its last fifth.
func firstAgain(list []Measuring, r Repeatability) *Again {
	n := len(list)
	if n < 5 {
		return nil
	}
	for i := n - 1; i >= n-max(1, n/5); i-- {
		a, b := list[0], list[i]
		if a.Device != b.Device {
			continue
		}
		u := math.Max(a.U, b.U)
		if r.Enough() && !(u > r.Value) {
			u = r.Value
		}
		out := &Again{Device: a.Device, Place: b.Place, Change: b.Value - a.Value, Limit: 2 * sqrt2 * u, Known: r.Enough()}
		out.Beyond = out.Known && math.Abs(out.Change) > out.Limit
		return out
	}
	return nil
}

// say words the drift.
func (d *Drift) say() {
	switch {
	case math.IsNaN(d.P):
	case d.Seen() && d.Again:
		d.Text = fmt.Sprintf("the same devices read %s from the first place to the last (%s): the bench drifts; without that a device put in again reads the same to %s", signed(d.Over), d.pText(), volts(d.Rest))
	case d.Seen():
		d.Text = fmt.Sprintf("the values move by %s along the order (%s): the bench drifts, or the parts lay in that order; put some in again to tell", signed(d.Over), d.pText())
	case d.Blind():
		d.Text = "no drift seen, but devices that were measured once each would show a large one only" + d.atLeast() + ": put the first one in again at the end"
	default:
		d.Text = fmt.Sprintf("no drift seen (%s, %s)", d.overWords(), d.pText())
	}
	if f := d.First; f != nil {
		text := fmt.Sprintf("%s, the first, read %s when put in again at place %d", f.Device, signed(f.Change), f.Place)
		switch {
		case math.IsNaN(f.Limit):
		case !f.Known:
			text += "; what the bench repeats to is not known, so that nothing follows from it"
		case f.Beyond:
			text += fmt.Sprintf(", more than %s (2√2 u)", volts(f.Limit))
		default:
			text += fmt.Sprintf(", within %s (2√2 u)", volts(f.Limit))
		}
		if d.Text != "" {
			d.Text += "; "
		}
		d.Text += text
	}
}

// atLeast says what drift would have been seen.
func (d *Drift) atLeast() string {
	if math.IsNaN(d.Large()) {
		return ""
	}
	return " (of some " + volts(d.Large()) + ")"
}

func (d *Drift) overWords() string {
	places := d.Over / d.PerPlace.Value
	if math.IsNaN(d.PerPlace.Low) || math.IsInf(d.PerPlace.Low, 0) || math.IsNaN(places) || math.IsInf(places, 0) {
		return "over the session " + signed(d.Over)
	}
	return fmt.Sprintf("over the session %s, 95 %% between %s and %s", signed(d.Over), signed(d.PerPlace.Low*places), signed(d.PerPlace.High*places))
}
