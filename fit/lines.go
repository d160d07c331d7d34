package fit

import "math"

const (
	// The window of the square-root line, as shares of the greatest current.
	windowLow  = 0.01
	windowHigh = 0.30
	// leastOnLine is the fewest points a line is laid through.
	leastOnLine = 4
	// loadShare is the share of the supply that may lie across R_L.
	loadShare = 0.3
	// subThreshold is the apparent overdrive 2/(d ln I/dV) below which the
	// topmost point is still in the exponential foot: twice what n = 1.2 gives.
	subThreshold = 0.12
	// slopesApart is the ratio of the slopes in the two halves of a window from
	// which there is no straight line to speak of.
	slopesApart = 1.5
	// kneeBend is by how much more the rest of a window may rise than its lowest
	// part: a smooth knee reaches 3 % at 3.5 times 2 n kT/q overdrive.
	kneeBend = 1.03
	// Floors of the weights: what the straight line itself is wrong by, as shares
	// of the ordinate and of the greatest ordinate. Without them the lowest
	// points, whose noise is least, would decide.
	floorShare = 0.005
	floorOfTop = 0.001
)

// line is a weighted straight line through some points, with the scatter of its
// ordinates.
type line struct {
	p     poly
	y     []float64
	sigma []float64
	floor []float64 // what the line itself is wrong by at each point
	from  int       // first point
	to    int       // one past the last
}

// zero is the abscissa where the line meets zero, with its random uncertainty.
func (l *line) zero() (x, u float64) {
	v, b := l.p.at(0)
	x = -v / b
	return x, l.p.scatter(x, l.sigma, false) / math.Abs(b)
}

// model is the uncertainty of that abscissa because the line is not the curve:
// the floors of the weights taken as scatter, and half the distance between the
// zeros of lines through the lower and the upper half of the points. It is much
// the same for all parts of a lot, so it counts in absolute statements only.
func (l *line) model() float64 {
	x, _ := l.zero()
	_, b := l.p.at(0)
	u := l.p.scatter(x, l.floor, false) / math.Abs(b)
	m := len(l.y)
	if m < 6 {
		return u
	}
	var lower, upper poly
	h := m / 2
	if !lower.fit(l.p.x[:h], l.y[:h], l.p.w[:h], 1) || !upper.fit(l.p.x[m-h:], l.y[m-h:], l.p.w[m-h:], 1) {
		return u
	}
	v1, b1 := lower.at(x)
	v2, b2 := upper.at(x)
	if !(b1 > 0) || !(b2 > 0) {
		return u
	}
	return rss(u, (v1/b1-v2/b2)/2)
}

// toZero is what the abscissa x where the line meets zero changes by per unit of
// ordinate k, with the other sign.
func (l *line) toZero(x float64, k int) float64 {
	_, b := l.p.at(0)
	v, _ := l.p.basis(x)
	return l.p.share(&v, k) / b
}

// slope is the slope of the line, with its random uncertainty.
func (l *line) slope() (b, u float64) {
	_, b = l.p.at(0)
	return b, l.p.scatter(0, l.sigma, true)
}

// layLine weighs y by sigma and the floors, and lays a line.
func layLine(x, y, sigma []float64, from int) (line, bool) {
	top := 0.0
	for _, v := range y {
		top = math.Max(top, math.Abs(v))
	}
	f := make([]float64, 2*len(x))
	wt, floor := f[:len(x)], f[len(x):]
	for j := range wt {
		floor[j] = rss(floorShare*y[j], floorOfTop*top)
		wt[j] = 1 / (sigma[j]*sigma[j] + floor[j]*floor[j])
	}
	l := line{y: y, sigma: sigma, floor: floor, from: from, to: from + len(x)}
	ok := l.p.fit(x, y, wt, 1)
	if ok {
		_, b := l.p.at(0)
		ok = b > 0
	}
	return l, ok
}

