package replay

import (
	"math"
	"slices"
)

const (
	nearRange     = 90.0  // s, how far clocks with one origin are searched for at first
	leastReadings = 20    // in common
	leastDepth    = 1.6   // how much better the best offset must fit than the usual one
	leastLead     = 1.2   // than the best one elsewhere
	leastDip      = 1.2   // and than those beside it
	leastSpan     = 300.0 // s, below which no drift is looked for
	maxDrift      = 1000e-6
	blocks        = 8 // of the jackknife
	safety        = 3 // bound as a multiple of the standard uncertainty
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
	for step := 1; b.i < len(s.t) && s.t[b.i] < t; step *= 2 { // in leaps, halved again where one was too far
		if j := b.i + step; j < len(s.t) && s.t[j] < t {
			b.i = j
			continue
		}
		b.i++
		step = 1
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

// part is a part of a log: readings up to half a length (s) from a share of the
// whole. The zero part is all of it.
type part struct{ at, half float64 }

// of gives the readings of a part.
func (s *series) of(p part) *series {
	n := len(s.t)
	if p.half == 0 || n == 0 || s.t[n-1]-s.t[0] <= 2*p.half {
		return s
	}
	middle := s.t[0] + p.at*(s.t[n-1]-s.t[0])
	lo, _ := slices.BinarySearch(s.t, middle-p.half)
	hi, _ := slices.BinarySearch(s.t, middle+p.half)
	return &series{t: s.t[lo:hi], v: s.v[lo:hi], cycle: s.cycle}
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

// held is what two logs come to when they are held against each other: how much of
// one the other leaves unexplained, large deviations cut.
type held struct {
	left  float64 // sum of squares left
	whole float64 // sum of squares about the mean
	n     float64 // readings compared
	noise float64 // of one reading, below which a deviation says nothing
}

// share is the unexplained part as an amplitude, from near 0 to 1: 1 where nothing
// moves either.
func (h held) share() float64 {
	floor := h.n * h.noise * h.noise
	return math.Sqrt(min((h.left+floor)/(h.whole+floor), 1))
}

// misfit holds two logs against each other at an offset and a drift of one of them.
type misfit func(offset, drift float64) held

// proportional is the misfit of two logs one of which is the other times a
// constant; signs do not count, and readings below the floors tell nothing.
// Logarithms give every step of a staircase its say. Deviations count up to cut.
func proportional(moving, fixed *series, middle, movingFloor, fixedFloor, cut float64) misfit {
	m, f := logs(moving, movingFloor), logs(fixed, fixedFloor)
	usual := high(moving) - high(fixed)
	r := make([]float64, 0, len(m.t))
	return func(offset, drift float64) held {
		r = r[:0]
		var sx, sxx float64
		read := between{s: f}
		for i, t := range m.t {
			if x := read.at(t + offset + drift*(t-middle)); x == x {
				r = append(r, m.v[i]-x-usual)
				sx, sxx = sx+m.v[i], sxx+m.v[i]*m.v[i]
			}
		}
		n := float64(len(r))
		if n < leastReadings {
			return held{}
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
		return held{left: sum, whole: max(sxx-sx*sx/n, 0), n: n, noise: 3e-3}
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
	return func(offset, drift float64) held {
		var n, sx, sy, sxx, sxy, syy float64
		read := between{s: fixed}
		x0, y0 := math.NaN(), math.NaN() // the sums are taken from the first pair, for their digits
		for i, t := range moving.t {
			x := read.at(t + offset + drift*(t-middle))
			if x != x {
				continue
			}
			y := moving.v[i]
			if n == 0 {
				x0, y0 = x, y
			}
			x, y = x-x0, y-y0
			n, sx, sy = n+1, sx+x, sy+y
			sxx, sxy, syy = sxx+x*x, sxy+x*y, syy+y*y
		}
		cxx, cxy, cyy := sxx-sx*sx/n, sxy-sx*sy/n, syy-sy*sy/n
		if n < leastReadings || !(cxx > 0) || !(cyy > 0) {
			return held{}
		}
		return held{left: max(cyy-cxy*cxy/cxx, 0), whole: cyy, n: n, noise: 1e-3 * spanOf(moving.v)}
	}
}

// singleValued is the misfit of gate readings against a current: within each run of
// current, one current belongs to one gate voltage, and more current to more of it
// (less where sign is -1). It is the deviation in volts from the nearest rising
// curve (pool adjacent violators: Ayer et al. 1955, from memory); deviations count up
// to a share of the span of the gate.
func singleValued(gate, current *series, middle, floor, digit, sign, share float64) misfit {
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
	var pool isotonic
	return func(offset, drift float64) held {
		cut := share * span
		h := held{noise: digit / 2}
		read := between{s: gate}
		for _, r := range runs {
			v := make([]float64, len(r.t))
			var n, sx, sxx float64
			for i, t := range r.t {
				// The offset brings gate times to current times: here the other way.
				v[i] = sign * read.at((t-offset+drift*middle)/(1+drift))
				if x := v[i] - v[0]; x == x {
					n, sx, sxx = n+1, sx+x, sxx+x*x
				}
			}
			pool.reset()
			for _, i := range r.order {
				if v[i] == v[i] {
					pool.add(v[i])
				}
			}
			left, k := pool.misfit(cut)
			h.left, h.n = h.left+left, h.n+k
			if n > 0 {
				h.whole += max(sxx-sx*sx/n, 0)
			}
		}
		if h.n < leastReadings || span == 0 {
			return held{}
		}
		return h
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
