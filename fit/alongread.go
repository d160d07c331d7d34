package fit

import (
	"math"

	"gatesill/fit/lsq"
)

// kneeShape is one thing that the knee of a curve may look like.
type kneeShape struct {
	foot   Foot
	n      float64 // slope factor to expect
	spread float64 // standard deviation of its logarithm
	rare   float64 // what it costs beforehand, on the scale of minus twice a log likelihood
}

// rareKnee is what shapes with a corner cost beforehand: parts do not have it, simple
// models of parts do.
const rareKnee = 8

// kneeShapes are those tried; how well they describe the points decides, or weighs,
// between them. The last is a square law down to nothing.
var kneeShapes = [...]kneeShape{
	{SmoothFoot, usualN, usualNSpread, 0},
	{SharpFoot, usualN, usualNSpread, 0},
	{KinkedFoot, usualN, usualNSpread, rareKnee},
	{KinkedFoot, 0.1, usualNSpread, rareKnee},
}

const (
	// plainlyWorse is by how much more a reading may cost than the best for it to
	// count at all.
	plainlyWorse = 14
	// temper divides differences of cost. True likelihoods would have 2; but none of
	// the shapes is the part's own, and readings of shapes that do about equally well
	// must all stay in view (chosen on levels 1 and 3 of the simulator).
	temper = 4
	// clearOfKnee is how far above the threshold, V, the shapes of the knee no longer
	// differ: 3.5 times 2 n kT/q, where a smooth one is within 3 % of the straight line.
	clearOfKnee = 3.5 * 2 * usualN * thermalVoltage
	// alongPasses is how often the weights follow the fit.
	alongPasses = 4
	// settled is the change of the reading, V, below which the weights need not
	// follow any more.
	settled = 10e-6
	// atEdge is how far outside the two points around it, as a share of their
	// distance, a crossing may lie besides noise.
	atEdge = 0.02
	// clearPlace is the greatest standard deviation of a point, V, that tells of what
	// the model leaves over.
	clearPlace = 0.05
)

// alongOptions stop a fit when every parameter is within a hundredth of its standard
// error of the best.
var alongOptions = lsq.Options{MaxEvals: 40, Cosine: 2e-3}

// readings are those of one crossing by different models.
type readings struct {
	v, u, gm, ugm, cost [len(kneeShapes) * (gainSteps + 1)]float64 // V, V, S, S
	random              [len(kneeShapes)*(gainSteps+1) + 1]float64 // V², the part of u² that is scatter of the points
	n                   int
	best                float64 // least cost
}

func (s *readings) add(v, u, gm, ugm, cost float64) {
	if !(u < math.Inf(1)) || math.IsNaN(cost) || math.IsNaN(v) {
		return
	}
	s.v[s.n], s.u[s.n], s.gm[s.n], s.ugm[s.n], s.cost[s.n] = v, u, gm, ugm, cost
	s.n++
	s.best = math.Min(s.best, cost)
}

// mean is their mean, weighted by how well each model describes the points, with the
// standard deviations of the mixture.
func (s *readings) mean() (v, u, gm, ugm float64) {
	var sum, second, slopes float64
	for k := range s.n {
		share := math.Exp((s.best - s.cost[k]) / temper)
		sum += share
		v += share * s.v[k]
		gm += share * s.gm[k]
	}
	v, gm = v/sum, gm/sum
	for k := range s.n {
		share := math.Exp((s.best - s.cost[k]) / temper)
		d := s.v[k] - v
		second += share * (s.u[k]*s.u[k] + d*d)
		d = s.gm[k] - gm
		slopes += share * (s.ugm[k]*s.ugm[k] + d*d)
	}
	return v, math.Sqrt(second / sum), gm, math.Sqrt(slopes / sum)
}

// scatter is the part of the u of mean that is scatter of the points, V.
func (s *readings) scatter() float64 {
	var sum, random float64
	for k := range s.n {
		share := math.Exp((s.best - s.cost[k]) / temper)
		sum += share
		random += share * s.random[k]
	}
	return math.Sqrt(random / sum)
}

