package replay

import (
	"cmp"
	"math"
	"slices"
)

// found is where two logs fit best.
type found struct {
	offset, drift   float64
	offsetU, driftU float64
	depth           float64 // how many times worse the usual offset fits
	lead            float64 // the best one elsewhere
	dip             float64 // and those beside it
	ok              bool
}

const (
	rivals     = 8   // best offsets that are looked at closely
	leastShare = 0.5 // of the readings that could be compared at most
	// deviance is how much worse the fit may be, in variances of one reading, at an
	// offset that is three standard uncertainties off: 9 for independent deviations.
	// Those of neighbouring readings are alike (they hang on the same steps); four
	// times as much holds in simulation, TestOffsetsAreRightOrAssumed.
	deviance = 9 * 4
)

// trial is one offset with what it comes to.
type trial struct{ at, share, n float64 }

// stage is a misfit over a length of time (s), for the steps of drift.
type stage struct {
	cost misfit
	span float64
}

// search looks for the offset within [lo, hi] by the coarse misfit, and from there
// for offset and, when that is asked for, drift by the fine ones in turn.
func search(fine []stage, coarse misfit, lo, hi, step float64, drift bool) found {
	trials := scan(coarse, lo, hi, step)
	if len(trials) < 9 {
		return found{}
	}
	shares := make([]float64, len(trials))
	for i, tr := range trials {
		shares[i] = tr.share
	}
	apart := max(1.5, 4*step)
	best, second := closest(coarse, trials, step, apart)
	f := found{offset: best.at}
	usual := median(shares)
	f.depth, f.lead = usual/best.share, second.share/best.share
	beside := max(1, 6*step)
	f.dip = min(coarse(best.at-beside, 0).share(), coarse(best.at+beside, 0).share()) / best.share
	f.ok = f.depth >= leastDepth && f.lead >= leastLead && f.dip >= leastDip &&
		best.at > trials[0].at+beside && best.at < trials[len(trials)-1].at-beside
	if !f.ok {
		return f
	}
	for _, s := range fine {
		f.offset, f.drift = refine(s.cost, f.offset, f.drift, step, s.span, drift)
	}
	return f
}

// scan tries all offsets, and keeps those at which enough is compared.
func scan(coarse misfit, lo, hi, step float64) []trial {
	var trials []trial
	most := 0.0
	for i := range int(math.Ceil((hi-lo)/step)) + 1 {
		at := lo + float64(i)*step
		if h := coarse(at, 0); h.n > 0 {
			trials = append(trials, trial{at, h.share(), h.n})
			most = max(most, h.n)
		}
	}
	return slices.DeleteFunc(trials, func(t trial) bool { return t.n < leastShare*most })
}

// closest looks at the deepest dips closely, and gives the best and the best of the
// others that is apart from it.
func closest(coarse misfit, trials []trial, step, apart float64) (best, second trial) {
	var dips []trial
	for i, t := range trials {
		if (i == 0 || t.share <= trials[i-1].share) && (i+1 == len(trials) || t.share <= trials[i+1].share) {
			dips = append(dips, t)
		}
	}
	slices.SortStableFunc(dips, func(a, b trial) int { return cmp.Compare(a.share, b.share) })
	var looked []trial
	for _, d := range dips {
		if len(looked) == rivals {
			break
		}
		if slices.ContainsFunc(looked, func(t trial) bool { return math.Abs(t.at-d.at) < apart }) {
			continue
		}
		at, _ := refine(coarse, d.at, 0, step, 1, false)
		looked = append(looked, trial{at: at, share: coarse(at, 0).share()})
	}
	best, second = trial{share: 1}, trial{share: 1}
	for _, t := range looked {
		if t.share < best.share {
			best = t
		}
	}
	for _, t := range looked {
		if t.share < second.share && math.Abs(t.at-best.at) >= apart {
			second = t
		}
	}
	return best, second
}

