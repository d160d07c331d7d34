package keeper

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// commands are the templates of one supply by name; "" is not available.
type commands map[string]string

// standard is SCPI's way (SCPI-1999 SOURce, OUTPut, MEASure, INSTrument and the
// common commands of IEEE 488.2).
var standard = commands{
	"identify":    "*IDN?",
	"clear":       "*CLS",
	"errors":      "SYST:ERR?",
	"complete":    "*OPC?",
	"select":      "INST:NSEL %d",
	"set":         "VOLT %g",
	"set_query":   "VOLT?",
	"limit":       "CURR %g",
	"limit_query": "CURR?",
	"on":          "OUTP ON",
	"off":         "OUTP OFF",
	"on_query":    "OUTP?",
	"says_off":    "0", // the answer to on_query of an output that is off; no command
	"read":        "MEAS:VOLT?",
	// The supply's own, sent once at the start: it has to be content with being spoken
	// to twice a second. In the off state the keeper is silent, and it may open the gate.
	"watchdog": "",
}

// verbs are the templates that take one value, and how it may be written.
var verbs = map[string]string{"select": "d", "set": "gfe", "limit": "gfe"}

// placeholders are how a bench file writes the value: {v} in V or A, {n} the number of
// the output.
var placeholders = strings.NewReplacer("{v}", "%g", "{n}", "%d")

// Names lists the names that [Supply.Commands] may have.
func Names() []string {
	names := make([]string, 0, len(standard))
	for n := range standard {
		names = append(names, n)
	}
	slices.Sort(names)
	return names
}

var verb = regexp.MustCompile(`%[-+ 0]{0,4}[0-9]{0,2}(\.[0-9]{1,2})?([a-zA-Z%]|$)`)

func (c commands) own() bool { return c["own language"] != "" }

// commandsOf joins a supply's own templates with the standard ones. Nothing is ever
// guessed for a supply with a language of its own: in some of them the figure that
// means off elsewhere means on.
func commandsOf(s Supply) (commands, error) {
	c := commands{}
	for name, text := range s.Commands {
		if _, ok := standard[name]; !ok {
			return nil, fmt.Errorf("%w: supply %s: no command is called %q (there are: %s)", ErrConfig, s.Name, name, strings.Join(Names(), ", "))
		}
		if err := checkTemplate(name, placeholders.Replace(text)); err != nil {
			return nil, fmt.Errorf("%w: supply %s: %v", ErrConfig, s.Name, err)
		}
		text = placeholders.Replace(text)
		c[name] = text
		if (name == "set" || name == "on" || name == "off") && text != standard[name] {
			c["own language"] = "yes"
		}
	}
	if c.own() {
		if c["on_query"] != "" && c["says_off"] == "" {
			return nil, fmt.Errorf("%w: supply %s: what it answers to %q when it is off is not given (says_off)", ErrConfig, s.Name, c["on_query"])
		}
	} else {
		for name, text := range standard {
			if _, given := c[name]; !given {
				c[name] = text
			}
		}
	}
	for _, name := range []string{"set", "on", "off", "read"} {
		if c[name] == "" {
			return nil, fmt.Errorf("%w: supply %s: command %q is not given; without it the off state cannot be reached or proved", ErrConfig, s.Name, name)
		}
	}
	if s.Limit > 0 && c["limit"] == "" {
		return nil, fmt.Errorf("%w: supply %s: a current limit is asked for, but no command for it is given", ErrConfig, s.Name)
	}
	return c, nil
}

func checkTemplate(name, text string) error {
	if strings.ContainsFunc(text, func(r rune) bool { return r < ' ' || r > '~' }) {
		return fmt.Errorf("command %q: only plain characters of one line", name)
	}
	if text == "" || name == "says_off" {
		return nil
	}
	found := verb.FindAllStringSubmatch(text, -1)
	want := verbs[name]
	switch {
	case strings.Count(text, "%") != len(found):
		return fmt.Errorf("command %q: a %% that is no value: %q", name, text)
	case want == "" && len(found) > 0:
		return fmt.Errorf("command %q takes no value: %q", name, text)
	case want != "" && name != "select" && len(found) != 1, len(found) > 1:
		return fmt.Errorf("command %q takes one value: %q", name, text)
	}
	for _, f := range found {
		if f[2] == "" || !strings.Contains(want, f[2]) {
			return fmt.Errorf("command %q: %q is not understood", name, f[0])
		}
	}
	return nil
}

// fill puts a value into a template. %g is written without an exponent and to the
// microvolt, as not every supply reads exponents.
func fill(template string, v float64) string {
	return verb.ReplaceAllStringFunc(template, func(f string) string {
		switch f[len(f)-1] {
		case 'd':
			return fmt.Sprintf(f, int(math.Round(v)))
		case 'g':
			if f != "%g" {
				break
			}
			s := strings.TrimRight(strings.TrimRight(strconv.FormatFloat(v, 'f', 6, 64), "0"), ".")
			if s == "-0" {
				s = "0"
			}
			return s
		}
		return fmt.Sprintf(f, v)
	})
}

// sent is the value that a template really sends for v, which it may round.
func (c commands) sent(name string, v float64) (float64, error) {
	return parseNumber(strings.TrimSpace(fill(verb.FindString(c[name]), v)))
}

var number = regexp.MustCompile(`[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?`)

// parseNumber reads the first number of a reply such as "+2.99980E+00", "V3.00" or
// "3.000 V". SCPI's stand-ins for infinity and for no value are no numbers.
func parseNumber(reply string) (float64, error) {
	s := number.FindString(reply)
	v, err := strconv.ParseFloat(s, 64)
	if s == "" || err != nil {
		return math.NaN(), fmt.Errorf("%w: no number in the answer %q", ErrReadBack, reply)
	}
	if math.Abs(v) >= 9.0e37 {
		return math.NaN(), fmt.Errorf("%w: no value in the answer %q", ErrReadBack, reply)
	}
	return v, nil
}

// isOff reads the answer to on_query.
func (c commands) isOff(reply string) bool {
	reply = strings.TrimSpace(reply)
	return strings.EqualFold(reply, c["says_off"]) || !c.own() && strings.EqualFold(reply, "OFF")
}
