package job

import (
	"math"

	"gatesill/report"
	"gatesill/store/record"
)

// greatestTempco is a slope beyond which a unit was forgotten: gate voltages move
// by -7 to +5 mV/K (common practice, no source).
const greatestTempco = 0.1 // V/K

// checkTempco refuses a slope of the gate voltage that no part has.
func checkTempco(n record.Num) error {
	if t, ok := n.Get(); ok && math.Abs(t) > greatestTempco {
		return Usage("--tempco -4mV/K", "--tempco: %g V/K is more than any gate voltage moves; -4 mV/K is written -4mV/K", t)
	}
	return nil
}

// doubtTempco warns of a slope with the sign that belongs to the other channel.
func (e *Env) doubtTempco(n record.Num, part record.Part) {
	if t, ok := n.Get(); ok && t < 0 && part.Channel == record.PChannel {
		e.warn("gate voltages of a p-channel part are negative and fall in magnitude as it warms up: their slope is above 0, as in --tempco 4mV/K")
	}
}

// A margin, and a guard band, from these on were probably meant in a smaller unit:
// both are tenths of a volt at most (common practice, no source).
const (
	bareVolts = 5.0 // V
	bareGuard = 0.5 // V
)

// doubtMargin warns of a margin of so many volts that its prefix was forgotten.
func (e *Env) doubtMargin(a record.Amount) {
	if a.Unit == "V" && a.Value >= bareVolts {
		e.warn("a margin of %s: a bare number is in volts, 50 mV is written 50mV", report.AmountWords(a))
	}
}

// doubtGuard warns of a guard band of so many volts that its unit was forgotten, and of
// one that leaves no room between the limits of the part.
func (e *Env) doubtGuard(a record.Amount, part record.Part) {
	if a.Unit != "V" {
		return
	}
	if a.Value >= bareGuard {
		e.warn("a guard band of %s: a bare number is in volts, 20 mV is written 20mV, and twice the standard uncertainty 2u", report.AmountWords(a))
	}
	low, ok := part.VgsthMin.Get()
	high, ok2 := part.VgsthMax.Get()
	if window := math.Abs(high - low); ok && ok2 && 2*a.Value > window {
		e.warn("a guard band of %s at either limit leaves no room between them, which are %s apart: no device can pass", report.AmountWords(a), report.FormatGiven(window, "V"))
	}
}
