package acquire

import (
	"testing"

	"gatesill/store/record"
)

// BenchmarkRunnerReading is one reading of three meters at 1000/s each in a sweep by
// hand: what the runner costs beside decoding and storing.
func BenchmarkRunnerReading(b *testing.B) {
	r, err := NewRunner(testPlan(Free))
	if err != nil {
		b.Fatal(err)
	}
	d := testDevice()
	roles := []string{Gate, Current, Drain}
	i := 0
	for b.Loop() {
		at := float64(i) / 3000
		u := float64(i%300000) / 100000 // to and fro up to where no end is reached
		rd := record.Reading{Role: roles[i%3], Meter: roles[i%3], At: at, Digit: record.Known(1e-4)}
		switch i % 3 {
		case 0:
			rd.Value = record.Known(u)
		case 1:
			rd.Value = record.Known(d.at(u, 12))
		default:
			rd.Value = record.Known(12)
		}
		r.Event(Event{At: at, Role: rd.Role, Readings: []record.Reading{rd}})
		i++
	}
}
