package fit

import (
	"fmt"
	"strings"
	"testing"
)

// The words hold the numbers, and the slope of the threshold in the budget lies within.
func TestUsualSlope(t *testing.T) {
	if want := fmt.Sprintf("-%g to -%g mV/K (", UsualSlopeLow*1e3, UsualSlopeHigh*1e3); !strings.HasPrefix(UsualSlope, want) {
		t.Errorf("%s, want %s", UsualSlope, want)
	}
	if !(UsualSlopeLow < kappa && kappa < UsualSlopeHigh) {
		t.Errorf("%v V/K", kappa)
	}
}
