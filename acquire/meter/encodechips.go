package meter

import (
	"fmt"

	"gatesill/store/record"
)

// segments that are lit for each character, by the usual letters: A on top, then
// clockwise B C D E F, G in the middle.
var segments = map[byte]string{'0': "ABCDEF", '1': "BC", '2': "ABDEG", '3': "ABCDG", '4': "BCFG", '5': "ACDFG",
	'6': "ACDEFG", '7': "ABC", '8': "ABCDEFG", '9': "ABCDFG", 'L': "DEF", ' ': ""}

// Where each segment sits in the two nibbles of a digit: nibble, bit.
var segmentPlace = map[rune][2]int{'A': {0, 0}, 'F': {0, 1}, 'E': {0, 2}, 'B': {1, 0}, 'G': {1, 1}, 'C': {1, 2}, 'D': {1, 3}}

func encodeSegments(s Shown) ([]byte, error) {
	n, minus, prefix, decimals, err := s.scaled(9999)
	if err != nil {
		return nil, err
	}
	var nibble [14]byte
	light := func(set bool, number, bit int) {
		if set {
			nibble[number-1] |= 1 << bit
		}
	}
	display := fmt.Sprintf("%04d", n)
	if s.State != "" {
		display = " 0L "
	}
	for i := range 4 {
		for _, g := range segments[display[i]] {
			at := segmentPlace[g]
			light(true, 2+2*i+at[0], at[1])
		}
	}
	light(minus, 2, 3)
	if decimals > 0 {
		light(true, 2+2*(4-decimals), 3)
	}
	light(s.AC, 1, 3)
	light(!s.AC, 1, 2)
	light(s.Auto, 1, 1)
	light(true, 1, 0)
	light(s.Relative, 12, 1)
	light(s.Hold, 12, 0)
	light(s.LowBatt, 13, 0)
	switch prefix {
	case "n":
		light(true, 10, 2)
	case "u":
		light(true, 10, 3)
	case "m":
		light(true, 11, 3)
	case "k":
		light(true, 10, 1)
	case "M":
		light(true, 11, 1)
	}
	switch s.Unit {
	case "V":
		light(true, 13, 2)
	case "A":
		light(true, 13, 3)
	case "Hz":
		light(true, 13, 1)
	case "ohm":
		light(true, 12, 2)
	case "F":
		light(true, 12, 3)
	case "degC":
		light(true, 14, 0)
	default:
		return nil, unsayable("unit %q", s.Unit)
	}
	frame := make([]byte, 14)
	for i := range frame {
		frame[i] = byte(i+1)<<4 | nibble[i]
	}
	return frame, nil
}

func encodeStatus(s Shown) ([]byte, error) {
	n, minus, prefix, decimals, err := s.scaled(9999)
	if err != nil {
		return nil, err
	}
	sign, display := '+', fmt.Sprintf("%04d", n)
	if minus {
		sign = '-'
	}
	if s.State != "" {
		display = "?0:?"
	}
	var flags [4]byte
	set := func(on bool, number int, value byte) {
		if on {
			flags[number-7] += value
		}
	}
	set(s.Auto, 7, 32)
	set(!s.AC, 7, 16)
	set(s.AC, 7, 8)
	set(s.Relative, 7, 4)
	set(s.Hold, 7, 2)
	set(s.Max, 8, 32)
	set(s.Min, 8, 16)
	set(s.LowBatt, 8, 4)
	set(prefix == "n", 8, 2)
	set(prefix == "u", 9, 128)
	set(prefix == "m", 9, 64)
	set(prefix == "k", 9, 32)
	set(prefix == "M", 9, 16)
	value, ok := map[string]byte{"V": 128, "A": 64, "ohm": 32, "Hz": 8, "F": 4, "degC": 2}[s.Unit]
	if !ok {
		return nil, unsayable("unit %q", s.Unit)
	}
	set(true, 10, value)
	frame := fmt.Appendf(nil, "%c%s %c", sign, display, "0421"[decimals])
	return append(append(frame, flags[:]...), 0, '\r', '\n'), nil
}

// place is one range of a chip: unit and power of ten of a count, and what it sends
// for function and range.
type place struct {
	unit     string
	power    int
	function byte
	number   byte
}

func find(list []place, s Shown) (place, error) {
	power, err := s.power()
	if err != nil {
		return place{}, err
	}
	for _, p := range list {
		if p.unit == s.Unit && p.power == power {
			return p, nil
		}
	}
	return place{}, unsayable("one count of %g %s", s.Digit, s.Unit)
}

func encode22000(s Shown) ([]byte, error) {
	p, err := find([]place{
		{"V", -5, ';', '4'}, {"V", -4, ';', '0'}, {"V", -3, ';', '1'}, {"V", -2, ';', '2'}, {"V", -1, ';', '3'},
		{"A", -8, '=', '0'}, {"A", -7, '=', '1'}, {"A", -6, '?', '0'}, {"A", -5, '?', '1'}, {"A", -3, '0', '0'},
		{"ohm", -2, '3', '0'}, {"ohm", -1, '3', '1'}, {"ohm", 0, '3', '2'}, {"ohm", 1, '3', '3'},
	}, s)
	if err != nil {
		return nil, err
	}
	n, minus, err := s.counts(22000)
	if err != nil {
		return nil, err
	}
	if s.State != "" {
		n = 22000
	}
	return fmt.Appendf(nil, "%c%05d%c%c%c0%c%c\r\n", p.number, n, p.function, esStatus(s, minus),
		'0'+8*bit(s.Max)+4*bit(s.Min)+2*bit(s.Relative), esMode(s), '0'+2*bit(s.Hold)), nil
}

func encode4000(s Shown) ([]byte, error) {
	p, err := find([]place{
		{"V", -4, ';', '0'}, {"V", -3, ';', '1'}, {"V", -2, ';', '2'}, {"V", -1, ';', '3'}, {"V", 0, ';', '4'},
		{"A", -7, '=', '0'}, {"A", -6, '=', '1'}, {"A", -5, '9', '0'}, {"A", -4, '9', '1'}, {"A", -2, '?', '0'},
		{"ohm", -1, '3', '0'}, {"ohm", 0, '3', '1'}, {"ohm", 1, '3', '2'},
	}, s)
	if err != nil {
		return nil, err
	}
	n, minus, err := s.counts(4000)
	if err != nil {
		return nil, err
	}
	if s.State != "" {
		n = 4000
	}
	return fmt.Appendf(nil, "%c%04d%c%c%c%c\r\n", p.number, n, p.function, esStatus(s, minus),
		'0'+8*bit(s.Max)+4*bit(s.Min), esMode(s)), nil
}

func esStatus(s Shown, minus bool) int {
	over := s.State == record.Overload || s.State == record.Underload
	return '0' + 4*bit(minus) + 2*bit(s.LowBatt) + bit(over)
}

func esMode(s Shown) int { return '0' + 8*bit(!s.AC) + 4*bit(s.AC) + 2*bit(s.Auto) }

func bit(set bool) int {
	if set {
		return 1
	}
	return 0
}
