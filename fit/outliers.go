package fit

import (
	"math"
	"slices"
)

const (
	// fallTolerance is by how much a later current may be smaller than an
	// earlier one and still count as noise, drift or a plateau (judgement).
	fallTolerance = 0.05
	// lineTolerance is by how much a current may lie outside the range that its
	// two neighbours leave it (judgement; besides five standard deviations).
	lineTolerance = 0.06
	// leastJump is the least displacement, V, that is called a jump: twice the
	// scatter of a handheld's gate reading (judgement).
	leastJump = 1.5e-3
	// mostDropped bounds the points that are dropped from a very long curve before
	// it is given up.
	mostDropped = 1000
	// pairReach bounds the pairs that are compared on very long curves.
	pairReach = 300
)

// contradicts reports whether point b, at the higher gate voltage, carries so
// much less current than a that a rising curve cannot hold both.
func (w *work) contradicts(a, b *point) bool {
	fall := a.i - b.i - fallTolerance*math.Abs(a.i)
	if fall <= 0 || b.vg-a.vg <= math.Max(1e-3, math.Max(2*w.grid, 4*a.ux)) {
		return false // noise of the gate reading may have exchanged them
	}
	return fall > 5*rss(a.u, b.u)+2*(a.q+b.q)+2*w.tiny
}

// dropContradictions leaves out, worst first, the points that contradict most
// others: a transfer curve rises, and one gate reading ten times too large
// would ruin whatever is fitted to it.
func (w *work) dropContradictions() {
	n := len(w.pts)
	w.tiny = w.leastOfInterest()
	top, falls := math.Inf(-1), false
	w.base = math.Inf(1)
	for j := range w.pts {
		w.base = math.Min(w.base, math.Max(0, w.pts[j].i))
		top = math.Max(top, w.pts[j].i)
		falls = falls || top-w.pts[j].i > fallTolerance*math.Abs(top)+2*w.pts[j].q+2*w.tiny
	}
	if !falls {
		return
	}
	var counts []int
	falling, rising := 0, 0
	for i := range n {
		for j := i + 1; j < min(n, i+pairReach); j++ {
			if w.contradicts(&w.pts[i], &w.pts[j]) {
				if counts == nil {
					counts = make([]int, n)
				}
				counts[i]++
				counts[j]++
				falling++
			} else if w.pts[j].i > w.pts[i].i {
				rising++
			}
		}
	}
	if counts == nil {
		return
	}
	if falling > 3*rising && falling > n {
		w.falling = true // not for cleaning: the whole curve says so
		return
	}
	rank := make([]int, n) // place before anything was dropped: which pairs were counted
	for j := range rank {
		rank[j] = j
	}
	for dropped := 0; ; dropped++ {
		j := w.worst(counts)
		if counts[j] == 0 {
			return
		}
		if dropped == mostDropped {
			w.hopeless = true
			return
		}
		p := w.pts[j]
		for i := range w.pts {
			near := rank[i] > rank[j]-pairReach && rank[i] < rank[j]+pairReach
			if near && (i < j && w.contradicts(&w.pts[i], &p) || i > j && w.contradicts(&p, &w.pts[i])) {
				counts[i]--
			}
		}
		counts, rank = slices.Delete(counts, j, j+1), slices.Delete(rank, j, j+1)
		code, text := w.nameFault(j)
		w.drop(j, code, text)
	}
}

// worst is the point with the most contradictions; of equals the one that lies
// furthest outside the range of its neighbours.
func (w *work) worst(counts []int) int {
	best, excess := 0, -1.0
	for j, c := range counts {
		if c == 0 || c < counts[best] {
			continue
		}
		e := w.excess(j)
		if c > counts[best] || e > excess {
			best, excess = j, e
		}
	}
	return best
}

// excess is the logarithm of the factor by which the current of an inner point
// lies outside what its neighbours leave it; for the ends, beyond the next.
func (w *work) excess(j int) float64 {
	p := w.pts
	switch {
	case len(p) < 3:
		return 0
	case j == 0:
		return outside(p[0].i, math.Inf(-1), p[1].i)
	case j == len(p)-1:
		return outside(p[j].i, p[j-1].i, math.Inf(1))
	}
	lo, hi := w.between(&p[j-1], &p[j+1], p[j].vg)
	return outside(p[j].i, lo, hi)
}

