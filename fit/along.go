package fit

import (
	"math"

	"gatesill/fit/lsq"
)

// What the model may be wrong by grows with the distance from where the curve is to
// be read: by a share of the distance in volts, and by another of how much further
// below the threshold one place lies than the other, for knees differ more than
// strong inversion does. Chosen on curves of levels 1 and 3 of the simulator that
// are not held back, and on self-made ones.
const (
	farShare  = 0.004
	kneeShare = 0.03
	deepest   = 0.15 // V, the depth beyond which a knee is no more wrong
	// onShare is the same of V_DS of a channel that is a resistor.
	onShare = 0.05
	// modelPart is how much of the variance that these shares stand for goes into
	// the uncertainty: they are bounds rather than standard deviations.
	modelPart = 0.3
	// mostDoubt is the most by which the shares are raised where the model describes
	// the points badly.
	mostDoubt = 10
)

const (
	// alongRatio bounds the currents of the points used, as a factor to the current
	// asked for.
	alongRatio = 300
	// alongSide is the number of points on either side used whatever they carry.
	alongSide = 3
	// leastAlong is the fewest points, and leastOn the fewest that carry current,
	// that a model is laid through: one more than the parameters, and as many.
	leastAlong = 5
	leastOn    = 4
)

// What is known beforehand (common practice, no source): of the slope factor and of
// the gain factor, A/V², with the standard deviations of their logarithms; of what
// mobility and source resistance do together, 1/V; of channel-length modulation, 1/V;
// and of a supply that was stated, as a share of it. Where the points are few because
// the load resistor takes over, and where the whole curve tells of θ, less of it is
// left open.
const (
	usualN, usualNSpread           = 1.4, 0.5
	usualGain, usualGainSpread     = 3, 1.5
	usualTheta, usualThetaSpread   = 0.1, 0.6
	usualLambda, usualLambdaSpread = 0.01, 0.01 // 1/V
	squeezedTheta                  = 0.2
	toldTheta                      = 0.1
	statedSupply                   = 0.005
)

// depth is how far below the threshold x = V_GS - V_T lies, V: smoothly from 0
// well above it.
func depth(x float64) float64 {
	const a = 2 * usualN * thermalVoltage
	return a*math.Log1p(math.Exp(-math.Abs(x)/a)) + math.Max(0, -x)
}

// wrong is what the model may be wrong by at x = V_GS - V_T when it is right at y,
// V.
func wrong(x, y float64) float64 {
	return farShare*math.Abs(x-y) + kneeShare*math.Min(math.Abs(depth(x)-depth(y)), deepest)
}

// along is the transfer model laid through the points around one crossing; scratch
// kept from one crossing to the next.
type along struct {
	transfer
	w        *work
	c        *crossing
	iref     float64 // A
	from     []int   // index of each point in work.pts
	a, b     int     // index here of the points around the crossing
	noise    float64 // V, scatter of the gate readings
	share    float64 // scatter of the currents, as a share
	leak     float64 // A, what flows with the channel off
	squeezed bool    // the load resistor takes over within three points

	at    float64   // V, the reading of the model alone
	cost  float64   // how badly the model describes the points, on the scale of minus twice a log likelihood
	doubt float64   // by how much more than usual the model is wrong here, as a factor
	model []float64 // A, of each point: the part of sigma that is the model's
	got   lsq.Fit

	readings readings
	left     spreading
	place    [2 * krigeSide]int // points that the residuals in left belong to
	by       [parCount]float64  // V by free parameter: the reading's derivatives
}

// choose takes the points around the crossing: those with currents near the one
// asked for, three or four on either side whatever they carry. Points with most of
// the supply across the load resistor are left out unless it takes over so early
// that they are needed.
func (t *along) choose() bool {
	w := t.w
	t.size(len(w.pts))
	t.from = t.from[:0]
	t.f = w.feed()
	t.squeezed = t.f.drain > 0 && w.squeezed(t.c.b)
	var off float64
	t.leak, off = w.offCurrent(w.whole())
	t.a, t.b = -1, -1
	n, over := 0, 0
	for j := range w.pts {
		p := &w.pts[j]
		top, ok := w.supplyOf(p)
		under := t.c.b - j
		switch {
		case !ok, under > alongSide && (p.vg < off || p.i < t.iref/alongRatio):
			continue
		case under <= 0 && !t.squeezed && t.crowded(p, top),
			over > alongSide && !t.squeezed && p.i > t.iref*alongRatio:
			continue
		}
		switch under {
		case 1:
			t.a = n
		case 0:
			t.b = n
		}
		if under <= 0 {
			over++
		}
		t.vg[n], t.vtop[n], t.i[n] = p.vg, top, p.i
		t.from = append(t.from, j)
		n++
	}
	t.size(n)
	if t.a < 0 || t.b != t.a+1 {
		return false
	}
	if w.s.Lot != nil && t.sparse() {
		return n >= sparsePoints
	}
	return n >= leastAlong && over >= 2 && w.standing() >= leastOn
}

