package store

import (
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// bigStore makes a closed store of about 1.5 MB.
func bigStore(t *testing.T) (path string, lot record.Lot, sweeps []record.Sweep) {
	t.Helper()
	path = filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	update(t, db, func(tx *Tx) {
		l, ds := addLot(t, tx, "A", 100)
		lot = l
		for i := range ds {
			sweeps = append(sweeps, invented(ds[i].ID, 1000))
		}
		require.NoError(t, tx.AddSweeps(sweeps))
	})
	require.NoError(t, db.Close())
	return path, lot, sweeps
}

func TestDamagedHeader(t *testing.T) {
	path, _, _ := closedStore(t)
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	require.NoError(t, err)
	_, err = f.WriteAt([]byte("overwritten once"), 0)
	require.NoError(t, err)
	require.NoError(t, f.Close())
	for _, o := range []Options{{}, {Create: true}, {ReadOnly: true}} {
		require.ErrorContains(t, refused(t, path, o, ErrCorrupt), "beginning of the file")
	}
}

func TestTruncated(t *testing.T) {
	path, lot, _ := bigStore(t)
	whole, err := os.ReadFile(path)
	require.NoError(t, err)
	for _, n := range []int{len(whole) - 1, len(whole) / 2, 16384, 5000, 512, 101} {
		require.NoError(t, os.WriteFile(path, whole[:n], 0o600))
		for _, o := range []Options{{}, {ReadOnly: true}} {
			err := openAndRead(path, o, lot)
			require.ErrorIs(t, err, ErrCorrupt, "%d bytes", n)
			var e *Error
			require.ErrorAs(t, err, &e)
			require.Contains(t, e.Hint, "backup")
		}
		left, err := os.ReadFile(path)
		require.NoError(t, err)
		require.Equal(t, whole[:n], left, "what is left stays as it is")
	}
}

// openAndRead gives the first error of opening the store and reading all
// sweeps.
func openAndRead(path string, o Options, lot record.Lot) error {
	db, err := Open(background, path, o)
	if err != nil {
		return err
	}
	err = db.View(background, func(tx *Tx) error {
		_, err := tx.Sweeps(lot.ID, true)
		return err
	})
	if closing := db.Close(); err == nil {
		err = closing
	}
	return err
}

func TestDamagedPages(t *testing.T) {
	path, lot, sweeps := bigStore(t)
	whole, err := os.ReadFile(path)
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(1, 1)) // the same noise in every run
	noise := make([]byte, 3*16384)
	for i := range noise {
		noise[i] = byte(r.Uint32())
	}
	damaged := append([]byte{}, whole...)
	for at := len(whole) / 2 / 16384 * 16384; at < len(whole)-len(noise); at += 20 * 16384 {
		copy(damaged[at:], noise)
	}
	require.NoError(t, os.WriteFile(path, damaged, 0o600))
	err = openAndRead(path, Options{}, lot)
	require.ErrorIs(t, err, ErrCorrupt)
	require.ErrorContains(t, err, "first fault of the file", "a look at the whole file is added")

	db := openStore(t, path, Options{})
	require.ErrorIs(t, db.Check(background), ErrCorrupt)
	copied := filepath.Join(filepath.Dir(path), "backup.db")
	require.ErrorIs(t, db.Backup(background, copied, nil), ErrCorrupt)
	require.NoFileExists(t, copied, "a backup that is not whole gets no name")
	require.NoError(t, db.Close())
	left, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Equal(t, damaged, left, "nothing is repaired by guesswork")

	require.NoError(t, os.WriteFile(path, whole, 0o600))
	holds(t, openStore(t, path, Options{}), lot, sweeps)
}

