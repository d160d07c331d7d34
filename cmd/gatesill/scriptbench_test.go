package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"

	"github.com/rogpeppe/go-internal/testscript"

	"gatesill/acquire/rehearsal"
	"gatesill/store"
	"gatesill/store/record"
)

// patience is how long a script waits for something at most; it is no measure of
// how long anything may take.
const patience = 90 * time.Second

// kept is what the store of a script holds: its sweeps, and how many readings each has.
func kept(path string) (sweeps []record.Sweep, readings map[string]int, devices map[string]string, err error) {
	ctx := context.Background()
	db, err := store.Open(ctx, path, store.Options{ReadOnly: true})
	if err != nil {
		return nil, nil, nil, err
	}
	defer db.Close()
	readings, devices = map[string]int{}, map[string]string{}
	err = db.View(ctx, func(tx *store.Tx) error {
		lots, err := tx.Lots()
		if err != nil {
			return err
		}
		for _, l := range lots {
			ds, err := tx.Devices(l.ID)
			if err != nil {
				return err
			}
			for _, d := range ds {
				devices[d.ID] = d.Name
			}
			some, err := tx.Sweeps(l.ID, true)
			if err != nil {
				return err
			}
			sweeps = append(sweeps, some...)
		}
		open, err := tx.StartedSweeps()
		if err != nil {
			return err
		}
		for _, s := range append(sweeps, open...) {
			rs, err := tx.Readings(s.ID)
			if err != nil {
				return err
			}
			readings[s.ID] = len(rs)
		}
		return nil
	})
	return sweeps, readings, devices, err
}

// cutCmd interrupts a command when enough was read.
func cutCmd(ts *testscript.TestScript, neg bool, args []string) {
	signals := map[string]os.Signal{"INT": os.Interrupt, "KILL": os.Kill, "TERM": syscall.SIGTERM, "HUP": syscall.SIGHUP}
	if neg || len(args) < 4 || signals[args[1]] == nil {
		ts.Fatalf("usage: cut N SIGNAL CODE command...")
	}
	least, err := strconv.Atoi(args[0])
	ts.Check(err)
	bin, err := exec.LookPath(filepath.Join(filepath.SplitList(ts.Getenv("PATH"))[0], args[3]))
	ts.Check(err)
	cmd := exec.Command(bin, args[4:]...)
	cmd.Dir = ts.MkAbs(".")
	cmd.Env = os.Environ()
	for _, name := range []string{"PATH", "HOME", "TMPDIR", "GATESILL_STORE"} {
		cmd.Env = append(cmd.Env, name+"="+ts.Getenv(name))
	}
	create := func(name string) *os.File {
		f, err := os.Create(ts.MkAbs(name))
		ts.Check(err)
		return f
	}
	out, errs := create("stdout"), create("stderr")
	defer out.Close()
	defer errs.Close()
	cmd.Stdout, cmd.Stderr = out, errs
	ts.Check(cmd.Start())
	ended := make(chan error, 1)
	go func() { ended <- cmd.Wait() }()
	said := func() string {
		b, _ := os.ReadFile(ts.MkAbs("stderr"))
		return string(b)
	}
	begun, sent := time.Now(), false
	for {
		select {
		case err = <-ended:
			var exit *exec.ExitError
			if err != nil && !errors.As(err, &exit) {
				ts.Fatalf("%v", err)
			}
			ts.Logf("%s", said())
			if code := cmd.ProcessState.ExitCode(); !sent || strconv.Itoa(code) != args[2] {
				ts.Fatalf("exit code %d, want %s; signal sent: %v", code, args[2], sent)
			}
			return
		case <-time.After(50 * time.Millisecond):
		}
		if time.Since(begun) > patience {
			cmd.Process.Kill()
			<-ended
			ts.Fatalf("neither enough readings nor an end in %v; signal sent: %v\n%s", patience, sent, said())
		}
		if sent {
			continue
		}
		_, readings, _, err := kept(ts.Getenv("GATESILL_STORE"))
		if err != nil {
			continue // not made yet, or busy
		}
		n := 0
		for _, m := range readings {
			n += m
		}
		if sent = n >= least; sent {
			ts.Check(cmd.Process.Signal(signals[args[1]]))
		}
	}
}

// suppliesCmd reads the logs of the simulated supplies of benches whose program was
// killed: those of others are gone with their bench.
func suppliesCmd(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 1 || args[0] != "off" {
		ts.Fatalf("usage: supplies off")
	}
	logs, err := filepath.Glob(filepath.Join(ts.Getenv("TMPDIR"), "gatesill-rehearsal-*", "supply-*.log"))
	ts.Check(err)
	if len(logs) < 2 {
		ts.Fatalf("no logs of supplies")
	}
	last := func(path string) (h rehearsal.Heard, n int, wasOn bool) {
		f, err := os.Open(path)
		ts.Check(err)
		defer f.Close()
		for in := bufio.NewScanner(f); in.Scan(); n++ {
			if json.Unmarshal(in.Bytes(), &h) != nil {
				break // being written
			}
			wasOn = wasOn || h.On
		}
		return h, n, wasOn
	}
	for _, path := range logs {
		for begun := time.Now(); ; time.Sleep(50 * time.Millisecond) {
			h, n, wasOn := last(path)
			if n > 0 && wasOn && !h.On {
				break
			}
			if time.Since(begun) > patience {
				ts.Fatalf("%s: on %v, was on %v, after %d commands, the last %+v", filepath.Base(path), h.On, wasOn, n, h)
			}
		}
	}
	keeperOff(ts)
}

// keeperOff waits for the keeper's own last word: it outlives the program.
func keeperOff(ts *testscript.TestScript) {
	log := strings.TrimSuffix(ts.Getenv("GATESILL_STORE"), ".db") + ".supplies.log"
	for begun := time.Now(); ; time.Sleep(50 * time.Millisecond) {
		b, err := os.ReadFile(log)
		ts.Check(err)
		if i := strings.LastIndex(string(b), "off state: "); i >= 0 && strings.Contains(string(b[i:]), "Reached:true") {
			return
		}
		if time.Since(begun) > patience {
			ts.Fatalf("the keeper never says that it reached the off state")
		}
	}
}

// sweepsCmd looks which sweeps the store holds that count.
func sweepsCmd(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 1 {
		ts.Fatalf("usage: sweeps N DEVICE...")
	}
	least, err := strconv.Atoi(args[0])
	ts.Check(err)
	sweeps, readings, devices, err := kept(ts.Getenv("GATESILL_STORE"))
	ts.Check(err)
	left := map[string]bool{}
	for _, d := range args[1:] {
		left[d] = true
	}
	for _, s := range sweeps {
		name := devices[s.DeviceID]
		switch {
		case s.Excluded:
		case !left[name]:
			ts.Fatalf("a sweep of %s that nobody expects", name)
		case s.Len() == 0 || readings[s.ID] < least:
			ts.Fatalf("sweep of %s: %d points of %d readings", name, s.Len(), readings[s.ID])
		default:
			delete(left, name)
		}
	}
	for d := range left {
		ts.Fatalf("no sweep of %s", d)
	}
}
