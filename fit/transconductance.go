package fit

import "math"

const (
	// slopeWindow is the number of points a slope is taken over by default.
	slopeWindow = 7
	// slopeWindowMax bounds the widening of that window.
	slopeWindowMax = 31
	// slopeNoise is the relative scatter of a slope that a window is made wide
	// enough for (judgement).
	slopeNoise = 0.005
	// firstNoise and slopeLeast are the same for the window from which a slope at
	// one place is widened.
	firstNoise = 0.01
	slopeLeast = 7
	// slopesAgree is how many standard deviations slopes from growing windows may
	// lie apart, and leanShare the share of the difference of the leaning parabolas
	// that counts as uncertainty (chosen on self-made curves).
	slopesAgree = 1.0
	leanShare   = 1.0
)

// slopePoints is the curve as slopes are taken of it: points nearer together
// than three times the uncertainty of the gate reading merged, for otherwise
// their slope is noise.
type slopePoints struct {
	x, i, u []float64 // V, A, A
	rt, ln  []float64 // √i and ln i, NaN where i is not above zero
	e       []float64 // V, standard deviation of x
	from    []int     // index of the first of the points merged
	m       int       // points in a window, odd
	least   int       // points in the narrowest window that is worth a slope, odd
	degree  int       // of the local polynomials
}

// ordinates are those of all points.
func (s *slopePoints) ordinates(o ordinate) []float64 {
	switch o {
	case root:
		return s.rt
	case logarithm:
		return s.ln
	}
	return s.i
}

// forSlopes merges near neighbours; e is the scatter in volts.
func (w *work) forSlopes(e float64) slopePoints {
	n := len(w.pts)
	f := make([]float64, 6*n)
	s := slopePoints{
		x: f[:0:n], i: f[n : n : 2*n], u: f[2*n : 2*n : 3*n], e: f[3*n : 3*n : 4*n],
		rt: f[4*n : 4*n : 5*n], ln: f[5*n : 5*n], from: make([]int, 0, n),
	}
	for j := 0; j < n; {
		// Within three standard deviations of the first of the group.
		near := 3 * rss(e, w.pts[j].ux)
		k := j + 1
		for k < n && w.pts[k].vg-w.pts[j].vg < near {
			k++
		}
		m := float64(k - j)
		var x, i, uu float64
		for _, p := range w.pts[j:k] {
			x += p.vg
			i += p.i
			uu += p.u * p.u
		}
		s.from = append(s.from, j)
		s.x = append(s.x, x/m)
		s.i = append(s.i, i/m)
		rt, ln := w.pts[j].rt, w.pts[j].ln
		if m > 1 {
			rt, ln = math.Sqrt(i/m), math.Log(i/m)
		}
		if !(i > 0) {
			rt, ln = math.NaN(), math.NaN()
		}
		s.rt, s.ln = append(s.rt, rt), append(s.ln, ln)
		s.u = append(s.u, math.Sqrt(uu)/m)
		s.e = append(s.e, rss(e, w.pts[j].ux)/math.Sqrt(m))
		j = k
	}
	s.degree = 2
	h := s.stepWhereOn()
	s.m, s.least = s.width(e, h, slopeNoise, slopeWindow), s.width(e, h, firstNoise, slopeLeast)
	return s
}

// stepWhereOn is the mean step, V, of the points that carry current: how long or
// how fine the sweep was in the off region says nothing of a slope.
func (s *slopePoints) stepWhereOn() float64 {
	n := len(s.x)
	top := 0.0
	for _, i := range s.i {
		top = math.Max(top, i)
	}
	from := 0
	for from < n-1 && s.i[from] < top/scatterRatio {
		from++
	}
	if n-from < 3 { // the rise is within the last steps
		from = max(0, n-3)
	}
	return (s.x[n-1] - s.x[from]) / float64(n-1-from)
}

