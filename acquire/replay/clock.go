package replay

import "math"

// window is half the length of the part of long logs in which an offset is looked
// for at first: long enough for dozens of steps, short enough for no drift to count.
const window = 400.0 // s

// cuts are how far deviations count while an offset is looked for, in turn: the
// nearer, the less a reading on the move says, and the more those that begin and end
// a step. In natural logarithms for proportional logs; a fifth of it as a share of
// the gate's span.
var cuts = []float64{0.5, 0.15, 0.06}

// align holds the clock of a log against that of the reference.
func (j *joiner) align(l *Log) error {
	apart := j.o.kinds[l] == fromZero || j.o.kinds[j.ref] == fromZero
	if j.o.kinds[l] == j.o.kinds[j.ref] && (l.start == j.ref.Role || j.ref.start == l.Role) {
		apart = false
	}
	c := &Clock{Against: j.ref.Role}
	l.Found.Clock = c
	moving, fixed := l.numbers(), j.ref.numbers()
	if len(moving.t) < 2 || len(fixed.t) < 2 {
		return j.assume(l, apart, "there are too few readings")
	}
	mid := (max(moving.t[0], fixed.t[0]) + min(moving.t[len(moving.t)-1], fixed.t[len(fixed.t)-1])) / 2
	if apart {
		mid = (moving.t[0] + moving.t[len(moving.t)-1]) / 2
	}
	c.middle = mid
	cost, seen := j.costs(l, mid)
	if cost == nil {
		return j.assume(l, apart, "nothing relates the "+l.Role+" to the "+j.ref.Role)
	}
	span := min(moving.t[len(moving.t)-1]-moving.t[0], fixed.t[len(fixed.t)-1]-fixed.t[0])
	shorter := 0.3 * span
	wideLo, wideHi := fixed.t[0]-moving.t[len(moving.t)-1]+shorter, fixed.t[len(fixed.t)-1]-moving.t[0]-shorter
	step := max(0.02, min(moving.cycle, fixed.cycle)/2)
	drift := span >= leastSpan
	var fine []stage // from the middle outwards, so that a drift is found before it has come to a step
	for w := window; 2*w < span; w *= 2 {
		fine = append(fine, stage{cost(moving, fixed, part{0.5, w}, cuts[0]), 2 * w})
	}
	for _, cut := range cuts {
		fine = append(fine, stage{cost(moving, fixed, part{}, cut), span})
	}
	full := fine[len(fine)-1].cost
	var f found
	try := func(lo, hi, step float64) {
		for _, at := range []float64{0.5, 0.3, 0.7} { // a pause may be in the middle
			if f.ok || at != 0.5 && span < 2*window {
				return
			}
			if g := search(fine, cost(moving, fixed, part{at, window}, cuts[0]), lo, hi, step, drift); g.ok || g.depth > f.depth {
				f = g
			}
		}
	}
	if !apart {
		try(-nearRange, nearRange, step)
	}
	if !f.ok {
		try(wideLo, wideHi, max(step, (wideHi-wideLo)/20000))
	}
	if !f.ok {
		why := "the readings have too little structure"
		if f.depth >= leastDepth && f.dip >= leastDip {
			why = "several offsets fit about equally well"
		}
		return j.assume(l, apart, why)
	}
	f.profile(full, span, drift)
	f.jackknife(func(lo, hi float64) misfit {
		return cost(moving.without(lo, hi), fixed.without(lo+f.offset, hi+f.offset), part{}, cuts[len(cuts)-1])
	}, moving.t[0], moving.t[len(moving.t)-1], step, span, drift)
	if drift && !(f.driftU < 300e-6) {
		drift = false
		f.offset, f.drift = refine(full, f.offset, 0, step, span, false)
		f.profile(full, span, false)
		f.driftU = 0
	}
	j.keep(l, c, f, seen, span, drift)
	return nil
}

// costs gives what makes the misfit of a log against the reference, with what is
// compared in words; nil where nothing relates the two. only the
// readings of a part are held against the other log; cut is one of [cuts].
func (j *joiner) costs(l *Log, middle float64) (make func(moving, fixed *series, of part, cut float64) misfit, seen string) {
	floor := j.ref.floor()
	sign := 1.0
	if j.opt.Table.PChannel {
		sign = -1
	}
	switch {
	case l.Role == "gate" && j.ref.Role == "drain":
		// The drain falls where the current rises: its distance from the greatest.
		top := 0.0
		for _, x := range j.ref.numbers().v {
			top = max(top, math.Abs(x))
		}
		below := func(s *series) *series {
			out := &series{t: s.t, cycle: s.cycle}
			for _, x := range s.v {
				out.v = append(out.v, top-math.Abs(x))
			}
			return out
		}
		return func(m, f *series, p part, cut float64) misfit {
			return singleValued(m, below(f).of(p), middle, max(floor, 0.01*top), l.digit(), sign, cut/5)
		}, "one gate voltage, one drain voltage"
	case l.Role == "gate":
		return func(m, f *series, p part, cut float64) misfit {
			return singleValued(m, f.of(p), middle, floor, l.digit(), sign, cut/5)
		}, "one gate voltage, one " + noun(j.ref.Role)
	case l.Role == "load" && j.ref.Role == "current":
		return func(m, f *series, p part, cut float64) misfit {
			return proportional(m.of(p), f, middle, l.floor(), floor, cut)
		}, "the voltage at the load follows the current"
	case l.Role == "drain":
		return func(m, f *series, p part, cut float64) misfit { return affine(m.of(p), f, middle) }, "the drain voltage falls with the current"
	}
	return nil, ""
}
