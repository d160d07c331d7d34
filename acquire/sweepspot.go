package acquire

import "math"

// The rule by which a gate voltage at one current counts as settled: over the last
// 30 s it moved at no more than 0.5 mV per 10 s.
const (
	slopeSpan  = 30.0 // s
	slopeLimit = 0.5e-3 / 10
	bucket     = 0.25 // s, of readings kept as one
)

// sample is a mean of gate voltages that came within one bucket of time.
type sample struct {
	t, v float64 // s; V, in the direction that turns on, brought to the wanted current
	n    int
}

// soak is how a spot settles.
type soak struct {
	series []sample
	heard  float64 // s, of the last gate reading in it
	latest *Point  // the last plateau
	slope  float64 // V/s over the last slopeSpan; NaN not known
	end    Extrapolation
	endAt  float64
	in     int // readings in a row near the current, on the way there
	told   bool
}

// Extrapolation is where a gate voltage that settles exponentially will end, as
// far as can be seen now. It is shown and never stored.
type Extrapolation struct {
	End float64 // V, sign of the part; NaN not to be had
	U   float64 // V, standard uncertainty
	Tau float64 // s
}

// bring begins the way to the current of a spot.
func (r *Runner) bring() {
	r.goal, r.passing = math.NaN(), false
	r.setAt, r.arrivedAt = r.now, math.NaN()
	r.ears.mark()
	if !r.plan.driven() {
		r.say("%s", r.instruction())
		return
	}
	r.target = r.sign * r.plan.Off()
	r.arrivedAt = r.now
}

// bringing brings the device to the current of the spot, or sees it brought there.
func (r *Runner) bringing() {
	at, ok := r.plan.At.Get()
	u, id := r.sign*r.ears.number(Gate, r.now), r.idNow()
	if math.IsNaN(u) {
		return
	}
	if !ok { // the circuit sets the current
		if u > 0.1 {
			r.settle()
		}
		return
	}
	if math.IsNaN(id) {
		return
	}
	within := r.within(at)
	if !r.plan.driven() {
		r.trace(u)
		if math.Abs(id-at) > within {
			r.soak.in = 0
			return
		}
		if r.ears.of(Gate).count > 0 { // one look for each gate reading
			r.ears.mark()
			r.soak.in++
		}
		if r.soak.in >= 2 {
			r.settle()
		}
		return
	}
	r.arrival()
	if !r.walked() {
		return
	}
	p := r.latest()
	r.curve = append(r.curve, p)
	r.seen = r.seen || id >= r.floor()
	switch {
	case math.Abs(id-at) <= within:
		r.settle()
	case id > at:
		r.setGate(r.target - r.trim(id-at))
	default:
		far := approach
		if r.seen {
			far = coarse
		}
		if u >= r.end()-0.001 {
			r.nearLimit("V_GS")
			return
		}
		step, why := r.reach(math.Min(far, r.end()-u), at)
		if step = whole(step, 0.001); step < 0.001 {
			if step, why = r.reach(0.001, math.Inf(1)); step < 0.001-1e-9 {
				r.nearLimit(why)
				return
			}
		}
		r.setGate(r.target + step)
	}
}

// trace keeps what is read on the way to the current, for the slope.
func (r *Runner) trace(u float64) {
	if n := len(r.curve); n == 0 || u-r.sign*r.curve[n-1].Vg >= 0.003 { // on the way up
		r.curve = append(r.curve, r.latest())
		if len(r.curve) > 400 {
			r.curve = r.curve[200:]
		}
	}
}

// slopeAt is dI_D/dV_GS at the current of the spot (A/V): a straight line of sqrt I_D
// through what was read on the way there, from 0.4 of the current on, so that
// readings which do not belong to one instant shift the line but hardly tilt it.
// NaN not known.
func (r *Runner) slopeAt() float64 {
	at := r.plan.At.Float()
	var n, su, sy, suu, suy float64
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, p := range r.curve {
		u, i := r.sign*p.Vg, r.idOf(p)
		if !(i >= 0.4*at && i <= 1.1*at) || math.IsNaN(u) {
			continue
		}
		y := math.Sqrt(i)
		n, su, sy, suu, suy = n+1, su+u, sy+y, suu+u*u, suy+u*y
		lo, hi = math.Min(lo, u), math.Max(hi, u)
	}
	if n < 2 || hi-lo < 0.01 {
		return math.NaN()
	}
	if b := (n*suy - su*sy) / (n*suu - su*su); b > 0 {
		return 2 * b * math.Sqrt(at)
	}
	return math.NaN()
}

