package acquire

import (
	"math"
	"testing"
	"time"

	"gatesill/acquire/meter"

	"pgregory.net/rapid"
)

// Whatever comes in, in whatever pieces and with whatever pauses: nothing panics, the
// account of what came when stays right, no reading is later than the Read that
// brought it, and readings validate.
func TestListenAnything(t *testing.T) {
	for _, f := range meter.Formats {
		rapid.Check(t, func(t *rapid.T) {
			c := &fakeLine{clock: listenZero, byteTime: time.Millisecond}
			now := listenZero
			s := Source{Address: "line1", Speaks: f.Name, Columns: []SourceColumn{{Role: Gate, Meter: "m", Unit: "V"}}}
			l, _, err := newListener(s, listenZero, func(e Event) {
				if e.At > now.Sub(listenZero).Seconds() || math.IsNaN(e.At) {
					t.Fatalf("an event at %v, after %v", e.At, now)
				}
				for _, r := range e.Readings {
					if err := r.Validate(); err != nil || r.Unit == "" || len(r.Raw) == 0 {
						t.Fatalf("%+v: %v", r, err)
					}
				}
			})
			if err != nil {
				t.Fatal(err)
			}
			l.now = func() time.Time { return now }
			if err := l.Opened(c, now); err != nil {
				t.Fatal(err)
			}
			shown := meter.Shown{Value: 1.5, Unit: "V", Digit: 1e-3}
			if f.Name == "es51922" {
				shown.Digit = 1e-4
			}
			good, err := meter.Encode(f.Name, shown)
			if err != nil {
				t.Fatal(err)
			}
			for range rapid.IntRange(1, 40).Draw(t, "steps") {
				now = now.Add(time.Duration(rapid.SampledFrom([]int{0, 1, 20, 300, 1100}).Draw(t, "ms")) * time.Millisecond)
				var err error
				switch rapid.IntRange(0, 4).Draw(t, "what") {
				case 0:
					err = l.Idle(c, now)
				case 1:
					err = l.Bytes(c, rapid.SliceOfN(rapid.Byte(), 1, 40).Draw(t, "garbage"), now)
				case 2:
					err = l.Bytes(c, good, now)
				case 3:
					k := rapid.IntRange(1, len(good)-1).Draw(t, "cut")
					if err = l.Bytes(c, good[:k], now); err == nil {
						err = l.Bytes(c, good[k:], now)
					}
				case 4:
					l.Lost(errWire, now)
					err = l.Opened(c, now)
				}
				if err != nil {
					t.Fatal(err)
				}
				n := 0
				for _, k := range l.chunks {
					n += k.n
					if k.n <= 0 {
						t.Fatalf("a piece of %d bytes", k.n)
					}
				}
				if n != len(l.buf) || n > 2000 {
					t.Fatalf("%d bytes accounted for, %d in the buffer", n, len(l.buf))
				}
				if len(l.question) == 0 && len(c.sent) > 0 {
					t.Fatalf("sent %q to a meter that speaks by itself", c.sent)
				}
			}
		})
	}
}
