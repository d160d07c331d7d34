package compare

import "testing"

func TestTenths(t *testing.T) {
	for x, want := range map[float64]string{-0.04: "0", 0.04: "0", 0.06: "+0.1", -0.06: "-0.1", 12: "+12.0", 0: "0"} {
		if got := tenths(x); got != want {
			t.Errorf("%v: %s, want %s", x, got, want)
		}
	}
}
