package fit

import (
	"math"
	"slices"
)

const (
	// scatterReach is how many points on either side of the place of interest
	// tell of the scatter there: noise in volts differs from the foot to the top
	// of a curve.
	scatterReach = 10
	// scatterRatio bounds the currents that tell of the scatter, as a factor to
	// the current of interest.
	scatterRatio = 30
	// flatShare is the share of the logarithmic slope around the place of
	// interest below which a curve has come to its limit: noise of the current
	// there says nothing of the gate.
	flatShare = 0.1
)

// scatterNear estimates the standard deviation of single points about the
// curve near index b, in volts at the gate, beyond what ux and u of the points
// explain: digits are not the noise, so it is taken from the data. Every point
// is compared with the cubic through its two neighbours on either side, in the
// square root or the logarithm of the current, whichever is straighter; the
// three quarters of the points that lie nearest count. Where no point can be
// compared, the step of the gate digits stands in, unless ux is known.
//
// Source: the pseudo-residuals of T. Gasser, L. Sroka and C. Jennen-Steinmetz,
// Biometrika 73 (1986) 625–633 (from memory), with four neighbours.
// Checked: TestScatter.
func (w *work) scatterNear(b int) float64 {
	b = min(b, len(w.pts)-1)
	total, known, ok := w.scatterOf(b)
	if !ok {
		if w.pts[b].ux > 0 {
			return 0
		}
		return w.grid / math.Sqrt(12)
	}
	return math.Sqrt(math.Max(0, total-known))
}

// scatterOf is the variance, V², of single points about the curve near index b,
// and the part of it that ux and u of the points explain; false where no point
// can be compared.
func (w *work) scatterOf(b int) (total, known float64, ok bool) {
	var buf [2 * scatterReach]float64
	r := buf[:0]
	near := w.pts[b].i
	flat := flatShare * w.risingTo(b)
	for j := max(2, b-scatterReach); j < min(len(w.pts)-2, b+scatterReach); j++ {
		if i := w.pts[j].i; i > scatterRatio*near*tie || i*tie < near/scatterRatio {
			continue
		}
		if !(w.logSlope(j-2, j+2) > flat) {
			continue
		}
		if v, k, ok := w.residual(j); ok {
			r = append(r, v)
			known += k
		}
	}
	n := len(r)
	if n == 0 {
		return 0, 0, false
	}
	known /= float64(n)
	slices.Sort(r)
	kept := n
	if n >= 4 {
		kept = 3 * n / 4
	}
	sum := 0.0
	for _, v := range r[:kept] {
		sum += v
	}
	return sum / float64(kept) / trimmedMean(kept, n), known, true
}

// stepFloor is the least random uncertainty, V, that a gate voltage read off
// near index b can have by the step of the gate's display. Readings average out
// the step only where noise, or voltages that are no multiples of it, dither
// them: that shows as scatter of a quarter of the step or more. On a grid of set
// values all readings may share one error of rounding. 0: no step stated, or
// dithered.
//
// Source: B. Widrow, I. Kollár and M.-C. Liu, IEEE Trans. Instrum. Meas. 45
// (1996) 353–361, on dither (from memory); the quarter is a judgement. Checked:
// TestDisplayStepAlone.
func (w *work) stepFloor(b int) float64 {
	b = max(0, min(b, len(w.pts)-1))
	a := rangeFor(w.s.Gate, w.pts[b].vg)
	if !(a.Resolution > 0) || a.Noise >= a.Resolution/4 {
		return 0
	}
	if total, _, ok := w.scatterOf(b); ok && math.Sqrt(total) >= a.Resolution/4 {
		return 0
	}
	return a.Resolution / math.Sqrt(12)
}

