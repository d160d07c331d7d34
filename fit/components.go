package fit

import "math"

// components are the scatter of the gate readings, V, and that of the currents, as a
// share, from what the model laid through the whole curve leaves over: the former
// shows where the curve is steep, the latter where it is flat.
func (w *work) components(wh *whole) (gate, share float64) {
	const prior = 2
	a0, b0 := usualNoise*usualNoise, usualShare*usualShare
	a, b := a0, b0
	top := 0.0
	for _, i := range wh.i {
		top = math.Max(top, i)
	}
	n := 0
	for _, i := range wh.i {
		if i >= 0.01*top {
			n++
		}
	}
	scale := float64(n) / float64(max(1, n-len(wh.free)))
	for range 12 {
		var sa, sb float64
		for j, i := range wh.i {
			if i < 0.01*top {
				continue
			}
			p := &w.pts[wh.from[j]]
			lever := i / wh.slope[j]
			r := (wh.solved[j] - i) / wh.slope[j]
			k := rss(p.ux, p.u/wh.slope[j])
			g := b * lever * lever
			all := a + g + k*k
			r2 := r * r * scale
			sa += a/all*(a/all*r2) + a*(1-a/all)
			g /= all
			sb += (g*g*r2 + g*(all-g*all)) / (lever * lever)
		}
		a = (sa + prior*a0) / (float64(n) + prior)
		b = (sb + prior*b0) / (float64(n) + prior)
	}
	return math.Sqrt(a), math.Sqrt(b)
}

const usualShare = 0.5e-3
