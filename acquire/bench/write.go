package bench

import (
	"cmp"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
	"gatesill/store/record"
)

// Found is a line that is plugged in.
type Found struct {
	Path string // its lasting name
	Text string // what it says of itself, for people; "" nothing
}

// Answers are what was answered so far, by [Question.Key].
type Answers map[string]string

// Question is one thing to be known before a bench file can be written.
type Question struct {
	Key     string
	Text    string
	Help    []string // lines to be shown before it
	Choices []string // what may be answered; empty: anything that passes Check
	Default string   // what an empty answer means; "" it must be answered
	check   func(string) (string, error)
}

// Check takes an answer, and refuses it in words.
func (q Question) Check(answer string) (string, error) {
	answer = strings.TrimSpace(answer)
	if answer == "" {
		answer = q.Default
	}
	if !utf8.ValidString(answer) {
		return "", fmt.Errorf("%q is no text", answer)
	}
	if len(q.Choices) > 0 && !slices.Contains(q.Choices, answer) {
		return "", fmt.Errorf("%q is none of %s", answer, strings.Join(q.Choices, ", "))
	}
	if answer == "" {
		return "", fmt.Errorf("an answer is needed")
	}
	if q.check == nil {
		return answer, nil
	}
	return q.check(answer)
}

// None is the answer to a question of something that is not there.
const None = "none"

const skip = "skip"

// Next gives the question that comes after the answers, and false when all is
// known. It asks of every line which meter is on it, then for lines that were not
// found, then of the circuit and of the limits.
func Next(found []Found, a Answers) (Question, bool) {
	for _, q := range questions(found, a) {
		if _, ok := a[q.Key]; !ok {
			return q, true
		}
	}
	return Question{}, false
}

// questions are all questions that the answers so far lead to.
func questions(found []Found, a Answers) []Question {
	qs := []Question{{Key: "name", Text: "What is this bench called?", Default: "bench"}}
	taken := map[string]bool{}
	all := allLines(found, a)
	for i, f := range all {
		if i >= len(found) {
			qs = append(qs, otherLine(i, all[:i]))
		}
		qs = append(qs, lineQuestions(i, f, a, taken)...)
	}
	if len(all) < maxLines {
		qs = append(qs, otherLine(len(all), all))
	}
	return append(qs, circuitQuestions(a, taken["current"])...)
}

// maxLines is far above any bench.
const maxLines = 32

// allLines are the lines found, and behind them those that were named.
func allLines(found []Found, a Answers) []Found {
	all := slices.Clone(found)
	for {
		path := a[otherKey(len(all))]
		if path == "" || path == None {
			return all
		}
		all = append(all, Found{Path: path})
	}
}

func otherKey(i int) string { return fmt.Sprintf("line %d", i+1) }

// otherLine asks for a line that was not found by itself.
func otherLine(i int, known []Found) Question {
	text := "Another line, such as tcp:192.0.2.7:5025?"
	if len(known) == 0 {
		text = "Nothing is plugged in. On which line is a meter, such as tcp:192.0.2.7:5025?"
	}
	return Question{Key: otherKey(i), Text: text, Default: None, check: func(s string) (string, error) {
		if s == None {
			return s, nil
		}
		if slices.ContainsFunc(known, func(f Found) bool { return f.Path == s }) {
			return "", fmt.Errorf("%s was asked about already", s)
		}
		if s == Keyboard {
			return s, nil
		}
		for _, lead := range []string{"tcp:", "usbtmc:", "log:", "/", "COM"} {
			if rest, ok := strings.CutPrefix(s, lead); ok && rest != "" {
				return s, nil
			}
		}
		return "", fmt.Errorf("%q is no line: a path, tcp:HOST:PORT, usbtmc:PATH, log:PATH, or keyboard for meters that you read yourself", s)
	}}
}