// squareRoot gives the extrapolated threshold from the straight line
// √I = √(β/2) (V_G - V_T) of a saturated channel.
//
// Weighted least squares over the points from 1 to 30 % of the current limit or
// of the greatest current, whichever is less, with V_DS above the overdrive and,
// in the load circuit, less than 0.3 V_DD across R_L; up to all of them where
// these are fewer than four; without the first ones that belong to the knee. Weights: the points' scatter, and the floors that
// the line itself is wrong by (0.5 % of the ordinate, 0.1 % of the greatest);
// the random uncertainty is that of the scatter alone, the absolute one holds
// the floors.
//
// Declines with few-points, sub-threshold-only or not-saturated. Not reached:
// series resistance and mobility bend the line and pull V_T down by some
// millivolts. Scale errors of the current move β only.
//
// Source: square law, H. Shichman and D. A. Hodges, IEEE J. Solid-State Circuits
// SC-3 (1968) 285–289; extrapolation in saturation, A. Ortiz-Conde et al.,
// Microelectronics Reliability 42 (2002) 583–596 (section from memory). Checked:
// TestSquareRootLine, TestSquareRootBias.
func (w *work) squareRoot() (Threshold, bool) {
	use := w.saturated(math.NaN())
	if len(use) == 0 {
		w.warn(CodeNotSaturated, "The drain voltage is not known to exceed the overdrive at any point: no threshold by the square-root line.")
		return Threshold{}, false
	}
	var l line
	for range 4 {
		var ok bool
		if l, ok = w.rootLine(use); !ok {
			w.declineLine(use)
			return Threshold{}, false
		}
		vt, _ := l.zero()
		next := w.saturated(vt)
		if len(next) < leastOnLine {
			w.warn(CodeNotSaturated, "Only "+count(len(next), "point has", "points have")+
				" a drain voltage above the overdrive: no threshold by the square-root line.")
			return Threshold{}, false
		}
		if len(next) == len(use) && next[0] == use[0] {
			break
		}
		use = next
	}
	if !w.straight(&l) {
		return Threshold{}, false
	}
	vt, uvt := l.zero()
	b, ub := l.slope()
	n := len(l.sigma)
	i := w.pts[l.to-1].i
	t := Threshold{From: l.from, To: l.to}
	nu := float64(n - 2)
	t.Vt = w.lineQuantity(vt, uvt, 0, l.model(), (l.from+l.to)/2, n, nu, i, w.perOffset(i, n, func(k int) (c, current float64) {
		return -l.toZero(vt, k) / (2 * math.Max(l.y[k], l.floor[k])), l.y[k] * l.y[k]
	}))
	t.Beta = w.gainQuantity(2*b*b, 4*b*ub, n, nu, i, follows{current: 1, gate: 2, beta: 1})
	return t, true
}

// saturated lists the points above the floor whose V_DS exceeds the overdrive
// over vt; with vt NaN only the load rule holds.
func (w *work) saturated(vt float64) []int {
	top := 0.0
	for j := range w.pts {
		top = math.Max(top, w.pts[j].i)
	}
	use := make([]int, 0, len(w.pts))
	for j := range w.pts {
		p := &w.pts[j]
		if !p.above() {
			continue
		}
		if w.s.Circuit == Load {
			if !w.lightlyLoaded(p, top) {
				continue
			}
		} else if math.IsNaN(p.vds) {
			continue
		}
		if !math.IsNaN(vt) && !math.IsNaN(p.vds) && p.vds <= p.vg-vt {
			continue
		}
		use = append(use, j)
	}
	return use
}

// lightlyLoaded reports whether less than 0.3 V_DD lies across R_L. A supply
// that is not known is at least the greatest V_L, and a resistor that is not
// known leaves at most the greatest current.
func (w *work) lightlyLoaded(p *point, top float64) bool {
	v := w.supplyAt(p.k)
	if !finiteNumber(v) || !positive(w.s.RL) {
		return p.i < loadShare*top
	}
	return p.i*w.s.RL < loadShare*v
}

