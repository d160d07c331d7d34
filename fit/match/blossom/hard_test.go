package blossom

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
)

// hardGraph draws edges with no geometry in them.
func hardGraph(rng *rand.Rand, n, degree int, span int64) []Edge {
	var edges []Edge
	for range n * degree / 2 {
		u, v := rng.IntN(n), rng.IntN(n)
		if u != v {
			edges = append(edges, Edge{u, v, rng.Int64N(span)})
		}
	}
	return edges
}

// BenchmarkHardGraphs and BenchmarkHardClouds have graphs unlike those of benches:
// what the solver does badly should show here.
func BenchmarkHardGraphs(b *testing.B) {
	for _, c := range []struct {
		n, degree int
		span      int64
	}{{5000, 3, 1}, {5000, 3, 10}, {5000, 4, 1 << 30}, {5000, 10, 5}, {5000, 10, 1 << 30}, {5000, 100, 3}, {1000, 900, 1 << 30}, {1000, 900, 10}} {
		edges := hardGraph(rand.New(rand.NewPCG(1, 1)), c.n, c.degree, c.span)
		for name, f := range map[string]func(context.Context, int, []Edge) (*Result, error){"total": Largest, "worst": Bottleneck} {
			b.Run(fmt.Sprintf("%d,%d,%d/%s", c.n, c.degree, c.span, name), func(b *testing.B) {
				var r *Result
				for b.Loop() {
					var err error
					if r, err = f(context.Background(), c.n, edges); err != nil {
						b.Fatal(err)
					}
				}
				report(b, r)
				b.ReportMetric(float64(r.LeftOut), "left-out")
			})
		}
	}
}

func BenchmarkHardClouds(b *testing.B) {
	n := 5000
	rng := rand.New(rand.NewPCG(1, 2))
	for _, name := range []string{"one place", "three places", "lattice", "two far halves", "line", "rings", "alike in 20", "10,000", "20,000"} {
		n := n
		norm, d := "max", 2
		if name == "10,000" {
			n = 10_000
		} else if name == "20,000" {
			n = 20_000
		} else if name == "alike in 20" {
			d = 20
		}
		c := cloud(rng, "normal", norm, n, d)
		for i, x := range c.At {
			switch name {
			case "one place":
				x[0], x[1] = 1, 1
			case "three places":
				x[0], x[1] = float64(i*7%3), 0
			case "lattice":
				x[0], x[1] = float64(i/71), float64(i%71)
			case "two far halves":
				if i <= n/2 {
					x[0] += 1e4
				}
			case "line":
				x[1] = 0
			case "rings": // clusters of three, which can never be paired inside
				x[0], x[1] = float64(i/3%41)+0.001*x[0], float64(i/3/41)+0.001*x[1]
			case "alike in 20":
				for k := 2; k < d; k++ {
					x[k] = x[0] + x[1]*float64(k)/10 + 0.02*x[k]
				}
			}
		}
		for way, f := range map[string]func(context.Context) (*Result, error){"total": c.Match, "worst": c.Bottleneck} {
			b.Run(name+"/"+way, func(b *testing.B) {
				var r *Result
				for b.Loop() {
					var err error
					if r, err = f(context.Background()); err != nil {
						b.Fatal(err)
					}
				}
				report(b, r)
			})
		}
	}
}
