package fit

// CodeInfo explains one warning or flag code.
type CodeInfo struct {
	Code    string
	Meaning string // one sentence
	Next    string // what to do next, one sentence
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
	CodeNotLinear          = "not-linear" // the channel is never a plain resistor
	CodeCoarseNearCurrent  = "coarse-near-current"
	CodeHeating            = "heating"
	CodeGateHistory        = "gate-history" // up and down sweep apart by the same whatever the power
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
	CodeOutOfLine          = "out-of-line"     // point left out: contradicts a rising curve
	CodeSignTurned         = "sign-turned"     // readings carry the other sign than the part's current
	CodeFallingCurve       = "falling-curve"   // less current with more gate drive
	CodeNoCircuit          = "no-circuit"      // circuit not given
	CodeNoAccuracy         = "no-accuracy"     // no accuracy statement: no absolute uncertainty
	CodeRangeEdge          = "range-edge"      // the readings compared lie on two ranges
	CodeNotAsked           = "not-asked"       // no value because nobody asked for it
	CodeNotByMethod        = "not-by-method"   // the method behind the threshold has no such number
	CodeOffNotRead         = "off-not-read"    // no reading at the off voltage
	CodeOverdue            = "calibration-due" // calibration overdue
	CodeUnlikeConditions   = "unlike-conditions"
	CodePartNotNamed       = "part-not-named"       // lots compared of which one has no part of a name
	CodeLotShape           = "lot-shape"            // read along the lot's median curve
	CodeMethodNotValid     = "method-not-valid"     // no value by the method asked for
	CodeOutsideLimits      = "outside-limits"       // outside the data sheet's limits
	CodeCommonUnknown      = "common-error-unknown" // what the bench adds to the difference of two lots
	CodeOtherSession       = "other-session"        // devices matched across sessions

	// Of the bench, by devices put in again.
	CodeTooFewRepeats   = "too-few-repeats"
	CodeOrderNotRandom  = "order-not-random"
	CodeUnevenRepeats   = "uneven-repeats" // one device makes most of the scatter
	CodeOperatorsDiffer = "operators-differ"
	CodeBenchCoarse     = "bench-coarse" // repeats to more than a tenth of the lot's spread
	CodeBenchDrift      = "bench-drift"
	CodeControlOutside  = "control-outside"
	CodeControlTrend    = "control-trend"
	CodeDeviceChanged   = "device-changed" // since it was measured first
	CodeAllShifted      = "all-shifted"    // all devices together since then

	// States of a device that stand as a warning in what programs read.
	CodeExcluded    = "excluded"
	CodeDeclined    = "declined"
	CodeNotMeasured = "not-measured"

	// Raised when files are read.
	CodeFlagWins       = "flag-wins"
	CodeUnitDoubtful   = "unit-doubtful"
	CodeCommentsDiffer = "comments-differ"
	CodeCutOff         = "cut-off"
	CodeColumnNotUsed  = "column-not-used"
)

