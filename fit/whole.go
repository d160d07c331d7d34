package fit

import (
	"math"
	"slices"

	"gatesill/fit/lsq"
)

// whole is the transfer model laid through a whole curve.
type whole struct {
	transfer
	from    []int             // index of each point in work.pts
	noise   float64           // V, scatter of points about the curve, beyond what is stated of them
	apart   []bool            // points so far off the curve that they do not count
	begin   [parCount]float64 // the parameters to start from
	between float64           // V, by how much the threshold differs with other shapes of the knee that do nearly as well
	misfit  float64           // reduced χ², floors included, of the points that count
	got     lsq.Fit
}

// The floors of the weights: what the model itself is wrong by. Without them the few
// points below the threshold, whose noise is least, would decide.
const (
	modelShare = 0.005 // of the current
	modelOfTop = 0.001 // of the greatest current
)

const (
	// usualNoise is the scatter of a handheld's gate reading, V (common practice, no
	// source).
	usualNoise = 0.4e-3
	// leastStrong is the fewest points that carry strongShare of the greatest current
	// or more.
	leastStrong = 4
	strongShare = 0.01
	// weakTheta holds θ only where the points say nothing of it, 1/V; weakLambda
	// likewise.
	weakTheta  = 1.0
	weakLambda = 0.05
	// takenOff is the share of the greatest current above which a leakage is taken off.
	takenOff = 1e-6
	// wellSaturated is how many times the overdrive the drain voltage must be for a
	// point behind a load resistor that takes most of the supply to count (judgement).
	wellSaturated = 2
	// limitOff is how many standard deviations, of what the other points leave, a point
	// may stand off the curve; leastOff the least residual, in units of its own sigma,
	// that is called off; plainlyOff that from which it is told (judgement).
	limitOff   = 4.5
	leastOff   = 0.3
	plainlyOff = 4.0
	// mostOff is the share of the points that may be so.
	mostOff = 0.2
	// plainMisfit is the reduced χ² above which the model does not describe a curve
	// (judgement: with the floors 0.03 to 0.1 is normal).
	plainMisfit = 4
)

// wholeOptions stop a fit when a further step would not matter (parSteps).
var wholeOptions = lsq.Options{MaxEvals: 200}

// shapeOptions do for telling the shapes of the knee apart: every parameter within a
// hundredth of its standard error of the best.
var shapeOptions = lsq.Options{MaxEvals: 25, Cosine: 5e-3}

// whole is the model laid through the curve, nil where there is none to be had.
func (w *work) whole() *whole {
	if !w.laid {
		w.laid = true
		if t, ok := w.layWhole(); ok {
			w.model = t
		}
	}
	return w.model
}

