package store

import (
	"database/sql"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// refused opens path, expects that error with a hint, and checks that nothing
// in the folder changed. It returns the error.
func refused(t *testing.T, path string, o Options, want error) error {
	t.Helper()
	before := folder(t, filepath.Dir(path))
	db, err := Open(background, path, o)
	require.Nil(t, db)
	require.ErrorIs(t, err, want)
	var e *Error
	require.ErrorAs(t, err, &e)
	require.Equal(t, path, e.Path)
	require.NotEmpty(t, e.Hint)
	require.Contains(t, err.Error(), path)
	require.Equal(t, before, folder(t, filepath.Dir(path)), "something was changed")
	return err
}

// folder gives the SHA-256 of all files in a folder.
func folder(t *testing.T, path string) map[string]string {
	t.Helper()
	files := map[string]string{}
	entries, err := os.ReadDir(path)
	if os.IsNotExist(err) {
		return nil
	}
	require.NoError(t, err)
	for _, e := range entries {
		files[e.Name()] = "a folder"
		if !e.IsDir() {
			b, err := os.ReadFile(filepath.Join(path, e.Name()))
			require.NoError(t, err)
			files[e.Name()] = contentID(string(b))
		}
	}
	return files
}

// raw opens the file with SQLite alone, for what the store does not do.
func raw(t *testing.T, path string) *sql.DB {
	t.Helper()
	pool, err := sql.Open("sqlite", dsn(path, url.Values{}))
	require.NoError(t, err)
	pool.SetMaxOpenConns(1)
	t.Cleanup(func() { require.NoError(t, pool.Close()) })
	return pool
}

func rawExec(t *testing.T, path string, statements ...string) {
	t.Helper()
	pool, err := sql.Open("sqlite", dsn(path, url.Values{}))
	require.NoError(t, err)
	pool.SetMaxOpenConns(1)
	for _, s := range statements {
		_, err := pool.Exec(s)
		require.NoError(t, err, s)
	}
	require.NoError(t, pool.Close())
}

// closedStore makes a store with content and closes it.
func closedStore(t *testing.T) (path string, lot record.Lot, sweeps []record.Sweep) {
	t.Helper()
	path = filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	lot, sweeps = fill(t, db)
	require.NoError(t, db.Close())
	return path, lot, sweeps
}

func TestOpenNoStore(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	refused(t, path, Options{}, ErrNoStore)
	refused(t, path, Options{Create: true, ReadOnly: true}, ErrNoStore)
	refused(t, filepath.Join(path, "deeper", "x.db"), Options{}, ErrNoStore)
}

func TestOpenCreates(t *testing.T) {
	path := filepath.Join(t.TempDir(), "one", "two", "gatesill.db")
	db := openStore(t, path, Options{Create: true})
	require.True(t, db.CreatedNow())
	require.False(t, db.ReadOnly())
	require.Equal(t, path, db.Path())
	lot, sweeps := fill(t, db)
	again := openStore(t, path, Options{Create: true})
	require.False(t, again.CreatedNow())
	holds(t, again, lot, sweeps)

	// What other programs are to know it by, and how it is kept.
	var application, version, page, keys, recursive, synchronous int
	var journal string
	for pragma, to := range map[string]any{"application_id": &application, "user_version": &version, "page_size": &page, "journal_mode": &journal,
		"foreign_keys": &keys, "synchronous": &synchronous, "recursive_triggers": &recursive} {
		require.NoError(t, db.writes.QueryRow("PRAGMA "+pragma).Scan(to))
	}
	require.Equal(t, []int{0x4753696c, len(migrations), 16384, 1, 2, 1}, []int{application, version, page, keys, synchronous, recursive})
	require.Equal(t, "wal", journal)
}

func TestOpenOddPaths(t *testing.T) {
	for _, name := range []string{"a b", "100%", "a?b=c", "a#b", "%41", "ü'\"", "a&mode=ro", ";DROP", "-x", "file:x"} {
		path := filepath.Join(t.TempDir(), name)
		db, err := Open(background, path, Options{Create: true})
		require.NoError(t, err, name)
		lot, sweeps := fill(t, db)
		holds(t, db, lot, sweeps)
		copied := filepath.Join(filepath.Dir(path), "copy of "+name)
		require.NoError(t, db.Backup(background, copied, nil))
		require.NoError(t, db.Close())
		_, err = os.Stat(path)
		require.NoError(t, err, "it lies where it was asked for")
		files, err := os.ReadDir(filepath.Dir(path))
		require.NoError(t, err)
		require.Len(t, files, 2, "and nothing else")
	}
	_, err := Open(background, "a\x00b", Options{Create: true})
	require.Error(t, err)
}

func TestOpenRelativePath(t *testing.T) {
	t.Chdir(t.TempDir())
	db := openStore(t, "x.db", Options{Create: true})
	require.True(t, filepath.IsAbs(db.Path()))
}

func TestOpenSymbolicLink(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	link := filepath.Join(t.TempDir(), "link.db")
	if err := os.Symlink(path, link); err != nil {
		t.Skip("no symbolic links here:", err)
	}
	first := openStore(t, path, Options{})
	second := openStore(t, link, Options{})
	holds(t, second, lot, sweeps)
	update(t, second, func(*Tx) {})
	update(t, first, func(*Tx) {})
}

func TestOpenEmptyFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	require.NoError(t, os.WriteFile(path, nil, 0o600))
	require.ErrorContains(t, refused(t, path, Options{}, ErrNotOurs), "empty")
	db := openStore(t, path, Options{Create: true})
	require.False(t, db.CreatedNow(), "the file was there")
	lot, sweeps := fill(t, db)
	holds(t, db, lot, sweeps)
}

