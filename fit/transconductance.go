package fit

import "math"

const (
	// slopeWindow is the number of points a slope is taken over by default.
	slopeWindow = 7
	// slopeWindowMax bounds the widening of that window.
	slopeWindowMax = 31
	// slopeNoise is the relative scatter of a slope that a window is made wide
	// enough for (judgement).
	slopeNoise = 0.02
)

// slopePoints is the curve as slopes are taken of it: points nearer together
// than three times the uncertainty of the gate reading merged, for otherwise
// their slope is noise.
type slopePoints struct {
	x, i, u []float64 // V, A, A
	e       []float64 // V, standard deviation of x
	from    []int     // index of the first of the points merged
	m       int       // points in a window, odd
}

// forSlopes merges near neighbours; e is the scatter in volts.
func (w *work) forSlopes(e float64) slopePoints {
	n := len(w.pts)
	f := make([]float64, 4*n)
	s := slopePoints{x: f[:0:n], i: f[n : n : 2*n], u: f[2*n : 2*n : 3*n], e: f[3*n : 3*n], from: make([]int, 0, n)}
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
		s.u = append(s.u, math.Sqrt(uu)/m)
		s.e = append(s.e, rss(e, w.pts[j].ux)/math.Sqrt(m))
		j = k
	}
	s.m = s.width(e)
	return s
}

// width is the number of points of a window: seven, more where steps are fine
// against the scatter e, fewer where there are no more. The slope over m points
// a step h apart scatters by e √12 / (h m^1.5), relative to the slope itself.
func (s *slopePoints) width(e float64) int {
	n := len(s.x)
	m := slopeWindow
	if n > 1 && e > 0 {
		h := (s.x[n-1] - s.x[0]) / float64(n-1)
		if need := math.Pow(e*math.Sqrt(12)/(slopeNoise*h), 2./3); need < slopeWindowMax {
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
	var y [slopeWindowMax]float64
	for k := range m {
		i := s.i[lo+k]
		if o != plain && !(i > 0) {
			return math.NaN(), math.NaN()
		}
		y[k] = o.of(i)
	}
	if !p.fit(s.x[lo:lo+m], y[:m], nil, min(2, m-1)) {
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
	rise := (o.of(s.i[lo+m-1]) - o.of(s.i[lo])) / (s.x[lo+m-1] - s.x[lo])
	for k := range m {
		sigma[k] = rss(s.u[lo+k]*o.slope(s.i[lo+k]), rise*s.e[lo+k])
	}
	return math.Abs(back) * p.scatter(x, sigma[:m], true)
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
	if 2*(s.x[b]-s.x[a])/math.Log(s.i[b]/s.i[a]) < knee {
		return logarithm
	}
	return root
}

// linear reports whether the drain is held so low that the channel is a
// resistor over most of the sweep.
func (w *work) linear() bool {
	return w.s.Circuit == Fixed && w.fixedVds() <= linearVds
}

// widen grows the window from m points as long as the slopes agree within
// their uncertainty, and gives the widest.
func (s *slopePoints) widen(p *poly, o ordinate, j, m int, x float64) (g, u float64, n int) {
	least, most := math.Inf(-1), math.Inf(1)
	for ; m <= slopeWindowMax; m += 2 {
		if m > len(s.x) && n > 0 {
			break
		}
		v, back := s.slopeAt(p, o, j, m, x)
		if math.IsNaN(v) {
			break
		}
		uv := s.slopeScatter(p, o, j, m, x, back)
		least, most = math.Max(least, v-agreeing*uv), math.Min(most, v+agreeing*uv)
		if n > 0 && least > most {
			break
		}
		g, u, n = v, uv, min(m, len(s.x))
	}
	if n == 0 {
		return math.NaN(), math.NaN(), 0
	}
	return g, u, n
}

// transconductances fills in the greatest slope of the curve and the one at the
// idle current.
//
// g_m = dI_D/dV_GS by local parabolas over seven points, more where steps are
// fine against the noise (non-uniform steps allowed), in I, √I or ln I by
// region; at the place asked for the window grows while the slopes agree. Points
// nearer than three times the gate uncertainty are merged; the points at either
// end, where the window is one-sided, are no candidates for the maximum. In the load circuit it is
// the slope of the circuit, dI/dV_G, which falls below g_m where the drain
// voltage collapses.
//
// Source: A. Savitzky and M. J. E. Golay, Anal. Chem. 36 (1964) 1627–1639, for
// non-uniform steps W. S. Cleveland, J. Am. Stat. Assoc. 74 (1979) 829–836 (both
// from memory). Checked: TestSavitzkyGolay, TestTransconductance.
func (w *work) transconductances(r *Result, idle crossing) {
	n := len(w.pts)
	if n < 3 {
		return
	}
	e := w.scatterNear(n * 2 / 3)
	s := w.forSlopes(e)
	n = len(s.x)
	if n < 3 {
		return
	}
	m := s.m
	best, at := math.Inf(-1), -1
	for j := m / 2; j < n-m/2; j++ {
		if !(s.i[j] > 0) {
			continue
		}
		g, _ := s.slopeAt(&w.poly, w.ordinateAt(&s, j), j, m, s.x[j])
		if g > best {
			best, at = g, j
		}
	}
	if at >= 0 && best > 0 {
		g, u, used := s.widen(&w.poly, w.ordinateAt(&s, at), at, m, s.x[at])
		r.GmMax = w.withGain(Quantity{Value: g, U: u, UBetween: math.NaN(), N: used}, s.i[at], 1, 1)
	}
	if math.IsNaN(idle.v) {
		return
	}
	j := 0
	for j < n-1 && math.Abs(s.x[j+1]-idle.v) <= math.Abs(s.x[j]-idle.v) {
		j++
	}
	g, u, used := s.widen(&w.poly, w.ordinateAt(&s, j), j, min(5, m), idle.v)
	if g > 0 {
		r.GmIdle = w.withGain(Quantity{Value: g, U: u, UBetween: math.NaN(), N: used}, w.s.IdleCurrent, 1, 1)
	}
}

// withGain adds the absolute uncertainty of a quantity that goes with the
// current's gain to the power ofCurrent and with the gate's gain to the power
// ofGate (magnitudes), at current i.
func (w *work) withGain(q Quantity, i, ofCurrent, ofGate float64) Quantity {
	c := ofCurrent * w.relativeUsed(i)
	v := w.midGate()
	if v == 0 {
		v = 1 // a gain is what matters
	}
	g := ofGate * rangeFor(w.s.Gate, v).absolute(v) / v
	q.UAbsolute = rss(q.U, math.Abs(q.Value)*rss(c, g))
	return q
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
