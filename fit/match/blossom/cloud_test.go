package blossom

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// cloud draws n points in d quantities and measures them with one of three
// distances, in whole millionths.
func cloud(rng *rand.Rand, kind, norm string, n, d int) *Cloud {
	at := make([][]float64, n)
	var centres [][]float64
	for range 20 {
		x := make([]float64, d)
		for k := range x {
			x[k] = 10 * rng.Float64()
		}
		centres = append(centres, x)
	}
	for i := range at {
		at[i] = make([]float64, d)
		c := centres[rng.IntN(len(centres))]
		for k := range at[i] {
			switch kind {
			case "uniform":
				at[i][k] = rng.Float64()
			case "normal":
				at[i][k] = rng.NormFloat64()
			case "clusters":
				at[i][k] = c[k] + 0.05*rng.NormFloat64()
			case "steps": // as two displays show: 3 V in steps of 1 mV with a spread of 60 mV, and 1 % of the other quantity with a spread of 10 %
				step, spread := 1e-3, 0.06
				if k%2 == 1 {
					step, spread = 1e-2, 0.1
				}
				at[i][k] = math.Round(spread*rng.NormFloat64()/step) * step / spread
			case "coarse": // most points share their place with others
				at[i][k] = math.Round(8 * rng.NormFloat64())
			}
		}
	}
	dist := func(i, j int) int64 {
		x, y := at[i], at[j]
		var sum float64
		for k := range x {
			g := math.Abs(x[k] - y[k])
			switch norm {
			case "L1":
				sum += g
			case "L2":
				sum += g * g
			default:
				sum = max(sum, g)
			}
		}
		if norm == "L2" {
			sum = math.Sqrt(sum)
		}
		return int64(math.Round(sum * 1e6))
	}
	return &Cloud{At: at, Distance: dist, Scale: 1e6}
}

func BenchmarkPairs5000(b *testing.B) {
	for _, kind := range []string{"uniform", "normal", "clusters", "steps", "coarse"} {
		for _, norm := range []string{"L2", "max", "L1"} {
			b.Run(fmt.Sprintf("%s/%s", kind, norm), func(b *testing.B) {
				c := cloud(rand.New(rand.NewPCG(5, 5000)), kind, norm, 5000, 2)
				var r *Result
				for b.Loop() {
					var err error
					if r, err = c.Match(context.Background()); err != nil {
						b.Fatal(err)
					}
				}
				b.ReportMetric(float64(r.Work.Rounds), "rounds")
				b.ReportMetric(float64(r.Work.Edges), "edges")
				b.ReportMetric(float64(r.Work.Searches), "searches")
				b.ReportMetric(float64(len(r.Blossoms)), "blossoms")
			})
		}
	}
}

func TestCloudIsProved(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	for _, kind := range []string{"uniform", "normal", "clusters", "steps", "coarse"} {
		for _, norm := range []string{"L1", "L2", "max"} {
			for _, n := range []int{0, 1, 2, 3, 40, 301} {
				for _, d := range []int{1, 2, 5, 20} {
					c := cloud(rng, kind, norm, n, d)
					r, err := c.Match(context.Background())
					if err != nil {
						t.Fatal(err)
					}
					if r.LeftOut != n%2 {
						t.Errorf("%s %s %d points: %d left out", kind, norm, n, r.LeftOut)
					}
					if err := Verify(n, c.Pairs(), nil, r); err != nil {
						t.Errorf("%s %s %d points, %d quantities: %v", kind, norm, n, d, err)
					}
				}
			}
		}
	}
}
