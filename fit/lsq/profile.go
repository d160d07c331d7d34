package lsq

import "math"

const (
	// profileTolerance is how near to the quantile a profile bound is sought, as a
	// share of it.
	profileTolerance = 1e-7
	// profileRefits is the most refits spent on one side.
	profileRefits = 60
	// profileFar is how many times farther out than the bound of Interval a
	// profile is followed before it is called open.
	profileFar = 1e4
)

// Profile is the interval of parameter j at the level (0 to 1) by its profile:
// the values p_j at which, with all other parameters fitted again, S exceeds its
// minimum by t² S/(M - parameters), t being Student's two-sided quantile. For a
// model that is linear in its parameters it is that of Interval with scaled; for
// a curved one it is skewed as the readings ask.
//
// Inputs: pr, and f the fit of pr; j; o as for Solve, its Step also holding for
// the refits. Result: lo and hi in the unit of the parameter, to about 1e-7 of
// their distance from P[j]. A side on which S stays below the limit as far as the
// bound of the parameter ends at that bound with reason profile-at-bound; one on
// which it stays below however far one goes is infinite with profile-open. NaN
// for a side that could not be followed, with the reason of its refit, or
// lower-minimum when a refit went below f: then f is not the minimum. Both NaN,
// with the reason of f or bad-input, where f did not converge, has no degrees of
// freedom, or has j at a bound. The reason is that of the low side unless that
// one converged.
//
// Source: D. M. Bates and D. G. Watts, "Nonlinear Regression Analysis and Its
// Applications", Wiley 1988, section 6.1 (from memory). Checked:
// TestProfileLinear, TestProfileOneParameter, TestProfileSkewed.
func (s *Solver) Profile(pr Problem, f Fit, j int, level float64, o Options) (lo, hi float64, reason Reason) {
	lo, hi = math.NaN(), math.NaN()
	if why := pr.check(f.P, o); why != "" {
		return lo, hi, why
	}
	if !f.Reason.Converged() {
		return lo, hi, f.Reason
	}
	t := student(level, f.DOF())
	if j < 0 || j >= f.N || f.AtBound[j] || !(t > 0) || !(f.SE(j, true) >= 0) {
		return lo, hi, BadInput
	}
	v := profile{s: s, pr: pr, o: o, f: &f, j: j, t: t, last: append([]float64(nil), f.P...)}
	v.lower, v.upper = pr.bounds(j)
	// The refits hold parameter j by bounds of no width.
	v.pr.Lower, v.pr.Upper = make([]float64, f.N), make([]float64, f.N)
	for k := range f.P {
		v.pr.Lower[k], v.pr.Upper[k] = pr.bounds(k)
	}
	lo, reason = v.side(-1)
	copy(v.last, f.P)
	hi, why := v.side(1)
	if reason.Converged() {
		reason = why
	}
	return lo, hi, reason
}

// profile follows one parameter of a fit.
type profile struct {
	s            *Solver
	pr           Problem
	o            Options
	f            *Fit
	j            int
	t            float64
	lower, upper float64   // bounds of the parameter
	last         []float64 // parameters of the last refit that went well
}

// root is √((S - S_min)/Scale) with parameter j held at x: nearly proportional to
// |x - P[j]|, which makes it easy to solve for.
func (v *profile) root(x float64) (float64, Reason) {
	v.pr.Lower[v.j], v.pr.Upper[v.j] = x, x
	from, at := v.f.P, v.f.P[v.j]
	// The start follows the line through the fit and the last refit, at first the
	// one that the covariance gives.
	start := make([]float64, len(from))
	for k := range start {
		slope := v.f.Cov(k, v.j) / v.f.Cov(v.j, v.j)
		if w := v.last[v.j] - at; w != 0 {
			slope = (v.last[k] - from[k]) / w
		}
		if !finite(slope) {
			slope = 0
		}
		start[k] = from[k] + slope*(x-at)
	}
	g := v.s.Solve(v.pr, start, v.o)
	if !g.Reason.Converged() {
		g = v.s.Solve(v.pr, v.last, v.o)
	}
	// A refit whose other parameters can no longer be told apart still has its S.
	if !g.Reason.Converged() && g.Reason != RankDeficient {
		return math.NaN(), g.Reason
	}
	copy(v.last, g.P)
	over := g.SSR - v.f.SSR
	if over < -1e-6*v.f.Scale() {
		return math.NaN(), LowerMinimum
	}
	return math.Sqrt(math.Max(over, 0) / v.f.Scale()), ByProfile
}

// side finds the bound below (way -1) or above (way 1) P[j].
func (v *profile) side(way float64) (float64, Reason) {
	at, h := v.f.P[v.j], v.t*v.f.SE(v.j, true)
	end := v.upper
	if way < 0 {
		end = v.lower
	}
	room := math.Abs(end - at)
	// Distances from P[j], and what root lacks of t there: one too short, one too long.
	short, lack := 0.0, -v.t
	long, spare := math.Inf(1), math.NaN()
	broken := Reason("") // why there is no refit at long
	d := math.Min(h, room)
	if !(d > 0) || at+way*d == at {
		return at, ByProfile // no readings scatter about the model
	}
	side := 0
	for range profileRefits {
		x := at + way*d
		if d == room {
			x = end
		}
		r, why := v.root(x)
		miss := r - v.t
		switch {
		case why == LowerMinimum:
			return math.NaN(), why
		case !why.Converged():
			long, spare, broken, side = d, math.NaN(), why, 0
		case math.Abs(miss) <= profileTolerance*v.t:
			return x, ByProfile
		case miss > 0:
			if side == 1 {
				lack /= 2 // the Illinois rule: both ends must move
			}
			long, spare, side = d, miss, 1
		case d == room:
			return end, ProfileAtBound
		case d > profileFar*h:
			return way * math.Inf(1), ProfileOpen
		default:
			if side == -1 {
				spare /= 2
			}
			short, lack, side = d, miss, -1
		}
		switch {
		case math.IsInf(long, 1):
			d = math.Min(d*math.Min(math.Max(1.1*v.t/r, 1.1), 10), room)
		case long-short <= profileTolerance*long && math.IsNaN(spare):
			return math.NaN(), broken
		case long-short <= profileTolerance*long:
			return at + way*short, ByProfile
		case math.IsNaN(spare):
			d = short + (long-short)/2
		default:
			d = short - lack*(long-short)/(spare-lack)
		}
	}
	return math.NaN(), TooManyEvaluations
}
