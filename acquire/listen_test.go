package acquire

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

// At 2400 8N1 a byte takes 4.1667 ms and 14 of them 58.3 ms.
func TestListenTimes(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "fs9721"})
	r.open(0)
	r.expect("opening", "0.0ms opened")
	f := r.frame("fs9721", volts(3.012))
	r.bytes(1000, f)
	r.expect("whole in one read", "941.7ms gate=3.012V/0.001")
	r.bytes(1400, f[:1])
	r.bytes(1430, f[1:9])
	r.expect("not whole", "")
	r.bytes(1460, f[9:])
	r.expect("byte by byte: the first byte ended when it was read", "1395.8ms gate=3.012V/0.001")
	r.bytes(1850, f[:6])
	r.bytes(1880, f[6:])
	r.expect("six bytes at once", "1825.0ms gate=3.012V/0.001")
	// The reader was held up: two frames in one read, and the first byte of a third.
	// Alike, and as late as can be, the second looks like a repeat.
	r.bytes(3000, append(append(append([]byte{}, f...), r.frame("fs9721", volts(3.013))...), f[0]))
	r.expect("held up", "2879.2ms gate=3.012V/0.001; 2937.5ms gate=3.013V/0.001")
	r.bytes(3050, f[1:])
	r.expect("its rest", "2995.8ms gate=3.012V/0.001")
}

// Times do not go back: a Read that was held up brings less than the next, at once.
func TestListenTimesGoForward(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "fs9721"})
	r.open(0)
	f := r.frame("fs9721", volts(3.012))
	r.bytes(10, f) // cannot have begun before the line was open
	r.bytes(1000, f)
	g := r.frame("fs9721", volts(3.014))
	r.bytes(1500, g[:2])
	r.bytes(1501, append(append([]byte{}, g[2:]...), r.frame("fs9721", volts(3.013))...))
	r.bytes(1502, append(append([]byte{}, f...), f...))
	r.expect("order", "0.0ms opened; 0.0ms gate=3.012V/0.001; 941.7ms gate=3.012V/0.001; 1491.7ms gate=3.014V/0.001; "+
		"1491.7ms gate=3.013V/0.001; 1491.7ms gate=3.012V/0.001; 1491.7ms gate=3.012V/0.001(repeat)")
}

func TestListenWithoutWireTime(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "fs9721"})
	r.bytes(1000, r.frame("fs9721", volts(3.012)))
	r.expect("socket", "1000.0ms gate=3.012V/0.001")
}

func TestListenRefusals(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "fs9922"})
	hold := volts(3.012)
	hold.Hold = true
	low := volts(3.1)
	low.LowBatt = true
	for i, c := range []struct {
		shown meter.Shown
		want  string
	}{
		{volts(3.012), "gate=3.012V/0.001"},
		{hold, "gate=3.012V/0.001(held)"},
		{volts(3.012), "gate=3.012V/0.001"},
		{meter.Shown{Value: 30.1, Unit: "V", Digit: 1e-2}, "gate=30.1V/0.01(range changed)"},
		{meter.Shown{Value: 30.1, Unit: "V", Digit: 1e-2}, "gate=30.1V/0.01"},
		{meter.Shown{Value: 0.301, Unit: "A", Digit: 1e-3}, "gate=0.301A/0.001(wrong unit: A, wanted V)"},
		{meter.Shown{Value: 30.1, Unit: "V", Digit: 1e-2}, "gate=30.1V/0.01"},
		{meter.Shown{Unit: "V", Digit: 1e-2, State: "overload"}, "gate=overloadV"},
		{volts(3.0), "gate=3V/0.001(range changed)"},
		{low, "!line1: m1: low battery|gate=3.1V/0.001"},
		{low, "gate=3.1V/0.001"},
	} {
		ms := float64(400 * (i + 1))
		r.bytes(ms, r.frame("fs9922", c.shown))
		want := ""
		for j, p := range splitBar(c.want) {
			if j > 0 {
				want += "; "
			}
			want += fmt.Sprintf("%.1fms %s", ms, p)
		}
		r.expect(c.want, want)
	}
}

func splitBar(s string) []string {
	for i := range s {
		if s[i] == '|' {
			return []string{s[:i], s[i+1:]}
		}
	}
	return []string{s}
}

