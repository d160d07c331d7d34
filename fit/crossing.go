package fit

import "math"

const (
	// knee is the apparent overdrive 2/(d ln I/dV) below which a point is not
	// clearly in strong inversion: 5 kT/q.
	knee = 5 * thermalVoltage
	// farRatio is the ratio of neighbouring currents from which interpolation is
	// a guess (judgement).
	farRatio = 30
	// wellRead is the uncertainty, V, below which a reading between coarse points needs
	// no warning (judgement: a sixth of a bin of 10 mV).
	wellRead = 1.5e-3
	// lostShare is the share of the distance between two points from which on a
	// reading along the model is asked whether a polynomial knows better (judgement).
	lostShare = 0.03
	// fineStep is the step below which interpolation near the knee is good.
	fineStep = 0.0105
	// windowSide is the most points on either side of the crossing that are used.
	windowSide = 12
	// windowRatio bounds the currents in a window, as a factor to the current
	// asked for; two points on either side are used whatever they carry.
	windowRatio = 12
	// agreeing is how many standard deviations estimates from growing windows
	// may lie apart before the wider one is taken to be biased, and skewShare the
	// share of the difference of the two leaning parabolas that counts as
	// uncertainty. Both chosen on self-made curves (TestUncertaintyIsHonest) and
	// tried on the simulator's (TestOutsideUncertainty).
	agreeing  = 1.2
	skewShare = 0.8
	// boundShare is the share of the distance between two bounds that counts as
	// uncertainty: more than a rectangle's, for a square law lies on the bound.
	boundShare = 0.4
	// cornerShare is where between the curve continued and the chord a crossing
	// before a corner is put (chosen on self-made curves).
	cornerShare = 0.25
)

// crossing is the gate voltage at which the curve reaches a current.
type crossing struct {
	v       float64  // V, n-channel sign; NaN: none
	u       float64  // V, random part, interpolation included
	random  float64  // V, the part of u that is scatter of the readings; 0: not told apart
	gm      float64  // S, slope of the curve there
	ugm     float64  // S, its random uncertainty where the reading was made along the model, else NaN
	own     OwnShape // what the points around it tell of the shape of the curve
	n       int      // points it rests on
	count   int      // upward crossings
	lo, hi  float64  // V, first and last upward crossing
	b       int      // index of the first point at or above the current
	below   bool     // already above the current at the first point
	never   bool     // never reaches it
	coarse  bool     // points too far apart there
	limited bool     // the current is below the floor of the counts
}

func noCrossing() crossing {
	return crossing{v: math.NaN(), u: math.NaN(), gm: math.NaN(), ugm: math.NaN(), lo: math.NaN(), hi: math.NaN(), b: -1}
}