// crowded reports whether more than half of the supply lies across the resistor.
func (t *transfer) crowded(p *point, top float64) bool {
	return t.f.drain > 0 && p.i*t.f.drain > 0.5*top
}

// begin sets the parameters to start from and what is known of them beforehand.
func (t *along) begin() bool {
	wh := t.w.whole()
	if wh != nil {
		t.noise, t.share = t.w.components(wh)
		t.p = wh.p
	} else {
		t.noise, t.share = usualNoise, t.limitShare()
	}
	lot := t.w.s.Lot
	if lot != nil && !t.sparse() {
		lot = nil
	}
	if (wh == nil || t.squeezed) && !t.start(t.w.resistive()) && lot == nil {
		return false
	}
	t.free = append(t.free[:0], parVt, parBeta, parN, parTheta)
	t.sd[parBeta] = 0
	switch {
	case t.squeezed:
		t.mean[parTheta], t.sd[parTheta] = usualTheta, squeezedTheta
		if wh != nil {
			t.mean[parTheta], t.sd[parTheta] = wh.p[parTheta], rss(squeezedTheta, wh.toldBy(parTheta))
		}
		t.mean[parBeta], t.sd[parBeta] = math.Log(usualGain), usualGainSpread
		t.free = append(t.free, parLambda, parTop)
		t.mean[parLambda], t.sd[parLambda] = usualLambda, usualLambdaSpread
		t.mean[parTop], t.sd[parTop] = 0, statedSupply*t.vtop[0]
	case wh != nil:
		t.mean[parTheta], t.sd[parTheta] = t.p[parTheta], toldTheta
	default:
		t.mean[parTheta], t.sd[parTheta] = usualTheta, usualThetaSpread
	}
	if lot != nil {
		t.lotPriors(lot)
	}
	if cap(t.model) < len(t.vg) {
		t.model = make([]float64, len(t.vg), cap(t.vg))
	}
	t.model = t.model[:len(t.vg)]
	for j := range t.slope {
		t.slope[j], t.solved[j] = secant(t.vg, t.i, j), t.i[j]
	}
	return true
}

// limitShare is the scatter of the currents, as a share, where the load resistor
// limits them: by how much each stands out of the line between its neighbours. Of
// few points it says little, so that a usual scatter counts among them.
func (t *along) limitShare() float64 {
	sum, n := usualWorth*typicalNoise*typicalNoise, float64(usualWorth)
	limited := 0
	for j := range t.i {
		if !t.crowded(&t.w.pts[t.from[j]], t.vtop[j]) {
			limited = 0
			continue
		}
		if limited++; limited >= 3 {
			d := (t.i[j]+t.i[j-2])/2/t.i[j-1] - 1
			sum += d * d / 1.5
			n++
		}
	}
	return math.Sqrt(sum / n)
}

// weigh sets sigma: what is known of the points, their scatter, and what the model
// may be wrong by. The two points around the crossing are not doubted.
func (t *along) weigh() {
	vt := t.p[parVt]
	for j := range t.sigma {
		p := &t.w.pts[t.from[j]]
		off := 0.0
		if j != t.a && j != t.b {
			off = math.Max(t.slope[j], 1e-3*t.iref) * t.doubt * wrong(p.vg-vt, t.at-vt)
		}
		if t.crowded(p, t.vtop[j]) {
			off = rss(off, onShare*math.Max(0, t.vtop[j]/t.f.drain-t.solved[j]))
		}
		t.model[j] = rss(off, t.leak)
		t.sigma[j] = math.Max(rss(t.random(j), t.model[j]), 1e-6*t.iref)
	}
}

// random is the standard deviation of the current of point j, A, gate reading
// included. Noise of a display's last digit is about half a count whatever is known.
func (t *along) random(j int) float64 {
	p := &t.w.pts[t.from[j]]
	return rss(rss(math.Max(p.u, p.q/2), t.share*p.i), t.slope[j]*rss(t.noise, p.ux))
}

// toldBy is the standard deviation of a parameter as the whole curve tells it.
func (t *whole) toldBy(par int) float64 {
	for f, k := range t.free {
		if k == par {
			if s := math.Sqrt(t.got.Cov(f, f)); s > 0 {
				return s
			}
		}
	}
	return 0
}
