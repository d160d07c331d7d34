package lsq

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
	// JacobianWithTrial asks for the derivatives at every trial point instead of
	// only where one was accepted. It pays where residuals and derivatives share
	// most of their work, since nearly all trials are accepted.
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