// whereOn is the first point with two fifths of the greatest current, as far as
// the current is not the resistor's doing: there the voltage scatter is that of
// the gate and not of the meter's last digits. A square-law sweep from just
// below threshold has that at two thirds of its points.
func (w *work) whereOn() int {
	top := 0.0
	for j := range w.pts {
		if !w.nearlyThrough(w.pts[j].i, j) {
			top = math.Max(top, w.pts[j].i)
		}
	}
	for j := range w.pts {
		if w.pts[j].i >= 0.4*top {
			return j
		}
	}
	return len(w.pts) - 1
}

// width is the number of points of a window: m, more where steps are fine
// against the scatter e for a slope of that relative noise, fewer where there
// are no more. The slope over m points a step h apart scatters by
// e √12 / (h m^1.5), relative to the slope itself.
func (s *slopePoints) width(e, h, noise float64, m int) int {
	n := len(s.x)
	if n > 1 && e > 0 {
		if need := math.Pow(e*math.Sqrt(12)/(noise*h), 2./3); need < slopeWindowMax {
			m = max(m, int(need))
		} else {
			m = slopeWindowMax
		}
	}
	m = min(m, n)
	return m - (1 - m%2)
}

// slopeAt is dI/dV_G at voltage x by a local parabola through the m points
// around index j, in the given ordinate, and di/d(ordinate) there; NaN when the
// points do not allow it. The polynomial stays in p.
func (s *slopePoints) slopeAt(p *poly, o ordinate, j, m int, x float64) (g, back float64) {
	n := len(s.x)
	m = min(m, n)
	lo := max(0, min(j-m/2, n-m))
	if !p.fit(s.x[lo:lo+m], s.ordinates(o)[lo:lo+m], nil, min(s.degree, m-1)) {
		return math.NaN(), math.NaN()
	}
	v, d := p.at(x)
	back = 1 // di/d(ordinate)
	switch o {
	case root:
		back = 2 * v
	case logarithm:
		back = math.Exp(v)
	}
	return back * d, back
}

// slopeScatter is the uncertainty of the slope that slopeAt has just left in p.
func (s *slopePoints) slopeScatter(p *poly, o ordinate, j, m int, x, back float64) float64 {
	n := len(s.x)
	m = min(m, n)
	lo := max(0, min(j-m/2, n-m))
	var sigma [slopeWindowMax]float64
	y := s.ordinates(o)[lo : lo+m]
	rise := (y[m-1] - y[0]) / (s.x[lo+m-1] - s.x[lo])
	for k, v := range y {
		d := 1.0 // d(ordinate)/di
		switch o {
		case root:
			d = 0.5 / v
		case logarithm:
			d = 1 / s.i[lo+k]
		}
		sigma[k] = rss(s.u[lo+k]*d, rise*s.e[lo+k])
	}
	return math.Abs(back) * p.scatter(x, sigma[:m], true)
}

// sober is the slope at point j over the widest window, of m points or less,
// that does not overshoot: within what the chords to the two neighbours show,
// widened by their scatter. A parabola across the corner of a load line does.
func (s *slopePoints) sober(p *poly, o ordinate, j int) (g float64, m int) {
	left := (s.i[j] - s.i[j-1]) / (s.x[j] - s.x[j-1])
	right := (s.i[j+1] - s.i[j]) / (s.x[j+1] - s.x[j])
	lo, hi := math.Min(left, right), math.Max(left, right)
	h := math.Min(s.x[j]-s.x[j-1], s.x[j+1]-s.x[j])
	doubt := 0.003*hi + 3*rss(s.e[j]*hi, s.u[j])/h
	for m = s.m; ; m -= 2 * max(1, m/8) {
		g, _ = s.slopeAt(p, o, j, m, s.x[j])
		if m <= 3 || g >= lo-doubt && g <= hi+doubt {
			return g, m
		}
	}
}

// ordinateAt chooses what is differentiated at index j: the current itself
// where the channel is a resistor, its root in strong inversion, its logarithm
// below, where the relative noise is the same everywhere.
func (w *work) ordinateAt(s *slopePoints, j int) ordinate {
	if w.linear() {
		return plain
	}
	a, b := max(0, j-1), min(len(s.x)-1, j+1)
	if !(s.i[a] > 0) || !(s.i[b] > s.i[a]) {
		return plain
	}
	if 2*(s.x[b]-s.x[a]) < knee*(s.ln[b]-s.ln[a]) {
		return logarithm
	}
	return root
}

