package record

import "fmt"

// SetState says what became of a set.
type SetState string

// The states of a set. A device is in one set at most that is not released, and a
// released set does not come back.
const (
	Reserved SetState = "reserved"
	Used     SetState = "used" // built into a unit
	Released SetState = "released"
)

// Set is devices that belong together and are given out to nobody else.
type Set struct {
	ID     string // UUIDv7
	Number int    // counts in its store, from 1; 0: still to be given
	Name   string // "": S and the number
	State  SetState
	Unit   string // what it is for, or was built into
	Reason string // of its state

	// What it was matched by, and what its devices had then.
	At             Num         // A, current of one device at which its first criterion was read: the idle current, or that of V_GS(th)
	SourceResistor Num         // ohm, of each device
	By             []Criterion // the first leads
	Spread         Num         // V, greatest less least of the first criterion
	Members        []SetMember
	CreatedAt      string
	CreatedBy      string // filled by queries
}

// Criterion is one quantity that a set was matched by.
type Criterion struct {
	Quantity string `json:"quantity"` // as in the keys of estimates, or curve_V
	Within   Num    `json:"within"`   // V, or for gains a share; unknown: no limit
	Weight   Num    `json:"weight"`   // unknown: only a limit
}

// SetMember is a device of a set.
type SetMember struct {
	DeviceID string
	Device   string           // its name; filled by queries
	LotID    string           // filled by queries
	Lot      string           // name of its lot; filled by queries
	Readings map[string]Value // by quantity, as they were when the set was made
}

// Validate says what is wrong with the set, wrapping [ErrInvalid].
func (s *Set) Validate() error {
	if err := CheckName("set", s.Name); err != nil {
		return err
	}
	noun := fmt.Sprintf("set %q", s.Name)
	switch s.State {
	case Reserved, Used, Released:
	default:
		return fmt.Errorf("%s: state %q is none of reserved, used, released: %w", noun, s.State, ErrInvalid)
	}
	if s.State == Used && s.Unit == "" {
		return fmt.Errorf("%s: used, but in no unit: %w", noun, ErrInvalid)
	}
	if s.State == Released && s.Reason == "" {
		return fmt.Errorf("%s: released without a reason: %w", noun, ErrInvalid)
	}
	if s.Number < 1 {
		return fmt.Errorf("%s: number %d, must count from 1: %w", noun, s.Number, ErrInvalid)
	}
	if len(s.Members) < 2 {
		return fmt.Errorf("%s: %d devices, must be two at least: %w", noun, len(s.Members), ErrInvalid)
	}
	seen := map[string]bool{}
	for _, m := range s.Members {
		if seen[m.DeviceID] {
			return fmt.Errorf("%s: device %q twice: %w", noun, m.Device, ErrInvalid)
		}
		seen[m.DeviceID] = true
	}
	if x, ok := s.At.Get(); ok && x <= 0 {
		return fmt.Errorf("%s: current is %g, must be above 0: %w", noun, x, ErrInvalid)
	}
	return nil
}
