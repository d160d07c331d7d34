package fit

import (
	"math"
	"slices"
)

const (
	// usualWorth is how many points the usual scatter is worth beside those seen.
	usualWorth = 2
	// separations is how often the two components are told apart anew.
	separations = 40
	// scatterShare is the share of the greatest current from which points tell of
	// the scatter: below it the shape of the knee does more.
	scatterShare = 0.01
)

// standout is by how much one point stands out of the cubic through two neighbours
// on either side, in volts, of what a model leaves over; and how its variance is
// made of what is stated of the points, of the scatter of the gate readings and of
// that of the currents.
type standout struct{ square, known, gate, share float64 }

// standouts finds them in what the model laid through the whole curve leaves over.
func (w *work) standouts(t *whole) []standout {
	top := slices.Max(t.i)
	first := 0
	for first < len(t.i) && t.i[first] < scatterShare*top {
		first++
	}
	out := w.out[:0]
	for j := first + 2; j < len(t.i)-2; j++ {
		var s standout
		r := 0.0
		for a := j - 2; a <= j+2; a++ {
			l := 1.0
			for b := j - 2; a != j && b <= j+2; b++ {
				if b != j && b != a {
					l *= (t.vg[j] - t.vg[b]) / (t.vg[a] - t.vg[b])
				}
			}
			if a != j {
				l = -l
			}
			r += l * (t.solved[a] - t.i[a]) / t.slope[a]
			p := &w.pts[t.from[a]]
			u, lever := p.u/t.slope[a], t.i[a]/t.slope[a]
			l *= l
			s.known += l * (p.ux*p.ux + u*u)
			s.gate += l
			s.share += l * lever * lever
		}
		s.square = r * r
		if finiteNumber(s.square) && finiteNumber(s.share) {
			out = append(out, s)
		}
	}
	w.out = out
	return out
}

// components are the scatter of the gate readings, V, and that of the currents, as a
// share of them, beyond what is stated: the former shows where the curve is steep,
// the latter where it is flat. Both are found from how far points stand out of what
// the model laid through the whole curve leaves over, for a model that is wrong is
// wrong smoothly. The points are few, so that usual values count among them.
//
// Source: components of variance by expectation and maximisation, A. P. Dempster, N.
// M. Laird and D. B. Rubin, J. Roy. Statist. Soc. B 39 (1977) 1-38 (from memory).
// Checked: TestComponents.
func (w *work) components(t *whole) (gate, share float64) {
	if w.apart {
		return w.gateScatter, w.currentScatter
	}
	const a0, b0 = usualNoise * usualNoise, typicalNoise * typicalNoise
	a, b := a0, b0
	seen := w.standouts(t)
	n := float64(len(seen))
	for range separations {
		var sa, sb float64
		for k := range seen {
			s := &seen[k]
			g, h := a*s.gate, b*s.share
			all := g + h + s.known
			r := s.square/all - 1
			sa += 1 + g/all*r
			sb += 1 + h/all*r
		}
		a = (a*sa + usualWorth*a0) / (n + usualWorth)
		b = (b*sb + usualWorth*b0) / (n + usualWorth)
	}
	w.apart, w.gateScatter, w.currentScatter = true, math.Sqrt(a), math.Sqrt(b)
	return w.gateScatter, w.currentScatter
}
