package acquire

import (
	"math"

	"gatesill/store/record"
)

// Settle says when a value that drifts while a part warms up may be taken: when it has all
// but come to rest, or after a time that is the same for all parts. The zero value of every
// number stands for what is written beside it.
type Settle struct {
	Slope  float64    // unit/s, of the line through the window, either way; 0: 0.5 mV in 10 s
	Window float64    // s; 0: 30 s
	After  record.Num // s, from the start; known: then, whatever the slope
	Digit  float64    // one count of the display, unit; 0: not known
}

const (
	settleSlope  = 0.5e-3 / 10 // V/s
	settleWindow = 30.0        // s
	settleLeast  = 6           // readings in the window
	settleHole   = 0.2         // of the window without a reading, at most
	bucket       = 0.25        // s, of readings kept as one mean, so that fast meters do not make the series long
	aheadFrom    = 45.0        // s, before which no end value is estimated
	aheadLeast   = 20          // readings
	aheadTaus    = 2.0         // time constants of more than this many times the time seen are not told
	slower       = 4.0         // times the time constant: a second one that would be looked for
	secondF      = 6.0         // by which a second one must improve the fit, F with one degree of freedom
)

// Settling watches one value of one part.
type Settling struct {
	s     Settle
	began float64   // s
	t, v  []float64 // means within a bucket
	from  float64   // s, of the first reading in the last of them
	last  float64   // s, of the last one
	in    float64   // readings in it
	slope float64   // unit/s; NaN not known
}

// Start begins with a part, at a time, s.
func (s Settle) Start(at float64) *Settling {
	orElse(&s.Slope, settleSlope)
	orElse(&s.Window, settleWindow)
	return &Settling{s: s, began: at, slope: math.NaN()}
}

// Add takes the value read at a time, s; what is not a number or not later than the one
// before is left out.
func (g *Settling) Add(at, v float64) {
	n := len(g.t)
	if math.IsNaN(v) || math.IsInf(v, 0) || math.IsNaN(at) || n > 0 && !(at > g.last) {
		return
	}
	g.last = at
	if n > 0 && at-g.from < bucket {
		g.in++
		g.t[n-1] += (at - g.t[n-1]) / g.in
		g.v[n-1] += (v - g.v[n-1]) / g.in
	} else {
		g.t, g.v = append(g.t, at), append(g.v, v)
		g.from, g.in = at, 1
	}
	g.slope = g.line()
}

// Settled reports whether the value may be taken at a time, s. By the slope it may no
// longer be when the drift begins anew.
func (g *Settling) Settled(at float64) bool {
	if after, fixed := g.s.After.Get(); fixed {
		return at-g.began >= after
	}
	return math.Abs(g.slope) <= g.s.Slope
}

// Slope is that of the value over the last window, unit/s; NaN while the window is not
// full or has holes.
func (g *Settling) Slope() float64 { return g.slope }

// Blind reports whether the drift that is allowed within the window is less than one count
// of the display: a value that seems to rest says little then.
func (g *Settling) Blind() bool { return !g.s.After.IsKnown() && g.s.Digit > g.s.Slope*g.s.Window }

// line gives the slope of the line of least squares through the last window.
func (g *Settling) line() float64 {
	n := len(g.t)
	end := g.t[n-1]
	k := n - 1
	for k > 0 && g.t[k-1] >= end-g.s.Window*(1+1e-9) {
		k--
		if g.t[k+1]-g.t[k] > settleHole*g.s.Window {
			return math.NaN()
		}
	}
	if n-k < settleLeast || end-g.t[k] < (1-settleHole)*g.s.Window || end-g.t[0] < g.s.Window*(1-1e-9) {
		return math.NaN()
	}
	var sums normal
	for i := k; i < n; i++ {
		sums.add([]float64{1, g.t[i] - end}, g.v[i]-g.v[n-1])
	}
	x, _, _ := sums.solve()
	return x[1]
}

// Ahead is where a drifting value would end. It is for showing how long the wait is worth, and
// never stands for a reading.
type Ahead struct {
	Value float64 // unit
	U     float64 // standard uncertainty, as far as the drift is one exponential
	Tau   float64 // s, its time constant
}

