package report

import (
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
)

// Scale is the SI prefix that all numbers of one column share. The zero Scale
// is no prefix.
type Scale struct {
	Prefix string // "m", "µ", "k", ... or ""
	Exp    int    // power of ten of the prefix
}

var scales = []Scale{
	{"f", -15}, {"p", -12}, {"n", -9}, {"µ", -6}, {"m", -3}, {"", 0}, {"k", 3}, {"M", 6}, {"G", 9},
}

// ScaleOf picks the engineering prefix for a column of numbers in unit: the one
// that leaves one to three digits before the decimal mark of the number in the
// middle of the column, by magnitude. Numbers that are 0 or not finite have no
// say. Units that take no prefix here (1/V, %, °C, none) get none.
func ScaleOf(unit string, values ...float64) Scale {
	switch unit {
	case "", "1/V", "%", "°C":
		return Scale{}
	}
	var sizes []float64
	for _, x := range values {
		if a := math.Abs(x); a > 0 && !math.IsInf(a, 0) {
			sizes = append(sizes, a)
		}
	}
	if len(sizes) == 0 {
		return Scale{}
	}
	slices.Sort(sizes)
	return scaleFor(sizes[len(sizes)/2])
}

// scaleFor is the prefix for one magnitude above 0.
func scaleFor(size float64) Scale {
	best := scales[0]
	for _, s := range scales {
		// The half unit in the seventh digit keeps 999.99999 m from standing
		// where 1 is meant.
		if size >= pow10(s.Exp)*(1-5e-7) {
			best = s
		}
	}
	return best
}

// Unit puts the prefix before a unit: "mV", "µA", "mA/V²".
func (s Scale) Unit(unit string) string { return s.Prefix + unit }

// Of gives x in the scaled unit.
func (s Scale) Of(x float64) float64 { return x / pow10(s.Exp) }

func pow10(exp int) float64 { return math.Pow10(exp) }

// maxDigits is the most significant digits that are ever shown: no bench meter
// means more.
const maxDigits = 9

// DecimalsFor tells how many decimals belong behind the mark of a number with
// the standard uncertainty u: as many as leave two significant digits of u
// (JCGM 100:2008, 7.2.6). Both are in the unit shown. Without a usable u it
// returns 0, false.
func DecimalsFor(u float64) (int, bool) {
	if !(u > 0) || math.IsInf(u, 0) {
		return 0, false
	}
	// Through the decimal text, so that 0.0996 counts as 0.10.
	text := strconv.FormatFloat(u, 'e', 1, 64)
	exp, err := strconv.Atoi(text[strings.IndexByte(text, 'e')+1:])
	if err != nil {
		return 0, false
	}
	return max(0, 1-exp), true
}

// decimalsShown decides the decimals of one number: its u, else the resolution
// of its reading, else the digits it has, four significant ones at most.
func decimalsShown(x, u, resolution float64) int {
	d, ok := DecimalsFor(u)
	if !ok && resolution > 0 {
		d, ok = wholeSteps(resolution), true
	}
	if !ok {
		d = min(writtenDecimals(x), significant(x, 4))
	}
	return max(0, min(d, significant(x, maxDigits)))
}

// wholeSteps is the number of decimals that show a step of r: 0.001 has 3,
// 0.0005 has 4.
func wholeSteps(r float64) int {
	return min(writtenDecimals(r), 12)
}

// writtenDecimals counts the decimals of the shortest decimal that reads as x,
// the noise of a scaled binary number left aside.
func writtenDecimals(x float64) int {
	text := strconv.FormatFloat(x, 'e', 11, 64)
	mantissa, tail, _ := strings.Cut(text, "e")
	exp, err := strconv.Atoi(tail)
	if err != nil {
		return 0
	}
	mantissa = strings.TrimRight(mantissa, "0")
	_, frac, _ := strings.Cut(mantissa, ".")
	return max(0, len(frac)-exp)
}

// significant is the number of decimals that give x n significant digits.
func significant(x float64, n int) int {
	if x == 0 || math.IsNaN(x) || math.IsInf(x, 0) {
		return n
	}
	return n - 1 - int(math.Floor(math.Log10(math.Abs(x))))
}

