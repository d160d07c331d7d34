package rehearsal

import (
	"bytes"
	"errors"
	"math"
	"strings"
	"testing"

	"gatesill/acquire/meter"
	"gatesill/store/record"
)

// read decodes what came in on one line.
func read(t *testing.T, format string, sent []Sent, line string) (out []meter.Reading, at []float64) {
	t.Helper()
	f, ok := meter.Find(format)
	if !ok {
		t.Fatalf("no format %q", format)
	}
	for _, s := range sent {
		if s.Line != line {
			continue
		}
		d, err := f.New(meter.Options{})
		if err != nil {
			t.Fatal(err)
		}
		skip, n, r, err := d.Scan(append(s.Bytes, '\n'), true) // LF: a frame that ends with CR is whole
		if err != nil || skip != 0 || n == 0 {
			t.Fatalf("%s: % x (%q): skip %d, length %d: %v", format, s.Bytes, s.Bytes, skip, n, err)
		}
		out = append(out, r...)
		for range r {
			at = append(at, s.At)
		}
	}
	return out, at
}

// one is a bench with one meter on the gate, or as change says.
func one(t *testing.T, m Meter, change func(*Config)) *Bench {
	t.Helper()
	return hand(t, cold(), func(c *Config) {
		c.Meters = []Meter{m}
		if change != nil {
			change(c)
		}
	})
}

var chips = []struct {
	speaks string
	counts float64
	tops   []float64
	ask    string
}{
	{"fs9721", 4000, []float64{4, 40}, ""},
	{"fs9922", 6000, []float64{6, 60}, ""},
	{"es51922", 22000, []float64{2.2, 22, 220}, ""},
	{"es519xx-4000", 4000, []float64{4, 40}, ""},
	{"polled-ascii", 3000, []float64{3, 30}, "D"},
	{"stx", 50000, []float64{50}, ""},
	{"scpi", 12000, []float64{1.2, 12, 120}, "READ?\n"},
	{"text", 10000, []float64{1, 10, 100}, ""},
}

// Every format's readings are the truth within half a count.
func TestFormatsShowTheTruth(t *testing.T) {
	for _, c := range chips {
		b := one(t, Meter{Role: "gate", Speaks: c.speaks, Counts: c.counts, Tops: c.tops, Auto: true, Cycle: 0.3, Integration: 0.1, Processing: 0.05}, nil)
		if c.ask != "" && !b.list[0].format.scpi && !strings.Contains(c.ask, b.list[0].format.ask) {
			t.Errorf("%s: asked with %q, wants %q", c.speaks, c.ask, b.list[0].format.ask)
		}
		for k, v := range []float64{0.7512, 2.92349, 7.77, -1.5} {
			b.Knob(v, 0)
			from := float64(k) * 10
			b.Step(from + 3) // ranges found
			b.Hear("line-gate", []byte(c.ask))
			if c.ask == "D" {
				b.Step(from + 3.2)
			} else if c.ask != "" {
				b.Step(from + 4)
				b.Hear("line-gate", []byte(c.ask))
			}
			rs, _ := read(t, c.speaks, b.Step(from+5), "line-gate")
			if c.ask == "D" {
				b.Hear("line-gate", []byte(c.ask))
				rs, _ = read(t, c.speaks, b.Step(from+6), "line-gate")
			}
			if len(rs) == 0 {
				t.Errorf("%s at %g V: nothing", c.speaks, v)
				continue
			}
			r := rs[len(rs)-1]
			if r.State != "" || math.Abs(r.Value-v) > 0.51*r.Digit+1e-9 && r.Digit > 0 || math.Abs(r.Value-v) > 0.001 || r.Refusal("V") != "" {
				t.Errorf("%s at %g V: %+v", c.speaks, v, r)
			}
			b.Step(from + 10)
		}
	}
}

