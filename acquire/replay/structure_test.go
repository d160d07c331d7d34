package replay

import (
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gatesill/acquire/table"
)

// oneDevice makes a bench of one device from knots.
func oneDevice(r *rand.Rand, knots [][2]float64) *bench {
	return &bench{knots: knots, noise: r, vth: func(float64) float64 { return 3 }}
}

// motions are ways in which a gate may be moved; some tell the offset of the
// clocks, others cannot.
var motions = []struct {
	name  string
	tells bool // the gate against the current must be found
	make  func(r *rand.Rand) [][2]float64
}{
	{"up and down by hand in steps", true, func(r *rand.Rand) [][2]float64 {
		k, at := [][2]float64{{0, 0}, {5, 0}}, 5.0
		for i := -14; i <= 14; i++ {
			v := 3.3 - 0.05*math.Abs(float64(i))
			at += 0.4 + r.Float64()
			k = append(k, [2]float64{at, v})
			at += 2.4 + 1.2*r.Float64()
			k = append(k, [2]float64{at, v})
		}
		return append(k, [2]float64{at + 1, 0}, [2]float64{at + 8, 0})
	}},
	{"equal steps of equal length, up only", false, func(r *rand.Rand) [][2]float64 {
		k := [][2]float64{}
		for i := range 15 {
			k = append(k, [2]float64{4 * float64(i), 2.6 + 0.05*float64(i)}, [2]float64{4*float64(i) + 3.5, 2.6 + 0.05*float64(i)})
		}
		return k
	}},
	{"a ramp up only", false, func(r *rand.Rand) [][2]float64 { return [][2]float64{{0, 2.6}, {140, 3.3}} }},
	{"a ramp up and down", true, func(r *rand.Rand) [][2]float64 { return [][2]float64{{0, 2.6}, {70, 3.3}, {140, 2.6}} }},
	{"held", false, func(r *rand.Rand) [][2]float64 { return [][2]float64{{0, 3.1}, {140, 3.1}} }},
	{"one step", false, func(r *rand.Rand) [][2]float64 { return [][2]float64{{0, 3.0}, {60, 3.0}, {61, 3.1}, {140, 3.1}} }},
	{"steps to and fro between two voltages", false, func(r *rand.Rand) [][2]float64 {
		k := [][2]float64{}
		for i := range 30 {
			v := 3.0 + 0.1*float64(i%2)
			k = append(k, [2]float64{4 * float64(i), v}, [2]float64{4*float64(i) + 3.5, v})
		}
		return k
	}},
}

// What is said of the clocks must be right or be said to be assumed, however little
// the readings tell.
func TestOffsetsAreRightOrAssumed(t *testing.T) {
	seeds := 1
	if long {
		seeds = 30
	}
	for _, m := range motions {
		foundGate, n, wrong := 0, 0, 0
		for seed := range seeds {
			r := rand.New(rand.NewPCG(uint64(seed), 3))
			b := oneDevice(r, m.make(r))
			ms := b.meters()
			for _, role := range []string{"gate", "current", "load"} {
				x := ms[role]
				x.offset = 40*r.Float64() - 20
				ms[role] = x
			}
			s, err := Join(b.logs(t, ms, Options{}), nil, nil, Options{})
			if err != nil {
				t.Fatal(err)
			}
			for _, l := range s.Logs {
				c := l.Found.Clock
				if c == nil {
					continue
				}
				e := math.Abs(clockError(s, ms, l.Role, b.end()/2))
				n++
				if !c.Assumed && e > c.Bound {
					wrong++
					t.Logf("%s, seed %d, %s: offset %.2f ± %.3f s, wrong by %.3f s, bound %.3f s", m.name, seed, l.Role, c.Offset, c.OffsetU, e, c.Bound)
				}
				if l.Role == "gate" && !c.Assumed {
					foundGate++
				}
			}
		}
		t.Logf("%s: gate found in %d of %d", m.name, foundGate, seeds)
		if wrong > n/20 {
			t.Errorf("%s: %d of %d clocks are wrong beyond their bound and not said to be assumed", m.name, wrong, n)
		}
		if m.tells && foundGate < seeds {
			t.Errorf("%s: the clock of the gate was found in %d of %d only", m.name, foundGate, seeds)
		}
	}
}

// Logs without a common origin are refused where the readings do not tell.
func TestNoCommonOriginAndNoStructure(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	b := oneDevice(r, motions[2].make(r))
	ms := b.meters()
	delete(ms, "load")
	g := ms["gate"]
	g.form = func(at float64) string { return strings.TrimSuffix(strings.TrimPrefix(isoUTC(at)[14:], "0"), "Z") } // m:s
	ms["gate"] = g
	_, err := Join(b.logs(t, ms, Options{}), nil, nil, Options{})
	var e *table.Error
	if !errors.As(err, &e) || !errors.Is(err, table.ErrRefused) || !strings.Contains(e.Hint, "--log-times gate=") {
		t.Errorf("%v, hint %+v", err, e)
	}
}
