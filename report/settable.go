package report

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/store/record"
)

// Labels writes one line for each device in a set, to print on labels: serial, gate
// voltages, set; fields parted by a tab.
func (m *Matched) Labels(w io.Writer) error {
	p := &printer{w: w}
	values := m.valueWriter()
	for i := range m.Sets {
		s := &m.Sets[i]
		name := "set " + itoa(s.Number)
		if l, ok := m.Locked[s.Number]; ok {
			name = Clean(l.Name)
		}
		for _, d := range s.Devices {
			first, _, _ := strings.Cut(values(d), " ")
			p.line("%s\t%s V\t%s", Clean(d.Name), first, name)
		}
	}
	return p.err
}

// SetLabels writes the same lines for one stored set.
func SetLabels(w io.Writer, s *record.Set) error {
	p := &printer{w: w}
	key := LeadingKey(s)
	for _, m := range s.Members {
		v := m.Readings[string(key)]
		text := NotAvailable
		if x, ok := v.Value.Get(); ok {
			text = fixed(x, valueDecimals(x, v.U.Float(), math.NaN())) + " " + KeyOf(key).Unit
		}
		p.line("%s\t%s\t%s", Clean(m.Device), text, Clean(s.Name))
	}
	return p.err
}

// LeadingKey is the quantity that stands for a stored set: its first criterion, for
// curves the gate bias at the idle current.
func LeadingKey(s *record.Set) fit.Key {
	if len(s.By) == 0 || fit.Key(s.By[0].Quantity) == match.KeyCurve {
		return fit.KeyVgsIdle
	}
	return fit.Key(s.By[0].Quantity)
}

// lotsOf lists the lots of a set.
func lotsOf(s *record.Set) []string {
	var lots []string
	for _, m := range s.Members {
		if !slices.Contains(lots, m.Lot) {
			lots = append(lots, m.Lot)
		}
	}
	return lots
}

func memberNames(s *record.Set) string {
	many := len(lotsOf(s)) > 1
	var names []string
	for _, m := range s.Members {
		names = append(names, deviceName(m.Lot, m.Device, many))
	}
	return strings.Join(names, ", ")
}

func numText(n record.Num, unit string) string {
	if x, ok := n.Get(); ok {
		return FormatGiven(x, unit)
	}
	return ""
}

// SetsTable lists stored sets for people.
func SetsTable(w io.Writer, sets []record.Set, style Style) error {
	p := &printer{w: w}
	if len(sets) == 0 {
		p.line("No sets yet: gatesill match LOT --lock 1,3 makes some.")
		return p.err
	}
	setList(p, sets, style)
	return p.err
}

func setList(p *printer, sets []record.Set, style Style) {
	n := len(sets)
	names, states, lots, members, at, spread, when := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	for i := range sets {
		s := &sets[i]
		names[i], states[i], members[i] = Clean(s.Name), SetStateWords(s), memberNames(s)
		lots[i], at[i], when[i] = Clean(strings.Join(lotsOf(s), ", ")), numText(s.At, "A"), day(s.CreatedAt)
		spread[i] = spreadText(s.Spread.Float())
	}
	p.grid(grid{style: style, cols: []column{
		{head: "set", cells: names}, {head: "state", cells: states, wrap: 24}, {head: "devices", cells: members, wrap: 24}, {head: "lot", cells: lots, wrap: 12, rank: 1},
		{head: "at", cells: at, right: true, rank: 2}, {head: "spread", unit: "mV", cells: spread, right: true}, {head: "made", cells: when, rank: 1},
	}})
}

// SetFile is all that is known of one set.
type SetFile struct {
	record.Set
	Now     map[string]fit.Result // of its devices as they are known now, by the device's id; one that is missing has none
	Changes []record.Change       // ascending by time
}

