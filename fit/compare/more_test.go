package compare

import "testing"

// Without a common error the number is the one that a plan gives for the same margin
// and spread (testdata/cli/plan.txt); a common error only ever asks for more.
func TestEnoughIsThatOfAPlan(t *testing.T) {
	if n := enough(0.05, 0.08, 2, 0); n != 52 {
		t.Errorf("%d of either lot, a plan says 52", n)
	}
	if n := enough(0.05, 0.08, 2, 0.005); n <= 52 {
		t.Errorf("%d with a common error, want more than 52", n)
	}
	if n := enough(0.05, 0.001, 2, 0); n != fewest {
		t.Errorf("%d, want %d", n, fewest)
	}
	if n := enough(1e-5, 0.08, 2, 0); n != 0 {
		t.Errorf("%d, want none", n)
	}
}
