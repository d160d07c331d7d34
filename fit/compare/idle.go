package compare

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/interp"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// smallDrift is up to what part of the idle current a change of it is taken to
// follow the transconductance in a straight line.
const smallDrift = 0.2

// idleAt is the drain current, a magnitude in A, of one device at another gate
// voltage than that of its idle current, and on what it rests; NaN where nothing
// tells.
//
// In this order: the device's own curve through the gate voltages at
// [fit.LevelCurrents] and at the idle current, √I interpolated (monotone cubic,
// exact for the square law); its gain factor, or that given, with the device's
// overdrive v at the idle current
//
//	I = β v²/(2(1+θv)),  v = [θI + √(θ²I²+2βI)]/β + (gate voltage - that of the idle current)
//
// and its transconductance, for changes below a fifth of the idle current. Beyond
// the end of a curve nothing is given but the end, with beyond set.
//
// Source: square law with mobility degradation; monotone cubic: Fritsch and Butland,
// SIAM Journal on Scientific and Statistical Computing 5 (1984) 300-304 (gonum).
// Checked: TestIdleAtOldVoltage.
func idleAt(m *Member, gate, idle, beta float64, pchannel bool) idling {
	sign := 1.0
	if pchannel {
		sign = -1
	}
	r := &m.Result
	own, _, _ := lot.Read(r, fit.KeyVgsIdle)
	if i, beyond, ok := alongCurve(r, sign*own, sign*gate, idle, sign); ok {
		return idling{i, beyond, "their own curves"}
	}
	if math.IsNaN(own) || !(idle > 0) {
		return idling{math.NaN(), 0, ""}
	}
	more := sign * (gate - own)
	b, theta, how := math.Abs(r.Beta.Value), math.Max(0, math.Abs(r.Theta.Value)), "their gain factors"
	if math.IsNaN(theta) {
		theta = 0
	}
	if !(b > 0) {
		b, theta, how = beta, 0, "the gain factor given"
	}
	if b > 0 {
		v := (theta*idle+math.Sqrt(theta*theta*idle*idle+2*b*idle))/b + more
		if v <= 0 {
			return idling{0, 0, how}
		}
		return idling{b * v * v / (2 * (1 + theta*v)), 0, how}
	}
	if d := math.Abs(r.GmIdle.Value) * more; math.Abs(d) <= smallDrift*idle {
		return idling{idle + d, 0, "their transconductance"}
	}
	return idling{math.NaN(), 0, ""}
}

// idling is a current with what it rests on.
type idling struct {
	i      float64 // A; NaN: nothing tells
	beyond int     // +1: more than i, -1: less than i, the curve ends there
	how    string
}

// alongCurve reads the current off a device's own curve. Gate voltages are turned so
// that more of them means more current. ok is false where it has fewer than two
// points.
func alongCurve(r *fit.Result, own, gate, idle, sign float64) (i float64, beyond int, ok bool) {
	type point struct{ v, root float64 }
	var curve []point
	for _, l := range r.Levels {
		if l.I > 0 && !math.IsNaN(l.Vg) && !math.IsInf(l.Vg, 0) {
			curve = append(curve, point{sign * l.Vg, math.Sqrt(l.I)})
		}
	}
	if len(curve) == 0 {
		return math.NaN(), 0, false
	}
	if idle > 0 && !math.IsNaN(own) {
		curve = append(curve, point{own, math.Sqrt(idle)})
	}
	slices.SortFunc(curve, func(a, b point) int { return cmp.Compare(a.root, b.root) })
	// Of points that do not rise the later ones are left out.
	var v, root []float64
	for _, p := range curve {
		if n := len(v); n == 0 || p.v > v[n-1] && p.root > root[n-1]*(1+1e-9) {
			v, root = append(v, p.v), append(root, p.root)
		}
	}
	n := len(v)
	switch {
	case n < 2:
		return math.NaN(), 0, false
	case gate < v[0]:
		return root[0] * root[0], -1, true
	case gate > v[n-1]:
		return root[n-1] * root[n-1], 1, true
	}
	var f interp.FritschButland
	if err := f.Fit(v, root); err != nil {
		return math.NaN(), 0, false
	}
	s := f.Predict(gate)
	return s * s, 0, true
}