// SetCard shows one set for people: what it is for, its devices with what they had
// when it was made and what they read now, and what became of it.
func SetCard(w io.Writer, f SetFile, style Style) error {
	p := &printer{w: w}
	s := &f.Set
	var by []string
	for _, c := range s.By {
		by = append(by, CriterionOf(c))
	}
	state := SetStateWords(s)
	if s.Reason != "" {
		state += ", because: " + Clean(s.Reason)
	}
	fields(p, []Field{
		{"set", s.Name}, {"number", itoa(s.Number)}, {"id", s.ID}, {"state", state}, {"for", s.Unit}, {"matched by", andList(by)}, {"at", numText(s.At, "A")},
		{"source resistor", numText(s.SourceResistor, "Ω")}, {"made", s.CreatedAt + ", by " + s.CreatedBy},
	}, style)
	p.line("")
	p.grid(setMemberGrid(&f, style))
	if then, now := f.spreads(); isNumber(now) {
		wrapped(p, "", "  ", fmt.Sprintf("Spread when it was made: %s mV; by what is known of the devices now: %s mV.", spreadText(then), spreadText(now)), style.Width)
	}
	p.line("")
	p.line("%s", style.paint("History", bold))
	for _, c := range f.Changes {
		if c.Field != "reason" { // it stands behind the change of state as well
			wrapped(p, "  ", "    ", changeWords(c), style.Width)
		}
	}
	return p.err
}

// thenNow gives what a device of the set had when it was made, with its u, and has
// now.
func (f *SetFile) thenNow(i int, key fit.Key) (then, u, now float64) {
	m := &f.Members[i]
	v := m.Readings[string(key)]
	now = math.NaN()
	if r, ok := f.Now[m.DeviceID]; ok {
		if q := r.At(key); q.Ok() {
			now = q.Value
		}
	}
	return v.Value.Float(), v.U.Float(), now
}

// spreads are those of the leading quantity then and now, V; NaN where a device has
// none, or where both kinds of channel are in the set.
func (f *SetFile) spreads() (then, now float64) {
	key := LeadingKey(&f.Set)
	var a, b []float64
	for i := range f.Members {
		x, _, y := f.thenNow(i, key)
		a, b = append(a, math.Abs(x)), append(b, math.Abs(y))
	}
	width := func(x []float64) float64 {
		if len(x) == 0 || slices.ContainsFunc(x, math.IsNaN) {
			return math.NaN()
		}
		return slices.Max(x) - slices.Min(x)
	}
	return width(a), width(b)
}

func setMemberGrid(f *SetFile, style Style) grid {
	n := len(f.Members)
	names, lots := make([]string, n), make([]string, n)
	for i, m := range f.Members {
		names[i], lots[i] = Clean(m.Device), Clean(m.Lot)
	}
	g := grid{style: style, cols: []column{{head: "device", cells: names}, {head: "lot", cells: lots, wrap: 16, rank: 1}}}
	keys := []fit.Key{LeadingKey(&f.Set)}
	if keys[0] != fit.KeyGmIdle {
		keys = append(keys, fit.KeyGmIdle)
	}
	for k, key := range keys {
		thens, nows, change := make([]string, n), make([]string, n), make([]string, n)
		any := false
		for i := range f.Members {
			then, u, now := f.thenNow(i, key)
			thens[i], nows[i], change[i] = NotAvailable, NotAvailable, NotAvailable
			write := func(x float64) string {
				if k == 0 {
					return fixed(x, valueDecimals(x, u, math.NaN()))
				}
				return fixed(x, max(0, significant(x, 4)))
			}
			if isNumber(then) {
				thens[i], any = write(then), true
			}
			if isNumber(now) {
				nows[i] = write(now)
			}
			if isNumber(then) && isNumber(now) {
				change[i] = signedMillivolts(now - then)
			}
		}
		if !any {
			continue
		}
		info := KeyOf(key)
		g.cols = append(g.cols, column{head: info.Symbol + " then", unit: info.Unit, cells: thens, right: true}, column{head: "now", unit: info.Unit, cells: nows, right: true})
		if k == 0 {
			g.cols = append(g.cols, column{head: "change", unit: "mV", cells: change, right: true})
		}
	}
	return g
}

// SetLines say of a device which sets it is and was in: "S4, used in amplifier 7".
func setLines(sets []record.Set) string {
	var words []string
	for i := range sets {
		words = append(words, SetWords(&sets[i]))
	}
	return strings.Join(words, ", ")
}