// gateAt finds the gate voltage at which the curve carries iref: V_GS(th) by
// constant current, or the gate bias.
//
// First upward crossing in the order of gate voltage. Between points more than
// 10.5 mV apart it is read along the device's own curve (see readAlong). Between
// nearer ones, or where the model describes nothing, a local polynomial in √I or ln I
// is solved for iref, in whichever of the two the curve is straighter. The window
// grows from two points on either side as long as the estimates agree within their
// scatter, so that exact points are interpolated and noisy ones averaged. With a gap
// on either side, or currents below three counts, the value is the middle of the
// bounds that a transfer curve must keep (see bounds), or linear in √I.
//
// Uses points with at least three counts. u of a polynomial is the scatter of the
// points taken through its linear map, and, for interpolating, half the difference
// between the two ordinates and a share of that between polynomials leaning to either
// side; sigma is taken from the data and not below what is stated for the meters.
//
// Source: data-sheet convention for V_GS(th) (drain current stated, V_DS = V_GS
// or fixed); review: A. Ortiz-Conde et al., Microelectronics Reliability 42
// (2002) 583–596, doi 10.1016/S0026-2714(02)00027-6. Growing windows: A.
// Goldenshluger and A. Nemirovski, Math. Methods Statist. 6 (1997) 135–170
// (from memory). Checked: TestConstantCurrent, TestOutsideCurves,
// TestUncertaintyIsHonest.
func (w *work) gateAt(iref float64) crossing {
	c := noCrossing()
	n := len(w.pts)
	if !positive(iref) || n == 0 {
		return c
	}
	last := -1
	for j := 1; j < n; j++ {
		if w.pts[j-1].i < iref && w.pts[j].i >= iref {
			if c.count == 0 {
				c.b = j
				c.lo = w.pts[j].vg
			}
			last = j
			c.hi = w.pts[j].vg
			c.count++
		}
	}
	first := &w.pts[0]
	if c.count == 0 && first.i < iref {
		if p := &w.pts[n-1]; n > 1 && iref-p.i <= 2*p.q && iref-p.i <= 0.01*iref {
			c.b = n - 1 // reached within the last digit
		} else {
			c.never = true
			return c
		}
	}
	if first.i >= iref {
		if first.i-iref > math.Max(2*first.q, 0.01*iref) || first.i-iref > 0.05*iref {
			c.below = true
			return c
		}
		c.b = 0 // starts at the current itself
		c.lo, c.hi = first.vg, first.vg
		c.count = max(1, c.count)
		last = 0
	}
	if w.pts[max(c.b, last)].floor() > iref {
		c.b = max(c.b, last) // earlier ones may be flicker of the last digit
		w.belowCounts(&c, iref)
		return c
	}
	e := w.scatterNear(c.b)
	if c.count > 1 && c.hi-c.lo < 6*e {
		c.b = (c.b + last + 1) / 2 // noise, not hysteresis: between them
	}
	plain := c
	switch along := w.readAlong(&c, iref); {
	case along && c.u < lostShare*(w.pts[c.b].vg-w.pts[c.b-1].vg):
	case !w.interpolate(&plain, iref, e):
		if !along {
			w.bounds(&c, iref, e)
		}
	case !along || plain.u < c.u/2:
		plain.own = c.own
		if along {
			plain.gm, plain.ugm = c.gm, c.ugm // of a slope the model knows better still
		}
		c = plain
	}
	w.judgeGrid(&c, iref)
	return c
}

// window is the points lo…hi-1 around a crossing with their ordinates.
type window struct {
	x, y, wt, sigma [2*windowSide + 2]float64
	lo, hi          int
	p               poly
}

// interpolate solves growing local polynomials for the crossing. It returns
// false where there are too few points, or a gap, around it.
func (w *work) interpolate(c *crossing, iref, e float64) bool {
	a, b := c.b-1, c.b
	if a < 0 || b+1 >= len(w.pts) && a < 1 {
		return false
	}
	pa, pb := &w.pts[a], &w.pts[b]
	if !pa.above() || !(pb.i > 0) || pb.i > farRatio*pa.i*tie || pb.vg <= pa.vg {
		return false
	}
	if a > 0 && w.pts[a-1].above() && w.flatFrom(b, w.risingTo(b)) {
		w.beforeCorner(c, iref, e)
		return true
	}
	lo, hi := w.reach(a, b, iref)
	if hi-lo < 3 {
		return false
	}
	o, o2 := root, logarithm
	best := w.grow(o, b, lo, hi, 2, iref, e)
	other := w.grow(o2, b, lo, hi, 2, iref, e)
	if other.ok() && (!best.ok() || other.bend < best.bend) {
		best, other, o, o2 = other, best, o2, o
	}
	if !best.ok() {
		return false
	}
	best = w.grow(o, b, lo, hi, windowSide, iref, e)
	if best.n > 4 {
		other = w.grow(o2, b, lo, hi, best.n/2, iref, e)
	}
	c.v, c.gm, c.n = best.v, best.gm, best.n
	c.u, c.random = best.u, best.u
	if other.ok() {
		// Where one of the two is straight the other tells nothing.
		c.u = rss(best.u, math.Min(math.Abs(best.v-other.v)/2, best.bend))
	}
	c.u = rss(c.u, skewShare*w.leaning(o, best, e))
	return true
}