// linear reports whether the drain is held so low that the channel is a
// resistor over most of the sweep.
func (w *work) linear() bool {
	return w.s.Circuit == Fixed && w.fixedVds() <= linearVds
}

// widen grows the window around x from m points as long as the slopes agree
// within their scatter, and gives the widest; the uncertainty holds the
// difference of two parabolas that lean to either side, for a bend within the
// window.
func (s *slopePoints) widen(p *poly, o ordinate, j, m int, x float64) (g, u float64, n int) {
	least, most := math.Inf(-1), math.Inf(1)
	back := 0.0
	for ; m <= slopeWindowMax && (m <= len(s.x) || n == 0); m += 2 {
		v, b := s.slopeAt(p, o, j, m, x)
		if math.IsNaN(v) {
			break
		}
		uv := s.slopeScatter(p, o, j, m, x, b)
		least, most = math.Max(least, v-slopesAgree*uv), math.Min(most, v+slopesAgree*uv)
		if n > 0 && least > most {
			break
		}
		g, u, n, back = v, uv, min(m, len(s.x)), b
	}
	if n == 0 {
		return math.NaN(), math.NaN(), 0
	}
	return g, rss(u, leanShare*s.leaning(p, o, j, n, x, back)), n
}

// leaning is the difference of the slopes at x of two parabolas that lack a
// quarter of the m points at one end each.
func (s *slopePoints) leaning(p *poly, o ordinate, j, m int, x, back float64) float64 {
	n := len(s.x)
	lo := max(0, min(j-m/2, n-m))
	cut := max(1, m/4)
	if m-cut < 3 {
		return 0
	}
	y := s.ordinates(o)[lo : lo+m]
	if !p.fit(s.x[lo:lo+m-cut], y[:m-cut], nil, 2) {
		return 0
	}
	_, left := p.at(x)
	if !p.fit(s.x[lo+cut:lo+m], y[cut:], nil, 2) {
		return 0
	}
	_, right := p.at(x)
	return math.Abs(back * (left - right))
}

// transconductances fills in the greatest slope of the curve and the one at the
// idle current.
//
// g_m = dI_D/dV_GS by local polynomials over seven points, more where steps are
// fine against the noise (non-uniform steps allowed), in I, √I or ln I by
// region: parabolas find the place of the greatest slope; its value, and the slope
// at the idle current, are those of cubics whose window grows while the slopes
// agree. Points nearer than three times the gate uncertainty are merged; that is
// taken where the current is, for below threshold the voltage scatter is only the
// meter's last digits over a slope of nothing. The points at either end, where the
// window is one-sided, are no candidates for the maximum, nor are points with more
// than half of V_DD across R_L. In the load circuit it is the slope of the circuit,
// dI/dV_G, which falls below g_m where the drain voltage collapses.
//
// Source: A. Savitzky and M. J. E. Golay, Anal. Chem. 36 (1964) 1627–1639, for
// non-uniform steps W. S. Cleveland, J. Am. Stat. Assoc. 74 (1979) 829–836 (both
// from memory). Checked: TestSavitzkyGolay, TestTransconductance,
// TestTransconductanceFromFarBelow.
func (w *work) transconductances(r *Result, idle crossing) {
	n := len(w.pts)
	if n < 3 {
		return
	}
	s := w.forSlopes(w.scatterNear(w.whereOn()))
	n = len(s.x)
	if n < 3 {
		return
	}
	m := s.m
	best, at, width := math.Inf(-1), -1, m
	for j := m / 2; j < n-m/2; j++ {
		if !(s.i[j] > 0) || w.nearlyThrough(s.i[j], s.from[j]) {
			continue
		}
		g, used := s.sober(&w.poly, w.ordinateAt(&s, j), j)
		if g > best {
			best, at, width = g, j, used
		}
	}
	if at >= 0 && best > 0 {
		o := w.ordinateAt(&s, at)
		_, back := s.slopeAt(&w.poly, o, at, width, s.x[at])
		chance := s.slopeScatter(&w.poly, o, at, width, s.x[at], back)
		s.degree = 3 // few points hold the whole bend of a knee at coarse steps
		g, u, used := s.widen(&w.poly, o, at, min(width, s.least), s.x[at])
		// The greatest of many is great by chance as well: the scatter of one of
		// them is left in.
		u = rss(u, chance)
		// Within a window of the end nothing shows that it falls again.
		r.GmRising = at >= n-m/2-1-m
		f := follows{current: 1, gate: 1, beta: 1}
		if r.GmRising {
			f.beta -= w.risingWithDrive(g, s.i[at])
		}
		r.GmMax = w.gainQuantity(g, u, used, float64(used-s.degree-1), s.i[at], f)
	}
	if math.IsNaN(idle.v) {
		return
	}
	// The greatest is nowhere less than at the idle current.
	defer func() {
		if r.GmIdle.Ok() && !(math.Abs(r.GmMax.Value) >= math.Abs(r.GmIdle.Value)) {
			r.GmMax = r.GmIdle
		}
	}()
	if idle.gm > 0 && idle.ugm > 0 {
		r.GmIdle = w.gainQuantity(idle.gm, idle.ugm, idle.n, math.Inf(1), w.s.IdleCurrent, w.slopeFollows())
		return
	}
	j := 0
	for j < n-1 && math.Abs(s.x[j+1]-idle.v) <= math.Abs(s.x[j]-idle.v) {
		j++
	}
	g, u, used := w.slopeNear(&s, j, idle.v)
	if g > 0 {
		r.GmIdle = w.gainQuantity(g, u, used, float64(used-s.degree-1), w.s.IdleCurrent, w.slopeFollows())
	}
}

