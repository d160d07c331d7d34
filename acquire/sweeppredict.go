package acquire

import (
	"cmp"
	"math"
	"slices"

	"gatesill/store/record"
)

// steepest is the greatest slope of ln I_D with the gate voltage that a MOSFET can
// have, 1/V: q/kT at 300 K, with a slope factor of 1 (textbook; no real part
// reaches it).
const steepest = 38.7

// soar is the share by which a slope may grow beyond the last one measured before
// the prediction errs on the unsafe side.
const soar = 0.15

// apart is how far two points must be apart, V, for the slope between them: a digit
// of a handheld is 1 mV.
const apart = 0.008

// node is a point as the predictor sees it: u rises where the part turns on, i is a
// magnitude.
type node struct{ u, i float64 }

// nodes gives the points in rising u, one each u, those without numbers left out.
func nodes(points []Point, sign float64, current func(Point) float64) []node {
	var ns []node
	for _, p := range points {
		u, i := sign*p.Vg, current(p)
		if !math.IsNaN(u) && !math.IsNaN(i) && !math.IsInf(i, 0) {
			ns = append(ns, node{u, math.Abs(i)})
		}
	}
	slices.SortStableFunc(ns, func(a, b node) int { return cmp.Compare(a.u, b.u) })
	return ns
}

// safePrediction gives a drain current (A, magnitude) that the device will not
// exceed at u, from the points so far and what is read now. ln I_D over the gate voltage only
// gets flatter on the way up, so a straight line in ln I_D through the last points
// lies above the curve; as far ahead as sqrt I_D is a straight line too, that one is
// used with a margin, for it lies closer. Where no current has shown yet it may be
// just below floor, and rise as steeply as physics allows.
//
// Inputs: ns in rising u; now, the present place, with a current that may be NaN;
// floor > 0, the smallest current that would be seen.
// Source: the square law and the exponential law below threshold (textbook).
// Checked: TestPredictionLiesAbove, against the device equation of the tests.
func safePrediction(ns []node, now node, floor float64) func(u float64) float64 {
	seen := make([]node, 0, 3) // the last three that show a current, newest first
	for i := len(ns) - 1; i >= 0 && len(seen) < 3; i-- {
		n := ns[i]
		if n.i < floor || n.u > now.u+0.002 { // beyond now: from before the gate went back
			continue
		}
		if len(seen) == 0 || seen[len(seen)-1].u-n.u >= apart {
			seen = append(seen, n)
		}
	}
	here := now.i
	if math.IsNaN(here) || here < floor {
		here = floor
	}
	if len(seen) == 0 || now.u-seen[0].u > 0.2 { // nothing near is known
		return func(u float64) float64 { return here * math.Exp(steepest*math.Max(0, u-now.u)) }
	}
	a := seen[0]
	slope, root, bend, half := steepest, math.NaN(), math.NaN(), 0.0
	if len(seen) > 1 {
		b := seen[1]
		half = (a.u - b.u) / 2
		slope = math.Log(a.i/b.i) / (a.u - b.u) * (1 + soar)
		slope = math.Min(math.Max(slope, 0), steepest)
		if len(seen) > 2 {
			c := seen[2]
			last := (math.Sqrt(a.i) - math.Sqrt(b.i)) / (a.u - b.u)
			before := (math.Sqrt(b.i) - math.Sqrt(c.i)) / (b.u - c.u)
			if last > 0 && before > 0 {
				root, bend = math.Max(last, before), math.Max(0, last-before)/((a.u-c.u)/2)
			}
		}
	}
	from := func(n node, u float64) float64 {
		d := math.Max(0, u-n.u)
		i := n.i * math.Exp(slope*d)
		if bend*(d+half) <= soar*root { // straight enough from the middle of the last two points to there
			i = math.Min(i, math.Pow(math.Sqrt(n.i)+root*(1+soar)*d, 2))
		}
		return i
	}
	return func(u float64) float64 {
		// From the last point, and from here: it may have warmed up since.
		return math.Max(from(a, u), from(node{now.u, here}, u))
	}
}