// beforeCorner reads a crossing in the last step before the curve comes to its
// limit, as at the corner of a load line: the curve goes on as it did for an
// unknown part of the step, mostly beyond the crossing, so the crossing lies
// between that and the chord, and nearer to the former.
func (w *work) beforeCorner(c *crossing, iref, e float64) {
	p, a, b := &w.pts[c.b-2], &w.pts[c.b-1], &w.pts[c.b]
	y, ya := math.Sqrt(iref), math.Sqrt(a.i)
	rise := (ya - math.Sqrt(p.i)) / (a.vg - p.vg)
	chord := (math.Sqrt(b.i) - ya) / (b.vg - a.vg)
	early, late := a.vg+(y-ya)/math.Max(rise, chord), a.vg+(y-ya)/chord
	c.v, c.n = early+cornerShare*(late-early), 3
	c.gm = 2 * y * (rise + chord) / 2
	single := rss(rss(e, a.ux), a.u/c.gm)
	c.u, c.random = rss(boundShare*(late-early), single), single
}

// estimate is one reading of the crossing by a local polynomial.
type estimate struct {
	v, u, gm float64
	bend     float64 // V, how far the narrowest polynomial lies from the chord in its middle
	n        int
	s        float64 // slope of the ordinate there
	lo, hi   int     // window
}

func (e estimate) ok() bool { return e.n > 0 && !math.IsNaN(e.v) }

// reach is how far a window around a, b may grow: points with three counts,
// currents near iref, no slope that a transistor cannot have.
func (w *work) reach(a, b int, iref float64) (lo, hi int) {
	lo, hi = a, b+1
	for lo > 0 && b-lo < windowSide {
		p, q := &w.pts[lo-1], &w.pts[lo]
		if !p.above() || p.vg >= q.vg || p.i*windowRatio*tie < iref && a-lo >= 1 ||
			q.ln-p.ln > steepest*(q.vg-p.vg)+6*p.u/p.i {
			break
		}
		lo--
	}
	slope := w.risingTo(b)
	for hi < len(w.pts) && hi-b < windowSide {
		p := &w.pts[hi]
		if !p.above() || p.i > windowRatio*iref*tie && hi-b >= 2 || w.flatFrom(hi-1, slope) {
			break
		}
		hi++
	}
	return lo, hi
}

// grow lays polynomials of growing width around the crossing between b-1 and b
// and keeps the widest, up to that many points on either side, whose estimate
// agrees with all narrower ones.
func (w *work) grow(o ordinate, b, lo, hi, widest int, iref, e float64) (best estimate) {
	a := b - 1
	pa, pb := &w.pts[a], &w.pts[b]
	y := o.of(iref)
	slope := (o.at(pb) - o.at(pa)) / (pb.vg - pa.vg)
	middle, chord := (pa.vg+pb.vg)/2, (o.at(pa)+o.at(pb))/2
	win := &w.win
	least, most := math.Inf(-1), math.Inf(1)
	for side := 2; side <= widest; side++ {
		win.lo, win.hi = max(lo, b-side), min(hi, b+side)
		if side > 2 && (win.lo > b-side || win.hi < b+side) {
			return best // only windows with points on both sides gain
		}
		got := w.solveWindow(win, o, b, y, slope, e)
		if !got.ok() {
			return best
		}
		if side == 2 {
			v, s := win.p.at(middle)
			got.bend = math.Abs((v - chord) / s)
		} else {
			got.bend = best.bend
		}
		least = math.Max(least, got.v-agreeing*got.u)
		most = math.Min(most, got.v+agreeing*got.u)
		if least > most {
			return best
		}
		slope, best = got.s, got
	}
	return best
}

