package meter

import (
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

var powers = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// scaled is m times ten to exp, rounded once: both factors are exact for m below
// 2^53 and exp within 22.
func scaled(m int64, exp int) float64 {
	switch {
	case m == 0: // no minus zero
		return 0
	case exp < -22 || exp > 22:
		return float64(m) * math.Pow10(exp)
	case exp < 0:
		return float64(m) / powers[-exp]
	}
	return float64(m) * powers[exp]
}

// count sets value and digit of a display: counts, sign, power of ten of one count.
func (r *Reading) count(m int64, minus bool, exp int) {
	if minus {
		m = -m
	}
	r.Value, r.Digit = scaled(m, exp), scaled(1, exp)
}

// over marks the reading as above, or with a minus sign below, the range. No digit
// is claimed: what the display counts in while it overflows says nothing.
func (r *Reading) over(minus bool) {
	r.Value, r.Digit, r.State = math.NaN(), 0, record.Overload
	if minus {
		r.State = record.Underload
	}
}

// missing marks the reading as without a number.
func (r *Reading) missing() { r.Value, r.Digit, r.State = math.NaN(), 0, record.Missing }

const maxNumber = 64 // characters of one number; a longer one is refused

// decimal is a number as it was written.
type decimal struct {
	text     string // with a point for its mark
	decimals int
	exponent bool
}

// readDecimal reads the decimal number that t begins with and returns what stands
// behind it. Neither a sign nor a mark alone is a number.
func readDecimal(t string, mark byte) (d decimal, rest string, ok bool) {
	i, n := 0, 0
	if i < len(t) && (t[i] == '+' || t[i] == '-') {
		i++
	}
	run := func() int {
		from := i
		for i < len(t) && t[i] >= '0' && t[i] <= '9' {
			i++
		}
		return i - from
	}
	n = run()
	at := i
	if i < len(t) && t[i] == mark {
		i++
		d.decimals = run()
		n += d.decimals
	}
	if n == 0 || i > maxNumber {
		return decimal{}, t, false
	}
	d.text = t[:i]
	if at < i && mark != '.' {
		d.text = t[:at] + "." + t[at+1:i]
	}
	if i < len(t) && (t[i] == 'e' || t[i] == 'E') {
		mantissa := i
		i++
		if i < len(t) && (t[i] == '+' || t[i] == '-') {
			i++
		}
		if k := run(); k > 0 && k < 4 {
			d.exponent = true
			d.text += t[mantissa:i]
		} else {
			i = mantissa
		}
	}
	return d, t[i:], true
}

// into sets the reading to the number times ten to exp.
//
// SCPI writes 9.9E37 for above the range, -9.9E37 for below it and 9.91E37 for no
// number (SCPI 1999 volume 1, 7.2.1.4 and 7.2.1.5, from memory). They are told by
// their size, because instruments differ in how many digits they write.
func (d decimal) into(r *Reading, exp int) error {
	x, err := strconv.ParseFloat(d.text, 64)
	if err != nil {
		return bad("%q is no number", d.text)
	}
	switch a := math.Abs(x); {
	case a > 9.905e37:
		r.missing()
		return nil
	case a >= 9.0e37:
		r.over(x < 0)
		return nil
	}
	if exp != 0 { // once more with the exponent in the text, so that it is rounded once
		text, e := d.text, 0
		if i := strings.IndexAny(text, "eE"); i >= 0 {
			e, _ = strconv.Atoi(text[i+1:])
			text = text[:i]
		}
		if x, err = strconv.ParseFloat(text+"e"+strconv.Itoa(e+exp), 64); err != nil {
			return bad("%q is no number", d.text)
		}
	}
	if x == 0 {
		x = 0 // no minus zero
	}
	r.Value, r.State, r.Digit = x, "", 0
	// The last digit of a number with exponent is that of the writing: it moves with
	// every power of ten, a display's does not.
	if !d.exponent {
		r.Digit = scaled(1, exp-d.decimals)
	}
	return nil
}
