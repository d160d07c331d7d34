package stats

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"
)

// published is one data set of testdata/published: figures that others printed,
// each file with its source and how it was come by.
type published struct {
	Data      map[string]json.RawMessage
	Expected  map[string]json.RawMessage
	Tolerance map[string]json.RawMessage

	Recomputed map[string]json.RawMessage    // full precision, by us
	Removed    []float64                     `json:"removed_in_order"`
	Critical   map[string]map[string]float64 `json:"critical_values_recomputed"`
}

func load(t *testing.T, name string) published {
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
