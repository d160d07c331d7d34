package replay

import (
	"math"
	"slices"
)

const (
	nearRange  = 90.0  // s, how far clocks with one origin are searched for at first
	leastDepth = 1.6   // how much better the best offset must fit than the usual one
	leastLead  = 1.15  // and than the best one elsewhere
	leastSpan  = 300.0 // s, below which no drift is looked for
	maxDrift   = 1000e-6
	blocks     = 8 // of the jackknife
	safety     = 3 // bound as a multiple of the standard uncertainty
)

// series is the numbers of one log, by rising time.
type series struct {
	t, v  []float64
	cycle float64
}

// between reads the series at rising times, from the reading before and the one
// behind; NaN outside, and where there was no reading for long.
type between struct {
	s *series
	i int
}

func (b *between) at(t float64) float64 {
	s := b.s
	for b.i < len(s.t) && s.t[b.i] < t {
		b.i++
	}
	if b.i == len(s.t) || b.i == 0 && s.t[0] > t {
		return math.NaN()
	}
	if b.i == 0 || s.t[b.i] == t {
		return s.v[b.i]
	}
	t0, t1 := s.t[b.i-1], s.t[b.i]
	if t1-t0 > max(3*s.cycle, 2) {
		return math.NaN()
	}
	f := (t - t0) / (t1 - t0)
	return s.v[b.i-1] + f*(s.v[b.i]-s.v[b.i-1])
}

// thin keeps at most n readings, evenly.
func (s *series) thin(n int) *series {
	if len(s.t) <= n {
		return s
	}
	out := &series{cycle: s.cycle}
	for i := range n {
		k := i * len(s.t) / n
		out.t, out.v = append(out.t, s.t[k]), append(out.v, s.v[k])
	}
	return out
}

// without leaves out the readings of one block of time.
func (s *series) without(lo, hi float64) *series {
	out := &series{cycle: s.cycle}
	for i, t := range s.t {
		if t < lo || t >= hi {
			out.t, out.v = append(out.t, t), append(out.v, s.v[i])
		}
	}
	return out
}

// misfit says how badly two logs fit at an offset and a drift of one of them: the
// root mean square of what one leaves unexplained of the other, large deviations
// cut. NaN when too little overlaps.
type misfit func(offset, drift float64) float64

// proportional is the misfit of two logs one of which is the other times a
// constant; signs do not count, and readings below the floors tell nothing.
// Logarithms give every step of a staircase its say. Deviations count up to cut.
func proportional(moving, fixed *series, middle, movingFloor, fixedFloor, cut float64) misfit {
	m, f := logs(moving, movingFloor), logs(fixed, fixedFloor)
	usual := high(moving) - high(fixed)
	r := make([]float64, 0, len(m.t))
	return func(offset, drift float64) float64 {
		r = r[:0]
		read := between{s: f}
		for i, t := range m.t {
			if x := read.at(t + offset + drift*(t-middle)); x == x {
				r = append(r, m.v[i]-x-usual)
			}
		}
		if len(r) < 20 || len(r) < len(m.t)/4 {
			return math.NaN()
		}
		ratio := 0.0 // what the usual ratio is off at this offset
		for _, within := range []float64{4 * cut, 2 * cut, cut} {
			sum, n := 0.0, 0.0
			for _, d := range r {
				if math.Abs(d-ratio) < within {
					sum, n = sum+d, n+1
				}
			}
			if n > 0 {
				ratio = sum / n
			}
		}
		sum := 0.0
		for _, d := range r {
			sum += min((d-ratio)*(d-ratio), cut*cut)
		}
		return math.Sqrt(sum / float64(len(r)))
	}
}

// logs gives the logarithms of the magnitudes that are above the floor.
func logs(s *series, floor float64) *series {
	out := &series{cycle: s.cycle}
	for i, x := range s.v {
		if a := math.Abs(x); a > floor && a > 0 {
			out.t, out.v = append(out.t, s.t[i]), append(out.v, math.Log(a))
		}
	}
	return out
}

