package fit

import (
	"math"
	"slices"
)

const (
	// linearVds is the drain voltage, V, up to which a fixed drain is taken to
	// mean a resistive channel.
	linearVds = 0.3
	// unreadVds is the drain voltage, V, below which it must have been read, or
	// the ammeter's burden be known: the drop across the ammeter matters there.
	unreadVds = 1.0
	// nearTop and ratioTop are the shares of the greatest slope from which the
	// tangent and the ratio start.
	nearTop  = 0.95
	ratioTop = 0.90
	// tangentPoints is the number of points under the tangent.
	tangentPoints = 7
	// ratioEnd is the number of points at the end whose slope is one-sided.
	ratioEnd = 3
)

// fixedVds is the drain voltage of the fixed circuit, V: the median of what was
// read, else what was stated.
func (w *work) fixedVds() float64 {
	if len(w.c.Vd) == 0 {
		return w.s.Vds
	}
	v := make([]float64, 0, len(w.pts))
	for j := range w.pts {
		if x := w.drainAt(w.pts[j].k); finiteNumber(x) {
			v = append(v, x)
		}
	}
	if len(v) == 0 {
		return w.s.Vds
	}
	return median(v)
}

// resistive is the curve of a channel that is a resistor: its conductance
// G = I/V_DS over x = V_G - V_DS/2, which is β (x - V_T)/(1 + θ (x - V_T)).
type resistive struct {
	slopePoints           // x, conductance, and its uncertainty in i and u
	vds         []float64 // V
	g           []float64 // dG/dx, NaN within half a window of the ends
	maps        []float64 // row j: linear map from G to g[j]
	lo          []int     // first point of the window of row j
	top         float64   // 95th percentile of g
}

// unknownDrain reports whether a small drain voltage is not known well enough: it
// was not read at the drain, and what the ammeter takes of it is not known.
func (w *work) unknownDrain() bool {
	return w.s.Circuit == Fixed && len(w.c.Vd) == 0 && math.IsNaN(w.s.Burden) && w.s.Vds < unreadVds
}

// resistiveCurve prepares the two methods for a small fixed drain voltage; it
// declines where the voltage at the drain is not known well enough.
func (w *work) resistiveCurve() (*resistive, bool) {
	if w.unknownDrain() {
		w.warn(CodeBenchLimited, "V_DS is below 1 V, was not read at the drain, and the ammeter's burden is not known (--ammeter none says that there is none, a bench file says how much): no extrapolated threshold.")
		return nil, false
	}
	s := w.forSlopes(w.scatterNear(len(w.pts) * 2 / 3))
	n := len(s.x)
	m := s.m
	if n < m+2 || m < 5 {
		w.warn(CodeFewPoints, "Only "+count(n, "point", "points")+" for a slope: no extrapolated threshold.")
		return nil, false
	}
	r := &resistive{slopePoints: s, vds: make([]float64, n), g: make([]float64, n), maps: make([]float64, n*m), lo: make([]int, n)}
	for j := range n {
		v := w.pts[s.from[j]].vds
		if !(v > 0) {
			v = math.NaN()
		}
		r.vds[j] = v
		r.x[j] -= v / 2
		r.i[j] /= v
		r.u[j] = math.Abs(r.u[j] / v)
	}
	var g []float64
	for j := range n {
		r.g[j] = math.NaN()
		r.lo[j] = j - m/2
		if r.lo[j] < 0 || r.lo[j]+m > n {
			continue
		}
		x := r.x[r.lo[j] : r.lo[j]+m]
		if p := &w.poly; p.fit(x, r.i[r.lo[j]:r.lo[j]+m], nil, 2) {
			p.maps(r.x[j], nil, r.maps[j*m:(j+1)*m])
			_, r.g[j] = p.at(r.x[j])
			g = append(g, r.g[j])
		}
	}
	r.top = percentile95(g)
	if !(r.top > 0) {
		w.warn(CodeFewPoints, "No slope could be taken: no extrapolated threshold.")
		return nil, false
	}
	// The scatter of a conductance holds that of the gate voltage.
	for j := range n {
		r.u[j] = rss(r.u[j], r.top*r.e[j])
	}
	return r, true
}

