package job

import (
	"fmt"
	"slices"

	"gatesill/acquire/bench"
	"gatesill/store/record"
)

// Kinds of events that say how the readings of a session count from then on.
const (
	eventScale    = "scale"    // "current 0.001": readings of the role count times that
	eventExchange = "exchange" // "gate, load": the lines of the two roles are exchanged
)

func scaleText(role string, factor float64) string { return fmt.Sprintf("%s %g", role, factor) }

func exchangeText(a, b string) string { return a + ", " + b }

// agreed is what was agreed upon in a session about its readings: a session that is
// gone on with keeps it, and readings that a crash left count by it.
type agreed struct {
	scale map[string]float64 // by role
	swap  map[string]string  // role of the bench file to the one its line has
}

// agreedUntil reads it from the session's events up to a time, s.
func agreedUntil(es []record.Event, at float64) agreed {
	a := agreed{scale: map[string]float64{}, swap: map[string]string{}}
	for _, e := range es {
		if e.At > at {
			continue
		}
		switch e.Kind {
		case eventScale:
			var role string
			var f float64
			if n, err := fmt.Sscanf(e.Text, "%s %g", &role, &f); n == 2 && err == nil && f > 0 {
				a.scale[role] = f
			}
		case eventExchange:
			if x, y, ok := cutPair(e.Text); ok {
				exchange(a.swap, x, y)
			}
		}
	}
	return a
}

func cutPair(text string) (a, b string, ok bool) {
	n, err := fmt.Sscanf(text, "%s %s", &a, &b)
	if err != nil || n != 2 || len(a) < 2 || a[len(a)-1] != ',' {
		return "", "", false
	}
	return a[:len(a)-1], b, true
}

// exchange exchanges the lines of two roles, in what was exchanged before.
func exchange(swap map[string]string, a, b string) {
	of := func(now string) string {
		for was, is := range swap {
			if is == now {
				return was
			}
		}
		return now
	}
	x, y := of(a), of(b)
	swap[x], swap[y] = b, a
	for was, is := range swap {
		if was == is {
			delete(swap, was)
		}
	}
}

// exchangedBench is the bench with its meters in the roles that their lines have.
func exchangedBench(b *bench.Bench, swap map[string]string) *bench.Bench {
	if len(swap) == 0 {
		return b
	}
	out := *b
	out.Meters = slices.Clone(b.Meters)
	for i := range out.Meters {
		if role, ok := swap[out.Meters[i].Role]; ok {
			out.Meters[i].Role = role
		}
	}
	return &out
}

// asCounted are readings as they count, by what was agreed upon when they came.
func asCounted(readings []record.Reading, es []record.Event) []record.Reading {
	if !slices.ContainsFunc(es, func(e record.Event) bool { return e.Kind == eventScale }) {
		return readings
	}
	out := slices.Clone(readings)
	for i := range out {
		r := &out[i]
		if f, ok := agreedUntil(es, r.At).scale[r.Role]; ok {
			r.Value, r.Digit = record.Known(r.Value.Float()*f), record.Known(r.Digit.Float()*f)
		}
	}
	return out
}
