package record

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Amount is a number with its unit as the user gave it, in base units:
// {0.05, "V"}, {10, "%"}, {0.025, "A"}, {2, "u"}. The zero Amount is none.
type Amount struct {
	Value float64
	Unit  string
}

// IsZero reports whether no amount was given.
func (a Amount) IsZero() bool { return a == Amount{} }

// String writes the amount so that [ParseAmount] reads it back.
func (a Amount) String() string {
	if a.IsZero() {
		return ""
	}
	return strconv.FormatFloat(a.Value, 'g', -1, 64) + a.Unit
}

// GreatestShift is the voltage, V, above which no margin, guard band or shift of a
// gate voltage is taken: 50MV is mostly a 50mV.
const GreatestShift = 1e3

// examples are amounts as they are written in each unit.
var examples = map[string]string{"V": "50mV", "%": "10%", "A": "25mA", "u": "2u"}

// ParseAmount reads a number in one of the units; the first unit is that of a
// bare number. "u" and "%" take no SI prefix. More volts than [GreatestShift] are
// refused: amounts are shifts of gate voltages.
func ParseAmount(text string, units ...string) (Amount, error) {
	text = strings.TrimSpace(text)
	if text == "" {
		return Amount{}, nil
	}
	for _, u := range units { // before the prefixes: 2u is twice u, not 2 µV
		if u != "%" && u != "u" {
			continue
		}
		if head, ok := strings.CutSuffix(text, u); ok {
			if x, _, err := parseNumber(head, ""); err == nil {
				return Amount{Value: x, Unit: u}, nil
			}
		}
	}
	for _, u := range units {
		if u == "%" || u == "u" {
			continue
		}
		if x, unit, err := parseNumber(text, u); err == nil && (unit == u || u == units[0]) {
			if u == "V" && math.Abs(x) > GreatestShift {
				return Amount{}, fmt.Errorf("%q is more than any gate voltage; prefixes are case sensitive, M is mega and m is milli: %w", text, ErrInvalid)
			}
			return Amount{Value: x, Unit: u}, nil
		}
	}
	like := make([]string, len(units))
	for i, u := range units {
		like[i] = examples[u]
		if right := rightCase(text, u); right != "" {
			return Amount{}, fmt.Errorf("%q: prefixes and units are case sensitive, write %s: %w", text, right, ErrInvalid)
		}
	}
	return Amount{}, fmt.Errorf("%q is not a number in %s, as in %s: %w", text, strings.Join(units, ", "), strings.Join(like, ", "), ErrInvalid)
}

// ParseNumber reads one number in the given SI unit: "2.2m", "2.2 mA", "2m2",
// "4k7", "250uA", "250 µA", "1.5E-3", "50mV", "1e3". A bare number is in the
// base unit. The decimal mark is the point. Prefixes are case sensitive (m is
// milli, M is mega); K is taken for k in ohms only, where it has no other
// meaning in the trade. Unit "" takes no unit; "degC" takes C, °C and degC and
// no prefix; "ohm" takes ohm, Ω, R and the R form 2R2.
func ParseNumber(text, unit string) (float64, error) {
	x, _, err := parseNumber(text, unit)
	if right := rightCase(text, unit); err != nil && right != "" {
		return 0, fmt.Errorf("%q: prefixes and units are case sensitive, write %s: %w", text, right, ErrInvalid)
	}
	return x, err
}

// rightCase is a number with prefix and unit in the case they have, where only that
// was wrong with it; "" otherwise.
func rightCase(text, unit string) string {
	text = strings.TrimSpace(text)
	n := scanDecimal(text)
	wrong := strings.TrimSpace(text[n:])
	if n == 0 || wrong == "" {
		return ""
	}
	if _, _, err := SplitUnit(wrong, unit); err == nil {
		return ""
	}
	spellings := unitSpellings[unit]
	for _, p := range append([]string{""}, prefixTexts()...) {
		for _, s := range spellings {
			if !strings.EqualFold(wrong, p+s) {
				continue
			}
			if _, _, err := SplitUnit(p+s, unit); err == nil {
				return text[:n] + p + s
			}
		}
	}
	return ""
}

func prefixTexts() []string {
	out := make([]string, len(prefixes))
	for i, p := range prefixes {
		out[i] = p.text
	}
	return out
}

// parseNumber also returns the unit that was written, "" for none.
func parseNumber(text, unit string) (float64, string, error) {
	t := strings.Map(func(r rune) rune {
		switch r {
		case ' ', '\t', '\u00a0', '\u202f', '\u2009':
			return -1
		case '\u2212':
			return '-'
		}
		return r
	}, text)
	if t == "" {
		return 0, "", fmt.Errorf("empty, want a number%s: %w", inUnit(unit), ErrInvalid)
	}
	n := scanDecimal(t)
	if n == 0 {
		if strings.Contains(t, ",") {
			return 0, "", commaError(text)
		}
		return 0, "", fmt.Errorf("%q is not a number%s: %w", text, inUnit(unit), ErrInvalid)
	}
	digits, rest := t[:n], t[n:]
	if strings.HasPrefix(rest, ",") {
		return 0, "", commaError(text)
	}
	exp, rest, isUnit, err := splitUnit(rest, unit)
	if err != nil {
		return 0, "", fmt.Errorf("%q: %w", text, err)
	}
	// 4k7, 2m2, 2R2: digits behind the prefix are the decimals.
	if rest != "" {
		if strings.ContainsAny(digits, ".eE") || scanDigits(rest) == 0 || isUnit && unit != "ohm" {
			return 0, "", fmt.Errorf("%q: %q is no unit%s: %w", text, t[n:], inUnit(unit), ErrInvalid)
		}
		k := scanDigits(rest)
		digits += "." + rest[:k]
		_, tail, tailUnit, err := splitUnit(rest[k:], unit)
		if err != nil || tail != "" || (rest[k:] != "" && !tailUnit) {
			return 0, "", fmt.Errorf("%q: %q is no unit%s: %w", text, t[n:], inUnit(unit), ErrInvalid)
		}
		isUnit = isUnit || tailUnit
	}
	x, err := strconv.ParseFloat(shift(digits, exp), 64)
	if err != nil || math.IsInf(x, 0) {
		return 0, "", fmt.Errorf("%q is too large for a number%s: %w", text, inUnit(unit), ErrInvalid)
	}
	if isUnit {
		return x, unit, nil
	}
	return x, "", nil
}

