package fit

import (
	"math"
	"slices"
)

const (
	// levelsApart is the fewest currents at which up and down sweep must lie apart.
	levelsApart = 3
	// driftShape is what either picture of a gap, following the power or the same
	// everywhere, may be wrong by as a share of the gap: the temperature coefficient
	// changes along the curve, and a trapped charge with the gate (judgement).
	driftShape = 0.1
	// tellsApart is by how much the sum of squares of one picture must be the
	// greater for the other to be favoured: three standard deviations.
	tellsApart = 9
	// mostPerWatt is the greatest gap that a watt can explain, V/W: 8 mV/K of a large
	// power part and 400 K/W of a small one in free air (both from memory).
	mostPerWatt = 8e-3 * 400
)

// lags are the time constants, in points, with which the temperature is tried to
// follow the power: from the chip's own to that of a heat sink, which does not get
// warm within a sweep.
var lags = [...]float64{0.5, 1.5, 5, 15, 50, 500}

// Swept is one sweep of a device with what it was taken under and what [One] made
// of it.
type Swept struct {
	Curve     Curve
	Setup     Setup
	Direction string // "up", "down", "spot", "": unknown
	Result    Result
}

// Drift says why up and down sweep of one device lie apart, as far as their
// curves tell, and puts that in place of the warning heating that [Combine] gave
// on one or two currents alone. sweeps are in the order in which they were taken;
// r is changed, sweeps are not.
//
// The gate voltages of the first up and the first down sweep are compared at the
// levels of their results. Self-heating: the gap follows I_D V_DS, with a lag of
// some points, and the warmer sweep needs less gate voltage. Gate history (trapped
// charge, hysteresis): the gap is the same whatever the power, or grows with the
// time between, evenly or as the gate was driven. All pictures are fitted with
// their uncertainties; where the best of one cause is worse than the best of the
// other by more than three standard deviations, the other is named: warning heating
// or gate-history. Else heating, with the words that the data cannot tell. A gap
// beyond 3.2 V/W is never heating; less at small and more at large currents, on
// both sides of the point without a temperature coefficient, always is.
//
// Where the curves agree, or are too short to tell, heating is taken back, and so is
// sweeps-disagree, if the gate voltages in question differ by no more than their
// uncertainties and coarse points leave open: that is interpolation. Where they were
// not read along the device's own curve that is half of the steps around them.
//
// Cannot be told apart: a heat sink that warms up over the whole sweep, and a
// charge of the same sign that builds up over it.
//
// Uses levels between points that do not lie too far apart, at least three of them.
// Assumes equal times for all points.
//
// Source: heating of the channel and its lag, common practice; hysteresis of the
// threshold: JEDEC JEP183A (scope only was seen). Checked: TestHeatingOrHistory,
// TestFalseAlarms.
func Drift(sweeps []Swept, r *Result) {
	up := slices.IndexFunc(sweeps, func(s Swept) bool { return s.Direction == "up" })
	down := slices.IndexFunc(sweeps, func(s Swept) bool { return s.Direction == "down" })
	if up < 0 || down < 0 {
		return
	}
	a, ok := sweeps[up].cleaned()
	b, ok2 := sweeps[down].cleaned()
	if !ok || !ok2 {
		return
	}
	d := newDrift(a, b, sweeps[up].Result.Levels, sweeps[down].Result.Levels)
	d.downFirst = down < up
	w, apart := d.judge()
	if len(d.levels) >= levelsApart {
		r.Warnings = slices.DeleteFunc(r.Warnings, func(w Warning) bool { return w.Code == CodeHeating })
	}
	if apart {
		r.Warnings = append(r.Warnings, w)
		return
	}
	near := true
	for _, k := range [...]Key{KeyVgsth, KeyVgsIdle} {
		x, y := *sweeps[up].Result.At(k), *sweeps[down].Result.At(k)
		step := (a.stepAt(a.sign*x.Value) + b.stepAt(b.sign*y.Value)) / 2
		// Read along the device's own curve a difference of more than a few uncertainties
		// and of more than coarse points leave open is one.
		most := math.Max(sweepsApart*rss(x.U, y.U), levelGap*step)
		if !sweeps[up].Result.Own.Ok || !sweeps[down].Result.Own.Ok {
			most = step / 2
		}
		if math.Abs(x.Value-y.Value) >= most {
			near = false
			continue
		}
		r.Warnings = slices.DeleteFunc(r.Warnings, func(w Warning) bool { return saysDisagreement(w, k) })
	}
	if near {
		r.Warnings = slices.DeleteFunc(r.Warnings, func(w Warning) bool { return w.Code == CodeHeating })
	}
}

