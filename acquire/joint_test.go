package acquire

import (
	"math"
	"testing"

	"gatesill/store/record"
)

func TestJoint(t *testing.T) {
	says := func(at float64, role string, v float64) record.Reading {
		return record.Reading{At: at, Role: role, Value: record.Known(v), Digit: record.Known(1e-3)}
	}
	over := record.Reading{At: 7, Role: Current, State: record.Overload, Raw: []byte("3.1 OL")}
	held := says(9, Gate, 3.2)
	held.Refused = "held"
	ps := Joint([]record.Reading{says(1, Gate, 3), says(1, Current, 0.01), says(7, Gate, 3.1), over, held})
	if len(ps) != 2 {
		t.Fatalf("%d points, want 2: %+v", len(ps), ps)
	}
	a, b := ps[0], ps[1]
	if a.Vg != 3 || a.Id != 0.01 || !a.Settled || a.Bound != 0 || a.N != 1 || a.At != 1 {
		t.Errorf("%+v", a)
	}
	if b.Vg != 3.1 || !math.IsNaN(b.Id) || len(b.Marks) != 1 || b.Marks[0].State != record.Overload || b.Marks[0].Raw != "3.1 OL" {
		t.Errorf("%+v", b)
	}
}