func inUnit(unit string) string {
	if unit == "" {
		return ""
	}
	return " in " + unit
}

func commaError(text string) error {
	return fmt.Errorf("%q: write the decimal mark as a point: %w", text, ErrInvalid)
}

// scanDigits returns how many decimal digits t begins with.
func scanDigits(t string) int {
	n := 0
	for n < len(t) && t[n] >= '0' && t[n] <= '9' {
		n++
	}
	return n
}

// scanDecimal returns the length of the decimal number that t begins with:
// sign, digits with at most one point, exponent. 0 when there is none.
func scanDecimal(t string) int {
	i := 0
	if i < len(t) && (t[i] == '+' || t[i] == '-') {
		i++
	}
	whole := scanDigits(t[i:])
	i += whole
	frac := 0
	if i < len(t) && t[i] == '.' {
		frac = scanDigits(t[i+1:])
		i += 1 + frac
	}
	if whole+frac == 0 {
		return 0
	}
	if i < len(t) && (t[i] == 'e' || t[i] == 'E') {
		j := i + 1
		if j < len(t) && (t[j] == '+' || t[j] == '-') {
			j++
		}
		if k := scanDigits(t[j:]); k > 0 {
			i = j + k
		}
	}
	return i
}

// shift writes the decimal with its exponent raised by exp, so that 2.2 with
// -3 reads as exactly the float64 nearest to 0.0022.
func shift(digits string, exp int) string {
	if exp == 0 {
		return digits
	}
	if i := strings.IndexAny(digits, "eE"); i >= 0 {
		e, err := strconv.Atoi(digits[i+1:])
		if err != nil { // an exponent beyond int: let ParseFloat judge it
			return digits
		}
		return digits[:i] + "e" + strconv.Itoa(e+exp)
	}
	return digits + "e" + strconv.Itoa(exp)
}

// unitSpellings lists how a unit may be written, longest first.
var unitSpellings = map[string][]string{
	"V":    {"volts", "volt", "V"},
	"A":    {"amperes", "ampere", "amps", "amp", "A"},
	"ohm":  {"ohms", "ohm", "Ohms", "Ohm", "\u03a9", "\u2126", "R"},
	"W":    {"watts", "watt", "W"},
	"S":    {"siemens", "A/V", "S"},
	"s":    {"seconds", "second", "sec", "s"},
	"degC": {"degC", "\u00b0C", "\u2103", "C"},
	"K/W":  {"K/W", "\u00b0C/W", "degC/W", "C/W"},
	"Hz":   {"Hz"},
	"V/K":  {"V/K", "V/\u00b0C", "V/degC", "V/C"},
	"A/V2": {"A/V\u00b2", "A/V^2", "A/V2"},
}

// prefixes lists the SI prefixes taken, with their powers of ten. The three
// micro signs are U+00B5, U+03BC and u.
var prefixes = []struct {
	text string
	exp  int
}{
	{"\u00b5", -6}, {"\u03bc", -6}, {"u", -6}, {"f", -15}, {"p", -12}, {"n", -9}, {"m", -3},
	{"k", 3}, {"M", 6}, {"G", 9},
}

// SplitUnit reads what stands behind a number: an SI prefix, the unit, or both.
// It returns the power of ten and whether the unit itself was written; an error
// wrapping [ErrInvalid] when it is anything else.
func SplitUnit(text, unit string) (exp int, written bool, err error) {
	exp, rest, written, err := splitUnit(text, unit)
	if err == nil && rest != "" {
		err = fmt.Errorf("%q is no unit%s: %w", text, inUnit(unit), ErrInvalid)
	}
	return exp, written, err
}

// splitUnit consumes prefix and unit from the front of t. What it cannot use is
// returned as rest when digits follow, as in 4k7; otherwise it is an error.
func splitUnit(t, unit string) (exp int, rest string, isUnit bool, err error) {
	if t == "" {
		return 0, "", false, nil
	}
	tail := func(t string) (string, bool) {
		for _, s := range unitSpellings[unit] {
			if r, ok := strings.CutPrefix(t, s); ok {
				return r, true
			}
		}
		return t, false
	}
	done := func(r string) bool { return r == "" || scanDigits(r) > 0 }
	if r, ok := tail(t); ok && done(r) {
		return 0, r, true, nil
	}
	if unit == "degC" || unit == "K/W" || unit == "" {
		return 0, "", false, fmt.Errorf("%q is no unit%s: %w", t, inUnit(unit), ErrInvalid)
	}
	for _, p := range prefixes {
		r, ok := strings.CutPrefix(t, p.text)
		if !ok {
			continue
		}
		r, u := tail(r)
		if done(r) {
			return p.exp, r, u, nil
		}
	}
	if r, ok := strings.CutPrefix(t, "K"); ok && unit == "ohm" {
		if r, u := tail(r); done(r) {
			return 3, r, u, nil
		}
	}
	return 0, "", false, fmt.Errorf("%q is no unit%s: %w", t, inUnit(unit), ErrInvalid)
}
