package store

import (
	"context"
	"os"
	"path/filepath"
	"strconv"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func TestBackup(t *testing.T) {
	path, lot, sweeps := bigStore(t)
	db := openStore(t, path, Options{})
	to := filepath.Join(t.TempDir(), "backup.db")
	var calls, last, total int
	require.NoError(t, db.Backup(background, to, func(done, of int) {
		require.GreaterOrEqual(t, done, last)
		calls, last, total = calls+1, done, of
	}))
	require.Positive(t, calls)
	require.Equal(t, total, last)
	require.Len(t, folder(t, filepath.Dir(to)), 1, "one file, nothing beside it")
	var journal string
	require.NoError(t, raw(t, to).QueryRow("PRAGMA journal_mode").Scan(&journal))
	require.Equal(t, "delete", journal, "one that can be read where nothing can be written")
	copied := openStore(t, to, Options{})
	holds(t, copied, lot, sweeps)
	update(t, copied, func(tx *Tx) { require.NoError(t, tx.RenameLot(lot.ID, "B", "")) })
	holds(t, openStore(t, path, Options{ReadOnly: true}), lot, sweeps)
}

func TestBackupNeverOverwrites(t *testing.T) {
	path, _, _ := closedStore(t)
	db := openStore(t, path, Options{})
	to := filepath.Join(t.TempDir(), "x")
	require.NoError(t, os.WriteFile(to, []byte("precious"), 0o600))
	link := filepath.Join(filepath.Dir(to), "dangling")
	_ = os.Symlink("nowhere", link) // where there are such links
	before := folder(t, filepath.Dir(path))
	for _, p := range []string{to, path, filepath.Dir(to)} {
		require.ErrorIs(t, db.Backup(background, p, nil), ErrExists, p)
	}
	if _, err := os.Lstat(link); err == nil {
		require.ErrorIs(t, db.Backup(background, link, nil), ErrExists)
	}
	b, err := os.ReadFile(to)
	require.NoError(t, err)
	require.Equal(t, "precious", string(b))
	require.Equal(t, before, folder(t, filepath.Dir(path)))
	require.Error(t, db.Backup(background, filepath.Join(to, "deeper"), nil))
	require.ErrorIs(t, db.Backup(background, filepath.Join(filepath.Dir(to), "none", "x"), nil), os.ErrNotExist)

	// One that appears while the copy is being made.
	late := filepath.Join(filepath.Dir(to), "late")
	err = db.Backup(background, late, func(int, int) { require.NoError(t, os.WriteFile(late, []byte("late"), 0o600)) })
	require.ErrorIs(t, err, ErrExists)
	b, err = os.ReadFile(late)
	require.NoError(t, err)
	require.Equal(t, "late", string(b))
}

func TestBackupCancelled(t *testing.T) {
	path, _, _ := bigStore(t)
	db := openStore(t, path, Options{})
	to := filepath.Join(t.TempDir(), "x")
	ctx, cancel := context.WithCancel(background)
	cancel()
	require.ErrorIs(t, db.Backup(ctx, to, nil), context.Canceled)
	require.Empty(t, folder(t, filepath.Dir(to)))
}

func init() {
	// write adds sweeps to lot A for ever, one a transaction, and says id and
	// position of each when it is kept. It pauses as long between two as the
	// third argument says: SQLite gives no turns to those who wait for a lock,
	// so that writers without a pause may keep each other out.
	children["write"] = func(args []string) error {
		db, err := Open(background, args[0], Options{Wait: time.Minute})
		if err != nil {
			return err
		}
		first, err := strconv.Atoi(args[1])
		if err != nil {
			return err
		}
		pause, err := time.ParseDuration(args[2])
		if err != nil {
			return err
		}
		for i := first; ; i++ {
			time.Sleep(pause)
			var id string
			err := db.Update(background, func(tx *Tx) error {
				lot, err := tx.Lot("A")
				if err != nil {
					return err
				}
				ds, err := tx.Devices(lot.ID)
				if err != nil {
					return err
				}
				s := invented(ds[i%len(ds)].ID, 200)
				s.Position = i
				ss := []record.Sweep{s}
				err = tx.AddSweeps(ss)
				id = ss[0].ID
				return err
			})
			if err != nil {
				return err
			}
			say(id, i)
		}
	}
}

// Two processes and a goroutine write while backups are made: each is whole, and
// holds a beginning of what was written.
func TestBackupWhileOthersWrite(t *testing.T) {
	path, lot, _ := bigStore(t)
	said := make(chan struct{}) // one of the processes has kept a sweep
	for _, first := range []string{"1", "1000000"} {
		other := start(t, "write", path, first, "2ms")
		go func() {
			for {
				if _, err := other.out.ReadString('\n'); err != nil {
					return
				}
				select {
				case said <- struct{}{}:
				default: // nobody waits for it
				}
			}
		}()
	}
	db := openStore(t, path, Options{Wait: time.Minute})
	var stop atomic.Bool
	var wg sync.WaitGroup
	wg.Go(func() {
		for !stop.Load() {
			time.Sleep(2 * time.Millisecond)
			if err := db.Update(background, func(tx *Tx) error { return tx.PutMapping("x", nil) }); err != nil {
				t.Error(err)
				return
			}
		}
	})
	written := 0
	defer func() { stop.Store(true); wg.Wait() }()
	for i := range 3 {
		soon(t, func() {
			for range 10 {
				<-said
			}
		})
		to := filepath.Join(filepath.Dir(path), "backup"+strconv.Itoa(i))
		soon(t, func() { require.NoError(t, db.Backup(background, to, nil)) })
		copied := openStore(t, to, Options{})
		require.NoError(t, copied.Check(background))
		view(t, copied, func(tx *Tx) {
			list, err := tx.Sweeps(lot.ID, true)
			require.NoError(t, err)
			require.Greater(t, len(list), written, "more than last time: they were writing")
			written = len(list)
			next := map[bool]int{false: 1, true: 1000000}
			for _, s := range list[100:] {
				require.Equal(t, s.DataHash, s.Hash())
				second := s.Position >= 1000000
				require.Equal(t, next[second], s.Position, "no gap")
				next[second]++
			}
		})
	}
}
