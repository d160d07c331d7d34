package lot

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"

	"gatesill/fit"
)

// Limits alone, without parting and ESD test: the robust distance that 2 % of
// clean lots exceed, against the figures of an independent simulation (20,000 to
// 80,000 normal lots each): one quantity, and six independent ones.
func TestLimitAlone(t *testing.T) {
	for _, c := range []struct {
		n        int
		one, six float64
	}{
		{4, 11.2, 29}, {5, 12.9, 31}, {6, 7.9, 15}, {10, 5.9, 8.8}, {20, 4.7, 6.1}, {40, 4.2, 5.1},
	} {
		runs, tol := 20_000, 0.05
		if os.Getenv("GATESILL_LONG") != "" {
			runs, tol = 1_500_000, 0.02
		}
		rng := rand.New(rand.NewPCG(uint64(c.n), 9))
		far := make([]float64, runs)
		x := make([]float64, c.n)
		for r := range far {
			for i := range x {
				x[i] = rng.NormFloat64()
			}
			slices.Sort(x)
			b := center(&column{sorted: x, least: 1e-12})
			far[r] = math.Max(b.mid-x[0], x[c.n-1]-b.mid) / b.sd
		}
		slices.Sort(far)
		one := far[int(0.98*float64(runs))]
		six := far[int(math.Pow(0.98, 1.0/6)*float64(runs))]
		t.Logf("n=%d: one quantity %.2f (%.1f), six %.2f (%.1f)", c.n, one, c.one, six, c.six)
		// 400 of 20,000 lots lie beyond the first quantile, 70 beyond the second.
		// Of five devices the tail falls with the power 1.8 of k only, so that the
		// first is certain to 4 %, the second to 10 % (standard errors of the
		// difference to the other simulation); of ten and more to 1 % and 4 %.
		if c.n < 8 {
			tol *= 2
		}
		if math.Abs(one/c.one-1) > tol || math.Abs(six/c.six-1) > 2.5*tol {
			t.Errorf("n=%d: one quantity %.2f, want %.1f; six %.2f, want %.1f", c.n, one, c.one, six, c.six)
		}
	}
}

// The tables must fall or rise smoothly between their sizes and beyond them.
func TestTablesAreSmooth(t *testing.T) {
	for q := 1; q <= mostQuantities; q++ {
		for n := fewest; n < 30_000; n += 1 + n/50 {
			k := DefaultLimit(n, q)
			if !(k > 3.9 && k < 60) {
				t.Errorf("limit for n=%d, %d quantities: %v", n, q, k)
			}
			if more := DefaultLimit(n, q+1); more < k*0.999 {
				t.Errorf("limit for n=%d: %v for %d quantities, %v for one more", n, k, q, more)
			}
			if next := DefaultLimit(n+2, q); next > 1.03*k {
				t.Errorf("limit for %d quantities rises from %v at n=%d to %v at %d", q, k, n, next, n+2)
			}
			// Lots of some hundred devices with heavy tails reach high scores by a few
			// devices far out, once in 800 lots (six quantities).
			if c := splitCritical(n, q); !(c >= leastScore && c < 100) {
				t.Errorf("score for n=%d, %d quantities: %v", n, q, c)
			}
		}
	}
	for q := 1; q <= 70; q++ {
		for n := fewest; n < 30_000; n += 1 + n/50 {
			k := curveLimit(n, q)
			if !(k > 3.9 && k < 30) {
				t.Errorf("limit for n=%d, %d departures: %v", n, q, k)
			}
			if more := curveLimit(n, q+1); more < k*0.999 {
				t.Errorf("limit for n=%d: %v for %d departures, %v for one more", n, k, q, more)
			}
			if next := curveLimit(n+2, q); next > 1.03*k {
				t.Errorf("limit for %d departures rises from %v at n=%d to %v at %d", q, k, n, next, n+2)
			}
		}
	}
	if k := DefaultLimit(7, 1); !math.IsNaN(k) {
		t.Errorf("limit for 7 devices: %v, want none", k)
	}
}

