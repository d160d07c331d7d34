package fit

import (
	"math"
	"slices"
	"sort"
)

const (
	// fallTolerance is by how much a later current may be smaller than an
	// earlier one and still count as noise, drift or a plateau (judgement).
	fallTolerance = 0.05
	// fewestInChain is the fewest points of which one may be found to be wrong, and
	// mostRounds bounds how often the rest is looked at again.
	fewestInChain = 5
	mostRounds    = 4
	// pairReach bounds the pairs that are compared on very long curves.
	pairReach = 300
)

// contradicts reports whether point b, at the higher gate voltage, carries so
// much less current than a that a rising curve cannot hold both; or, at the same
// gate voltage, another current.
func (w *work) contradicts(a, b *point) bool {
	if a.vg == b.vg {
		return !w.alike(a, b)
	}
	fall := a.i - b.i - fallTolerance*math.Abs(a.i)
	if fall <= 0 || b.vg-a.vg <= math.Max(1e-3, math.Max(2*w.grid, 4*a.ux)) {
		return false // noise of the gate reading may have exchanged them
	}
	return fall > 5*rss(a.room, b.room)+2*(a.q+b.q)+2*w.tiny
}

// survey finds what judging faults needs to know of the whole curve: the least
// current, the current below which shape does not matter, and whether the curve
// falls instead of rising.
func (w *work) survey() {
	n := len(w.pts)
	w.tiny = w.leastOfInterest()
	top, falls := math.Inf(-1), false
	w.base = math.Inf(1)
	for j := range w.pts {
		w.base = math.Min(w.base, math.Max(0, w.pts[j].i))
		top = math.Max(top, w.pts[j].i)
		falls = falls || top-w.pts[j].i > fallTolerance*math.Abs(top)+2*w.pts[j].q+2*w.tiny
		w.ties = w.ties || j > 0 && w.pts[j].vg == w.pts[j-1].vg
	}
	noise := w.footNoise(footHint)
	for j := range w.pts {
		w.shape(&w.pts[j])
		w.pts[j].room = math.Max(w.pts[j].room, noise)
	}
	if !falls {
		return
	}
	falling, rising := 0, 0
	for i := range n {
		for j := i + 1; j < min(n, i+pairReach); j++ {
			if w.contradicts(&w.pts[i], &w.pts[j]) {
				falling++
			} else if w.pts[j].i > w.pts[i].i {
				rising++
			}
		}
	}
	w.falling = falling > 3*rising && falling > n
}

// dropFaults leaves out the points that no transfer curve could hold together
// with the others, and settles which of two readings that disagree is used.
func (w *work) dropFaults() {
	if len(w.pts) < fewestInChain {
		w.dropNeither()
		return
	}
	var out []point
	for range mostRounds {
		w.limit = 0
		if w.unsettled = w.breaches(); w.unsettled == 0 && !slices.ContainsFunc(w.pts, func(p point) bool { return p.disputed }) {
			break
		}
		w.jump()
		h := w.newChain()
		pts := make([]point, 0, len(w.pts))
		for j, y := range h.best() {
			p := w.pts[j]
			if y < 0 {
				out = append(out, p)
				continue
			}
			if c := &h.c[y]; c.other {
				w.use(&p, c.load)
				w.shape(&p)
			}
			pts = append(pts, p)
		}
		if len(pts) == len(w.pts) {
			break // what breaches are left, the rest must bear
		}
		w.pts = pts // without them the scatter may be less
	}
	for k := range out {
		p := &out[k]
		if p.disputed {
			w.dropDispute(p)
			continue
		}
		code, text := w.nameFault(p)
		w.leave(p.k, code, text)
		if code != CodeDecadeSpike && !w.leftover(p) {
			w.odd++
		}
	}
}

// breaches counts the points that fall or lie outside the bracket of their
// neighbours.
func (w *work) breaches() (n int) {
	var before *point
	for j := range w.pts {
		b := &w.pts[j]
		if j > 0 && (w.contradicts(&w.pts[j-1], b) || j+1 < len(w.pts) && w.breachOf(before, &w.pts[j-1], b, &w.pts[j+1]) != 0) {
			n++
		}
		if j > 0 {
			before = &w.pts[j-1]
		}
	}
	return n
}

// dropNeither leaves out, of few points, those with two readings neither of which
// fits between the neighbours.
func (w *work) dropNeither() {
	for j := len(w.pts) - 1; j >= 0; j-- {
		p := &w.pts[j]
		if !p.disputed {
			continue
		}
		lo, hi := w.expected(j)
		// 30 %: beyond what interpolation between neighbours may be wrong by.
		if math.IsNaN(lo) || outside(p.i, lo, hi) > 0.3 {
			w.dropDispute(p)
			w.pts = slices.Delete(w.pts, j, j+1)
		}
	}
}