// An overload costs one frame that says so and two conversions; going back down
// costs two conversions.
func TestRangeChangeCosts(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "fs9721", Counts: 4000, Tops: []float64{4, 40}, Auto: true, Cycle: 0.25, Integration: 0.1}, nil)
	b.Knob(3, 0)
	rs, at := read(t, "fs9721", b.Step(5), "line-gate")
	before := len(at)
	if before < 18 || before > 20 {
		t.Fatalf("%d frames in 5 s at 0.25 s each", before)
	}
	b.Knob(5, 0)
	more, when := read(t, "fs9721", b.Step(10), "line-gate")
	rs, at = append(rs, more...), append(at, when...)
	over := -1
	for k, r := range rs {
		switch {
		case r.State == record.Overload && over < 0:
			over = k
		case r.State == record.Overload:
			t.Errorf("frame %d: overload again", k)
		}
	}
	if over < before-1 || over+2 >= len(rs) {
		t.Fatalf("overload at frame %d of %d, %d before the step", over, len(rs), before)
	}
	near(t, "gap after overload", at[over+1]-at[over], 3*0.25, 1e-6)
	near(t, "gap before overload", at[over]-at[over-1], 0.25, 1e-6)
	near(t, "value in the upper range", rs[over+2].Value, 5, 0.005+1e-9)
	near(t, "its digit", rs[over+2].Digit, 0.01, 1e-9)
	b.Knob(3.5, 0)
	rs, at = read(t, "fs9721", b.Step(15), "line-gate")
	for k := 1; k < len(at); k++ {
		want := 0.25
		if rs[k].Digit < rs[k-1].Digit {
			want = 3 * 0.25
		}
		near(t, "gap", at[k]-at[k-1], want, 1e-6)
	}
	near(t, "digit back down", rs[len(rs)-1].Digit, 0.001, 1e-9)
	for _, r := range rs {
		if r.State != "" {
			t.Errorf("going down: %+v", r)
		}
	}
	// Above the last range it says overload every time.
	b.Knob(50, 0)
	rs, _ = read(t, "fs9721", b.Step(20), "line-gate")
	if r := rs[len(rs)-1]; r.State != record.Overload {
		t.Errorf("50 V in a range of 40: %+v", r)
	}
}

// The value of a frame is the mean over the integration time, which ended Processing
// and Lag before the frame: on a ramp it is the gate voltage of the middle.
func TestIntegrationAndDelays(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "text", Counts: 1e6, Tops: []float64{10}, Cycle: 0.3, Integration: 0.1, Processing: 0.05, Lag: 0.03, Gain: 1.01, Offset: 0.2}, nil)
	b.Knob(9, 0.4)
	rs, at := read(t, "text", b.Step(20), "line-gate")
	if len(rs) < 60 {
		t.Fatalf("%d frames", len(rs))
	}
	for k, r := range rs {
		near(t, "mean", r.Value, 1.01*0.4*(at[k]-0.05-0.03-0.05)+0.2, 1e-5)
	}
}

func TestNoise(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "text", Counts: 1e6, Tops: []float64{10}, Cycle: 0.01, Integration: 0.01, Noise: 8}, nil)
	b.Knob(3, 0)
	rs, _ := read(t, "text", b.Step(40), "line-gate")
	var s, q float64
	for _, r := range rs {
		s += r.Value - 3
		q += (r.Value - 3) * (r.Value - 3)
	}
	n := float64(len(rs))
	near(t, "standard deviation", math.Sqrt(q/n), 8e-5, 4*8e-5/math.Sqrt(2*n))
	near(t, "mean", s/n, 0, 4*8e-5/math.Sqrt(n))
}

func TestSentTwice(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "es519xx-4000", Counts: 4000, Tops: []float64{4}, Cycle: 0.5, Integration: 0.1}, nil)
	b.Knob(3, 0.4)
	sent := b.Step(6)
	if len(sent) < 20 {
		t.Fatalf("%d frames", len(sent))
	}
	for k := 0; k+3 < len(sent); k += 2 {
		if !bytes.Equal(sent[k].Bytes, sent[k+1].Bytes) || bytes.Equal(sent[k].Bytes, sent[k+2].Bytes) {
			t.Errorf("frames %d to %d: %q %q %q", k, k+2, sent[k].Bytes, sent[k+1].Bytes, sent[k+2].Bytes)
		}
	}
}

func TestColumnsOfOneLine(t *testing.T) {
	c, err := Standard(OneLine)
	if err != nil {
		t.Fatal(err)
	}
	b, err := NewBench(c)
	if err != nil {
		t.Fatal(err)
	}
	b.Insert("R1")
	b.Knob(3.1, 0)
	rs, _ := read(t, "text", b.Step(2), "line")
	s := b.Truth()
	if len(rs) < 3*35 || s.Id < 1e-3 {
		t.Fatalf("%d readings, %g A", len(rs), s.Id)
	}
	for k, r := range rs {
		if r.Column != k%3+1 || r.Unit != "" {
			t.Fatalf("reading %d: %+v", k, r)
		}
	}
	last := rs[len(rs)-3:]
	near(t, "column 1", last[0].Value, s.Vg, 3e-4)
	near(t, "column 2", last[1].Value, s.Id, 1e-4)
	near(t, "column 3", last[2].Value, s.Vl, 5e-3)
}

func TestCounting(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "text", Counts: 1e5, Tops: []float64{10}, Cycle: 0.001, Counting: true}, nil)
	rs, _ := read(t, "text", b.Step(1), "line-gate")
	if len(rs) < 999 {
		t.Fatalf("%d frames in 1 s at 1 ms", len(rs))
	}
	for k, r := range rs {
		near(t, "count", r.Value/1e-4, float64(k), 1e-6)
	}
}

