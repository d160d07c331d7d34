package store

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// childVariable names the part that this binary plays when a test starts it as
// another process.
const childVariable = "GATESILL_STORE_TEST_CHILD"

// children are those parts; each gets the arguments of its process.
var children = map[string]func(args []string) error{}

func TestMain(m *testing.M) {
	if name := os.Getenv(childVariable); name != "" {
		if err := children[name](os.Args[1:]); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// child is another process.
type child struct {
	cmd   *exec.Cmd
	in    io.WriteCloser
	out   *bufio.Reader
	noise strings.Builder
}

// start starts this binary as another process. It is killed when the test ends.
func start(t *testing.T, name string, args ...string) *child {
	t.Helper()
	c := &child{cmd: exec.Command(os.Args[0], args...)}
	return c.start(t, name)
}

func (c *child) start(t *testing.T, name string) *child {
	t.Helper()
	c.cmd.Env = append(os.Environ(), childVariable+"="+name)
	c.cmd.Stderr = &c.noise
	in, err := c.cmd.StdinPipe()
	require.NoError(t, err)
	out, err := c.cmd.StdoutPipe()
	require.NoError(t, err)
	c.in, c.out = in, bufio.NewReader(out)
	require.NoError(t, c.cmd.Start())
	t.Cleanup(func() {
		_ = c.cmd.Process.Kill() // it may have ended
		_ = c.cmd.Wait()
	})
	return c
}

// line reads the next line of what the child says.
func (c *child) line(t *testing.T) string {
	t.Helper()
	s, err := c.out.ReadString('\n')
	require.NoError(t, err, "child: %s", &c.noise)
	return strings.TrimSpace(s)
}

// end lets the child end by itself and expects no error.
func (c *child) end(t *testing.T) {
	t.Helper()
	require.NoError(t, c.in.Close())
	require.NoError(t, c.cmd.Wait(), "child: %s", &c.noise)
}

var background = context.Background()

// newStore makes a store for one test.
func newStore(t *testing.T) *DB {
	t.Helper()
	return openStore(t, filepath.Join(t.TempDir(), "gatesill.db"), Options{Create: true, Who: "tester"})
}

// openStore opens a store until the test ends.
func openStore(t *testing.T, path string, o Options) *DB {
	t.Helper()
	db, err := Open(background, path, o)
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, db.Close()) })
	return db
}

// update and view run f in one transaction that must succeed.
func update(t testing.TB, db *DB, f func(tx *Tx)) {
	t.Helper()
	require.NoError(t, db.Update(background, func(tx *Tx) error { f(tx); return nil }))
}

func view(t testing.TB, db *DB, f func(tx *Tx)) {
	t.Helper()
	require.NoError(t, db.View(background, func(tx *Tx) error { f(tx); return nil }))
}

// invented is a whole sweep of an invented device: n points from vg = 1 V up.
func invented(deviceID string, n int) record.Sweep {
	vg, id := make([]float64, n), make([]float64, n)
	for i := range n {
		vg[i], id[i] = 1+float64(i)/100, float64(i)*float64(i)/10000
	}
	return record.Sweep{DeviceID: deviceID, Position: 1, Direction: record.Up,
		Columns: []record.Column{{Quantity: record.VG, Values: vg}, {Quantity: record.ID, Values: id}}}
}

// fill makes lot A with two devices and one sweep of each.
func fill(t testing.TB, db *DB) (lot record.Lot, sweeps []record.Sweep) {
	t.Helper()
	update(t, db, func(tx *Tx) {
		var ds []record.Device
		lot, ds = addLot(t, tx, "A", 2)
		sweeps = []record.Sweep{invented(ds[0].ID, 50), invented(ds[1].ID, 40)}
		require.NoError(t, tx.AddSweeps(sweeps))
	})
	return lot, sweeps
}

// holds checks that the store is whole and has just these sweeps of the lot.
func holds(t testing.TB, db *DB, lot record.Lot, want []record.Sweep) {
	t.Helper()
	require.NoError(t, db.Check(background))
	view(t, db, func(tx *Tx) {
		got, err := tx.Sweeps(lot.ID, true)
		require.NoError(t, err)
		require.Equal(t, want, got)
		for i := range got {
			require.Equal(t, got[i].DataHash, got[i].Hash())
		}
	})
}

// addLot makes a part and a lot with that many devices D0001, D0002, ...
func addLot(tb testing.TB, tx *Tx, name string, devices int) (record.Lot, []record.Device) {
	tb.Helper()
	p := record.NewPart("invented part")
	require.NoError(tb, tx.PutPart(&p, ""))
	l := record.Lot{Name: name, PartID: p.ID}
	require.NoError(tb, tx.PutLot(&l, ""))
	ds := make([]record.Device, devices)
	for i := range ds {
		ds[i] = record.Device{Name: fmt.Sprintf("D%04d", i+1), Role: record.Sample}
	}
	require.NoError(tb, tx.AddDevices(l.ID, ds))
	return l, ds
}

// soon fails the test when f takes longer than a minute.
func soon(t *testing.T, f func()) {
	t.Helper()
	done := make(chan struct{})
	go func() { defer close(done); f() }()
	select {
	case <-done:
	case <-time.After(time.Minute):
		t.Fatal("still not done after a minute")
	}
}

// say prints a line to the test that started this process.
func say(words ...any) { fmt.Println(words...) }

// waitForEnd waits until the test closes the input of this process.
func waitForEnd() { _, _ = io.Copy(io.Discard, os.Stdin) }
