package record

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
)

func TestParseDecimals(t *testing.T) {
	nan := math.NaN()
	check := func(text string, want ...float64) {
		t.Helper()
		got, err := ParseDecimals(nil, []byte(text))
		if err != nil || len(got) != len(want) {
			t.Errorf("%s: %v, %v; want %v", text, got, err, want)
			return
		}
		for i := range want {
			if math.Float64bits(got[i]) != math.Float64bits(want[i]) && !(math.IsNaN(got[i]) && math.IsNaN(want[i])) {
				t.Errorf("%s: number %d is %v, want %v", text, i, got[i], want[i])
			}
		}
	}
	check("[]")
	check(" [ ] ")
	check("[1]", 1)
	check("[null]", nan)
	check("[3.012,0.0123,null,-1.5e-3,2E+2,0,-0]", 3.012, 0.0123, nan, -1.5e-3, 200, 0, math.Copysign(0, -1))
	check("\t[ 1 ,\n2\r, null ]\n", 1, 2, nan)
	// Both sides of each limit of the fast way: 2^53, 10^22, 19 digits.
	check("[9007199254740991,9007199254740993,9007199254740992e1]", 9007199254740991, 9007199254740992, 9007199254740992e1)
	check("[1e22,1e23,1e-22,1e-23,123e22,123e23]", 1e22, 1e23, 1e-22, 1e-23, 123e22, 123e23)
	check("[0.1234567890123456789,0.12345678901234567891,1234567890123456789012]",
		0.1234567890123456789, 0.12345678901234567891, 1234567890123456789012)
	check("[0.00000000000000000000000000000000000001]", 1e-38)
	check("[1e-400,5e-324,1.7976931348623157e308]", 0, 5e-324, math.MaxFloat64)
	refuse := func(text string) {
		t.Helper()
		if got, err := ParseDecimals(nil, []byte(text)); !errors.Is(err, ErrInvalid) {
			t.Errorf("%q: %v, %v; want a refusal", text, got, err)
		}
	}
	for _, text := range []string{"", " ", "1", "[", "[1", "[1,", "[1,]", "[,1]", "[1 2]", "[1]x", "[1][", "]", "{}", "[nul]", "[nulll]", "[-null]",
		"[+1]", "[.5]", "[5.]", "[01]", "[-01]", "[1e]", "[1e+]", "[--1]", "[1e999]", "[-1e999]", "[0x10]", "[NaN]", "[Infinity]",
		"[\"1\"]", "[1_000]", "[true]", "[1e99999999999999999999999]"} {
		refuse(text)
	}
}

func TestAppendDecimals(t *testing.T) {
	got := string(AppendDecimals([]byte("x"), []float64{3.012, math.NaN(), 1e-9, math.Inf(1), 1e21, -0.5, 0}))
	if want := "x[3.012,null,1e-09,null,1e+21,-0.5,0]"; got != want {
		t.Errorf("%s, want %s", got, want)
	}
	if got := string(AppendDecimals(nil, nil)); got != "[]" {
		t.Errorf("no values: %s", got)
	}
}

// TestDecimalsRoundTrip writes and reads numbers of every magnitude (seed 1).
func TestDecimalsRoundTrip(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	values := make([]float64, 0, 200_000)
	for len(values) < cap(values) {
		if x := math.Float64frombits(r.Uint64()); !math.IsNaN(x) && !math.IsInf(x, 0) {
			values = append(values, x, float64(r.IntN(1e7))/1e4)
		}
	}
	got, err := ParseDecimals(nil, AppendDecimals(nil, values))
	if err != nil || len(got) != len(values) {
		t.Fatalf("%d of %d, %v", len(got), len(values), err)
	}
	for i := range values {
		if got[i] != values[i] {
			t.Fatalf("%v comes back as %v", values[i], got[i])
		}
	}
}

// FuzzParseDecimals holds the reader against encoding/json, which hands each
// number to strconv.
func FuzzParseDecimals(f *testing.F) {
	for _, s := range []string{"[1,null,-2.5e-3]", "[9007199254740993]", "[01]", "[1e23]", " [ 1 ] ", "[0.12345678901234567890123]", "[1"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		got, err := ParseDecimals(nil, text)
		if err != nil && !errors.Is(err, ErrInvalid) {
			t.Errorf("%q: %v is not ErrInvalid", text, err)
		}
		var want []*float64
		jsonErr := json.Unmarshal(text, &want)
		if isNull := string(text) != "" && want == nil; isNull && jsonErr == nil {
			return // a bare null is no array to us
		}
		if (err == nil) != (jsonErr == nil) {
			t.Fatalf("%q: %v, encoding/json says %v", text, err, jsonErr)
		}
		if err != nil {
			return
		}
		if len(got) != len(want) {
			t.Fatalf("%q: %d numbers, want %d", text, len(got), len(want))
		}
		for i, w := range want {
			if w == nil != math.IsNaN(got[i]) || w != nil && math.Float64bits(*w) != math.Float64bits(got[i]) {
				t.Errorf("%q: number %d is %v", text, i, got[i])
			}
		}
	})
}

func BenchmarkParseDecimals(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	text := []byte{'['}
	const n = 100_000
	for i := range n {
		if i > 0 {
			text = append(text, ',')
		}
		text = strconv.AppendFloat(text, r.Float64()*5, 'f', 4, 64)
	}
	text = append(text, ']')
	var dst []float64
	for b.Loop() {
		var err error
		if dst, err = ParseDecimals(dst[:0], text); err != nil || len(dst) != n {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.N)*n/b.Elapsed().Seconds()/1e6, "Mvalues/s")
}
