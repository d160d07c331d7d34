package main

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"gatesill/acquire/rehearsal"
	"gatesill/cmd/internal/job"
	"gatesill/store"
	"gatesill/store/record"
)

// offPatience is how long a loaded machine may take.
const offPatience = 30 * time.Second

// driven is the program in a driven sweep, at a simulated bench that is not its
// child and so outlives it.
type driven struct {
	t     *testing.T
	r     *rehearsal.Rehearsal
	cmd   *exec.Cmd
	out   bytes.Buffer
	store string
	ended chan struct{}
}

func startDriven(t *testing.T) *driven {
	t.Helper()
	dir := t.TempDir()
	c, err := rehearsal.Standard(rehearsal.Quick)
	if err != nil {
		t.Fatal(err)
	}
	c.Folder = filepath.Join(dir, "lines")
	exe, err := exec.LookPath("gatesill")
	if err != nil {
		t.Fatal(err)
	}
	d := &driven{t: t, store: filepath.Join(dir, "store.db"), ended: make(chan struct{})}
	if d.r, err = rehearsal.Start(context.Background(), exe, []string{job.RehearsalVerb}, nil, c); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { d.r.Close() })
	bench := filepath.Join(dir, "bench.toml")
	if err := os.WriteFile(bench, []byte(d.r.Bench()), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := d.r.Insert("R1"); err != nil {
		t.Fatal(err)
	}
	d.cmd = exec.Command(exe, "--store", d.store, "sweep", "lot", "R1", "--bench", bench, "--drive", "--from", "2.5", "--step", "10mV", "--skip-checks", "simulated")
	d.cmd.Stdout, d.cmd.Stderr = &d.out, &d.out
	d.cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true} // a signal to its group must not reach the test
	if err := d.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() { d.cmd.Wait(); close(d.ended) }()
	t.Cleanup(func() { d.cmd.Process.Kill(); <-d.ended })
	return d
}

// log is what a supply has heard; the line that is being written is left out.
func (d *driven) log(drives string) []rehearsal.Heard {
	d.t.Helper()
	for end := time.Now().Add(time.Second); ; {
		h, err := d.r.Log(drives)
		if err == nil || time.Now().After(end) {
			if err != nil {
				d.t.Fatal(err)
			}
			return h
		}
	}
}

// await waits until a supply has heard what is looked for, at since or later.
func (d *driven) await(drives string, since time.Time, what func(rehearsal.Heard) bool) rehearsal.Heard {
	d.t.Helper()
	for end := time.Now().Add(offPatience); time.Now().Before(end); time.Sleep(5 * time.Millisecond) {
		for _, h := range d.log(drives) {
			if h.UnixNano >= since.UnixNano() && what(h) {
				return h
			}
		}
	}
	<-time.After(100 * time.Millisecond)
	d.t.Fatalf("the %s supply has not heard it\n%+v\n%s", drives, d.log(drives), &d.out)
	return rehearsal.Heard{}
}

// underway waits until the gate is driven above 2.6 V with the drain supply on.
func (d *driven) underway() {
	d.t.Helper()
	d.await("drain", time.Time{}, func(h rehearsal.Heard) bool { return h.On })
	d.await("gate", time.Time{}, func(h rehearsal.Heard) bool { return h.On && h.Set > 2.6 })
}

// off gives when the later of the two commands of the off state was done.
func (d *driven) off(since time.Time) time.Time {
	d.t.Helper()
	drain := d.await("drain", since, func(h rehearsal.Heard) bool { return !h.On && strings.HasPrefix(h.Text, "OUTP") })
	gate := d.await("gate", since, func(h rehearsal.Heard) bool { return h.Set == 0 && strings.HasPrefix(h.Text, "VOLT") })
	return time.Unix(0, max(drain.UnixNano, gate.UnixNano))
}

// left waits for the program's end and looks at what it has left behind.
func (d *driven) left() {
	d.t.Helper()
	select {
	case <-d.ended:
	case <-time.After(offPatience):
		d.t.Fatalf("the program does not end\n%s", &d.out)
	}
	for end := time.Now().Add(offPatience); ; time.Sleep(20 * time.Millisecond) {
		truth, err := d.r.Truth()
		if err != nil {
			d.t.Fatal(err)
		}
		if truth.Vg < 0.05 && truth.Vdd < 0.05 {
			return
		}
		if time.Now().After(end) {
			d.t.Fatalf("left behind: %+v\n%s", truth, &d.out)
		}
	}
}

// signal sends a signal to the program alone.
func (d *driven) signal(sig syscall.Signal) time.Time {
	at := time.Now()
	if err := d.cmd.Process.Signal(sig); err != nil {
		d.t.Fatal(err)
	}
	return at
}

func (d *driven) fault(f rehearsal.Fault) time.Time {
	at := time.Now()
	if err := d.r.Fault(f); err != nil {
		d.t.Fatal(err)
	}
	return at
}