// lotKind draws clean lots.
type lotKind struct {
	name string
	keys []fit.Key
	step float64 // of the readings in standard deviations, 0: continuous
	draw func(*rand.Rand) float64
	dies bool // physical model: quantities hang together

	family   *simFamily // curves, and quantities that hang together by them
	straight float64    // of dies: spread of the gain factor itself like a normal distribution; 0: of its logarithm, 5 %
}

var oneKey = []fit.Key{fit.KeyVgsth}
var fiveKeys = []fit.Key{fit.KeyVgsth, fit.KeyVgsIdle, fit.KeyBeta, fit.KeyGmMax, fit.KeyGmIdle}

func (k lotKind) lot(rng *rand.Rand, n int) []Device {
	if k.family != nil {
		return k.family.lot(rng, n, nil)
	}
	devs := make([]Device, n)
	for i := range devs {
		switch {
		case k.straight > 0:
			devs[i] = die(rng, "", 0, math.Max(0.1, 1+k.straight*rng.NormFloat64()))
			continue
		case k.dies:
			devs[i] = die(rng, "", 0.05, 1)
			continue
		}
		d := &devs[i]
		d.Result = fit.NewResult()
		d.Result.State = fit.Measured
		for _, key := range k.keys {
			z := k.draw(rng)
			if k.step > 0 {
				z = k.step * math.Round(z/k.step)
			}
			v := 3 + 0.06*z
			if isGain(key) {
				v = 2 * math.Exp(0.05*z)
			}
			d.Result.At(key).Value = v
		}
	}
	return devs
}

// alarms counts the lots in which a device stands apart, and those called two
// populations.
func (k lotKind) alarms(n, runs int) (either, split int) {
	rng := rand.New(rand.NewPCG(uint64(n), 12345))
	opt := SpreadOptions{Resolution: map[fit.Key]float64{fit.KeyVgsth: 0.06 * k.step}}
	for range runs {
		s := SpreadOf(k.lot(rng, n), opt)
		if s.Populations == 2 {
			split++
		}
		if s.Populations == 2 || flagged(s) != "" {
			either++
		}
	}
	return either, split
}

// Whatever their number of devices, no more than 2 in 100 lots without a fault may be
// flagged at all: a device standing apart, or two populations. So many lots are looked at here that a rate of 2 %
// exceeds the bound once in a thousand cases.
func TestFalseAlarms(t *testing.T) {
	kinds := []lotKind{
		{name: "one quantity", keys: oneKey, draw: normal},
		{name: "five independent quantities", keys: fiveKeys, draw: normal},
		{name: "five quantities of one model", dies: true},
		{name: "five of one model, gain factor not in the logarithm", straight: 0.08},
		{name: "whole curves", family: &usual},
		{name: "whole curves that differ by reading errors of unknown u", family: &white},
		{name: "one quantity in steps of one sd", keys: oneKey, step: 1, draw: normal},
		{name: "one quantity in steps of 0.3 sd", keys: oneKey, step: 0.3, draw: normal},
	}
	for _, k := range kinds {
		sizes, most := []int{4, 7, 8, 10, 13, 26, 40, 70, 250}, 1000
		if k.family != nil { // these take longer
			sizes, most = []int{4, 6, 8, 10, 20, 40, 120}, 500
		}
		for _, n := range sizes {
			runs := min(most, 30*most/n)
			either, split := k.alarms(n, runs)
			bound := 0.02*float64(runs) + 3.1*math.Sqrt(0.02*0.98*float64(runs))
			if float64(either) > bound {
				t.Errorf("%s, n=%d: %d of %d lots alarmed (%d called two populations), allowed %.0f", k.name, n, either, runs, split, bound)
			}
		}
	}
}

