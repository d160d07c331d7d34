package scpi

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/store/record"
)

func TestNumber(t *testing.T) {
	nan := math.NaN()
	for text, x := range map[string]struct {
		value float64
		state record.PointState
	}{
		"+1.23456789E-03": {1.23456789e-3, ""}, "-5": {-5, ""}, " 0.125 ": {0.125, ""}, "1e3": {1000, ""}, ".5": {.5, ""}, "-0": {math.Copysign(0, -1), ""},
		"8.9E37": {8.9e37, ""}, "-8.9E37": {-8.9e37, ""},
		"+9.90000000E+37": {nan, record.Overload}, "9.9E37": {nan, record.Overload}, "9.9e+37": {nan, record.Overload}, "9.0E37": {nan, record.Overload},
		"-9.90000000E+37": {nan, record.Underload}, "-9.9E37": {nan, record.Underload},
		"9.91E37": {nan, record.Missing}, "+9.91000000E+37": {nan, record.Missing}, "-9.91E37": {nan, record.Missing}, "1E38": {nan, record.Missing},
	} {
		v, state, err := Number(text)
		if err != nil || state != x.state || v != x.value && !(math.IsNaN(v) && math.IsNaN(x.value)) || math.Signbit(v) != math.Signbit(x.value) && state == "" {
			t.Errorf("%q: %v, %q, %v", text, v, state, err)
		}
	}
	for _, text := range []string{"", "-", "1.5V", "1,5", "1 2", "NaN", "Inf", "0x10", "1_000", "1e", "1e999", "--1", "1.5\x00", "µ"} {
		if v, state, err := Number(text); !errors.Is(err, ErrReply) || !math.IsNaN(v) || state != "" {
			t.Errorf("%q: %v, %q, %v", text, v, state, err)
		}
	}
}

func TestParseEntry(t *testing.T) {
	for text, want := range map[string]Entry{
		`0,"No error"`: {0, "No error"}, `+0,"No error"`: {0, "No error"}, `0`: {}, `-113,"Undefined header"`: {-113, "Undefined header"}, `-113`: {Code: -113},
		`-222,"Data out of range;""VOLT"""`: {-222, `Data out of range;"VOLT"`}, `301, Overheated`: {301, "Overheated"}, `1,`: {Code: 1}, ` -350 , "Queue overflow" `: {-350, "Queue overflow"}, `5,"`: {5, `"`},
	} {
		if got, err := ParseEntry(text); err != nil || got != want {
			t.Errorf("%q: %+v, %v", text, got, err)
		}
	}
	for _, text := range []string{"", "1", "+1", "No error", "1.5,x", ",x", "99999999999,x", `"0",x`} {
		if got, err := ParseEntry(text); !errors.Is(err, ErrReply) {
			t.Errorf("%q: %+v, %v", text, got, err)
		}
	}
}

func TestParseIdentity(t *testing.T) {
	for text, want := range map[string]Identity{
		"A,B,C,D":      {Maker: "A", Model: "B", Serial: "C", Firmware: "D"},
		"A, B ,0,0":    {Maker: "A", Model: "B"},
		"A,B,C,D,E":    {Maker: "A", Model: "B", Serial: "C", Firmware: "D,E"},
		"A,B":          {Maker: "A", Model: "B"},
		"PSU 3005 2.1": {Model: "PSU 3005 2.1"},
		"":             {},
	} {
		want.Text = text
		if got := ParseIdentity(text); got != want {
			t.Errorf("%q: %+v", text, got)
		}
	}
}

// split gives the lines of some pieces.
func split(pieces ...[]byte) ([]string, error) {
	var s splitter
	var lines []string
	for _, p := range pieces {
		s.add(p)
		for {
			l, ok, err := s.next()
			if err != nil {
				return lines, err
			}
			if !ok {
				break
			}
			lines = append(lines, l)
		}
	}
	return lines, nil
}

// How bytes are cut into pieces on their way changes nothing in the lines.
func TestLinesDoNotDependOnThePieces(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		words := rapid.SliceOf(rapid.SampledFrom([]string{"a", "1.5", " ", "\r", "\n", "\r\n", "x y", ","})).Draw(t, "words")
		text := []byte(strings.Join(words, ""))
		whole, err := split(text)
		if err != nil {
			t.Fatal(err)
		}
		var pieces [][]byte
		for rest := text; len(rest) > 0; {
			n := rapid.IntRange(1, len(rest)).Draw(t, "cut")
			pieces, rest = append(pieces, rest[:n]), rest[n:]
		}
		if got, err := split(pieces...); err != nil || !slices.Equal(got, whole) {
			t.Fatalf("%q in pieces %q gives %q, whole %q (%v)", text, pieces, got, whole, err)
		}
		var want []string // by the standard library
		for _, l := range strings.FieldsFunc(string(text[:strings.LastIndexAny("\n"+string(text), "\r\n")]), func(r rune) bool { return r == '\r' || r == '\n' }) {
			if l = strings.TrimSpace(l); l != "" {
				want = append(want, l)
			}
		}
		if !slices.Equal(whole, want) {
			t.Fatalf("%q gives %q, want %q", text, whole, want)
		}
	})
}

func FuzzSplitter(f *testing.F) {
	f.Add([]byte("+1.5\r\n\r\nREAD?\r+2"), 3)
	f.Add([]byte("\r\r\n\n "), 1)
	f.Fuzz(func(t *testing.T, text []byte, at int) {
		whole, err := split(text)
		if err != nil {
			if !errors.Is(err, ErrReply) || len(text) <= maxLine {
				t.Fatal(err)
			}
			return
		}
		for _, l := range whole {
			if l == "" || strings.ContainsAny(l, "\r\n") {
				t.Fatalf("%q", l)
			}
		}
		if at >= 0 && at <= len(text) && len(text) <= maxLine {
			if got, err := split(text[:at], text[at:]); err != nil || !slices.Equal(got, whole) {
				t.Fatalf("%q and %q, %v", got, whole, err)
			}
		}
	})
}

func FuzzNumber(f *testing.F) {
	for _, s := range []string{"+1.23456789E-03", "9.9E37", "-9.91E37", "1e", "0x1p-2", ""} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		v, state, err := Number(text)
		switch {
		case err != nil && (!errors.Is(err, ErrReply) || !math.IsNaN(v) || state != ""):
			t.Fatalf("%v %q %v", v, state, err)
		case err == nil && math.IsNaN(v) != (state != ""):
			t.Fatalf("%v %q", v, state)
		case math.Abs(v) >= leastMark:
			t.Fatalf("%v passes for a reading", v)
		}
	})
}

func FuzzParseReplies(f *testing.F) {
	for _, s := range []string{`0,"No error"`, `-222,"a;""b"""`, "A,B,0,1.0", `1,"`, "\x00"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if e, err := ParseEntry(text); err != nil && !errors.Is(err, ErrReply) || err != nil && e != (Entry{}) {
			t.Fatalf("%+v %v", e, err)
		}
		id := ParseIdentity(text)
		if id.Text != text || len(id.Maker)+len(id.Model)+len(id.Serial)+len(id.Firmware) > len(text) {
			t.Fatalf("%+v", id)
		}
	})
}