func TestListenRepeats(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "es519xx-4000"})
	for i, x := range []float64{3.012, 3.013, 3.013} {
		f := r.frame("es519xx-4000", volts(x))
		r.bytes(float64(400*i), f)
		r.bytes(float64(400*i+50), f)
	}
	r.expect("each block twice", "0.0ms gate=3.012V/0.001; 50.0ms gate=3.012V/0.001(repeat); "+
		"400.0ms gate=3.013V/0.001; 450.0ms gate=3.013V/0.001(repeat); 800.0ms gate=3.013V/0.001; 850.0ms gate=3.013V/0.001(repeat)")
	// Range changes are not confirmed by the second copy.
	f := r.frame("es519xx-4000", meter.Shown{Value: 31, Unit: "V", Digit: 1e-2})
	for i := range 2 {
		r.bytes(float64(1200+400*i), f)
		r.bytes(float64(1250+400*i), f)
	}
	r.expect("range", "1200.0ms gate=31V/0.01(range changed); 1250.0ms gate=31V/0.01(repeat); 1600.0ms gate=31V/0.01; 1650.0ms gate=31V/0.01(repeat)")
}

func TestListenColumns(t *testing.T) {
	r := onSocket(t, Source{Speaks: "text", Settings: "115200 8N1", Options: meter.Options{Unit: "V,mA,V"}, Columns: []SourceColumn{
		{1, Gate, "adc", "V"}, {2, Current, "adc", "A"}, {3, Load, "adc", "V"}}})
	r.text(5, "012,250.3,10.02\r\n") // its beginning was before the opening
	r.text(10, "3.012,250.3,10.02\r\n")
	r.text(20, "3.012,250.3,10.02\r\n")
	r.expect("rows", "10.0ms gate=3.012V/0.001 current=0.2503A/0.0001 load=10.02V/0.01; 20.0ms gate=3.012V/0.001 current=0.2503A/0.0001 load=10.02V/0.01")
	r.text(30, "3.012,OL,10.02\r\n3.0\r\n")
	r.expectPart("overload, then a short line", "30.0ms gate=3.012V/0.001 current=overloadA load=10.02V/0.01; 30.0ms !line1: bad frame", "1 columns", "column 2")
	r.text(40, "3.0,1,2,4\n")
	r.expect("more than wanted", "40.0ms gate=3V/0.1 current=0.001A/0.001 load=2V/1")
	r.text(50, "vg,id,vl\n")
	r.expectPart("a heading", "!line1: bad frame", "vg,id,vl")
	// Silence within a line, longer than a second: the rest is not taken for a value.
	r.text(60, "3.0,1")
	r.idle(1100)
	r.text(1200, "11,2\n4.0,1,2\n")
	r.expect("interrupted", "1200.0ms gate=4V/0.1 current=0.001A/0.001 load=2V/1")
	r.text(1300, "3.0,")
	r.text(2000, "1,2\n")
	r.expect("printed piece by piece", "1300.0ms gate=3V/0.1 current=0.001A/0.001 load=2V/1")
}

func TestListenHalfFrames(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "fs9721"})
	r.open(0)
	r.said()
	a, b := r.frame("fs9721", volts(3.012)), r.frame("fs9721", volts(4.999))
	r.bytes(1000, a[:6])
	r.bytes(1500, b[6:]) // the halves fit together
	r.expect("halves of two frames", "")
	r.bytes(2000, a)
	r.expect("the next", "1941.7ms gate=3.012V/0.001")
	r.bytes(3000, a[:6])
	r.idle(3020)
	r.bytes(3040, a[6:])
	r.expect("a pause of an adapter", "2975.0ms gate=3.012V/0.001")
}

func TestListenGarbage(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "fs9721"})
	r.open(0)
	r.said()
	for i := range 100 {
		r.bytes(float64(100*i), []byte{0xFF, 0xFE, 0xFD, 0x80, 0x00, 0x01})
	}
	if len(r.events) != 2 || !errors.Is(r.events[0].Err, ErrNoFrame) {
		t.Errorf("600 bytes of garbage: %s", r.said())
	}
}

func TestListenLost(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "fs9721"})
	r.open(0)
	f := r.frame("fs9721", volts(3.012))
	r.bytes(1000, f[:9])
	r.l.Lost(errWire, r.at(1010))
	r.open(1200)
	r.bytes(1210, f[9:])
	r.bytes(1600, f)
	r.expect("lost in a frame", "0.0ms opened; 1010.0ms lost; 1200.0ms opened; 1541.7ms gate=3.012V/0.001")
}