// percentile95 of x, which is sorted in place: the value below which 95 % lie,
// by linear interpolation.
func percentile95(x []float64) float64 {
	x = slices.DeleteFunc(x, math.IsNaN)
	if len(x) == 0 {
		return math.NaN()
	}
	slices.Sort(x)
	h := 0.95 * float64(len(x)-1)
	k := int(h)
	if k+1 >= len(x) {
		return x[len(x)-1]
	}
	return x[k] + (h-float64(k))*(x[k+1]-x[k])
}

// first is the first index whose slope reaches that share of the greatest.
func (r *resistive) first(share float64) int {
	for j, g := range r.g {
		if g >= share*r.top {
			return j
		}
	}
	return len(r.g)
}

// tangent gives the extrapolated threshold by linear extrapolation at the
// greatest slope: the line through seven points from the first whose slope
// reaches 95 % of the 95th percentile, met with zero, less V_DS/2. A plain
// maximum would be led astray by noise where the slope is flat.
//
// Valid while the channel is a resistor: the first point must lie V_DS above
// threshold. Mobility reduction θ pulls V_T down by θ v² with the tangent at
// overdrive v. Random uncertainty by the linear map of the points.
//
// Source: JEDEC dictionary, extrapolated threshold voltage (without the V_DS/2
// term), after ASTM F617; robust start: own, tested on simulated curves.
// Checked: TestTangent.
func (w *work) tangent(r *resistive) (Threshold, bool) {
	j := r.first(nearTop)
	var l line
	var ok bool
	for ; ; j++ {
		if len(r.x)-j < tangentPoints-2 {
			w.warn(CodeFewPoints, "Too few points beyond the greatest slope: no threshold by linear extrapolation.")
			return Threshold{}, false
		}
		m := min(tangentPoints, len(r.x)-j)
		l, ok = layLine(r.x[j:j+m], r.i[j:j+m], r.u[j:j+m], j)
		if !ok {
			w.warn(CodeFewPoints, "The points beyond the greatest slope do not rise: no threshold by linear extrapolation.")
			return Threshold{}, false
		}
		if vt, _ := l.zero(); r.x[j]+r.vds[j]/2-vt >= r.vds[j] {
			break
		}
	}
	vt, uvt := l.zero()
	b, ub := l.slope()
	n := l.to - l.from
	i := w.pts[min(len(w.pts)-1, r.from[l.to-1])].i
	t := Threshold{From: r.from[l.from], To: w.oneBeyond(r, l.to)}
	nu := float64(n - 2)
	// G is β (x - V_T): an offset of the current is one of G, over V_DS.
	perOffset := -1 / (b * r.vds[l.from])
	t.Vt = w.lineQuantity(vt, uvt, 0, l.model(), (t.From+t.To)/2, n, nu, i, perOffset)
	t.Beta = w.gainQuantity(b, ub, n, nu, i, follows{current: 1, gate: 1, beta: 1})
	return t, true
}

// oneBeyond is the index of the cleaned curve one past slope point k-1.
func (w *work) oneBeyond(r *resistive, k int) int {
	if k < len(r.from) {
		return r.from[k]
	}
	return len(w.pts)
}