func TestOpenNotOurs(t *testing.T) {
	dir := t.TempDir()
	for _, o := range []Options{{}, {Create: true}, {ReadOnly: true}} {
		refused(t, dir, o, ErrNotOurs)
		for name, text := range map[string]string{
			"short": "x", "table": "device,vg,id\n" + strings.Repeat("D1,3.0,0.001\n", 400), "magic alone": "SQLite format 3\x00",
		} {
			path := filepath.Join(dir, name)
			require.NoError(t, os.WriteFile(path, []byte(text), 0o600))
			require.ErrorContains(t, refused(t, path, o, ErrNotOurs), "no SQLite file")
		}
	}
	for name, setup := range map[string][]string{
		"other table":   {"CREATE TABLE lot (id TEXT)"},
		"other program": {"PRAGMA application_id = 12345", "CREATE TABLE t (x)"},
		"in WAL mode":   {"PRAGMA journal_mode = WAL", "CREATE TABLE t (x)"},
		"no tables":     {"CREATE TABLE t (x)", "DROP TABLE t"},
	} {
		path := filepath.Join(t.TempDir(), "other.db")
		rawExec(t, path, setup...)
		for _, o := range []Options{{}, {Create: true}, {ReadOnly: true}} {
			require.ErrorContains(t, refused(t, path, o, ErrNotOurs), "another program", name)
		}
	}
}

func TestOpenNewer(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	rawExec(t, path, "PRAGMA user_version = 1000")
	for _, o := range []Options{{}, {Create: true}, {ReadOnly: true}} {
		require.ErrorContains(t, refused(t, path, o, ErrNewer), "form 1000")
	}
	rawExec(t, path, fmt.Sprintf("PRAGMA user_version = %d", len(migrations)))
	holds(t, openStore(t, path, Options{}), lot, sweeps)
}

// The number of the newer form may still be in the write-ahead log.
func TestOpenNewerInTheLog(t *testing.T) {
	path, _, _ := closedStore(t)
	held := raw(t, path)
	_, err := held.Exec("PRAGMA user_version = 1000")
	require.NoError(t, err)
	h, err := readHeader(path)
	require.NoError(t, err)
	require.EqualValues(t, len(migrations), h.version, "the file itself does not have it yet")
	_, err = Open(background, path, Options{})
	require.ErrorIs(t, err, ErrNewer)
}

