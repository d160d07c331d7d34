package lot

import (
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"gatesill/fit"
)

// falsely gives the shares of lots of one population that the parting calls two, of
// n devices, for one quantity and for three and six independent ones together.
func falsely(n, runs int, seed uint64, draw func(*rand.Rand) float64) (share [3]float64) {
	scores := splitScores(n, runs, seed, draw)
	for i, q := range []int{1, 3, 6} {
		bar := splitCritical(n, q)
		from, _ := slices.BinarySearchFunc(scores, bar, func(s, bar float64) int {
			if s > bar {
				return 1
			}
			return -1
		})
		one := float64(runs-from) / float64(runs)
		share[i] = 1 - math.Pow(1-one, float64(q))
	}
	return share
}

// Fewer than 1 % of lots of one population are called two, be they spread like a
// normal distribution, evenly, or with heavy tails; with other draws than those that
// made the table. The bound is exceeded by a rate of 1 % once in a thousand cases.
func TestPartingBar(t *testing.T) {
	sizes, runs := []int{8, 9, 11, 21, 43, 77, 100}, 6000
	if os.Getenv("GATESILL_LONG") != "" {
		sizes, runs = nil, 40_000
		for n := 8; n <= 100; n++ {
			sizes = append(sizes, n)
		}
		sizes = append(sizes, 107, 123, 140, 175, 250, 400, 700, 1500, 3000, 5000)
	}
	for _, kind := range oneKinds {
		var worst [3]float64
		var at [3]int
		for _, n := range sizes {
			N := min(runs, 4_000_000/n)
			got := falsely(n, N, 77, kind.draw)
			for i := range got {
				if got[i] > worst[i] {
					worst[i], at[i] = got[i], n
				}
				if bound := 0.01 + 3.1*math.Sqrt(0.01*0.99/float64(N)); got[i] > bound {
					t.Errorf("%s lots of %d, case %d: %.2f %% called two populations", kind.name, n, i, 100*got[i])
				}
			}
		}
		t.Logf("%s lots called two populations at most: one quantity %.2f %% (n=%d), three %.2f %% (n=%d), six %.2f %% (n=%d)",
			kind.name, 100*worst[0], at[0], 100*worst[1], at[1], 100*worst[2], at[2])
	}
}

// The bar has no steps: from one size to the next it moves by less than a twentieth
// up to a hundred devices.
func TestBarIsSmooth(t *testing.T) {
	for q := 1; q <= mostQuantities; q++ {
		for n := fewest; n < 100; n++ {
			a, b := splitCritical(n, q), splitCritical(n+1, q)
			if math.Abs(b/a-1) > 0.05 {
				t.Errorf("bar of %d quantities: %.2f for %d devices, %.2f for one more", q, a, n, b)
			}
		}
	}
}

// How often two normal populations of equal spread are found, by distance and share.
// The figures are printed; held are those of 20,000 lots, less five standard errors
// of the lots drawn here.
func TestPartingPower(t *testing.T) {
	runs := 1000
	if os.Getenv("GATESILL_LONG") != "" {
		runs = 20_000
	}
	for _, c := range []struct {
		n, odd int
		apart  float64
		found  float64
	}{
		{10, 5, 4, 0.031}, {10, 5, 5, 0.099}, {10, 5, 6, 0.224}, {10, 5, 8, 0.589}, {10, 3, 4, 0.032}, {10, 3, 5, 0.101}, {10, 3, 6, 0.224}, {10, 3, 8, 0.597},
		{20, 10, 4, 0.068}, {20, 10, 5, 0.309}, {20, 10, 6, 0.672}, {20, 10, 8, 0.988}, {20, 5, 4, 0.076}, {20, 5, 5, 0.308}, {20, 5, 6, 0.661}, {20, 5, 8, 0.986},
		{40, 20, 4, 0.182}, {40, 20, 5, 0.720}, {40, 20, 6, 0.976}, {40, 20, 8, 1}, {40, 10, 4, 0.145}, {40, 10, 5, 0.574}, {40, 10, 6, 0.888}, {40, 10, 8, 0.998},
		{10, 4, 10, 0.878}, {12, 6, 10, 0.967}, {25, 8, 8, 0.996}, {20, 4, 7, 0.896}, {50, 25, 6, 0.991},
		{100, 5, 7, 0.942}, {100, 40, 5, 0.970}, {500, 40, 6, 0.946}, {5000, 250, 7, 0.998},
	} {
		rng := rand.New(rand.NewPCG(uint64(1000*c.n+c.odd), uint64(c.apart)))
		found, N := 0, min(runs, 2_000_000/c.n)
		x := make([]float64, c.n)
		for range N {
			for i := range x {
				x[i] = rng.NormFloat64()
				if i < c.odd {
					x[i] += c.apart
				}
			}
			slices.Sort(x)
			if partingOf(x, 0, 0).score > splitCritical(c.n, 1) {
				found++
			}
		}
		share := float64(found) / float64(N)
		t.Logf("%d of %d %v sd apart: found %.3f", c.odd, c.n, c.apart, share)
		if least := c.found - 5*math.Sqrt(c.found*(1-c.found)/float64(N)) - 0.002; share < least {
			t.Errorf("%d of %d %v sd apart: found %.3f, want %.3f", c.odd, c.n, c.apart, share, least)
		}
	}
}

