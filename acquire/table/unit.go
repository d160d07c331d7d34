package table

import (
	"strings"

	"golang.org/x/text/unicode/norm"
)

// unit is a unit with its SI prefix. The zero unit is none.
type unit struct {
	text string // as shown: "mA"
	dim  string // "V", "A", "S", "ohm", "W", "degC", "s"; "K", "degF", "min" are known but not read
	exp  int    // power of ten to the base unit
}

// symbols are the unit symbols by dimension. Case is ignored but for S
// (siemens) and s (second), which [unit.as] settles by what is wanted.
var symbols = map[string]string{
	"v": "V", "volt": "V", "volts": "V", "voltio": "V", "voltios": "V", "wolt": "V",
	"a": "A", "amp": "A", "amps": "A", "ampere": "A", "amperes": "A", "amper": "A", "amperio": "A", "amperios": "A",
	"siemens": "S", "a/v": "S", "mho": "S",
	"ohm": "ohm", "ohms": "ohm", "ω": "ohm", "ohmios": "ohm",
	"w": "W", "watt": "W", "watts": "W",
	"°c": "degC", "oc": "degC", "c": "degC", "degc": "degC", "celsius": "degC", "gradc": "degC", "grad": "degC", "deg": "degC", "°": "degC",
	"sec": "s", "secs": "s", "second": "s", "seconds": "s", "sekunden": "s", "sek": "s", "secondes": "s", "segundos": "s", "secondi": "s",
	"k": "K", "kelvin": "K", "°k": "K", "°f": "degF", "f": "degF", "degf": "degF",
	"min": "min", "minutes": "min", "minuten": "min", "h": "min", "hours": "min",
}

// siPrefixes in front of a symbol. M and m are told apart; U and N, which stand for
// nothing else, are taken from all-capital headers.
var siPrefixes = []struct {
	text string
	exp  int
}{
	{"milli", -3}, {"micro", -6}, {"mikro", -6}, {"nano", -9}, {"pico", -12}, {"piko", -12}, {"kilo", 3}, {"mega", 6},
	{"f", -15}, {"p", -12}, {"n", -9}, {"N", -9}, {"u", -6}, {"U", -6}, {"\u03bc", -6}, {"\u00b5", -6},
	{"m", -3}, {"k", 3}, {"K", 3}, {"M", 6}, {"G", 9},
}

// shownSymbol is how a dimension is written behind a prefix.
var shownSymbol = map[string]string{"ohm": "\u03a9", "degC": "\u00b0C"}

// readUnit reads a unit as people write it: mA, MA, microA, volts, °C, A/V. The
// whole text must be a unit.
func readUnit(text string) (unit, bool) {
	t := strings.Trim(compact(norm.NFKC.String(text)), ".")
	if t == "" || len(t) > 20 {
		return unit{}, false
	}
	if dim, ok := symbol(t); ok {
		return unit{text: shown("", dim), dim: dim}, true
	}
	for _, p := range siPrefixes {
		rest, ok := strings.CutPrefix(t, p.text)
		if !ok {
			continue
		}
		switch dim, ok := symbol(rest); {
		case !ok, dim == "S" && p.exp > 0: // GS stands in V_GS
		case dim == "V" || dim == "A" || dim == "S" || dim == "ohm" || dim == "W" || dim == "s":
			return unit{text: shown(p.text, dim), dim: dim, exp: p.exp}, true
		}
	}
	return unit{}, false
}

func symbol(t string) (dim string, ok bool) {
	switch t {
	case "S":
		return "S", true
	case "s":
		return "s", true
	}
	dim, ok = symbols[strings.ToLower(t)]
	return dim, ok
}

// shown writes a prefix and the symbol of a dimension: "mA".
func shown(prefix, dim string) string {
	short := map[string]string{"milli": "m", "micro": "\u00b5", "mikro": "\u00b5", "u": "\u00b5", "U": "\u00b5", "\u03bc": "\u00b5", "nano": "n", "N": "n", "pico": "p", "piko": "p", "kilo": "k", "K": "k", "mega": "M"}
	if s, ok := short[prefix]; ok {
		prefix = s
	}
	if s, ok := shownSymbol[dim]; ok {
		return prefix + s
	}
	return prefix + dim
}

// as reads the unit as one of the wanted dimension: S and s are taken for one
// another. False when the dimensions differ.
func (u unit) as(dim string) (unit, bool) {
	if u.dim == dim {
		return u, true
	}
	if u.dim == "S" && dim == "s" || u.dim == "s" && dim == "S" {
		u.text = strings.TrimSuffix(u.text, u.dim) + dim
		u.dim = dim
		return u, true
	}
	return u, false
}

// compact takes all blanks out, the wide and the unbreakable ones included.
func compact(s string) string {
	return strings.Map(func(c rune) rune {
		switch c {
		case ' ', '\t', '\n', '\r', '\u00a0', '\u202f', '\u2009':
			return -1
		}
		return c
	}, s)
}
