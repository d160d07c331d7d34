// Package record holds the things that are kept: part, lot, package, device,
// session, sweep, reading, estimate, and the audit trail of changes. It knows
// how they are checked and how a number with an SI prefix is read.
//
// It opens nothing, stores nothing and computes no results; it imports only the
// standard library, so that every other package can share its types. All
// numbers are in SI base units; [Num] marks those that may be unknown.
package record

import (
	"errors"
	"fmt"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"
)

// ErrInvalid is wrapped by every error of a Validate method and of the parsers
// in this package.
var ErrInvalid = errors.New("not valid")

// Channel is the polarity of a part.
type Channel string

// The channels.
const (
	NChannel Channel = "n"
	PChannel Channel = "p"
)

// Mode says whether a part conducts at zero gate voltage.
type Mode string

// The modes (IEC 60747-8:2010 types C and B).
const (
	Enhancement Mode = "enhancement"
	Depletion   Mode = "depletion"
)

// Circuit is how the drain was fed while a sweep was taken.
type Circuit string

// The circuits. NoCircuit means that it was not given.
const (
	NoCircuit Circuit = ""
	Load      Circuit = "load"  // drain fed through R_L from V_DD
	Diode     Circuit = "diode" // drain tied to gate
	Fixed     Circuit = "fixed" // V_DS held
)

// Direction is the way the gate voltage went during a sweep.
type Direction string

// The directions. A Spot is a curve of one point (or two) from a one-resistor
// jig.
const (
	Up   Direction = "up"
	Down Direction = "down"
	Spot Direction = "spot"
)

// Role says what a device is kept for.
type Role string

// The roles. A Control part is measured again and again to see the bench
// drift; it takes no part in the statistics of its lot.
const (
	Sample  Role = "sample"
	Control Role = "control"
)

// Now gives the present time as it is stored: UTC, RFC 3339, milliseconds.
func Now() string { return Stamp(time.Now()) }

// Stamp gives t as it is stored: UTC, RFC 3339, milliseconds.
func Stamp(t time.Time) string { return t.UTC().Format("2006-01-02T15:04:05.000Z") }

// MaxName is the longest name of a lot, part, package or device, in bytes.
const MaxName = 200

// CheckName says why name cannot name a lot, part, package or device: it is
// empty, longer than [MaxName] bytes, not UTF-8, starts or ends with a blank,
// or has a control character. Anything else is data and may be a name, formulas
// and path-like texts included; it is never used as a path.
func CheckName(what, name string) error {
	switch {
	case name == "":
		return fmt.Errorf("%s name is empty: %w", what, ErrInvalid)
	case len(name) > MaxName:
		return fmt.Errorf("%s name is %d bytes long, at most %d: %w", what, len(name), MaxName, ErrInvalid)
	case !utf8.ValidString(name):
		return fmt.Errorf("%s name %q is not UTF-8: %w", what, name, ErrInvalid)
	case strings.TrimSpace(name) != name:
		return fmt.Errorf("%s name %q starts or ends with a blank: %w", what, name, ErrInvalid)
	}
	for _, r := range name {
		if unicode.IsControl(r) || r == '\u2028' || r == '\u2029' || unicode.Is(unicode.Cf, r) {
			return fmt.Errorf("%s name %q has the control character %U: %w", what, name, r, ErrInvalid)
		}
	}
	return nil
}
