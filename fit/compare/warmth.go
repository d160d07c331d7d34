package compare

import (
	"fmt"
	"math"
)

// What a correction for temperature is uncertain by.
const (
	// SlopeShare is the standard uncertainty of a slope of the gate voltage as a share
	// of it, where none is given: parts of one type, and currents near the one that the
	// slope was found at, spread by so much (typical, common practice, no source).
	SlopeShare = 0.2
	// tempKelvin is the standard uncertainty of a temperature that was recorded, K: a
	// part lies on a bench near what a thermometer says (typical, common practice, no
	// source), as in the budget of a gate voltage.
	tempKelvin = 1.0
	// Apart is by how much lots may differ in temperature without a correction: some
	// ten millivolts at the usual slopes (common practice, no source).
	Apart = 5.0 // K
)

// slopeU is the standard uncertainty of the slope, V/K.
func (opt *Options) slopeU() float64 {
	if opt.TempcoU > 0 {
		return opt.TempcoU
	}
	return SlopeShare * math.Abs(opt.Tempco)
}

// tempU is the standard uncertainty of what is taken off for a lot that is warmer by
// that many kelvin:
//
//	√((warmer u(slope))² + 2 (slope u(T))²)
//
// the second only where own: temperatures read in one session have one thermometer,
// and where the uncertainty of the readings from one session to another is known, it
// holds what they are uncertain by. Checked: TestTempU.
func (opt *Options) tempU(warmer float64, own bool) float64 {
	u := warmer * opt.slopeU()
	if own {
		u = math.Hypot(u, math.Sqrt2*opt.Tempco*tempKelvin)
	}
	return math.Abs(u)
}

// tempUWords says what the correction is uncertain by and where that comes from.
func (c *comparing) tempUWords() string {
	if !(c.out.TempU > 0) {
		return ""
	}
	slope := fmt.Sprintf("%.0f %% of the slope, typical", 100*SlopeShare)
	if c.opt.TempcoU > 0 {
		slope = fmt.Sprintf("%.3g mV/K of the slope, as given", c.opt.TempcoU*1e3)
	}
	if !c.tempHeld {
		slope += fmt.Sprintf(", and %g K of either temperature", tempKelvin)
	}
	return fmt.Sprintf("; uncertain by %s: %s", millivolts(c.out.TempU), slope)
}
