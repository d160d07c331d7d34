package fit

import (
	"math"
	"slices"
	"strings"
	"testing"
)

// Whatever curve comes, a measured result says of every quantity without a value why,
// by a code that belongs to that quantity; with all values it says nothing.
func TestEveryNullHasItsCode(t *testing.T) {
	missing := map[Key]int{}
	check := func(name string, r Result, test, idle bool) {
		t.Helper()
		if r.State != Measured {
			if got := r.Missing(test, idle); got != nil {
				t.Errorf("%s, %s: %v", name, r.State, got)
			}
			return
		}
		more := r.Missing(test, idle)
		for _, k := range Keys {
			own := slices.ContainsFunc(more, func(w Warning) bool { return strings.HasPrefix(w.Text, "No "+keyWords[k]+": ") })
			if r.At(k).Ok() {
				if own {
					t.Errorf("%s: %s has a value and a reason for none", name, k)
				}
				continue
			}
			missing[k]++
			_, codes := r.whyMissing(k, test, idle)
			if !own && !slices.ContainsFunc(codes, r.Has) {
				t.Errorf("%s: %s is null without a code: %s", name, k, codesOf(r))
			}
		}
		for _, w := range more {
			if _, ok := Explain(w.Code); !ok {
				t.Errorf("%s: code %q is not registered", name, w.Code)
			}
		}
	}
	for name, draw := range budgetSetups(t) {
		for seed := range uint64(4) {
			for _, currents := range [][2]float64{{1e-3, 100e-3}, {1e-3, math.NaN()}, {math.NaN(), 100e-3}, {1e-3, 50}, {1e-9, 1e-3}} {
				for _, cut := range []int{0, 3, 5, 8} { // the sweep begins or ends early
					c, s := draw(seed)
					s.TestCurrent, s.IdleCurrent = currents[0], currents[1]
					if n := len(c.Vg); cut > 0 && n > 4*cut {
						c.Vg, c.Id, c.Vl = cutOut(c.Vg, n/3, n/3+cut), cutOut(c.Id, n/3, n/3+cut), cutOut(c.Vl, n/3, n/3+cut)
					}
					for _, method := range []string{"auto", "current", "sqrt", "linear", "ratio", "curve"} {
						r := One(c, s)
						r.Choose(method)
						check(name+" "+method, r, positive(currents[0]), positive(currents[1]))
					}
				}
			}
		}
	}
	t.Logf("null: %v", missing)
	for _, k := range Keys {
		if missing[k] == 0 {
			t.Errorf("%s was never null: nothing was tried", k)
		}
	}
}

func cutOut(x []float64, from, to int) []float64 {
	if x == nil {
		return nil
	}
	return x[from:to]
}

func TestMissingInWords(t *testing.T) {
	c, s := budgetSetups(t)["diode"](1)
	s.IdleCurrent = math.NaN()
	r := One(c, s)
	r.Choose("sqrt")
	want := []string{
		"not-asked No gate bias at the idle current: no idle current was asked for.",
		"not-by-method No mobility degradation: the method sqrt has none.",
		"not-asked No transconductance at the idle current: no idle current was asked for.",
		"off-not-read No drain leakage: the sweep does not show it at the off voltage.",
	}
	var got []string
	for _, w := range r.Missing(true, false) {
		got = append(got, w.Code+" "+w.Text)
	}
	if !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}
