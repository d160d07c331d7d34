package lot

import (
	"fmt"
	"math"
	"testing"

	"gatesill/fit"
)

func TestNiceWidth(t *testing.T) {
	devices := func(u float64, values ...float64) []Device {
		out := make([]Device, len(values))
		for i, v := range values {
			r := fit.NewResult()
			r.State = fit.Measured
			r.Vgsth = fit.Quantity{Value: v, U: u, UBetween: math.NaN(), UAbsolute: math.NaN(), N: 5}
			out[i] = Device{Name: fmt.Sprint("D", i), Result: r}
		}
		return out
	}
	check := func(want float64, devs []Device) {
		t.Helper()
		if got := NiceWidth(devs, fit.KeyVgsth); math.Abs(got-want) > 1e-12 {
			t.Errorf("width %g, want %g", got, want)
		}
	}
	check(0.05, nil)
	check(0.05, devices(0.001, 3))
	check(0.005, devices(0.001, 3, 3, 3))      // all alike: 4u = 4 mV leads
	check(0.05, devices(0.001, 3, 3.3))        // 0.3 V over six bins
	check(0.1, devices(0.001, 3, 3.31))        // just above: the next step
	check(0.2, devices(0.04, 3, 3.1, 3.2))     // 4u = 0.16 V leads
	check(0.005, devices(math.NaN(), 3, 3.03)) // no u known
}