// high is the logarithm of a magnitude that a twentieth of the readings exceed.
func high(s *series) float64 {
	a := make([]float64, len(s.v))
	for i, x := range s.v {
		a[i] = math.Abs(x)
	}
	slices.Sort(a)
	return math.Log(a[len(a)*19/20])
}

// affine is the misfit of two logs one of which is a straight line of the other:
// the drain voltage against the current.
func affine(moving, fixed *series, middle float64) misfit {
	return func(offset, drift float64) float64 {
		var n, sx, sy, sxx, sxy, syy float64
		read := between{s: fixed}
		for i, t := range moving.t {
			x := read.at(t + offset + drift*(t-middle))
			if x != x {
				continue
			}
			y := moving.v[i]
			n, sx, sy = n+1, sx+x, sy+y
			sxx, sxy, syy = sxx+x*x, sxy+x*y, syy+y*y
		}
		cxx, cxy, cyy := sxx-sx*sx/n, sxy-sx*sy/n, syy-sy*sy/n
		if n < 20 || n < float64(len(moving.t))/4 || !(cxx > 0) || !(cyy > 0) {
			return math.NaN()
		}
		return math.Sqrt(max(1-cxy*cxy/(cxx*cyy), 0))
	}
}

// singleValued is the misfit of gate readings against a current: within each run of
// current, one current belongs to one gate voltage, and more current to more of it
// (less where sign is -1). It is the deviation in volts from the nearest rising
// curve (pool adjacent violators: Ayer et al. 1955, from memory), as a share of the
// span of the gate; deviations count up to a share of that span.
func singleValued(gate, current *series, middle, floor, sign, share float64) misfit {
	type run struct {
		t     []float64
		order []int // by current
	}
	var runs []run
	last := math.Inf(-1)
	var now []int
	flush := func() {
		if len(now) >= 8 {
			r := run{}
			for _, i := range now {
				r.t = append(r.t, current.t[i])
				r.order = append(r.order, len(r.order))
			}
			slices.SortStableFunc(r.order, func(a, b int) int {
				x, y := math.Abs(current.v[now[a]]), math.Abs(current.v[now[b]])
				switch {
				case x < y:
					return -1
				case x > y:
					return 1
				}
				return 0
			})
			runs = append(runs, r)
		}
		now = now[:0]
	}
	for i, x := range current.v {
		if math.Abs(x) <= floor {
			continue
		}
		if current.t[i]-last > max(3*current.cycle, 2) {
			flush()
		}
		now, last = append(now, i), current.t[i]
	}
	flush()
	span := spanOf(gate.v)
	total := 0
	for _, r := range runs {
		total += len(r.t)
	}
	var pool isotonic
	return func(offset, drift float64) float64 {
		if span == 0 || total < 20 {
			return math.NaN()
		}
		cut := share * span
		var sum, n float64
		read := between{s: gate}
		for _, r := range runs {
			v := make([]float64, len(r.t))
			for i, t := range r.t {
				// The offset brings gate times to current times: here the other way.
				v[i] = sign * read.at((t-offset+drift*middle)/(1+drift))
			}
			pool.reset()
			for _, i := range r.order {
				if v[i] == v[i] {
					pool.add(v[i])
				}
			}
			s, k := pool.misfit(cut)
			sum, n = sum+s, n+k
		}
		if n < 20 || n < float64(total)/4 {
			return math.NaN()
		}
		return math.Sqrt(sum/n) / span
	}
}

func spanOf(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	return slices.Max(v) - slices.Min(v)
}

// isotonic finds the rising curve nearest to values given in order.
type isotonic struct {
	values []float64
	level  []float64 // of the pools
	weight []int
}

func (p *isotonic) reset() { p.values, p.level, p.weight = p.values[:0], p.level[:0], p.weight[:0] }

