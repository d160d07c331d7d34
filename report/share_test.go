package report

import "testing"

// A share that is not all is never written as 100 %.
func TestShare(t *testing.T) {
	for x, want := range map[float64]string{1: "100 %", 0.99: "99 %", 0.999: "99.9 %", 0.9994: "99.9 %", 0.9996: "99.96 %", 0.999999: "99.9999 %", 1 - 1e-15: "more than 99.9999999 %", 0.0123456: "1.23 %", 0: "0 %"} {
		if got := share(x); got != want {
			t.Errorf("%v: %s, want %s", x, got, want)
		}
	}
}
