package meter

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"gatesill/store/record"

	"pgregory.net/rapid"
)

// scales are units and powers of ten of one count that each format can show, with
// the greatest count, and which flags it carries.
var scales = map[string]struct {
	powers map[string][]int
	most   int
	flags  string
	state  []record.PointState
}{
	"fs9721": {map[string][]int{"V": {-6, -5, -4, -3, -2, -1, 0}, "A": {-9, -8, -7, -6, -5, -4, -3, -2, -1, 0}, "ohm": {-1, 0, 1, 2, 3, 4, 5, 6}, "degC": {-1, 0}},
		9999, "AC AUTO HOLD REL BATT", []record.PointState{record.Overload, record.Underload}},
	"fs9922": {map[string][]int{"V": {-6, -5, -4, -3, -2, -1, 0}, "A": {-9, -8, -7, -6, -5, -4, -3, -2, -1, 0}, "ohm": {-1, 0, 1, 2, 3, 4, 5, 6}, "degC": {-1, 0}},
		9999, "AC AUTO HOLD REL MIN MAX BATT", []record.PointState{record.Overload, record.Underload}},
	"es51922": {map[string][]int{"V": {-5, -4, -3, -2, -1}, "A": {-8, -7, -6, -5, -3}},
		22000, "AC AUTO HOLD REL MIN MAX BATT", []record.PointState{record.Overload, record.Underload}},
	"es519xx-4000": {map[string][]int{"V": {-4, -3, -2, -1, 0}, "A": {-7, -6, -5, -4, -2}},
		4000, "AC AUTO MIN MAX BATT", []record.PointState{record.Overload, record.Underload}},
	"polled-ascii": {map[string][]int{"V": {-6, -4, -3, -2, -1, 0}, "A": {-9, -8, -7, -6, -5, -4, -3, -2, -1, 0}, "ohm": {-1, 0, 1, 2, 3, 4}},
		3999, "AC", []record.PointState{record.Overload, record.Underload}},
	"stx":  {map[string][]int{"V": {-6, -5, -4, -3, -2, -1, 0}, "A": {-9, -8, -7, -6, -5, -4, -3, -2, -1, 0}, "degC": {-1}}, 99999999, "", nil},
	"scpi": {map[string][]int{"": {-9, -6, -3}}, 99999999, "", []record.PointState{record.Overload, record.Underload, record.Missing}},
	"text": {map[string][]int{"V": {-6, -3, -1, 0, 2}, "A": {-12, -9, -4, 0}, "ohm": {-3, 0, 3, 6}, "degC": {-2, -1, 0}, "": {-6, -3, 0}},
		99999999, "AC AUTO HOLD REL MIN MAX BATT", []record.PointState{record.Overload, record.Underload, record.Missing}},
}