// dropLast leaves out the last point where it is ten times off: of the end of a
// steep curve no more can be told.
func (w *work) dropLast() {
	n := len(w.pts)
	if n < fewestInChain {
		return
	}
	a, b, p := &w.pts[n-3], &w.pts[n-2], w.pts[n-1]
	if a.i <= clearCounts*a.q {
		return
	}
	lo, hi := continued(a, b, p.vg)
	lo = math.Min(lo, b.i) // it may have come to its limit
	if math.Max(hi, p.i) < w.tiny || outside(p.i, lo, hi) <= lineTolerance ||
		math.Max(lo-p.i, p.i-hi) <= 6*rss(p.room, b.room)+3*p.q+lineTolerance*math.Abs(p.i) {
		return
	}
	w.pts = w.pts[:n-1]
	if code, text := w.nameFault(&p); code == CodeDecadeSpike {
		w.leave(p.k, code, text)
		return
	}
	w.pts = w.pts[:n]
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

// nameFault finds out what is wrong with a point that was left out: ten times
// too much or too little, a jump at a range change, or merely out of line.
func (w *work) nameFault(p *point) (code, text string) {
	for _, f := range [...]float64{10, 0.1} {
		said := "ten times what it should"
		if f < 1 {
			said = "a tenth of what it should"
		}
		if w.fits(p, p.vg, p.i/f) {
			return CodeDecadeSpike, "the current reads " + amps(p.i) + ", " + said
		}
		if w.fits(p, p.vg/f, p.i) {
			return CodeDecadeSpike, "the gate voltage reads " + volts(w.gate*p.vg) + ", " + said
		}
	}
	reads := "the current reads " + amps(p.i)
	switch repeats, change := w.signOf(p) == repetition, w.rangeChange(p); {
	case repeats && change:
		return CodeRangeGlitch, reads + ", as before, where the meter changed its range"
	case repeats:
		return CodeStuckReading, reads + ", as before, although the gate moved"
	case change:
		return CodeRangeGlitch, reads + " where the meter changed its range"
	}
	return CodeOutOfLine, reads + ", which contradicts the points around it"
}

// fits reports whether p at gate voltage vg with current i would lie between
// the points, within 8 %.
func (w *work) fits(p *point, vg, i float64) bool {
	const tolerance = 0.08
	pts := w.pts
	b := w.after(vg)
	a := b - 1
	switch {
	case a < 0 || b == len(pts) && a < 1:
		return false
	case b == len(pts):
		// Past the end by no more than a few steps: between the last current and
		// the continued exponential.
		c := a - 1
		if !(pts[c].i > 0) || !(pts[a].vg > pts[c].vg) || vg-pts[a].vg > 3*(pts[a].vg-pts[c].vg) {
			return false
		}
		hi := pts[a].i * math.Exp(math.Log(pts[a].i/pts[c].i)*(vg-pts[a].vg)/(pts[a].vg-pts[c].vg))
		return outside(i, pts[a].i, hi) < tolerance
	}
	lo, hi := w.between(&pts[a], &pts[b], vg)
	return i > 3*p.q && outside(i, lo, hi) < tolerance
}

// after is the index of the first point above gate voltage vg.
func (w *work) after(vg float64) int {
	return sort.Search(len(w.pts), func(j int) bool { return w.pts[j].vg > vg })
}

// rangeReach is how near, in points, a change of range must be to be blamed: the
// step of the display is known to three points only.
const rangeReach = quantaSpan + 1

// rangeChange reports whether the step of the display, or the range by the
// accuracy statement, changes near p, which was left out.
func (w *work) rangeChange(p *point) bool {
	lo, hi := math.Inf(1), 0.0
	tops := [2]float64{math.Inf(1), 0}
	ranges, unit := w.s.Current, 1.0
	if w.onLoad || !w.ammeter {
		ranges, unit = w.s.Load, w.s.RL
	}
	at := w.after(p.vg)
	for k := max(0, at-rangeReach); k < min(len(w.pts), at+rangeReach); k++ {
		p := &w.pts[k]
		t := rangeFor(ranges, p.i*unit).Top
		tops[0], tops[1] = math.Min(tops[0], t), math.Max(tops[1], t)
		if p.q > 0 {
			lo, hi = math.Min(lo, p.q), math.Max(hi, p.q)
		}
	}
	return hi > 5*lo || len(ranges) > 1 && tops[1] > tops[0]
}
