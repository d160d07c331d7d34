//go:build unix

package store

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// nobody is a user without rights; the one who runs the tests may be root, who
// has them all.
const nobody = 65534

func init() {
	// visit opens the store as somebody without rights and says what works:
	// how it opened, how many sweeps of lot A it reads, what writing says.
	children["visit"] = func(args []string) error {
		db, err := Open(background, args[0], Options{Create: len(args) > 1})
		if err != nil {
			say("open:", meaning(err))
			return nil
		}
		defer db.Close()
		say("open: read-only", db.ReadOnly())
		err = db.View(background, func(tx *Tx) error {
			lot, err := tx.Lot("A")
			if err != nil {
				return err
			}
			list, err := tx.Sweeps(lot.ID, true)
			say("sweeps:", len(list))
			return err
		})
		if err != nil {
			say("view:", meaning(err))
		}
		p := record.NewPart("of a visitor")
		say("update:", meaning(db.Update(background, func(tx *Tx) error { return tx.PutPart(&p, "") })))
		return nil
	}
}

// meaning names the error of this package that err is, with the hint it has.
func meaning(err error) string {
	if err == nil {
		return "done"
	}
	var e *Error
	if !errors.As(err, &e) || e.Hint == "" {
		return "no hint: " + err.Error()
	}
	for _, known := range []error{ErrNoStore, ErrNotOurs, ErrNewer, ErrCorrupt, ErrReadOnly, ErrFull, ErrBusy, fs.ErrPermission} {
		if errors.Is(err, known) {
			return known.Error()
		}
	}
	return err.Error()
}

// visit lets somebody without rights visit the store and gives what they say.
func visit(t *testing.T, path string, more ...string) string {
	t.Helper()
	binary := os.Args[0]
	c := &child{cmd: exec.Command(binary, append([]string{path}, more...)...)}
	if os.Geteuid() == 0 {
		// Where the test binary lies, nobody may look.
		c.cmd.Path = copyBinary(t)
		c.cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: nobody, Gid: nobody}}
		c.cmd.Dir = "/"
	}
	c.start(t, "visit")
	said, err := io.ReadAll(c.out)
	require.NoError(t, err)
	require.NoError(t, c.cmd.Wait(), "child: %s", &c.noise)
	return strings.TrimSpace(string(said))
}

var copied string // of the test binary, for all tests

func copyBinary(t *testing.T) string {
	t.Helper()
	if copied != "" {
		return copied
	}
	to := filepath.Join(openDir(t), "visitor")
	b, err := os.ReadFile(os.Args[0])
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(to, b, 0o755))
	copied = to
	t.Cleanup(func() { copied = "" })
	return to
}

// openDir is a folder that everybody may look into.
func openDir(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	for d := dir; d != filepath.Clean(os.TempDir()) && d != "/"; d = filepath.Dir(d) {
		require.NoError(t, os.Chmod(d, 0o755))
	}
	return dir
}

// storeFor makes a closed store with content in an open folder.
func storeFor(t *testing.T) (path string, lot record.Lot, sweeps []record.Sweep) {
	t.Helper()
	path = filepath.Join(openDir(t), "gatesill.db")
	db, err := Open(background, path, Options{Create: true})
	require.NoError(t, err)
	lot, sweeps = fill(t, db)
	require.NoError(t, db.Close())
	return path, lot, sweeps
}

const readsOnly = "open: read-only true\nsweeps: 2\nupdate: read-only"

