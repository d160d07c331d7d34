package fit

import (
	"math"
	"slices"
)

const (
	// lineTolerance is by how much a current may lie outside the range that its
	// neighbours leave it (judgement; besides six standard deviations).
	lineTolerance = 0.06
	// leastJump is the least displacement, V, that is called a jump: twice the
	// scatter of a handheld's gate reading; mostJump the greatest that the scatter
	// of a curve excuses: more is no noise of a gate voltage; scatters is how many
	// standard deviations are a jump (judgements).
	leastJump = 1.5e-3
	mostJump  = 20e-3
	scatters  = 6
	// kneeJump is the least in the exponential foot and the knee. Simulators have a
	// corner there, and a point just below it lies by up to that below the chord in
	// ln I.
	kneeJump = 8e-3
	// kinkedKnee is by how much steeper than the exponential before it such a curve
	// becomes at most, and leastFoot the least slope of ln I, 1/V, of an exponential
	// foot: n = 2.
	kinkedKnee = 2.5
	leastFoot  = 0.5 / thermalVoltage
)

// shape sets what brackets are computed from: root and logarithm of the current,
// and the logarithm of what flows above the leakage.
func (w *work) shape(p *point) {
	p.rt, p.ln, p.lf = math.Sqrt(math.Max(0, p.i)), math.Log(p.i), math.NaN()
	switch f := p.i - w.base; {
	case w.base < 1e-6*p.i:
		p.lf = p.ln
	case f > 2*p.q+3*p.u && f > 0.02*w.base:
		p.lf = math.Log(f)
	}
}

// breachOf is the logarithm of the factor by which the current of b lies outside
// what a transfer curve through a and c, and before them p (which may be nil), may
// have at its gate voltage: above zero for too much, below for too little, zero
// within or where noise explains it.
//
// The logarithm of the current bends down and its root bends up, until the
// channel or a resistor limits the current and the curve itself bends down. So b
// lies above the chord in ln I, unless it goes on as the exponential before it;
// and it lies below the chord in √I where the channel is saturated, else below the
// straight one, unless it goes on as the root before it or has come to the plateau
// of c. A leakage bends the logarithm up and is taken off before.
func (w *work) breachOf(p, a, b, c *point) float64 {
	if math.Max(b.i, math.Min(a.i, c.i)) < w.tiny {
		return 0
	}
	lo, hi, blur := math.Min(a.i, c.i), math.Max(a.i, c.i), 0.0
	t := 0.0
	if c.vg > a.vg {
		t = (b.vg - a.vg) / (c.vg - a.vg)
		hi = a.i + t*(c.i-a.i)
		if c.i > a.i && a.i >= 0 && w.inSaturation(c) {
			r := a.rt + t*(c.rt-a.rt)
			hi = r * r
		}
		if a.lf < c.lf {
			f := math.Exp(a.lf + t*(c.lf-a.lf))
			lo = w.base + f
			if fa := a.i - w.base; f > fa { // noise of a moves the chord by its share
				blur = (1 - t) * f / fa * a.room
			}
		}
		if lo > hi {
			lo, hi = hi, lo
		}
	}
	room := 6*rss(rss(b.room, blur), rss(a.room, c.room)) + 3*b.q + lineTolerance*math.Abs(b.i)
	switch {
	case b.i > hi+room:
		if math.Abs(b.i-c.i) <= room {
			return 0
		}
		if p != nil && a.vg > p.vg {
			r := a.rt + (b.vg-a.vg)/(a.vg-p.vg)*(a.rt-p.rt)
			if hi = math.Max(hi, math.Min(c.i, r*r)); b.i-hi <= room {
				return 0
			}
		}
	case b.i < lo-room:
		if p != nil && a.vg > p.vg && a.lf > p.lf {
			before, here := (a.lf-p.lf)/(a.vg-p.vg), (c.lf-a.lf)/(c.vg-a.vg)
			if before > leastFoot && here < kinkedKnee*before {
				lo = math.Min(lo, w.base+math.Exp(a.lf+before*(b.vg-a.vg)))
				if lo-b.i <= room {
					return 0
				}
			}
		}
	default:
		return 0
	}
	e := outside(b.i, lo, hi)
	if e <= lineTolerance {
		return 0
	}
	limit := w.jump()
	if !(a.i > 0) || 2*(c.vg-a.vg) < knee*(c.ln-a.ln) {
		limit = math.Max(limit, kneeJump)
	}
	if rise := c.rt - a.rt; rise > 0 {
		d := math.Abs(b.rt - math.Sqrt(math.Max(0, math.Min(math.Max(b.i, lo), hi))))
		if d*(c.vg-a.vg) <= limit*rise {
			return 0
		}
	}
	if e = math.Min(e, 10); b.i < lo {
		return -e
	}
	return e
}

