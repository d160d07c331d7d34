package bench

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/store/record"
)

// roleUnits gives the unit of the readings of each role.
var roleUnits = map[string]string{
	"gate": "V", "current": "A", "load": "V", "drain": "V", "supply": "V", "temperature": "degC",
}

// RoleUnit is the SI unit of what a meter in a role reads, "" for what is no role.
func RoleUnit(role string) string { return roleUnits[role] }

// roles are the keys of roleUnits in the order they are spoken of.
var roles = []string{"gate", "current", "load", "drain", "supply", "temperature"}

// maxColumns is far above what a line of a bench holds.
const maxColumns = 64

func (p *parser) meters() {
	b := p.bench
	taken := map[string]int{}
	for i := range p.file.Meter {
		m := &p.file.Meter[i]
		key := fmt.Sprintf("meter[%d]", i)
		unit, ok := roleUnits[m.Role]
		if !ok {
			p.fail(key+".role", "%q, must be one of %s", m.Role, strings.Join(roles, ", "))
		}
		if j, twice := taken[m.Role]; twice && ok {
			p.fail(key+".role", "%q is meter %d already", m.Role, j)
		}
		taken[m.Role] = i + 1
		in := record.Instrument{
			Role: m.Role, Name: m.Name, Serial: m.Serial, Isolated: m.Isolated,
			Coverage:   p.oneOf(key+".coverage", cmp.Or(m.Coverage, "limit"), "limit", "k=2", "99 %"),
			Calibrated: p.date(key+".calibrated", m.Calibrated), Due: p.date(key+".due", m.Due),
		}
		if in.Calibrated != "" && in.Due != "" && in.Due < in.Calibrated {
			p.fail(key+".due", "%s is before the calibration of %s", in.Due, in.Calibrated)
		}
		if ok {
			in.Ranges = p.ranges(key, m.Range, unit)
		}
		b.Meters = append(b.Meters, in)
		b.Lines = append(b.Lines, p.line(key, m, unit))
	}
	p.shareLines()
}

// ranges reads the accuracy statement of a meter.
func (p *parser) ranges(key string, list []rangeKeys, unit string) []record.RangeAccuracy {
	var out []record.RangeAccuracy
	for j, r := range list {
		key := fmt.Sprintf("%s.range[%d]", key, j)
		ra := record.RangeAccuracy{
			Top:        p.above(key+".top", r.Top, unit).Or(math.MaxFloat64),
			Percent:    p.notNegative(key+".percent", r.Percent, "").Or(0),
			Counts:     p.notNegative(key+".counts", r.Counts, "").Or(0),
			Resolution: p.notNegative(key+".resolution", r.Resolution, unit).Or(0),
			Noise:      p.notNegative(key+".noise", r.Noise, unit),
			Burden:     p.notNegative(key+".burden", r.Burden, "ohm"),
		}
		if ra.Counts > 0 && ra.Resolution == 0 && r.Resolution == nil {
			p.fail(key+".counts", "counts without a resolution: add resolution = \"...\"")
		}
		if ra.Resolution > ra.Top {
			p.fail(key+".resolution", "%s is above the top of the range", withUnit(ra.Resolution, unit))
		}
		if n := len(out); n > 0 && ra.Top <= out[n-1].Top {
			p.fail(key+".top", "%s, but the range before goes to %s: ranges must ascend by top", withUnit(ra.Top, unit), withUnit(out[n-1].Top, unit))
		}
		out = append(out, ra)
	}
	return out
}

// notNegative reads a number of an accuracy statement.
func (p *parser) notNegative(key string, v any, unit string) record.Num {
	n := p.num(key, v, unit)
	if x, ok := n.Get(); ok && x < 0 {
		p.fail(key, "%s, a negative number in an accuracy statement", withUnit(x, unit))
	}
	return n
}