// began is when the first frame of a kind began on its line, by what the store
// holds of the sweep. The session's time is kept to the millisecond, downwards, so that this is up to one early.
func (d *driven) began(is func(record.Reading) bool) time.Time {
	d.t.Helper()
	ctx := context.Background()
	db, err := store.Open(ctx, d.store, store.Options{})
	if err != nil {
		d.t.Fatal(err)
	}
	defer db.Close()
	var at time.Time
	if err := db.View(ctx, func(tx *store.Tx) error {
		lot, err := tx.Lot("lot")
		if err != nil {
			return err
		}
		sessions, err := tx.Sessions(lot.ID)
		if err != nil || len(sessions) != 1 {
			return fmt.Errorf("%d sessions, %w", len(sessions), err)
		}
		start, err := time.Parse(time.RFC3339Nano, sessions[0].StartedAt)
		if err != nil {
			return err
		}
		sweeps, err := tx.Sweeps(lot.ID, false)
		if err != nil || len(sweeps) != 1 {
			return fmt.Errorf("%d sweeps, %w", len(sweeps), err)
		}
		rs, err := tx.Readings(sweeps[0].ID)
		for _, r := range rs {
			if is(r) {
				at = start.Add(time.Duration(r.At * float64(time.Second)))
				return err
			}
		}
		return fmt.Errorf("no such frame among %d, %w", len(rs), err)
	}); err != nil {
		d.t.Fatal(err)
	}
	return at
}

// causes end a driven sweep; each gives when it was, after the off state was seen.
var causes = []struct {
	name  string
	limit time.Duration // that the cause sets off
	goal  time.Duration // of the median, beyond the limit
	do    func(d *driven) (cause time.Time, later func() time.Time)
}{
	{"SIGKILL", 0, 20 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) { return d.signal(syscall.SIGKILL), nil }},
	{"SIGTERM", 0, 20 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) { return d.signal(syscall.SIGTERM), nil }},
	{"SIGINT", 0, 20 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) { return d.signal(syscall.SIGINT), nil }},
	{"meter-unplugged", 0, 20 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) {
		return d.fault(rehearsal.Fault{Kind: rehearsal.Unplug, Role: "load"}), nil
	}},
	{"meter-silent", time.Second, 100 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) {
		return d.fault(rehearsal.Fault{Kind: rehearsal.Silence, Role: "load"}), nil
	}},
	// A current meter that shows 2,000 times too much is over the limit of 1 A.
	{"limit", 0, 20 * time.Millisecond, func(d *driven) (time.Time, func() time.Time) {
		at := d.fault(rehearsal.Fault{Kind: rehearsal.LostPrefix, Role: "current", Value: 2e6})
		return at, func() time.Time {
			return d.began(func(r record.Reading) bool { return r.Role == "current" && r.Value.Or(0) > 1 })
		}
	}},
}

// offTrial gives the time from a cause to the off state at the supplies.
func offTrial(t *testing.T, i, n int) time.Duration {
	t.Helper()
	d := startDriven(t)
	d.underway()
	time.Sleep(time.Duration(n) * 37 * time.Millisecond) // the cause meets the program at another point each time
	at, later := causes[i].do(d)
	off := d.off(at)
	d.left()
	if later != nil {
		at = later()
	}
	return off.Sub(at)
}

// TestWholeProgramToOff measures from the cause to the off state through the whole
// program: meters and supplies on lines, the sweep, its keeper. Both of the commands of the
// off state count, as their supplies log them; 2 ms of it are the simulated supplies' own. One trial of
// each cause, with room for a loaded machine; GATESILL_LONG=1: three each, with figures for
// scripts/bench.
func TestWholeProgramToOff(t *testing.T) {
	trials := 1
	long := os.Getenv("GATESILL_LONG") != ""
	if long {
		trials = 3
		fmt.Printf("%-16s %6s %9s %9s %9s  %s\n", "cause", "trials", "limit/ms", "median/ms", "max/ms", "goal/ms")
	}
	for i, c := range causes {
		if !long && c.name != "SIGKILL" && c.name != "limit" {
			continue // some seconds each
		}
		var took []time.Duration
		for n := range trials {
			took = append(took, offTrial(t, i, n))
		}
		slices.Sort(took)
		for _, x := range took {
			if x < c.limit-100*time.Millisecond || x > c.limit+2*time.Second {
				t.Errorf("%s: off %v after the cause", c.name, x)
			}
		}
		if !long {
			continue
		}
		ms := func(d time.Duration) float64 { return float64(d) / float64(time.Millisecond) }
		verdict := "reached"
		if took[trials/2] > c.limit+c.goal {
			verdict = "NOT REACHED"
		}
		fmt.Printf("%-16s %6d %9.0f %9.1f %9.1f  %.0f %s\n", c.name, trials, ms(c.limit), ms(took[trials/2]), ms(took[trials-1]), ms(c.limit+c.goal), verdict)
	}
}
