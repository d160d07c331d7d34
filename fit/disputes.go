package fit

import (
	"math"
	"slices"
)

// guessDisputes takes, where the two readings of a point disagree, the one that
// lies nearer to where a rising curve must lie by the nearest points that agree.
// [work.dropFaults] looks at all of them together.
func (w *work) guessDisputes() {
	guess := make([]bool, len(w.pts))
	for j := range w.pts {
		p := &w.pts[j]
		if !p.disputed {
			continue
		}
		a, l := w.both(p)
		lo, hi := w.expected(j)
		da, dl := outside(a, lo, hi), outside(l, lo, hi)
		guess[j] = dl < da || dl == da && random(p.ql, p.nl) < random(p.qa, p.na)
	}
	for j := range w.pts {
		if p := &w.pts[j]; p.disputed {
			w.use(p, guess[j])
		}
	}
}

// disputeCode names a disagreement of two readings by their ratio.
func disputeCode(a, l float64) string {
	if r := math.Abs(math.Log10(math.Abs(a / l))); math.Abs(r-3) < 0.1 {
		return CodePrefixLost
	} else if math.Abs(r-1) < 0.06 {
		return CodeDecadeSpike
	}
	return CodeCurrentMismatch
}

// tellDisputes says which reading was used where two disagreed.
func (w *work) tellDisputes() {
	codes := [...]string{CodePrefixLost, CodeDecadeSpike, CodeCurrentMismatch}
	var ammeter, load [len(codes)][]float64 // gate voltages where these were wrong
	for j := range w.pts {
		p := &w.pts[j]
		if !p.disputed {
			continue
		}
		a, l := w.both(p)
		k := slices.Index(codes[:], disputeCode(a, l))
		if p.load {
			ammeter[k] = append(ammeter[k], w.gate*p.vg)
		} else {
			load[k] = append(load[k], w.gate*p.vg)
		}
	}
	for k, code := range codes {
		if len(ammeter[k]) > 0 {
			w.warn(code, "The ammeter's reading contradicts "+w.loadName()+" and the neighbours at "+places(ammeter[k])+"; "+w.loadName()+" is used there.")
		}
		if len(load[k]) > 0 {
			w.warn(code, w.loadName()+" contradicts the ammeter and the neighbours at "+places(load[k])+"; the ammeter is used there.")
		}
	}
}

// dropDispute leaves out a point of which neither reading fits.
func (w *work) dropDispute(p *point) {
	a, l := w.both(p)
	w.leave(p.k, disputeCode(a, l), "ammeter and "+w.loadName()+" disagree ("+amps(p.a)+" and "+amps(p.l)+") and the neighbours fit neither")
}

// expected is the range in which the current of point j must lie by the nearest
// points whose readings agree; NaN when there is none.
func (w *work) expected(j int) (lo, hi float64) {
	before, after := j-1, j+1
	for before >= 0 && w.pts[before].disputed {
		before--
	}
	for after < len(w.pts) && w.pts[after].disputed {
		after++
	}
	switch {
	case before < 0 && after >= len(w.pts):
		return math.NaN(), math.NaN()
	case before < 0:
		return math.Inf(-1), w.pts[after].i
	case after >= len(w.pts):
		return w.pts[before].i, math.Inf(1)
	}
	return w.between(&w.pts[before], &w.pts[after], w.pts[j].vg)
}
