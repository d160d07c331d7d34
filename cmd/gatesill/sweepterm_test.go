//go:build linux

package main

import (
	"context"
	"errors"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"gatesill/store"
)

// TestSweepOnATerminal leads a sitting by hand with keys: cautions, checks, a device
// that is finished early, one that is skipped with a reason, and Ctrl-C.
func TestSweepOnATerminal(t *testing.T) {
	dir, bin := buildProgram(t)
	path := filepath.Join(dir, "store.db")
	// What is typed when something new is on the screen, in this order.
	script := []struct{ see, press string }{
		{"read these, then press space", " "},     // of the set-up
		{"take every device out", " "},            // checks
		{"read these, then press space", " "},     // of the device
		{"comes near is oscillation", " "},        // their second page
		{"insert R1; then press space", " "},      //
		{"2 points", "u"},                         // once more
		{"taken back", "f"},                       // what is there is enough
		{"space goes on to the next device", " "}, //
		{"insert R2; then press space", " "},      //
		{"turn to 2.700 V", "k"},                  //
		{"why is R2 skipped", "bent pins\r"},      //
		{"insert R3; then press space", "\x03"},   // Ctrl-C as a key
	}
	next := 0
	text, err := onTerminal(t, bin, func(written string) string {
		if next == len(script) || !strings.Contains(written, script[next].see) {
			return ""
		}
		next++
		return script[next-1].press
	}, "--store", path, "sweep", "bag", "R1", "R2", "R3", "--rehearsal", "--by-hand", "--from", "2.7", "--step", "50mV")
	var exit *exec.ExitError
	if !errors.As(err, &exit) || exit.ExitCode() != 130 || next != len(script) {
		t.Fatalf("%v, at step %d of %d\n%s", err, next, len(script), text)
	}
	live, after, left := strings.Cut(text, "\x1b[?1049l")
	if !left || !strings.Contains(live, "█") || !strings.Contains(live, "drain current") || strings.Contains(after, "\x1b") {
		t.Errorf("terminal not taken, not given back, or no picture:\n%q", text)
	}
	if !strings.Contains(after, "bent pins") {
		t.Errorf("afterwards nothing of the reason:\n%s", after)
	}
	sweeps, readings, devices, err := kept(path)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, s := range sweeps {
		name := devices[s.DeviceID]
		switch {
		case name == "R1" && !s.Excluded && s.Len() >= 1 && readings[s.ID] > 10:
			seen[name] = true
		case name == "R2" && s.Excluded && s.Why == "bent pins":
			seen[name] = true
		default:
			t.Errorf("a sweep of %s: excluded %v (%s), %d points", name, s.Excluded, s.Why, s.Len())
		}
	}
	if !seen["R1"] {
		t.Error("no sweep of R1")
	}
	db, err := store.Open(context.Background(), path, store.Options{ReadOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	defer db.Close()
	var kinds []string
	if err := db.View(context.Background(), func(tx *store.Tx) error {
		lot, err := tx.Lot("bag")
		if err != nil {
			return err
		}
		sessions, err := tx.Sessions(lot.ID)
		for _, s := range sessions {
			es, err := tx.Events(s.ID)
			if err != nil {
				return err
			}
			for _, e := range es {
				kinds = append(kinds, e.Kind+" "+e.Text)
			}
		}
		return err
	}); err != nil {
		t.Fatal(err)
	}
	if all := strings.Join(kinds, "\n"); !strings.Contains(all, "skip bent pins") || !strings.Contains(all, "start-check the gate meter moved") {
		t.Errorf("events:\n%s", all)
	}
}