// solveWindow fits and solves one window. The degree is three with two points
// on either side of the crossing, less with fewer.
func (w *work) solveWindow(win *window, o ordinate, b int, y, slope, e float64) estimate {
	m := win.hi - win.lo
	for j := range m {
		p := &w.pts[win.lo+j]
		win.x[j] = p.vg
		win.y[j] = o.at(p)
		win.sigma[j] = rss(p.u*o.slopeAt(p), slope*rss(e, p.ux))
	}
	var wt []float64
	if win.sigma[0] > 0 {
		wt = win.wt[:m]
		for j := range wt {
			wt[j] = 1 / (win.sigma[j] * win.sigma[j])
		}
	}
	degree := min(3, m-1)
	if below, over := b-win.lo, win.hi-b; below < 2 || over < 2 {
		degree = min(2, m-1)
	}
	x := win.x[:m]
	if !win.p.fit(x, win.y[:m], wt, degree) {
		return estimate{}
	}
	pa, pb := &w.pts[b-1], &w.pts[b]
	step := pb.vg - pa.vg
	v, s := win.p.solve(y, pa.vg+step/2, pa.vg-2*step, pb.vg+2*step)
	if math.IsNaN(v) {
		return estimate{}
	}
	// Noise may exchange neighbours, but the crossing is not far from the two.
	if m := 3 * math.Max(win.sigma[b-1-win.lo], win.sigma[b-win.lo]) / s; v < pa.vg-m || v > pb.vg+m {
		return estimate{}
	}
	u := win.p.scatter(v, win.sigma[:m], false) / s
	i := o.back(y)
	return estimate{v: v, u: u, gm: s / o.slope(i), n: m, lo: win.lo, hi: win.hi, s: s}
}

// leaning is the difference, in volts, of two polynomials that lack a quarter of
// the window's points at one end each: what a bend within the window, or a knee
// sharper than its points can show, may be wrong by.
func (w *work) leaning(o ordinate, g estimate, e float64) float64 {
	m := g.hi - g.lo
	cut, degree := max(1, m/4), min(2, m-2)
	if degree < 1 || m-cut <= degree {
		return 0
	}
	x, y, wt := &w.win.x, &w.win.y, &w.win.wt
	for j := range m {
		p := &w.pts[g.lo+j]
		x[j], y[j] = p.vg, o.at(p)
		s := rss(p.u*o.slopeAt(p), g.s*rss(e, p.ux))
		wt[j] = 1
		if s > 0 {
			wt[j] = 1 / (s * s)
		}
	}
	if !w.poly.fit(x[:m-cut], y[:m-cut], wt[:m-cut], degree) {
		return 0
	}
	left, _ := w.poly.at(g.v)
	if !w.poly.fit(x[cut:m], y[cut:m], wt[cut:m], degree) {
		return 0
	}
	right, _ := w.poly.at(g.v)
	return math.Abs(left-right) / g.s
}

// bounds takes the middle of what a transfer curve must keep where the points
// around the crossing are few or far apart. Its root bends up: the chord in √I
// is reached too early, the line through the next two points too late. Its
// logarithm bends down: the chord in ln I is reached too late, the line through
// the two points before too early.
func (w *work) bounds(c *crossing, iref, e float64) {
	if c.b == 0 {
		w.atFirst(c, iref, e)
		return
	}
	a, b := &w.pts[c.b-1], &w.pts[c.b]
	line := func(o ordinate, p, q *point) float64 {
		yp, yq := o.of(math.Max(p.i, 0)), o.of(math.Max(q.i, 0))
		return p.vg + (q.vg-p.vg)*(o.of(iref)-yp)/(yq-yp)
	}
	lo := line(root, a, b)
	hi := lo
	if a.above() {
		hi = line(logarithm, a, b)
		if strong := 2*(b.vg-a.vg)/math.Log(b.i/a.i) > knee; strong && b.i < farRatio*a.i*tie && b.vg-a.vg < 0.101 {
			hi = lo // a square law between the two points
		}
	}
	if c.b+1 < len(w.pts) {
		if q := &w.pts[c.b+1]; q.i > b.i && q.vg > b.vg {
			if v := line(root, b, q); a.above() {
				hi = math.Min(hi, math.Max(v, lo))
			} else {
				hi = math.Max(v, lo)
			}
		}
	} else if !a.above() {
		hi = b.vg
	}
	if c.b >= 2 && a.above() {
		if p := &w.pts[c.b-2]; p.above() && p.i < a.i && p.vg < a.vg {
			lo = math.Max(lo, math.Min(line(logarithm, p, a), hi))
		}
	}
	lo, hi = math.Min(math.Max(lo, a.vg), b.vg), math.Min(math.Max(hi, a.vg), b.vg)
	c.v = (lo + hi) / 2
	c.n = 2
	c.gm = 2 * math.Sqrt(iref) * (math.Sqrt(b.i) - math.Sqrt(math.Max(a.i, 0))) / (b.vg - a.vg)
	single := rss(rss(e, b.ux), b.u/c.gm)
	c.u, c.random = rss(boundShare*(hi-lo), single), single
}

