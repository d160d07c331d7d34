package job

import (
	"errors"
	"math"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/meter"
	"gatesill/acquire/port"
	"gatesill/report/screen"
	"gatesill/store/record"
)

// watchedBench has three meters on two lines.
const watchedBench = `name = "attic"
[[meter]]
role = "gate"
name = "handheld"
line = "one"
speaks = "fs9721"
integration = "100 ms"
processing = "50 ms"
lag_u = "30 ms"
due = 2020-01-01
isolated = true
[[meter]]
role = "current"
line = "/dev/serial/by-id/two"
speaks = "text"
column = 3
unit = "mA"
separator = ";"
isolated = true
[[meter]]
role = "temperature"
line = "/dev/serial/by-id/two"
every = "1 s"
ask = "t?"
setup = ["a", "b"]
[[meter]]
role = "drain"
isolated = true
`

func watchedMeters(t *testing.T) *meterWatch {
	t.Helper()
	b, err := bench.Parse([]byte(watchedBench))
	require.NoError(t, err)
	require.NoError(t, b.Live())
	return newMeterWatch(b, time.Date(2026, 5, 1, 0, 0, 0, 0, time.UTC))
}

func TestSources(t *testing.T) {
	b := watchedMeters(t).bench
	require.Equal(t, []acquire.Source{
		{Address: "one", Speaks: "fs9721", Columns: []acquire.SourceColumn{{Column: 1, Role: "gate", Meter: "handheld", Unit: "V"}}},
		{
			Address: "/dev/serial/by-id/two", Speaks: "text", Ask: "t?", Every: 1, Setup: []string{"a", "b"}, Options: meter.Options{Unit: ",,mA", Separator: ";"},
			Columns: []acquire.SourceColumn{{Column: 3, Role: "current", Unit: "A"}, {Column: 1, Role: "temperature", Unit: "degC"}},
		},
	}, Sources(b))
	timing := Timings(b)
	require.Equal(t, acquire.Timing{Integration: 0.1, Processing: 0.05, LagU: 0.03}, timing["gate"])
	current := timing["current"]
	require.True(t, math.IsNaN(current.LagU), "not said: not known, and not 0")
	current.LagU = 0
	require.Equal(t, acquire.Timing{Jitter: 0.016}, current)
	require.NotContains(t, timing, "drain", "it has no line: nobody waits for it")
}

func TestMeterWatch(t *testing.T) {
	w := watchedMeters(t)
	gate := func(at, v float64) acquire.Event {
		return acquire.Event{At: at, Line: "one", Readings: []record.Reading{{Role: "gate", At: at, Value: record.Known(v), Unit: "V", Digit: record.Known(1e-3)}}}
	}
	state := func(now float64, role string) string {
		for _, r := range w.rows(now) {
			if r.Role == role {
				return r.State
			}
		}
		t.Fatalf("no %s", role)
		return ""
	}
	require.Len(t, w.rows(0), 3, "a meter without a line is not listened to")
	require.Equal(t, "nothing yet", state(0.5, "gate"))
	for i := range 20 {
		w.take(gate(0.4*float64(i), 3+0.001*float64(i)))
	}
	const last = 0.4 * 19
	r := w.rows(last + 0.1)[0]
	require.InDelta(t, 2.5, r.Rate, 1e-9)
	require.InDelta(t, 0.1, r.Age, 1e-9)
	require.Equal(t, "3.019 V", r.Text)
	require.Equal(t, 20, r.Readings)
	require.True(t, r.Overdue)
	// Stale after two periods of this meter, not before.
	require.Equal(t, stateOK, state(last+0.79, "gate"))
	require.Equal(t, "stale", state(last+0.81, "gate"))
	// One long pause does not make the meter slow.
	w.take(gate(last+5, 3))
	require.Equal(t, "stale", state(last+5+0.9, "gate"))

	// What cannot be taken is said in the words it was refused with.
	e := gate(20, 3)
	e.Readings[0].Refused = "held"
	w.take(e)
	require.Equal(t, "held", state(20.1, "gate"))
	e = gate(20.4, 0)
	e.Readings[0].Value, e.Readings[0].State = record.Num{}, record.Overload
	w.take(e)
	require.Equal(t, "over range", state(20.5, "gate"))
	require.True(t, math.IsNaN(w.rows(20.5)[0].Value), "an overload is no number")
	m := w.picture(20.5, false)
	require.Equal(t, screen.Over, m.Values[0].Text)
	require.Equal(t, "over range", m.Values[0].Note)

	// A lost line is told with its reason for both meters on it, and comes back.
	gone := errors.New("unplugged")
	w.take(acquire.Event{At: 21, Line: "/dev/serial/by-id/two", Lost: true, Err: gone})
	require.Equal(t, "line not open", state(21, "current"))
	require.Equal(t, "line not open", state(21, "temperature"))
	require.ErrorContains(t, silent(w.rows(21)), "current meter: unplugged")
	w.take(acquire.Event{At: 22, Line: "/dev/serial/by-id/two", Opened: true})
	require.Equal(t, "nothing yet", state(22, "current"))
	w.take(acquire.Event{At: 22.5, Line: "/dev/serial/by-id/two", Err: meter.ErrFrame})
	require.Equal(t, "unreadable", state(22.6, "current"))
	w.take(acquire.Event{At: 23, Line: "/dev/serial/by-id/two", Readings: []record.Reading{{Role: "current", At: 23, Value: record.Known(0.25), Unit: "A"}, {Role: "temperature", At: 23, Value: record.Known(31), Unit: "degC"}}})
	require.Equal(t, "bad frames", state(23.1, "current"))
	require.NoError(t, silent(w.rows(23.1)))
	w.take(acquire.Event{At: 24, Line: "/dev/serial/by-id/two", Lost: true, Err: gone})
	require.Equal(t, "line lost", state(24, "current"))

	// The end of a recorded log is no loss, and its last reading does not grow stale.
	w.take(gate(25, 3.1))
	w.take(acquire.Event{At: 25, Line: "one", Lost: true, Err: port.ErrEnd})
	require.Equal(t, "end of log", state(99, "gate"))
	require.Contains(t, w.cautions()[len(w.cautions())-1], "was due on 2020-01-01")
}
