package bench

import (
	"fmt"
	"maps"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/pelletier/go-toml/v2"

	"gatesill/store/record"
)

// complaint is what is wrong at one place.
type complaint struct {
	at  place
	err error
}

// parser collects complaints, so that the reading code stays one line a key.
type parser struct {
	bench *Bench
	file  *file
	wrong []complaint
}

// first gives the complaint that comes first in the file, nil without any.
func (p *parser) first() error {
	if len(p.wrong) == 0 {
		return nil
	}
	least := p.wrong[0]
	for _, c := range p.wrong[1:] {
		if c.at.before(least.at) {
			least = c
		}
	}
	return least.err
}

// fail complains about a key, named as of [placesOf].
func (p *parser) fail(key, format string, args ...any) {
	at := p.bench.placeOf(key)
	err := fmt.Errorf("%v: %s: %w", at, p.words(key), fmt.Errorf(format, args...))
	p.wrong = append(p.wrong, complaint{at, err})
}

var listEntry = regexp.MustCompile(`^(\w+)\[(\d+)\]$`)

// words names a key for people: "meter 2 (current): range 1: burden".
func (p *parser) words(key string) string {
	parts := strings.Split(key, ".")
	for i, part := range parts {
		m := listEntry.FindStringSubmatch(part)
		if m == nil {
			continue
		}
		n, _ := strconv.Atoi(m[2])
		parts[i] = fmt.Sprintf("%s %d", m[1], n+1)
		switch {
		case m[1] == "meter" && roleUnits[p.file.Meter[n].Role] != "":
			parts[i] += " (" + p.file.Meter[n].Role + ")"
		case m[1] == "supply" && slices.Contains(drives, p.file.Supply[n].Drives):
			parts[i] += " (" + p.file.Supply[n].Drives + ")"
		}
	}
	return strings.Join(parts, ": ")
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
			p.fail(key, "%v is not a number", v)
			return record.Num{}
		}
		return record.Known(v)
	case string:
		x, err := record.ParseNumber(v, unit)
		if err != nil {
			p.fail(key, "%w", err)
			return record.Num{}
		}
		return record.Known(x)
	}
	p.fail(key, "%v is neither a number nor a text with a unit", v)
	return record.Num{}
}

// above reads a number that must be above 0.
func (p *parser) above(key string, v any, unit string) record.Num {
	n := p.num(key, v, unit)
	if x, ok := n.Get(); ok && x <= 0 {
		p.fail(key, "%s, must be above 0", withUnit(x, unit))
	}
	return n
}

// notBelow reads a number that must not be below 0.
func (p *parser) notBelow(key string, v any, unit string) record.Num {
	n := p.num(key, v, unit)
	if x, ok := n.Get(); ok && x < 0 {
		p.fail(key, "%s, must not be below 0", withUnit(x, unit))
	}
	return n
}

func withUnit(x float64, unit string) string {
	return strings.TrimSpace(fmt.Sprintf("%g %s", x, unit))
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
			p.fail(key, "%w", err)
			return record.Num{}
		}
		return record.Known(x / 100)
	}
	return p.num(key, v, "")
}

func (p *parser) oneOf(key, v string, choices ...string) string {
	if v != "" && !slices.Contains(choices, v) {
		p.fail(key, "%q, must be one of %s", v, strings.Join(choices, ", "))
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
			p.fail(key, "%q is no date, want YYYY-MM-DD", v)
		}
		return v
	}
	p.fail(key, "%v is no date, want YYYY-MM-DD", v)
	return ""
}