// atFirst reads the first point itself, which carries the current within a
// percent or two counts, corrected by the slope to the next.
func (w *work) atFirst(c *crossing, iref, e float64) {
	p := &w.pts[0]
	c.v, c.n, c.u = p.vg, 1, rss(e, p.ux)
	c.random = c.u
	if len(w.pts) < 2 {
		return
	}
	q := &w.pts[1]
	if !(q.i > p.i) || !(q.vg > p.vg) {
		return
	}
	s := (math.Sqrt(q.i) - math.Sqrt(p.i)) / (q.vg - p.vg)
	c.gm = 2 * math.Sqrt(iref) * s
	c.v += (math.Sqrt(iref) - math.Sqrt(p.i)) / s
	c.u = rss(c.u, p.u/c.gm)
	c.random = c.u
}

// belowCounts reads a current of less than three counts: single readings there
// are mostly last digit, but their mean is not, so a parabola is laid through
// the current itself over three points below and four above the crossing. Less
// than one count is refused: c stays without a value.
func (w *work) belowCounts(c *crossing, iref float64) {
	c.limited = true
	q := w.pts[c.b].q
	lo, hi := max(0, c.b-3), min(len(w.pts), c.b+4)
	m := hi - lo
	if iref < q*(1-1e-9) || m < 4 || c.b == 0 {
		return
	}
	var x, y, s [7]float64
	for j := range m {
		p := &w.pts[lo+j]
		// Half a count stands for rounding and flicker of the last digit.
		x[j], y[j], s[j] = p.vg, p.i, math.Max(p.u, q/2)
	}
	if !w.poly.fit(x[:m], y[:m], nil, 2) {
		return
	}
	a, b := x[c.b-lo-1], x[c.b-lo]
	v, slope := w.poly.solve(iref, (a+b)/2, x[0], x[m-1])
	if math.IsNaN(v) || math.Abs(v-(a+b)/2) > 2*(b-a) {
		v = (a + b) / 2
		slope = (w.pts[c.b].i - w.pts[c.b-1].i) / (b - a)
	}
	if !(slope > 0) {
		return
	}
	c.v, c.gm, c.n = v, slope, m
	c.random = w.poly.scatter(v, s[:m], false) / slope
	// An exponential foot is no parabola: a quarter of the step is doubtful, and
	// a count is worth at least what it is on an exponential of n = 1.4.
	c.u = rss(w.poly.scatter(v, s[:m], false)/slope, (b-a)/4)
	c.u = rss(c.u, q/math.Sqrt(12)*1.4*thermalVoltage/iref)
}

// judgeGrid decides whether the points near the crossing lie too far apart for
// a good interpolation.
func (w *work) judgeGrid(c *crossing, iref float64) {
	if c.b < 1 {
		return
	}
	a, b := &w.pts[c.b-1], &w.pts[c.b]
	step := b.vg - a.vg
	if c.own.Ok && c.u < wellRead {
		return // read along the device's own curve, and well told by its points
	}
	if near := math.Min(math.Abs(a.i-iref), math.Abs(b.i-iref)); near <= 0.01*iref {
		return // a point stands there itself
	}
	if !a.above() || b.i > farRatio*a.i*tie {
		c.coarse = step > fineStep || c.u > 1e-3
		return
	}
	strong := 2*step/math.Log(b.i/a.i) > knee
	c.coarse = step > fineStep && !strong
}