// line reads how a meter is spoken to.
func (p *parser) line(key string, m *meterKeys, unit string) Line {
	l := Line{
		Path: m.Line, Speaks: m.Speaks, Settings: m.Settings, Column: 1, Unit: m.Unit, Separator: m.Separator,
		Decimal: p.oneOf(key+".decimal", m.Decimal, "point", "comma"), Ask: m.Ask, Setup: m.Setup,
		Every:       p.above(key+".every", m.Every, "s"),
		Integration: p.notBelow(key+".integration", m.Integration, "s"),
		Processing:  p.notBelow(key+".processing", m.Processing, "s"),
		Lag:         p.num(key+".lag", m.Lag, "s"),
		LagU:        p.notBelow(key+".lag_u", m.LagU, "s"),
	}
	if m.Column != nil {
		if l.Column = *m.Column; l.Column < 1 || l.Column > maxColumns {
			p.fail(key+".column", "%d, columns are counted from 1, to %d at most", l.Column, maxColumns)
		}
	}
	if unit != "" && m.Unit != "" {
		if !unitOf(m.Unit, unit) {
			p.fail(key+".unit", "%q is no unit of what a %s meter reads, want %s with or without prefix", m.Unit, m.Role, unit)
		}
	}
	if m.Separator != "" && m.Separator == map[string]string{"comma": ",", "point": ".", "": "."}[m.Decimal] {
		p.fail(key+".separator", "%q is the decimal mark too", m.Separator)
	}
	if m.Speaks != "" {
		if _, ok := findFormat(m.Speaks); !ok {
			p.fail(key+".speaks", "%q is no known format; known are %s", m.Speaks, strings.Join(formatNames(), ", "))
		}
	}
	p.settings(key+".settings", m.Settings)
	return l
}

// shareLines completes meters on one line from one another and complains where
// they contradict, or where the way they are spoken to is not whole.
func (p *parser) shareLines() {
	lines := p.bench.Lines
	for i := range lines {
		first := slices.IndexFunc(lines, func(l Line) bool { return l.Path == lines[i].Path })
		if lines[i].Path == "" || first == i {
			continue
		}
		p.shareLine(&lines[first], &lines[i], first, i)
	}
	for i := range lines { // what only a later one stated holds for the first ones too
		for j := range lines {
			if lines[i].Path != "" && lines[i].Path == lines[j].Path {
				fill(&lines[i], &lines[j])
			}
		}
	}
	for i, l := range lines {
		key := fmt.Sprintf("meter[%d]", i)
		f, known := findFormat(l.Speaks)
		if !known {
			continue
		}
		if !hasColumns(f) && l.Column > 1 {
			p.fail(key+".column", "%d, but %s says one value at a time", l.Column, l.Speaks)
		}
		if l.Every.IsKnown() && l.Ask == "" && f.Ask == "" {
			p.fail(key+".every", "without ask: %s speaks by itself unless it is asked", l.Speaks)
		}
		for j := range i {
			if lines[j].Path == l.Path && l.Path != "" && lines[j].Column == l.Column {
				p.fail(key+".column", "column %d of this line is meter %d already", l.Column, j+1)
				break
			}
		}
	}
}

// shareLine compares what two meters on one line say of it.
func (p *parser) shareLine(a, b *Line, i, j int) {
	differ := func(name, x, y string) {
		if x != "" && y != "" && x != y {
			p.fail(fmt.Sprintf("meter[%d].%s", j, name), "%q, but meter %d on the same line has %q", y, i+1, x)
		}
	}
	differ("speaks", a.Speaks, b.Speaks)
	differ("settings", a.Settings, b.Settings)
	differ("separator", a.Separator, b.Separator)
	differ("decimal", a.Decimal, b.Decimal)
	differ("ask", a.Ask, b.Ask)
	differ("setup", strings.Join(a.Setup, "; "), strings.Join(b.Setup, "; "))
	differ("every", text(a.Every), text(b.Every))
	fill(a, b)
}

func text(n record.Num) string {
	if x, ok := n.Get(); ok {
		return withUnit(x, "s")
	}
	return ""
}

// fill takes over what a does not state and another meter on the line does.
func fill(a, b *Line) {
	a.Speaks = cmp.Or(a.Speaks, b.Speaks)
	a.Settings = cmp.Or(a.Settings, b.Settings)
	a.Separator = cmp.Or(a.Separator, b.Separator)
	a.Decimal = cmp.Or(a.Decimal, b.Decimal)
	a.Ask = cmp.Or(a.Ask, b.Ask)
	if len(a.Setup) == 0 {
		a.Setup = b.Setup
	}
	if !a.Every.IsKnown() {
		a.Every = b.Every
	}
}