// layWhole lays the model through the curve; false where the points do not
// allow it.
//
// Uses the points that the model is meant for (see top). Weights: 1/σ² of the
// points' scatter, taken to volts at the gate and by the slope to a current, and of
// the floors; set from the readings first and then from the curve fitted. Points
// that stand far off the curve are given no weight, so that no single bad one moves
// the threshold.
//
// Parameters: V_T, β, n, θ, and λ in the load circuit. n is the width of the knee
// here, no slope factor. Resistance in the source lead goes into θ.
//
// Source: equation, see [Model]; V_T by whole-curve fits in all regions, A.
// Ortiz-Conde et al., Microelectronics Reliability 42 (2002) 583–596 (section from
// memory); points left out, see farOff. Checked: TestWholeCurve, TestOutsideThresholds, TestOneBadPoint.
func (w *work) layWhole() (*whole, bool) {
	t := &whole{}
	if w.s.Circuit == NoCircuit || !t.choose(w, math.NaN()) || !t.start(w.resistive()) {
		return nil, false
	}
	if t.f.drain > 0 && w.s.Circuit == Load {
		t.choose(w, t.p[parVt])
	}
	strong := 0
	top := slices.Max(t.i)
	for _, i := range t.i {
		if i > strongShare*top {
			strong++
		}
	}
	if strong < leastStrong {
		return nil, false
	}
	t.free = []int{parVt, parBeta, parN, parTheta}
	t.mean[parTheta], t.sd[parTheta] = usualTheta, weakTheta
	if w.s.Circuit == Load && t.f.drain > 0 && strong >= 2*leastStrong {
		t.free = append(t.free, parLambda)
		t.mean[parLambda], t.sd[parLambda] = usualLambda, weakLambda
	}
	for j := range t.slope {
		t.slope[j], t.solved[j] = secant(t.vg, t.i, j), t.i[j]
	}
	t.noise = usualNoise
	t.apart = make([]bool, len(t.vg))
	t.begin = t.p
	if !t.chooseFoot(w) || !t.refit(w, wholeOptions) {
		return nil, false
	}
	// What flows with the channel off flows beside it when it is on.
	if leak, _ := w.offCurrent(t); leak > takenOff*top {
		for j := range t.i {
			t.i[j] -= leak
		}
		if !t.chooseFoot(w) || !t.refit(w, wholeOptions) {
			return nil, false
		}
	}
	for range int(mostOff * float64(len(t.vg))) {
		k := t.farOff()
		if k < 0 {
			break
		}
		t.apart[k] = true
		// A point far off may have chosen the shape of the knee.
		if !t.chooseFoot(w) || !t.refit(w, wholeOptions) {
			return nil, false
		}
	}
	t.misfit = t.got.SSR / math.Max(1, float64(t.rows()-t.setApart()-len(t.free)))
	return t, true
}

// chooseFoot fits each shape of the knee once and keeps the one that describes the
// points best; the smooth one unless another is plainly better.
func (t *whole) chooseFoot(w *work) bool {
	noise := t.noise
	best, p, foot := math.Inf(1), t.p, SmoothFoot
	var ssr, vt [3]float64
	var smoothest [parCount]float64
	for k, f := range [...]Foot{SmoothFoot, SharpFoot, KinkedFoot} {
		t.p, t.noise, t.foot = t.begin, noise, f
		if k > 0 && !math.IsInf(ssr[0], 1) {
			// From the smooth one, whose knee is narrower where the foot is sharp.
			t.p = smoothest
			t.p[parN] += narrower[f]
		} else {
			for j := range t.slope {
				t.slope[j], t.solved[j] = secant(t.vg, t.i, j), t.i[j]
			}
		}
		ssr[k] = math.Inf(1)
		if !t.refit(w, shapeOptions) {
			continue
		}
		ssr[k], vt[k] = t.got.SSR, t.p[parVt]
		if k == 0 {
			smoothest = t.p
		}
		if t.got.SSR < plainlyBetter*best || math.IsInf(best, 1) {
			best, p, foot = t.got.SSR, t.p, f
		}
	}
	t.p, t.foot, t.between = p, foot, 0
	for k := range ssr {
		if ssr[k] < hardlyWorse*best {
			t.between = math.Max(t.between, math.Abs(vt[k]-p[parVt]))
		}
	}
	return !math.IsInf(best, 1)
}

// narrower is by how much the logarithm of n is greater with another foot where the
// smooth one stands in for it (from fits to level 3 of the simulator).
var narrower = [...]float64{SmoothFoot: 0, SharpFoot: 0.5, KinkedFoot: 1}

// plainlyBetter is the share of the weighted sum of squares below which another
// shape of the knee is taken (judgement).
const plainlyBetter = 0.5

// hardlyWorse is how many times that of the shape taken the sum of squares of another
// may be for the distance of their thresholds to count as uncertainty (judgement).
const hardlyWorse = 5

// setApart is the number of points that do not count.
func (t *whole) setApart() int {
	n := 0
	for _, apart := range t.apart {
		if apart {
			n++
		}
	}
	return n
}

