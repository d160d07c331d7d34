package job

import (
	"bytes"
	"context"
	"io"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store"
	"gatesill/store/record"
)

// TestMeterLogsKeepTheReadings imports the invented logs and looks at what is kept
// besides the curves: the readings of every meter by the sweep they belong to, with
// their lines, the notes and the clocks; and that the points can be made of them.
func TestMeterLogsKeepTheReadings(t *testing.T) {
	dir := t.TempDir()
	logs := filepath.Join("..", "..", "..", "testdata", "logs")
	var talk bytes.Buffer
	env := &Env{Store: filepath.Join(dir, "s.db"), Out: io.Discard, Err: &talk, Quiet: true, Version: "test"}
	rq := ImportRequest{Lot: "bag", Operator: "Ada", MeterLogs: map[string]string{
		"gate": filepath.Join(logs, "mixed_gate.csv"), "current": filepath.Join(logs, "mixed_current.csv"),
		"load": filepath.Join(logs, "mixed_load.txt"), "notes": filepath.Join(logs, "mixed_notes.txt"),
	}}
	rq.Table.Given = record.Condition{Circuit: record.Load, RL: record.Known(5), VDD: record.Known(12)}
	require.NoError(t, Import(context.Background(), env, rq))
	require.Empty(t, talk.String())
	require.NoError(t, env.view(context.Background(), func(tx *store.Tx) error {
		lot, err := tx.Lot("bag")
		require.NoError(t, err)
		sources, err := tx.Sources(lot.ID)
		require.NoError(t, err)
		require.Len(t, sources, 1)
		require.Equal(t, "meter-logs", sources[0].Layout)
		sweeps, err := tx.Sweeps(lot.ID, true)
		require.NoError(t, err)
		require.Len(t, sweeps, 4)
		all := 0
		for _, s := range sweeps {
			readings, err := tx.Readings(s.ID)
			require.NoError(t, err)
			all += len(readings)
			roles := map[string]int{}
			last := 0.0
			for _, r := range readings {
				roles[r.Role]++
				require.GreaterOrEqual(t, r.At, last)
				require.NotEmpty(t, r.Raw)
				last = r.At
			}
			require.Len(t, roles, 3)
			require.Equal(t, sources[0].ID, s.SourceID)
			for _, at := range s.Values(record.T) {
				require.Less(t, at, last+1)
			}
			require.NotNil(t, s.Column(record.PairBound))
			require.Regexp(t, `^2026-05-2\dT2[12]:\d\d`, s.MeasuredAt)
		}
		require.Greater(t, all, 2500)
		sessions, err := tx.Sessions(lot.ID)
		require.NoError(t, err)
		require.Len(t, sessions, 1)
		require.Equal(t, "Ada", sessions[0].Operator)
		events, err := tx.Events(sessions[0].ID)
		require.NoError(t, err)
		kinds := map[string]int{}
		for _, e := range events {
			kinds[e.Kind]++
		}
		require.Equal(t, 3, kinds["note"])
		require.Greater(t, kinds["clock"], 1)
		started, err := tx.StartedSweeps()
		require.NoError(t, err)
		require.Empty(t, started)
		return nil
	}))

	// What cannot be stored leaves nothing behind.
	rq.Lot, rq.Device, rq.MeterLogs = "bad", strings.Repeat("x", record.MaxName+1), map[string]string{"gate": rq.MeterLogs["gate"], "current": rq.MeterLogs["current"]}
	require.Error(t, Import(context.Background(), env, rq))
	require.NoError(t, env.view(context.Background(), func(tx *store.Tx) error {
		_, err := tx.Lot("bad")
		require.ErrorIs(t, err, store.ErrNotFound)
		return nil
	}))
}