// scatterFreedom is the degrees of freedom of [work.scatterNear]: half the number of
// points compared, for neighbours share theirs (judgement); +Inf where the step of the
// digits stands in.
func (w *work) scatterFreedom(b int) float64 {
	b = max(0, min(b, len(w.pts)-1))
	n := 0
	for j := max(2, b-scatterReach); j < min(len(w.pts)-2, b+scatterReach); j++ {
		if i := w.pts[j].i; i > scatterRatio*w.pts[b].i*tie || i*tie < w.pts[b].i/scatterRatio {
			continue
		}
		if _, _, ok := w.residual(j); ok {
			n++
		}
	}
	if n == 0 {
		return math.Inf(1)
	}
	return math.Max(1, float64(n)/2)
}

// logSlope is d ln I/dV from point j to point k, 1/V; NaN where there is none.
func (w *work) logSlope(j, k int) float64 {
	if j < 0 || k >= len(w.pts) || j >= k {
		return math.NaN()
	}
	a, b := &w.pts[j], &w.pts[k]
	if !(a.i > 0) || !(b.i > 0) {
		return math.NaN()
	}
	return (b.ln - a.ln) / (b.vg - a.vg)
}

// risingTo is the logarithmic slope up to point b, over as many of the three
// steps before it as stand clear of the last digits.
func (w *work) risingTo(b int) float64 {
	a := b - 1
	for a > 0 && b-a < 3 && w.pts[a-1].above() {
		a--
	}
	return w.logSlope(a, b)
}

// flatFrom reports whether the curve from point j on, over three steps, hardly
// rises compared with the logarithmic slope given: single steps may be noise.
func (w *work) flatFrom(j int, slope float64) bool {
	k := min(j+3, len(w.pts)-1)
	return k > j && !(w.logSlope(j, k) > flatShare*slope)
}

// trimmedMean is the expected mean of the lowest kept of n squares of standard
// normal deviates, by the quantile at kept/n.
func trimmedMean(kept, n int) float64 {
	if kept == n {
		return 1
	}
	z := math.Sqrt2 * math.Erfinv(float64(kept)/float64(n))
	p := float64(kept) / float64(n)
	return (p - 2*z*math.Exp(-z*z/2)/math.Sqrt(2*math.Pi)) / p
}

// residual is pseudoResidual, computed once for every point: the points do not
// change after they were cleaned.
func (w *work) residual(j int) (square, known float64, ok bool) {
	if w.residuals == nil {
		w.residuals = make([][2]float64, len(w.pts))
	}
	r := &w.residuals[j]
	if *r == [2]float64{} {
		var ok bool
		if r[0], r[1], ok = w.pseudoResidual(j); !ok {
			r[1] = -1
		}
	}
	return r[0], r[1], r[1] >= 0
}

// pseudoResidual is the squared distance, in V², of point j from the cubic
// through two neighbours on either side, scaled to the variance of one point;
// known is the part of it that the points' own u and ux explain.
func (w *work) pseudoResidual(j int) (square, known float64, ok bool) {
	p := w.pts[j-2 : j+3]
	for k := range p {
		if !p[k].above() {
			return 0, 0, false
		}
	}
	x := p[2].vg
	var l [5]float64
	factor := 1.0
	for a := range p {
		if a == 2 {
			continue
		}
		l[a] = 1
		for b := range p {
			if b == 2 || b == a {
				continue
			}
			if p[a].vg == p[b].vg {
				return 0, 0, false
			}
			l[a] *= (x - p[b].vg) / (p[a].vg - p[b].vg)
		}
		factor += l[a] * l[a]
	}
	o := root
	if !(p[0].i > 0) || 2*(p[4].vg-p[0].vg) < knee*(p[4].ln-p[0].ln) {
		o = logarithm
	}
	slope := (o.at(&p[4]) - o.at(&p[0])) / (p[4].vg - p[0].vg)
	if !(slope > 0) {
		return 0, 0, false
	}
	r := o.at(&p[2])
	l[2] = 1
	for a := range p {
		if a != 2 {
			r -= l[a] * o.at(&p[a])
		}
		u := l[a] * p[a].u * o.slopeAt(&p[a]) / slope
		known += u*u + l[a]*l[a]*p[a].ux*p[a].ux
	}
	return r * r / (slope * slope) / factor, known / factor, true
}