// Seven devices are never parted, however far apart; eight are.
func TestFewAreNotParted(t *testing.T) {
	values := []float64{2.80, 2.81, 2.82, 3.80, 3.81, 3.82, 3.83}
	if s := SpreadOf(at(1e-4, values...), SpreadOptions{}); s.Populations != 1 || s.Split != nil {
		t.Errorf("seven devices: %d populations", s.Populations)
	}
	s := SpreadOf(at(1e-4, append(values, 3.84)...), SpreadOptions{})
	if s.Populations != 2 || s.Split == nil || !(s.Split.Score > s.Split.Bar) || s.Split.Bar != splitCritical(8, 1) {
		t.Fatalf("eight devices: %d populations, %+v", s.Populations, s.Split)
	}
}

// Date codes and tubes beside the groups.
func TestOrigins(t *testing.T) {
	devs := scenario(t, "s9_mixed.csv", fit.KeyVgsth, fit.KeyGmIdle)
	for i := range devs {
		devs[i].DateCode, devs[i].Tube = "2318", []string{"T1", "T2"}[i%2]
		if devs[i].Result.Vgsth.Value > 2.7 {
			devs[i].DateCode = "2401"
		}
	}
	devs[0].DateCode = ""
	s := SpreadOf(devs, SpreadOptions{})
	if len(s.Split.Origins) != 2 {
		t.Fatalf("origins: %+v", s.Split.Origins)
	}
	code, tube := s.Split.Origins[0], s.Split.Origins[1]
	if !code.Follows || len(code.Groups) != 3 || code.Groups[0].Name != "2318" || code.Groups[2].Name != "" || code.Groups[0].High != 0 || code.Groups[1].Low != 0 {
		t.Errorf("date codes: %+v", code)
	}
	if tube.Follows || tube.Text != "" || !(tube.P > 0.01) {
		t.Errorf("tubes: %+v", tube)
	}
	t.Log(code.Text)
	for i := range devs {
		devs[i].DateCode, devs[i].Tube = "2401", ""
	}
	if s = SpreadOf(devs, SpreadOptions{}); len(s.Split.Origins) != 0 {
		t.Errorf("one date code: %+v", s.Split.Origins)
	}
	// Three against five of eight can be told by nothing: one way in 56.
	few := at(1e-4, 2.80, 2.81, 2.82, 3.80, 3.81, 3.82, 3.83, 3.84)
	for i := range few {
		few[i].DateCode = []string{"A", "B"}[min(i/3, 1)]
	}
	s = SpreadOf(few, SpreadOptions{})
	if len(s.Split.Origins) != 1 || s.Split.Origins[0].Follows {
		t.Errorf("too few: %+v", s.Split)
	}
	near(t, "p of three of eight", s.Split.Origins[0].P, 1.0/56, 1e-12)
}
