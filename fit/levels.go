package fit

import (
	"math"
	"slices"
)

// levelGap is the share of the gap between two points that a level between them may
// be wrong by, beside the scatter of the points (judgement).
const levelGap = 0.03

// levels reads the whole curve at the currents of [LevelCurrents]: quicker and
// coarser than a crossing, for comparing curves and not for reading a threshold.
func (w *work) levels() []Level {
	var out []Level
	for _, i := range LevelCurrents {
		if l := w.level(i); !math.IsNaN(l.Vg) {
			out = append(out, l)
		}
	}
	return out
}

// highest is the highest point of a sweep of several, as it was read.
func (w *work) highest() Level {
	var out Level
	for i := range w.pts {
		if p := &w.pts[i]; len(w.pts) > 1 && p.above() && p.i > out.I {
			out = Level{I: p.i, Vg: w.sign * p.vg, U: p.ux}
		}
	}
	return out
}

// level is the gate voltage at current i: along the fitted model where there is one,
// corrected by the residuals of the points on either side, else straight in the root
// of the current; NaN where the sweep does not pass it.
func (w *work) level(i float64) Level {
	out := Level{I: i, Vg: math.NaN(), U: math.NaN()}
	b := slices.IndexFunc(w.pts, func(p point) bool { return p.i >= i })
	if b < 1 {
		return out
	}
	p, q := &w.pts[b-1], &w.pts[b]
	if !p.above() || !(q.vg > p.vg) {
		return out
	}
	t := w.whole()
	noise := usualNoise
	if t != nil {
		noise = t.noise
	}
	out.Vg = w.sign * w.levelBetween(t, p, q, i)
	out.U = rss(rss(rss(noise, q.ux), levelGap*(q.vg-p.vg)), q.u/i*(q.vg-p.vg))
	return out
}

// levelBetween is the gate voltage at current i between points p and q.
func (w *work) levelBetween(t *whole, p, q *point, i float64) float64 {
	a, b := math.Sqrt(p.i), math.Sqrt(q.i)
	share := (math.Sqrt(i) - a) / (b - a)
	plain := p.vg + share*(q.vg-p.vg)
	if t == nil {
		return plain
	}
	at := func(i, guess float64) float64 { v, _ := t.gateFor(i, guess); return v }
	lo, v, hi := at(p.i, p.vg), at(i, plain), at(q.i, q.vg)
	if math.IsNaN(lo) || math.IsNaN(v) || math.IsNaN(hi) || !(hi > lo) {
		return plain
	}
	share = (v - lo) / (hi - lo)
	return v + (1-share)*(p.vg-lo) + share*(q.vg-hi)
}
