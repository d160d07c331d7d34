package meter

import (
	"strings"
	"testing"
	"time"

	"gatesill/store/record"
)

func TestSteady(t *testing.T) {
	volts := func(digit float64) Reading { return Reading{Unit: "V", Digit: digit} }
	amps := func(digit float64) Reading { return Reading{Unit: "A", Digit: digit} }
	over := Reading{Unit: "V", State: record.Overload}
	ac := Reading{Unit: "V", Digit: 1e-3, AC: true}
	for _, c := range []struct {
		format string
		rs     []Reading
		want   string
	}{
		{"fs9721", []Reading{volts(1e-3), volts(1e-3), volts(1e-2), volts(1e-2), volts(1e-2)}, ",,range changed,,"},
		{"fs9721", []Reading{volts(1e-3), volts(1e-2), volts(1e-3), volts(1e-3)}, ",range changed,,"},
		{"fs9721", []Reading{volts(1e-3), volts(1e-2), volts(1e-1), volts(1e-1)}, ",range changed,range changed,"},
		{"fs9721", []Reading{volts(1e-3), amps(1e-3), volts(1e-3)}, ",unit changed,"},
		{"fs9721", []Reading{volts(1e-3), amps(1e-3), amps(1e-3), amps(1e-4), amps(1e-4)}, ",unit changed,,range changed,"},
		{"fs9721", []Reading{volts(1e-3), over, volts(1e-2), volts(1e-2)}, ",,range changed,"},
		{"fs9721", []Reading{over, volts(1e-2), over, volts(1e-2)}, ",,,"},
		{"fs9721", []Reading{volts(1e-3), ac, volts(1e-3), ac, ac}, ",unit changed,,unit changed,"},
		{"fs9721", []Reading{volts(1e-3), volts(1e-2), over, volts(1e-2), volts(1e-2)}, ",range changed,,range changed,"},
		// lines: the last digit is that of the writing
		{"text", []Reading{volts(1e-3), volts(1e-2), amps(1), volts(1)}, ",,unit changed,"},
	} {
		f, _ := Find(c.format)
		s := NewSteady(f)
		var got []string
		for _, r := range c.rs {
			got = append(got, s.Judge(r))
		}
		if g := strings.Join(got, ","); g != c.want {
			t.Errorf("%s %+v: %q, want %q", c.format, c.rs, g, c.want)
		}
	}
}

// times are milliseconds, each with the frame's text; a repeat is marked r.
func TestRepeats(t *testing.T) {
	type f struct {
		ms   int
		text string
	}
	for _, c := range []struct {
		name, format string
		frames       []f
		want         string
	}{
		{"a steady value is no repeat", "fs9721", []f{{0, "A"}, {400, "A"}, {810, "A"}, {1190, "A"}}, "...."},
		{"sent again at once", "fs9721", []f{{0, "A"}, {400, "A"}, {800, "A"}, {860, "A"}, {1200, "A"}}, "...r."},
		{"another value soon is none", "fs9721", []f{{0, "A"}, {400, "A"}, {800, "A"}, {860, "B"}}, "...."},
		{"just within and just beyond", "fs9721", []f{{0, "A"}, {400, "A"}, {800, "A"}, {1099, "A"}, {1100, "A"}}, "...r."},
		{"a meter that always sends twice is found out", "fs9721", []f{{0, "A"}, {60, "A"}, {400, "A"}, {460, "A"}, {800, "A"}, {860, "A"}}, "...r.r"},
		{"twice by the format", "es519xx-4000", []f{{0, "A"}, {50, "A"}, {400, "A"}, {450, "A"}, {800, "B"}, {850, "B"}}, ".r.r.r"},
		{"twice at even intervals", "es519xx-4000", []f{{0, "A"}, {200, "A"}, {400, "B"}, {600, "B"}}, ".r.r"},
		{"first block lost", "es519xx-4000", []f{{0, "A"}, {400, "B"}, {450, "B"}}, "..r"},
		{"parity in the top bit", "es519xx-4000", []f{{0, "A"}, {50, "\xc1"}}, ".r"},
		{"top bit that counts", "fs9721", []f{{0, "A"}, {400, "A"}, {450, "\xc1"}}, "..."},
	} {
		format, _ := Find(c.format)
		r := NewRepeats(format)
		got := ""
		start := time.Unix(1000, 0)
		for _, x := range c.frames {
			if r.Judge([]byte(x.text), start.Add(time.Duration(x.ms)*time.Millisecond)) {
				got += "r"
			} else {
				got += "."
			}
		}
		if got != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

func TestInterval(t *testing.T) {
	f, _ := Find("fs9721")
	r := NewRepeats(f)
	if r.Interval() != 0 {
		t.Error("an interval before any frame")
	}
	at := time.Unix(1000, 0)
	for i := range 40 {
		step := 400 * time.Millisecond
		if i == 20 {
			step = 30 * time.Second // unplugged for a while
		}
		at = at.Add(step)
		r.Judge([]byte{byte(i)}, at)
	}
	if got := r.Interval(); got != 400*time.Millisecond {
		t.Errorf("interval %v", got)
	}
	r.Lost()
	if r.Judge([]byte{39}, at.Add(time.Millisecond)) {
		t.Error("a repeat of a frame before the line was lost")
	}
}
