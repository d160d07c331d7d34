package store

import (
	"fmt"
	"sync"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// startedSweep gives a store with a sweep that is being measured.
func startedSweep(t *testing.T) (*DB, string) {
	t.Helper()
	db := newStore(t)
	var s record.Sweep
	update(t, db, func(tx *Tx) {
		_, ds := addLot(t, tx, "A", 1)
		s = invented(ds[0].ID, 1)
		s.Columns = nil
		require.NoError(t, tx.StartSweep(&s))
	})
	return db, s.ID
}

// TestLiveKeepsAllInOrder gives readings from three goroutines at once: those of
// each come back whole and in its order.
func TestLiveKeepsAllInOrder(t *testing.T) {
	db, sweep := startedSweep(t)
	l := db.NewLive(background)
	var wg sync.WaitGroup
	const each = 2000
	for m := range 3 {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for i := range each {
				if err := l.Add(record.Reading{SweepID: sweep, Meter: fmt.Sprint(m), At: float64(i), Value: record.Known(1)}); err != nil {
					t.Error(err)
				}
			}
		}()
	}
	wg.Wait()
	require.NoError(t, l.Flush())
	require.EqualValues(t, 3*each, l.Kept())
	require.NoError(t, l.Close())
	require.Error(t, l.Add(record.Reading{}), "closed")
	view(t, db, func(tx *Tx) {
		rs, err := tx.Readings(sweep)
		require.NoError(t, err)
		next := map[string]float64{}
		for _, r := range rs {
			require.Equal(t, next[r.Meter], r.At)
			next[r.Meter]++
		}
		require.Equal(t, map[string]float64{"0": each, "1": each, "2": each}, next)
	})
}

// TestLiveIsSoonSafe holds the promise of 50 ms on a quiet machine, with room for
// a loaded one.
func TestLiveIsSoonSafe(t *testing.T) {
	db, sweep := startedSweep(t)
	l := db.NewLive(background)
	defer l.Close()
	for i := range 20 {
		require.NoError(t, l.Add(record.Reading{SweepID: sweep, Value: record.Known(1)}))
		began := time.Now()
		for l.Kept() <= int64(i) {
			require.Less(t, time.Since(began), 5*time.Second)
			time.Sleep(time.Millisecond)
		}
		time.Sleep(3 * time.Millisecond)
	}
}

func TestLiveSaysWhatFailed(t *testing.T) {
	db, _ := startedSweep(t)
	l := db.NewLive(background)
	require.NoError(t, l.Add(record.Reading{SweepID: "none", Value: record.Known(1)}))
	require.ErrorIs(t, l.Flush(), ErrNotFound)
	require.ErrorIs(t, l.Add(record.Reading{SweepID: "none", Value: record.Known(1)}), ErrNotFound)
	require.ErrorIs(t, l.Close(), ErrNotFound)
	require.EqualValues(t, 0, l.Kept())
}
