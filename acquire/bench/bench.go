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
	"math"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/pelletier/go-toml/v2"

	"gatesill/store/record"
)

// ErrBench is wrapped by every error about the content of a bench file.
var ErrBench = errors.New("bench file")

// Example is a bench file with every key, as shown by the help.
const Example = `name = "attic bench"

[circuit]
kind = "load"              # load, diode or fixed
rl = "10 ohm"              # load resistor: value, tolerance, rating
rl_tol = "1 %"
rl_rating = "50 W"
vdd = "12 V"               # supply
# vds = "10 V"             # drain voltage, for kind = "fixed"
ammeter = "drain"          # drain, source or none
gate_return = "source"     # source or ground: where the gate meter's return is
current = "dc"             # dc or pulsed
# pulse_width = "300 us"
# pulse_duty = "2 %"
# pulse_delay = "250 us"
dwell = "10 s"             # wait at each gate voltage before reading

[limits]                   # greatest values allowed on this bench
vgs = "10 V"
vds = "30 V"
id = "1 A"
pd = "10 W"

[[meter]]
role = "gate"              # gate, current, load, drain, supply or temperature
name = "handheld 1"
serial = "A1234"
line = "/dev/serial/by-id/usb-lead-1"   # for live readings
speaks = ""                # frame format of its output, for live readings
settings = "2400 8N1"
isolated = true            # its input is not tied to the computer's ground
calibrated = 2026-03-02
due = 2027-03-02
coverage = "limit"         # what the accuracy statement is: limit, k=2 or 99 %

  [[meter.range]]          # one table a range
  top = "6 V"              # greatest reading
  percent = 0.5            # of the reading
  counts = 2               # of the last digit
  resolution = "1 mV"      # one count
  noise = "0.3 mV"         # standard deviation of repeated readings, if known

[[meter]]
role = "current"
name = "handheld 2"
due = 2027-03-02

  [[meter.range]]
  top = "600 mA"
  percent = 1.0
  counts = 3
  resolution = "0.1 mA"
  burden = "1 ohm"         # resistance the meter puts into the lead
`

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
}

// Limits are the greatest values allowed on the bench, unknown where not given.
type Limits struct {
	Vgs  record.Num // V
	Vds  record.Num // V
	ID   record.Num // A
	PD   record.Num // W
	Temp record.Num // deg C
}