// Damage that SQLite cannot see: what stands in a row does not fit together.
func TestDamagedRows(t *testing.T) {
	for name, statement := range map[string]string{
		"column is no array": `UPDATE sweep SET id_a = '{"a":1}'`,
		"column too short":   `UPDATE sweep SET id_a = '[1,2]'`,
		"marks":              `UPDATE sweep SET marks = 'x'`,
		"lines":              `UPDATE sweep SET source_lines = '[[0,1,51,1]]'`,
		"time":               `UPDATE sweep SET measured_at = '2023-02-29'`,
		"time of the lot":    `UPDATE lot SET created_at = '2023-02-29T00:00:00Z'`,
	} {
		path, lot, _ := closedStore(t)
		rawExec(t, path, "DROP TRIGGER sweep_keeps_its_data", statement)
		db := openStore(t, path, Options{})
		err := db.View(background, func(tx *Tx) error {
			if _, err := tx.LotByID(lot.ID); err != nil {
				return err
			}
			_, err := tx.Sweeps(lot.ID, true)
			return err
		})
		require.Error(t, err, name)
		if !strings.HasPrefix(name, "time") {
			require.ErrorIs(t, err, ErrCorrupt, name)
		}
	}
}

func TestFullDisk(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	var pages int
	require.NoError(t, db.writes.QueryRow("PRAGMA page_count").Scan(&pages))
	limit := func(n int) {
		t.Helper()
		var got int
		require.NoError(t, db.writes.QueryRow("PRAGMA max_page_count = "+asText(n)).Scan(&got))
		require.Equal(t, n, got)
	}
	limit(pages + 10)
	many := make([]record.Sweep, 200)
	for i := range many {
		many[i] = invented(sweeps[0].DeviceID, 1000)
	}
	err := db.Update(background, func(tx *Tx) error {
		require.NoError(t, tx.RenameLot(lot.ID, "of the step that fails", ""))
		return tx.AddSweeps(many)
	})
	require.ErrorIs(t, err, ErrFull)
	var e *Error
	require.ErrorAs(t, err, &e)
	require.Contains(t, e.Hint, "free some space")
	holds(t, db, lot, sweeps)
	view(t, db, func(tx *Tx) {
		got, err := tx.LotByID(lot.ID)
		require.NoError(t, err)
		require.Equal(t, "A", got.Name, "all of the step is undone")
	})
	limit(1 << 20)
	update(t, db, func(tx *Tx) { require.NoError(t, tx.AddSweeps(many[:1])) })
	holds(t, db, lot, append(sweeps, many[0]))
}

func init() {
	// hold keeps a write transaction open until its input ends.
	children["hold"] = func(args []string) error {
		db, err := Open(background, args[0], Options{})
		if err != nil {
			return err
		}
		err = db.Update(background, func(*Tx) error {
			say("holding")
			waitForEnd()
			return nil
		})
		if closing := db.Close(); err == nil {
			err = closing
		}
		return err
	}
}

func TestBusy(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	other := start(t, "hold", path)
	require.Equal(t, "holding", other.line(t))

	db := openStore(t, path, Options{Wait: 200 * time.Millisecond})
	begin := time.Now()
	err := db.Update(background, func(*Tx) error { t.Error("called"); return nil })
	require.ErrorIs(t, err, ErrBusy)
	require.GreaterOrEqual(t, time.Since(begin), 190*time.Millisecond)
	var e *Error
	require.ErrorAs(t, err, &e)
	require.Contains(t, e.Hint, "wait")
	holds(t, db, lot, sweeps) // reading goes on

	at := openStore(t, path, Options{Wait: -1})
	begin = time.Now()
	require.ErrorIs(t, at.Update(background, func(*Tx) error { return nil }), ErrBusy)
	require.Less(t, time.Since(begin), 150*time.Millisecond, "not waiting at all")

	patient := openStore(t, path, Options{Wait: 30 * time.Second})
	done := make(chan error)
	go func() { done <- patient.Update(background, func(*Tx) error { return nil }) }()
	time.Sleep(50 * time.Millisecond)
	other.end(t)
	soon(t, func() { require.NoError(t, <-done) })
}

// A second writer of the same process waits its turn, and no longer than asked.
func TestBusyInside(t *testing.T) {
	db := openStore(t, filepath.Join(t.TempDir(), "x.db"), Options{Create: true, Wait: 50 * time.Millisecond})
	update(t, db, func(*Tx) {
		err := db.Update(background, func(*Tx) error { t.Error("called"); return nil })
		require.ErrorIs(t, err, ErrBusy)
	})
	update(t, db, func(*Tx) {})
}
