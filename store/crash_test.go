package store

import (
	"fmt"
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

// TestKilledWriter kills a process that writes, at moments that differ from run
// to run: what it was told to be kept is kept.
func TestKilledWriter(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	var lot record.Lot
	update(t, db, func(tx *Tx) { lot, _ = addLot(t, tx, "A", 5) })
	require.NoError(t, db.Close())

	kept := map[string]int{} // position by id
	for range 12 {
		writer := start(t, "write", path, strconv.Itoa(len(kept)+1), "0s")
		read := func() bool {
			s, err := writer.out.ReadString('\n')
			if err != nil { // also of a line that was cut short
				return false
			}
			id, position, ok := strings.Cut(strings.TrimSpace(s), " ")
			require.True(t, ok, s)
			kept[id], err = strconv.Atoi(position)
			require.NoError(t, err)
			return true
		}
		require.True(t, read(), "child: %s", &writer.noise)
		timer := time.AfterFunc(time.Duration(rand.Int64N(int64(60*time.Millisecond))), func() { _ = writer.cmd.Process.Kill() })
		for read() {
		}
		timer.Stop()
		_ = writer.cmd.Wait()

		db, err := Open(background, path, Options{})
		require.NoError(t, err)
		require.NoError(t, db.Check(background))
		view(t, db, func(tx *Tx) {
			list, err := tx.Sweeps(lot.ID, true)
			require.NoError(t, err)
			found := map[string]int{}
			for _, s := range list {
				found[s.ID] = s.Position
				require.Equal(t, s.DataHash, s.Hash())
				require.Equal(t, 200, s.Len())
			}
			for id, position := range kept {
				require.Equal(t, position, found[id], "sweep %s was acknowledged", id)
			}
			// The last one may have been kept without a word getting out.
			require.LessOrEqual(t, len(found), len(kept)+1)
			kept = found
		})
		require.NoError(t, db.Close())
	}
	require.Greater(t, len(kept), 12)
}

func init() {
	// create makes one store after the other and says the number of each.
	children["create"] = func(args []string) error {
		for i := 0; ; i++ {
			db, err := Open(background, filepath.Join(args[0], strconv.Itoa(i)+".db"), Options{Create: true})
			if err != nil {
				return err
			}
			if err := db.Close(); err != nil {
				return err
			}
			say(i)
		}
	}
	// race makes the store, and writes a part of its own to it.
	children["race"] = func(args []string) error {
		db, err := Open(background, args[0], Options{Create: true, Wait: time.Minute})
		if err != nil {
			return err
		}
		p := record.NewPart(args[1])
		if err := db.Update(background, func(tx *Tx) error { return tx.PutPart(&p, "") }); err != nil {
			return err
		}
		return db.Close()
	}
}

// TestKilledMaker kills a process that makes stores: the one that it was at is
// made good by the next that opens it.
func TestKilledMaker(t *testing.T) {
	for range 8 {
		dir := t.TempDir()
		maker := start(t, "create", dir)
		maker.line(t)
		time.AfterFunc(time.Duration(rand.Int64N(int64(30*time.Millisecond))), func() { _ = maker.cmd.Process.Kill() })
		_ = maker.cmd.Wait()
		paths, err := filepath.Glob(filepath.Join(dir, "*.db"))
		require.NoError(t, err)
		for _, path := range paths {
			db, err := Open(background, path, Options{Create: true})
			require.NoError(t, err)
			lot, sweeps := fill(t, db)
			holds(t, db, lot, sweeps)
			require.NoError(t, db.Close())
			left, err := filepath.Glob(path + ".*")
			require.NoError(t, err)
			require.Empty(t, left, "no backup of nothing")
		}
	}
}

// A store whose making was undone by SQLite after a crash is empty but for the
// journal that says so.
func TestHalfMade(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	rawExec(t, path, fmt.Sprintf("PRAGMA application_id = %d", applicationID), "VACUUM")
	h, err := readHeader(path)
	require.NoError(t, err)
	require.Zero(t, h.version)
	db := openStore(t, path, Options{})
	lot, sweeps := fill(t, db)
	holds(t, db, lot, sweeps)
}

// TestMakersRace lets several processes make the same store at once.
func TestMakersRace(t *testing.T) {
	path := filepath.Join(t.TempDir(), "deep", "gatesill.db")
	var makers []*child
	for i := range 4 {
		makers = append(makers, start(t, "race", path, fmt.Sprintf("part %d", i)))
	}
	for _, m := range makers {
		m.end(t)
	}
	db := openStore(t, path, Options{})
	require.NoError(t, db.Check(background))
	view(t, db, func(tx *Tx) {
		parts, err := tx.Parts()
		require.NoError(t, err)
		require.Len(t, parts, 4)
	})
	_, err := os.Stat(path + "-journal")
	require.True(t, os.IsNotExist(err))
}
