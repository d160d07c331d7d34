package meter

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"gatesill/store/record"
)

// text reads lines that a microcontroller or a talkative meter prints: numbers with
// or without a name before ("vg=3.012"), a unit behind ("250.3 mA"), or a word in
// place of a number ("OL"). A line with anything else is a bad frame; one that
// begins with # is a remark.
func newText(o Options) (Decoder, error) {
	t := &textFormat{mark: '.'}
	var err error
	if t.units, err = unitList(o.Unit); err != nil {
		return nil, err
	}
	switch o.Decimal {
	case "", "point":
	case "comma":
		t.mark = ','
	default:
		return nil, optionError("decimal %q is neither point nor comma", o.Decimal)
	}
	switch o.Separator {
	case "":
	case ",", "comma":
		t.separator = ","
	case ";", "semicolon":
		t.separator = ";"
	case "\t", "tab":
		t.separator = "\t"
	case " ", "blank":
		t.separator = " "
	default:
		if len(o.Separator) != 1 || strings.ContainsAny(o.Separator, "0123456789+-.eE\r\n") {
			return nil, optionError("separator %q is none of comma, semicolon, tab, blank or one other mark", o.Separator)
		}
		t.separator = o.Separator
	}
	if t.separator == "," && t.mark == ',' {
		return nil, optionError("separator and decimal mark are both the comma")
	}
	t.said = o.Decimal != "" || o.Separator != ""
	question := strings.TrimSpace(o.Question)
	return &lines{
		drop: func(line []byte) bool {
			s := strings.TrimSpace(string(line))
			return s == "" || s[0] == '#' || question != "" && strings.EqualFold(s, question)
		},
		read: t.line,
	}, nil
}

type textFormat struct {
	units     []written
	separator string // "" any
	mark      byte
	said      bool // separator or decimal mark were given
}

func (t *textFormat) line(line []byte) ([]Reading, error) {
	s := utf(line)
	sep := t.separator
	if sep == "" {
		switch {
		case strings.Contains(s, ";"):
			sep = ";"
		case strings.Contains(s, "\t"):
			sep = "\t"
		case t.mark != ',' && strings.Contains(s, ","):
			sep = ","
		default:
			sep = " "
		}
	}
	if sep == "," && !t.said && ambiguous(s) {
		return nil, bad("line %s may be columns or numbers with a decimal comma: give separator or decimal", shown(line))
	}
	fields := []string{s}
	if sep != " " {
		if fields = strings.Split(s, sep); len(fields) > 1 && strings.TrimSpace(fields[len(fields)-1]) == "" {
			fields = fields[:len(fields)-1] // a mark behind the last column, too
		}
	}
	var readings []Reading
	for _, f := range fields {
		p := parser{t: t, readings: readings, from: len(readings)}
		if why := p.field(f, sep != " "); why != "" {
			return nil, bad("line %s: %s", shown(line), why)
		}
		readings = p.readings
	}
	return readings, nil
}

// ambiguous tells a line of whole numbers, an even number of them, that commas
// stand between: 3,012 may be one number or two.
func ambiguous(s string) bool {
	fields := strings.Split(s, ",")
	for _, f := range fields {
		f = strings.TrimSpace(f)
		if f = strings.TrimLeft(f, "+-"); f == "" || strings.Trim(f, "0123456789") != "" {
			return false
		}
	}
	return len(fields)%2 == 0
}

// parser takes one field apart, or a line whose columns blanks stand between.
type parser struct {
	t        *textFormat
	readings []Reading
	from     int     // readings of fields before
	pending  Reading // flags that stand before the number
	sign     string
	unit     bool // the last number has one
	d        decimal
	exp      int
}

// field returns what is wrong with it, "" nothing.
func (p *parser) field(f string, one bool) string {
	words := strings.Fields(joinNames.Replace(strings.Join(strings.Fields(f), " ")))
	for _, w := range words {
		if i := strings.LastIndexAny(w, "=:"); i >= 0 {
			if r, _ := utf8.DecodeRuneInString(w); i == 0 || !unicode.IsLetter(r) {
				return quoted(w) + " is neither a number nor a name"
			}
			if w = w[i+1:]; w == "" {
				return "a name without a number"
			}
		}
		if why := p.word(w); why != "" {
			return why
		}
	}
	switch n := len(p.readings) - p.from; {
	case p.sign != "":
		return "a sign without a number"
	case n == 0 && len(words) == 0:
		p.add().missing()
	case n == 0:
		return "no number in " + quoted(f)
	case n > 1 && one:
		return "two numbers in " + quoted(f)
	}
	return ""
}

var joinNames = strings.NewReplacer(" = ", "=", " =", "=", "= ", "=", " : ", ":", " :", ":", ": ", ":")

// word takes a number, an overload word, a unit or a flag.
func (p *parser) word(w string) string {
	if (w == "+" || w == "-") && p.sign == "" {
		p.sign = w
		return ""
	}
	if len(p.readings) > p.from && !p.unit && p.sign == "" {
		if _, ok := readUnit(w); ok { // before the words: nA is no NA
			return p.setUnit(&p.readings[len(p.readings)-1], w)
		}
	}
	if state, ok := stateWord(p.sign + w); ok {
		r := p.add()
		switch state {
		case record.Missing:
			r.missing()
		default:
			r.over(state == record.Underload)
		}
		return ""
	}
	if d, rest, ok := readDecimal(p.sign+w, p.t.mark); ok {
		r := p.add()
		p.d = d
		if rest != "" {
			return p.setUnit(r, rest)
		}
		return p.value(r)
	}
	if p.sign != "" {
		return "a sign without a number"
	}
	r := &p.pending
	if len(p.readings) > p.from {
		r = &p.readings[len(p.readings)-1]
	}
	if !r.flag(w) {
		return quoted(w) + " is neither a number nor a unit"
	}
	return ""
}

// add begins the next column, with the unit that was given for it.
func (p *parser) add() *Reading {
	r := p.pending
	r.Column = len(p.readings) + 1
	p.pending, p.sign, p.unit, p.exp, p.d = Reading{}, "", false, 0, decimal{}
	if i := len(p.readings); i < len(p.t.units) {
		u := p.t.units[i]
		r.Unit, p.exp = u.unit, u.exp
		r.AC, r.DC = r.AC || u.ac, r.DC || u.dc
	}
	p.readings = append(p.readings, r)
	return &p.readings[len(p.readings)-1]
}

func (p *parser) setUnit(r *Reading, text string) string {
	u, ok := readUnit(text)
	if !ok {
		return quoted(text) + " is no unit"
	}
	p.unit, p.exp = true, u.exp
	if u.unit != "" {
		r.Unit = u.unit
	}
	r.AC, r.DC = r.AC || u.ac, r.DC || u.dc
	if r.State != "" {
		return ""
	}
	return p.value(r)
}

func (p *parser) value(r *Reading) string {
	if err := p.d.into(r, p.exp); err != nil {
		return quoted(p.d.text) + " is no number"
	}
	return ""
}
