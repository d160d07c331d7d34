package acquire

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"gatesill/store/record"
)

// figures are errors of points, V.
type figures struct{ errors, share []float64 }

func (f *figures) add(e, bound float64) {
	f.errors = append(f.errors, math.Abs(e))
	f.share = append(f.share, math.Abs(e)/bound)
}

func (f *figures) String() string {
	if len(f.errors) == 0 {
		return fmt.Sprintf("%14s", "-")
	}
	e := slices.Sorted(slices.Values(f.errors))
	return fmt.Sprintf("%5.2f %5.2f %5d %4.2f", 1e3*e[len(e)*95/100], 1e3*e[len(e)-1], len(e), slices.Max(f.share))
}

// seeds is how many runs are drawn a cell.
func seeds() uint64 {
	if os.Getenv("GATESILL_LONG") != "" {
		return 20
	}
	return 1
}

// rates are those of the hand, V/s.
func rates() []float64 {
	if os.Getenv("GATESILL_LONG") != "" {
		return []float64{1e-3, 2e-3, 5e-3, 10e-3, 20e-3, 50e-3}
	}
	return []float64{10e-3, 50e-3}
}

var benches = []struct {
	name   string
	meters func(*rand.Rand) []pairMeter
}{{"3 handhelds", handhelds}, {"slow gate, fast drain", slowGate}, {"3 fast", threeFast}}

var motions = []struct {
	name string
	path func(g *rand.Rand, r, from, to float64) path
}{{"ramp", ramp}, {"stairs", stairs}}

// Settled points are within 1 mV of the curve, and all points within their own bound,
// every one of them. What the displays themselves add (half a count, and their noise at
// 4.5 standard deviations) is allowed beside the bound, for it belongs to the readings,
// paired or not. A hand that turns 1 to 50 mV/s with a tremor of ±45 %, on a ramp and in
// steps; the tolerance is 10 mV here so that the bounds are tried where they are large.
func TestBoundsHold(t *testing.T) {
	t.Parallel()
	t.Logf("of Id > 20 uA, mV: p95, greatest, number, greatest share of what is allowed; over: refused at 10 mV; fine: of the paired ones, under the bound of 5 mV")
	for _, b := range benches {
		t.Run(b.name, func(t *testing.T) {
			for _, motion := range motions {
				for _, r := range rates() {
					var settled, moving, curve figures
					over, fine, plateaus := 0, 0, 0
					bare := 0.0 // sum of the squares of error over bound, on the move
					for seed := range seeds() {
						g := rand.New(rand.NewPCG(seed, uint64(1e6*r)))
						s := simulate(g, motion.path(g, r, 2.6, 3.3), b.meters(g))
						s.pairing.Tolerance = 10e-3
						points, report := Pair(s.readings, s.pairing)
						over += report.OverTolerance
						plateaus += 10 // above 20 uA
						gate, pace := s.meters[Gate], s.meters[Current]
						display := gate.digits[0] * (0.5 + 4.5*gate.noise)
						for _, p := range points {
							if !(p.Id > 20e-6) {
								continue
							}
							e := p.Vg - simVG(p.Id)
							own := simSlope(p.Id) * p.Digits[record.ID] * (0.5 + 4.5*pace.noise)
							if p.Settled {
								settled.add(e, p.Bound+gate.digits[0]/2+own)
								continue
							}
							moving.add(p.Vg-s.path.at(s.readAt(p)), p.Bound+display)
							bare += math.Pow((p.Vg-s.path.at(s.readAt(p)))/p.Bound, 2)
							curve.add(e, p.Bound+display+own)
							if p.Bound <= tolerance {
								fine++
							}
						}
					}
					name := fmt.Sprintf("%-22s %-6s %2.0f mV/s", b.name, motion.name, 1e3*r)
					t.Logf("%s: settled %s | paired %s | on the curve %s | over %d, fine %d, plateaus %d", name, &settled, &moving, &curve, over, fine, plateaus)
					// Package fit takes the bound for three standard uncertainties; few points of one
					// seed share one lag.
					if n := len(moving.errors); n > 0 {
						most := 0.5
						if seeds() > 1 {
							most = 0.4
						}
						if x := math.Sqrt(bare / float64(n)); !(x < most) {
							t.Errorf("%s: the rms of error over bound is %.2f on the move", name, x)
						}
					}
					for what, f := range map[string]*figures{"settled": &settled, "paired": &moving, "on the curve": &curve} {
						if x := f.greatest(f.share); !(x <= 1) {
							t.Errorf("%s: %s: an error is %.2f of what its bound allows", name, what, x)
						}
					}
					if x := settled.greatest(settled.errors); !(x < 1e-3) {
						t.Errorf("%s: a settled point is off by %.2f mV", name, 1e3*x)
					}
					if motion.name == "stairs" && r >= 5e-3 && 100*len(settled.errors) < 95*plateaus {
						t.Errorf("%s: %d of %d plateaus gave a point", name, len(settled.errors), plateaus)
					}
					if motion.name == "ramp" && len(moving.errors) < 5 {
						t.Errorf("%s: %d points on the move", name, len(moving.errors))
					}
				}
			}
		})
	}
}

func (f *figures) greatest(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	return slices.Max(x)
}