// dropSpikes leaves out, worst first, single points that do not contradict a
// rising curve but lie outside what their neighbours leave them by more than
// the noise of the curve explains.
func (w *work) dropSpikes() {
	if w.falling || len(w.pts) < 5 {
		return
	}
	limit := 0.0
	for tries := 0; tries < 1+len(w.pts)/8; tries++ {
		worst, by := -1, 0.0
		for j := 1; j < len(w.pts); j++ {
			e := w.spike(j)
			if e > by {
				worst, by = j, e
			}
		}
		if worst < 0 {
			return
		}
		if limit == 0 {
			limit = math.Max(8*w.roughness(), leastJump)
			if w.ties {
				limit = math.Max(limit, 3*w.grid)
			}
		}
		if w.beyond(worst) <= limit {
			return
		}
		code, text := w.nameFault(worst)
		if worst == len(w.pts)-1 && code != CodeDecadeSpike {
			return // at the end only a factor of ten is told from a steep curve
		}
		w.drop(worst, code, text)
	}
}

// spike is excess where it is beyond doubt, else 0. A knee or the corner of a
// load line bends the curve as well, but there the point still continues what
// its neighbours on one side began; a spike continues neither.
func (w *work) spike(j int) float64 {
	p := w.pts
	last := j == len(p)-1
	var lo, hi float64
	noise := p[j].u
	if last {
		if p[j-2].i <= clearCounts*p[j-2].q {
			return 0
		}
		lo, hi = continued(&p[j-2], &p[j-1], p[j].vg)
		lo = math.Min(lo, p[j-1].i) // it may have come to its limit
		noise = rss(noise, p[j-1].u)
	} else {
		lo, hi = w.between(&p[j-1], &p[j+1], p[j].vg)
		noise = rss(noise, rss(p[j-1].u, p[j+1].u))
	}
	e := outside(p[j].i, lo, hi)
	if e <= lineTolerance {
		return 0
	}
	beyond := math.Max(lo-p[j].i, p[j].i-hi)
	if beyond <= 6*noise+3*p[j].q+lineTolerance*math.Abs(p[j].i) {
		return 0
	}
	if j >= 2 {
		lo, hi := continued(&p[j-2], &p[j-1], p[j].vg)
		if outside(p[j].i, lo, hi) <= lineTolerance {
			return 0
		}
	}
	if j+2 < len(p) {
		lo, hi := continued(&p[j+1], &p[j+2], p[j].vg)
		if outside(p[j].i, lo, hi) <= lineTolerance {
			return 0
		}
	}
	if math.Max(hi, p[j].i) < w.tiny {
		return 0
	}
	if j+2 < len(p) && flatAfter(&p[j], &p[j+1], &p[j+2]) && p[j].i >= p[j-1].i && p[j].i <= p[j+1].i {
		return 0 // the last step before the corner of a load line
	}
	if math.IsInf(e, 1) { // reads zero or less
		return 10
	}
	return e
}

// flatAfter reports whether the curve rises from a to b but hardly from b to c.
func flatAfter(a, b, c *point) bool {
	return c.i-b.i < 0.2*(b.i-a.i)*(c.vg-b.vg)/(b.vg-a.vg)
}

// leastOfInterest is the current below which shape does not matter: leakage,
// foot and the meter's own noise mix there in ways that look like faults and
// change no result.
func (w *work) leastOfInterest() float64 {
	least := math.Inf(1)
	for _, i := range [...]float64{w.s.TestCurrent, w.s.IdleCurrent} {
		if positive(i) {
			least = math.Min(least, i)
		}
	}
	if math.IsInf(least, 1) {
		least = 0
		for j := range w.pts {
			least = math.Max(least, w.pts[j].i)
		}
		least /= 10
	}
	return least / 100
}

// continued is where the curve lies at vg, outside a…b, when it goes on as
// between them: straight in its root or in its logarithm.
func continued(a, b *point, vg float64) (lo, hi float64) {
	if !(b.vg > a.vg) {
		return math.Min(a.i, b.i), math.Max(a.i, b.i)
	}
	t := (vg - a.vg) / (b.vg - a.vg)
	ra, rb := math.Sqrt(math.Max(a.i, 0)), math.Sqrt(math.Max(b.i, 0))
	r := math.Max(0, ra+t*(rb-ra))
	lo, hi = r*r, r*r
	if a.i > 0 && b.i > 0 {
		l := a.i * math.Pow(b.i/a.i, t)
		lo, hi = math.Min(lo, l), math.Max(hi, l)
	}
	return lo, hi
}

// displaced is how far, in gate voltage, point j lies from a current by the
// slope of the root of the current about it.
func (w *work) displaced(j int, i float64) float64 {
	a, b := max(0, j-1), min(len(w.pts)-1, j+1)
	if b == j {
		a, b = max(0, j-2), j-1
	}
	rise := math.Sqrt(math.Max(0, w.pts[b].i)) - math.Sqrt(math.Max(0, w.pts[a].i))
	if !(rise > 0) {
		return math.Inf(1)
	}
	d := math.Sqrt(math.Max(0, w.pts[j].i)) - math.Sqrt(math.Max(0, i))
	return math.Abs(d) * (w.pts[b].vg - w.pts[a].vg) / rise
}