// What an encoder writes, the decoder reads: value, unit, digit, state and every
// flag that the format carries.
func TestRoundTrip(t *testing.T) {
	for _, f := range Formats {
		s, ok := scales[f.Name]
		if !ok {
			t.Fatalf("no scales for %s", f.Name)
		}
		rapid.Check(t, func(t *rapid.T) {
			var units []string
			for u := range s.powers {
				units = append(units, u)
			}
			slices.Sort(units)
			unit := rapid.SampledFrom(units).Draw(t, "unit")
			power := rapid.SampledFrom(s.powers[unit]).Draw(t, "power")
			n := rapid.Int64Range(int64(-s.most), int64(s.most)).Draw(t, "counts")
			want := Shown{Unit: unit, Digit: scaled(1, power), Value: scaled(n, power)}
			if len(s.state) > 0 && rapid.IntRange(0, 4).Draw(t, "overload") == 0 {
				want.State = rapid.SampledFrom(s.state).Draw(t, "state")
			}
			has := func(flag string) bool {
				return strings.Contains(s.flags, flag) && rapid.Bool().Draw(t, flag)
			}
			want.AC = (unit == "V" || unit == "A") && has("AC")
			want.Auto, want.Hold, want.Relative = has("AUTO"), has("HOLD"), has("REL")
			want.Min, want.Max, want.LowBatt = has("MIN"), has("MAX"), has("BATT")
			b, err := Encode(f.Name, want)
			if err != nil {
				t.Fatalf("%s: %v", f.Name, err)
			}
			d, _ := f.New(Options{})
			skip, length, rs, err := d.Scan(b, false)
			if err != nil || skip != 0 || len(rs) != 1 || !f.Lines && length != f.Length {
				t.Fatalf("%s: %q: skip %d, length %d, %v, %v", f.Name, b, skip, length, rs, err)
			}
			r := rs[0]
			if r.State != want.State || r.Unit != unit {
				t.Fatalf("%s: %q: %+v, want %+v", f.Name, b, r, want)
			}
			if want.State == "" {
				// a value in a display is the float64 nearest to it; an exponent of nine digits is not exact
				tol := 0.0
				if f.Name == "scpi" {
					tol = 1e-8 * math.Abs(want.Value)
				} else if r.Digit != want.Digit {
					t.Fatalf("%s: %q: digit %v, want %v", f.Name, b, r.Digit, want.Digit)
				}
				if !(math.Abs(r.Value-want.Value) <= tol) {
					t.Fatalf("%s: %q: %v, want %v", f.Name, b, r.Value, want.Value)
				}
			}
			if r.AC != want.AC || r.Auto != want.Auto || r.Hold != want.Hold || r.Relative != want.Relative || r.Min != want.Min || r.Max != want.Max || r.LowBatt != want.LowBatt {
				t.Fatalf("%s: %q: flags %q, want %+v", f.Name, b, r.flags(), want)
			}
		})
	}
}

func TestEncodeRefuses(t *testing.T) {
	for _, c := range []struct {
		format string
		shown  []Shown
	}{
		{"no such", []Shown{{Unit: "V", Digit: 1}}},
		{"fs9721", nil},
		{"fs9721", []Shown{{Unit: "V", Digit: 1e-3}, {Unit: "V", Digit: 1e-3}}},
		{"fs9721", []Shown{{Unit: "V", Digit: 1e-3, Value: 10}}},
		{"fs9721", []Shown{{Unit: "V", Digit: 2e-3, Value: 1}}},
		{"fs9721", []Shown{{Unit: "V", Value: 1}}},
		{"fs9922", []Shown{{Unit: "K", Digit: 1}}},
		{"fs9922", []Shown{{Unit: "V", Digit: 1e-3, State: record.Missing}}},
		{"es51922", []Shown{{Unit: "A", Digit: 1e-4}}},
		{"es519xx-4000", []Shown{{Unit: "V", Digit: 1e-3, Value: 4.5}}},
		{"stx", []Shown{{Unit: "V", Digit: 1e-3, State: record.Overload}}},
		{"polled-ascii", []Shown{{Unit: "degC", Digit: 1}}},
		{"scpi", []Shown{{Value: math.NaN()}}},
		{"text", []Shown{{Value: math.NaN(), Digit: 1}}},
		{"fs9721", []Shown{{Unit: "V", Digit: 1e-3, Value: math.NaN()}}},
	} {
		if b, err := Encode(c.format, c.shown...); !errors.Is(err, ErrEncode) {
			t.Errorf("%s %+v: %q, %v", c.format, c.shown, b, err)
		}
	}
}

// Several values make one line.
func TestEncodeLines(t *testing.T) {
	b, err := Encode("text", Shown{Value: 3.012, Unit: "V", Digit: 1e-3}, Shown{Value: 0.2503, Unit: "A", Digit: 1e-4})
	if err != nil || string(b) != "3.012 V,250.3 mA\r\n" {
		t.Errorf("%q, %v", b, err)
	}
	b, err = Encode("scpi", Shown{Value: 3.012}, Shown{Value: -0.25})
	if err != nil || string(b) != "+3.01200000E+00,-2.50000000E-01\r\n" {
		t.Errorf("%q, %v", b, err)
	}
}
