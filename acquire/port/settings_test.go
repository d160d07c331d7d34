package port

import (
	"errors"
	"testing"
	"time"

	"pgregory.net/rapid"
)

func TestParseSettings(t *testing.T) {
	for text, want := range map[string]string{
		"":                        "9600 8N1",
		"2400 8N1":                "2400 8N1",
		"7o1 19230":               "19230 7O1",
		"1200\t7N2 dtr=0 rts=1":   "1200 7N2 dtr=0 rts=1",
		"8E1.5":                   "9600 8E1.5",
		"DTR=1":                   "9600 8N1 dtr=1",
		"50":                      "50 8N1",
		"  4000000   5N2  RTS=0 ": "4000000 5N2 rts=0",
	} {
		if s, err := ParseSettings(text); err != nil || s.String() != want {
			t.Errorf("%q: %v, %v; want %s", text, s, err, want)
		}
	}
	for _, text := range []string{
		"0", "49", "4000001", "-9600", "9600 9600", "8N1 7O1", "4N1", "9N1", "8X1", "8N3", "8N", "8N1.50",
		"dtr=2", "dtr=", "cts=1", "dtr=1 dtr=0", "fast", "9600baud", "9600,8,N,1", "1e3", "99999999999999999999",
	} {
		if s, err := ParseSettings(text); !errors.Is(err, ErrSettings) || s != (Settings{}) {
			t.Errorf("%q: %v, %v", text, s, err)
		}
	}
	d, r := Settings{}.lines()
	if !d || r {
		t.Error("unsaid, DTR is to be high and RTS low")
	}
}

func TestByteTime(t *testing.T) {
	for text, want := range map[string]time.Duration{ // bits a byte over baud, by hand
		"2400 8N1":  4166666,
		"19230 7O1": 520020,
		"1200 7N2":  8333333,
		"9600 8E2":  1250000,
	} {
		s, err := ParseSettings(text)
		if err != nil {
			t.Fatal(err)
		}
		if got := s.ByteTime(); got != want {
			t.Errorf("%s: %d ns, want %d", text, got, want)
		}
	}
	if (Settings{}).ByteTime() != 0 {
		t.Error("a line without a baud rate has no byte time")
	}
}

func TestSettingsGoThereAndBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		line := rapid.SampledFrom([]*bool{nil, new(bool), func() *bool { b := true; return &b }()})
		s := Settings{
			Baud:     rapid.IntRange(leastBaud, greatestBaud).Draw(t, "baud"),
			DataBits: rapid.IntRange(5, 8).Draw(t, "data"),
			Parity:   rapid.SampledFrom([]byte("NOE")).Draw(t, "parity"),
			StopBits: rapid.SampledFrom([]float64{1, 1.5, 2}).Draw(t, "stop"),
			DTR:      line.Draw(t, "dtr"), RTS: line.Draw(t, "rts"),
		}
		back, err := ParseSettings(s.String())
		if err != nil || back.String() != s.String() {
			t.Fatalf("%v became %v, %v", s, back, err)
		}
	})
}

func FuzzParseSettings(f *testing.F) {
	for _, s := range []string{"", "2400 8N1", "1200 7N2 dtr=0 rts=1", "8N1.5", "=", "dtr=1\x00"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		s, err := ParseSettings(text)
		if err != nil {
			if !errors.Is(err, ErrSettings) {
				t.Fatal(err)
			}
			return
		}
		if s.ByteTime() <= 0 {
			t.Fatalf("%v takes no time", s)
		}
		if back, err := ParseSettings(s.String()); err != nil || back.String() != s.String() {
			t.Fatalf("%v became %v, %v", s, back, err)
		}
	})
}
