package scpi

import (
	"errors"
	"fmt"
	"strings"
	"time"
)

// Refused is a command that the instrument answered with an error. It may have done
// part of it.
type Refused struct {
	Line    string // address of the instrument's line
	Command string
	Code    int
	Text    string
	All     []Entry // everything in the queue after the command, this error first
}

func (r *Refused) Error() string {
	return fmt.Sprintf("%s: %q was refused: %d %s", r.Line, r.Command, r.Code, r.Text)
}

// queueOverflow says that entries were lost (SCPI-1999 volume 2, 21.8; from memory).
const queueOverflow = -350

// Do sends a command and waits until it is done and was not refused; see [Refused].
// [ErrSilent] leaves open whether it was taken: it is not sent again, because not
// every command may be. In a plain dialect it is sent, and that is all.
func (t *Talk) Do(cmd string) error {
	if err := oneCommand(cmd); err != nil {
		return err
	}
	if strings.Contains(cmd, "?") {
		return fmt.Errorf("%w: %q asks for a reply", ErrCommand, cmd)
	}
	if t.o.Plain {
		return t.send(cmd)
	}
	timeout := t.timeout(cmd, 0)
	if t.unsure {
		if err := t.resync(timeout, true); err != nil {
			return err
		}
	}
	if !t.settled {
		if err := t.settle(); err != nil {
			return err
		}
	}
	reply, err := t.ask(cmd+";*OPC?", timeout)
	if errors.Is(err, ErrSilent) {
		return t.whySilent(cmd, timeout, err)
	}
	if err == nil && strings.TrimPrefix(reply, "+") != "1" {
		t.unsure = true
		err = fmt.Errorf("%s: %w: %q when %q was to be done", t.c.Address(), ErrReply, reply, cmd)
	}
	if err != nil {
		return err
	}
	entries, err := t.queue()
	if err != nil && !errors.Is(err, ErrEndless) {
		return err
	}
	return t.verdict(cmd, entries)
}

// whySilent asks the error queue after a command that was not completed: instruments
// drop what stands behind a command that they do not know, *OPC? with it.
func (t *Talk) whySilent(cmd string, timeout time.Duration, silent error) error {
	reply, err := t.ask("SYST:ERR?", timeout)
	late := err == nil && strings.TrimPrefix(reply, "+") == "1"
	if late { // of the *OPC?; the error queue's comes behind it
		reply, err = t.line(time.Now().Add(timeout))
	}
	var first Entry
	if err == nil {
		first, err = ParseEntry(reply)
	}
	if err != nil {
		t.unsure = true
		return silent
	}
	var entries []Entry
	if first.Code != 0 {
		rest, err := t.queue()
		if err != nil && !errors.Is(err, ErrEndless) {
			return err
		}
		entries = append([]Entry{first}, rest...)
	}
	if refused := t.verdict(cmd, entries); refused != nil || late {
		return refused
	}
	t.unsure = true
	return silent
}

// verdict tells whether a queue holds a refusal of the command.
func (t *Talk) verdict(cmd string, entries []Entry) error {
	for i, e := range entries {
		if !t.standing[e.Code] {
			return &Refused{Line: t.c.Address(), Command: cmd, Code: e.Code, Text: e.Text, All: entries[i:]}
		}
	}
	return nil
}

// settle empties the error queue of what was there before the conversation. Faults
// that come back at once, even after *CLS, are the instrument's own, and from then on
// held against no command.
func (t *Talk) settle() error {
	if _, err := t.queue(); err != nil && !errors.Is(err, ErrEndless) {
		return err
	}
	if err := t.send("*CLS"); err != nil {
		return err
	}
	entries, err := t.queue()
	if err != nil && !errors.Is(err, ErrEndless) {
		return err
	}
	t.standing = map[int]bool{}
	for _, e := range entries {
		// Errors about commands and data, -100 to -299 and -400 on, are never faults.
		if (e.Code > 0 || e.Code <= -300 && e.Code > -400) && e.Code != queueOverflow {
			t.standing[e.Code] = true
		}
	}
	t.settled = true
	return nil
}

// Errors reads the error queue until it is empty. With [ErrEndless] it gives the
// entries that it read until it gave up. A plain dialect has no queue.
func (t *Talk) Errors() ([]Entry, error) {
	if t.o.Plain {
		return nil, nil
	}
	if t.unsure {
		if err := t.resync(t.timeout("SYST:ERR?", 0), false); err != nil {
			return nil, err
		}
	}
	return t.queue()
}

// queue reads the error queue. It does not bring the instrument back into step: that
// takes *CLS, which would empty the queue unread.
func (t *Talk) queue() ([]Entry, error) {
	const cmd = "SYST:ERR?"
	var entries []Entry
	seen := map[int]bool{}
	for range errorCap {
		reply, err := t.ask(cmd, t.timeout(cmd, 0))
		if err != nil {
			return entries, err
		}
		e, err := ParseEntry(reply)
		if err != nil {
			t.unsure = true
			return entries, fmt.Errorf("%s: %w", t.c.Address(), err)
		}
		if e.Code == 0 || t.standing[e.Code] && seen[e.Code] { // a fault that comes back at once is no reason to go on
			return entries, nil
		}
		seen[e.Code] = true
		entries = append(entries, e)
	}
	return entries, fmt.Errorf("%s: %w: %d entries, the last is %v", t.c.Address(), ErrEndless, len(entries), entries[len(entries)-1])
}

// Identify asks who the instrument is.
func (t *Talk) Identify() (Identity, error) {
	reply, err := t.Query("*IDN?", 0)
	if err != nil {
		return Identity{}, err
	}
	t.identity = reply
	return ParseIdentity(reply), nil
}

// Remote takes an instrument away from its front panel, which some meters demand
// before anything else. One that knows no such command says so in its error queue,
// which is emptied: whether it obeys shows in the next command.
func (t *Talk) Remote() error {
	if err := t.Send("SYST:REM"); err != nil {
		return err
	}
	if _, err := t.Errors(); err != nil && !errors.Is(err, ErrEndless) {
		return err
	}
	return nil
}
