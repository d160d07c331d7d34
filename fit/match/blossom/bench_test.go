package blossom

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
)

func report(b *testing.B, r *Result) {
	b.ReportMetric(float64(r.Work.Rounds), "rounds")
	b.ReportMetric(float64(r.Work.Edges), "edges")
	b.ReportMetric(float64(r.Work.Searches), "searches")
	b.ReportMetric(float64(len(r.Blossoms)), "blossoms")
}

// BenchmarkPairs5000 pairs 5,000 points and proves it for all 12.5 million pairs.
func BenchmarkPairs5000(b *testing.B) {
	for _, kind := range kinds {
		for _, norm := range []string{"L2", "max", "L1"} {
			b.Run(kind+"/"+norm, func(b *testing.B) {
				c := cloud(rand.New(rand.NewPCG(5, 5000)), kind, norm, 5000, 2)
				var r *Result
				for b.Loop() {
					var err error
					if r, err = c.Match(context.Background()); err != nil {
						b.Fatal(err)
					}
				}
				report(b, r)
			})
		}
	}
}

// BenchmarkQuantities does the same in more quantities, where cells skip less.
func BenchmarkQuantities(b *testing.B) {
	for _, d := range []int{1, 3, 5, 10, 20} {
		b.Run(fmt.Sprint(d), func(b *testing.B) {
			c := cloud(rand.New(rand.NewPCG(6, 5000)), "normal", "L2", 5000, d)
			var r *Result
			for b.Loop() {
				var err error
				if r, err = c.Match(context.Background()); err != nil {
					b.Fatal(err)
				}
			}
			report(b, r)
		})
	}
}

// BenchmarkWorst5000 makes the worst pair as close as can be first.
func BenchmarkWorst5000(b *testing.B) {
	for _, kind := range kinds {
		b.Run(kind, func(b *testing.B) {
			c := cloud(rand.New(rand.NewPCG(5, 5000)), kind, "max", 5000, 2)
			var r *Result
			for b.Loop() {
				var err error
				if r, err = c.Bottleneck(context.Background()); err != nil {
					b.Fatal(err)
				}
			}
			report(b, r)
		})
	}
}

// BenchmarkWithin5000 leaves points out that have no partner within a distance.
func BenchmarkWithin5000(b *testing.B) {
	for _, kind := range kinds {
		b.Run(kind, func(b *testing.B) {
			c := cloud(rand.New(rand.NewPCG(5, 5000)), kind, "max", 5000, 2)
			c.Within = 15_000
			var r *Result
			for b.Loop() {
				var err error
				if r, err = c.Match(context.Background()); err != nil {
					b.Fatal(err)
				}
			}
			report(b, r)
			b.ReportMetric(float64(r.LeftOut), "left-out")
		})
	}
}

func BenchmarkVerify5000(b *testing.B) {
	for _, kind := range kinds {
		b.Run(kind, func(b *testing.B) {
			c := cloud(rand.New(rand.NewPCG(5, 5000)), kind, "max", 5000, 2)
			r, err := c.Match(context.Background())
			if err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				if err := Verify(5000, c.Pairs(), nil, r); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