// FormatNumber writes x (base unit) in the scale with the digits that its
// standard uncertainty u allows, or, where u is not known (NaN), that the
// resolution of its reading allows (0: not known either). A number that is not
// finite is "n/a".
func (s Scale) FormatNumber(x, u, resolution float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return NotAvailable
	}
	x = s.Of(x)
	return fixed(x, decimalsShown(x, s.Of(u), s.Of(resolution)))
}

// fixed writes x with that many decimals, never a minus sign before a zero.
func fixed(x float64, decimals int) string {
	text := strconv.FormatFloat(x, 'f', decimals, 64)
	if strings.HasPrefix(text, "-") && strings.Trim(text, "-0.") == "" {
		return text[1:]
	}
	return text
}

// NotAvailable stands where a number could not be had; its reason stands beside
// or below it.
const NotAvailable = "n/a"

// FormatQuantity writes a quantity as people read it in a sentence:
// "2.7801 ± 0.0005 V (n = 4)". The ± is the standard uncertainty within the
// session (k = 1); without one there is no ±. A quantity without a value is
// "n/a".
func FormatQuantity(q fit.Quantity, unit string) string {
	if !q.Ok() || math.IsInf(q.Value, 0) {
		return NotAvailable
	}
	text := FormatPlain(q.Value, q.U, unit)
	if q.N > 0 {
		text += " (n = " + strconv.Itoa(q.N) + ")"
	}
	return text
}

// FormatWithAbsolute writes a quantity with both uncertainties that are known,
// "2.78010 V (n = 4), ± 0.50 mV in the session, ± 9.0 mV absolute": what tells
// devices of one lot apart, and what counts against a data sheet. Where the
// absolute one is not known it is [FormatQuantity].
func FormatWithAbsolute(q fit.Quantity, unit string) string {
	if !q.Ok() || math.IsInf(q.Value, 0) || !(q.UAbsolute > 0) || math.IsInf(q.UAbsolute, 0) {
		return FormatQuantity(q, unit)
	}
	u := q.U
	if !(u > 0) || math.IsInf(u, 0) {
		u = q.UAbsolute
	}
	s := ScaleOf(unit, max(math.Abs(q.Value), u))
	text := withUnit(s.FormatNumber(q.Value, u, 0), s.Unit(unit))
	if q.N > 0 {
		text += " (n = " + strconv.Itoa(q.N) + ")"
	}
	su := ScaleOf(unit, q.UAbsolute) // one prefix for both, so that they can be compared
	size := func(u float64) string {
		d, _ := DecimalsFor(su.Of(u))
		return withUnit(fixed(su.Of(u), d), su.Unit(unit))
	}
	if u == q.U {
		text += ", ± " + size(q.U) + " in the session"
	}
	return text + ", ± " + size(q.UAbsolute) + " absolute"
}

// FormatPlain writes a number with its uncertainty, where known, and its unit:
// "2.7801 ± 0.0005 V", "250 mA".
func FormatPlain(x, u float64, unit string) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return NotAvailable
	}
	size := math.Abs(x)
	if u > size && isNumber(u) {
		size = u // a value lost in its uncertainty is shown on the scale of that
	}
	s := ScaleOf(unit, size)
	text := s.FormatNumber(x, u, 0)
	if d, ok := DecimalsFor(s.Of(u)); ok {
		d = min(d, max(0, significant(s.Of(x), maxDigits)))
		text += " ± " + fixed(s.Of(u), d)
	}
	return withUnit(text, s.Unit(unit))
}

// FormatTwoDigits writes x with two significant digits and its unit: an
// uncertainty or another number that only tells a size.
func FormatTwoDigits(x float64, unit string) string {
	if !isNumber(x) {
		return NotAvailable
	}
	s := ScaleOf(unit, x)
	scaled := s.Of(x)
	if math.Abs(scaled) >= 100 { // three digits before the mark: the third is not said
		scaled = math.Round(scaled/10) * 10
	}
	d, _ := DecimalsFor(math.Abs(scaled))
	return withUnit(fixed(scaled, d), s.Unit(unit))
}

// FormatGiven writes a number that was given, not measured, with all its
// digits: "250 mA", "4.7 kΩ", "25 °C".
func FormatGiven(x float64, unit string) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return NotAvailable
	}
	s := ScaleOf(unit, x)
	x = s.Of(x)
	d := max(0, min(writtenDecimals(x), significant(x, maxDigits)))
	return withUnit(fixed(x, d), s.Unit(unit))
}

func withUnit(text, unit string) string {
	if unit == "" {
		return text
	}
	return text + " " + unit
}
