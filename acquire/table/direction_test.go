package table

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gatesill/store/record"
)

func describePasses(list []pass) string {
	s := ""
	for _, p := range list {
		s += fmt.Sprintf("%s[%d:%d] ", p.dir, p.lo, p.hi)
	}
	return s
}

func TestPasses(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name string
		vg   []float64
		sign float64
		want string
	}{
		{"none", nil, 1, ""},
		{"one point", []float64{2}, 1, "spot[0:1] "},
		{"held", []float64{2, 2, 2}, 1, "up[0:3] "},
		{"up", []float64{1, 2, 2, 3}, 1, "up[0:4] "},
		{"down", []float64{3, 2, 2, 1}, 1, "down[0:4] "},
		{"p-channel", []float64{-1, -2, -3}, -1, "up[0:3] "},
		{"p-channel back", []float64{-3, -2, -1}, -1, "down[0:3] "},
		{"up and down", []float64{0, 1, 2, 1, 0}, 1, "up[0:3] down[3:5] "},
		{"down and up", []float64{2, 1, 0, 1, 2}, 1, "down[0:3] up[3:5] "},
		{"top twice", []float64{0, 1, 2, 2, 1, 0}, 1, "up[0:4] down[4:6] "},
		{"up, down, up", []float64{0, 1, 2, 1, 0, 1, 2}, 1, "up[0:3] down[3:5] up[5:7] "},
		{"twice up", []float64{0, 1, 2, 3, 0, 1, 2, 3}, 1, "up[0:4] up[4:8] "},
		{"thrice up", []float64{0, 1, 2, 0, 1, 2, 0, 1, 2}, 1, "up[0:3] up[3:6] up[6:9] "},
		{"two spots twice", []float64{2, 3, 2, 3}, 1, "up[0:2] up[2:4] "},
		{"back to the start at last", []float64{0, 1, 2, 3, 4, 0}, 1, "up[0:6] "},
		{"small step back", []float64{0, 1, 2, 1.95, 3, 4, 5}, 1, "up[0:7] "},
		{"one wobble", []float64{2.0, 2.1, 2.2, 2.05, 2.3, 2.4, 2.5}, 1, "up[0:7] "},
		{"one reading ten times too large", []float64{2.0, 2.1, 22, 2.3, 2.4, 2.5, 2.6}, 1, "up[0:7] "},
		{"missing readings", []float64{nan, 1, nan, 3, nan, 1, nan}, 1, "up[0:5] down[5:7] "},
		{"nothing but missing", []float64{nan, nan, nan}, 1, "up[0:3] "},
	} {
		if got := describePasses(passes(c.vg, c.sign)); got != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

// Swept up and down by hand with a meter that jitters: the turning point must
// be found within the readings that jitter hides it in, whatever the step.
// Invented readings, written seeds.
func TestPassesUnderJitter(t *testing.T) {
	for _, c := range []struct {
		steps  int     // up, and as many down
		jitter float64 // standard deviation over the step
	}{{20, 0.02}, {20, 0.3}, {100, 0.3}, {100, 1}, {400, 2}, {1000, 5}} {
		for seed := range uint64(20) {
			rng := rand.New(rand.NewPCG(seed, 7))
			var vg []float64
			for i := range 2*c.steps + 1 {
				k := i
				if k > c.steps {
					k = 2*c.steps - i
				}
				vg = append(vg, 2+(float64(k)+c.jitter*rng.NormFloat64())/float64(c.steps))
			}
			got := passes(vg, 1)
			near := 2 + 4*c.jitter
			if len(got) != 2 || got[0].dir != record.Up || got[1].dir != record.Down || math.Abs(float64(got[0].hi-1-c.steps)) > near {
				t.Errorf("%d steps, jitter %g, seed %d: %s", c.steps, c.jitter, seed, describePasses(got))
			}
		}
	}
}

// One way up with jitter, and a gate that is held, are one pass.
func TestJitterAloneMakesNoPass(t *testing.T) {
	for seed := range uint64(50) {
		rng := rand.New(rand.NewPCG(seed, 8))
		var up, held []float64
		for i := range 120 {
			up = append(up, 2+0.01*(float64(i)+1.5*rng.NormFloat64()))
			held = append(held, 3+0.001*math.Round(2*rng.NormFloat64()))
		}
		if got := passes(up, 1); len(got) != 1 || got[0].dir != record.Up {
			t.Errorf("up, seed %d: %s", seed, describePasses(got))
		}
		if got := passes(held, 1); len(got) != 1 {
			t.Errorf("held, seed %d: %s", seed, describePasses(got))
		}
	}
}

// Passes cover all points once and in order.
func FuzzPasses(f *testing.F) {
	f.Add([]byte{1, 2, 3, 2, 1})
	f.Add([]byte{9, 9, 0, 255, 3, 3})
	f.Fuzz(func(t *testing.T, b []byte) {
		vg := make([]float64, len(b))
		for i, c := range b {
			vg[i] = float64(c)
			if c == 255 {
				vg[i] = math.NaN()
			}
		}
		at := 0
		for _, p := range passes(vg, 1) {
			if p.lo != at || p.hi <= p.lo || p.dir == "" {
				t.Fatalf("%v: %s", vg, describePasses(passes(vg, 1)))
			}
			at = p.hi
		}
		if at != len(vg) {
			t.Fatalf("%d points, %d in passes", len(vg), at)
		}
	})
}
