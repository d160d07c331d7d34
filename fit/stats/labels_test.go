package stats

import (
	"math"
	"testing"
)

// Counted out by hand: with 3 of 12 items in the lower group, all of one label of
// three, one way in C(12,3) = 220 agrees as well. With 2 and 2 of 4, parted as
// labelled, 2 of 6 ways. Three labels of two items each, lower group of two: both of
// one label in 3 of 15 ways. Fisher's tasting of eight cups, three of four right: 34
// of 70 ways are as far off on either side.
func TestLabelAgreement(t *testing.T) {
	for _, c := range []struct {
		low, high []int
		want      float64
	}{
		{[]int{3, 0}, []int{0, 9}, 1.0 / 220},
		{[]int{2, 0}, []int{0, 2}, 2.0 / 6},
		{[]int{2, 0, 0}, []int{0, 2, 2}, 3.0 / 15},
		{[]int{1, 1, 0}, []int{1, 1, 2}, 1},
		{[]int{3, 1}, []int{1, 3}, 34.0 / 70},
		{[]int{17, 0}, []int{0, 8}, 1.0 / 1081575},
		{[]int{8, 0}, []int{0, 17}, 1.0 / 1081575}, // C(25,8)
		{[]int{3, 0, 0}, []int{0, 9, 0}, 1.0 / 220},
	} {
		if got := LabelAgreement(c.low, c.high); math.Abs(got/c.want-1) > 1e-12 {
			t.Errorf("%v against %v: %v, want %v", c.low, c.high, got, c.want)
		}
	}
	for _, c := range [][2][]int{{{3}, {9}}, {{0, 0}, {3, 9}}, {{3, 1}, {0, 0}}, {{3, -1}, {4, 4}}, {{3}, {4, 4}}, {nil, nil}} {
		if got := LabelAgreement(c[0], c[1]); !math.IsNaN(got) {
			t.Errorf("%v against %v: %v, want none", c[0], c[1], got)
		}
	}
}

// Where counting ends the chi-square test goes on in the same way.
func TestLabelAgreementOfMany(t *testing.T) {
	low, high := []int{70, 50}, []int{75, 105}
	if a, b := countedOut(low, high, 120), independence(low, high, 120, 300); !(a > 0.8*b && a < 2*b) {
		t.Errorf("300 items counted out %v, by chi-square %v", a, b) // the latter without correction for steps
	}
	if p := LabelAgreement([]int{400, 1, 0}, []int{0, 600, 2}); !(p < 1e-100) {
		t.Errorf("labels that agree: %v", p)
	}
	if p := LabelAgreement([]int{800, 0}, []int{0, 1600}); !(p < 1e-100) {
		t.Errorf("labels that agree: %v", p)
	}
	if p := LabelAgreement([]int{400}, []int{600}); !math.IsNaN(p) {
		t.Errorf("one label: %v", p)
	}
}
