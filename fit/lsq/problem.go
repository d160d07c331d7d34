package lsq

import "math"

// Problem is one weighted least-squares problem.
type Problem struct {
	M int // residuals
	N int // parameters
	// Eval writes the M residuals (model - y)/σ at the N parameters p into r and,
	// where jac is not nil, their derivatives: jac[j*M+i] = ∂r_i/∂p_j, column by
	// column. It must not keep or change p. False: the model is not defined at p;
	// a step there is taken back and shortened. Residuals or derivatives that are
	// not finite count as not defined. A limit of a single parameter belongs in
	// Lower and Upper: steps slide along a bound, but only creep towards a place
	// where the model ends.
	Eval func(p, r, jac []float64) bool
	// Lower and Upper are bounds of the parameters, N each; nil: none. An infinite
	// bound is none either. Lower[j] = Upper[j] holds parameter j there.
	Lower, Upper []float64
}

// check looks for what no fit can begin with.
func (pr *Problem) check(start []float64, o Options) Reason {
	n := pr.N
	if n <= 0 || pr.M < 0 || pr.Eval == nil || len(start) != n ||
		pr.Lower != nil && len(pr.Lower) != n || pr.Upper != nil && len(pr.Upper) != n ||
		o.Step != nil && len(o.Step) != n {
		return BadInput
	}
	held := 0
	for j, v := range start {
		lo, hi := pr.bounds(j)
		if !finite(v) || !(lo <= hi) || math.IsInf(lo, 1) || math.IsInf(hi, -1) {
			return BadInput
		}
		if lo == hi {
			held++
		}
	}
	if pr.M < n-held || pr.M == 0 {
		return TooFewPoints
	}
	return ""
}

// bounds are those of parameter j.
func (pr *Problem) bounds(j int) (lo, hi float64) {
	lo, hi = math.Inf(-1), math.Inf(1)
	if pr.Lower != nil {
		lo = pr.Lower[j]
	}
	if pr.Upper != nil {
		hi = pr.Upper[j]
	}
	return lo, hi
}

// clamp moves p into the bounds.
func (pr *Problem) clamp(p []float64) {
	for j, v := range p {
		lo, hi := pr.bounds(j)
		p[j] = math.Min(math.Max(v, lo), hi)
	}
}

// Options says when to stop. The zero value stands for the defaults.
//
// All tests look at the undamped (Gauss-Newton) step from an accepted point, not
// at the step just made: a heavily damped step is short without being near
// anything.
type Options struct {
	MaxEvals int // greatest number of calls of Eval; default 1000
	// Cosine is the greatest cosine of the angle between the residuals and the
	// plane of the derivatives of the free parameters, dimensionless. At cosine c
	// each parameter is within c √(M-N) standard errors of the minimum of the
	// linearised problem. Default 1e-8.
	Cosine float64
	// RelStep is the greatest undamped step as a share of each parameter, for all
	// free parameters at once. Default 1e-12.
	RelStep float64
	// RelReduction is the share of S below which an expected reduction is taken
	// for rounding. Default 1e-13.
	RelReduction float64
	// Step, where given, is for each of the N parameters a step, in its unit, that
	// no longer matters: when every free parameter has an undamped step of at most
	// Step[j] (or of RelStep of its value), the fit is done. nil: none.
	Step []float64
	// JacobianWithTrial asks for the derivatives at every trial point, in one call,
	// instead of in a second call only where it was accepted. The path is the same.
	// It pays where residuals and derivatives share most of their work, as most
	// trials are accepted (on the NIST sets 394 calls instead of 704).
	JacobianWithTrial bool
}

// Defaults of Options.
const (
	defaultMaxEvals     = 1000
	defaultCosine       = 1e-8
	defaultRelStep      = 1e-12
	defaultRelReduction = 1e-13
)

func (o Options) withDefaults() Options {
	if o.MaxEvals <= 0 {
		o.MaxEvals = defaultMaxEvals
	}
	if !(o.Cosine > 0) {
		o.Cosine = defaultCosine
	}
	if !(o.RelStep > 0) {
		o.RelStep = defaultRelStep
	}
	if !(o.RelReduction > 0) {
		o.RelReduction = defaultRelReduction
	}
	return o
}

// Reason says why a fit stopped.
type Reason string

// The reasons. Those that begin with converged stand for a minimum.
const (
	ByCosine    Reason = "converged-by-cosine"    // the residuals are at right angles to the derivatives
	ByStep      Reason = "converged-by-step"      // the undamped step is as short as asked for
	ByReduction Reason = "converged-by-reduction" // S can fall no further in these digits, and the undamped step is short
	ByExact     Reason = "converged-exactly"      // the residuals are zero to rounding
	ByProfile   Reason = "converged-by-profile"   // both bounds of a profile were found (Profile only)

	TooManyEvaluations Reason = "too-many-evaluations" // MaxEvals reached
	Stuck              Reason = "stuck"                // no step however short brings S down, far from a minimum
	NotDefined         Reason = "not-defined"          // the model is not defined at the start
	RankDeficient      Reason = "rank-deficient"       // S is at a minimum, but the readings do not tell the parameters apart
	TooFewPoints       Reason = "too-few-points"       // fewer residuals than free parameters
	BadInput           Reason = "bad-input"            // lengths that do not fit, NaN, a lower bound above its upper one, no Eval

	// Of Profile only.
	ProfileAtBound Reason = "profile-at-bound" // a side of the interval ends at the bound of the parameter
	ProfileOpen    Reason = "profile-open"     // a side of the interval has no end
	LowerMinimum   Reason = "lower-minimum"    // a refit went below the minimum it was to exceed
)

// Converged says whether the fit ended at a minimum of S with respect to every
// free parameter.
func (r Reason) Converged() bool {
	return r == ByCosine || r == ByStep || r == ByReduction || r == ByExact || r == ByProfile
}
