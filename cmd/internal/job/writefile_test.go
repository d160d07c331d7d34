//go:build unix

package job

import (
	"errors"
	"io"
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestWriteFile(t *testing.T) {
	dir := t.TempDir()
	env := &Env{Out: io.Discard}
	hello := func(w io.Writer) error { _, err := io.WriteString(w, "hello"); return err }
	read := func(path string) string {
		b, err := os.ReadFile(path)
		require.NoError(t, err)
		return string(b)
	}
	plain := filepath.Join(dir, "plain")
	require.NoError(t, os.WriteFile(plain, []byte("old"), 0o600))

	// A folder that is not there is said, not the file that would have been beside it.
	err := env.WriteFile(filepath.Join(dir, "absent", "x"), hello)
	require.ErrorContains(t, err, "there is no folder "+filepath.Join(dir, "absent"))
	require.NotContains(t, err.Error(), ".gatesill-")

	// A job that fails leaves the old file and nothing else.
	require.Error(t, env.WriteFile(plain, func(w io.Writer) error { hello(w); return errors.New("no") }))
	require.Equal(t, "old", read(plain))
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.Len(t, entries, 1)

	// The mode stays, and a link is followed.
	link := filepath.Join(dir, "link")
	require.NoError(t, os.Symlink(plain, link))
	require.NoError(t, env.WriteFile(link, hello))
	require.Equal(t, "hello", read(plain))
	st, err := os.Lstat(link)
	require.NoError(t, err)
	require.NotZero(t, st.Mode()&os.ModeSymlink)
	st, err = os.Stat(plain)
	require.NoError(t, err)
	require.Equal(t, os.FileMode(0o600), st.Mode().Perm())

	// A pipe stays a pipe and gets the bytes.
	pipe := filepath.Join(dir, "pipe")
	require.NoError(t, syscall.Mkfifo(pipe, 0o600))
	got := make(chan string)
	go func() {
		b, _ := os.ReadFile(pipe)
		got <- string(b)
	}()
	require.NoError(t, env.WriteFile(pipe, hello))
	require.Equal(t, "hello", <-got)
	st, err = os.Stat(pipe)
	require.NoError(t, err)
	require.NotZero(t, st.Mode()&os.ModeNamedPipe)

	require.Error(t, env.WriteFile(dir, hello))
	require.Error(t, env.WriteFile(filepath.Join(dir, "no", "such"), hello))
}
