package record

import (
	"slices"
	"testing"
)

func TestNaturalCompare(t *testing.T) {
	order := []string{
		"", "0", "01", "1", "2", "10", "99999999999999999999998", "99999999999999999999999",
		"A1-2", "A1-10", "A2", "D", "D1", "D2", "D2a", "D2b", "D010", "D10", "D10a", "D0010b", "Da", "d1", "Ü1", "Ü2",
	}
	for i, a := range order {
		for k, b := range order {
			got := NaturalCompare(a, b)
			if (got < 0) != (i < k) || (got == 0) != (i == k) || NaturalLess(a, b) != (i < k) {
				t.Errorf("NaturalCompare(%q, %q) = %d; places %d and %d", a, b, got, i, k)
			}
		}
	}
}

// FuzzNaturalCompare checks that three names always have one order.
func FuzzNaturalCompare(f *testing.F) {
	f.Add("D2", "D10", "D010")
	f.Add("a1b", "a01b", "a1")
	f.Fuzz(func(t *testing.T, a, b, c string) {
		if (NaturalCompare(a, b) == 0) != (a == b) {
			t.Errorf("%q and %q: equal for one only", a, b)
		}
		if NaturalCompare(a, b) < 0 != (NaturalCompare(b, a) > 0) {
			t.Errorf("%q and %q: both before each other", a, b)
		}
		names := []string{a, b, c}
		slices.SortFunc(names, NaturalCompare)
		if NaturalCompare(names[0], names[2]) > 0 {
			t.Errorf("%q: first after last", names)
		}
	})
}