func TestListenSourcesAreChecked(t *testing.T) {
	good := Source{Address: "a", Columns: gate, Speaks: "fs9721"}
	change := func(f func(*Source)) Source { s := good; f(&s); return s }
	for name, c := range map[string]struct {
		sources []Source
		want    error
	}{
		"format":   {[]Source{change(func(s *Source) { s.Speaks = "morse" })}, ErrSource},
		"nobody":   {[]Source{change(func(s *Source) { s.Columns = nil })}, ErrSource},
		"column":   {[]Source{change(func(s *Source) { s.Columns = []SourceColumn{{Column: 2}} })}, ErrSource},
		"twice":    {[]Source{change(func(s *Source) { s.Speaks, s.Columns = "text", []SourceColumn{{Column: 1}, {}} })}, ErrSource},
		"settings": {[]Source{change(func(s *Source) { s.Settings = "fast" })}, port.ErrSettings},
		"every":    {[]Source{change(func(s *Source) { s.Every = -1 })}, ErrSource},
		"options":  {[]Source{change(func(s *Source) { s.Speaks, s.Options.Decimal = "text", "dot" })}, meter.ErrOption},
		"one line": {[]Source{good, good}, ErrSource},
	} {
		ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
		if err := Listen(ctx, c.sources, time.Now(), func(Event) {}); !errors.Is(err, c.want) {
			t.Errorf("%s: %v", name, err)
		}
		cancel()
	}
}

// Three recorded logs played at once through real lines: emit is never called by
// two goroutines, and Listen ends with the logs.
func TestListenLogs(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	var sources []Source
	const frames = 40
	for i, role := range []string{Gate, Current, Drain} {
		var log []byte
		for k := range frames {
			b, err := meter.Encode("fs9721", volts(1+float64(k)/1000))
			if err != nil {
				t.Fatal(err)
			}
			log = fmt.Appendf(log, "%.3f % X\n", 0.05+float64(k)*0.01, b)
		}
		path := filepath.Join(dir, role)
		if err := os.WriteFile(path, log, 0o666); err != nil {
			t.Fatal(err)
		}
		sources = append(sources, Source{Address: "log:" + path, Speaks: "fs9721", Columns: []SourceColumn{{1, role, fmt.Sprint("m", i), "V"}}})
	}
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	var inside sync.Mutex
	got := map[string]int{}
	last := map[string]float64{}
	err := Listen(ctx, sources, time.Now(), func(e Event) {
		if !inside.TryLock() {
			t.Error("emit was called by two goroutines")
			return
		}
		defer inside.Unlock()
		if len(e.Readings) == 0 && e.Err != nil && !e.Lost {
			t.Error(e.Err)
		}
		if e.At < last[e.Line] {
			t.Errorf("%s: %v after %v", e.Line, e.At, last[e.Line])
		}
		last[e.Line] = e.At
		got[e.Role] += len(e.Readings)
	})
	if err != nil {
		t.Errorf("%v", err)
	}
	for _, s := range sources {
		if n := got[s.Columns[0].Role]; n != frames {
			t.Errorf("%s: %d of %d readings", s.Columns[0].Role, n, frames)
		}
	}
}

func TestListenEndsWithContext(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	lost := make(chan struct{})
	var once sync.Once
	done := make(chan error)
	go func() {
		done <- Listen(ctx, []Source{{Address: filepath.Join(t.TempDir(), "absent"), Speaks: "fs9721", Columns: gate}}, time.Now(), func(e Event) {
			if e.Lost {
				once.Do(func() { close(lost) })
			}
		})
	}()
	<-lost
	cancel()
	select {
	case err := <-done:
		if !errors.Is(err, context.Canceled) {
			t.Error(err)
		}
	case <-time.After(20 * time.Second):
		t.Fatal("Listen goes on after its context ended")
	}
}

func BenchmarkListen(b *testing.B) {
	for _, f := range []string{"fs9721", "es51922", "text"} {
		b.Run(f, func(b *testing.B) {
			s := Source{Address: "line1", Speaks: f, Columns: gate}
			n := 0
			l, _, err := newListener(s, listenZero, func(e Event) { n += len(e.Readings) })
			if err != nil {
				b.Fatal(err)
			}
			c := &fakeLine{clock: listenZero}
			if err := l.Opened(c, listenZero); err != nil {
				b.Fatal(err)
			}
			digit := 1e-3
			if f == "es51922" {
				digit = 1e-4
			}
			frame, err := meter.Encode(f, meter.Shown{Value: 1.999, Unit: "V", Digit: digit})
			if err != nil {
				b.Fatal(err)
			}
			at := listenZero
			b.ReportAllocs()
			for b.Loop() {
				at = at.Add(time.Millisecond)
				if err := l.Bytes(c, frame, at); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(n)/b.Elapsed().Seconds(), "frames/s")
		})
	}
}