// Ahead estimates the end value v∞ of
//
//	v = v∞ + b exp(-t/τ)
//
// by least squares, linear in v∞ and b, over a grid of τ and then around its best. U is what the
// scatter makes of v∞ (τ being fitted too; at least a count/√12 is taken as scatter) and, as the drift
// need not be an exponential, by how much v∞ of the last two thirds alone differs. A
// slower warm-up, of a heat sink say, that has not begun to show is not in it: nothing
// in the readings tells.
//
// False while too little was seen (45 s, 20 readings, half a time constant), and where a second, slower,
// exponential is visible beside the first.
//
// Checked: TestSettleAhead.
func (g *Settling) Ahead() (Ahead, bool) {
	n := len(g.t)
	if n < aheadLeast || g.t[n-1]-g.t[0] < aheadFrom {
		return Ahead{}, false
	}
	t, v, digit := g.thinned()
	whole, ok := fitDecay(t, v, digit)
	if !ok || whole.tau > aheadTaus*(t[len(t)-1]-t[0]) || whole.second(t, v, digit) > secondF {
		return Ahead{}, false
	}
	k := 0
	for k < len(t) && t[k]-t[0] < (t[len(t)-1]-t[0])/3 {
		k++
	}
	late, ok := fitDecay(t[k:], v[k:], digit)
	if !ok {
		return Ahead{}, false
	}
	return Ahead{Value: whole.end, U: math.Hypot(whole.u, late.end-whole.end), Tau: whole.tau}, true
}

// thinned gives at most some 120 readings, means of as many neighbours as that takes, and what one
// count is worth in them.
func (g *Settling) thinned() (t, v []float64, digit float64) {
	step := (len(g.t) + 119) / 120
	if step == 1 {
		return g.t, g.v, g.s.Digit
	}
	for i := 0; i+step <= len(g.t); i += step {
		st, sv := 0.0, 0.0
		for k := i; k < i+step; k++ {
			st, sv = st+g.t[k], sv+g.v[k]
		}
		t, v = append(t, st/float64(step)), append(v, sv/float64(step))
	}
	return t, v, g.s.Digit / math.Sqrt(float64(step))
}

// decay is an exponential through readings.
type decay struct {
	end, u, tau float64
	left        float64 // sum of squares
}

// bestDecay fits exponentials of tau and of so many times tau over a grid of tau and then
// around its best.
func bestDecay(t, v []float64, times ...float64) decay {
	span := t[len(t)-1] - t[0]
	best := decay{left: math.Inf(1)}
	try := func(tau float64) {
		if x, _, left := decaySums(t, v, tau, times...).solve(); left < best.left {
			best.end, best.tau, best.left = x[0]+v[0], tau, left
		}
	}
	const steps = 24
	ratio := math.Pow(60, 1.0/steps)
	for k := range steps + 1 {
		try(span / 20 * math.Pow(ratio, float64(k)))
	}
	for ratio > 1+1e-3 {
		ratio = math.Sqrt(ratio)
		at := best.tau
		try(at * ratio)
		try(at / ratio)
	}
	return best
}

// fitDecay fits one exponential.
func fitDecay(t, v []float64, digit float64) (decay, bool) {
	if len(t) < 6 {
		return decay{}, false
	}
	best := bestDecay(t, v, 1)
	if math.IsInf(best.left, 0) {
		return best, false
	}
	// Around the best, with τ as a third coefficient: b t/τ² exp(-t/τ).
	x, _, _ := decaySums(t, v, best.tau, 1).solve()
	var full normal
	for i := range t {
		e := math.Exp(-(t[i] - t[0]) / best.tau)
		full.add([]float64{1, e, x[1] * (t[i] - t[0]) / best.tau * e}, 0)
	}
	_, inverse, _ := full.solve()
	variance := math.Max(best.left/float64(len(t)-3), digit*digit/12)
	best.u = math.Sqrt(variance * inverse[0])
	return best, best.u >= 0
}

// second is by how much a second exponential, slower, improves the fit of one: F with one
// degree of freedom, 0 not at all.
func (d decay) second(t, v []float64, digit float64) float64 {
	two := bestDecay(t, v, 1, slower)
	if !(two.left < d.left) {
		return 0
	}
	return (d.left - two.left) / math.Max(two.left/float64(len(t)-4), digit*digit/12)
}

// decaySums are the sums for an end value and exponentials of so many times tau.
func decaySums(t, v []float64, tau float64, times ...float64) *normal {
	sums := &normal{}
	basis := make([]float64, 1+len(times))
	basis[0] = 1
	for i := range t {
		for k, f := range times {
			basis[k+1] = math.Exp(-(t[i] - t[0]) / (f * tau))
		}
		sums.add(basis, v[i]-v[0])
	}
	return sums
}