// refit weighs the points anew and fits.
func (t *whole) refit(w *work, o lsq.Options) bool {
	t.weigh(w)
	t.got = t.fit(o)
	if r := t.got.Reason; !r.Converged() && r != lsq.TooManyEvaluations && r != lsq.Stuck {
		return false
	}
	t.noise = t.scatter(w)
	return true
}

// farOff is the point that stands farthest off the curve that the others make, by
// its studentised deleted residual; -1 where none stands out.
//
// Source: D. A. Belsley, E. Kuh and R. E. Welsch, Regression Diagnostics (1980),
// section 2.1 (from memory). Checked: TestOneBadPoint.
func (t *whole) farOff() int {
	m, n := t.rows(), len(t.free)
	t.room(m, n)
	if !t.eval(t.got.P, t.r, t.jac) {
		return -1
	}
	free := float64(len(t.vg) - t.setApart() - n - 1)
	if free < 1 {
		return -1
	}
	worst, at := limitOff, -1
	for j := range t.vg {
		if t.apart[j] {
			continue
		}
		h := 0.0
		for f := range n {
			for e := range n {
				if c := t.got.Cov(f, e); !math.IsNaN(c) {
					h += t.jac[f*m+j] * c * t.jac[e*m+j]
				}
			}
		}
		r2 := t.r[j] * t.r[j] / math.Max(1-h, 1e-6)
		left := math.Max(t.got.SSR-r2, 1e-12)
		if z := math.Sqrt(r2 * free / left); z > worst && math.Abs(t.r[j]) > leastOff {
			worst, at = z, j
		}
	}
	return at
}

// residual of point j, in units of what it may be off.
func (t *whole) residual(j int) float64 {
	s := t.sigma[j]
	if t.apart[j] {
		s /= noWeight
	}
	return (t.solved[j] - t.i[j]) / s
}

// noWeight is the factor to sigma that takes a point out of a fit.
const noWeight = 1e6

// choose takes the points that the model can describe: see top; and once the
// threshold is known about, all whose drain voltage is well above the overdrive.
func (t *whole) choose(w *work, vt float64) bool {
	t.size(len(w.pts))
	t.from = t.from[:0]
	n := 0
	for j := range w.pts {
		p := &w.pts[j]
		top, ok := w.top(p)
		if !ok && p.vds > wellSaturated*(p.vg-vt) {
			top, ok = w.supplyOf(p)
		}
		if !ok {
			continue
		}
		t.vg[n], t.vtop[n], t.i[n] = p.vg, top, p.i
		t.from = append(t.from, j)
		n++
	}
	t.size(n)
	t.f = w.feed()
	return n > 0
}

// feed is the circuit as far as it is known.
func (w *work) feed() (f feed) {
	burden := w.s.Burden
	if !positive(burden) {
		burden = 0
	}
	switch w.s.Circuit {
	case Diode:
		f.tied = true
	case Fixed:
		if len(w.c.Vd) == 0 {
			f.drain = burden
		}
	case Load:
		if positive(w.s.RL) && finiteNumber(w.vdd) {
			f.drain = w.s.RL + burden
		}
	}
	return f
}

// manyVolts stands for a drain voltage that is not known but well above the
// overdrive.
const manyVolts = 1000

// top is the voltage above the circuit's drain resistance at point p; false for a
// point that the model is not meant for: no drain voltage known, or more than half
// of the supply across R_L, for the model's channel is no good resistor.
func (w *work) top(p *point) (float64, bool) {
	switch w.s.Circuit {
	case Diode:
		if v := w.drainAt(p.k); finiteNumber(v) {
			return v, true
		}
		return p.vg, true
	case Fixed:
		if len(w.c.Vd) > 0 {
			v := w.drainAt(p.k)
			return v, finiteNumber(v)
		}
		return w.s.Vds, positive(w.s.Vds)
	case Load:
		v := w.supplyAt(p.k)
		if !positive(w.s.RL) {
			return manyVolts, true
		}
		if !finiteNumber(v) {
			return manyVolts, p.i*w.s.RL < 0.5*w.least
		}
		return v, p.i*w.s.RL < 0.5*v
	}
	return manyVolts, true
}

