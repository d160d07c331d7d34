package fit

import (
	"math"
	"slices"
)

// Shape is what a curve tells beside its thresholds.
type Shape struct {
	Lambda       Quantity // 1/V, channel-length modulation; load circuit only
	Knee         Quantity // V, width of the knee, 2 n kT/q of the fitted curve; no slope factor
	SubThreshold Quantity // slope factor n from the exponential foot alone, 1
	Span         Quantity // V, gate voltage from 1 mA to where R_L takes nine tenths of the supply
	Misfit       float64  // reduced χ² of the whole-curve fit, floors included: 0.03 to 0.1 is normal; NaN: no fit
}

// NoShape is a shape of which nothing is known.
func NoShape() Shape {
	n := None()
	return Shape{Lambda: n, Knee: n, SubThreshold: n, Span: n, Misfit: math.NaN()}
}

const (
	// footTop bounds the exponential foot, as a share of the current at threshold, and
	// footPoints is the fewest points on it.
	footTop    = 0.1
	footPoints = 5
	// spanFrom is the current from which the gate span counts, A, and plateau the share
	// of the supply at which it ends.
	spanFrom = 1e-3
	plateau  = 0.9
)

// shapeOf is what the whole-curve fit t tells beside its thresholds; random is the
// standard deviation of each free parameter by the scatter of the points.
func (w *work) shapeOf(t *whole, random [parCount]float64) Shape {
	s := NoShape()
	s.Misfit = t.misfit
	n := len(t.vg)
	a := 2 * math.Exp(t.p[parN]) * thermalVoltage
	s.Knee = Quantity{Value: a, U: a * random[2], UBetween: math.NaN(), UAbsolute: math.NaN(), N: n}
	if k := slices.Index(t.free, parLambda); k >= 0 {
		s.Lambda = Quantity{Value: t.p[parLambda], U: random[k], UBetween: math.NaN(), UAbsolute: math.NaN(), N: n}
	}
	s.SubThreshold = w.slopeFactor(t)
	s.Span = w.span()
	return s
}

// slopeFactor is n of the exponential foot, by the straight line of ln I over V_G
// through the points between the floor of the counts and a tenth of the current at
// threshold; None with fewer than five. kT/q at the temperature given, else 300 K.
//
// Source: I_D ∝ exp(V_GS/(n kT/q)) below the threshold, Enz, Krummenacher and Vittoz
// 1995 (from memory). Checked: TestSubThresholdSlope.
func (w *work) slopeFactor(t *whole) Quantity {
	c := channelOf(&t.p, t.foot)
	atVt := c.solve(feed{}, t.p[parVt], math.Max(1, t.vtop[len(t.vtop)-1]), 0)
	leak, _ := w.offCurrent(t)
	var x, y, sigma []float64
	for j := range w.pts {
		p := &w.pts[j]
		if !p.above() || p.i < 10*leak || p.i > footTop*atVt {
			continue
		}
		x, y = append(x, p.vg), append(y, p.ln)
		sigma = append(sigma, rss(math.Max(p.u, p.q/2)/p.i, rss(t.noise, p.ux)/(usualN*thermalVoltage)))
	}
	if len(x) < footPoints {
		return None()
	}
	wt := make([]float64, len(x))
	for j := range wt {
		wt[j] = 1 / (sigma[j] * sigma[j])
	}
	var line poly
	if !line.fit(x, y, wt, 1) {
		return None()
	}
	_, b := line.at(x[0])
	kelvin := 300.0
	if finiteNumber(w.s.Temperature) {
		kelvin = w.s.Temperature + 273.15
	}
	n := 1 / (b * thermalVoltage * kelvin / 300)
	if !(n > 0) {
		return None()
	}
	return Quantity{Value: n, U: n * line.scatter(x[0], sigma, true) / b, UBetween: math.NaN(), UAbsolute: math.NaN(), N: len(x)}
}

// span is the gate voltage between 1 mA and where the load resistor has taken nine
// tenths of the supply.
func (w *work) span() Quantity {
	if w.s.Circuit != Load || !positive(w.s.RL) || !finiteNumber(w.vdd) {
		return None()
	}
	top := plateau * w.vdd / w.s.RL
	if !(top > 2*spanFrom) {
		return None()
	}
	from, to := w.level(spanFrom), w.level(top)
	if math.IsNaN(from.Vg) || math.IsNaN(to.Vg) {
		return None()
	}
	return Quantity{Value: w.sign * (to.Vg - from.Vg), U: rss(from.U, to.U), UBetween: math.NaN(), UAbsolute: math.NaN(), N: 4}
}
