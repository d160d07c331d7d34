package table

import (
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// condNumbers are the numbers of a condition, for comparing flags and file.
var condNumbers = []struct {
	name, unit string
	at         func(*record.Condition) *record.Num
}{
	{"R_L", "ohm", func(c *record.Condition) *record.Num { return &c.RL }},
	{"tolerance of R_L", "", func(c *record.Condition) *record.Num { return &c.RLTol }},
	{"rating of R_L", "W", func(c *record.Condition) *record.Num { return &c.RLRating }},
	{"V_DD", "V", func(c *record.Condition) *record.Num { return &c.VDD }},
	{"V_DS", "V", func(c *record.Condition) *record.Num { return &c.VDS }},
	{"burden", "ohm", func(c *record.Condition) *record.Num { return &c.Burden }},
	{"pulse width", "s", func(c *record.Condition) *record.Num { return &c.PulseWidth }},
	{"duty cycle", "", func(c *record.Condition) *record.Num { return &c.PulseDuty }},
	{"pulse delay", "s", func(c *record.Condition) *record.Num { return &c.PulseDelay }},
	{"dwell", "s", func(c *record.Condition) *record.Num { return &c.Dwell }},
	{"temperature", "degC", func(c *record.Condition) *record.Num { return &c.Temp }},
	{"spot current", "A", func(c *record.Condition) *record.Num { return &c.SpotCurrent }},
}

var condTexts = []struct {
	name string
	at   func(*record.Condition) *string
}{
	{"circuit", func(c *record.Condition) *string { return (*string)(&c.Circuit) }},
	{"ammeter", func(c *record.Condition) *string { return &c.Ammeter }},
	{"gate return", func(c *record.Condition) *string { return &c.GateReturn }},
	{"mode", func(c *record.Condition) *string { return &c.Pulsed }},
	{"temperature of", func(c *record.Condition) *string { return &c.TempOf }},
}

// settleConditions joins what comments say with what flags say, which win, and
// gives it to every sweep.
func (r *reader) settleConditions() {
	r.readTalk()
	r.settleChannel()
	for _, u := range r.unread {
		r.note("line %d: %s looks like a condition and cannot be read", u.line, u.text)
	}
	cond, given := r.talkCond, r.opt.Given
	for _, f := range condNumbers {
		have, ok := f.at(&cond).Get()
		flag, set := f.at(&given).Get()
		if ok && set && have != flag {
			r.remark(CodeFlagWins, "the file says %s %g %s, the flag says %g: the flag is used", f.name, have, f.unit, flag)
		}
		if set {
			*f.at(&cond) = record.Known(flag)
		}
	}
	for _, f := range condTexts {
		have, flag := f.at(&cond), *f.at(&given)
		if *have != "" && flag != "" && *have != flag {
			r.remark(CodeFlagWins, "the file says %s %s, the flag says %s: the flag is used", f.name, *have, flag)
		}
		if flag != "" {
			*have = flag
		}
	}
	if c := r.first("temp"); c != nil && cond.TempOf == "" {
		cond.TempOf = tempOf(c.name)
	}
	if r.file.Layout != layoutSpot {
		cond.SpotCurrent = record.Num{}
	}
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		s.Condition = cond
		if s.Direction == record.Spot {
			s.Condition.SpotCurrent = spotOf(s)
		}
		s.Date = r.talkText[RoleDate]
		s.Operator, s.Fixture = r.talkText[RoleOperator], r.talkText[RoleFixture]
		s.DateCode, s.Marking, s.Tube = r.talkText[RoleDateCode], r.talkText[RoleMarking], r.talkText[RoleTube]
	}
}

// spotOf is the one current at which a spot has a gate voltage, unknown when
// there are two.
func spotOf(s *Sweep) record.Num {
	vg, id := s.Values(record.VG), s.Values(record.ID)
	if len(vg) == 1 && len(id) == 1 {
		return record.Known(math.Abs(id[0]))
	}
	var one record.Num
	for i := range vg {
		missing := false
		for _, m := range s.Marks {
			missing = missing || m.Index == i && m.Quantity == record.VG && m.State == record.Missing && m.Raw == ""
		}
		if missing || i >= len(id) {
			continue
		}
		if one.IsKnown() {
			return record.Num{}
		}
		one = record.Known(math.Abs(id[i]))
	}
	return one
}

// attributes are the texts that a sweep takes from its first row.
var attributes = []struct {
	role Role
	to   func(*Sweep) *string
}{
	{RoleDate, func(s *Sweep) *string { return &s.Date }},
	{RoleOperator, func(s *Sweep) *string { return &s.Operator }},
	{RoleFixture, func(s *Sweep) *string { return &s.Fixture }},
	{RoleDateCode, func(s *Sweep) *string { return &s.DateCode }},
	{RoleMarking, func(s *Sweep) *string { return &s.Marking }},
	{RoleTube, func(s *Sweep) *string { return &s.Tube }},
	{RoleNote, func(s *Sweep) *string { return &s.Note }},
}

// readAttributes takes date, operator and the like from the first row of every
// sweep. It walks over the rows a second time, and only when there are such
// columns: reading them with every point would cost more.
func (r *reader) readAttributes() {
	var cols []*column
	some := false
	for _, a := range attributes {
		c := r.first(string(a.role))
		cols = append(cols, c)
		some = some || c != nil
	}
	rl := r.first(string(RoleRL))
	if !some && rl == nil {
		return
	}
	list := r.file.Sweeps
	s := r.bodySplitter()
	for len(list) > 0 && s.next() {
		if r.marks.is(s.row) || len(s.row) > maxLine {
			continue
		}
		s.split()
		for len(list) > 0 && firstLine(&list[0]) == s.at {
			for i, c := range cols {
				if c != nil && c.index < len(s.cells) {
					if t := cleanText(s.cells[c.index]); t != "" {
						*attributes[i].to(&list[0]) = t
					}
				}
			}
			if rl != nil && rl.index < len(s.cells) {
				r.takeRL(&list[0], rl, string(trim(s.cells[rl.index])))
			}
			list = list[1:]
		}
	}
}

// cleanText is a text cell that is data and never shown as it is: blanks off,
// control characters escaped, at most [record.MaxName] bytes; "" for none.
func cleanText(cell []byte) string {
	t := trim(cell)
	if st, ok := stateOf(t); ok && st == record.Missing {
		return ""
	}
	return cut(strings.ToValidUTF8(string(t), "?"), record.MaxName)
}

// takeRL takes the load resistor from its column; a flag wins over it.
func (r *reader) takeRL(s *Sweep, c *column, text string) {
	if r.opt.Given.RL.IsKnown() {
		return
	}
	if r.num.mark == ',' {
		text = strings.Replace(text, ",", ".", 1)
	}
	x, err := record.ParseNumber(text, "ohm")
	if err != nil || x <= 0 {
		return
	}
	if c.hasUnit && c.unit.dim == "ohm" && c.unit.exp != 0 {
		if d, rest, ok := (numeral{mark: '.'}).decimal(text); ok && rest == "" {
			if y, err := strconv.ParseFloat(string(d.json(nil, c.unit.exp)), 64); err == nil {
				x = y
			}
		}
	}
	s.Condition.RL = record.Known(x)
}