// rootLine lays the line through the points of the window among use.
func (w *work) rootLine(use []int) (line, bool) {
	top := 0.0
	for j := range w.pts {
		top = math.Max(top, w.pts[j].i)
	}
	if positive(w.s.MaxID) {
		top = math.Min(top, w.s.MaxID)
	}
	for _, share := range [...]float64{windowHigh, 2 * windowHigh, 1} {
		from, to := len(w.pts), 0
		for _, j := range use {
			if i := w.pts[j].i; i*tie >= windowLow*top && i <= share*top*tie {
				from, to = min(from, j), max(to, j+1)
			}
		}
		if to-from < leastOnLine {
			continue
		}
		// Of few points the scatter at one place is small by chance now and then:
		// the greatest of three places counts.
		e := max(w.scatterNear(from), w.scatterNear((from+to)/2), w.scatterNear(to-1))
		for to-from > leastOnLine && w.kneeAtStart(from, to, e) {
			from++
		}
		m := to - from
		f := make([]float64, 3*m)
		x, y, sigma := f[:m], f[m:2*m], f[2*m:]
		rise := (math.Sqrt(w.pts[to-1].i) - math.Sqrt(math.Max(0, w.pts[from].i))) / (w.pts[to-1].vg - w.pts[from].vg)
		for k := range m {
			p := &w.pts[from+k]
			x[k], y[k] = p.vg, math.Sqrt(math.Max(0, p.i))
			sigma[k] = rss(p.u*root.slope(math.Max(p.i, p.floor())), rise*rss(e, p.ux))
		}
		return layLine(x, y, sigma, from)
	}
	return line{}, false
}

// kneeAtStart reports whether the lowest part of from…to-1, a quarter of the
// span but at least 0.1 V, rises clearly less than the rest: it still belongs
// to the knee and would pull the line down.
func (w *work) kneeAtStart(from, to int, e float64) bool {
	p := w.pts
	part := math.Max(0.1, (p[to-1].vg-p[from].vg)/4)
	k := from + 1
	for k < to-2 && p[k].vg-p[from].vg < part {
		k++
	}
	if k >= to-1 {
		return false
	}
	lower, upper := w.rootSlope(from, k), w.rootSlope(k, to-1)
	noise := 2 * math.Sqrt2 * e * upper / (p[k].vg - p[from].vg)
	return upper-noise > kneeBend*lower
}

// halves gives the slopes of the root of the current in the lower and the upper
// half of from…to-1.
func (w *work) halves(from, to int) (lower, upper float64) {
	h := (to - from) / 2
	return w.rootSlope(from, from+h), w.rootSlope(to-1-h, to-1)
}

// declineLine says why no line was laid: how the slopes of √I disagree where
// there are only two or three.
func (w *work) declineLine(use []int) {
	if n := len(use); n >= 3 {
		s1, s2 := w.rootSlope(use[n-3], use[n-2]), w.rootSlope(use[n-2], use[n-1])
		if s2 > slopesApart*s1 || s1 > slopesApart*s2 {
			w.warn(CodeFewPoints, "The square root of the current rises by "+number(s1)+" and by "+number(s2)+
				" √A/V between the few points: no straight line, so no extrapolated threshold.")
			return
		}
	}
	w.warn(CodeFewPoints, "Only "+count(len(use), "point", "points")+" for the square-root line: no extrapolated threshold.")
}

func (w *work) rootSlope(j, k int) float64 {
	p, q := &w.pts[j], &w.pts[k]
	return (math.Sqrt(math.Max(0, q.i)) - math.Sqrt(math.Max(0, p.i))) / (q.vg - p.vg)
}

// straight reports whether the points on the line are in strong inversion at
// the top and rise alike in both halves; else it says what is wrong.
func (w *work) straight(l *line) bool {
	p := w.pts[l.from:l.to]
	m := len(p)
	a, b := &p[m-min(3, m-1)-1], &p[m-1]
	if !(a.i > 0) || 2*(b.vg-a.vg)/math.Log(b.i/a.i) < subThreshold {
		w.warn(CodeSubThresholdOnly, "The curve still rises exponentially at its top ("+amps(b.i)+"): no extrapolated threshold.")
		return false
	}
	lower, upper := w.halves(l.from, l.to)
	if upper > slopesApart*lower {
		w.warn(CodeSubThresholdOnly, "The square root of the current rises by "+number(lower)+" and then by "+number(upper)+
			" √A/V: the points lie at the knee, so no extrapolated threshold.")
		return false
	}
	if lower > slopesApart*upper {
		w.warn(CodeNotSaturated, "The square root of the current rises by "+number(lower)+" and then by "+number(upper)+
			" √A/V: the drain voltage or a series resistance limits it, so no extrapolated threshold.")
		return false
	}
	return true
}
