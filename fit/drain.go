package fit

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/interp"
)

// On what a [Drawn] current rests, in words for a lot.
const (
	ByCurve       = "their own curves"
	ByGain        = "their gain factors"
	ByGainGiven   = "the gain factor given"
	ByConductance = "their transconductance and the square law"
)

// Drain is how the drain current of one device follows its gate voltage, see
// [Result.Drain]. The zero Drain tells nothing.
type Drain struct {
	By      string    // ByCurve ...; "": nothing tells
	sign    float64   // -1: the device's gate voltages are turned
	v, root []float64 // V and √A, of a curve, both ascending
	curve   *interp.FritschButland
	own     float64 // V, turned, at the current i
	i       float64 // A
	beta    float64 // A/V²
	theta   float64 // 1/V
}

// Drawn is a drain current.
type Drawn struct {
	I      float64 // A, magnitude; NaN: nothing tells
	Beyond int     // +1: more than I, -1: less than I, the curve ends there
	By     string  // ByCurve ...; "": nothing tells
}

// Drain tells how the drain current of the device follows its gate voltage.
//
// In this order: the device's own curve through the gate voltages at
// [LevelCurrents], at the idle current and at its highest point, √I interpolated
// (monotone cubic, exact for the square law); its gain factor, or that given, with the device's overdrive v at
// the idle current
//
//	I = β v²/(2(1+θv)),  v = [θI + √(θ²I²+2βI)]/β + (gate voltage - that at the idle current)
//
// and the same with the β of the square law that gives its transconductance there,
// β = g_m²/(2I).
//
// Inputs: idle current behind VgsIdle, A; beta, A/V², of a device without a gain
// of its own, NaN or 0: none. Source: square law with mobility degradation; monotone cubic:
// Fritsch and Butland, SIAM Journal on Scientific and Statistical Computing 5 (1984)
// 300-304 (gonum). Checked: TestDrainCurrent; TestParalleledAgainstSimulator of bias.
func (r *Result) Drain(idle, beta float64, pchannel bool) Drain {
	d := Drain{sign: 1, own: math.NaN()}
	if pchannel {
		d.sign = -1
	}
	if v := r.VgsIdle.Value; !math.IsInf(v, 0) && idle > 0 {
		d.own, d.i = d.sign*v, idle
	}
	if d.alongCurve(r) {
		d.By = ByCurve
		return d
	}
	if math.IsNaN(d.own) {
		return d
	}
	d.beta, d.theta, d.By = math.Abs(r.Beta.Value), math.Max(0, math.Abs(r.Theta.Value)), ByGain
	if math.IsNaN(d.theta) {
		d.theta = 0
	}
	if !(d.beta > 0) {
		d.beta, d.theta, d.By = beta, 0, ByGainGiven
	}
	if !(d.beta > 0) {
		gm := r.GmIdle.Value
		d.beta, d.By = gm*gm/(2*idle), ByConductance
	}
	if !(d.beta > 0) || math.IsInf(d.beta, 0) {
		d.beta, d.By = 0, ""
	}
	return d
}

// CurrentAt is the drain current of the device at a gate voltage, see
// [Result.Drain].
func (r *Result) CurrentAt(gate, idle, beta float64, pchannel bool) Drawn {
	d := r.Drain(idle, beta, pchannel)
	return d.At(gate)
}

// topBeyond is how far in √I the highest point lies beyond the last level to count
// beside it: a tenth of the current (judgement).
const topBeyond = 1.05

// CurrentBeyond is [Result.CurrentAt] that goes on beyond the upper end of a curve by
// the square law with mobility degradation, laid through that end: Beyond stays 1, By
// is [ByGain], [ByGainGiven] or [ByConductance]. Where no gain is known it is
// CurrentAt.
func (r *Result) CurrentBeyond(gate, idle, beta float64, pchannel bool) Drawn {
	d := r.Drain(idle, beta, pchannel)
	out := d.At(gate)
	_, b, theta := r.Overdrive(idle, beta)
	if out.Beyond <= 0 || math.IsNaN(b) {
		return out
	}
	end := len(d.v) - 1
	on := Drain{By: ByGain, sign: d.sign, own: d.v[end], i: out.I, beta: b, theta: theta}
	switch {
	case math.Abs(r.Beta.Value) > 0:
	case math.Abs(r.GmIdle.Value) > 0:
		on.By = ByConductance
	default:
		on.By = ByGainGiven
	}
	more := on.At(gate)
	return Drawn{more.I, 1, on.By}
}

