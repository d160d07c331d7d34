package store

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// next is a form that does not exist yet: what is to come, as far as opening
// goes.
var next = append(append([]migration{}, migrations...),
	migration{"add.sql", `ALTER TABLE part ADD COLUMN maker TEXT NOT NULL DEFAULT ''; CREATE TABLE maker (name TEXT) STRICT;`},
	migration{"rebuild.sql", `
		CREATE TABLE new_bench (id TEXT PRIMARY KEY, name TEXT NOT NULL, text TEXT NOT NULL) STRICT;
		INSERT INTO new_bench SELECT id, name, text FROM bench;
		DROP TABLE bench;
		ALTER TABLE new_bench RENAME TO bench;`})

func TestMigrate(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	older, err := os.ReadFile(path)
	require.NoError(t, err)

	_, err = open(background, path, Options{ReadOnly: true}, next)
	require.ErrorIs(t, err, ErrReadOnly)
	require.ErrorContains(t, err, fmt.Sprintf("older form %d", len(migrations)))

	db, err := open(background, path, Options{}, next)
	require.NoError(t, err)
	var version, keys, makers int
	require.NoError(t, db.writes.QueryRow("PRAGMA user_version").Scan(&version))
	require.NoError(t, db.writes.QueryRow("PRAGMA foreign_keys").Scan(&keys))
	require.NoError(t, db.writes.QueryRow("SELECT count(*) FROM part WHERE maker = ''").Scan(&makers))
	require.Equal(t, []int{len(next), 1, 1}, []int{version, keys, makers})
	holds(t, db, lot, sweeps)
	require.NoError(t, db.Close())

	refused(t, path, Options{}, ErrNewer)
	copies, err := filepath.Glob(fmt.Sprintf("%s.form%d.*", path, len(migrations)))
	require.NoError(t, err)
	require.Len(t, copies, 1, "the older one beside it")
	db, err = Open(background, copies[0], Options{})
	require.NoError(t, err)
	holds(t, db, lot, sweeps)
	require.NoError(t, db.Close())

	// Once more: there is nothing to do, and no further copy.
	db, err = open(background, path, Options{}, next)
	require.NoError(t, err)
	require.NoError(t, db.Close())
	copies, err = filepath.Glob(path + ".form*")
	require.NoError(t, err)
	require.Len(t, copies, 1)

	// One step after the other leads to the same as all at once.
	second := filepath.Join(t.TempDir(), "gatesill.db")
	require.NoError(t, os.WriteFile(second, older, 0o600))
	for n := len(migrations) + 1; n <= len(next); n++ {
		db, err := open(background, second, Options{}, next[:n])
		require.NoError(t, err)
		require.NoError(t, db.Close())
	}
	require.Equal(t, schema(t, path), schema(t, second))
}

// TestFormOne brings a store of the first form forward with what is in it.
func TestFormOne(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := open(background, path, Options{Create: true}, migrations[:1])
	require.NoError(t, err)
	p := record.NewPart("P")
	require.NoError(t, db.Update(background, func(tx *Tx) error { return tx.PutPart(&p, "") }))
	require.NoError(t, db.Close())
	rawExec(t, path, `INSERT INTO lot SELECT '018f4e7c-0000-7000-8000-000000000001', 'L', id, '', '', '', NULL, '', 0, '', NULL, 0, '', '', NULL, '', created_at, '' FROM part`,
		`INSERT INTO device SELECT '018f4e7c-0000-7000-8000-000000000002', id, 'D', NULL, '', '', '', '', 'sample', 0, '', '', created_at, '' FROM lot`,
		`INSERT INTO sweep (id, device_id, position, direction, excluded, why, circuit, ammeter, gate_return, pulsed, temp_of, data_hash, points, vg_v, id_a)
			SELECT '018f4e7c-0000-7000-8000-000000000003', id, 1, 'up', 0, '', '', '', '', '', '', hex(zeroblob(32)), 2, '[3.0,3.1]', '[0.001,0.002]' FROM device`)
	_, err = Open(background, path, Options{ReadOnly: true})
	require.ErrorIs(t, err, ErrOlder)
	db = openStore(t, path, Options{})
	view(t, db, func(tx *Tx) {
		s, err := tx.Sweep("018f4e7c-0000-7000-8000-000000000003")
		require.NoError(t, err)
		require.Equal(t, []float64{3, 3.1}, s.Values(record.VG))
		require.Nil(t, s.Column(record.PairBound))
	})
	fresh, _, _ := closedStore(t)
	require.Equal(t, schema(t, fresh), schema(t, path))
	copies, err := filepath.Glob(path + ".form1.*")
	require.NoError(t, err)
	require.Len(t, copies, 1)
}

// schema gives the statements that made all tables, indexes, views, triggers.
func schema(t *testing.T, path string) []string {
	t.Helper()
	rows, err := raw(t, path).Query("SELECT coalesce(sql, name) FROM sqlite_schema ORDER BY name")
	require.NoError(t, err)
	defer rows.Close()
	var all []string
	for rows.Next() {
		var s string
		require.NoError(t, rows.Scan(&s))
		all = append(all, s)
	}
	require.NoError(t, rows.Err())
	return all
}

func TestMigrationFails(t *testing.T) {
	for name, sql := range map[string]string{
		"half of it is wrong": `CREATE TABLE extra (x INTEGER) STRICT; UPDATE part SET name = 'changed'; DROP TABLE none;`,
		"breaks a reference":  `DROP TRIGGER source_stays; DELETE FROM part;`,
		"not SQL":             `no SQL`,
	} {
		t.Run(name, func(t *testing.T) {
			path, lot, sweeps := closedStore(t)
			before := schema(t, path)
			_, err := open(background, path, Options{}, append(append([]migration{}, migrations...), migration{"bad.sql", sql}))
			require.ErrorContains(t, err, "bad.sql")
			require.Equal(t, before, schema(t, path))
			holds(t, openStore(t, path, Options{}), lot, sweeps)
		})
	}
	path := filepath.Join(t.TempDir(), "deep", "gatesill.db")
	_, err := open(background, path, Options{Create: true}, []migration{{"bad.sql", "no SQL"}})
	require.ErrorContains(t, err, "bad.sql")
	require.NoDirExists(t, filepath.Dir(path), "nothing half-made is left")
}

// The copy is what makes the step safe: without it there is no step.
func TestNoMigrationWithoutCopy(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	db := openStore(t, path, Options{})
	db.path = filepath.Join(t.TempDir(), "gone", "gatesill.db") // where no copy can be put
	require.ErrorContains(t, db.upToDate(background, next), "copy before the change")
	holds(t, db, lot, sweeps)
	var version int
	require.NoError(t, db.reads.QueryRow("PRAGMA user_version").Scan(&version))
	require.Equal(t, len(migrations), version)
}

func TestLoadMigrations(t *testing.T) {
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	got := mustLoad(fstest.MapFS{"migrations/0002.sql": file("b"), "migrations/0001.sql": file("a"), "migrations/note": file("")})
	require.Equal(t, []migration{{"migrations/0001.sql", "a"}, {"migrations/0002.sql", "b"}}, got)
	require.Panics(t, func() { mustLoad(fstest.MapFS{"migrations/0002.sql": file("b")}) })
	require.Panics(t, func() { mustLoad(fstest.MapFS{}) })
}