func TestPermissions(t *testing.T) {
	for name, c := range map[string]struct {
		file, folder os.FileMode
		says         string
	}{
		"all may write":                      {0o666, 0o777, "open: read-only false\nsweeps: 2\nupdate: done"},
		"file cannot be written":             {0o444, 0o777, readsOnly},
		"folder cannot be written":           {0o666, 0o555, readsOnly},
		"neither file nor folder":            {0o444, 0o555, readsOnly},
		"file cannot be read":                {0o000, 0o777, "open: permission denied"},
		"folder cannot be looked into":       {0o666, 0o000, "open: permission denied"},
		"neither of them can be looked into": {0o000, 0o000, "open: permission denied"},
	} {
		t.Run(name, func(t *testing.T) {
			path, lot, sweeps := storeFor(t)
			before := folder(t, filepath.Dir(path))
			require.NoError(t, os.Chmod(path, c.file))
			require.NoError(t, os.Chmod(filepath.Dir(path), c.folder))
			said := visit(t, path)
			require.NoError(t, os.Chmod(filepath.Dir(path), 0o755))
			require.NoError(t, os.Chmod(path, 0o644))
			require.Equal(t, c.says, said)
			if !strings.Contains(c.says, "done") {
				require.Equal(t, before[filepath.Base(path)], folder(t, filepath.Dir(path))[filepath.Base(path)], "the file changed")
			}
			holds(t, openStore(t, path, Options{}), lot, sweeps)
		})
	}
}

// A store that somebody else has open for writing, in a folder where the
// visitor cannot write: what is in the write-ahead log is read too, or it is
// said that it cannot be.
func TestPermissionsBesideAWriter(t *testing.T) {
	path, lot, sweeps := storeFor(t)
	db := openStore(t, path, Options{})
	update(t, db, func(tx *Tx) { require.NoError(t, tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 3)})) })
	require.True(t, db.hasLog())
	if os.Geteuid() != 0 {
		require.NoError(t, os.Chmod(path, 0o444))
		require.NoError(t, os.Chmod(filepath.Dir(path), 0o555))
	}
	said := visit(t, path)
	require.NoError(t, os.Chmod(filepath.Dir(path), 0o755))
	require.Equal(t, "open: read-only true\nsweeps: 3\nupdate: read-only", said)
	view(t, db, func(tx *Tx) {
		list, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		require.Len(t, list, 3)
	})
}

// A write-ahead log that a crash left, on a medium that cannot be written: its
// content cannot be read, so nothing is.
func TestPermissionsAfterACrash(t *testing.T) {
	path, _, sweeps := storeFor(t)
	db := openStore(t, path, Options{})
	update(t, db, func(tx *Tx) { require.NoError(t, tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 3)})) })
	dir := openDir(t)
	to := filepath.Join(dir, "gatesill.db")
	for _, suffix := range []string{"", "-wal"} {
		b, err := os.ReadFile(path + suffix)
		require.NoError(t, err)
		require.NoError(t, os.WriteFile(to+suffix, b, 0o644))
	}
	require.NoError(t, os.Chmod(dir, 0o555))
	before := folder(t, dir)
	require.Equal(t, "open: read-only", visit(t, to))
	require.Equal(t, before, folder(t, dir))
	require.NoError(t, os.Chmod(dir, 0o777))
	require.NoError(t, os.Chmod(to, 0o666))
	require.NoError(t, os.Chmod(to+"-wal", 0o666))
	require.Equal(t, "open: read-only false\nsweeps: 3\nupdate: done", visit(t, to), "with access all of it is there")
}

func TestPermissionToMake(t *testing.T) {
	dir := openDir(t)
	require.NoError(t, os.Chmod(dir, 0o555))
	require.Equal(t, "open: read-only", visit(t, filepath.Join(dir, "gatesill.db"), "create"))
	require.Equal(t, "open: read-only", visit(t, filepath.Join(dir, "deep", "gatesill.db"), "create"))
	require.NoError(t, os.Chmod(dir, 0o777))
	require.Empty(t, folder(t, dir))
	require.Equal(t, "open: read-only false\nview: no hint: lot \"A\": not found\nupdate: done", visit(t, filepath.Join(dir, "deep", "gatesill.db"), "create"))
}

// A store of an older form that cannot be written cannot be brought up to date.
func TestPermissionsOlderForm(t *testing.T) {
	path, _, _ := storeFor(t)
	rawExec(t, path, "PRAGMA user_version = 0")
	require.NoError(t, os.Chmod(path, 0o444))
	require.Equal(t, "open: read-only", visit(t, path))
}
