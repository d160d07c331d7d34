// Package meter turns what multimeters send into readings: frames of handheld
// chips, replies of SCPI instruments, lines of text. Its functions are pure: bytes
// in, readings out.
//
// It opens no line, keeps no time and trusts no frame: what is held, relative,
// a minimum or a maximum, or in the wrong unit, is decoded, and refused with a
// reason.
package meter

import (
	"errors"
	"fmt"

	"gatesill/store/record"
)

// ErrFrame is wrapped by every error about a frame that cannot be read.
var ErrFrame = errors.New("bad frame")

// Reading is what a meter said once.
type Reading struct {
	Column int     // column of a line or reply with several values, from 1; 1 otherwise
	Value  float64 // SI unit; NaN when State says why there is no number
	Unit   string  // SI unit: "V", "A", "ohm", "Hz", "F", "degC", "%"; "" not said
	State  record.PointState
	Digit  float64 // one count of the display, SI unit; 0 not known

	AC, DC, Auto                      bool
	Hold, Relative, Min, Max, LowBatt bool
	Test                              string // "diode", "continuity": the meter feeds the part itself; "" it measures
}

// Refusal says in a few words why the reading cannot stand for a quantity in that
// SI unit, or "" when it can. A reading whose unit was not said is taken to be in
// the unit wanted, and unit "" takes every unit. A low battery refuses nothing.
func (r Reading) Refusal(unit string) string {
	switch {
	case unit != "" && r.Unit != "" && r.Unit != unit:
		return "wrong unit: " + r.Unit + ", wanted " + unit
	case r.Test != "":
		return r.Test + " test"
	case r.AC:
		return "AC"
	case r.Hold:
		return "held"
	case r.Relative:
		return "relative"
	case r.Min:
		return "minimum"
	case r.Max:
		return "maximum"
	}
	return ""
}

// Decoder finds frames in a stream of bytes.
type Decoder interface {
	// Scan looks at buf, which begins where the last frame ended. It returns how
	// many bytes to skip as garbage before the frame, the length of the frame
	// (0: no whole frame yet, call again with more), its readings, and an error
	// wrapping [ErrFrame] for a frame of the right shape that cannot be read.
	// With quiet, nothing has come for several bytes' time, so that what is
	// there will not be continued. buf is not modified or kept.
	Scan(buf []byte, quiet bool) (skip, length int, readings []Reading, err error)
}

// Options of a decoder, as the bench file gives them.
type Options struct {
	Unit      string // of text columns without a unit, by column joined with commas
	Separator string // of text columns; "" any of comma, semicolon, tab, blanks
	Decimal   string // "point" or "comma"; "" point
	Question  string // what is sent for a reading, so that its echo is dropped; "" nothing is sent
}

// Format is one way in which meters speak.
type Format struct {
	Name     string // as in the bench file: "fs9721"
	Text     string // one line for people
	Settings string // usual line settings, "2400 8N1"; "" any
	Bits     int    // data bits that count: 7 when the top bit is not part of the format
	Ask      string // what is sent for a reading; "" it speaks by itself
	Length   int    // bytes of a frame; 0 varies
	Twice    bool   // every frame is sent twice per conversion
	Lines    bool   // frames are lines: questions end with LF, and a line whose beginning was missed looks whole
	New      func(Options) (Decoder, error)
}

// bad is an error about a frame; its text is printable whatever the frame held.
func bad(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrFrame}, args...)...)
}
