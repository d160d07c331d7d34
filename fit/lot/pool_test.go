package lot

import (
	"math"
	"testing"

	"gatesill/fit"
)

func TestPool(t *testing.T) {
	spread := func(populations, n int, sd float64) Spread {
		return Spread{Populations: populations, Summary: map[fit.Key]Summary{fit.KeyVgsth: {N: n, RobustSD: sd}}}
	}
	if k := Pool([]Spread{spread(1, 7, 0.05), spread(2, 30, 0.05), spread(1, 30, 0)}); k != nil {
		t.Errorf("pooled %+v from nothing", k)
	}
	curved := spread(1, 11, 0.06)
	curved.Further = map[fit.Key]Summary{CurveKey(0.5): {N: 9, RobustSD: 0.002}, KeySpan: {N: 3, RobustSD: 1}}
	k := Pool([]Spread{spread(1, 21, 0.03), curved, spread(1, 7, 9), spread(2, 90, 9)})
	want := math.Sqrt((20*0.03*0.03 + 10*0.06*0.06) / 30)
	if k == nil || k.Lots != 2 || k.Devices != 32 || math.Abs(k.RobustSD[fit.KeyVgsth]-want) > 1e-15 {
		t.Errorf("%+v, want 2 lots, 32 devices, sd %g", k, want)
	}
	if at := CurveKey(0.5); at != "curve_at_0.5A_V" || k.RobustSD[at] != 0.002 || k.devices(at) != 9 || k.devices(fit.KeyVgsth) != 32 || k.devices(KeySpan) != 32 {
		t.Errorf("%s: %+v", at, k)
	}
}
