package keeper

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
)

// Orders, one JSON object a line, after the first line, which is the [Config].
const (
	doBeat   = "beat"
	doGate   = "gate"   // to the voltage V
	doDrain  = "drain"  // on or off, as On says
	doOff    = "off"    // for Reason; Gone: no drain current flows any more
	doStatus = "status" // how things are; does nothing
	doBye    = "bye"    // off state, then end
)

type order struct {
	Do     string  `json:"do"`
	ID     int     `json:"id,omitempty"`
	V      float64 `json:"v,omitempty"`
	On     bool    `json:"on,omitempty"`
	Reason string  `json:"reason,omitempty"`
	Gone   bool    `json:"gone,omitempty"`
}

// answer is one line back. The start is answered as order 0; what the keeper did by
// itself has the number unasked.
type answer struct {
	ID    int        `json:"id"`
	Kind  string     `json:"kind,omitempty"`  // of the error, as in kinds
	Error string     `json:"error,omitempty"` // "": done
	V     *float64   `json:"v,omitempty"`     // gate voltage read back
	Drain bool       `json:"drain,omitempty"` // drain supply is on
	Off   *OffReport `json:"off,omitempty"`   // in the off state
}

const unasked = -1

const longestLine = 64 << 10

var kinds = map[string]error{
	"config": ErrConfig, "off": ErrOff, "high": ErrTooHigh,
	"refused": ErrRefused, "readback": ErrReadBack, "line": ErrLine,
}

func kindOf(err error) string {
	for _, k := range []string{"config", "off", "high", "refused", "readback", "line"} {
		if errors.Is(err, kinds[k]) {
			return k
		}
	}
	return ""
}

// told carries an error over the pipe with its kind.
type told struct {
	text string
	kind error
}

func (e *told) Error() string { return e.text }
func (e *told) Unwrap() error { return e.kind }

func (a *answer) err() error {
	if a.Error == "" {
		return nil
	}
	return &told{a.Error, kinds[a.Kind]}
}

// startErr is that of a start. One that went wrong half-way led to the off state, and
// where that is not proved somebody must know.
func (a *answer) startErr() error {
	err := a.err()
	if err == nil || a.Off == nil || a.Off.Reached {
		return err
	}
	return fmt.Errorf("%w; the off state is not proved (drain supply %s): switch the supplies off by hand", err, a.Off.Drain)
}

func (a *answer) fail(err error) {
	if err != nil {
		a.Error, a.Kind = err.Error(), kindOf(err)
	}
}

// parseStrict takes one JSON object and nothing that is not understood: an order of
// which only a part made sense is no order.
func parseStrict(line []byte, into any) error {
	d := json.NewDecoder(bytes.NewReader(line))
	d.DisallowUnknownFields()
	if err := d.Decode(into); err != nil {
		return err
	}
	if _, err := d.Token(); !errors.Is(err, io.EOF) {
		return errors.New("more than one object in a line")
	}
	return nil
}

func parseOrder(line []byte) (order, error) {
	var o order
	if err := parseStrict(line, &o); err != nil {
		return o, fmt.Errorf("malformed order %.80q: %w", line, err)
	}
	switch o.Do {
	case doBeat, doGate, doDrain, doOff, doStatus, doBye:
		return o, nil
	}
	return o, fmt.Errorf("malformed order %.80q: nothing is called %q", line, o.Do)
}
