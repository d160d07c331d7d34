package fit

// CodeInfo explains one warning or flag code.
type CodeInfo struct {
	Code    string
	Meaning string // one sentence
	Next    string // what to do next
}

// The codes of warnings and flags.
const (
	CodeOffFamilyThreshold = "off-family-threshold"
	CodeOffFamilyGain      = "off-family-gain"
	CodeOffFamilyCurve     = "off-family-curve"
	CodeTwoPopulations     = "two-populations"
	CodeDrainLeakage       = "drain-leakage"
	CodeOpen               = "open"
	CodeShorted            = "shorted"
	CodeWrongWayRound      = "wrong-way-round"
	CodeAboveRange         = "above-range"
	CodeFewPoints          = "few-points"
	CodeSubThresholdOnly   = "sub-threshold-only"
	CodeNotSaturated       = "not-saturated"
	CodeCoarseNearCurrent  = "coarse-near-current"
	CodeHeating            = "heating"
	CodeHeatingNotChecked  = "heating-not-checked"
	CodeOscillation        = "oscillation"
	CodeSweepsDisagree     = "sweeps-disagree"
	CodeSameRows           = "same-rows"
	CodeModelMisfit        = "model-misfit"
	CodeRangeGlitch        = "range-glitch"
	CodeStuckReading       = "stuck-reading"
	CodeCurrentMismatch    = "current-mismatch"
	CodePrefixLost         = "prefix-lost"
	CodeSpotOnly           = "spot-only"
	CodeBenchLimited       = "bench-limited"
	CodeNTooSmall          = "n-too-small"
	CodeManyCrossings      = "many-crossings"  // more than one upward crossing
	CodeBelowSweep         = "below-sweep"     // already above the current at the first point
	CodeOverload           = "overload"        // point left out: meter over its range
	CodeMissingReading     = "missing-reading" // point left out: nothing written
	CodeDecadeSpike        = "decade-spike"    // point left out: ten times too large or small
	CodeNoCircuit          = "no-circuit"      // circuit not given
	CodeNoAccuracy         = "no-accuracy"     // no accuracy statement: no absolute uncertainty
	CodeOverdue            = "calibration-due" // calibration overdue
	CodeUnlikeConditions   = "unlike-conditions"
)