// predict gives the current (A, magnitude) to be reckoned with at u: what the
// caller's predictor says, never below what is read now, else the safe prediction;
// never more than the circuit lets through.
func (r *Runner) predict() func(u float64) float64 {
	now := r.here()
	ns := nodes(r.curve, r.sign, r.idOf)
	safe := safePrediction(ns, now, r.floor())
	var given func(float64) (float64, bool)
	if r.plan.Predict != nil {
		given = r.plan.Predict(slices.Clone(r.curve))
	}
	most := r.guard.most()
	return func(u float64) float64 {
		if given != nil {
			if i, ok := given(r.sign * u); ok && !math.IsNaN(i) {
				return math.Min(greater(math.Abs(i), now.i), most)
			}
		}
		return math.Min(safe(u), most)
	}
}

// here is where a step begins: what is read now, or by hand the last point, while
// the gate is elsewhere because the sweep is taken up again.
func (r *Runner) here() node {
	now := node{r.sign * r.ears.of(Gate).value, math.Abs(r.idNow())}
	if n := len(r.points); n > 0 && !r.plan.driven() && r.phase == phClimb && math.Abs(now.u-r.target) > nearOff {
		return node{r.target, r.idOf(r.points[n-1])}
	}
	return now
}

// reach gives how far the gate may go from here, at most by far (V, in the
// direction that turns on), such that on the whole way no current predicted is above
// soft and no share of a limit above [stepShare]. It is 0 when the smallest way
// is too much already. why names the limit that ended it, "" for soft and for far.
func (r *Runner) reach(far, soft float64) (step float64, why string) {
	const part = 0.0005
	here := r.here().u
	predict := r.predict()
	for step < far {
		next := math.Min(step+part, far)
		i := predict(here + next)
		if i > soft {
			return step, ""
		}
		for _, s := range r.guard.expected(math.Abs(here+next), i) {
			most := stepShare
			if s.Name == "V_GS" {
				most = gateShare
			}
			if f := s.Of(); f > most || math.IsNaN(f) && r.plan.driven() {
				return step, s.Name
			}
		}
		step = next
	}
	return step, ""
}

// idOf gives the drain current of a point (A, magnitude): the ammeter's, else
// that through the load resistor; NaN when it cannot be had.
func (r *Runner) idOf(p Point) float64 {
	rl, vdd := r.plan.Circuit.RL.Float(), math.Abs(p.Vdd)
	if math.IsNaN(vdd) {
		vdd = math.Abs(r.plan.Circuit.VDD.Float())
	}
	switch {
	case !math.IsNaN(p.Id):
		return math.Abs(p.Id)
	case !(rl > 0):
	case !math.IsNaN(p.Vl):
		return math.Abs(p.Vl) / rl
	case r.plan.Circuit.Circuit == record.Load && !math.IsNaN(p.Vd):
		return math.Max(0, vdd-math.Abs(p.Vd)) / rl
	case r.plan.Circuit.Circuit == record.Diode:
		return math.Max(0, vdd-math.Abs(p.Vg)) / rl
	}
	return math.NaN()
}

// latest is what the meters say now, brought together without any claim that it
// belongs together: for the screen and for limits, never taken as a point. What is
// not fresh is NaN.
func (r *Runner) latest() Point {
	n := func(role string) float64 { return r.ears.number(role, r.now) }
	return Point{At: r.now, Vg: n(Gate), Id: n(Current), Vl: n(Load), Vd: n(Drain), Vdd: n(Supply), Temp: n(Temperature)}
}

// idNow is the drain current now (A, magnitude), NaN when not fresh.
func (r *Runner) idNow() float64 { return r.idOf(r.latest()) }

// floor is the smallest drain current (A) that counts as one: of interest, well
// above the last digit, and above what a supply voltage that was not read can
// feign.
func (r *Runner) floor() float64 {
	least := math.Max(20e-6, r.plan.Least.Else(record.Known(math.Abs(r.plan.Idle.Float())/1000)).Or(0))
	digits := func(role string, by float64) float64 {
		if d := r.ears.of(role).digit; d > 0 && by > 0 {
			return math.Max(least, 5*d/by)
		}
		return least
	}
	rl := r.plan.Circuit.RL.Float()
	switch {
	case r.plan.has(Current):
		return digits(Current, 1)
	case r.plan.has(Load):
		return digits(Load, rl)
	case r.plan.has(Supply):
		return digits(Drain, rl)
	}
	if f := 0.03 * math.Abs(r.plan.Circuit.VDD.Float()) / rl; f > least {
		return f
	}
	return least
}
