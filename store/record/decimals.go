package record

import (
	"fmt"
	"math"
	"strconv"
)

// AppendDecimals appends values to dst as a JSON array of the shortest decimals
// that read back as the same numbers, null for what is not finite, and returns
// the extended slice. [ParseDecimals] reads it back.
func AppendDecimals(dst []byte, values []float64) []byte {
	dst = append(dst, '[')
	for i, x := range values {
		if i > 0 {
			dst = append(dst, ',')
		}
		if math.IsNaN(x) || math.IsInf(x, 0) {
			dst = append(dst, "null"...)
			continue
		}
		dst = strconv.AppendFloat(dst, x, 'g', -1, 64)
	}
	return append(dst, ']')
}

// ParseDecimals appends the numbers of a JSON array of numbers and nulls to dst
// and returns the extended slice. A number becomes the float64 nearest to its
// decimal, null becomes NaN. Anything else, and a number beyond the range of
// float64, is an error wrapping [ErrInvalid]. text is not modified.
//
// Checked: FuzzParseDecimals, against encoding/json and strconv.
func ParseDecimals(dst []float64, text []byte) ([]float64, error) {
	i := skipBlanks(text, 0)
	if i == len(text) || text[i] != '[' {
		return dst, decimalError(text, i, "an array")
	}
	i = skipBlanks(text, i+1)
	if i < len(text) && text[i] == ']' {
		return dst, endOfArray(text, i)
	}
	for {
		x, n, err := ParseDecimal(text, i)
		if err != nil {
			return dst, err
		}
		dst = append(dst, x)
		i = skipBlanks(text, n)
		if i == len(text) {
			return dst, decimalError(text, i, "',' or ']'")
		}
		switch text[i] {
		case ',':
			i = skipBlanks(text, i+1)
		case ']':
			return dst, endOfArray(text, i)
		default:
			return dst, decimalError(text, i, "',' or ']'")
		}
	}
}

// skipBlanks returns the index of the first byte from i on that is no JSON
// white space.
func skipBlanks(t []byte, i int) int {
	for i < len(t) && t[i] <= ' ' && (t[i] == ' ' || t[i] == '\t' || t[i] == '\n' || t[i] == '\r') {
		i++
	}
	return i
}

// endOfArray checks that nothing follows the bracket at i.
func endOfArray(t []byte, i int) error {
	if j := skipBlanks(t, i+1); j < len(t) {
		return decimalError(t, j, "nothing more")
	}
	return nil
}

func decimalError(t []byte, i int, want string) error {
	if i >= len(t) {
		return fmt.Errorf("decimals end at byte %d, want %s: %w", i, want, ErrInvalid)
	}
	return fmt.Errorf("decimals have %q at byte %d, want %s: %w", t[i:min(i+8, len(t))], i, want, ErrInvalid)
}

// powersOfTen are exact in float64, as is every whole number below 1<<53: one
// multiplication or division of the two is therefore rounded once, which makes
// it the nearest float64 (William D. Clinger, How to read floating point
// numbers accurately, PLDI 1990, section 3).
var powersOfTen = [...]float64{
	1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
}

// ParseDecimal reads the JSON number or null at t[i:], as [ParseDecimals] reads
// those of an array, and returns the index behind it.
func ParseDecimal(t []byte, i int) (x float64, next int, err error) {
	start := i
	negative := i < len(t) && t[i] == '-'
	if negative {
		i++
	}
	var mantissa uint64 // of at most 19 digits, which cannot overflow
	whole := i
	for i < len(t) && t[i]-'0' <= 9 {
		mantissa = mantissa*10 + uint64(t[i]-'0')
		i++
	}
	digits := i - whole
	if digits == 0 {
		return parseNull(t, start, i)
	}
	if digits > 1 && t[whole] == '0' {
		return 0, i, decimalError(t, whole, "a number without leading zeros")
	}
	exp := 0
	if i < len(t) && t[i] == '.' {
		i++
		from := i
		for i < len(t) && t[i]-'0' <= 9 {
			mantissa = mantissa*10 + uint64(t[i]-'0')
			i++
		}
		if exp = from - i; exp == 0 {
			return 0, i, decimalError(t, i, "a digit")
		}
		digits -= exp
	}
	if i < len(t) && t[i]|0x20 == 'e' {
		e, n, err := parseExponent(t, i+1)
		if err != nil {
			return 0, n, err
		}
		exp, i = exp+e, n
	}
	if digits <= 19 && mantissa < 1<<53 && exp >= -22 && exp <= 22 {
		x := float64(mantissa)
		if exp < 0 {
			x /= powersOfTen[-exp]
		} else {
			x *= powersOfTen[exp]
		}
		if negative {
			x = -x
		}
		return x, i, nil
	}
	if x, err = strconv.ParseFloat(string(t[start:i]), 64); err != nil {
		return 0, start, decimalError(t, start, "a number that float64 can hold")
	}
	return x, i, nil
}

// parseNull reads null at start; i is where a digit was wanted.
func parseNull(t []byte, start, i int) (float64, int, error) {
	if i == start && len(t)-i >= 4 && string(t[i:i+4]) == "null" {
		return math.NaN(), i + 4, nil
	}
	return 0, i, decimalError(t, i, "a number or null")
}

// parseExponent reads the digits behind e, capped far outside of what float64
// can hold.
func parseExponent(t []byte, i int) (e, next int, err error) {
	negative := false
	if i < len(t) && (t[i] == '-' || t[i] == '+') {
		negative = t[i] == '-'
		i++
	}
	from := i
	for i < len(t) && t[i]-'0' <= 9 {
		e = min(e*10+int(t[i]-'0'), 1<<20)
		i++
	}
	if i == from {
		return 0, i, decimalError(t, i, "a digit")
	}
	if negative {
		e = -e
	}
	return e, i, nil
}