// inSaturation reports whether the drain voltage exceeds whatever overdrive p may
// have: the gate voltage above that of the first point of the sweep. A part that
// was above threshold there already is not told from one that was not, which makes
// the bracket of its points a little too narrow only where V_DS is small.
func (w *work) inSaturation(p *point) bool {
	switch w.s.Circuit {
	case Diode:
		return !w.s.Depletion
	case Fixed:
		return w.s.Vds > p.vg-w.pts[0].vg
	case Load:
		return w.supplyAt(p.k)-p.i*w.s.RL > p.vg-w.pts[0].vg
	}
	return false
}

// jump is the least displacement, V, that is called a fault: scatters times the
// scatter of the points about the nearest of the chords through their neighbours,
// at least leastJump. Knee and plateau are left out where the rest tells, for bends
// would count as scatter there; of that rest the lower third decides, for up to two
// thirds may be bad or beside bad ones. It is found once for a set of points.
func (w *work) jump() float64 {
	if w.limit > 0 {
		return w.limit
	}
	n := len(w.pts)
	strong, all := make([]float64, 0, n), make([]float64, 0, n)
	for j := 1; j+1 < n; j++ {
		a, b, c := &w.pts[j-1], &w.pts[j], &w.pts[j+1]
		if !(b.i > 5*b.q) || b.i < w.tiny || !(a.i > 0) || !(c.i > 1.1*a.i) || !(c.vg > a.vg) {
			continue // nearly flat: noise of the current there says nothing of the gate
		}
		d := fromChords(a, b, c)
		all = append(all, d)
		if 2*(c.vg-a.vg) > knee*(c.ln-a.ln) {
			strong = append(strong, d)
		}
	}
	if len(strong) >= 4 {
		all = strong
	}
	limit := leastJump
	if len(all) > 0 {
		slices.Sort(all)
		// The quantile at 0.3 of a normal deviate's magnitude is 0.385.
		limit = math.Max(limit, scatters*all[len(all)*3/10]/0.385/math.Sqrt(1.5))
	}
	w.limit = math.Max(math.Min(limit, mostJump), w.gateDigits())
	return w.limit
}

// gateDigits is what the digits of the gate readings alone may displace a point
// by, V, where they are coarse against the steps: several readings are equal, or
// the steps differ by single digits, as no set voltages do.
func (w *work) gateDigits() float64 {
	if w.ties {
		return 4 * w.grid
	}
	least := math.Inf(1)
	for j := 2; j < len(w.pts); j++ {
		p := w.pts[j-2 : j+1]
		step, next := p[1].vg-p[0].vg, p[2].vg-p[1].vg
		if d := math.Abs(next - step); d > w.grid/2 && d < math.Max(step, next)*0.6 {
			least = math.Min(least, d)
		}
	}
	if least < 1.5*w.grid {
		return 1.5 * w.grid
	}
	return 0
}