// stepAt is the step between the points on both sides of gate voltage v.
func (w *work) stepAt(v float64) float64 {
	b := w.after(v)
	if b < 1 || b == len(w.pts) {
		return 0
	}
	return w.pts[b].vg - w.pts[b-1].vg
}

// cleaned is the sweep ready to be read off; false where it is no curve.
func (s Swept) cleaned() (*work, bool) {
	w := newWork(s.Curve, s.Setup)
	w.settleCurrents()
	w.takeReturn()
	if state, _ := w.dead(); state != "" {
		return nil, false
	}
	w.raiseToFoot()
	w.clean()
	return w, !w.falling && len(w.pts) >= fewestInChain
}

// drift is the comparison of two sweeps at some currents.
type drift struct {
	up, down  *work
	downFirst bool
	levels    []driftLevel
}

// driftLevel is one current of the comparison.
type driftLevel struct {
	i, d, u float64 // A; V, up less down; V
	power   float64 // W, NaN: not known
	a, b    int     // nearest points of the up and of the down sweep
}

func newDrift(up, down *work, ups, downs []Level) *drift {
	d := &drift{up: up, down: down}
	for len(ups) > 0 && len(downs) > 0 {
		x, y := ups[0], downs[0]
		if x.I <= y.I {
			ups = ups[1:]
		}
		if y.I <= x.I {
			downs = downs[1:]
		}
		if x.I != y.I {
			continue
		}
		a, ok := up.levelAt(x.I)
		b, ok2 := down.levelAt(y.I)
		if !ok || !ok2 {
			continue
		}
		d.levels = append(d.levels, driftLevel{
			i: x.I, d: up.sign*x.Vg - down.sign*y.Vg, u: rss(x.U, y.U),
			power: x.I * (up.pts[a].vds + down.pts[b].vds) / 2, a: a, b: b,
		})
	}
	return d
}

// levelAt is the first point at or above current i, and whether it and the one
// before lie near enough to read a level between them.
func (w *work) levelAt(i float64) (b int, ok bool) {
	b = slices.IndexFunc(w.pts, func(p point) bool { return p.i >= i })
	if b < 1 {
		return b, false
	}
	p, q := &w.pts[b-1], &w.pts[b]
	step := q.vg - p.vg
	return b, p.above() && (step <= fineStep || 2*step > knee*(q.ln-p.ln))
}

// judge finds the picture that the gaps favour; false where there is no gap.
func (d *drift) judge() (Warning, bool) {
	var less, more []int // levels at which the down sweep needs less gate voltage, and more
	for k, l := range d.levels {
		switch lim := math.Max(sweepsLeast, sweepsApart*l.u); {
		case l.d > lim:
			less = append(less, k)
		case l.d < -lim:
			more = append(more, k)
		}
	}
	if max(len(less), len(more)) < levelsApart {
		return Warning{}, false
	}
	return d.attribute(less, more), true
}

// attribute words what the gaps favour.
func (d *drift) attribute(less, more []int) Warning {
	first, last := &d.levels[0], &d.levels[len(d.levels)-1]
	text := "At the same current the down sweep needs " + gapText(first) + " and " + gapText(last)
	const (
		cannot  = ": these data cannot tell whether the part warms up or its gate remembers where it was."
		history = "the gate remembers where it was, or something changed between the sweeps."
	)
	most := 0.0
	for _, l := range d.levels {
		most = math.Max(most, math.Abs(l.d))
	}
	power, other := d.byPower(most), d.byTime(most)
	switch {
	case len(less) > 1 && len(more) > 1 && less[len(less)-1] < more[0]:
		return Warning{CodeHeating, text + ": it is less at small and more at large currents, as where the part warms up."}
	case math.IsNaN(power):
		return Warning{CodeHeating, text + ", and the power is not known" + cannot}
	case d.beyondPower():
		return Warning{CodeGateHistory, text + ", more than that power can heat any part for: " + history}
	case power+tellsApart < other:
		return Warning{CodeHeating, text + ": the difference follows the power, so the part warms up."}
	case other+tellsApart < power:
		return Warning{CodeGateHistory, text + ": the difference does not follow the power, so it is no heating; " + history}
	}
	return Warning{CodeHeating, text + cannot}
}

