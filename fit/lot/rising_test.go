package lot

import (
	"math"
	"testing"

	"gatesill/fit"
)

// A sweep that ended early has a smaller largest transconductance than the
// others for that reason only.
func TestShortSweepIsNoOddGain(t *testing.T) {
	lot := func(rising bool) Spread {
		var devs []Device
		for i := range 30 {
			v := 1 + 0.01*math.Sin(float64(7*i))
			if i == 4 {
				v = 0.6
			}
			d := measured(deviceName(i), map[fit.Key]float64{fit.KeyVgsth: 3 + 0.05*math.Sin(float64(5*i)), fit.KeyGmMax: v}, 1e-3)
			d.Result.GmRising = i == 4 && rising
			devs = append(devs, d)
		}
		return SpreadOf(devs, SpreadOptions{})
	}
	if v := lot(true).Devices[4]; v.Flagged {
		t.Errorf("flagged: %+v", v.Reasons)
	}
	if v := lot(false).Devices[4]; !v.Flagged {
		t.Error("a gain 40 % low is not flagged")
	}
}
