package match

import (
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// What the current of a device beside its idle point rests on, the best first.
const (
	byCurve = iota
	byGain
	byGm
	bySecant
	byNothing
)

var basisText = [...]string{
	byCurve:   "each device's own curve",
	byGain:    "gain factor and mobility degradation of each device, through its idle point",
	byGm:      "the square law through each device's idle point, with its transconductance there",
	bySecant:  "the square law through the two readings of each device (a secant)",
	byNothing: "not claimed: a single reading of a device does not tell how its current changes with the gate voltage",
}

// law is how the current of one device follows its gate voltage, both by
// magnitude.
type law struct {
	basis int
	idle  float64 // V, gate voltage at the idle current; NaN: not known
	i     float64 // A, idle current

	beta, theta float64 // A/V², 1/V, of the laws that are no curve
	v0          float64 // V, overdrive at the idle point

	v, root, slope []float64 // curve: V, √A, √A/V; ascending
}

// lawOf finds the law of a device at idle current at.
//
// The curve goes through the levels of the result, the idle point and, where the
// test current is given, the point at it: monotone cubics of √I over V_GS, with the
// transconductance as the slope at the idle point (Fritsch, Carlson, Monotone
// piecewise cubic interpolation, SIAM Journal on Numerical Analysis 17, 1980; from
// memory), because √I is nearly straight above the threshold; straight beyond both
// ends, and no current below where it meets 0.
//
// Else I = (β/2)·v²/(1 + θ·v), shifted so that it passes through the idle point:
// with β and θ of the fit; with β = g_m²/(2·I) and θ = 0; or with the β of the
// line of √I through the two spots.
func lawOf(m *Member, at, testCurrent float64) law {
	l := law{basis: byNothing, idle: math.NaN(), i: at}
	if !(at > 0) {
		return l
	}
	sign := 1.0
	if m.PChannel {
		sign = -1
	}
	r := &m.Result
	read := func(k fit.Key) float64 { v, _, _ := lot.Read(r, k); return v }
	l.idle = sign * read(fit.KeyVgsIdle)
	test := math.NaN()
	if testCurrent > 0 {
		test = sign * read(fit.KeyVgsth)
		if testCurrent == at && math.IsNaN(l.idle) {
			l.idle = test
		}
	}
	gm := math.Abs(read(fit.KeyGmIdle))
	if l.curve(r, sign, gm, test, testCurrent) {
		return l
	}
	if math.IsNaN(l.idle) {
		return l
	}
	beta, theta := math.Abs(read(fit.KeyBeta)), read(fit.KeyTheta)
	if beta > 0 {
		if !(theta > 0) {
			theta = 0
		}
		l.basis, l.beta, l.theta = byGain, beta, theta
		l.v0 = (theta*at + math.Sqrt(theta*theta*at*at+2*beta*at)) / beta
		return l
	}
	if gm > 0 {
		l.basis, l.beta = byGm, gm*gm/(2*at)
	} else if d := (math.Sqrt(at) - math.Sqrt(testCurrent)) / (l.idle - test); d > 0 && known(d) {
		l.basis, l.beta = bySecant, 2*d*d
	} else {
		return l
	}
	l.v0 = math.Sqrt(2 * at / l.beta)
	return l
}

// curve fills in the curve, if the levels reach around the idle point.
func (l *law) curve(r *fit.Result, sign, gm, test, testCurrent float64) bool {
	type point struct{ v, root float64 }
	var pts []point
	for _, lev := range r.Levels {
		if known(lev.Vg) && math.Abs(lev.I-l.i) > 1e-9*l.i {
			pts = append(pts, point{sign * lev.Vg, math.Sqrt(lev.I)})
		}
	}
	if known(test) && testCurrent != l.i && !slices.ContainsFunc(pts, func(p point) bool { return math.Abs(p.root*p.root-testCurrent) < 1e-9*testCurrent }) {
		pts = append(pts, point{test, math.Sqrt(testCurrent)})
	}
	if len(r.Levels) < 2 {
		return false
	}
	for _, lev := range r.Levels {
		if math.IsNaN(l.idle) && math.Abs(lev.I-l.i) <= 1e-9*l.i {
			l.idle = sign * lev.Vg
		}
	}
	idle := math.Sqrt(l.i)
	if known(l.idle) {
		pts = append(pts, point{l.idle, idle})
	}
	slices.SortFunc(pts, func(a, b point) int {
		switch {
		case a.root < b.root:
			return -1
		case a.root > b.root:
			return 1
		}
		return 0
	})
	// A curve rises; where two points do not, the idle point stays.
	for k := 1; k < len(pts); {
		switch {
		case pts[k].v > pts[k-1].v:
			k++
		case pts[k-1].root == idle:
			pts = slices.Delete(pts, k, k+1)
		default:
			pts = slices.Delete(pts, k-1, k)
			k = max(1, k-1)
		}
	}
	if len(pts) < 3 || !(pts[0].root <= idle && idle <= pts[len(pts)-1].root) {
		return false
	}
	for _, p := range pts {
		l.v, l.root = append(l.v, p.v), append(l.root, p.root)
	}
	l.slopes(idle, gm)
	l.basis = byCurve
	if math.IsNaN(l.idle) {
		lo, hi := l.v[0], l.v[len(l.v)-1]
		for range 80 {
			if mid := lo + (hi-lo)/2; l.onCurve(mid) < l.i {
				lo = mid
			} else {
				hi = mid
			}
		}
		l.idle = hi
	}
	return true
}

// slopes are those of the cubics at their points.
func (l *law) slopes(idle, gm float64) {
	n := len(l.v)
	d := make([]float64, n-1)
	for k := range d {
		d[k] = (l.root[k+1] - l.root[k]) / (l.v[k+1] - l.v[k])
	}
	l.slope = make([]float64, n)
	l.slope[0], l.slope[n-1] = d[0], d[n-2]
	for k := 1; k < n-1; k++ {
		a, b := l.v[k]-l.v[k-1], l.v[k+1]-l.v[k]
		l.slope[k] = 3 * (a + b) / ((2*b+a)/d[k-1] + (b+2*a)/d[k])
	}
	for k := range n {
		most := math.Inf(1)
		if k > 0 {
			most = math.Min(most, 3*d[k-1])
		}
		if k < n-1 {
			most = math.Min(most, 3*d[k])
		}
		if l.root[k] == idle && gm > 0 {
			l.slope[k] = gm / (2 * idle)
		}
		l.slope[k] = math.Min(l.slope[k], most)
	}
}

// onCurve is the current at a gate voltage, by the curve.
func (l *law) onCurve(v float64) float64 {
	n := len(l.v)
	var root float64
	switch k, _ := slices.BinarySearch(l.v, v); {
	case k == 0:
		root = l.root[0] + l.slope[0]*(v-l.v[0])
	case k == n:
		root = l.root[n-1] + l.slope[n-1]*(v-l.v[n-1])
	default:
		h := l.v[k] - l.v[k-1]
		t := (v - l.v[k-1]) / h
		root = l.root[k-1]*(1+2*t)*(1-t)*(1-t) + l.root[k]*t*t*(3-2*t) +
			h*(l.slope[k-1]*t*(1-t)*(1-t)-l.slope[k]*t*t*(1-t))
	}
	root = math.Max(0, root)
	return root * root
}

// current is the drain current at a gate-source voltage.
func (l *law) current(v float64) float64 {
	if l.basis == byCurve {
		return l.onCurve(v)
	}
	o := math.Max(0, l.v0+v-l.idle)
	return l.beta / 2 * o * o / (1 + l.theta*o)
}

// at is the current with the gate at voltage g and resistor r in the source:
// V_GS = g - I·r. The current falls as I rises, so there is one solution, and it is
// found by halving.
func (l *law) at(g, r float64) float64 {
	hi := l.current(g)
	if r == 0 {
		return hi
	}
	lo := 0.0
	for range 100 {
		mid := lo + (hi-lo)/2
		if !(mid > lo && mid < hi) {
			break
		}
		if l.current(g-mid*r) > mid {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo + (hi-lo)/2
}

// Share solves for the currents of devices on one gate line, each with
// Options.SourceResistor, p-channel devices on a line of their own with the same
// voltage by magnitude.
//
// The gate voltage is that at which the mean current is Options.At. Each device's
// current follows its own curve; see the text of Basis for what stands in where
// there is none. The imbalance is the greatest current less the least. It is NaN
// where one device has a single reading only, because millivolts are then all that
// is known.
//
// Source: the circuit's own equation, V_G = V_GS(I) + I·R_S for each device;
// β = g_m²/(2·I) is the square law. Checked: TestImbalancePublished,
// TestShareBalances.
func Share(devices []Member, opt Options) Sharing {
	s := Sharing{Gate: math.NaN(), Imbalance: math.NaN(), Share: math.NaN(), Hottest: -1, Power: math.NaN(), Basis: basisText[byNothing]}
	if !(opt.At > 0) || math.IsInf(opt.At, 0) {
		s.Basis = "not claimed: no idle current is given"
		return s
	}
	if len(devices) == 0 {
		return s
	}
	r := math.Max(0, opt.SourceResistor)
	if !known(r) {
		r = 0
	}
	laws := make([]law, len(devices))
	worst := 0
	lo, hi := math.Inf(1), math.Inf(-1)
	for k := range devices {
		laws[k] = lawOf(&devices[k], opt.At, opt.TestCurrent)
		worst = max(worst, laws[k].basis)
		lo, hi = math.Min(lo, laws[k].idle+opt.At*r), math.Max(hi, laws[k].idle+opt.At*r)
	}
	s.Basis = basisText[worst]
	if worst == byNothing || !known(lo) || !known(hi) {
		s.Basis = basisText[byNothing]
		return s
	}
	mean := func(g float64) float64 {
		sum := 0.0
		for k := range laws {
			sum += laws[k].at(g, r)
		}
		return sum / float64(len(laws))
	}
	// At lo no device carries more than the idle current, at hi none less.
	for range 100 {
		mid := lo + (hi-lo)/2
		if !(mid > lo && mid < hi) {
			break
		}
		if mean(mid) < opt.At {
			lo = mid
		} else {
			hi = mid
		}
	}
	s.Gate = hi
	least, most := math.Inf(1), math.Inf(-1)
	for k := range laws {
		i := laws[k].at(hi, r)
		s.Currents = append(s.Currents, i)
		least = math.Min(least, i)
		if i > most {
			most, s.Hottest = i, k
		}
	}
	s.Imbalance = most - least
	s.Share = s.Imbalance / opt.At
	if opt.Vds > 0 && known(opt.Vds) {
		s.Power = opt.Vds * most
	}
	return s
}
