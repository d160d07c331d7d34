package record

import (
	"fmt"
	"math"
	"slices"
	"time"
)

// CheckStamp says why text is no time as [Stamp] writes it: UTC, RFC 3339, with
// any number of decimals of a second. The empty text is refused too.
func CheckStamp(what, text string) error {
	t, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		return fmt.Errorf("%s %q is no time in RFC 3339: %w", what, text, ErrInvalid)
	}
	if _, offset := t.Zone(); offset != 0 || text[len(text)-1] != 'Z' {
		return fmt.Errorf("%s %q is not in UTC: %w", what, text, ErrInvalid)
	}
	return nil
}

// CheckStampOrDate is [CheckStamp] that also takes a bare date, YYYY-MM-DD, and
// the empty text for not known.
func CheckStampOrDate(what, text string) error {
	if text == "" {
		return nil
	}
	if _, err := time.Parse(time.DateOnly, text); err == nil {
		return nil
	}
	return CheckStamp(what, text)
}

// Validate says what is wrong with the condition, wrapping [ErrInvalid].
func (c Condition) Validate() error {
	for _, f := range []struct {
		name, text string
		allowed    []string
	}{
		{"circuit", string(c.Circuit), []string{string(NoCircuit), string(Load), string(Diode), string(Fixed)}},
		{"ammeter place", c.Ammeter, []string{"", "drain", "source", "none"}},
		{"gate return", c.GateReturn, []string{"", "source", "ground"}},
		{"pulsed", c.Pulsed, []string{"", "dc", "pulsed"}},
		{"temperature of", c.TempOf, []string{"", "ambient", "sink", "case"}},
	} {
		if !slices.Contains(f.allowed, f.text) {
			return fmt.Errorf("%s is %q, must be one of %q: %w", f.name, f.text, f.allowed, ErrInvalid)
		}
	}
	if r, ok := c.RL.Get(); ok && r <= 0 {
		return fmt.Errorf("R_L is %g ohm, must be above 0: %w", r, ErrInvalid)
	}
	if d, ok := c.PulseDuty.Get(); ok && (d <= 0 || d > 1) {
		return fmt.Errorf("pulse duty is %g, must be a fraction above 0 and at most 1: %w", d, ErrInvalid)
	}
	for _, f := range []struct {
		name string
		n    Num
	}{
		{"R_L tolerance", c.RLTol}, {"R_L rating", c.RLRating}, {"ammeter burden", c.Burden},
		{"pulse width", c.PulseWidth}, {"pulse delay", c.PulseDelay}, {"dwell", c.Dwell},
	} {
		if x, ok := f.n.Get(); ok && x < 0 {
			return fmt.Errorf("%s is %g, must not be negative: %w", f.name, x, ErrInvalid)
		}
	}
	return nil
}

// Validate says what is wrong with the sweep as it is to be kept, wrapping
// [ErrInvalid]. It does not compare [Column.Text] with [Column.Values].
func (s *Sweep) Validate() error {
	if err := s.ValidateStart(); err != nil {
		return err
	}
	return s.validateData()
}

// ValidateStart is [Sweep.Validate] for a sweep whose points are still to come.
func (s *Sweep) ValidateStart() error {
	switch s.Direction {
	case Up, Down, Spot:
	default:
		return fmt.Errorf("direction %q is none of up, down, spot: %w", s.Direction, ErrInvalid)
	}
	if s.Position < 1 {
		return fmt.Errorf("position %d, must count from 1: %w", s.Position, ErrInvalid)
	}
	if err := CheckStampOrDate("time of measuring", s.MeasuredAt); err != nil {
		return err
	}
	return s.Condition.Validate()
}

// validateData checks columns, marks and source lines against each other.
func (s *Sweep) validateData() error {
	if s.Len() == 0 {
		return fmt.Errorf("no points: %w", ErrInvalid)
	}
	for i, c := range s.Columns {
		if !slices.Contains(Quantities, c.Quantity) {
			return fmt.Errorf("unknown column %q: %w", c.Quantity, ErrInvalid)
		}
		if s.Column(c.Quantity) != &s.Columns[i] {
			return fmt.Errorf("column %s twice: %w", c.Quantity, ErrInvalid)
		}
		if len(c.Values) != s.Len() {
			return fmt.Errorf("column %s has %d points, %s has %d: %w",
				c.Quantity, len(c.Values), s.Columns[0].Quantity, s.Len(), ErrInvalid)
		}
		for k, x := range c.Values {
			if math.IsInf(x, 0) {
				return fmt.Errorf("column %s, point %d is infinite: %w", c.Quantity, k, ErrInvalid)
			}
		}
	}
	for _, m := range s.Marks {
		if err := s.validateMark(m); err != nil {
			return err
		}
	}
	for _, r := range s.Lines {
		if r.Point < 0 || r.Count < 1 || r.Line < 1 || r.Point+r.Count > s.Len() {
			return fmt.Errorf("source lines %+v lie outside of the %d points: %w", r, s.Len(), ErrInvalid)
		}
	}
	return nil
}

func (s *Sweep) validateMark(m Mark) error {
	switch m.State {
	case Overload, Underload, Missing:
	default:
		return fmt.Errorf("point %d: state %q is none of overload, underload, missing: %w", m.Index, m.State, ErrInvalid)
	}
	if m.Index < 0 || m.Index >= s.Len() {
		return fmt.Errorf("mark at point %d of %d: %w", m.Index, s.Len(), ErrInvalid)
	}
	c := s.Column(m.Quantity)
	if c == nil {
		return fmt.Errorf("mark in column %q, which the sweep does not have: %w", m.Quantity, ErrInvalid)
	}
	if x := c.Values[m.Index]; !math.IsNaN(x) {
		return fmt.Errorf("point %d of %s is %g and %s at once: %w", m.Index, m.Quantity, x, m.State, ErrInvalid)
	}
	return nil
}

// Validate says what is wrong with the session, wrapping [ErrInvalid].
func (s Session) Validate() error {
	if err := CheckStampOrDate("start of session", s.StartedAt); err != nil {
		return fmt.Errorf("session %q: %w", s.Name, err)
	}
	return nil
}

// Validate says what is wrong with the reading, wrapping [ErrInvalid].
func (r Reading) Validate() error {
	switch r.State {
	case "", Overload, Underload, Missing:
	default:
		return fmt.Errorf("reading of %s: state %q is none of overload, underload, missing: %w", r.Meter, r.State, ErrInvalid)
	}
	if r.Value.IsKnown() != (r.State == "") {
		return fmt.Errorf("reading of %s: value %q and state %q do not go together: %w", r.Meter, r.Value, r.State, ErrInvalid)
	}
	if math.IsNaN(r.At) || math.IsInf(r.At, 0) {
		return fmt.Errorf("reading of %s: elapsed time is not a number: %w", r.Meter, ErrInvalid)
	}
	return nil
}
