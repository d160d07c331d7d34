package acquire

import (
	"math"
)

// Settle says when a value that drifts while a part warms up is taken: when it has all but
// come to rest, or after a time that is the same for all parts. The zero value of every
// number stands for what is written beside it.
type Settle struct {
	Slope  float64 // unit/s, of the line through the window, either way; 0: 0.5 mV in 10 s
	Window float64 // s; 0: 30 s
	After  float64 // s, from the first reading; above 0: taken then, whatever the slope
	Digit  float64 // one count of the display, unit; 0: not known
}

const (
	settleSlope  = 0.5e-3 / 10 // V/s
	settleWindow = 30.0        // s
	settleLeast  = 6           // readings in the window
	settleHole   = 0.2         // of the window without a reading, at most
	aheadFrom    = 45.0        // s, before which no end value is estimated
	aheadLeast   = 20          // readings
	aheadTaus    = 2.0         // time constants of more than this many times the time seen are not told
	slower       = 4.0         // times the time constant: a second one that would be looked for
	secondF      = 6.0         // by which a second one must improve the fit, F with one degree of freedom
)

// Settling watches one value of one part.
type Settling struct {
	s      Settle
	t, v   []float64
	taken  Accepted
	isDone bool
}

// Accepted is the reading that was taken.
type Accepted struct {
	After float64 // s, from the first reading
	Value float64 // as it was read
	Slope float64 // unit/s, of the window before it; NaN: not enough readings
	Blind bool    // the drift allowed within the window is less than one count of the display: the rule saw nothing
}

// Start begins with a part.
func (s Settle) Start() *Settling {
	orElse(&s.Slope, settleSlope)
	orElse(&s.Window, settleWindow)
	return &Settling{s: s}
}

// Add takes the value read at elapsed time at, s; what is not a number or not later than
// the one before is left out.
func (g *Settling) Add(at, v float64) {
	n := len(g.t)
	if math.IsNaN(v) || math.IsInf(v, 0) || math.IsNaN(at) || n > 0 && !(at > g.t[n-1]) {
		return
	}
	g.t, g.v = append(g.t, at), append(g.v, v)
	if g.isDone {
		return
	}
	slope, ok := g.slope()
	after := at - g.t[0]
	if g.s.After > 0 && after >= g.s.After || !(g.s.After > 0) && ok && math.Abs(slope) <= g.s.Slope {
		g.isDone = true
		g.taken = Accepted{After: after, Value: v, Slope: slope, Blind: g.s.Digit > g.s.Slope*g.s.Window}
	}
}

// Taken gives the reading that was accepted, once there is one; it stays.
func (g *Settling) Taken() (Accepted, bool) { return g.taken, g.isDone }

// slope is that of the line of least squares through the last window, unit/s; false while
// the window is not full or has holes.
func (g *Settling) slope() (float64, bool) {
	n := len(g.t)
	end := g.t[n-1]
	k := n - 1
	for k > 0 && g.t[k-1] >= end-g.s.Window*(1+1e-9) {
		k--
		if g.t[k+1]-g.t[k] > settleHole*g.s.Window {
			return math.NaN(), false
		}
	}
	if n-k < settleLeast || end-g.t[k] < (1-settleHole)*g.s.Window || end-g.t[0] < g.s.Window*(1-1e-9) {
		return math.NaN(), false
	}
	var sums normal
	for i := k; i < n; i++ {
		sums.add([]float64{1, g.t[i] - end}, g.v[i]-g.v[n-1])
	}
	x, _, _ := sums.solve()
	return x[1], !math.IsNaN(x[1])
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
	if !ok || whole.tau > aheadTaus*(t[len(t)-1]-t[0]) || whole.second > secondF {
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
	second      float64 // F by which a second exponential, slower, improves it
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

// fitDecay fits one exponential, and asks whether a second one would fit better.
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
	if two := bestDecay(t, v, 1, slower); two.left < best.left {
		best.second = (best.left - two.left) / math.Max(two.left/float64(len(t)-4), digit*digit/12)
	}
	return best, best.u >= 0
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