// converse gives a message to a line and collects what it says within s seconds.
func converse(b *Bench, line, message string, s float64) string {
	b.Hear(line, []byte(message))
	var out []byte
	for _, x := range b.Step(b.now + s) {
		if x.Line == line {
			out = append(out, x.Bytes...)
		}
	}
	return strings.ReplaceAll(string(out), "\r", "")
}

func TestMeterSCPI(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "scpi", Counts: 12000, Tops: []float64{1.2, 12, 120}, Auto: true, Cycle: 0.02, Integration: 0.02, Processing: 0.001}, nil)
	b.Knob(3, 0)
	say := func(message, want string) {
		t.Helper()
		if got := strings.TrimSpace(converse(b, "line-gate", message, 1)); got != want {
			t.Errorf("%q: %q, want %q", message, got, want)
		}
	}
	say("*idn?\n", "REHEARSAL,simulated gate meter,0,1")
	say("FETC?\r\n", "")
	say("SYST:ERR?\n", stale)
	say("CONF:VOLT:DC 10;*OPC?\n", "1")
	say("READ?\r", "+3.00000000E+00")
	say("fetch?\n", "+3.00000000E+00")
	say(":SENSe:VOLTage:DC:RANGe?\n", "+1.20000000E+01")
	say("CONF:VOLT:DC 1 V\n", "")
	say("READ?\n", "+9.90000000E+37")
	say("CONF:VOLT:DC\n", "")
	say("READ?\n", "+3.00000000E+00")
	say("CONF:CURR:DC\n", "")
	say("READ?\n", "+0.00000000E+00")
	say("MEAS:VOLT:DC?\n", "+3.00000000E+00")
	say("CONF:VOLT:DC 5000\n", "")
	say("FOO:BAR\n", "")
	say("SYST:ERR?;:SYST:ERR?;:SYST:ERR?\n", outOfRange+";"+undefinedHeader+";"+noError)
	say("*ESR?\n", "48")
	say("VOLT:NPLC 10;NPLC?\n", "") // every command is spelt from the root
	say("SYST:ERR?\n", undefinedHeader)
	// Ten periods of 50 Hz take 0.2 s.
	b.Hear("line-gate", []byte("READ?\n"))
	start := b.now
	near(t, "10 power-line cycles", b.Step(start + 1)[0].At, start+0.002+0.2+0.001, 1e-6)
	// Two questions at once are answered one after the other.
	if got := converse(b, "line-gate", "READ?\nREAD?\n", 1); strings.Count(got, "\n") != 2 {
		t.Errorf("two questions: %q", got)
	}
}

func TestMeterFaults(t *testing.T) {
	build := func() *Bench {
		b := one(t, Meter{Role: "gate", Speaks: "fs9721", Counts: 4000, Tops: []float64{0.4, 4, 40}, Auto: true, Cycle: 0.25, Integration: 0.1}, func(c *Config) {
			c.Meters = append(c.Meters, Meter{Role: "load", Speaks: "text", Counts: 10000, Tops: []float64{10}, Cycle: 0.25, Integration: 0.1})
		})
		b.Knob(0.3, 0)
		b.Step(10)
		return b
	}
	b := build()
	usual, _ := read(t, "fs9721", b.Step(15), "line-gate")
	if r := usual[len(usual)-1]; math.Abs(r.Value-0.3) > 1e-4 {
		t.Fatalf("%+v", r)
	}
	during := func(f Fault, check func(rs []meter.Reading)) {
		t.Helper()
		f.Role, f.For = "gate", 5
		b := build()
		if err := b.Fault(f); err != nil {
			t.Fatal(err)
		}
		b.Knob(0.3001, 0) // so that a display that lives shows it
		rs, _ := read(t, "fs9721", b.Step(15), "line-gate")
		check(rs)
		b.Step(16.2)
		b.Knob(0.25, 0)
		b.Step(17)
		rs, _ = read(t, "fs9721", b.Step(20), "line-gate")
		if len(rs) < 10 || math.Abs(rs[0].Value-0.25) > 1e-4 || rs[0].Refusal("V") != "" {
			t.Errorf("%s: still there afterwards: %d readings, %+v", f.Kind, len(rs), rs)
		}
	}
	during(Fault{Kind: Silence}, func(rs []meter.Reading) {
		if len(rs) > 1 { // one may have been under way
			t.Errorf("silent: %d readings", len(rs))
		}
	})
	during(Fault{Kind: Overload}, func(rs []meter.Reading) {
		if r := rs[len(rs)-1]; len(rs) < 18 || r.State != record.Overload {
			t.Errorf("overload: %d readings, %+v", len(rs), r)
		}
	})
	during(Fault{Kind: LostPrefix}, func(rs []meter.Reading) {
		if r := rs[len(rs)-1]; math.Abs(r.Value-300.1) > 0.1 {
			t.Errorf("lost prefix: %+v", r)
		}
	})
	during(Fault{Kind: Stuck}, func(rs []meter.Reading) {
		if r := rs[len(rs)-1]; len(rs) < 18 || math.Abs(r.Value-0.3) > 1e-9 || r.Hold {
			t.Errorf("stuck: %+v", r)
		}
	})
	during(Fault{Kind: Hold}, func(rs []meter.Reading) {
		if r := rs[len(rs)-1]; len(rs) < 18 || math.Abs(r.Value-0.3) > 1e-9 || r.Refusal("V") != "held" {
			t.Errorf("hold: %+v", r)
		}
	})
	during(Fault{Kind: Slow, Value: 0.75}, func(rs []meter.Reading) {
		if len(rs) < 4 || len(rs) > 7 {
			t.Errorf("slow: %d readings in 5 s at 1 s each", len(rs))
		}
	})
	b = build()
	_, at := read(t, "fs9721", b.Step(12), "line-gate")
	b.Fault(Fault{Kind: Late, Role: "gate", Value: 0.1})
	_, later := read(t, "fs9721", b.Step(14), "line-gate")
	near(t, "lag", math.Mod(later[len(later)-1]-at[len(at)-1], 0.25), 0.1, 1e-6)

	for _, f := range []Fault{{Kind: "rust", Role: "gate"}, {Kind: Silence, Role: "drain"}, {Kind: Refused, Role: "gate"}, {Kind: Silence, Role: "gate", For: -1}, {Kind: Swapped, Role: "gate"}} {
		if err := b.Fault(f); !errors.Is(err, ErrConfig) {
			t.Errorf("%+v: %v", f, err)
		}
	}
}