// refine goes downhill in ever smaller steps.
func refine(cost misfit, offset, drift, step, span float64, withDrift bool) (float64, float64) {
	at := func(o, d float64) float64 {
		if h := cost(o, d); h.n > 0 {
			return h.share()
		}
		return math.Inf(1)
	}
	best := at(offset, drift)
	dStep := 0.0
	if withDrift {
		dStep = min(2*step/span, 300e-6)
	}
	try := func(o, d float64) bool {
		if math.Abs(d) > maxDrift {
			return false
		}
		if c := at(o, d); c < best {
			best, offset, drift = c, o, d
			return true
		}
		return false
	}
	for step > 5e-4 {
		moved := try(offset+step, drift) || try(offset-step, drift)
		if dStep > 0 {
			moved = try(offset, drift+dStep) || try(offset, drift-dStep) || moved
		}
		if !moved {
			step, dStep = step*0.6, dStep*0.6
		}
	}
	return offset, drift
}

// profile sets offset and drift in the middle of what fits about as well, and their
// standard uncertainties to a third of its half width.
func (f *found) profile(cost misfit, span float64, withDrift bool) {
	for range 2 {
		f.offset, f.offsetU = middleOf(func(x float64) held { return cost(x, f.drift) }, f.offset, 1e-3, 20)
		if withDrift {
			f.drift, f.driftU = middleOf(func(x float64) held { return cost(f.offset, x) }, f.drift, 2e-3/span, maxDrift)
		}
	}
}

// middleOf looks to both sides of the best value for where the fit gets worse by
// the deviance.
func middleOf(cost func(float64) held, best, step, most float64) (middle, u float64) {
	at := cost(best)
	allowed := at.left + deviance*max(at.left/at.n, at.noise*at.noise)
	fits := func(x float64) bool {
		h := cost(x)
		return h.n > 0 && h.left*at.n/h.n <= allowed
	}
	var ends [2]float64
	for side, sign := range []float64{-1, 1} {
		in, out := 0.0, most
		for d := step; d < most; d *= 2 {
			if fits(best + sign*d) {
				in, out = d, most // beyond a bump, too
			} else if out == most {
				out = d
			}
		}
		if out <= in {
			out = min(2*in, most)
		}
		for range 8 {
			if m := (in + out) / 2; fits(best + sign*m) {
				in = m
			} else {
				out = m
			}
		}
		ends[side] = best + sign*in
	}
	return (ends[0] + ends[1]) / 2, (ends[1] - ends[0]) / 2 / 3
}

// jackknife adds the scatter of what is found when one block of time is left out
// (Quenouille 1956, Tukey 1958, from memory) to the standard uncertainties. costOf
// makes the misfit without the readings of [lo, hi).
func (f *found) jackknife(costOf func(lo, hi float64) misfit, from, to, step, span float64, withDrift bool) {
	var offsets, drifts []float64
	for b := range blocks {
		lo := from + (to-from)*float64(b)/blocks
		hi := from + (to-from)*float64(b+1)/blocks
		c := costOf(lo, hi)
		if c(f.offset, f.drift).n == 0 {
			continue
		}
		o, d := refine(c, f.offset, f.drift, step, span, withDrift)
		offsets, drifts = append(offsets, o), append(drifts, d)
	}
	f.offsetU, f.driftU = math.Hypot(f.offsetU, scatter(offsets)), math.Hypot(f.driftU, scatter(drifts))
}

// scatter is the jackknife's standard uncertainty of estimates that each leave one
// block out; infinite of fewer than three.
func scatter(x []float64) float64 {
	n := float64(len(x))
	if n < 3 {
		return math.Inf(1)
	}
	mean, sum := 0.0, 0.0
	for _, v := range x {
		mean += v / n
	}
	for _, v := range x {
		sum += (v - mean) * (v - mean)
	}
	return math.Sqrt((n - 1) / n * sum)
}