// readAlong reads the crossing c at iref off the device's own curve: the transfer
// model, laid through the points around the current asked for, corrected by what it
// leaves over there. False where the plain rules have to do: points near enough to
// each other, too few, or none that the model describes.
//
// Result: c.v and c.u, V; c.gm and c.ugm, S; c.n points. Checked: TestTestSet,
// TestOutsideCurves, TestUncertaintyIsHonest.
func (w *work) readAlong(c *crossing, iref float64) bool {
	if c.b < 1 || w.pts[c.b].vg-w.pts[c.b-1].vg <= fineStep {
		return false
	}
	t := &w.along
	t.w, t.c, t.iref = w, c, iref
	if !t.choose() || !t.begin() {
		return false
	}
	s := &t.readings
	s.n, s.best = 0, math.Inf(1)
	begin := t.p
	shapes := kneeShapes[:]
	lot := w.s.Lot
	if lot != nil && t.sparse() {
		shapes = []kneeShape{{lot.Foot, math.Exp(lot.LnN), lot.LnNSpread, 0}}
	}
	own := OwnShape{Sparse: t.sparse()}
	least := math.Inf(1)
	if t.vg[t.a]-t.p[parVt] > clearOfKnee && !t.squeezed && len(shapes) > 1 {
		shapes = shapes[:1] // they differ below only
	}
	for k := range shapes {
		t.p = begin
		t.take(&shapes[k])
		if s.best < least {
			least = s.best
			own.Ok, own.Foot, own.LnBeta, own.LnN, own.Theta = true, t.foot, t.p[parBeta], t.p[parN], t.p[parTheta]
		}
	}
	if s.n == 0 {
		return false
	}
	v, u, gm, ugm := s.mean()
	a, b := t.vg[t.a], t.vg[t.b]
	if most := 3*rss(t.noise, w.pts[c.b].ux) + atEdge*(b-a); v < a-most || v > b+most {
		return false
	}
	c.v, c.u, c.gm, c.ugm, c.n = v, u, gm, ugm, len(t.vg)
	c.random = s.scatter()
	c.own = own
	if lot != nil && own.Sparse {
		w.warn(CodeLotShape, "Too few points near "+amps(iref)+": the median shape of the curves of "+count(lot.Devices, "device", "devices")+" of the lot helped.")
	}
	return true
}

// take adds what the model reads with one shape of the knee.
func (t *along) take(k *kneeShape) {
	t.foot = k.foot
	t.p[parN] = math.Log(k.n)
	t.mean[parN], t.sd[parN] = t.p[parN], k.spread
	if !t.lay(k.rare) {
		return
	}
	if t.squeezed {
		t.takeGains()
		return
	}
	v, u, gm := t.read()
	t.readings.add(v, u, gm, t.slopeScatter(gm), t.cost)
}