// ratio gives threshold, gain factor and mobility reduction from
// Y = G/√(dG/dx), which is √β (x - V_T) whatever θ and, with θ, a series
// resistance are.
//
// Line from the first point whose slope reaches 90 % of the 95th percentile to
// the fourth from the end; θ is the weighted mean of (β w/G - 1)/w over the same
// points, w = x - V_T. Uncertainties: the scatter of the points taken through
// Y, line and θ to first order.
//
// Source: G. Ghibaudo, Electronics Letters 24 (1988) 543–545; S. Jain, IEE Proc.
// 135 (1988) 162 (both from memory). Checked: TestRatio.
func (w *work) ratioMethod(r *resistive) (t Threshold, theta Quantity, ok bool) {
	n := len(r.x)
	from := r.first(ratioTop)
	to := n - ratioEnd
	if half := r.m / 2; to-from-half > 2*leastOnLine {
		from += half // windows that still reach into the knee
	}
	for to > from && math.IsNaN(r.g[to-1]) {
		to--
	}
	if to-from < leastOnLine+1 {
		w.warn(CodeFewPoints, "Too few points beyond the knee: no threshold by the ratio.")
		return t, None(), false
	}
	y, sigma := make([]float64, to-from), make([]float64, to-from)
	for k := range y {
		j := from + k
		if !(r.g[j] > 0) || !(r.i[j] > 0) {
			w.warn(CodeFewPoints, "The curve does not rise beyond the knee: no threshold by the ratio.")
			return t, None(), false
		}
		y[k] = r.i[j] / math.Sqrt(r.g[j])
		sigma[k] = r.scatterOfRatio(j)
	}
	var l line
	var vt, b float64
	for ; ; from, y, sigma = from+1, y[1:], sigma[1:] {
		if len(y) < leastOnLine+1 {
			w.warn(CodeSubThresholdOnly, "The curve ends at the knee: no threshold by the ratio.")
			return t, None(), false
		}
		if l, ok = layLine(r.x[from:to], y, sigma, from); !ok {
			w.warn(CodeFewPoints, "The ratio does not rise: no threshold by the ratio.")
			return t, None(), false
		}
		vt, _ = l.zero()
		if _, b = l.p.at(0); r.x[from]+r.vds[from]/2-vt >= r.vds[from] {
			break // resistive from here on
		}
	}
	m := to - from
	uvt, ubeta, th, uth := w.throughRatio(r, &l, vt, b)
	i := w.pts[r.from[to-1]].i
	t = Threshold{From: r.from[from], To: w.oneBeyond(r, to)}
	nu := float64(m - 2)
	perOffset := -1 / (b * b * r.vds[from])
	t.Vt = w.lineQuantity(vt, uvt, 0, l.model(), (t.From+t.To)/2, m, nu, i, perOffset)
	t.Beta = w.gainQuantity(b*b, ubeta, m, nu, i, follows{current: 1, gate: 1, beta: 1})
	over := w.gainBudget(th, uth, i, follows{gate: 1, beta: 1})
	if x := r.x[to-1] - vt; x > 0 { // θ = (β x/G - 1)/x
		w.addCurrent(&over, i, 0, (1+th*x)/(x*i))
	}
	return t, w.quantity(th, &over, m, nu), true
}

// scatterOfRatio is the standard deviation of Y at slope point j.
func (r *resistive) scatterOfRatio(j int) float64 {
	sum := 0.0
	g, y := r.g[j], r.i[j]/math.Sqrt(r.g[j])
	for k := range r.m {
		d := -0.5 * y / g * r.maps[j*r.m+k]
		if r.lo[j]+k == j {
			d += y / r.i[j]
		}
		d *= r.u[r.lo[j]+k]
		sum += d * d
	}
	return math.Sqrt(sum)
}

// throughRatio takes the scatter of every conductance through Y, the line and θ
// to first order. It returns u(V_T), u(β), θ and u(θ).
func (w *work) throughRatio(r *resistive, l *line, vt, b float64) (uvt, ubeta, theta, utheta float64) {
	n, m := len(r.x), l.to-l.from
	value, slope := make([]float64, m), make([]float64, m)
	l.p.maps(vt, value, slope)
	toV, toB, toT := make([]float64, n), make([]float64, n), make([]float64, n)
	for k := range m {
		j := l.from + k
		y := r.i[j] / math.Sqrt(r.g[j])
		add := func(at int, d float64) {
			toV[at] -= value[k] / b * d
			toB[at] += slope[k] * d
		}
		add(j, y/r.i[j])
		for c := range r.m {
			add(r.lo[j]+c, -0.5*y/r.g[j]*r.maps[j*r.m+c])
		}
	}
	// θ_j = β/G_j - 1/w_j, weighed by w², for its scatter goes as 1/w².
	beta := b * b
	sum, overG, overW := 0.0, 0.0, 0.0
	for j := l.from; j < l.to; j++ {
		v := r.x[j] - vt
		h := v * v
		sum += h
		theta += h * (beta/r.i[j] - 1/v)
		overG += h / r.i[j]
		overW += h / (v * v)
		toT[j] -= h * beta / (r.i[j] * r.i[j])
	}
	theta /= sum
	for j := range n {
		toT[j] = toT[j]/sum + overG/sum*2*b*toB[j] - overW/sum*toV[j]
		s := r.u[j]
		uvt += s * s * toV[j] * toV[j]
		ubeta += s * s * 4 * beta * toB[j] * toB[j]
		utheta += s * s * toT[j] * toT[j]
	}
	return math.Sqrt(uvt), math.Sqrt(ubeta), theta, math.Sqrt(utheta)
}
