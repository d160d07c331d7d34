package fit

import (
	"math"

	"gatesill/fit/lsq"
)

// Between coarse points the curve is read off along the transfer model, laid
// through the points around the current asked for. What the model may be wrong by
// grows with the distance from there: by a share of the distance in volts, and by
// another of how much further below the threshold one lies than the other, for
// knees differ more than strong inversion does. Across the gap between two points
// the residuals of both are spread as far as they stand out of the noise.
//
// The shares were chosen on curves of levels 1 and 3 of the simulator and on
// self-made ones (TestTestSet, families not held back).
const (
	farShare  = 0.004
	kneeShare = 0.03
	modelPart = 0.3
	onShare   = 0.05 // of V_DS, where the load resistor has taken most of the supply
	deepest   = 0.15 // V, beyond which a knee is no more wrong
	mostDoubt = 10
	// alongRatio bounds the currents of the points used, as a factor to the current
	// asked for.
	alongRatio = 300
	// leastAlong is the fewest points, and leastOn the fewest that carry current,
	// that a model is laid through.
	leastAlong = 5
	leastOn    = 4
	// What is known of knees beforehand: slope factor (logarithmic standard
	// deviation); of mobility, 1/V; and of a supply that
	// was stated, as a share.
	usualN, usualNSpread         = 1.4, 0.5
	usualTheta, usualThetaSpread = 0.1, 0.6
	statedSupply                 = 0.005
	squeezedTheta                = 0.2
)

// feet are the shapes of a knee that are tried; how well they describe the points
// decides, or weighs, between them.
var feet = [...]Foot{SmoothFoot, SharpFoot, KinkedFoot}

const (
	// plainlyWorse is by how much more the cost of the other foot may be for it to
	// count at all.
	plainlyWorse = 14
	// rareFoot is what the kinked foot costs beforehand.
	rareFoot = 8
)

var alongOptions = lsq.Options{MaxEvals: 40}

// depth is how far below the threshold x = V_GS - V_T lies, V: smoothly from 0
// well above it.
func depth(x float64) float64 {
	const a = 2 * usualN * thermalVoltage
	return a*math.Log1p(math.Exp(-math.Abs(x)/a)) + math.Max(0, -x)
}

// wrong is what the model may be wrong by at x when it is right at y, V.
func wrong(x, y float64) float64 {
	return farShare*math.Abs(x-y) + kneeShare*math.Min(math.Abs(depth(x)-depth(y)), deepest)
}

// along is the model laid through the points around one crossing.
type along struct {
	transfer
	w        *work
	c        *crossing
	iref     float64   // A
	from     []int     // index of each point in work.pts
	a, b     int       // index here of the points around the crossing
	noise    float64   // V, scatter of the gate readings
	leak     float64   // A, what flows with the channel off
	squeezed bool      // the resistor takes over within three points
	at       float64   // V, the reading
	cost     float64   // how badly the model describes the points, on the scale of minus twice a log likelihood
	doubt    float64   // by how much more than usual the model is wrong here, as a factor
	model    []float64 // A, of each point: the part of sigma that is the model's
	got      lsq.Fit
	ofNoise  float64 // V, the part of the last reading's u that is scatter of the readings
	r, jac   []float64
	left     spreading
	place    [2 * krigeSide]int // of its residuals
}

// readAlong reads the crossing c at iref off the model; false where the plain rules
// have to do: points near enough to each other, too few, or none that the model
// describes.
func (w *work) readAlong(c *crossing, iref float64) bool {
	if c.b < 1 || w.pts[c.b].vg-w.pts[c.b-1].vg <= fineStep {
		return false
	}
	t := &w.along
	t.w, t.c, t.iref = w, c, iref
	if !t.choose() || !t.begin() {
		return false
	}
	var v, u, gm, cost, random [len(feet)]float64
	begin := t.p
	best := math.Inf(1)
	for k, foot := range feet {
		t.p, t.foot = begin, foot
		cost[k] = math.Inf(1)
		if t.lay(best + plainlyWorse) {
			v[k], u[k], gm[k] = t.read()
			cost[k], random[k] = t.cost, t.ofNoise
		}
		if !(u[k] < math.Inf(1)) {
			cost[k] = math.Inf(1)
		}
		best = math.Min(best, cost[k])
	}
	if math.IsInf(best, 1) {
		return false
	}
	var sum, mean, second, slope, scatter float64
	for k := range feet {
		if share := math.Exp((best - cost[k]) / 2); share > 1e-3 {
			sum += share
			mean += share * v[k]
			second += share * (u[k]*u[k] + v[k]*v[k])
			slope += share * gm[k]
			scatter += share * random[k] * random[k]
		}
	}
	mean /= sum
	all := math.Sqrt(math.Max(0, second/sum-mean*mean))
	a, b := t.vg[t.a], t.vg[t.b]
	if most := 3*rss(t.noise, w.pts[c.b].ux) + 0.02*(b-a); mean < a-most || mean > b+most {
		return false
	}
	c.v, c.u, c.gm, c.n = mean, all, slope/sum, len(t.vg)
	c.random = math.Sqrt(scatter / sum)
	return true
}