// fromChords is the distance, V, of b from the nearest of the chords through a
// and c in I, √I and ln I; 0 where the curve does not rise.
func fromChords(a, b, c *point) float64 {
	if !(a.i > 0) || !(c.i > a.i) || !(b.i > 0) || !(c.vg > a.vg) {
		return 0
	}
	t := (b.vg - a.vg) / (c.vg - a.vg)
	d := math.Abs(b.rt - (a.rt + t*(c.rt-a.rt)))
	d = math.Min(d, math.Abs(b.rt-math.Sqrt(a.i+t*(c.i-a.i))))
	d = math.Min(d, math.Abs(b.rt-math.Exp((a.ln+t*(c.ln-a.ln))/2)))
	return d * (c.vg - a.vg) / (c.rt - a.rt)
}

// dips reports whether the slope of √I is less between a and b than both before
// and after, so that a lies above, or b below, where the curve can be: the slope
// rises up to one greatest value and falls from there on.
func dips(p, a, b, c *point, limit float64) bool {
	if !(p.vg < a.vg && a.vg < b.vg && b.vg < c.vg) || !(b.rt > a.rt) {
		return false
	}
	s1, s2, s3 := (a.rt-p.rt)/(a.vg-p.vg), (b.rt-a.rt)/(b.vg-a.vg), (c.rt-b.rt)/(c.vg-b.vg)
	if s2 >= s1 || s2 >= s3 {
		return false
	}
	over := a.rt - (p.rt + (b.rt-p.rt)*(a.vg-p.vg)/(b.vg-p.vg))
	under := a.rt + (c.rt-a.rt)*(b.vg-a.vg)/(c.vg-a.vg) - b.rt
	// Half of the relative displacement of the current is that of its root.
	room := func(x *point) float64 {
		return (6*x.room+3*x.q)/(2*x.rt) + lineTolerance/2*x.rt
	}
	rise := (c.rt - p.rt) / (c.vg - p.vg)
	return over > room(a) && under > room(b) && math.Min(over, under) > limit*rise
}

// between is where a transfer curve may lie at vg between two of its points:
// its logarithm bends down and, until load or series resistance limit it, its
// square root bends up, so it lies between the two chords. A leakage under the
// foot bends the logarithm up: it is taken off before.
func (w *work) between(a, b *point, vg float64) (lo, hi float64) {
	if !(b.vg > a.vg) {
		return math.Min(a.i, b.i), math.Max(a.i, b.i)
	}
	t := (vg - a.vg) / (b.vg - a.vg)
	ia, ib := math.Max(a.i, 0), math.Max(b.i, 0)
	r := (1-t)*math.Sqrt(ia) + t*math.Sqrt(ib)
	hi = r * r
	lo = math.Min(ia, ib)
	if fa, fb := ia-w.base, ib-w.base; fa > 2*a.q+3*a.u && fa > 0.02*w.base && fb > fa {
		lo = w.base + math.Exp((1-t)*math.Log(fa)+t*math.Log(fb))
	}
	if lo > hi {
		lo, hi = hi, lo
	}
	return lo, hi
}

// outside is the logarithm of the factor by which x lies outside lo…hi, 0
// within.
func outside(x, lo, hi float64) float64 {
	switch {
	case x > hi:
		if hi <= 0 {
			return math.Inf(1)
		}
		return math.Log(x / hi)
	case x < lo:
		if x <= 0 {
			return math.Inf(1)
		}
		return math.Log(lo / x)
	}
	return 0
}

// continued is where the curve lies at vg, outside a…b, when it goes on as
// between them: straight in its root or in its logarithm.
func continued(a, b *point, vg float64) (lo, hi float64) {
	if !(b.vg > a.vg) {
		return math.Min(a.i, b.i), math.Max(a.i, b.i)
	}
	t := (vg - a.vg) / (b.vg - a.vg)
	ra, rb := math.Sqrt(math.Max(a.i, 0)), math.Sqrt(math.Max(b.i, 0))
	r := math.Max(0, ra+t*(rb-ra))
	lo, hi = r*r, r*r
	if a.i > 0 && b.i > 0 {
		l := a.i * math.Pow(b.i/a.i, t)
		lo, hi = math.Min(lo, l), math.Max(hi, l)
	}
	return lo, hi
}
