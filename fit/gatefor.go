package fit

import "math"

// gateFor solves the model for the gate voltage at current i, from a guess: Newton
// on the logarithm, halving where a step leaves the bracket that the points give.
// NaN where the model does not reach the current there.
func (t *transfer) gateFor(i, guess float64) (v, slope float64) {
	c := channelOf(&t.p, t.foot)
	var dp [parCount]float64
	n := len(t.vg)
	lo, hi := t.vg[0]-0.5, t.vg[n-1]+0.5
	v = guess
	k := 0
	for range 60 {
		for k < n-1 && t.vg[k] < v {
			k++
		}
		for k > 0 && t.vg[k-1] >= v {
			k--
		}
		top := t.vtop[k] + t.p[parTop]
		if t.f.tied {
			top = v
		}
		im, s := c.along(t.f, v, top, i, &dp)
		if !(im < i) {
			hi = v
		} else {
			lo = v
		}
		next := v + (math.Log(i)-math.Log(im))*im/s
		if !(next > lo && next < hi) {
			next = lo + (hi-lo)/2
		}
		if math.Abs(next-v) < 1e-8 {
			if !(math.Abs(math.Log(im/i)) < 0.01) {
				return math.NaN(), math.NaN()
			}
			return next, s
		}
		v = next
	}
	return math.NaN(), math.NaN()
}

// supplyOf is top without the bound on the drop across R_L.
func (w *work) supplyOf(p *point) (float64, bool) {
	if w.s.Circuit == Load && positive(w.s.RL) {
		if v := w.supplyAt(p.k); finiteNumber(v) {
			return v, true
		}
	}
	return w.top(p)
}

// standing is the number of points that carry a current worth the name.
func (w *work) standing() int {
	n := 0
	for j := range w.pts {
		if w.pts[j].above() {
			n++
		}
	}
	return n
}

// offCurrent is what flows where the channel carries nothing, A, and the gate
// voltage below which that is; 0 and -Inf where the sweep does not show it.
func (w *work) offCurrent(wh *whole) (i, below float64) {
	if wh == nil {
		return 0, math.Inf(-1)
	}
	below = wh.p[parVt] - 8*usualN*thermalVoltage
	n := 0
	for n < len(w.pts) && w.pts[n].vg < below {
		n++
	}
	if n == 0 {
		return 0, below
	}
	return math.Max(0, w.medianOf(0, n)), below
}

// squeezed reports whether fewer than three points from b on have less than half of
// the supply across the load resistor.
func (w *work) squeezed(b int) bool {
	n := 0
	for j := b; j < len(w.pts); j++ {
		if _, ok := w.top(&w.pts[j]); ok {
			n++
		}
	}
	return n < 3
}