// within is how far the current may be from that of the spot, A: a supply that goes
// in steps of 1 mV comes no nearer than half of one.
func (r *Runner) within(at float64) float64 {
	w := r.plan.AtWithin * at
	if g := r.slopeAt(); r.plan.driven() && g > 0 {
		w = math.Max(w, 0.0006*g)
	}
	return w
}

// trim is the way (V) that changes the current by di (A): half of a
// subthreshold decade at most, 20 mV, and 1 mV at least.
func (r *Runner) trim(di float64) float64 {
	g := r.slopeAt()
	d := 0.002
	if g > 0 {
		d = math.Abs(di) / g
	}
	return math.Min(math.Max(math.Round(d*1000)/1000, 0.001), 0.02)
}

// settle begins the wait at the current.
func (r *Runner) settle() {
	r.enter(phSoak)
	r.soak = soak{heard: r.ears.of(Gate).at, slope: math.NaN(), end: Extrapolation{End: math.NaN(), U: math.NaN()}}
	r.ripe, r.arrivedAt = false, r.now
	r.fresh()
	if !r.plan.driven() {
		r.say("%s", r.instruction())
		r.sound(SoundAttention)
	}
}

// soaking waits until the gate voltage at the current stands, or until the fixed
// wait is over.
func (r *Runner) soaking(points []Point) {
	s := &r.soak
	if r.plan.driven() {
		r.arrival()
	}
	at, has := r.plan.At.Get()
	id := r.idNow()
	if v := r.ears.of(Gate); v.at > s.heard && v.number {
		s.heard = v.at
		u := r.sign * v.value
		if g := r.slopeAt(); has && g > 0 && !math.IsNaN(id) {
			// What the current is off by is in the gate voltage too.
			u -= math.Max(-0.02, math.Min(0.02, (id-at)/g))
		}
		s.add(v.at, u)
		s.slope = s.slopeOver(slopeSpan)
		if v.at >= s.endAt+1 {
			s.endAt = v.at
			s.end = extrapolate(s.series)
			s.end.End *= r.sign
		}
	}
	for _, p := range points {
		if p.Settled {
			s.latest = &p
			r.fresh()
		}
	}
	if has && !math.IsNaN(id) && math.Abs(id-at) > r.within(at) && !r.retrim(id, at) {
		return
	}
	if !r.plan.Settle.IsKnown() {
		r.ripe = math.Abs(s.slope) <= slopeLimit
	}
	if s.latest == nil || !r.ripe && !r.wanted || !r.all() {
		return
	}
	if i := r.idOf(*s.latest); has && math.Abs(i-at) > 1.5*r.within(at) {
		s.latest = nil
		return
	}
	p := *s.latest
	r.points, r.targets = append(r.points, p), append(r.targets, r.target)
	slope := r.slopeAt()
	if !(slope > 0) {
		slope = 0
	}
	r.emit(Taken{Point: p, Early: !r.ripe, Slope: slope})
	r.sound(SoundAccept)
	r.why, r.complete = "the gate voltage has settled", true
	switch {
	case r.plan.Settle.IsKnown() && r.ripe:
		r.why = "the wait is over"
	case !r.ripe:
		r.why = "taken before it had settled"
	}
	r.back = true
	r.wind()
}

// retrim brings the current back where a supply can; it reports whether the
// present current may still be used.
func (r *Runner) retrim(id, at float64) bool {
	s := &r.soak
	if !r.plan.driven() {
		if math.Abs(id-at) <= 1.5*r.within(at) {
			return true
		}
		if !s.told {
			s.told = true
			r.say("%s", r.instruction())
			r.sound(SoundAttention)
		}
		s.latest = nil
		return false
	}
	if !r.walked() {
		return true
	}
	d := r.trim(id - at)
	if id > at {
		d = -d
	} else if got, why := r.reach(d, math.Inf(1)); got < d-1e-9 {
		r.nearLimit(why)
		return false
	}
	s.latest = nil
	r.setGate(r.target + d)
	return true
}

