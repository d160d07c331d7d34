package job

import (
	"context"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/store"
	"gatesill/store/record"
)

const sittingBench = `
name = "two meters"
[circuit]
kind = "load"
rl = 10
vdd = 12

[[meter]]
role = "gate"
name = "left"
line = "/dev/left"
speaks = "text"
unit = "V"

[[meter]]
role = "current"
name = "right"
line = "/dev/right"
speaks = "text"
unit = "A"
`

// plateau are readings of a gate and a current that stand still, s from at on.
func plateau(at, vg, id float64) (rs []record.Reading) {
	for i := range 24 {
		t := at + 0.2*float64(i)
		rs = append(rs,
			record.Reading{Role: acquire.Gate, Meter: "left", At: t, Value: record.Known(vg), Unit: "V", Digit: record.Known(1e-3)},
			record.Reading{Role: acquire.Current, Meter: "right", At: t + 0.05, Value: record.Known(id), Unit: "A", Digit: record.Known(1e-5)})
	}
	return rs
}

// crash leaves a sitting as a program that is killed does.
func crash(t *testing.T, s *sitting) {
	t.Helper()
	require.NoError(t, s.close())
}

// TestTakenUp measures a device, with a factor that was agreed upon in the middle and
// roles that were exchanged, and crashes: twice in a row.
func TestTakenUp(t *testing.T) {
	ctx := context.Background()
	b, err := bench.Parse([]byte(sittingBench))
	require.NoError(t, err)
	env := &Env{Store: filepath.Join(t.TempDir(), "s.db"), Out: io.Discard, Err: io.Discard, Version: "test"}
	open := func() *sitting {
		s, err := env.openSitting(ctx, sittingRequest{Lot: "bag", Bench: b, Given: b.Given})
		require.NoError(t, err)
		return s
	}
	begin := func(s *sitting) {
		require.NoError(t, s.begin(ctx, "D1", record.Up))
		require.NoError(t, s.hear(acquire.Event{Readings: plateau(1, 3, 0.001)}))
		require.NoError(t, s.live.AddEvent(record.Event{SessionID: s.session.ID, At: 10, Kind: eventScale, Text: scaleText(acquire.Current, 1e-3)}))
		require.NoError(t, s.hear(acquire.Event{Readings: plateau(11, 3.2, 2)}))
		require.NoError(t, s.live.AddEvent(record.Event{SessionID: s.session.ID, At: 20, Kind: eventExchange, Text: exchangeText(acquire.Gate, acquire.Current)}))
		require.NoError(t, s.live.Flush())
	}
	require.NoError(t, os.WriteFile(env.Store+heldMark+"killed-between-two-sweeps", nil, 0o600))
	s := open()
	first := s.session.ID
	begin(s)

	other := open() // another program, while the first one measures
	require.Empty(t, other.cut)
	require.NotEqual(t, first, other.session.ID)
	require.NoError(t, other.close())

	crash(t, s)
	for range 2 {
		s = open()
		require.Equal(t, []cutShort{{"D1", 2}}, s.cut)
		require.Equal(t, first, s.session.ID)
		require.Equal(t, map[string]float64{acquire.Current: 1e-3}, s.past.scale)
		require.Contains(t, []int{0, 2}, len(s.past.swap)) // exchanged twice is as before
		require.NoError(t, s.db.View(ctx, func(tx *store.Tx) error {
			sweeps, err := tx.Sweeps(s.lot.ID, true)
			require.NoError(t, err)
			last := sweeps[len(sweeps)-1]
			require.True(t, last.Excluded)
			require.InDeltaSlice(t, []float64{3, 3.2}, last.Values(record.VG), 1e-9)
			require.InDelta(t, 0.002, last.Values(record.ID)[1], 1e-9)
			return nil
		}))
		begin(s)
		crash(t, s)
	}
	left, err := filepath.Glob(env.Store + "-session-*")
	require.NoError(t, err)
	require.Empty(t, left)
}

func TestExchange(t *testing.T) {
	swap := map[string]string{}
	exchange(swap, acquire.Gate, acquire.Load)
	require.Equal(t, map[string]string{acquire.Gate: acquire.Load, acquire.Load: acquire.Gate}, swap)
	// What is the load now, whose line the file says is the gate's, with the current.
	exchange(swap, acquire.Load, acquire.Current)
	require.Equal(t, map[string]string{acquire.Gate: acquire.Current, acquire.Load: acquire.Gate, acquire.Current: acquire.Load}, swap)
	exchange(swap, acquire.Load, acquire.Current)
	exchange(swap, acquire.Gate, acquire.Load)
	require.Empty(t, swap)

	b, err := bench.Parse([]byte(sittingBench))
	require.NoError(t, err)
	x := exchangedBench(b, map[string]string{acquire.Gate: acquire.Current, acquire.Current: acquire.Gate})
	require.Equal(t, "right", x.Meters[1].Name)
	require.Equal(t, acquire.Gate, x.Meters[1].Role)
	require.Equal(t, acquire.Gate, b.Meters[0].Role) // the file's stay
}

// TestOneProgramASession: a session belongs to one program, and to the next one
// when that has ended.
func TestOneProgramASession(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.db")
	h, err := hold(path, "x")
	require.NoError(t, err)
	_, err = hold(path, "x")
	require.ErrorIs(t, err, errHeld)
	require.True(t, strings.Contains(err.Error(), "x"))
	h.release()
	again, err := hold(path, "x")
	require.NoError(t, err)
	again.release()
}