// Line is where a meter's readings come in and how it is spoken to. Meters with
// the same Path share one line: each is a column of what comes in on it, and
// what only one of them states holds for all.
type Line struct {
	Path      string   // stable by-id or by-path name, or host:port; "" no live readings
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
	LagU        record.Num // s, greatest error of the two
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

// file mirrors the TOML keys. Numbers may be written bare (SI base unit) or as
// text with a unit.
type file struct {
	Name    string `toml:"name"`
	Circuit struct {
		Kind       string `toml:"kind"`
		RL         any    `toml:"rl"`
		RLTol      any    `toml:"rl_tol"`
		RLRating   any    `toml:"rl_rating"`
		VDD        any    `toml:"vdd"`
		VDS        any    `toml:"vds"`
		Ammeter    string `toml:"ammeter"`
		GateReturn string `toml:"gate_return"`
		Current    string `toml:"current"`
		PulseWidth any    `toml:"pulse_width"`
		PulseDuty  any    `toml:"pulse_duty"`
		PulseDelay any    `toml:"pulse_delay"`
		Dwell      any    `toml:"dwell"`
	} `toml:"circuit"`
	Limits struct {
		Vgs any `toml:"vgs"`
		Vds any `toml:"vds"`
		ID  any `toml:"id"`
		PD  any `toml:"pd"`
	} `toml:"limits"`
	Meter []struct {
		Role       string `toml:"role"`
		Name       string `toml:"name"`
		Serial     string `toml:"serial"`
		Line       string `toml:"line"`
		Speaks     string `toml:"speaks"`
		Settings   string `toml:"settings"`
		Isolated   *bool  `toml:"isolated"`
		Calibrated any    `toml:"calibrated"`
		Due        any    `toml:"due"`
		Coverage   string `toml:"coverage"`
		Range      []struct {
			Top        any `toml:"top"`
			Percent    any `toml:"percent"`
			Counts     any `toml:"counts"`
			Resolution any `toml:"resolution"`
			Noise      any `toml:"noise"`
			Burden     any `toml:"burden"`
		} `toml:"range"`
	} `toml:"meter"`
}

// roleUnits gives the unit of the readings of each role.
var roleUnits = map[string]string{
	"gate": "V", "current": "A", "load": "V", "drain": "V", "supply": "V", "temperature": "degC",
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

// Parse reads the text of a bench file. Its errors begin with the line, or with
// the table and key.
func Parse(text []byte) (*Bench, error) {
	var f file
	d := toml.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&f); err != nil {
		return nil, place(err)
	}
	b := &Bench{Name: f.Name, Text: string(text)}
	p := parser{}
	b.Given = p.circuit(&f)
	b.Limits = Limits{
		Vgs: p.num("limits: vgs", f.Limits.Vgs, "V"), Vds: p.num("limits: vds", f.Limits.Vds, "V"),
		ID: p.num("limits: id", f.Limits.ID, "A"), PD: p.num("limits: pd", f.Limits.PD, "W"),
	}
	p.meters(&f, b)
	if p.err != nil {
		return nil, fmt.Errorf(" %w", p.err)
	}
	return b, nil
}

// place puts the line of a TOML error in front.
func place(err error) error {
	var missing *toml.StrictMissingError
	if errors.As(err, &missing) && len(missing.Errors) > 0 {
		e := missing.Errors[0]
		row, _ := e.Position()
		return fmt.Errorf("%d: unknown key %q", row, strings.Join(e.Key(), "."))
	}
	var decode *toml.DecodeError
	if errors.As(err, &decode) {
		row, col := decode.Position()
		return fmt.Errorf("%d: column %d: %s", row, col, strings.TrimPrefix(decode.Error(), "toml: "))
	}
	return fmt.Errorf(" %w", err)
}

// parser keeps the first error, so that the reading code stays one line a key.
type parser struct{ err error }

func (p *parser) fail(format string, args ...any) {
	if p.err == nil {
		p.err = fmt.Errorf(format, args...)
	}
}

// num reads a bare number or a text with a unit; nil is unknown.
func (p *parser) num(key string, v any, unit string) record.Num {
	switch v := v.(type) {
	case nil:
		return record.Num{}
	case int64:
		return record.Known(float64(v))
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			p.fail("%s: %v is not a number", key, v)
		}
		return record.Known(v)
	case string:
		x, err := record.ParseNumber(v, unit)
		if err != nil {
			p.fail("%s: %w", key, err)
		}
		return record.Known(x)
	}
	p.fail("%s: %v is neither a number nor a text with a unit", key, v)
	return record.Num{}
}

// share reads "1 %" or a bare fraction.
func (p *parser) share(key string, v any) record.Num {
	s, ok := v.(string)
	if !ok {
		return p.num(key, v, "")
	}
	if head, ok := strings.CutSuffix(strings.TrimSpace(s), "%"); ok {
		x, err := record.ParseNumber(head, "")
		if err != nil {
			p.fail("%s: %w", key, err)
		}
		return record.Known(x / 100)
	}
	return p.num(key, v, "")
}

func (p *parser) oneOf(key, v string, choices ...string) string {
	if v != "" && !slices.Contains(choices, v) {
		p.fail("%s: %q, must be one of %s", key, v, strings.Join(choices, ", "))
	}
	return v
}

// date reads a TOML date or the text YYYY-MM-DD.
func (p *parser) date(key string, v any) string {
	switch v := v.(type) {
	case nil:
		return ""
	case toml.LocalDate:
		return v.String()
	case time.Time:
		return v.UTC().Format(time.DateOnly)
	case string:
		if _, err := time.Parse(time.DateOnly, v); err != nil {
			p.fail("%s: %q is no date, want YYYY-MM-DD", key, v)
		}
		return v
	}
	p.fail("%s: %v is no date, want YYYY-MM-DD", key, v)
	return ""
}