func (p *parser) circuit() {
	c := &p.file.Circuit
	out := record.Condition{
		Circuit:    record.Circuit(p.oneOf("circuit.kind", c.Kind, "load", "diode", "fixed")),
		RL:         p.above("circuit.rl", c.RL, "ohm"),
		RLTol:      p.share("circuit.rl_tol", c.RLTol),
		RLRating:   p.above("circuit.rl_rating", c.RLRating, "W"),
		VDD:        p.num("circuit.vdd", c.VDD, "V"),
		VDS:        p.num("circuit.vds", c.VDS, "V"),
		Ammeter:    p.oneOf("circuit.ammeter", c.Ammeter, "drain", "source", "none"),
		GateReturn: p.oneOf("circuit.gate_return", c.GateReturn, "source", "ground"),
		Pulsed:     p.oneOf("circuit.current", c.Current, "dc", "pulsed"),
		PulseWidth: p.above("circuit.pulse_width", c.PulseWidth, "s"),
		PulseDuty:  p.share("circuit.pulse_duty", c.PulseDuty),
		PulseDelay: p.notBelow("circuit.pulse_delay", c.PulseDelay, "s"),
		Dwell:      p.notBelow("circuit.dwell", c.Dwell, "s"),
	}
	if x, ok := out.RLTol.Get(); ok && (x < 0 || x >= 1) {
		p.fail("circuit.rl_tol", "%g %%, must be from 0 to below 100 %%", 100*x)
	}
	p.bench.Given = out
	p.bench.Bleed = p.above("circuit.bleed", c.Bleed, "ohm")
}

func (p *parser) limits() {
	l := &p.file.Limits
	p.bench.Limits = Limits{
		Vgs: p.above("limits.vgs", l.Vgs, "V"), Vds: p.above("limits.vds", l.Vds, "V"),
		ID: p.above("limits.id", l.ID, "A"), PD: p.above("limits.pd", l.PD, "W"),
		Temp: p.num("limits.temp", l.Temp, "degC"),
	}
}

// drives are the two things that a supply can drive.
var drives = []string{"gate", "drain"}

func (p *parser) supplies() {
	b := p.bench
	taken := map[string]int{}
	type output struct {
		line string
		n    int
	}
	outputs := map[output]int{}
	for i, s := range p.file.Supply {
		key := fmt.Sprintf("supply[%d]", i)
		if !slices.Contains(drives, s.Drives) {
			p.fail(key+".drives", "%q, must be one of %s", s.Drives, strings.Join(drives, ", "))
		} else if j, twice := taken[s.Drives]; twice {
			p.fail(key+".drives", "%q is supply %d already", s.Drives, j)
		}
		taken[s.Drives] = i + 1
		out := Supply{
			Drives: s.Drives, Name: s.Name, Path: s.Line, Settings: s.Settings,
			CurrentLimit: p.above(key+".current_limit", s.CurrentLimit, "A"),
			Voltage:      p.num(key+".voltage", s.Voltage, "V"),
			Isolated:     s.Isolated, Swapped: s.Swapped, Commands: s.Commands,
			Calibrated: p.date(key+".calibrated", s.Calibrated), Due: p.date(key+".due", s.Due),
		}
		if s.Output != nil {
			if out.Output = *s.Output; out.Output < 1 {
				p.fail(key+".output", "%d, outputs are counted from 1", out.Output)
			}
		}
		if out.Path == "" {
			p.fail(key+".line", "missing: a supply needs the line it is driven over")
		}
		p.settings(key+".settings", s.Settings)
		switch x, known := out.Voltage.Get(); {
		case s.Drives == "drain" && !known && s.Voltage == nil:
			p.fail(key+".voltage", "missing: a drain supply needs the voltage it has when it is on")
		case s.Drives == "drain" && known && x == 0:
			p.fail(key+".voltage", "0 V, a drain supply that is on has a voltage")
		case s.Drives == "gate" && s.Voltage != nil:
			p.fail(key+".voltage", "only for the drain supply: the gate's voltage goes with the sweep")
		}
		for _, name := range slices.Sorted(maps.Keys(s.Commands)) {
			if !slices.Contains(commandNames(), name) {
				p.fail(key+".commands."+name, "no such command, must be one of %s", strings.Join(commandNames(), ", "))
			}
		}
		for j, m := range b.Lines {
			if out.Path != "" && m.Path == out.Path {
				p.fail(key+".line", "%q is the line of meter %d: whoever guards a supply must have its line alone", s.Line, j+1)
				break
			}
		}
		if j, twice := outputs[output{s.Line, out.Output}]; twice && s.Line != "" {
			p.fail(key+".output", "output %d on this line is supply %d already", out.Output, j)
		}
		outputs[output{s.Line, out.Output}] = i + 1
		for j, other := range b.Supplies {
			if other.Path == out.Path && out.Path != "" && other.Settings != out.Settings {
				p.fail(key+".settings", "%q, but supply %d on the same line has %q", s.Settings, j+1, other.Settings)
			}
		}
		b.Supplies = append(b.Supplies, out)
	}
}