// lineQuestions are those of one line; roles that are given away are noted in
// taken.
func lineQuestions(i int, f Found, a Answers, taken map[string]bool) []Question {
	on := f.Path
	if f.Text != "" {
		on += " (" + f.Text + ")"
	}
	var help []string
	for l := range strings.Lines(meter.Help()) {
		help = append(help, "  "+strings.TrimRight(l, "\n"))
	}
	key := func(what string) string { return fmt.Sprintf("line %d: %s", i+1, what) }
	byPerson := f.Path == Keyboard
	qs := []Question{{
		Key: key("speaks"), Text: "How does the meter on " + on + " speak?", Help: append(help, "  skip                     no meter, or not for this bench"),
		Choices: append(formatNames(), skip),
	}}
	speaks := a[key("speaks")]
	if byPerson {
		qs, speaks = nil, "text" // a person types numbers
	}
	format, ok := findFormat(speaks)
	if !ok {
		return qs
	}
	if serial(f.Path) {
		qs = append(qs, Question{Key: key("settings"), Text: "Settings of this line, such as 2400 8N1?", Default: cmp.Or(format.Settings, "9600 8N1"), check: func(s string) (string, error) {
			_, err := port.ParseSettings(s)
			return s, err
		}})
	}
	columns := 1
	if hasColumns(format) {
		qs = append(qs, Question{Key: key("columns"), Text: "How many values has a line of it?", Default: "1", check: func(s string) (string, error) {
			n, err := strconv.Atoi(s)
			if err != nil || n < 1 || n > 16 {
				return "", fmt.Errorf("%q is no number from 1 to 16", s)
			}
			return s, nil
		}})
		if byPerson {
			qs[len(qs)-1].Text = "How many meters do you read and type, in one line a point?"
		}
		columns, _ = strconv.Atoi(a[key("columns")])
	}
	for c := range columns {
		name, is := "it", "it"
		if columns > 1 {
			name, is = fmt.Sprintf("value %d", c+1), fmt.Sprintf("value %d of it", c+1)
		}
		ckey := func(what string) string { return key(fmt.Sprintf("%s %d", what, c+1)) }
		var free []string
		for _, r := range roles {
			if !taken[r] {
				free = append(free, r)
			}
		}
		qs = append(qs, Question{Key: ckey("role"), Text: "What does " + is + " read?", Choices: append(free, None)})
		role := a[ckey("role")]
		if role == "" || role == None {
			continue
		}
		taken[role] = true
		if format.Lines {
			unit := roleUnits[role]
			qs = append(qs, Question{Key: ckey("unit"), Text: "In which unit is " + name + "?", Default: unit, check: func(s string) (string, error) {
				if !unitOf(s, unit) {
					return "", fmt.Errorf("%q is no unit of what a %s meter reads", s, role)
				}
				return s, nil
			}})
		}
		qs = append(qs, Question{Key: ckey("name"), Text: "Name of the " + role + " meter, as written on it?", Default: role + " meter"})
		if c == 0 && !byPerson {
			qs = append(qs, Question{
				Key: key("isolated"), Text: "Is its input isolated from the computer's ground?", Choices: []string{"yes", "no", "unsure"},
			})
		}
	}
	return qs
}

// circuitQuestions are those of circuit and limits.
func circuitQuestions(a Answers, hasAmmeter bool) []Question {
	qs := []Question{{
		Key: "kind", Text: "Which circuit?", Choices: []string{"load", "diode", "fixed"},
		Help: []string{
			"  load       drain fed through a resistor from the supply",
			"  diode      drain tied to gate, fed through a resistor",
			"  fixed      drain held at a voltage",
		},
	}}
	switch a["kind"] {
	case "load", "diode":
		qs = append(qs, positive("rl", "Resistor between supply and drain?", "ohm"), amount("rl_rating", "What power is it rated for?", "W"),
			Question{Key: "vdd", Text: "Supply voltage?", check: number("V", false)})
	case "fixed":
		qs = append(qs, Question{Key: "vds", Text: "Drain voltage?", check: number("V", false)})
	}
	if hasAmmeter {
		qs = append(qs, Question{Key: "ammeter", Text: "Where does the current meter sit?", Choices: []string{"drain", "source"}, Default: "drain"})
	}
	return append(qs,
		amount("vgs", "Greatest gate voltage allowed here?", "V"),
		amount("vds limit", "Greatest drain voltage allowed here?", "V"),
		amount("id", "Greatest drain current allowed here?", "A"),
		amount("pd", "Greatest power in the device allowed here?", "W"),
		amount("bleed", "Resistor from gate to source that stays there?", "ohm"),
	)
}

