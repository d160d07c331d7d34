package acquire

import (
	"testing"

	"gatesill/store/record"
)

// TestPrefixBelowLeastLoad: 133 uA through 15 ohm is 2 mV, too little to tell a
// current by, but enough to contradict 140 mA.
func TestPrefixBelowLeastLoad(t *testing.T) {
	c := NewPrefixCheck(record.Condition{Circuit: record.Load, RL: record.Known(15), VDD: record.Known(13.8)})
	for _, x := range []struct {
		id, vl float64
		refuse bool
	}{
		{0.140, 0.002, true},     // shown as A
		{133e-6, 0.002, false},   // right
		{200e-6, 0.002, false},   // one count of V_L is 0.07 mA
		{133e-6, 0, false},       // below its display
		{0.020, 0, true},         // 20 uA shown as mA: 0.3 mV, below the display of the load meter
		{0.140, 0, false},        // no prefix explains that: a lead is off
		{0.0005, 0.010, false},   // 25 % low, below what is judged
		{0.000133e6, 2e-3, true}, // shown a million times too great
	} {
		p := NewPoint(0)
		p.Id, p.Vl = x.id, x.vl
		if v := c.Look(p, 1e-6); v.Refuse != x.refuse {
			t.Errorf("%g A with %g V across the load: refused %v, %q", x.id, x.vl, v.Refuse, v.Text)
		}
	}
}