func gapText(l *driftLevel) string {
	s := si(math.Abs(l.d), "V")
	if l.d < 0 {
		s += " more"
	} else {
		s += " less"
	}
	s += " gate voltage at " + amps(l.i)
	if math.IsNaN(l.power) {
		return s
	}
	return s + " (" + si(l.power, "W") + ")"
}

// beyondPower reports whether the gap is more than the greatest power of the
// sweeps can explain.
func (d *drift) beyondPower() bool {
	most := 0.0
	for _, w := range [...]*work{d.up, d.down} {
		for j := range w.pts {
			most = math.Max(most, w.pts[j].i*w.pts[j].vds)
		}
	}
	for _, l := range d.levels {
		if math.Abs(l.d)-sweepsApart*l.u > mostPerWatt*most {
			return true
		}
	}
	return false
}

// byTime is the least sum of squares about gaps that power has no part in: the
// same everywhere; growing with the points between; growing with these as far as
// the gate was driven.
func (d *drift) byTime(most float64) float64 {
	n := len(d.levels)
	same, even, driven := make([]float64, n), make([]float64, n), make([]float64, n)
	for k, l := range d.levels {
		same[k] = 1
		if d.downFirst {
			even[k] = float64(l.a + l.b)
			driven[k] = d.up.driven(0, l.a) + d.down.driven(0, l.b)
			continue
		}
		even[k] = float64(len(d.up.pts) - l.a + len(d.down.pts) - l.b)
		driven[k] = d.up.driven(l.a, len(d.up.pts)) + d.down.driven(l.b, len(d.down.pts))
	}
	return math.Min(d.squares(same, most, true), math.Min(d.squares(even, most, true), d.squares(driven, most, true)))
}

// driven is the sum over points from…to-1 of how far the gate was above the first.
func (w *work) driven(from, to int) float64 {
	sum := 0.0
	for j := from; j < to; j++ {
		sum += w.pts[j].vg - w.pts[0].vg
	}
	return sum
}

// byPower is the least sum of squares about a gap that follows the power with some
// lag; NaN where the power is not known.
func (d *drift) byPower(most float64) float64 {
	shape := make([]float64, len(d.levels))
	best := math.NaN()
	for _, lag := range lags {
		ta, tb := d.temperatures(lag)
		for k, l := range d.levels {
			shape[k] = tb[l.b] - ta[l.a]
		}
		// Warmer means less gate voltage for the same current, below the point of no
		// temperature coefficient, where curves of thresholds lie.
		if s := d.squares(shape, most, false); !(s > best) {
			best = s
		}
	}
	return best
}

// temperatures are those of both sweeps, in watts, when the temperature follows
// the power with that lag.
func (d *drift) temperatures(lag float64) (up, down []float64) {
	up, down = make([]float64, len(d.up.pts)), make([]float64, len(d.down.pts))
	share, t := 1-math.Exp(-1/lag), 0.0
	walk := func(w *work, out []float64, backwards bool) {
		for k := range out {
			j := k
			if backwards {
				j = len(out) - 1 - k
			}
			t += share * (w.pts[j].i*w.pts[j].vds - t)
			out[j] = t
		}
	}
	if d.downFirst {
		walk(d.down, down, true)
		walk(d.up, up, false)
		return up, down
	}
	walk(d.up, up, false)
	walk(d.down, down, true)
	return up, down
}

// squares is the sum of squared residuals of the gaps about the best multiple of
// shape, in standard deviations; anySign allows a negative multiple.
func (d *drift) squares(shape []float64, most float64, anySign bool) float64 {
	var num, den float64
	weight := func(l *driftLevel) float64 {
		u := rss(math.Max(l.u, sweepsLeast/sweepsApart), driftShape*most)
		return 1 / (u * u)
	}
	for k := range d.levels {
		wt := weight(&d.levels[k])
		num += wt * shape[k] * d.levels[k].d
		den += wt * shape[k] * shape[k]
	}
	c := num / den
	if den == 0 || !anySign && c < 0 {
		c = 0
	}
	sum := 0.0
	for k := range d.levels {
		x := d.levels[k].d - c*shape[k]
		sum += weight(&d.levels[k]) * x * x
	}
	return sum
}
