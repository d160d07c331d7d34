package table

import (
	"bytes"
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

const (
	maxDigits = 64   // characters of one number; a longer one is refused
	maxValue  = 1e15 // no reading of any meter; a greater one is refused
)

// column of numbers while it is read. text is a JSON array that is still open:
// every number is followed by a comma.
type buffer struct {
	values []float64
	text   []byte
}

// numeral is how the numbers of the file are written.
type numeral struct {
	mark  byte // decimal mark: '.' or ','
	group byte // mark between thousands, 0: none is taken
}

// scale is what the numbers of one column are multiplied by, and what is
// written behind each in the JSON array.
type scale struct {
	dim     string // of the quantity
	exp     int
	tail    string // "e-3,"
	inCells bool   // no unit is known for the column: every cell says its own
}

func newScale(dim string, exp int, inCells bool) scale {
	s := scale{dim: dim, exp: exp, tail: ",", inCells: inCells}
	if exp != 0 {
		s.tail = "e" + strconv.Itoa(exp) + ","
	}
	return s
}

var powers = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// fast appends the number in b when it is written plainly: at most 15 digits
// with at most one decimal mark and an exponent. Then mantissa and power of ten
// are exact and one multiplication or division rounds correctly. It reports
// whether it did; if not, nothing is appended.
func (c *buffer) fast(b []byte, n numeral, s *scale) bool {
	for len(b) > 0 && b[0] == ' ' {
		b = b[1:]
	}
	for len(b) > 0 && b[len(b)-1] == ' ' {
		b = b[:len(b)-1]
	}
	i, digits := 0, 0
	if len(b) > 0 && b[0] == '-' {
		i = 1
	}
	var m uint64
	first := i
	for i < len(b) && b[i]-'0' <= 9 {
		m = m*10 + uint64(b[i]-'0')
		i++
	}
	digits = i - first
	if digits == 0 || digits > 1 && b[first] == '0' {
		return false
	}
	exp, point := s.exp, 0
	if i < len(b) && b[i] == n.mark {
		point = i
		i++
		for i < len(b) && b[i]-'0' <= 9 {
			m = m*10 + uint64(b[i]-'0')
			i++
		}
		frac := i - point - 1
		if frac == 0 {
			return false
		}
		digits += frac
		exp -= frac
	}
	if digits > 15 {
		return false
	}
	if i < len(b) {
		e, ok := exponent(b[i:])
		if !ok || s.exp != 0 {
			return false
		}
		exp += e
	}
	x := float64(m)
	switch {
	case exp < -22 || exp > 22:
		return false
	case exp < 0:
		x /= powers[-exp]
	default:
		x *= powers[exp]
	}
	if x > maxValue {
		return false
	}
	if first == 1 {
		x = -x
	}
	at := len(c.text)
	c.text = append(append(c.text, b...), s.tail...)
	if point > 0 {
		c.text[at+point] = '.'
	}
	c.values = append(c.values, x)
	return true
}

// exponent reads all of b as an exponent of at most three digits.
func exponent(b []byte) (int, bool) {
	if b[0] != 'e' && b[0] != 'E' {
		return 0, false
	}
	b = b[1:]
	sign := 1
	if len(b) > 0 && (b[0] == '-' || b[0] == '+') {
		if b[0] == '-' {
			sign = -1
		}
		b = b[1:]
	}
	if len(b) == 0 || len(b) > 3 {
		return 0, false
	}
	e := 0
	for _, c := range b {
		if c-'0' > 9 {
			return 0, false
		}
		e = e*10 + int(c-'0')
	}
	return sign * e, true
}

// put appends what stands in the cell: a number, or null with the state that is
// returned. Why is not empty when it is neither; then nothing is appended.
func (c *buffer) put(cell []byte, n numeral, s *scale) (state record.PointState, why string) {
	if c.fast(cell, n, s) {
		return "", ""
	}
	text := trim(cell)
	if st, ok := stateOf(text); ok {
		c.null()
		return st, ""
	}
	if len(text) > maxDigits {
		return "", "a cell of " + strconv.Itoa(len(text)) + " characters is no number"
	}
	d, rest, ok := n.decimal(strip(string(text)))
	if !ok {
		return "", n.complain(text, "")
	}
	if rest == "" {
		if st := d.meterState(); st != "" {
			c.null()
			return st, ""
		}
	}
	exp := s.exp
	if rest != "" {
		if exp, why = d.suffix(rest, s); why != "" {
			return "", n.complain(text, why)
		}
	}
	at := len(c.text)
	c.text = d.json(c.text, exp)
	x, err := strconv.ParseFloat(string(c.text[at:]), 64)
	if err != nil || math.Abs(x) > maxValue {
		c.text = c.text[:at]
		return "", strconv.QuoteToGraphic(string(text)) + " is too large for a reading"
	}
	c.text = append(c.text, ',')
	c.values = append(c.values, x)
	return "", ""
}

func (c *buffer) null() {
	c.text = append(c.text, "null,"...)
	c.values = append(c.values, math.NaN())
}

// drop takes the last entry off again.
func (c *buffer) drop() {
	n := len(c.values) - 1
	c.values = c.values[:n]
	c.text = c.text[:bytes.LastIndexAny(c.text[:len(c.text)-1], ",[")+1]
}

// decimal is a decimal number in its parts, as it was written.
type decimal struct {
	neg         bool
	whole, frac string // digits
	exp         int
}

// decimal reads the number that t begins with and returns what follows it.
func (n numeral) decimal(t string) (d decimal, rest string, ok bool) {
	switch {
	case strings.HasPrefix(t, "-"), strings.HasPrefix(t, "+"):
		d.neg = t[0] == '-'
		t = t[1:]
	case strings.HasPrefix(t, "\u2212"):
		d.neg = true
		t = t[len("\u2212"):]
	}
	d.whole, t = leadingDigits(t)
	if n.group != 0 && len(t) > 0 && t[0] == n.group {
		if d.whole, t, ok = groups(d.whole, t, n.group); !ok {
			return d, t, false
		}
	}
	if len(t) > 0 && t[0] == n.mark {
		d.frac, t = leadingDigits(t[1:])
	}
	if d.whole == "" && d.frac == "" {
		return d, t, false
	}
	if len(t) > 1 && (t[0] == 'e' || t[0] == 'E') {
		digits, sign := t[1:], 1
		if digits[0] == '+' || digits[0] == '-' {
			if digits[0] == '-' {
				sign = -1
			}
			digits = digits[1:]
		}
		e, tail := leadingDigits(digits)
		if e != "" {
			v, err := strconv.Atoi(e)
			if err != nil || v > 9999 {
				v = 9999 // beyond every number: refused as too large, or zero
			}
			d.exp, t = sign*v, tail
		}
	}
	return d, strings.TrimLeft(t, " "), true
}

func leadingDigits(t string) (digits, rest string) {
	i := 0
	for i < len(t) && t[i]-'0' <= 9 {
		i++
	}
	return t[:i], t[i:]
}

// groups joins thousands: one to three digits, then groups of three.
func groups(whole, t string, mark byte) (joined, rest string, ok bool) {
	if len(whole) < 1 || len(whole) > 3 {
		return "", t, false
	}
	for len(t) > 0 && t[0] == mark {
		g, tail := leadingDigits(t[1:])
		if len(g) != 3 {
			return "", t, false
		}
		whole, t = whole+g, tail
	}
	return whole, t, true
}

// suffix reads what stands behind the number: a prefix, a unit, both, or a
// prefix in place of the decimal mark (2m2). It returns the power of ten to the
// base unit.
func (d *decimal) suffix(rest string, s *scale) (exp int, why string) {
	if u, ok := readUnit(rest); ok {
		if u, ok = u.as(s.dim); ok {
			return u.exp, ""
		}
		if len([]rune(rest)) > 1 {
			return 0, "the unit is " + u.text + ", not " + s.dim
		}
	}
	for _, p := range siPrefixes {
		tail, ok := strings.CutPrefix(rest, p.text)
		if !ok || len(p.text) > 2 {
			continue
		}
		digits, behind := leadingDigits(tail)
		if digits != "" && d.frac == "" && d.exp == 0 {
			if u, ok := readUnit(behind); behind != "" && (!ok || u.exp != 0 || u.dim != s.dim) {
				continue
			}
			d.frac = digits
		} else if tail != "" {
			continue
		}
		if s.exp != 0 {
			return 0, "a prefix here and another one in the header"
		}
		return p.exp, ""
	}
	return 0, strconv.QuoteToGraphic(rest) + " is no unit of " + s.dim
}

// json appends the number as JSON takes it, multiplied by ten to the exp.
func (d *decimal) json(dst []byte, exp int) []byte {
	if d.neg {
		dst = append(dst, '-')
	}
	whole := strings.TrimLeft(d.whole, "0")
	if whole == "" {
		whole = "0"
	}
	dst = append(dst, whole...)
	if d.frac != "" {
		dst = append(append(dst, '.'), d.frac...)
	}
	if exp += d.exp; exp != 0 {
		dst = strconv.AppendInt(append(dst, 'e'), int64(exp), 10)
	}
	return dst
}

// complain says why a text is no number.
func (n numeral) complain(text []byte, why string) string {
	q := strconv.QuoteToGraphic(string(text))
	mark := other(n.mark)
	if bytes.IndexByte(text, mark) >= 0 {
		if _, rest, ok := (numeral{mark: mark}).decimal(strip(string(text))); ok && (rest == "" || rest[0] != n.mark) {
			return q + " has another decimal mark than the file (" + markName(n.mark) + ")"
		}
	}
	if why != "" {
		return q + ": " + why
	}
	return q + " is no number"
}

func markName(mark byte) string {
	if mark == ',' {
		return "comma"
	}
	return "point"
}

// trim takes blanks off both ends, unbreakable ones and a marker of text cells
// included.
func trim(b []byte) []byte {
	b = bytes.TrimSpace(b)
	for {
		t := bytes.TrimPrefix(bytes.TrimSuffix(b, []byte("\u00a0")), []byte("\u00a0"))
		t = bytes.TrimSpace(t)
		if len(t) == len(b) {
			return b
		}
		b = t
	}
}

// strip takes out the blanks that people put inside numbers: the unbreakable
// and the thin one.
func strip(s string) string {
	for i := 0; i < len(s); i++ {
		if s[i] >= 0x80 {
			return strings.NewReplacer("\u00a0", "", "\u202f", "", "\u2009", "").Replace(s)
		}
	}
	return s
}