func TestSwappedAndUnplugged(t *testing.T) {
	meters := func() *Bench {
		b := one(t, Meter{Role: "gate", Speaks: "text", Counts: 10000, Tops: []float64{10}, Cycle: 0.1, Integration: 0.1}, func(c *Config) {
			c.Meters = append(c.Meters, Meter{Role: "drain", Speaks: "text", Counts: 10000, Tops: []float64{100}, Cycle: 0.1, Integration: 0.1})
		})
		b.Knob(3, 0)
		b.Step(5)
		return b
	}
	mean := func(b *Bench, until float64, line string) float64 {
		rs, _ := read(t, "text", b.Step(until), line)
		if len(rs) == 0 {
			return math.NaN()
		}
		s := 0.0
		for _, r := range rs {
			s += r.Value
		}
		return s / float64(len(rs))
	}
	b := meters()
	b.Fault(Fault{Kind: Swapped, Role: "gate", With: "drain", For: 5})
	near(t, "gate's line while swapped", mean(b, 9.9, "line-gate"), 12, 1e-9)
	b.Step(10.1)
	near(t, "afterwards", mean(b, 15, "line-gate"), 3, 1e-9)
	b.Fault(Fault{Kind: Swapped, Role: "gate", With: "drain"})
	near(t, "drain's line while swapped", mean(b, 20, "line-drain"), 3, 1e-9)
	b.Fault(Fault{Kind: Clear, Role: "gate"})
	near(t, "drain's line, cleared", mean(b, 25, "line-drain"), 12, 1e-9)
	b.Fault(Fault{Kind: Unplug, Role: "gate", For: 2})
	if x := mean(b, 27, "line-gate"); !math.IsNaN(x) {
		t.Errorf("unplugged, and says %g", x)
	}
	near(t, "plugged in again", mean(b, 30, "line-gate"), 3, 1e-9)
}

// Garbage is bytes more: between the frames whole frames are left, and about half of
// those that are hit are hit inside.
func TestGarbage(t *testing.T) {
	b := one(t, Meter{Role: "gate", Speaks: "text", Counts: 10000, Tops: []float64{10}, Cycle: 0.01, Integration: 0.01}, nil)
	b.Knob(3, 0)
	b.Step(1)
	b.Fault(Fault{Kind: Garbage, Role: "gate", Value: 0.5})
	whole, between, inside := 0, 0, 0
	frame := []byte("3.000 V\r\n")
	for _, s := range b.Step(11) {
		switch {
		case bytes.Equal(s.Bytes, frame):
			whole++
		case bytes.HasSuffix(s.Bytes, frame) && s.Frame:
			between++
		case !bytes.Contains(s.Bytes, frame) && len(s.Bytes) > len(frame):
			inside++
		}
	}
	if n := whole + between + inside; n < 990 || whole < 420 || whole > 580 || between < 180 || inside < 140 {
		t.Errorf("of 1000 frames %d whole, %d with bytes before, %d with bytes inside", whole, between, inside)
	}
}
