package fit

import "math"

// neverLinear reports whether no point of a sweep at a small fixed drain voltage
// lies where the channel is a plain resistor, which the linear and the ratio method
// need; it warns sub-threshold-only where the curve still rises exponentially at its
// top, else not-linear, and saturated tells that the square-root line holds instead.
//
// The apparent overdrive at the end of the sweep, √I/(d√I/dV), is v in saturation and
// 2v - V_DS where the channel is a resistor: below V_DS it is the former. It is taken
// from a straight line through the last quarter of the points that carry current, at
// least four.
//
// Source: re-derived from the square law, H. Shichman and D. A. Hodges, IEEE J.
// Solid-State Circuits SC-3 (1968) 285–289. Checked: TestNeverLinear.
func (w *work) neverLinear() (never, saturated bool) {
	n := len(w.pts)
	vds := w.fixedVds()
	if n == 0 || !(vds > 0) {
		return false, false
	}
	from := n
	for from > 0 && w.pts[from-1].above() {
		from--
	}
	m := max(4, (n-from)/4)
	if n-from < m {
		return false, false // too few to tell; the methods say so
	}
	x, y := make([]float64, m), make([]float64, m)
	for k := range m {
		p := &w.pts[n-m+k]
		x[k], y[k] = p.vg, p.rt
	}
	if !w.poly.fit(x, y, nil, 1) {
		return false, false
	}
	end := &w.pts[n-1]
	r, slope := w.poly.at(end.vg)
	if !(slope > 0) {
		return false, false
	}
	before := &w.pts[n-1-min(3, m-1)]
	switch over := r / slope; {
	case 2*(end.vg-before.vg) < subThreshold*(end.ln-before.ln):
		w.warn(CodeSubThresholdOnly, "The curve still rises exponentially at its top ("+amps(end.i)+"): no extrapolated threshold.")
		return true, false
	case over < vds:
		w.warn(CodeNotLinear, "At the end of the sweep the overdrive, about "+si(math.Round(100*over)/100, "V")+", is still below the drain voltage of "+si(vds, "V")+
			": the channel is never a plain resistor, so the threshold is that of the square-root line.")
		return true, true
	}
	return false, false
}
