package lot

import (
	"math"
	"math/rand/v2"
	"testing"

	"gatesill/fit"
)

func TestGateSpan(t *testing.T) {
	var devs []Device
	for i, v := range ten {
		devs = append(devs, measured(deviceName(i), map[fit.Key]float64{fit.KeyVgsth: v, fit.KeyVgsIdle: v + 0.300 + 0.003*float64(i%4)}, 0.0005))
	}
	devs[6].Result.VgsIdle.Value = devs[6].Result.Vgsth.Value + 0.440 // half the gain: √2 times the span
	s := SpreadOf(devs, SpreadOptions{})
	if got := flagged(s); got != "D7(off-family-gain)" {
		t.Errorf("flagged %q, want D7 by gain", got)
	}
	if _, ok := s.Limits[KeySpan]; !ok || len(s.Limits) != 2 {
		t.Errorf("limits %v", s.Limits)
	}
	t.Log(reasons(s.Devices[6]))
}

func TestGainFactorsOfTwoMethods(t *testing.T) {
	var devs []Device
	for i := range 30 {
		beta := 2 + 0.05*math.Sin(float64(3*i))
		d := measured(deviceName(i), map[fit.Key]float64{fit.KeyVgsth: 3 + 0.05*math.Sin(float64(5*i)), fit.KeyBeta: beta, fit.KeyGmIdle: math.Sqrt(beta / 2)}, 1e-3)
		d.Result.Method = "sqrt"
		if i%4 == 0 {
			d.Result.Method = "ratio"
			d.Result.Beta.Value *= 1.3
		}
		devs = append(devs, d)
	}
	if s := SpreadOf(devs, SpreadOptions{}); s.Populations != 1 || flagged(s) != "" || s.Limits[fit.KeyBeta].K == 0 {
		t.Errorf("%d populations, flagged %q, limits %+v", s.Populations, flagged(s), s.Limits)
	}
	devs[1].Result.Beta.Value = 1.3
	if got := flagged(SpreadOf(devs, SpreadOptions{})); got != "D2(off-family-gain)" {
		t.Errorf("flagged %q, want D2", got)
	}
	for i := range devs { // said to be of one method, the two are two populations
		devs[i].Result.Method = "sqrt"
	}
	if s := SpreadOf(devs, SpreadOptions{}); s.Populations != 2 {
		t.Errorf("%d populations", s.Populations)
	}
}

func die(rng *rand.Rand, name string, spread, times float64) Device {
	const test, idle, top = 1e-3, 0.25, 2.0
	vt := 3 + 0.06*rng.NormFloat64()
	beta := 2 * times * math.Exp(spread*rng.NormFloat64())
	noise := func(u float64) float64 { return u * rng.NormFloat64() }
	d := measured(name, map[fit.Key]float64{
		fit.KeyVgsth:   vt + math.Sqrt(2*test/beta) + noise(0.0005),
		fit.KeyVgsIdle: vt + math.Sqrt(2*idle/beta) + noise(0.0005),
	}, 0.0005)
	for k, v := range map[fit.Key]float64{fit.KeyBeta: beta, fit.KeyGmIdle: math.Sqrt(2 * beta * idle), fit.KeyGmMax: math.Sqrt(2 * beta * top)} {
		// Map order is random: noise must not depend on it.
		d.Result.At(k).Value, d.Result.At(k).U = v, 0.005*v
	}
	d.Result.Beta.Value *= 1 + noise(0.005)
	d.Result.GmIdle.Value *= 1 + noise(0.005)
	d.Result.GmMax.Value *= 1 + noise(0.005)
	return d
}

func otherDie(n, lots int, share, spread, times float64) (precision, recall float64, split int) {
	rng := rand.New(rand.NewPCG(uint64(n), 77))
	var right, wrong, missed int
	for range lots {
		devs := make([]Device, n)
		odd := int(math.Round(share * float64(n)))
		for i := range devs {
			f := 1.0
			if i < odd {
				f = times
			}
			devs[i] = die(rng, deviceName(i), spread, f)
		}
		s := SpreadOf(devs, SpreadOptions{})
		split += s.Populations - 1
		for i, v := range s.Devices {
			switch {
			case v.Flagged && i < odd:
				right++
			case v.Flagged:
				wrong++
			case i < odd:
				missed++
			}
		}
	}
	return float64(right) / float64(max(1, right+wrong)), float64(right) / float64(max(1, right+missed)), split
}

func TestOtherDie(t *testing.T) {
	for _, c := range []struct {
		n, lots              int
		share, spread, times float64
		precision, recall    float64
	}{
		{5000, 1, 0.05, 0.05, 0.7, 0.95, 0.95},
		{5000, 1, 0.05, 0.08, 0.7, 0.9, 0.85}, // 4.5 spreads off: a shoulder, no gap
		{500, 10, 0.05, 0.08, 0.7, 0.9, 0.8},
		{500, 10, 0.08, 0.05, 0.5, 0.95, 0.95},
		{500, 10, 0.08, 0.08, 0.5, 0.95, 0.95},
		{500, 10, 0.02, 0.05, 0.7, 0.95, 0.95},
		{100, 40, 0.05, 0.05, 0.7, 0.95, 0.9},
		{100, 40, 0.20, 0.05, 0.5, 0.95, 0.95},
		{40, 100, 0.05, 0.05, 0.6, 0.95, 0.9},
		{20, 200, 0.10, 0.05, 0.5, 0.95, 0.9},
		{10, 400, 0.10, 0.05, 0.5, 0.95, 0.9},
	} {
		p, r, split := otherDie(c.n, c.lots, c.share, c.spread, c.times)
		t.Logf("%d lots of %d, %.0f %% of them with gain × %.1f, gain spread %.0f %%: precision %.3f, recall %.3f, called two populations %d times",
			c.lots, c.n, 100*c.share, c.times, 100*c.spread, p, r, split)
		if p < c.precision || r < c.recall {
			t.Errorf("precision %.3f (want %.2f), recall %.3f (want %.2f)", p, c.precision, r, c.recall)
		}
	}
}

func BenchmarkSpreadOf5000(b *testing.B) {
	rng := rand.New(rand.NewPCG(4, 4))
	devs := make([]Device, 5000)
	for i := range devs {
		devs[i] = die(rng, deviceName(i), 0.05, 1-0.3*float64(i/4750))
		devs[i].Result.Vt = devs[i].Result.Vgsth
		devs[i].Result.Theta = devs[i].Result.Vgsth
		devs[i].Result.Idss = devs[i].Result.Vgsth
	}
	for b.Loop() {
		SpreadOf(devs, SpreadOptions{})
	}
}

// With whole curves of 13 levels.
func BenchmarkSpreadOfCurves5000(b *testing.B) {
	devs := wide.lot(rand.New(rand.NewPCG(4, 4)), 5000, func(i int, d *simDie) {
		if i < 250 {
			d.beta *= 0.7
		}
	})
	for b.Loop() {
		SpreadOf(devs, SpreadOptions{})
	}
}

func BenchmarkSortInto5000(b *testing.B) {
	rng := rand.New(rand.NewPCG(4, 4))
	devs := make([]Device, 5000)
	for i := range devs {
		devs[i] = die(rng, deviceName(i), 0.05, 1)
	}
	for b.Loop() {
		if _, err := SortInto(devs, SortOptions{By: fit.KeyVgsIdle, Width: 0.005}); err != nil {
			b.Fatal(err)
		}
	}
}
