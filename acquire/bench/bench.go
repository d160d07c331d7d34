// Package bench reads bench files: which meter sits in which role, what its
// accuracy statement says, when it was calibrated, and the circuit around the
// device. The file is TOML; its keys are listed at [Example].
//
// It opens no line and talks to no meter, and it takes no unknown key: a
// misspelt accuracy statement must not vanish silently.
package bench

import (
	"bytes"
	"errors"
	"fmt"
	"os"

	"github.com/pelletier/go-toml/v2"

	"gatesill/store/record"
)

// ErrBench is wrapped by every error about the content of a bench file.
var ErrBench = errors.New("bench file")

// Bench is a bench file as read.
type Bench struct {
	Name   string
	Text   string           // the file as it was, to be kept with what it describes
	Given  record.Condition // circuit as far as the file states it
	Limits Limits
	Meters []record.Instrument
	Lines  []Line     // one a meter, same order
	Bleed  record.Num // ohm from gate to source, fitted for good; unknown: none declared

	Supplies []Supply // at most one that drives the gate, one the drain

	places map[string]place // of its keys
}

// Limits are the greatest values allowed on the bench, unknown where not given.
type Limits struct {
	Vgs  record.Num // V
	Vds  record.Num // V
	ID   record.Num // A
	PD   record.Num // W
	Temp record.Num // deg C
}

// Keyboard is the line of a meter that sends nothing: a person types what it shows.
const Keyboard = "keyboard"

// Line is where a meter's readings come in and how it is spoken to. Meters with
// the same Path share one line: each is a column of what comes in on it, and
// what only one of them states holds for all.
type Line struct {
	Path      string   // stable by-id or by-path name, host:port, or [Keyboard]; "" no live readings
	Speaks    string   // name of the format of its frames or replies
	Settings  string   // "2400 8N1"; "" as usual for the format
	Column    int      // of a line or reply with several values, from 1
	Unit      string   // unit of a column that names none: "mV"; "" says its unit itself
	Separator string   // between columns; "" any usual one
	Decimal   string   // "point", "comma"; "" point
	Ask       string   // what is sent for a reading; "" as usual for the format
	Setup     []string // sent once after opening, in this order

	Every       record.Num // s between two questions
	Integration record.Num // s over which it measures
	Processing  record.Num // s from the end of integration to the first byte
	Lag         record.Num // s, further delay behind the gate meter, as gatesill sweep --find-lag finds it
	LagU        record.Num // s, greatest error of the three
}

// Supply is a supply output that the program may drive.
type Supply struct {
	Drives       string // "gate" or "drain"
	Name         string
	Path         string // line, as of [Line]
	Settings     string
	Output       int               // number of its output; 0: it has only one
	CurrentLimit record.Num        // A, to be set; unknown: left as it is
	Voltage      record.Num        // V, of a drain supply when it is on; always known there
	Isolated     *bool             // nil: not said
	Swapped      bool              // its leads are swapped: a gate voltage of -3 V is a setting of 3 V
	Commands     map[string]string // templates of commands that differ from the standard's, by name
	Calibrated   string            // date, YYYY-MM-DD; "" not said
	Due          string            // date, YYYY-MM-DD; "" not said
}

// maxSize is far above any bench file, far below what could hurt.
const maxSize = 1 << 20

// ReadFile reads a bench file. Errors wrap [ErrBench] or are of the file system.
func ReadFile(path string) (*Bench, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	if st, err := f.Stat(); err != nil {
		return nil, err
	} else if st.IsDir() {
		return nil, fmt.Errorf("%w %s is a folder", ErrBench, path)
	} else if st.Size() > maxSize {
		return nil, fmt.Errorf("%w %s: %d bytes, at most %d", ErrBench, path, st.Size(), maxSize)
	}
	b := new(bytes.Buffer)
	if _, err := b.ReadFrom(f); err != nil {
		return nil, err
	}
	bench, err := Parse(b.Bytes())
	if err != nil {
		return nil, fmt.Errorf("%w %s:%w", ErrBench, path, err)
	}
	return bench, nil
}

// Parse reads the text of a bench file. Its errors begin with line and column, and
// the first complaint in the order of the file is the one that is told.
func Parse(text []byte) (*Bench, error) {
	text = bytes.TrimPrefix(text, []byte("\xef\xbb\xbf"))
	var f file
	d := toml.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&f); err != nil {
		return nil, decodeError(text, err)
	}
	b := &Bench{Name: f.Name, Text: string(text), places: placesOf(text)}
	p := parser{bench: b, file: &f}
	p.circuit()
	p.limits()
	p.meters()
	p.supplies()
	if err := p.first(); err != nil {
		return nil, err
	}
	return b, nil
}

// Overdue names the meters whose calibration was due before the date
// (YYYY-MM-DD), in the order of the file.
func (b *Bench) Overdue(date string) []record.Instrument {
	var out []record.Instrument
	for _, m := range b.Meters {
		if m.Due != "" && m.Due < date {
			out = append(out, m)
		}
	}
	return out
}