// alongCurve takes the device's own curve where it has two points or more. Gate
// voltages are turned so that more of them means more current.
func (d *Drain) alongCurve(r *Result) bool {
	type point struct{ v, root float64 }
	var curve []point
	for _, l := range r.Levels {
		if l.I > 0 && !math.IsNaN(l.Vg) && !math.IsInf(l.Vg, 0) {
			curve = append(curve, point{d.sign * l.Vg, math.Sqrt(l.I)})
		}
	}
	if len(curve) == 0 {
		return false
	}
	if !math.IsNaN(d.own) {
		curve = append(curve, point{d.own, math.Sqrt(d.i)})
	}
	slices.SortFunc(curve, func(a, b point) int { return cmp.Compare(a.root, b.root) })
	// Close to the last of them the highest point adds only its noise.
	if top := (point{d.sign * r.Top.Vg, math.Sqrt(r.Top.I)}); top.root > topBeyond*curve[len(curve)-1].root && !math.IsInf(top.v, 0) {
		curve = append(curve, top)
	}
	// Of points that do not rise the later ones are left out.
	for _, p := range curve {
		if n := len(d.v); n == 0 || p.v > d.v[n-1] && p.root > d.root[n-1]*(1+1e-9) {
			d.v, d.root = append(d.v, p.v), append(d.root, p.root)
		}
	}
	if len(d.v) < 2 {
		return false
	}
	d.curve = new(interp.FritschButland)
	return d.curve.Fit(d.v, d.root) == nil
}

// At is the drain current at a gate voltage with the device's own sign. Beyond the
// end of a curve nothing is given but the end, with Beyond set.
func (d *Drain) At(gate float64) Drawn {
	i, beyond := d.at(d.sign * gate)
	switch {
	case d.By == "" || math.IsNaN(gate):
		return Drawn{I: math.NaN()}
	case beyond < 0:
		i = d.root[0] * d.root[0]
	case beyond > 0:
		i = d.root[len(d.root)-1] * d.root[len(d.root)-1]
	}
	return Drawn{i, beyond, d.By}
}

// Continued is At that goes on beyond the ends of a curve, √I on a straight line: for
// solving, where what is not told is not shown. It rises with the gate voltage and is
// never below 0; NaN where nothing tells.
func (d *Drain) Continued(gate float64) float64 {
	if d.By == "" {
		return math.NaN()
	}
	i, _ := d.at(d.sign * gate)
	return i
}

func (d *Drain) at(gate float64) (i float64, beyond int) {
	if d.curve == nil {
		v := (d.theta*d.i+math.Sqrt(d.theta*d.theta*d.i*d.i+2*d.beta*d.i))/d.beta + gate - d.own
		if v <= 0 {
			return 0, 0
		}
		return d.beta * v * v / (2 * (1 + d.theta*v)), 0
	}
	n := len(d.v)
	line := func(a, b int) float64 {
		return math.Max(0, d.root[a]+(gate-d.v[a])*(d.root[b]-d.root[a])/(d.v[b]-d.v[a]))
	}
	var s float64
	switch {
	case gate < d.v[0]:
		s, beyond = line(0, 1), -1
	case gate > d.v[n-1]:
		s, beyond = line(n-1, n-2), 1
	default:
		s = d.curve.Predict(gate)
	}
	return s * s, beyond
}

// Ends are the gate voltages between which the current is told, in the order off to on
// and with the device's own sign; infinite where the gain factor tells it.
func (d *Drain) Ends() (off, on float64) {
	if d.curve == nil {
		return math.Inf(-int(d.sign)), math.Inf(int(d.sign))
	}
	return d.sign * d.v[0], d.sign * d.v[len(d.v)-1]
}

// Overdrive is how far the device is driven beyond its threshold at the idle current, V, as
// its transconductance or gain factor tells it, with the gain factor; NaN: nothing
// does.
//
//	v = [θI + √(θ²I²+2βI)]/β
func (r *Result) Overdrive(idle, given float64) (v, beta, theta float64) {
	beta, theta = math.Abs(r.Beta.Value), math.Max(0, math.Abs(r.Theta.Value))
	if math.IsNaN(theta) {
		theta = 0
	}
	if gm := math.Abs(r.GmIdle.Value); !(beta > 0) && gm > 0 {
		beta, theta = gm*gm/(2*idle), 0
	}
	if !(beta > 0) {
		beta, theta = given, 0
	}
	if !(beta > 0) || math.IsInf(beta, 0) || !(idle > 0) {
		return math.NaN(), math.NaN(), math.NaN()
	}
	return (theta*idle + math.Sqrt(theta*theta*idle*idle+2*beta*idle)) / beta, beta, theta
}
