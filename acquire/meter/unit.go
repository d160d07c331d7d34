package meter

import (
	"strings"

	"gatesill/store/record"
)

// written is a unit as it stands behind a number.
type written struct {
	unit   string // SI; "" only a prefix was written
	exp    int
	ac, dc bool
}

// units with prefixes that package record knows how they are spelt.
var units = []string{"V", "A", "ohm", "Hz", "W", "s"}

// readUnit reads a unit with its prefix: "mV", "kOhm", "µA", "VDC", "mVac", "%",
// "°C", "nF", or a prefix alone.
func readUnit(text string) (written, bool) {
	w, ok := plainUnit(text)
	if ok && w.unit != "" || len(text) < 3 {
		return w, ok
	}
	head, tail := text[:len(text)-2], text[len(text)-2:]
	if h, ok := plainUnit(strings.TrimSpace(head)); ok && (h.unit == "V" || h.unit == "A") {
		switch strings.ToUpper(tail) {
		case "DC":
			h.dc = true
			return h, true
		case "AC":
			h.ac = true
			return h, true
		}
	}
	return w, ok
}

func plainUnit(text string) (written, bool) {
	switch text {
	case "":
		return written{}, false
	case "%":
		return written{unit: "%"}, true
	case "\u00b0F", "degF":
		return written{unit: "degF"}, true
	}
	if _, is, err := record.SplitUnit(text, "degC"); err == nil && is {
		return written{unit: "degC"}, true
	}
	prefixOnly := written{}
	havePrefix := false
	for _, u := range units {
		switch exp, is, err := record.SplitUnit(text, u); {
		case err != nil:
		case is:
			return written{unit: u, exp: exp}, true
		default:
			prefixOnly, havePrefix = written{exp: exp}, true
		}
	}
	if head, ok := strings.CutSuffix(text, "F"); ok { // farad; record has no use for it
		if head == "" {
			return written{unit: "F"}, true
		}
		if exp, is, err := record.SplitUnit(head, "V"); err == nil && !is {
			return written{unit: "F", exp: exp}, true
		}
	}
	return prefixOnly, havePrefix
}

// unitList reads the units of columns, joined with commas. An empty place is a
// column whose unit is not known.
func unitList(text string) ([]written, error) {
	if strings.TrimSpace(text) == "" {
		return nil, nil
	}
	var list []written
	for _, t := range strings.Split(text, ",") {
		t = strings.TrimSpace(t)
		if t == "" {
			list = append(list, written{})
			continue
		}
		w, ok := readUnit(t)
		if !ok || w.unit == "" {
			return nil, optionError("unit %q is not known", t)
		}
		list = append(list, w)
	}
	return list, nil
}
