package stats

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestCapability(t *testing.T) {
	p := load(t, "ehb_capability_611")
	var d struct{ Mean, SD, LSL, USL float64 }
	for k, into := range map[string]*float64{"mean": &d.Mean, "sd": &d.SD, "LSL": &d.LSL, "USL": &d.USL} {
		decode(t, p.Data[k], into)
	}
	c := CapabilityOf(d.Mean, d.SD, 0, d.LSL, d.USL)
	for key, got := range map[string]float64{"Cp": c.Cp, "Cpu": c.Upper, "Cpl": c.Lower, "Cpk": c.Cpk} {
		near(t, key, got, number(t, p.Expected.of(key)), number(t, p.Tolerance[key]))
		relative(t, key, got, number(t, p.Recomputed[key]), 1e-12)
	}
	// k is how far the mean lies off the middle, in halves of the room: Cpk = Cp (1 - k).
	near(t, "k", 1-c.Cpk/c.Cp, number(t, p.Expected.of("k")), number(t, p.Tolerance["k"]))
	if one := CapabilityOf(d.Mean, d.SD, 0, math.NaN(), d.USL); !math.IsNaN(one.Cp) || !math.IsNaN(one.Lower) || one.Cpk != c.Upper {
		t.Errorf("upper limit alone: %+v", one)
	}
	if one := CapabilityOf(d.Mean, d.SD, 0, d.LSL, math.Inf(1)); !math.IsNaN(one.Cp) || one.Cpk != c.Lower {
		t.Errorf("lower limit alone: %+v", one)
	}
	if none := CapabilityOf(d.Mean, 0, 9, d.LSL, d.USL); !math.IsNaN(none.Cpk) {
		t.Errorf("no spread: %+v", none)
	}
}

// Piston rings: sd from ranges within groups of five, intervals with n = 125.
func TestCapabilityIntervals(t *testing.T) {
	p := load(t, "capability_ci_pistonrings")
	var groups, limits [][]float64
	decode(t, p.Data["groups"], &groups)
	decode(t, p.Data["specs"], &limits)
	var all, ranges []float64
	for _, g := range groups {
		s := Sorted(g)
		all, ranges = append(all, g...), append(ranges, s[len(s)-1]-s[0])
	}
	sd := Mean(ranges) / 2.326 // d2 with the three decimals that the source takes
	near(t, "center", Mean(all), number(t, p.Expected.of("center")), number(t, p.Tolerance["center"]))
	near(t, "sigma_within", sd, number(t, p.Expected.of("sigma_within")), number(t, p.Tolerance["sigma_within"]))
	for i, suffix := range []string{"", "_narrow", "_skew"} {
		c := CapabilityOf(Mean(all), sd, len(all), limits[i][0], limits[i][1])
		single := map[string]float64{"Cp" + suffix: c.Cp, "Cpk" + suffix: c.Cpk}
		if suffix == "" {
			single["Cpl"], single["Cpu"] = c.Lower, c.Upper
		}
		for key, got := range single {
			near(t, key, got, number(t, p.Expected.of(key)), number(t, p.Tolerance[key]))
			relative(t, key, got, number(t, p.Recomputed[key]), 1e-9)
		}
		cpLow, cpHigh := CpInterval(c.Cp, len(all), 0.95)
		kLow, kHigh := CpkInterval(c.Cpk, len(all), 0.95)
		for key, got := range map[string][2]float64{"Cp_ci" + suffix: {cpLow, cpHigh}, "Cpk_ci" + suffix: {kLow, kHigh}} {
			want, full := floats(t, p.Expected.of(key)), floats(t, p.Recomputed[key])
			for k := range got {
				near(t, key, got[k], want[k], number(t, p.Tolerance[key]))
				relative(t, key, got[k], full[k], 1e-9)
			}
		}
	}
}

// Values by SciPy 1.10.1: brentq over L of nct.sf(3 c sqrt(n), n-1, 3 L sqrt(n))
// less 1 - confidence.
func TestCapabilityBounds(t *testing.T) {
	for _, c := range []struct {
		cpk        float64
		n          int
		confidence float64
		want       float64
	}{
		{1.33, 10, 0.95, 0.7773139245025238}, {1.33, 25, 0.95, 0.9908139935781805},
		{0.8, 50, 0.9, 0.6768984853720739}, {-0.2, 12, 0.95, -0.36872966878826896},
	} {
		got := CpkBoundOneLimit(c.cpk, c.n, c.confidence)
		relative(t, "bound", got, c.want, 1e-9)
		relative(t, "index needed for the bound", CpkNeeded(got, c.n, c.confidence), c.cpk, 1e-9)
		// Bissell's approximation is near; at n = 10 it is 0.010 high.
		near(t, "approximation", CpkBound(c.cpk, c.n, c.confidence), got, 0.012)
	}
	for _, c := range []struct{ expected, target float64 }{{1.67, 1.33}, {1.5, 1.33}, {1.1, 1}} {
		n := CpkSize(c.expected, c.target, 0.95)
		if CpkBoundOneLimit(c.expected, n, 0.95) < c.target || CpkBoundOneLimit(c.expected, n-1, 0.95) >= c.target {
			t.Errorf("%v for %v: n = %d is not the least", c.expected, c.target, n)
		}
	}
	if n := CpkSize(1.33, 1.33, 0.95); n != 0 {
		t.Errorf("a bound cannot reach the value itself: %d", n)
	}
}

// The exact bound lies below the truth as often as it says. Seed 11.
func TestCapabilityBoundHolds(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 11))
	const runs, n, truth = 500, 15, 1.2
	below := 0
	x := make([]float64, n)
	for range runs {
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		mean, sd := MeanSD(x)
		c := CapabilityOf(mean, sd, n, -3*truth, math.NaN())
		if CpkBoundOneLimit(c.Cpk, n, 0.9) <= truth {
			below++
		}
	}
	near(t, "share of bounds below the truth", float64(below)/runs, 0.9, 3*math.Sqrt(0.09/runs))
}
