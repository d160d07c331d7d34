package record

import (
	"database/sql/driver"
	"encoding/json"
	"fmt"
	"math"
	"strconv"
)

// Num is a number that may be unknown. Its zero value is unknown, so a field
// that nobody filled never passes for 0. A known Num is always finite.
type Num struct {
	x     float64
	known bool
}

// Known returns x as a known number, or the unknown Num when x is not finite.
func Known(x float64) Num {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return Num{}
	}
	return Num{x: x, known: true}
}

// Get returns the number and whether it is known.
func (n Num) Get() (float64, bool) { return n.x, n.known }

// IsKnown reports whether the number is known.
func (n Num) IsKnown() bool { return n.known }

// Float returns the number, or NaN when it is unknown.
func (n Num) Float() float64 {
	if !n.known {
		return math.NaN()
	}
	return n.x
}

// Or returns the number, or other when it is unknown.
func (n Num) Or(other float64) float64 {
	if !n.known {
		return other
	}
	return n.x
}

// Else returns n when it is known, otherwise other.
func (n Num) Else(other Num) Num {
	if n.known {
		return n
	}
	return other
}

// String gives the shortest decimal that reads back as the same number, or the
// empty text when it is unknown.
func (n Num) String() string {
	if !n.known {
		return ""
	}
	return strconv.FormatFloat(n.x, 'g', -1, 64)
}

// MarshalJSON writes null for an unknown number.
func (n Num) MarshalJSON() ([]byte, error) {
	if !n.known {
		return []byte("null"), nil
	}
	return json.Marshal(n.x)
}

// UnmarshalJSON reads null as unknown.
func (n *Num) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = Num{}
		return nil
	}
	var x float64
	if err := json.Unmarshal(b, &x); err != nil {
		return err
	}
	*n = Known(x)
	return nil
}

// Value gives a database driver NULL for an unknown number.
func (n Num) Value() (driver.Value, error) {
	if !n.known {
		return nil, nil
	}
	return n.x, nil
}

// Scan reads NULL as unknown, and any SQL number or decimal text.
func (n *Num) Scan(src any) error {
	switch v := src.(type) {
	case nil:
		*n = Num{}
	case float64:
		*n = Known(v)
	case int64:
		*n = Known(float64(v))
	case string:
		x, err := strconv.ParseFloat(v, 64)
		if err != nil {
			return fmt.Errorf("number %q: %w", v, err)
		}
		*n = Known(x)
	case []byte:
		return n.Scan(string(v))
	default:
		return fmt.Errorf("number from %T", src)
	}
	return nil
}