func (p *isotonic) add(x float64) {
	p.values = append(p.values, x)
	p.level, p.weight = append(p.level, x), append(p.weight, 1)
	for n := len(p.level); n > 1 && p.level[n-2] > p.level[n-1]; n = len(p.level) {
		w := p.weight[n-2] + p.weight[n-1]
		p.level[n-2] = (p.level[n-2]*float64(p.weight[n-2]) + p.level[n-1]*float64(p.weight[n-1])) / float64(w)
		p.weight[n-2] = w
		p.level, p.weight = p.level[:n-1], p.weight[:n-1]
	}
}

// misfit is the sum of squared deviations, cut, and their number.
func (p *isotonic) misfit(cut float64) (sum, n float64) {
	i := 0
	for k, l := range p.level {
		for range p.weight[k] {
			d := p.values[i] - l
			sum += min(d*d, cut*cut)
			i++
		}
	}
	return sum, float64(len(p.values))
}

// found is where two logs fit best.
type found struct {
	offset, drift   float64
	offsetU, driftU float64
	depth, lead     float64 // how many times worse the usual offset fits, and the best one elsewhere
	edge            bool    // the best is at the end of the range
	ok              bool
}

// search looks for the offset within [lo, hi] by the coarse misfit, and from there
// for offset and, when that is asked for, drift by the fine ones in turn.
func search(fine []misfit, coarse misfit, lo, hi, step, span float64, drift bool) found {
	type trial struct{ at, cost float64 }
	n := int(math.Ceil((hi-lo)/step)) + 1
	var trials []trial
	for i := range n {
		at := lo + float64(i)*step
		if c := coarse(at, 0); c == c {
			trials = append(trials, trial{at, c})
		}
	}
	if len(trials) < 9 {
		return found{}
	}
	costs := make([]float64, len(trials))
	best := 0
	for i, tr := range trials {
		costs[i] = tr.cost
		if tr.cost < trials[best].cost {
			best = i
		}
	}
	f := found{offset: trials[best].at, edge: best < 2 || best >= len(trials)-2}
	for _, cost := range fine {
		f.offset, f.drift = refine(cost, f.offset, f.drift, step, span, drift)
	}
	least := coarse(f.offset, f.drift)
	elsewhere := math.Inf(1)
	for i, tr := range trials {
		if math.Abs(tr.at-f.offset) > max(2, 6*step) {
			elsewhere = min(elsewhere, costs[i])
		}
	}
	f.depth, f.lead = median(costs)/least, elsewhere/least
	f.ok = f.depth >= leastDepth && f.lead >= leastLead
	return f
}

// refine goes downhill in ever smaller steps.
func refine(cost misfit, offset, drift, step, span float64, withDrift bool) (float64, float64) {
	best := cost(offset, drift)
	if best != best {
		best = math.Inf(1)
	}
	dStep := 0.0
	if withDrift {
		dStep = min(2*step/span, 300e-6)
	}
	try := func(o, d float64) bool {
		if math.Abs(d) > maxDrift {
			return false
		}
		if c := cost(o, d); c < best {
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

// jackknife gives standard uncertainties of offset and drift: the scatter of what
// is found when one block of time is left out (Quenouille 1956, Tukey 1958, from
// memory). costOf makes the misfit without the readings of [lo, hi).
func (f *found) jackknife(costOf func(lo, hi float64) misfit, from, to, step, span float64, withDrift bool) {
	var offsets, drifts []float64
	for b := range blocks {
		lo := from + (to-from)*float64(b)/blocks
		hi := from + (to-from)*float64(b+1)/blocks
		c := costOf(lo, hi)
		if v := c(f.offset, f.drift); v != v {
			continue
		}
		o, d := refine(c, f.offset, f.drift, step, span, withDrift)
		offsets, drifts = append(offsets, o), append(drifts, d)
	}
	f.offsetU, f.driftU = scatter(offsets), scatter(drifts)
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