func (p *parser) circuit(f *file) record.Condition {
	c := &f.Circuit
	out := record.Condition{
		Circuit:    record.Circuit(p.oneOf("circuit: kind", c.Kind, "load", "diode", "fixed")),
		RL:         p.num("circuit: rl", c.RL, "ohm"),
		RLTol:      p.share("circuit: rl_tol", c.RLTol),
		RLRating:   p.num("circuit: rl_rating", c.RLRating, "W"),
		VDD:        p.num("circuit: vdd", c.VDD, "V"),
		VDS:        p.num("circuit: vds", c.VDS, "V"),
		Ammeter:    p.oneOf("circuit: ammeter", c.Ammeter, "drain", "source", "none"),
		GateReturn: p.oneOf("circuit: gate_return", c.GateReturn, "source", "ground"),
		Pulsed:     p.oneOf("circuit: current", c.Current, "dc", "pulsed"),
		PulseWidth: p.num("circuit: pulse_width", c.PulseWidth, "s"),
		PulseDuty:  p.share("circuit: pulse_duty", c.PulseDuty),
		PulseDelay: p.num("circuit: pulse_delay", c.PulseDelay, "s"),
		Dwell:      p.num("circuit: dwell", c.Dwell, "s"),
	}
	if x, ok := out.RL.Get(); ok && x <= 0 {
		p.fail("circuit: rl: %g ohm, must be above 0", x)
	}
	if x, ok := out.RLTol.Get(); ok && (x < 0 || x >= 1) {
		p.fail("circuit: rl_tol: %g %%, must be from 0 to below 100 %%", 100*x)
	}
	return out
}

func (p *parser) meters(f *file, b *Bench) {
	taken := map[string]int{}
	for i, m := range f.Meter {
		key := fmt.Sprintf("meter %d", i+1)
		unit, ok := roleUnits[m.Role]
		if !ok {
			p.fail("%s: role: %q, must be one of gate, current, load, drain, supply, temperature", key, m.Role)
			return
		}
		if j, twice := taken[m.Role]; twice {
			p.fail("%s: role: %q is meter %d already", key, m.Role, j)
		}
		taken[m.Role] = i + 1
		key += " (" + m.Role + ")"
		if m.Coverage == "" {
			m.Coverage = "limit"
		}
		in := record.Instrument{
			Role: m.Role, Name: m.Name, Serial: m.Serial, Isolated: m.Isolated,
			Coverage:   p.oneOf(key+": coverage", m.Coverage, "limit", "k=2", "99 %"),
			Calibrated: p.date(key+": calibrated", m.Calibrated), Due: p.date(key+": due", m.Due),
		}
		for j, r := range m.Range {
			key := fmt.Sprintf("%s: range %d", key, j+1)
			ra := record.RangeAccuracy{
				Top:        p.num(key+": top", r.Top, unit).Or(math.MaxFloat64),
				Percent:    p.num(key+": percent", r.Percent, "").Or(0),
				Counts:     p.num(key+": counts", r.Counts, "").Or(0),
				Resolution: p.num(key+": resolution", r.Resolution, unit).Or(0),
				Noise:      p.num(key+": noise", r.Noise, unit),
				Burden:     p.num(key+": burden", r.Burden, "ohm"),
			}
			switch {
			case ra.Top <= 0:
				p.fail("%s: top: %g %s, must be above 0", key, ra.Top, unit)
			case ra.Percent < 0 || ra.Counts < 0 || ra.Resolution < 0 || ra.Noise.Or(0) < 0 || ra.Burden.Or(0) < 0:
				p.fail("%s: a negative number in an accuracy statement", key)
			case ra.Counts > 0 && ra.Resolution == 0:
				p.fail("%s: counts without a resolution: add resolution = \"...\"", key)
			case ra.Resolution > ra.Top:
				p.fail("%s: resolution %g %s is above the top of the range", key, ra.Resolution, unit)
			}
			in.Ranges = append(in.Ranges, ra)
		}
		if !slices.IsSortedFunc(in.Ranges, func(a, b record.RangeAccuracy) int {
			if a.Top < b.Top {
				return -1
			}
			return 1
		}) {
			p.fail("%s: ranges must ascend by top", key)
		}
		b.Meters = append(b.Meters, in)
		b.Lines = append(b.Lines, Line{Path: m.Line, Speaks: m.Speaks, Settings: m.Settings})
	}
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
