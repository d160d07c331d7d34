package fit

import (
	"math"
	"slices"
)

// curveThreshold gives the threshold by the model laid through the whole curve, with
// what else the fit tells; it warns where the model does not describe the curve and
// then gives nothing.
//
// The random uncertainty is what the scatter of the points does to the parameters
// through the weighted fit; the absolute one holds the floors of the weights and the
// systematic errors of the meters as well.
func (w *work) curveThreshold(r *Result) (Threshold, bool) {
	if w.unknownDrain() {
		return Threshold{}, false // said already
	}
	t := w.whole()
	if t == nil {
		return Threshold{}, false
	}
	if !w.leavesKnee() {
		return Threshold{}, false // said already
	}
	if why := t.doesNotFit(); why != "" {
		w.warn(CodeModelMisfit, why)
		return Threshold{}, false
	}
	n := 0
	for j := range t.vg {
		if !t.apart[j] {
			n++
		}
		if !t.apart[j] || math.Abs(t.residual(j)) < plainlyOff {
			continue
		}
		p := &w.pts[t.from[j]]
		w.leave(p.k, CodeOutOfLine, "stands "+si(math.Abs(t.solved[j]-t.i[j])/math.Max(t.slope[j], 1e-9), "V")+" off the fitted curve; not used for the threshold by it")
	}
	random, model, offset := t.spread(w)
	top, nu := slices.Max(t.i), float64(n-len(t.free))
	out := Threshold{From: t.from[0], To: t.from[len(t.from)-1] + 1}
	out.Vt = w.lineQuantity(t.p[parVt], random[0], t.between, model[0], t.middle(), n, nu, top, offset[0])
	beta := math.Exp(t.p[parBeta])
	b := w.gainBudget(beta, beta*random[1], top, follows{current: 1, gate: 2, beta: 1})
	w.addCurrent(&b, top, beta, beta*offset[1])
	b.add(InModel, beta*model[1], 1)
	out.Beta = w.quantity(beta, &b, n, nu)
	b = w.gainBudget(t.p[parTheta], random[3], top, follows{gate: 1, beta: 1})
	w.addCurrent(&b, top, 0, offset[3])
	b.add(InModel, model[3], 1)
	out.Theta = w.quantity(t.p[parTheta], &b, n, nu)
	if !(random[3] > 0) { // at its bound: nothing is known of it
		out.Theta = None()
	}
	r.Shape = w.shapeOf(t, random)
	return out, true
}

// leavesKnee reports whether the points reach far enough above the threshold for any
// extrapolation, as far as the fitted curve tells: at least twice the width of the
// knee. Else it warns sub-threshold-only. In the knee the root of the current is nearly
// straight as well, and its line meets zero far too low.
func (w *work) leavesKnee() bool {
	t := w.whole()
	if t == nil {
		return true
	}
	top, knee := t.overdrive(), 2*math.Exp(t.p[parN])*thermalVoltage
	if top >= math.Max(leastOverdrive, 2*knee) {
		return true
	}
	if !w.warned(CodeSubThresholdOnly) && !w.warned(CodeNotSaturated) {
		w.warn(CodeSubThresholdOnly, "The points end "+si(top, "V")+" above the threshold, within the knee: no extrapolated threshold.")
	}
	return false
}

// leastOverdrive is how far above the threshold, V, the points must reach for the
// curve to tell it from the width of the knee: twice 2 n kT/q (judgement).
const leastOverdrive = 4 * usualN * thermalVoltage

// overdrive is how far above the threshold the points reach, V.
func (t *whole) overdrive() float64 {
	top := math.Inf(-1)
	for j := range t.vg {
		if !t.apart[j] {
			top = math.Max(top, t.vg[j]-t.p[parVt])
		}
	}
	return top
}

// warned reports whether a warning with that code was given.
func (w *work) warned(code string) bool {
	return slices.ContainsFunc(w.warns, func(v Warning) bool { return v.Code == code })
}

// middle is the index in work.pts of a point at a tenth of the greatest current.
func (t *whole) middle() int {
	top := slices.Max(t.i)
	for j, i := range t.i {
		if i > 0.1*top {
			return t.from[j]
		}
	}
	return t.from[0]
}

// doesNotFit says in what way the model does not describe the curve, "" where it
// does.
func (t *whole) doesNotFit() string {
	switch {
	case t.misfit > plainMisfit:
		return "The points lie " + number(math.Sqrt(t.misfit)) + " times as far off the fitted curve as they may (" + t.farthest() + "): no threshold by it."
	case t.p[parTheta] < -0.1 && t.p[parTheta] < -5*t.got.SE(3, false):
		return "The curve gets steeper and steeper (θ = " + number(t.p[parTheta]) + " 1/V), as no single transistor does: no threshold by the whole curve."
	}
	return ""
}

// farthest names the point that lies farthest off the curve.
func (t *whole) farthest() string {
	k := 0
	for j := range t.vg {
		if !t.apart[j] && math.Abs(t.residual(j)) > math.Abs(t.residual(k)) {
			k = j
		}
	}
	return volts(t.vg[k]) + ": " + amps(t.i[k]) + " read, " + amps(t.solved[k]) + " fitted"
}

// spread gives, for every free parameter in order, the standard deviation that the
// scatter of the points causes, that which the floors would if they were scatter, and
// what it changes by per A that the meter of the current is off at the greatest one.
func (t *whole) spread(w *work) (random, model, offset [parCount]float64) {
	m, n := t.rows(), len(t.free)
	t.room(m, n)
	jac := t.jac
	if !t.eval(t.got.P, t.r, jac) {
		return
	}
	top := slices.Max(t.i)
	for f := range n {
		var a, b float64
		for j := range t.vg {
			h := 0.0
			for e := range n {
				if c := t.got.Cov(f, e); !math.IsNaN(c) {
					h += c * jac[e*m+j]
				}
			}
			p := &w.pts[t.from[j]]
			x := h / t.sigma[j] * rss(p.u, t.slope[j]*rss(t.noise, p.ux))
			y := h / t.sigma[j] * t.floor(j, top)
			a += x * x
			b += y * y
			t.r[j] = h / t.sigma[j]
		}
		random[f], model[f] = math.Sqrt(a), math.Sqrt(b)
		offset[f] = w.perOffset(top, len(t.vg), func(j int) (c, current float64) { return t.r[j], t.i[j] })
	}
	return random, model, offset
}
