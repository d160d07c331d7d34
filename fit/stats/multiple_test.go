package stats

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestAdjustedP(t *testing.T) {
	p := load(t, "multiple_testing_bh1995")
	raw, q := floats(t, p.Data["p"]), number(t, p.Data["q"])
	for name, f := range map[string]func([]float64) []float64{
		"bonferroni": Bonferroni, "holm": Holm, "hochberg": Hochberg, "bh": BenjaminiHochberg,
	} {
		full := floats(t, p.Recomputed[name])
		// The result must not lean on the order, and NaN must not count.
		turned := append(slices.Clone(raw), math.NaN(), -1, 1.5)
		slices.Reverse(turned)
		back := f(turned)
		slices.Reverse(back)
		rejected := 0.0
		for i, v := range f(raw) {
			near(t, name, v, full[i], 1e-14)
			near(t, name+" turned", back[i], v, 0)
			if v <= q {
				rejected++
			}
		}
		for i, v := range back[len(raw):] {
			if !math.IsNaN(v) {
				t.Errorf("%s: no. %d that is no probability becomes %v", name, i, v)
			}
		}
		near(t, name+" rejected", rejected, number(t, p.Recomputed["n_rejected_"+name]), 0)
		if e, ok := p.Expected.find("n_rejected_" + name); ok {
			near(t, name+" rejected, published", rejected, number(t, e), number(t, p.Tolerance["n_rejected_"+name]))
		}
		if out := f(nil); len(out) != 0 {
			t.Errorf("%s of nothing: %v", name, out)
		}
	}
}

// Adjusted p are never below the raw ones, stand in the same order, are at most 1, and
// each method is at least as strict as the next.
func TestAdjustedProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.SliceOf(rapid.Float64Range(0, 1)).Draw(t, "p")
		before := slices.Clone(p)
		chain := [][]float64{Bonferroni(p), Holm(p), Hochberg(p), BenjaminiHochberg(p), p}
		if !slices.Equal(p, before) {
			t.Fatal("input changed")
		}
		for i := range p {
			for m := 1; m < len(chain); m++ {
				if chain[m-1][i] > 1 || chain[m-1][i] < chain[m][i]*(1-1e-12) {
					t.Fatalf("no. %d: method %d gives %v, the next %v", i, m-1, chain[m-1][i], chain[m][i])
				}
			}
			for j := range p {
				for _, adjusted := range chain {
					if p[i] < p[j] && adjusted[i] > adjusted[j] {
						t.Fatalf("p %v below %v, adjusted %v above %v", p[i], p[j], adjusted[i], adjusted[j])
					}
				}
			}
		}
	})
}
