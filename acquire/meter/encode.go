package meter

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// ErrEncode is wrapped by errors about what a format cannot say.
var ErrEncode = errors.New("cannot be said in this format")

// Shown is what the display of a simulated meter shows. What has no place in a
// format (hold, on a chip that does not say so) makes no difference there.
type Shown struct {
	Value float64           // SI unit; only its sign counts when State is set
	Unit  string            // SI: "V", "A", "ohm", "degC"
	Digit float64           // one count, SI unit, a power of ten: it chooses range and prefix
	State record.PointState // Overload, Underload; "" a number

	AC, Auto                          bool // direct unless AC
	Hold, Relative, Min, Max, LowBatt bool
	Display                           int // stx: which of several displays, from 1; 0 is 1
}

// Encode writes the frame that a meter speaking that format would send, for
// rehearsals and tests. It shares no table and no code with the decoders. Only
// formats of lines take several values. A frame that is sent twice is given once.
func Encode(format string, shown ...Shown) ([]byte, error) {
	encode, ok := encoders[format]
	if !ok {
		return nil, fmt.Errorf("format %q is none of %s: %w", format, Names(), ErrEncode)
	}
	one, line := encode.one, encode.line
	if len(shown) == 0 || len(shown) > 1 && line == nil {
		return nil, fmt.Errorf("%s: %d values in a frame: %w", format, len(shown), ErrEncode)
	}
	if line != nil {
		var parts []string
		for _, s := range shown {
			p, err := line(s)
			if err != nil {
				return nil, fmt.Errorf("%s: %w", format, err)
			}
			parts = append(parts, p)
		}
		return []byte(strings.Join(parts, ",") + "\r\n"), nil
	}
	b, err := one(shown[0])
	if err != nil {
		return nil, fmt.Errorf("%s: %w", format, err)
	}
	return b, nil
}

type encoder struct {
	one  func(Shown) ([]byte, error)
	line func(Shown) (string, error)
}

var encoders = map[string]encoder{
	"fs9721":       {one: encodeSegments},
	"fs9922":       {one: encodeStatus},
	"es51922":      {one: encode22000},
	"es519xx-4000": {one: encode4000},
	"polled-ascii": {one: encodePolled},
	"stx":          {one: encodeSTX},
	"scpi":         {line: encodeSCPI},
	"text":         {line: encodeText},
}

func unsayable(format string, args ...any) error {
	return fmt.Errorf(format+": %w", append(args, ErrEncode)...)
}

// power is the power of ten of one count.
func (s Shown) power() (int, error) {
	p := math.Log10(s.Digit)
	if r := math.Round(p); s.Digit > 0 && math.Abs(p-r) < 1e-9 {
		return int(r), nil
	}
	return 0, unsayable("one count of %g %s", s.Digit, s.Unit)
}

// counts is the display without its point, at most most.
func (s Shown) counts(most int) (n int, minus bool, err error) {
	switch s.State {
	case "":
	case record.Missing:
		return 0, false, unsayable("no value")
	default:
		return 0, s.State == record.Underload, nil
	}
	c := math.Round(math.Abs(s.Value) / s.Digit)
	if !(c <= float64(most)) {
		return 0, false, unsayable("%g %s at %g a count is over %d counts", s.Value, s.Unit, s.Digit, most)
	}
	return int(c), s.Value < 0 && c > 0, nil
}

// prefixed chooses the prefix so that 0 to most decimals are left, no prefix first.
func prefixed(power, most int) (prefix string, decimals int, ok bool) {
	for _, p := range []struct {
		text  string
		power int
	}{{"", 0}, {"m", -3}, {"u", -6}, {"n", -9}, {"k", 3}, {"M", 6}} {
		if d := p.power - power; d >= 0 && d <= most {
			return p.text, d, true
		}
	}
	return "", 0, false
}

// scaled is the display of at most most counts with its prefix and 0 to 3 decimals.
func (s Shown) scaled(most int) (n int, minus bool, prefix string, decimals int, err error) {
	power, err := s.power()
	if err != nil {
		return 0, false, "", 0, err
	}
	if n, minus, err = s.counts(most); err != nil {
		return 0, false, "", 0, err
	}
	prefix, decimals, ok := prefixed(power, 3)
	if !ok {
		return 0, false, "", 0, unsayable("one count of %g %s", s.Digit, s.Unit)
	}
	return n, minus, prefix, decimals, nil
}

