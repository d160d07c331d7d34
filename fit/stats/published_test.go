package stats

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"
)

// published is one data set of testdata/published: figures that others printed,
// each file with its source and how it was come by.
type published struct {
	Data      map[string]json.RawMessage
	Expected  figures
	Tolerance map[string]json.RawMessage

	Recomputed map[string]json.RawMessage    // full precision, by us
	Removed    []float64                     `json:"removed_in_order"`
	Critical   map[string]map[string]float64 `json:"critical_values_recomputed"`
}

// figures are those that a data set expects. Each must be asked for: one that is
// carried and never compared checks nothing.
type figures struct {
	raw   map[string]json.RawMessage
	asked map[string]bool
}

func (f *figures) UnmarshalJSON(b []byte) error {
	f.asked = map[string]bool{}
	return json.Unmarshal(b, &f.raw)
}

// all are the figures by name, without being asked for.
func (f *figures) all() map[string]json.RawMessage { return f.raw }

// find is one of the figures and whether there is one; of takes it to be there.
func (f *figures) find(key string) (json.RawMessage, bool) {
	raw, ok := f.raw[key]
	f.asked[key] = true
	return raw, ok
}

func (f *figures) of(key string) json.RawMessage {
	raw, _ := f.find(key)
	return raw
}

// leftOut are published figures that nothing here is compared with, and why.
var leftOut = map[string]map[string]string{
	"ehb_tolerance_normal": {
		"k1_natrella":    "an approximation for many values, 0.06 % above the exact factor at n = 43; the factor here is exact, and k1_exact is compared",
		"k1_natrella_n6": "the same at n = 6, where it is 20 % above; k1_exact_n6 is compared",
	},
}

// notFigures are keys that say something of a data set and are nothing to compare.
var notFigures = []string{"exact"} // of the reference data sets: constructed, not measured

// load reads a data set of which the test compares every figure that is not left out
// with a reason.
func load(t *testing.T, name string) published {
	t.Helper()
	p := dataOf(t, name)
	t.Cleanup(func() {
		if t.Failed() || t.Skipped() {
			return
		}
		reasons := leftOut[name]
		for key := range p.Expected.raw {
			if !p.Expected.asked[key] && reasons[key] == "" && !slices.Contains(notFigures, key) {
				t.Errorf("%s: %s is published, is not compared, and no reason is given", name, key)
			}
		}
		for key := range reasons {
			if _, ok := p.Expected.raw[key]; !ok || p.Expected.asked[key] {
				t.Errorf("%s: %s is said to be left out, and is not", name, key)
			}
		}
	})
	return p
}

// dataOf reads a data set for its readings: its figures are another test's.
func dataOf(t *testing.T, name string) published {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "testdata", "published", name+".json"))
	if err != nil {
		t.Fatal(err)
	}
	var p published
	if err := json.Unmarshal(b, &p); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return p
}

func floats(t *testing.T, raw json.RawMessage) []float64 {
	t.Helper()
	var x []float64
	if err := json.Unmarshal(raw, &x); err != nil {
		t.Fatalf("%s: %v", raw, err)
	}
	return x
}

func number(t *testing.T, raw json.RawMessage) float64 {
	t.Helper()
	var x float64
	if err := json.Unmarshal(raw, &x); err != nil {
		t.Fatalf("%q: %v", raw, err)
	}
	return x
}

// near fails unless got lies within tol of want.
func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.17g, want %.17g, off by %.3g, allowed %.3g", what, got, want, got-want, tol)
	}
}

func decode(t *testing.T, raw json.RawMessage, into any) {
	t.Helper()
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

// readings are the values of a univariate set; one of them is a string of digits.
func readings(t *testing.T, p published) []float64 {
	t.Helper()
	if raw, ok := p.Data["y"]; ok {
		return floats(t, raw)
	}
	var text string
	decode(t, p.Data["y_digits_string"], &text)
	x := make([]float64, len(text))
	for i, c := range text {
		x[i] = float64(c - '0')
	}
	return x
}