// add puts a reading into the series.
func (s *soak) add(t, v float64) {
	if n := len(s.series); n > 0 && t-s.series[n-1].t < bucket {
		b := &s.series[n-1]
		b.v = (b.v*float64(b.n) + v) / float64(b.n+1)
		b.n++ // its time stays where it began: half a bucket is nothing here
		return
	}
	s.series = append(s.series, sample{t, v, 1})
}

// slopeOver gives the slope of the last span of the series, V/s, by least squares;
// NaN when it is shorter or has fewer than ten entries.
func (s *soak) slopeOver(span float64) float64 {
	n := len(s.series)
	if n == 0 {
		return math.NaN()
	}
	end := s.series[n-1].t
	i := n - 1
	for i > 0 && s.series[i-1].t >= end-span-1e-9 {
		i--
	}
	part := s.series[i:]
	if len(part) < 10 || end-part[0].t < 0.93*span {
		return math.NaN()
	}
	var t, v float64
	for _, p := range part {
		t, v = t+p.t, v+p.v
	}
	t, v = t/float64(len(part)), v/float64(len(part))
	var tv, tt float64
	for _, p := range part {
		tv += (p.t - t) * (p.v - v)
		tt += (p.t - t) * (p.t - t)
	}
	return tv / tt
}

// extrapolate fits v = end + b exp(-t/tau) to the series.
//
// Uses: all of it, from 8 entries and 10 s on. Result: U is the standard
// uncertainty of the end from the scatter about the curve, tau being fitted as
// well; NaN where the series does not bend enough to say (U above 10 mV).
// Source: least squares with one non-linear parameter searched over its range
// (textbook); that one time constant describes a part warming up is common
// practice, no source.
// Checked: TestExtrapolation, on a settling curve with a known end.
func extrapolate(series []sample) Extrapolation {
	none := Extrapolation{End: math.NaN(), U: math.NaN(), Tau: math.NaN()}
	n := len(series)
	if n < 8 || series[n-1].t-series[0].t < 10 {
		return none
	}
	t0, span := series[0].t, series[n-1].t-series[0].t
	best, lo, hi := math.Inf(1), 2.0, 4*span
	var end, b, tau float64
	try := func(x float64) float64 {
		var sy, se, see, sye float64
		for _, p := range series {
			e := math.Exp(-(p.t - t0) / x)
			sy, se, see, sye = sy+p.v, se+e, see+e*e, sye+p.v*e
		}
		m := float64(n)
		den := m*see - se*se
		if den <= 0 {
			return math.Inf(1)
		}
		bb := (m*sye - sy*se) / den
		aa := (sy - bb*se) / m
		var ss float64
		for _, p := range series {
			d := p.v - aa - bb*math.Exp(-(p.t-t0)/x)
			ss += d * d
		}
		if ss < best {
			best, end, b, tau = ss, aa, bb, x
		}
		return ss
	}
	const steps = 48
	for k := 0; k <= steps; k++ {
		try(lo * math.Pow(hi/lo, float64(k)/steps))
	}
	for w := math.Pow(hi/lo, 1.0/steps); w > 1.001; w = math.Sqrt(w) {
		c := tau
		try(c * w)
		try(c / w)
	}
	// Standard uncertainty of the end, from the normal equations of all three.
	var m [3][3]float64
	for _, p := range series {
		e := math.Exp(-(p.t - t0) / tau)
		g := [3]float64{1, e, b * e * (p.t - t0) / (tau * tau)}
		for i := range g {
			for j := range g {
				m[i][j] += g[i] * g[j]
			}
		}
	}
	minor := m[1][1]*m[2][2] - m[1][2]*m[2][1]
	det := m[0][0]*minor - m[0][1]*(m[1][0]*m[2][2]-m[1][2]*m[2][0]) + m[0][2]*(m[1][0]*m[2][1]-m[1][1]*m[2][0])
	if !(det > 0) {
		return none
	}
	u := math.Sqrt(best / float64(n-3) * minor / det)
	if !(u < 0.010) || tau >= 0.99*hi {
		return none
	}
	return Extrapolation{End: end, U: u, Tau: tau}
}