// lay fits the model; false where it comes to nothing, or is plainly worse than
// what has been found before.
func (t *along) lay(rare float64) bool {
	t.at, t.doubt = (t.vg[t.a]+t.vg[t.b])/2, 1
	for pass := range alongPasses {
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
		moved := math.Abs(v - t.at)
		t.at = v
		if pass < 1 {
			continue
		}
		if pass == 1 {
			t.cost = rare + (t.spare()+2)*math.Log(t.fits())
			if t.cost > t.readings.best+plainlyWorse {
				return false
			}
		}
		before := t.doubt
		t.doubt = math.Max(1, math.Min(before*math.Sqrt(t.fits()), mostDoubt))
		if t.doubt < 1.1*before && moved < settled {
			break
		}
	}
	return true
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

const (
	// gainSteps is the number of gains, a share gainStride of their standard
	// deviation apart, at which a rise that hardly a point stands in is read.
	gainSteps  = 7
	gainStride = 0.8
	// That standard deviation, of ln β, is bounded: as a straight-line estimate it
	// may be nearly nothing or anything.
	leastGainSpread, mostGainSpread = 0.02, 1
)

// takeGains adds a reading for every gain that the points allow, weighed by how well
// they do: where the load resistor takes over within a step or two, the reading does
// not follow the gain in a straight line.
func (t *along) takeGains() {
	spread := float64(mostGainSpread)
	for f, par := range t.free {
		if s := math.Sqrt(t.got.Cov(f, f)); par == parBeta && s < spread {
			spread = math.Max(s, leastGainSpread)
		}
	}
	mid, ssr, at, cost := t.p, t.got.SSR, t.at, t.cost
	t.free = append(t.free[:0], parVt, parN, parTheta, parLambda, parTop)
	for k := range gainSteps {
		t.p, t.at = mid, at
		t.p[parBeta] += float64(k-gainSteps/2) * gainStride * spread
		t.got = t.fit(alongOptions)
		v, _ := t.gateFor(t.iref, t.at)
		more := t.got.SSR + t.surprise(parBeta) - ssr
		if math.IsNaN(v) || more > plainlyWorse {
			continue
		}
		t.at = v
		v, u, gm := t.read()
		t.readings.add(v, u, gm, t.slopeScatter(gm), cost+more*temper/2) // of one shape, true likelihoods
	}
	t.free = append(t.free[:0], parVt, parBeta, parN, parTheta, parLambda, parTop)
}

// surprise is the square of how far parameter par lies from what was expected of it,
// in standard deviations.
func (t *along) surprise(par int) float64 {
	d := (t.p[par] - t.mean[par]) / t.sd[par]
	return d * d
}

// spare is the number of residuals beyond the parameters fitted.
func (t *along) spare() float64 { return float64(t.rows() - len(t.free)) }

// fits is how well the model describes these points: reduced χ², drawn towards 1
// where they are few.
func (t *along) fits() float64 { return (t.got.SSR + 2) / (t.spare() + 2) }

// read makes the reading of the model: its gate voltage, corrected by the residuals
// of the points around it as far as they stand out of the noise.
//
// u is what the scatter of every point does to that, and what the model may be
// wrong by: at the points, between them, and in what was assumed beforehand. The
// latter is scaled by how well the model describes these very points.
func (t *along) read() (v, u, gm float64) {
	m, n := t.rows(), len(t.free)
	t.room(m, n)
	for j, k := range t.free {
		t.params[j] = t.p[k]
	}
	if !t.eval(t.params[:n], t.r, t.jac) {
		return t.at, math.Inf(1), math.NaN()
	}
	gm = t.derive()
	t.leftOver()
	t.left.usual = rss(krigeUsual, krigeShare*t.iref/gm)
	value, gap := t.left.at(t.at)
	for k := range t.left.n {
		j := t.place[k]
		for f := range t.free {
			t.by[f] += t.left.w[k] * t.sigma[j] * t.jac[f*m+j] / t.slope[j]
		}
	}
	random, model := t.scatterOfReading()
	t.readings.random[t.readings.n] = random
	model *= modelPart * math.Max(0.1, math.Min(t.fits(), 9))
	return t.at + value, math.Sqrt(random + model + gap*gap), gm
}

// derive sets the derivatives of the model's own reading by the free parameters and
// returns the slope of the curve there, S.
func (t *along) derive() float64 {
	ch := channelOf(&t.p, t.foot)
	top := t.vtop[t.b] + t.p[parTop]
	if t.f.tied {
		top = t.at
	}
	var dp [parCount]float64
	_, slope := ch.along(t.f, t.at, top, t.iref, &dp)
	for k, par := range t.free {
		t.by[k] = -dp[par] / slope
	}
	return slope
}

const (
	// bendShare is the share of the slope of what the model leaves over, its size over
	// the distance on which it changes, that a slope of the model is wrong by, and
	// slopeBase the distance, V, over which the scatter of the points tells of a slope
	// (chosen on levels 1 and 3 of the simulator). leastBend is what the slope of any
	// model is wrong by (judgement).
	bendShare = 0.5
	slopeBase = 0.15
	leastBend = 0.003
)

// slopeScatter is the standard deviation of the slope gm of the curve, S.
func (t *along) slopeScatter(gm float64) float64 {
	one := t.random(t.b) / t.slope[t.b]
	return gm * rss(rss(bendShare*t.left.seen()/krigeReach, one/slopeBase), leastBend)
}

// leftOver gathers what the model leaves over at the points around the crossing, in
// volts at the gate.
func (t *along) leftOver() {
	p := &t.left
	p.n = 0
	for j := max(0, t.b-krigeSide); j < min(len(t.vg), t.b+krigeSide); j++ {
		if s := rss(t.random(j), t.leak) / t.slope[j]; t.slope[j] > 0 && s < clearPlace {
			p.x[p.n], p.r[p.n], p.s[p.n] = t.vg[j], (t.solved[j]-t.i[j])/t.slope[j], s
			t.place[p.n] = j
			p.n++
		}
	}
}

// scatterOfReading is the variance of the reading, V², that the scatter of the points
// makes, and that which the model's part of their sigma and what was assumed of the
// parameters make: both linearly, by the derivatives of the fit.
func (t *along) scatterOfReading() (random, model float64) {
	m := t.rows()
	var share [parCount]float64 // of the reading by JᵀR
	for e := range t.free {
		for f := range t.free {
			if c := t.got.Cov(f, e); !math.IsNaN(c) {
				share[e] += t.by[f] * c
			}
		}
	}
	for j := range m {
		h := 0.0
		for e := range t.free {
			h += share[e] * t.jac[e*m+j]
		}
		if j >= len(t.vg) {
			model += h * h
			continue
		}
		h /= t.sigma[j]
		for k := range t.left.n {
			if t.place[k] == j {
				h -= t.left.w[k] / t.slope[j]
			}
		}
		s, o := h*t.random(j), h*t.model[j]
		random += s * s
		model += o * o
	}
	return random, model
}