// beyond is how far, in gate voltage, point j lies outside what its neighbours
// leave it.
func (w *work) beyond(j int) float64 {
	p := w.pts
	var lo, hi float64
	if j == len(p)-1 {
		lo, hi = continued(&p[j-2], &p[j-1], p[j].vg)
		lo = math.Min(lo, p[j-1].i)
	} else {
		lo, hi = w.between(&p[j-1], &p[j+1], p[j].vg)
	}
	return w.displaced(j, math.Min(math.Max(p[j].i, lo), hi))
}

// roughness is the robust scatter, in gate voltage, of points about the middle
// of the range that their neighbours leave them.
func (w *work) roughness() float64 {
	r := make([]float64, 0, len(w.pts))
	for j := 1; j < len(w.pts)-1; j++ {
		lo, hi := w.between(&w.pts[j-1], &w.pts[j+1], w.pts[j].vg)
		if !(lo > 5*w.pts[j].q) || !(lo > 0) {
			continue
		}
		if d := w.displaced(j, math.Sqrt(lo*hi)); !math.IsInf(d, 0) {
			r = append(r, d)
		}
	}
	if len(r) == 0 {
		return 0
	}
	return 1.4826 * median(r)
}

// nameFault finds out what is wrong with a point that does not fit: ten times
// too much or too little, a jump at a range change, or merely out of line.
func (w *work) nameFault(j int) (code, text string) {
	p := &w.pts[j]
	for _, f := range [...]float64{10, 0.1} {
		said := "ten times what it should"
		if f < 1 {
			said = "a tenth of what it should"
		}
		if w.fits(j, p.vg, p.i/f) {
			return CodeDecadeSpike, "the current reads " + amps(p.i) + ", " + said
		}
		if w.fits(j, p.vg/f, p.i) {
			return CodeDecadeSpike, "the gate voltage reads " + volts(w.gate*p.vg) + ", " + said
		}
	}
	if w.rangeChange(j) {
		return CodeRangeGlitch, "the current reads " + amps(p.i) + " where the meter changed its range"
	}
	return CodeOutOfLine, "the current reads " + amps(p.i) + ", which contradicts the points around it"
}

// fits reports whether a point at vg with current i would lie between the other
// points, within 8 %.
func (w *work) fits(j int, vg, i float64) bool {
	const tolerance = 0.08
	p := w.pts
	a, b := -1, -1
	for k := range p {
		if k == j {
			continue
		}
		if p[k].vg <= vg {
			a = k
		} else {
			b = k
			break
		}
	}
	if b < 0 && a > 0 {
		// Past the end by no more than a few steps: between the last current and
		// the continued exponential.
		c := a - 1
		if c == j {
			c--
		}
		if c < 0 || !(p[c].i > 0) || !(p[a].vg > p[c].vg) || vg-p[a].vg > 3*(p[a].vg-p[c].vg) {
			return false
		}
		hi := p[a].i * math.Exp(math.Log(p[a].i/p[c].i)*(vg-p[a].vg)/(p[a].vg-p[c].vg))
		return outside(i, p[a].i, hi) < tolerance
	}
	if a < 0 || b < 0 {
		return false
	}
	lo, hi := w.between(&p[a], &p[b], vg)
	return i > 3*p[j].q && outside(i, lo, hi) < tolerance
}

// rangeReach is how near, in points, a change of range must be to be blamed: the
// step of the display is known to three points only.
const rangeReach = quantaSpan + 1

// rangeChange reports whether the step of the display, or the range by the
// accuracy statement, changes near point j.
func (w *work) rangeChange(j int) bool {
	lo, hi := math.Inf(1), 0.0
	tops := [2]float64{math.Inf(1), 0}
	ranges, unit := w.s.Current, 1.0
	if w.onLoad || !w.ammeter {
		ranges, unit = w.s.Load, w.s.RL
	}
	for k := max(0, j-rangeReach); k <= min(len(w.pts)-1, j+rangeReach); k++ {
		p := &w.pts[k]
		if k != j { // its own digits and range may be those of the fault
			t := rangeFor(ranges, p.i*unit).Top
			tops[0], tops[1] = math.Min(tops[0], t), math.Max(tops[1], t)
		}
		if p.q > 0 {
			lo, hi = math.Min(lo, p.q), math.Max(hi, p.q)
		}
	}
	return hi > 5*lo || len(ranges) > 1 && tops[1] > tops[0]
}
