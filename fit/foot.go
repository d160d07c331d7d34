package fit

import "math"

const (
	// footShare of the greatest current bounds the foot of a sweep; footLeast is the
	// fewest points there that tell of noise, and footHint the fewest that warn of it
	// (judgement).
	footShare = 1e-3
	footLeast = 8
	footHint  = 4
)

// footNoise is the standard deviation, A, of the currents at the foot of the
// sweep, where the part is off and hardly anything but the meter moves: 0 with
// fewer than least points there. The median of the second differences does not mind the
// beginning of the rise.
//
// Source: second differences as in T. Gasser, L. Sroka and C. Jennen-Steinmetz,
// Biometrika 73 (1986) 625–633 (from memory). Checked: TestFootNoise.
func (w *work) footNoise(least int) float64 {
	top := 0.0
	for j := range w.pts {
		top = math.Max(top, w.pts[j].i)
	}
	n := 0
	for n < len(w.pts) && w.pts[n].i < footShare*top {
		n++
	}
	if n < least {
		return 0
	}
	d := make([]float64, 0, n-2)
	for j := 1; j < n-1; j++ {
		d = append(d, math.Abs(w.pts[j].i-(w.pts[j-1].i+w.pts[j+1].i)/2))
	}
	return 1.4826 * median(d) / math.Sqrt(1.5)
}

// raiseToFoot gives no point a smaller uncertainty than the meter shows at the
// foot: its last digits are not its noise. Least of all where the current is the
// difference of two large voltages: there a short foot must do, and where there is
// none the noise that is common with handheld meters.
func (w *work) raiseToFoot() {
	noise := w.footNoise(footLeast)
	short := noise
	if noise == 0 && w.byDrain {
		short = w.footNoise(footHint)
	}
	for j := range w.pts {
		p := &w.pts[j]
		p.u = math.Max(p.u, noise)
		if !w.byDrain || !p.load {
			continue
		}
		if p.nl > 0 || short > 0 {
			p.u = math.Max(p.u, short)
		} else {
			p.u = math.Max(p.u, p.wl)
		}
		p.q = math.Max(p.q, math.Sqrt(12)*p.u) // a count that hides in noise is none
	}
}