func TestOpenReadOnlyByChoice(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	db := openStore(t, path, Options{ReadOnly: true})
	require.True(t, db.ReadOnly())
	holds(t, db, lot, sweeps)
	err := db.Update(background, func(*Tx) error { t.Error("called"); return nil })
	require.ErrorIs(t, err, ErrReadOnly)
	err = db.View(background, func(tx *Tx) error { return tx.RenameLot(lot.ID, "B", "") })
	require.ErrorIs(t, err, ErrReadOnly)

	writable := openStore(t, path, Options{})
	err = writable.View(background, func(tx *Tx) error { return tx.RenameLot(lot.ID, "B", "") })
	require.ErrorIs(t, err, ErrReadOnly, "a view never writes")
	holds(t, writable, lot, sweeps)
}

// A view sees one state, whatever is written meanwhile.
func TestViewIsASnapshot(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	view(t, db, func(tx *Tx) {
		first, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		update(t, db, func(tx *Tx) { require.NoError(t, tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 3)})) })
		second, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		require.Equal(t, first, second)
	})
	view(t, db, func(tx *Tx) {
		list, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		require.Len(t, list, 3)
	})
}

func TestViewsWithinViews(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	var deeper func(n int)
	deeper = func(n int) {
		view(t, db, func(*Tx) {
			if n > 0 {
				deeper(n - 1)
			}
			holds(t, db, lot, sweeps)
		})
	}
	soon(t, func() { deeper(8) })
}

func TestRemoveIfEmpty(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "one", "two", "gatesill.db")
	try := func(prepare func(*DB), removed bool) {
		t.Helper()
		db, err := Open(background, path, Options{Create: true})
		require.NoError(t, err)
		prepare(db)
		got, err := db.RemoveIfEmpty(background)
		require.NoError(t, err)
		require.Equal(t, removed, got)
	}
	try(func(*DB) {}, true)
	require.Empty(t, folder(t, dir), "with the folders that were made for it")
	try(func(db *DB) {
		require.Error(t, db.Update(background, func(tx *Tx) error { addLot(t, tx, "A", 1); return os.ErrInvalid }))
	}, true)
	require.Empty(t, folder(t, dir))
	try(func(*DB) { require.NoError(t, os.WriteFile(filepath.Join(dir, "one", "note"), nil, 0o600)) }, true)
	require.Equal(t, map[string]string{"note": contentID("")}, folder(t, filepath.Join(dir, "one")), "somebody else's file stays")
	var lot record.Lot
	var sweeps []record.Sweep
	try(func(db *DB) { lot, sweeps = fill(t, db) }, false)
	try(func(*DB) {}, false) // not made now
	holds(t, openStore(t, path, Options{}), lot, sweeps)
}

// What is written to a file without a name is lost, so it is refused.
func TestFileRemovedWhileOpen(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	defer db.Close()
	fill(t, db)
	if err := os.Remove(path); err != nil {
		t.Skip("an open file cannot be removed here:", err)
	}
	err = db.Update(background, func(*Tx) error { t.Error("called"); return nil })
	require.ErrorIs(t, err, ErrNoStore)
	require.ErrorContains(t, err, "removed or replaced")
	require.NoError(t, os.WriteFile(path, []byte("another"), 0o600))
	err = db.Update(background, func(*Tx) error { t.Error("called"); return nil })
	require.ErrorIs(t, err, ErrNoStore)
}

func TestDefaultPath(t *testing.T) {
	home := t.TempDir()
	t.Setenv("HOME", home)
	t.Setenv("GATESILL_STORE", "somewhere.db")
	path, err := DefaultPath()
	require.NoError(t, err)
	require.Equal(t, "somewhere.db", path)
	check := func(system, xdg, want string) {
		t.Helper()
		t.Setenv("XDG_DATA_HOME", xdg)
		got, err := dataFolder(system)
		require.NoError(t, err)
		require.Equal(t, want, got)
	}
	check("linux", "", filepath.Join(home, ".local", "share"))
	check("linux", "relative/data", filepath.Join(home, ".local", "share"))
	check("linux", filepath.Join(home, "data"), filepath.Join(home, "data"))
	t.Setenv("GATESILL_STORE", "")
	path, err = DefaultPath()
	require.NoError(t, err)
	require.Equal(t, filepath.Join("gatesill", "gatesill.db"), filepath.Join(filepath.Base(filepath.Dir(path)), filepath.Base(path)))
	t.Setenv("HOME", "")
	t.Setenv("XDG_DATA_HOME", "")
	_, err = dataFolder("linux")
	require.Error(t, err)
}