func TestLongFalseAlarms(t *testing.T) {
	only := long(t)
	kinds := []lotKind{
		{name: "one quantity", keys: oneKey, draw: normal},
		{name: "two quantities", keys: fiveKeys[1:3], draw: normal},
		{name: "five independent", keys: fiveKeys, draw: normal},
		{name: "five of one model", dies: true},
		{name: "gains of 5 % not in the logarithm", straight: 0.05},
		{name: "gains of 10 % not in the logarithm", straight: 0.10},
		{name: "steps of 3 sd", keys: oneKey, step: 3, draw: normal},
		{name: "steps of 1 sd", keys: oneKey, step: 1, draw: normal},
		{name: "steps of 0.6 sd", keys: oneKey, step: 0.6, draw: normal},
		{name: "steps of 0.3 sd", keys: oneKey, step: 0.3, draw: normal},
		{name: "steps of 0.1 sd", keys: oneKey, step: 0.1, draw: normal},
		{name: "t5 tails", keys: oneKey, draw: t5},
		{name: "uniform", keys: oneKey, draw: (*rand.Rand).Float64},
		{name: "curves of a careful bench", family: &usual},
		{name: "curves from far below threshold", family: &wide},
		{name: "curves of independent errors", family: &white},
		{name: "curves on a poor bench", family: &poor},
		{name: "curves of t5 tails", family: &heavy},
	}
	allSizes := []int{4, 5, 6, 7, 8, 9, 10, 11, 12, 15, 20, 26, 30, 36, 40, 50, 55, 70, 90, 120, 400, 1500, 5000}
	for _, k := range kinds {
		if only != "1" && !strings.HasPrefix(k.name, only) {
			continue
		}
		line, sizes := k.name+":", allSizes
		if k.family != nil {
			sizes = []int{4, 6, 8, 10, 11, 20, 40, 120, 500}
		}
		for _, n := range sizes {
			runs := max(1000, min(20_000, 2_000_000/n))
			either, split := k.alarms(n, runs)
			N := float64(runs)
			line += fmt.Sprintf("  n=%d %.2f (%.2f)", n, 100*float64(either)/N, 100*float64(split)/N)
			bound := 0.02*N + 3.1*math.Sqrt(0.02*0.98*N)
			if !strings.HasSuffix(k.name, "t5 tails") && k.name != "uniform" && float64(either) > bound {
				t.Errorf("%s, n=%d: %d of %d lots alarmed, allowed %.0f", k.name, n, either, runs, bound)
			}
		}
		t.Log("percent of lots alarmed (called two populations), " + line)
	}
}

// One wild reading must not hide two populations.
func TestPartingWithWildReading(t *testing.T) {
	devs := scenario(t, "s9_mixed.csv", fit.KeyVgsth)
	devs = append(devs, measured("W", map[fit.Key]float64{fit.KeyVgsth: 9}, math.NaN()))
	if s := SpreadOf(devs, SpreadOptions{}); s.Populations != 2 || len(s.Split.Low) != 8 {
		t.Errorf("%d populations", s.Populations)
	}
}

// A part 5 sd off in lots of 40 is found at least as often as by the ESD test at
// the 0.01 level (81 % in an independent simulation).
func TestSingleOddPart(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 9))
	for _, c := range []struct {
		n    int
		far  float64
		want float64
	}{{40, 5, 0.75}, {20, 6, 0.8}, {10, 8, 0.85}} {
		found, runs := 0, 1500
		for range runs {
			values := make([]float64, c.n)
			for i := range values {
				values[i] = 3 + 0.06*rng.NormFloat64()
			}
			values[1] = values[1] + c.far*0.06
			if SpreadOf(at(1e-4, values...), SpreadOptions{}).Devices[1].Flagged {
				found++
			}
		}
		share := float64(found) / float64(runs)
		t.Logf("n=%d, %v sd off: found %.0f %%", c.n, c.far, 100*share)
		if share < c.want {
			t.Errorf("n=%d, %v sd off: found %.2f, want %.2f", c.n, c.far, share, c.want)
		}
	}
}