// lay fits the model; false where it comes to nothing, or is plainly worse than
// what has been found before: a weighted sum of squares above most.
func (t *along) lay(most float64) bool {
	t.at, t.doubt = (t.vg[t.a]+t.vg[t.b])/2, 1
	for pass := range 4 {
		t.weigh()
		if t.squeezed && pass == 0 {
			t.fitFromSeveral()
		} else {
			t.got = t.fit(alongOptions)
		}
		v, _ := t.gateFor(t.iref, t.at)
		if math.IsNaN(v) {
			return false
		}
		t.at = v
		if pass < 1 {
			continue
		}
		if pass == 1 {
			t.cost = (float64(t.rows()-len(t.free)) + 2) * math.Log(t.fits())
			if t.foot == KinkedFoot {
				t.cost += rareFoot
			}
			if t.cost > most {
				return false
			}
		}
		t.doubt = math.Max(1, math.Min(t.doubt*math.Sqrt(t.fits()), mostDoubt))
	}
	return true
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
	wh := w.whole()
	var off float64
	t.leak, off = w.offCurrent(wh)
	n, over := 0, 0
	for j := range w.pts {
		p := &w.pts[j]
		top, ok := w.supplyOf(p)
		under := t.c.b - j
		switch {
		case !ok, under > 3 && (p.vg < off || p.i < t.iref/alongRatio):
			continue
		case under <= 0 && !t.squeezed && t.crowded(p, top),
			over > 3 && !t.squeezed && p.i > t.iref*alongRatio:
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
	return n >= leastAlong && over >= 2 && t.b == t.a+1 && t.from[t.b] == t.c.b && w.standing() >= leastOn
}

// crowded reports whether more than half of the supply lies across the resistor.
func (t *transfer) crowded(p *point, top float64) bool {
	return t.f.drain > 0 && p.i*t.f.drain > 0.5*top
}

// begin sets the parameters to start from and what is known of them beforehand.
func (t *along) begin() bool {
	t.noise = usualNoise
	if wh := t.w.whole(); wh != nil {
		t.noise = math.Min(wh.noise, math.Max(t.w.scatterNear(t.c.b), usualNoise/4))
		t.p = wh.p
	}
	if (t.w.whole() == nil || t.squeezed) && !t.start(t.w.resistive()) {
		return false
	}
	t.free = append(t.free[:0], parVt, parBeta, parN, parTheta)
	t.mean[parTheta], t.sd[parTheta] = usualTheta, usualThetaSpread
	switch {
	case t.squeezed:
		t.sd[parTheta] = squeezedTheta
	case t.w.whole() != nil:
		t.mean[parTheta], t.sd[parTheta] = t.p[parTheta], squeezedTheta/2
	}
	t.mean[parN], t.sd[parN] = math.Log(usualN), usualNSpread
	if t.squeezed {
		t.free = append(t.free, parTop)
		t.mean[parTop], t.sd[parTop] = 0, statedSupply*t.vtop[0]
	}
	t.p[parN] = t.mean[parN]
	if cap(t.model) < len(t.vg) {
		t.model = make([]float64, len(t.vg), cap(t.vg))
	}
	t.model = t.model[:len(t.vg)]
	for j := range t.slope {
		t.slope[j], t.solved[j] = secant(t.vg, t.i, j), t.i[j]
	}
	return true
}

// weigh sets sigma: what is known of the points, their scatter, and what the model
// may be wrong by.
func (t *along) weigh() {
	vt := t.p[parVt]
	for j := range t.sigma {
		p := &t.w.pts[t.from[j]]
		s := math.Max(t.slope[j], 1e-3*t.iref)
		off := 0.0
		if j != t.a && j != t.b {
			off = s * t.doubt * wrong(p.vg-vt, t.at-vt)
		}
		if t.crowded(p, t.vtop[j]) {
			off = rss(off, rss(typicalNoise*p.i, onShare*math.Max(0, t.vtop[j]/t.f.drain-t.solved[j])))
		}
		t.model[j] = rss(off, t.leak)
		t.sigma[j] = math.Max(rss(t.random(j), t.model[j]), 1e-6*t.iref)
	}
}

// random is the standard deviation of the current of point j, A, gate reading
// included.
func (t *along) random(j int) float64 {
	p := &t.w.pts[t.from[j]]
	return rss(math.Max(p.u, p.q/2), t.slope[j]*rss(t.noise, p.ux))
}

// fitFromSeveral starts from gains that are greater and greater: where the points
// lie on both sides of the rise the steepest step tells its least.
func (t *along) fitFromSeveral() {
	begin := t.p
	var best [parCount]float64
	for k := range 4 {
		t.p = begin
		t.p[parBeta] += float64(k) * math.Ln2
		if got := t.fit(alongOptions); k == 0 || got.SSR < t.got.SSR {
			t.got, best = got, t.p
		}
	}
	t.p = best
}

// fits is how well the model describes these points: reduced χ², drawn towards 1
// where they are few.
func (t *along) fits() float64 {
	return (t.got.SSR + 2) / (float64(t.rows()-len(t.free)) + 2)
}

// read makes the reading of the model: its gate voltage, corrected by the residuals
// of the two points around it as far as they stand out of the noise.
//
// u is what the scatter of every point does to that, and what the model may be
// wrong by: at the points, in the gap, and in what was assumed beforehand. The
// latter is scaled by how well the model describes these very points.
func (t *along) read() (v, u, gm float64) {
	_, slope := t.gateFor(t.iref, t.at)
	m, n := t.rows(), len(t.free)
	if cap(t.r) < m*(n+1) {
		t.r = make([]float64, (m+8)*(n+3))
	}
	t.r, t.jac = t.r[:m], t.r[m:m*(n+1)]
	for j, k := range t.free {
		t.at7[j] = t.p[k]
	}
	if !t.eval(t.at7[:n], t.r, t.jac) {
		return t.at, math.Inf(1), slope
	}
	ch := channelOf(&t.p, t.foot)
	var dp [parCount]float64
	top := t.vtop[t.b] + t.p[parTop]
	if t.f.tied {
		top = t.at
	}
	ch.along(t.f, t.at, top, t.iref, &dp)
	var g [parCount]float64 // of the reading by the free parameters
	for k, par := range t.free {
		g[k] = -dp[par] / slope
	}
	p := &t.left
	p.n = 0
	first := max(0, t.b-krigeSide)
	for j := first; j < min(len(t.vg), t.b+krigeSide); j++ {
		if s := t.random(j) / t.slope[j]; t.slope[j] > 0 && s < 0.05 {
			p.x[p.n], p.r[p.n], p.s[p.n] = t.vg[j], (t.solved[j]-t.i[j])/t.slope[j], s
			t.place[p.n] = j
			p.n++
		}
	}
	value, gap := p.at(t.at)
	v = t.at + value
	for k := range p.n {
		j := t.place[k]
		for f := range t.free {
			g[f] += p.w[k] * t.sigma[j] * t.jac[f*m+j] / t.slope[j]
		}
	}
	var random, model float64
	for j := range m {
		h := 0.0
		for f := range t.free {
			for e := range t.free {
				if cv := t.got.Cov(f, e); !math.IsNaN(cv) {
					h += g[f] * cv * t.jac[e*m+j]
				}
			}
		}
		if j >= len(t.vg) {
			model += h * h // what was assumed
			continue
		}
		h /= t.sigma[j]
		for k := range p.n {
			if t.place[k] == j {
				h -= p.w[k] / t.slope[j]
			}
		}
		s := h * t.random(j)
		random += s * s
		s = h * t.model[j]
		model += s * s
	}
	model *= math.Max(0.1, math.Min(t.fits(), 9))
	model = gap*gap + modelPart*model
	if debugAlong != nil {
		debugAlong(t)
	}
	t.ofNoise = math.Sqrt(random)
	return v, math.Sqrt(random + model), slope
}

var debugAlong func(*along)