// resistive reports whether the channel is a resistor at most points.
func (w *work) resistive() bool { return w.s.Circuit == Fixed && w.fixedVds() < linearVds }

// start finds the parameters to start from: a straight line through the root of
// the current, or through the current itself where the channel is a resistor; the
// steepest step where the load resistor leaves too few points for a line.
func (t *transfer) start(resistive bool) bool {
	top := 0.0
	free := func(j int) bool { return t.f.drain == 0 || resistive || t.i[j]*t.f.drain < 0.5*t.vtop[j] }
	for j := range t.i {
		if free(j) {
			top = math.Max(top, t.i[j])
		}
	}
	lo := 0.02
	if resistive {
		lo = 0.2
	}
	root := func(i float64) float64 {
		if resistive {
			return i
		}
		return math.Sqrt(math.Max(0, i))
	}
	var n, sx, sy, sxx, sxy float64
	for j, i := range t.i {
		if i < lo*top || !free(j) {
			continue
		}
		y := root(i)
		n++
		sx += t.vg[j]
		sy += y
		sxx += t.vg[j] * t.vg[j]
		sxy += t.vg[j] * y
	}
	b := (n*sxy - sx*sy) / (n*sxx - sx*sx)
	vt := (sx - sy/b) / n
	if n < 3 || !(b > 0) {
		b = 0
		for j := 1; j < len(t.i); j++ {
			if s := (root(t.i[j]) - root(t.i[j-1])) / (t.vg[j] - t.vg[j-1]); s > b && t.vg[j] > t.vg[j-1] {
				b, vt = s, t.vg[j]-root(t.i[j])/s
			}
		}
	}
	if !(b > 0) || math.IsNaN(vt) {
		return false
	}
	t.p = [parCount]float64{parVt: vt, parBeta: math.Log(2 * b * b), parN: math.Log(1.5)}
	if resistive {
		v := t.vtop[len(t.vtop)-1]
		if !(v > 0) {
			return false
		}
		t.p[parVt] -= v / 2
		t.p[parBeta] = math.Log(b / v)
	}
	return true
}

// weigh sets sigma from what is known of the points, the scatter seen, and the
// floors.
func (t *whole) weigh(w *work) {
	top := slices.Max(t.i)
	for j := range t.sigma {
		p := &w.pts[t.from[j]]
		random := rss(p.u, t.slope[j]*rss(t.noise, p.ux))
		t.sigma[j] = rss(random, t.floor(j, top))
		if t.apart[j] {
			t.sigma[j] *= noWeight
		}
	}
}

// floor is what the model itself is wrong by at point j, A.
func (t *whole) floor(j int, top float64) float64 {
	return rss(modelShare*t.solved[j], modelOfTop*top)
}

// scatter is the standard deviation of the points about the curve, in volts at the
// gate, beyond what is stated of them: of those that carry a hundredth of the
// greatest current or more.
func (t *whole) scatter(w *work) float64 {
	top := slices.Max(t.i)
	var sum, known float64
	n := 0
	for j, i := range t.i {
		if i < strongShare*top || t.apart[j] {
			continue
		}
		p := &w.pts[t.from[j]]
		r := (t.solved[j] - i) / t.slope[j]
		sum += r * r
		k := rss(p.ux, p.u/t.slope[j])
		known += k * k
		n++
	}
	if n == 0 {
		return t.noise
	}
	// Of few points the scatter says little: two more of a usual one are added.
	free := float64(max(0, n-len(t.free)))
	return math.Sqrt(math.Max(0, (sum+2*usualNoise*usualNoise)/(free+2)-known/float64(n)))
}

// secant is the slope of the curve at point j by its neighbours.
func secant(x, y []float64, j int) float64 {
	a, b := max(0, j-1), min(len(x)-1, j+1)
	if !(x[b] > x[a]) {
		return 0
	}
	return math.Max(0, (y[b]-y[a])/(x[b]-x[a]))
}