// nearlyThrough reports whether more than half of the supply lies across R_L:
// what the curve does there is the resistor's doing.
func (w *work) nearlyThrough(i float64, j int) bool {
	v := w.supplyAt(w.pts[j].k)
	return w.s.Circuit == Load && i*w.s.RL > v/2
}

// slopeNear is the slope at one voltage by local cubics, which do not mind the
// bend of a knee; in the ordinate that leaves the least uncertainty where the
// channel is a resistor, for there the sweep passes all regions.
func (w *work) slopeNear(s *slopePoints, j int, x float64) (g, u float64, n int) {
	s.degree = 3
	if !w.linear() {
		return s.widen(&w.poly, w.ordinateAt(s, j), j, s.least, x)
	}
	u = math.Inf(1)
	for _, o := range [...]ordinate{plain, root, logarithm} {
		if v, uv, m := s.widen(&w.poly, o, j, s.least, x); m > 0 && uv < u {
			g, u, n = v, uv, m
		}
	}
	return g, u, n
}

// slopeFollows is how the slope at one current follows gains and gain factor: with
// I = β f(v) it goes as β f'(v) at f(v) = I/β, the root of β in a square law and β
// itself where the channel is a resistor.
func (w *work) slopeFollows() follows {
	if w.linear() {
		return follows{current: 1, gate: 1, beta: 1}
	}
	return follows{current: 1, gate: 1, beta: 0.5}
}

// risingWithDrive is by how much less, as a power of β, the slope g at the end of a
// sweep, at current i, changes with the temperature, because the threshold falls and a
// square law has (dg/dV)/g = g/(2 I).
func (w *work) risingWithDrive(g, i float64) float64 {
	t, _ := w.warmth()
	return kappa * g / (2 * i) * t / alpha
}

// midGate is a gate voltage in the middle of the sweep, for a gain that holds
// all over it.
func (w *work) midGate() float64 {
	g := 0.0
	for j := range w.pts {
		g = math.Max(g, math.Abs(w.pts[j].vg))
	}
	return g
}

// relativeUsed is the relative standard uncertainty of the currents used,
// against the SI unit.
func (w *work) relativeUsed(i float64) float64 {
	return rss(w.relative(i, w.onLoad || !w.ammeter), w.doubt)
}
