package acquire

import (
	"math"
	"testing"

	"gatesill/store/record"
)

// Three meters of 1000 readings a second each, standing still and on the move; ns/op is per
// reading, 3000 of which come in a second.
func BenchmarkPair(b *testing.B) {
	for _, x := range []struct {
		name string
		vg   func(at float64) float64
	}{{"standing", func(float64) float64 { return 3 }}, {"moving", func(at float64) float64 { return 3 + 0.02*at }}} {
		b.Run(x.name, func(b *testing.B) {
			t := Timing{Integration: 1e-3, LagU: 1e-3}
			q := NewPairer(Pairing{Timing: map[string]Timing{Gate: t, Current: t, Load: t}, Free: true})
			b.ReportAllocs()
			for n := 0; b.Loop(); n++ {
				at := 1e-3 * float64(n/3)
				noise := 1e-4 * math.Sin(float64(n)*1.7)
				switch n % 3 {
				case 0:
					q.Add(record.Reading{Role: Gate, Meter: "g", At: at, Value: record.Known(x.vg(at) + noise), Digit: record.Known(1e-5)})
				case 1:
					q.Add(record.Reading{Role: Current, Meter: "i", At: at + 1e-4, Value: record.Known(0.02 + noise/10), Digit: record.Known(1e-6)})
				case 2:
					q.Add(record.Reading{Role: Load, Meter: "l", At: at + 2e-4, Value: record.Known(0.1 + noise), Digit: record.Known(1e-5)})
				}
				q.Take()
			}
		})
	}
}