// Codes is the register of all codes, each with what it means and what to do
// next.
var Codes = []CodeInfo{
	{CodeOffFamilyThreshold,
		"The threshold or gate bias lies outside the limits of its lot.",
		"Measure the device again; if it stays, keep it out of matched sets and ask where it came from."},
	{CodeOffFamilyGain,
		"The gain factor or transconductance lies outside the limits of its lot, as another die at the same threshold would.",
		"Measure the device again at the idle current and do not pair it with the rest of the lot."},
	{CodeOffFamilyCurve,
		"The shape of the whole transfer curve differs from that of the lot.",
		"Compare the curve with the lot's overlay and measure it again with slower steps."},
	{CodeTwoPopulations,
		"The lot falls into two groups with a gap between them.",
		"Treat the groups as two lots, ask the supplier, and measure every device."},
	{CodeDrainLeakage,
		"Drain current flows at the off voltage: the part is leaky or its gate is not at its off voltage.",
		"Check that the gate really is at its off voltage, then measure again; keep a leaky part out of use."},
	{CodeOpen,
		"No drain current flows anywhere although the gate was driven well up.",
		"Check drain, source and gate leads and the socket; if they are good the part is dead."},
	{CodeShorted,
		"The drain current does not depend on the gate: drain and source are joined.",
		"Check the socket for a short, then discard the part."},
	{CodeWrongWayRound,
		"The body diode conducts: drain and source are exchanged, or the drain supply has the wrong polarity.",
		"Turn the part round or correct the supply, and measure again."},
	{CodeAboveRange,
		"The part does not reach the current within the sweep.",
		"Sweep to a higher gate voltage, within the part's limits, or ask for a smaller current."},
	{CodeFewPoints,
		"There are too few points for this number.",
		"Take more points in the region named."},
	{CodeSubThresholdOnly,
		"The points lie below or at the knee only, where no straight line is to be expected.",
		"Sweep to a higher current, or use the constant-current value."},
	{CodeNotSaturated,
		"The drain voltage is too small against the overdrive for this method at the points named.",
		"Raise the drain supply or use a smaller load resistor."},
	{CodeNotLinear,
		"The overdrive stays below the drain voltage, so that the channel is never the plain resistor that this method needs.",
		"Sweep to a higher gate voltage, or make the drain voltage smaller."},
	{CodeCoarseNearCurrent,
		"The points near the current asked for lie too far apart to interpolate well.",
		"Take steps of 10 mV or less around that gate voltage."},
	{CodeHeating,
		"Up and down sweep, or a point taken again after the sweep, differ by more than their uncertainty: the part warms up, or drifts.",
		"Measure faster, pulsed or with less drain voltage, or improve the cooling."},
	{CodeGateHistory,
		"Up and down sweep differ by more than their uncertainty, and by the same whatever the power, or a point taken again needs more gate voltage than before: the gate remembers where it was (trapped charge), or something changed.",
		"Let the part rest at its off voltage before every sweep, sweep all parts the same way, and repeat the up sweep: hysteresis comes again, a change does not."},
	{CodeHeatingNotChecked,
		"There is no sweep in the other direction, so heating could not be checked.",
		"Sweep down as well as up."},
	{CodeOscillation,
		"The current jumps from point to point as it does when the part oscillates.",
		"Put a resistor or bead at the gate, shorten the leads, decouple the drain, and measure again."},
	{CodeSweepsDisagree,
		"Sweeps of the same device differ by more than their uncertainty; the first up sweep was used.",
		"Find out what changed between the sweeps (contact, temperature, wrong device) and measure again."},
	{CodeSameRows,
		"The same block of readings stands under two names.",
		"Find out which device the readings belong to and exclude the other."},
	{CodeModelMisfit,
		"The equation of the transistor does not describe this curve.",
		"Look at the curve: heating, oscillation or a range error bends it; use the constant-current value."},
	{CodeRangeGlitch,
		"A reading jumps where the meter changed its range, and was left out.",
		"Wait for the meter to settle after a range change, or hold the range."},
	{CodeStuckReading,
		"A reading stands still while the gate moves, and was left out.",
		"Check the meter's connection, hold key and battery, or the limit of the supply."},
	{CodeCurrentMismatch,
		"The measured current and the one from the load resistor disagree.",
		"Check the load resistor's value, its heating and the leads, and the ammeter's fuse and range."},
	{CodePrefixLost,
		"The measured current is a thousand times that of the load resistor, or a thousandth: a unit prefix was lost.",
		"Correct the unit of the current column and import it again."},
	{CodeSpotOnly,
		"The device was read at one or two currents only: no curve, and nothing is known of heating.",
		"Take a sweep when the shape of the curve or other currents matter."},
	{CodeBenchLimited,
		"The meters cannot resolve this number.",
		"Use a finer range or a current of more counts, or state what the sentence names."},
	{CodeNTooSmall,
		"There are too few devices for this statement.",
		"Measure more devices."},
	{CodeManyCrossings,
		"The curve crosses the current more than once.",
		"Look for noise, hysteresis or oscillation around that gate voltage."},
	{CodeBelowSweep,
		"The part already carries more than the current asked for at the first point.",
		"Start the sweep at the off voltage, or ask for a larger current."},
	{CodeOverload,
		"A meter was beyond its range, and the point was left out.",
		"Use a larger range."},
	{CodeMissingReading,
		"A reading is missing, and the point was left out.",
		"Nothing, when the rest of the curve is whole; otherwise measure again."},
	{CodeDecadeSpike,
		"A reading is ten times too large or too small, and was left out.",
		"Nothing, when the rest of the curve is whole; otherwise check the meter's range."},
	{CodeOutOfLine,
		"A reading contradicts its neighbours on a rising curve, and was left out.",
		"Measure again when there are several; look for a loose contact."},
	{CodeSignTurned,
		"The readings carry the opposite sign of the part's current; their magnitudes were used.",
		"Nothing, when the meter's leads were exchanged; otherwise check the channel type."},
	{CodeFallingCurve,
		"The current falls as the gate is driven harder.",
		"Check the channel type and the sign of the gate voltage."},
	{CodeNoCircuit,
		"The circuit is not known, so only constant-current values are given.",
		"Give the circuit: load, diode or fixed."},
	{CodeNoAccuracy,
		"An accuracy statement is missing, so the uncertainty between sessions, the absolute one, or both are not known.",
		"Give the bench file with the meters' accuracy and the tolerance of the load resistor."},
	{CodeRangeEdge,
		"Near the current compared some devices were read on one range of a meter and others on the next: its errors are not common to them and do not cancel.",
		"Hold the meter on the range that takes all of them, and measure those on the other range again."},
	{CodeNotAsked,
		"A number is missing because what it is taken at was not given.",
		"Give the current or the method if the number is wanted."},
	{CodeNotByMethod,
		"The method behind the extrapolated threshold gives no such number.",
		"Choose a method that gives it, with gatesill fit LOT --method curve or ratio."},
	{CodeOffNotRead,
		"The sweep has no reading near the off voltage, or none that shows a leakage, so nothing is known of it.",
		"Begin the sweep at the off voltage if drain leakage matters."},
	{CodeOverdue,
		"A meter's calibration is overdue.",
		"Have the meter calibrated, or compare it with one that is."},
	{CodeUnlikeConditions,
		"The values were taken under unlike conditions.",
		"Compare only values of the same circuit, current, temperature and definition."},
	{CodePartNotNamed,
		"No part is named for a lot that is compared, so that it is not known whether both are of one part.",
		"Name it with gatesill lot edit LOT --part NAME."},
	{CodeLotShape,
		"The device has too few points of its own there, and was read along the median shape of the lot's curves.",
		"Take more points around the current asked for; do not trust the value to show another die."},
	{CodeMethodNotValid,
		"The method asked for has no value in the region that the points cover.",
		"Leave the method to be chosen by the region, or sweep the region that the method needs."},
	{CodeOutsideLimits,
		"The threshold lies outside the limits of the data sheet.",
		"Check that test current and circuit are those of the data sheet, measure again, and apply your own rule for such devices."},
	{CodeTooFewRepeats,
		"Too few devices were put in again to tell how well the bench repeats.",
		"Put ten devices in three times each, in random order: gatesill gauge LOT --rounds 3 writes one."},
	{CodeOrderNotRandom,
		"The devices were measured in the same order every time, so that a drift of the bench looks like a difference of parts, or like repeatability.",
		"Measure in another order in every round: gatesill gauge LOT --rounds 3 writes one."},
	{CodeUnevenRepeats,
		"One device repeats much worse than the others.",
		"Clean its leads, measure it again, and check that it was not mixed up with another."},
	{CodeOperatorsDiffer,
		"Operators or fixtures do not read the same on the same devices.",
		"Find out what they do differently (time of waiting, contact, temperature), or let one of them measure all that is compared."},
	{CodeBenchCoarse,
		"What the bench repeats to is more than a tenth of the spread of the lot.",
		"Measure every device several times, sort into wider bins, or improve contact and temperature."},
	{CodeBenchDrift,
		"Readings of the same devices change along a session.",
		"Let the bench warm up, measure in random order, and put the first device in again at the end."},
	{CodeControlOutside,
		"A control part reads outside the limits that its own earlier readings set.",
		"Measure it again; if it stays, look for what changed on the bench since, before going on with the lot."},
	{CodeControlTrend,
		"The readings of a control part move steadily in one direction.",
		"Look for what ages or warms up: battery, load resistor, socket, the part itself; measure a second control part."},
	{CodeDeviceChanged,
		"A device reads otherwise than at its first date by more than repeatability and what is common to all devices explain.",
		"Check its serial, measure it again; if it stays, the part has changed."},
	{CodeAllShifted,
		"All devices together read otherwise than at their first date.",
		"Compare the temperatures, give the coefficient with --tempco, and measure a control part: it is the bench, not the parts."},
	{CodeCommonUnknown,
		"Lots were compared that were not measured in one session with the same meters, and what that adds to their difference is not known.",
		"Give the meters' accuracy in a bench file, measure some control parts with both lots, or measure both in one session."},
	{CodeOtherSession,
		"Devices are matched that were measured in different sessions: what the devices of a session share, such as the offsets of the meters and the temperature, enters the difference between devices of two sessions.",
		"Measure them in one session, or some parts again with the others, and compare."},
	{CodeExcluded,
		"The device was left out of every statistic by hand.",
		"See why with gatesill device show; gatesill device include lets it count again."},
	{CodeDeclined,
		"There are readings of the device, but no number that may be believed.",
		"Read the reason beside it and measure again."},
	{CodeNotMeasured,
		"No sweep of the device is stored.",
		"Measure it, or import its file."},
	{CodeFlagWins,
		"A condition given by a flag differs from what the file says; the flag was taken.",
		"Look which of the two is right, and import the file again with --again if it was the file."},
	{CodeUnitDoubtful,
		"No bench gives such numbers in the unit that was read.",
		"Check the unit and settle it with --units."},
	{CodeCommentsDiffer,
		"Two comments of the file contradict one another.",
		"Settle the condition with its flag."},
	{CodeCutOff,
		"The file seems to end too early.",
		"Compare its end with the original, and copy it again."},
	{CodeColumnNotUsed,
		"A column was left alone because its unit is of no quantity that is read.",
		"Name its quantity and unit with --map and --units if it is needed."},
}

// Explain finds the entry of a code in [Codes]; false when there is none.
func Explain(code string) (CodeInfo, bool) {
	for _, c := range Codes {
		if c.Code == code {
			return c, true
		}
	}
	return CodeInfo{}, false
}
