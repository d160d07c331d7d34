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
	if top := t.overdrive(); top < leastOverdrive {
		if len(r.VtBy) == 0 && !w.warned(CodeSubThresholdOnly) && !w.warned(CodeNotSaturated) {
			w.warn(CodeSubThresholdOnly, "The points end "+si(top, "V")+" above the threshold, within the knee: no extrapolated threshold.")
		}
		return Threshold{}, false
	}
	if why := t.doesNotFit(w); why != "" {
		w.warn(CodeModelMisfit, why)
		return Threshold{}, false
	}
	n := 0
	for j := range t.vg {
		if !t.apart[j] {
			n++
			continue
		}
		p := &w.pts[t.from[j]]
		w.leave(p.k, CodeOutOfLine, "stands "+si(math.Abs(t.solved[j]-t.i[j])/math.Max(t.slope[j], 1e-9), "V")+" off the fitted curve; not used for the threshold by it")
	}
	random, model := t.spread(w)
	top := slices.Max(t.i)
	vt := Quantity{Value: t.p[parVt], U: random[0], N: n}
	out := Threshold{From: t.from[0], To: t.from[len(t.from)-1] + 1}
	out.Vt = w.gateQuantity(vt.Value, math.Max(random[0], w.stepFloor(t.middle())), model[0], n)
	beta := math.Exp(t.p[parBeta])
	out.Beta = w.withGain(Quantity{Value: beta, U: beta * random[1], UBetween: math.NaN(), N: n}, top, 1, 2)
	out.Beta.UAbsolute = rss(out.Beta.UAbsolute, beta*model[1])
	out.Theta = w.withGain(Quantity{Value: t.p[parTheta], U: random[3], UBetween: math.NaN(), N: n}, top, 0, 1)
	out.Theta.UAbsolute = rss(out.Theta.UAbsolute, model[3])
	r.Shape = w.shapeOf(t)
	return out, true
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
func (t *whole) doesNotFit(w *work) string {
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
// scatter of the points causes, and that which the floors would if they were scatter.
func (t *whole) spread(w *work) (random, model [parCount]float64) {
	m, n := t.rows(), len(t.free)
	buf := make([]float64, m*(n+1))
	r, jac := buf[:m], buf[m:]
	if !t.eval(t.got.P, r, jac) {
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
		}
		random[f], model[f] = math.Sqrt(a), math.Sqrt(b)
	}
	return random, model
}
