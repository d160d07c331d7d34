package fit

import (
	"math"
	"slices"
)

// takeReturn takes the reading that was taken again after the sweep out of the
// points; false when there is none with a current.
func (w *work) takeReturn() (point, bool) {
	if !w.c.Returned {
		return point{}, false
	}
	last := len(w.c.Vg) - 1
	j := slices.IndexFunc(w.pts, func(p point) bool { return p.k == last })
	if j < 0 {
		return point{}, false
	}
	p := w.pts[j]
	w.pts = slices.Delete(w.pts, j, j+1)
	return p, true
}

// judgeReturn compares the reading taken again after the sweep with the curve at
// the same current, and reports whether it could. More than three standard
// uncertainties of their difference apart, the part had warmed up (less gate
// voltage than before; below the point without a temperature coefficient, where a
// reading at low power lies), or its gate remembers where it was, or it was harmed;
// which of these, one reading cannot tell.
//
// Source: a repeated point of low power after the sweep as a check of heating and
// damage, common practice, no source. Checked: TestReturnedReading.
func (w *work) judgeReturn(p point) bool {
	l := w.level(p.i)
	b := slices.IndexFunc(w.pts, func(q point) bool { return q.i >= p.i })
	if math.IsNaN(l.Vg) || b < 1 {
		return false
	}
	slope := (w.pts[b].vg - w.pts[b-1].vg) / (w.pts[b].i - w.pts[b-1].i)
	noise := usualNoise
	if t := w.whole(); t != nil {
		noise = t.noise
	}
	u := rss(rss(l.U, rss(noise, p.ux)), p.u*slope)
	d := w.sign*l.Vg - p.vg
	if !(math.Abs(d) > math.Max(sweepsLeast, sweepsApart*u)) {
		return true
	}
	most := 0.0
	for j := range w.pts {
		if x := w.pts[j].i * w.pts[j].vds; x > most {
			most = x
		}
	}
	text := "Taken again after the sweep, " + amps(p.i) + " came at " + si(math.Abs(d), "V")
	if d > 0 {
		text += " less gate voltage: the part had warmed up"
		if most > 0 {
			text += " (greatest power " + si(most, "W") + ")"
		}
		w.warn(CodeHeating, text+", or its gate remembers where it was.")
		return true
	}
	w.warn(CodeGateHistory, text+" more gate voltage: the gate remembers where it was, or the sweep harmed the part.")
	return true
}
