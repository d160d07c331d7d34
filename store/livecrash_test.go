package store

import (
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func init() {
	// log keeps readings of a started sweep as three meters of 300 readings/s
	// would bring them, numbered from where the sweep ends, and says how many
	// are safe.
	children["log"] = func(args []string) error {
		db, err := Open(background, args[0], Options{})
		if err != nil {
			return err
		}
		next := 0
		if err := db.View(background, func(tx *Tx) error {
			rs, err := tx.Readings(args[1])
			next = len(rs)
			return err
		}); err != nil {
			return err
		}
		first := next
		l := db.NewLive(background)
		var told int64
		for {
			for range 3 {
				if err := l.Add(record.Reading{SweepID: args[1], Meter: "m", At: float64(next), Value: record.Known(float64(next))}); err != nil {
					return err
				}
				next++
			}
			if k := l.Kept(); k != told {
				told = k
				say(first + int(k))
			}
			time.Sleep(3 * time.Millisecond)
		}
	}
}

// TestKilledWhileLogging kills a process that keeps live readings, at moments that
// differ from run to run: every reading of which it had said that it was safe is
// there, in its place, and the store is whole. GATESILL_LONG=1: 200 kills.
func TestKilledWhileLogging(t *testing.T) {
	kills := 10
	if os.Getenv("GATESILL_LONG") != "" {
		kills = 200
	}
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	var sweep record.Sweep
	update(t, db, func(tx *Tx) {
		_, ds := addLot(t, tx, "A", 1)
		sweep = invented(ds[0].ID, 1)
		sweep.Columns = nil
		require.NoError(t, tx.StartSweep(&sweep))
	})
	require.NoError(t, db.Close())
	total := 0
	for range kills {
		writer := start(t, "log", path, sweep.ID)
		said := 0
		read := func() bool {
			s, err := writer.out.ReadString('\n')
			if err != nil { // also of a line that was cut short
				return false
			}
			n, err := strconv.Atoi(strings.TrimSpace(s))
			require.NoError(t, err, s)
			said = n
			return true
		}
		require.True(t, read(), "child: %s", &writer.noise)
		timer := time.AfterFunc(time.Duration(rand.Int64N(int64(150*time.Millisecond))), func() { _ = writer.cmd.Process.Kill() })
		for read() {
		}
		timer.Stop()
		_ = writer.cmd.Wait()

		db, err := Open(background, path, Options{})
		require.NoError(t, err)
		require.NoError(t, db.Check(background))
		view(t, db, func(tx *Tx) {
			rs, err := tx.Readings(sweep.ID)
			require.NoError(t, err)
			require.GreaterOrEqual(t, len(rs), said, "said to be safe")
			for i, r := range rs {
				require.Equal(t, float64(i), r.At, "lost, doubled or out of order")
			}
			total = len(rs)
		})
		require.NoError(t, db.Close())
	}
	t.Logf("%d kills, %d readings kept, none of those acknowledged lost", kills, total)
	require.Greater(t, total, 3*kills)
}
