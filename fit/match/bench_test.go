package match

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
	"time"

	"gatesill/fit"
)

// stock is n devices with normal gate voltages and, a little correlated with them,
// transconductances.
func stock(n int, seed uint64) []Member {
	rng := rand.New(rand.NewPCG(seed, 1))
	ms := make([]Member, n)
	for i := range ms {
		z := rng.NormFloat64()
		ms[i] = member(fmt.Sprintf("D%04d", i), 3.4+0.1*z, 1.4*(1+0.06*(0.3*z+0.95*rng.NormFloat64())), 0)
	}
	return ms
}

func twoQuantities() []Criterion {
	return []Criterion{{Key: fit.KeyVgsIdle, Within: 0.030, Weight: 1}, {Key: fit.KeyGmIdle, Within: 0.05, Weight: 0.5}}
}

// BenchmarkPairs5000 matches 5,000 pairs in two quantities, proof included.
func BenchmarkPairs5000(b *testing.B) {
	ms := stock(10000, 5)
	for b.Loop() {
		m := mustMatch(b, ms, Options{By: twoQuantities(), Aim: Total, NoTradeOff: true})
		if m.Bound.Kind != Optimal {
			b.Fatal(m.Bound)
		}
	}
}

// BenchmarkFours5000 matches fours of 5,000 devices in one quantity.
func BenchmarkFours5000(b *testing.B) {
	ms := stock(5000, 6)
	for _, aim := range []Aim{Most, Total, Worst} {
		b.Run(string(aim), func(b *testing.B) {
			for b.Loop() {
				mustMatch(b, ms, Options{Size: 4, By: idle(0.01), Aim: aim})
			}
		})
	}
}

// BenchmarkFours100 searches for fours of 100 devices in two quantities; the gap to
// the bound is reported.
func BenchmarkFours100(b *testing.B) {
	for _, aim := range []Aim{Total, Most, Worst} {
		for seed := range uint64(3) {
			b.Run(fmt.Sprintf("%s/%d", aim, seed), func(b *testing.B) {
				ms := stock(100, 70+seed)
				for b.Loop() {
					begin := time.Now()
					m, err := Match(context.Background(), ms, Options{Size: 4, By: twoQuantities(), Aim: aim, NoTradeOff: true})
					if err != nil {
						b.Fatal(err)
					}
					b.ReportMetric(100*m.Bound.Gap, "%gap")
					b.ReportMetric(time.Since(begin).Seconds(), "s")
					b.ReportMetric(float64(len(m.Sets)), "sets")
					b.ReportMetric(float64(m.Bound.Sets), "most")
					b.ReportMetric(1e3*m.Total, "mV")
				}
			})
		}
	}
}
