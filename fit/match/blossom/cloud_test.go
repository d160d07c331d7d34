package blossom

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
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
	c := &Cloud{At: at, Scale: 1e6}
	switch norm {
	case "L1":
		c.Norm = Sum
		c.Distance = func(i, j int) int64 {
			var sum float64
			for k, v := range at[i] {
				sum += math.Abs(v - at[j][k])
			}
			return int64(math.Round(1e6 * sum))
		}
	case "L2":
		c.Norm = Straight
		c.Distance = func(i, j int) int64 {
			var sum float64
			for k, v := range at[i] {
				sum += (v - at[j][k]) * (v - at[j][k])
			}
			return int64(math.Round(1e6 * math.Sqrt(sum)))
		}
	case "max":
		c.Distance = func(i, j int) int64 {
			var most float64
			for k, v := range at[i] {
				most = max(most, math.Abs(v-at[j][k]))
			}
			return int64(math.Round(1e6 * most))
		}
	}
	return c
}

var kinds = []string{"uniform", "normal", "clusters", "steps", "coarse"}

// TestCloudIsProved: Verify looks at all pairs, the driver at few of them.
func TestCloudIsProved(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	ctx := context.Background()
	rounds := 0
	for _, kind := range kinds {
		for _, norm := range []string{"L1", "L2", "max"} {
			for _, n := range []int{0, 1, 2, 3, 40, 121} {
				for _, d := range []int{1, 2, 5, 20} {
					name := fmt.Sprintf("%s %s, %d points, %d quantities", kind, norm, n, d)
					c := cloud(rng, kind, norm, n, d)
					r, err := c.Match(ctx)
					if err != nil {
						t.Fatal(err)
					}
					if r.LeftOut != n%2 {
						t.Errorf("%s: %d left out", name, r.LeftOut)
					}
					if err := Verify(n, c.Pairs(), nil, r); err != nil {
						t.Errorf("%s: %v", name, err)
					}
					rounds = max(rounds, r.Work.Rounds)

					blind := *c
					blind.Scale = 0
					if q, err := blind.Match(ctx); err != nil || q.Total != r.Total {
						t.Errorf("%s: looking at every pair: %v, total %d and %d", name, err, q.Total, r.Total)
					}

					b, err := c.Bottleneck(ctx)
					if err != nil {
						t.Fatal(err)
					}
					if err := VerifyBottleneck(n, c.Pairs(), n%2, b); err != nil {
						t.Errorf("%s: worst pair: %v", name, err)
					}
					if b.Worst > r.Worst || b.Total < r.Total {
						t.Errorf("%s: worst %d, total %d, against %d, %d", name, b.Worst, b.Total, r.Worst, r.Total)
					}
				}
			}
		}
	}
	if rounds < 2 {
		t.Error("no graph needed a second round")
	}
}

// TestCloudWithinAndCost: pairs only up to a distance, and points that may
// stay alone at a cost.
func TestCloudWithinAndCost(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 1))
	ctx := context.Background()
	several := 0
	for _, kind := range kinds {
		for _, n := range []int{30, 151} {
			c := cloud(rng, kind, "L2", n, 2)
			free, err := c.Match(ctx)
			if err != nil {
				t.Fatal(err)
			}
			c.Within = free.Worst/4 + 1
			r, err := c.Match(ctx)
			if err != nil {
				t.Fatal(err)
			}
			if err := Verify(n, c.Pairs(), nil, r); err != nil {
				t.Errorf("%s, %d points within %d: %v", kind, n, c.Within, err)
			}
			if r.LeftOut > 1 {
				several++
			}
			b, err := c.Bottleneck(ctx)
			if err != nil {
				t.Fatal(err)
			}
			if err := VerifyBottleneck(n, c.Pairs(), r.LeftOut, b); err != nil {
				t.Errorf("%s, %d points within %d: worst pair: %v", kind, n, c.Within, err)
			}

			c.Within = 0
			c.Cost = make([]int64, n)
			for v := range c.Cost {
				if c.Cost[v] = rng.Int64N(free.Total / int64(n) * 2); v%10 == 0 {
					c.Cost[v] = Never
				}
			}
			l, err := c.Match(ctx)
			if err != nil {
				t.Fatal(err)
			}
			if err := Verify(n, c.Pairs(), c.Cost, l); err != nil {
				t.Errorf("%s, %d points, costs: %v", kind, n, err)
			}
			if _, err := c.Bottleneck(ctx); !errors.Is(err, ErrGraph) {
				t.Errorf("costs and worst pair: %v", err)
			}
		}
	}
	if several < 5 {
		t.Errorf("more than one point left out in %d cases only", several)
	}
}

// TestCloudOfAnyDistance: the distance has nothing to do with the coordinates
// and does not keep the triangle inequality.
func TestCloudOfAnyDistance(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 1))
	for _, n := range []int{2, 9, 50, 81} {
		c := cloud(rng, "normal", "L2", n, 2)
		d := make([][]int64, n)
		for i := range d {
			d[i] = make([]int64, n)
			for j := range i {
				d[i][j] = rng.Int64N(1000)
				d[j][i] = d[i][j]
			}
		}
		c.Scale, c.Distance = 0, func(i, j int) int64 { return d[i][j] }
		for _, within := range []int64{0, 300, 20} {
			c.Within = within
			r, err := c.Match(context.Background())
			if err != nil {
				t.Fatal(err)
			}
			if err := Verify(n, c.Pairs(), nil, r); err != nil {
				t.Errorf("%d points within %d: %v", n, within, err)
			}
			b, err := c.Bottleneck(context.Background())
			if err != nil {
				t.Fatal(err)
			}
			if err := VerifyBottleneck(n, c.Pairs(), r.LeftOut, b); err != nil {
				t.Errorf("%d points within %d: worst pair: %v", n, within, err)
			}
			c.Cost = constant(n, int64(15))
			l, err := c.Match(context.Background())
			if err != nil {
				t.Fatal(err)
			}
			if err := Verify(n, c.Pairs(), c.Cost, l); err != nil {
				t.Errorf("%d points within %d, costs: %v", n, within, err)
			}
			c.Cost = nil
		}
	}
}

// TestCloudOfThousands: as large as lots come; 5,000 and more with GATESILL_LONG.
func TestCloudOfThousands(t *testing.T) {
	sizes := []int{1200}
	if os.Getenv("GATESILL_LONG") != "" {
		sizes = []int{4999, 5000, 12_000}
	}
	rng := rand.New(rand.NewPCG(7, 1))
	for _, n := range sizes {
		for i, kind := range kinds {
			norm := []string{"L1", "L2", "max"}[i%3]
			c := cloud(rng, kind, norm, n, 2)
			r, err := c.Match(context.Background())
			if err != nil {
				t.Fatal(err)
			}
			if err := Verify(n, c.Pairs(), nil, r); err != nil {
				t.Errorf("%d points, %s: %v", n, kind, err)
			}
			b, err := c.Bottleneck(context.Background())
			if err != nil {
				t.Fatal(err)
			}
			if err := VerifyBottleneck(n, c.Pairs(), n%2, b); err != nil {
				t.Errorf("%d points, %s: worst pair: %v", n, kind, err)
			}
			t.Logf("%d points, %s %s: total %d, worst %d; worst pair first: total %d, worst %d; %+v", n, kind, norm, r.Total, r.Worst, b.Total, b.Worst, r.Work)
		}
	}
}
