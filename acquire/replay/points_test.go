package replay

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"gatesill/acquire"
)

// TestPointsOfJoinedLogs pairs the logs of the invented bench after their clocks
// were found again: the gate voltage of a point must be that at which the device
// gives its current, within the bound of the point and what the digits of the
// current come to.
func TestPointsOfJoinedLogs(t *testing.T) {
	seeds := 1
	if long {
		seeds = 12
	}
	var settled, moving, share []float64
	over := 0
	for seed := range seeds {
		r := rand.New(rand.NewPCG(uint64(seed), 11))
		b := staircase(r, 3, 10)
		ms := b.meters()
		for _, role := range []string{"gate", "current", "load"} {
			m := ms[role]
			m.offset, m.ppm = 60*r.Float64()-30, 400*r.Float64()-200
			ms[role] = m
		}
		s, err := Join(b.logs(t, ms, Options{}), nil, nil, Options{})
		if err != nil {
			t.Fatal(err)
		}
		began, err := time.Parse(time.RFC3339Nano, s.Started)
		if err != nil {
			t.Fatal(err)
		}
		p := acquire.Pairing{Timing: map[string]acquire.Timing{}, Free: true}
		for _, l := range s.Logs {
			timing := acquire.Timing{}
			if c := l.Found.Clock; c != nil {
				timing.LagU = c.Bound
			}
			p.Timing[l.Role] = timing
		}
		points, report := acquire.Pair(s.Readings(0, s.Span), p)
		if report.Settled < 50 {
			t.Errorf("seed %d: %+v", seed, report)
		}
		ref := ms["current"]
		for _, q := range points {
			if !(q.Id > 1e-3) || q.Id > 2 {
				continue
			}
			shown := began.Sub(simStart).Seconds() + q.At
			at := (shown - ref.offset) / (1 + ref.ppm*1e-6)
			truth, slope := b.gateFor(q.Id, at)
			e := math.Abs(q.Vg - truth)
			allowed := q.Bound + 0.5e-3 + 1e-5/slope // half a digit of the gate, one of the current
			share = append(share, e/allowed)
			if e > allowed {
				over++
				t.Logf("seed %d: point at %.1f s, %.4f V, %.4g A: error %.2f mV, bound %.2f mV, settled %v", seed, q.At, q.Vg, q.Id, e*1e3, q.Bound*1e3, q.Settled)
			}
			if q.Settled {
				settled = append(settled, e)
			} else {
				moving = append(moving, e)
			}
		}
	}
	t.Logf("settled: %s; moving: %s; %d of %d over what is allowed, p95 of the share %.2f", quantiles(settled), quantiles(moving), over, len(share), quantile(share, 0.95))
	if over > len(share)/100 {
		t.Errorf("%d of %d points are farther off than their bound", over, len(share))
	}
}

// gateFor is the gate voltage at which the device of that time gives the current,
// and the transconductance there.
func (b *bench) gateFor(id, at float64) (vg, gm float64) {
	const n, ut, k = 1.6, 0.0259, 2.0
	at2 := func(i float64) float64 {
		return b.vth(at) + 2*n*ut*math.Log(math.Expm1(math.Sqrt(i*2/k)/(2*n*ut)))
	}
	return at2(id), 0.02 * id / (at2(1.01*id) - at2(0.99*id))
}

func quantile(x []float64, p float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	y := slices.Clone(x)
	slices.Sort(y)
	return y[min(len(y)-1, int(p*float64(len(y))))]
}

func quantiles(x []float64) string {
	return fmt.Sprintf("%d points, error median %.2f, p95 %.2f, greatest %.2f mV", len(x), quantile(x, 0.5)*1e3, quantile(x, 0.95)*1e3, quantile(x, 1)*1e3)
}
