package record

import "strings"

// NaturalLess reports whether a stands before b when runs of digits count as
// numbers: D2 before D10. See [NaturalCompare].
func NaturalLess(a, b string) bool { return NaturalCompare(a, b) < 0 }

// NaturalCompare orders names as people count: runs of the digits 0 to 9 are
// compared as whole numbers of any length, everything else byte by byte. Names
// that differ only in leading zeros are told apart by their bytes, so that 0
// comes back for equal names only and every list has one order.
func NaturalCompare(a, b string) int {
	x, y := a, b
	for x != "" && y != "" {
		m, n := scanDigits(x), scanDigits(y)
		if m > 0 && n > 0 {
			if c := compareDigits(x[:m], y[:n]); c != 0 {
				return c
			}
			x, y = x[m:], y[n:]
			continue
		}
		if x[0] != y[0] {
			return int(x[0]) - int(y[0])
		}
		x, y = x[1:], y[1:]
	}
	if len(x) != len(y) { // one is used up
		return len(x) - len(y)
	}
	return strings.Compare(a, b)
}

// compareDigits compares two runs of digits by their value.
func compareDigits(a, b string) int {
	a, b = strings.TrimLeft(a, "0"), strings.TrimLeft(b, "0")
	if len(a) != len(b) {
		return len(a) - len(b)
	}
	return strings.Compare(a, b)
}