// positive asks for a number above 0, amount for one or none.
func positive(key, text, unit string) Question {
	return Question{Key: key, Text: text, check: number(unit, true)}
}

func amount(key, text, unit string) Question {
	q := positive(key, text, unit)
	q.Default = None
	q.check = func(s string) (string, error) {
		if s == None {
			return s, nil
		}
		return number(unit, true)(s)
	}
	return q
}

func number(unit string, above bool) func(string) (string, error) {
	return func(s string) (string, error) {
		x, err := record.ParseNumber(s, unit)
		if err == nil && above && x <= 0 {
			err = fmt.Errorf("%s, must be above 0", withUnit(x, unit))
		}
		return s, err
	}
}

// hasColumns tells whether what a format says at once can be several values.
func hasColumns(f meter.Format) bool { return f.Lines || f.Name == "stx" }

// serial tells whether a line has settings.
func serial(path string) bool {
	return !strings.HasPrefix(path, "usbtmc:") && !strings.HasPrefix(path, "/dev/usbtmc") && !strings.HasPrefix(path, "tcp:") && !strings.HasPrefix(path, "log:") && path != Keyboard
}

// unitOf tells whether text is a unit, with or without prefix.
func unitOf(text, unit string) bool {
	_, err := record.ParseNumber("1"+text, unit)
	return err == nil && !strings.ContainsAny(text, "0123456789.,+-")
}

// Write makes the text of a bench file from the answers to all questions of
// [Next]. [Parse] takes it.
func Write(found []Found, a Answers) string {
	var b strings.Builder
	put := func(key, value string) {
		if value != "" && value != None {
			fmt.Fprintf(&b, "%s = %s\n", key, quote(value))
		}
	}
	b.WriteString("# gatesill help bench-file shows every key; accuracy statements and calibration\n# dates are worth adding.\n")
	put("name", a["name"])
	b.WriteString("\n[circuit]\n")
	for _, k := range []string{"kind", "rl", "rl_rating", "vdd", "vds", "ammeter", "bleed"} {
		put(k, a[k])
	}
	b.WriteString("\n[limits]\n")
	put("vgs", a["vgs"])
	put("vds", a["vds limit"])
	put("id", a["id"])
	put("pd", a["pd"])
	for i, f := range allLines(found, a) {
		key := func(what string) string { return fmt.Sprintf("line %d: %s", i+1, what) }
		speaks := a[key("speaks")]
		if f.Path == Keyboard {
			speaks = "text"
		}
		format, ok := findFormat(speaks)
		if !ok {
			continue
		}
		columns := 1
		if hasColumns(format) {
			columns, _ = strconv.Atoi(a[key("columns")])
		}
		for c := range columns {
			at := func(what string) string { return a[key(fmt.Sprintf("%s %d", what, c+1))] }
			role := at("role")
			if role == "" || role == None {
				continue
			}
			b.WriteString("\n[[meter]]\n")
			put("role", role)
			put("name", at("name"))
			put("line", f.Path)
			put("speaks", format.Name)
			put("settings", a[key("settings")])
			if columns > 1 {
				fmt.Fprintf(&b, "column = %d\n", c+1)
			}
			put("unit", at("unit"))
			switch a[key("isolated")] {
			case "yes":
				b.WriteString("isolated = true\n")
			case "no":
				b.WriteString("isolated = false\n")
			}
		}
	}
	return b.String()
}

// quote writes a TOML text.
func quote(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r < ' ' || r == 0x7f:
			fmt.Fprintf(&b, `\u%04X`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}