// figure writes counts with their point: 3012 with 3 decimals is 3.012.
func figure(n int, minus bool, decimals int) string {
	t := fmt.Sprintf("%0*d", decimals+1, n)
	if decimals > 0 {
		t = t[:len(t)-decimals] + "." + t[len(t)-decimals:]
	}
	if minus {
		return "-" + t
	}
	return t
}

func encodePolled(s Shown) ([]byte, error) {
	n, minus, prefix, decimals, err := s.scaled(3999)
	if err != nil {
		return nil, err
	}
	function, unit := "DC", s.Unit
	switch {
	case s.Unit == "ohm":
		function, unit = "OH", "Ohm"
	case s.Unit != "V" && s.Unit != "A":
		return nil, unsayable("unit %q", s.Unit)
	case s.AC:
		function = "AC"
	}
	number := figure(n, minus, decimals)
	if s.State != "" {
		number = "O.L  "
		if minus {
			number = "-" + number
		}
	}
	return fmt.Appendf(nil, "%s%7s%4s\r", function, number, prefix+unit), nil
}

func encodeSTX(s Shown) ([]byte, error) {
	if s.State != "" || s.AC {
		return nil, unsayable("overload or AC")
	}
	power, err := s.power()
	if err != nil {
		return nil, err
	}
	n, minus, err := s.counts(99999999)
	if err != nil {
		return nil, err
	}
	code, decimals := "", 0
	for _, u := range []struct {
		unit, code string
		power      int
	}{{"V", "34", 0}, {"V", "18", -3}, {"A", "36", 0}, {"A", "37", -3}, {"A", "35", -6}, {"degC", "01", 0}} {
		if d := u.power - power; code == "" && u.unit == s.Unit && d >= 0 && d <= 3 {
			code, decimals = u.code, d
		}
	}
	if code == "" {
		return nil, unsayable("one count of %g %s", s.Digit, s.Unit)
	}
	sign := '0'
	if minus {
		sign = '1'
	}
	return fmt.Appendf(nil, "\x024%d%s%c%d%08d\r", max(1, s.Display), code, sign, decimals, n), nil
}

func encodeSCPI(s Shown) (string, error) {
	switch s.State {
	case record.Overload:
		return "+9.90000000E+37", nil
	case record.Underload:
		return "-9.90000000E+37", nil
	case record.Missing:
		return "+9.91000000E+37", nil
	}
	x := s.Value
	if s.Digit > 0 {
		x = math.Round(x/s.Digit) * s.Digit
	}
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return "", unsayable("value %g", x)
	}
	t := fmt.Sprintf("%+.8E", x+0)
	if i := strings.IndexByte(t, 'E'); len(t)-i > 4 {
		return "", unsayable("value %g", x)
	}
	return t, nil
}

// encodeText writes the number with its digits and its unit, "250.3 mA".
func encodeText(s Shown) (string, error) {
	power, err := s.power()
	if err != nil {
		return "", err
	}
	unit := s.Unit
	for _, u := range []string{"%", "degC", ""} {
		if unit == u && power > 0 {
			return "", unsayable("one count of %g %s", s.Digit, s.Unit)
		}
	}
	prefix, decimals, ok := "", -power, power <= 0
	if unit != "%" && unit != "degC" && unit != "" {
		if p, d, fits := prefixed(power, 3); fits {
			prefix, decimals, ok = p, d, true
		}
	}
	if !ok {
		return "", unsayable("one count of %g %s", s.Digit, s.Unit)
	}
	words := ""
	for _, w := range []struct {
		set  bool
		text string
	}{{s.AC, " AC"}, {s.Auto, " AUTO"}, {s.Hold, " HOLD"}, {s.Relative, " REL"}, {s.Min, " MIN"}, {s.Max, " MAX"}, {s.LowBatt, " BATT"}} {
		if w.set {
			words += w.text
		}
	}
	if unit != "" {
		unit = " " + prefix + unit
	}
	switch s.State {
	case record.Overload:
		return "OL" + unit + words, nil
	case record.Underload:
		return "-OL" + unit + words, nil
	case record.Missing:
		return "nan" + unit + words, nil
	}
	c := math.Round(s.Value / s.Digit)
	if !(math.Abs(c) < 1e15) {
		return "", unsayable("value %g", s.Value)
	}
	x, err := strconv.ParseFloat(strconv.FormatFloat(c, 'f', 0, 64)+"e"+strconv.Itoa(-decimals), 64)
	if err != nil {
		return "", unsayable("value %g", s.Value)
	}
	return strconv.FormatFloat(x, 'f', decimals, 64) + unit + words, nil
}
