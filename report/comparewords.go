package report

import (
	"math"
	"strconv"
	"strings"

	"gatesill/fit/compare"
)

// ShiftTexts writes a shift with the ends of its interval under one prefix, signed
// and with the digits that a quarter of the interval allows, which is about its
// standard error, and the unit with its prefix.
func ShiftTexts(value, low, high float64, unit string) (v, l, h, scaled string) {
	u := (high - low) / 4
	size := max(math.Abs(low), math.Abs(high))
	if !isNumber(size) {
		size = math.Abs(value)
	}
	sc := ScaleOf(unit, size)
	sign := func(x float64) string { return signed(sc.FormatNumber(x, u, 0)) }
	return sign(value), sign(low), sign(high), sc.Unit(unit)
}

// signed puts a plus before a number that is above 0 as it is written.
func signed(text string) string {
	if text == NotAvailable || strings.HasPrefix(text, "-") || strings.Trim(text, "0.") == "" {
		return text
	}
	return "+" + text
}

// ShiftWords writes "+145 mV (+111 to +180 mV)"; without an interval only the shift.
func ShiftWords(value, low, high float64, unit string) string {
	v, l, h, scaled := ShiftTexts(value, low, high, unit)
	if v == NotAvailable {
		return NotAvailable
	}
	if l == NotAvailable || h == NotAvailable {
		return withUnit(v, scaled)
	}
	return withUnit(v, scaled) + " (" + l + " to " + withUnit(h, scaled) + ")"
}

// RatioWords writes a ratio with its interval: "1.31 (0.62 to 2.74)".
func RatioWords(r compare.Interval) string {
	text := func(x float64) string { return Scale{}.FormatNumber(x, (r.High-r.Low)/4, 0) }
	if !isNumber(r.Value) {
		return NotAvailable
	}
	if !isNumber(r.Low) || !isNumber(r.High) {
		return strconv.FormatFloat(r.Value, 'g', 3, 64)
	}
	return text(r.Value) + " (" + text(r.Low) + " to " + text(r.High) + ")"
}

// ProbabilityWords writes a probability with two digits: "0.034", "1.5e-11"; one too
// small for a computer's number as what it is below.
func ProbabilityWords(p float64) string {
	switch {
	case p == 0:
		return "< 1e-300"
	case !isNumber(p):
		return NotAvailable
	case p >= 0.995:
		return "1.0"
	case p >= 1e-3:
		return strconv.FormatFloat(p, 'g', 2, 64)
	}
	return strconv.FormatFloat(p, 'e', 1, 64)
}

// PWords writes "p = 0.034", "p < 1e-300".
func PWords(p float64) string {
	text := ProbabilityWords(p)
	if strings.HasPrefix(text, "<") {
		return "p " + text
	}
	return "p = " + text
}

// LevelWords writes a level: "95 %", "99.9 %".
func LevelWords(level float64) string {
	return strconv.FormatFloat(math.Round(level*1e4)/100, 'g', -1, 64) + " %"
}

// marginLevel is the level of the interval that a margin is held against.
const marginLevel = 0.90

// ComparedLine is the first line of a comparison: the quantity, at which current,
// and which lot is which.
func (c *ComparedLots) ComparedLine() string {
	text := "Compared by " + c.Reference.KeyPhrase(c.quantity())
	if from := c.Reference.currentFrom(c.quantity()); from != "" {
		text += " (" + from + ")"
	}
	return text + "; a shift is that of the lot minus that of reference lot " + Clean(c.Reference.Lot.Name) + "."
}

// Reason is the sentence of the verdict without the verdict at its head.
func (c *Compared) Reason() string {
	rest, cut := strings.CutPrefix(c.Sentence, string(c.Verdict))
	if !cut {
		return c.Sentence
	}
	if _, after, ok := strings.Cut(rest, ": "); ok {
		return after
	}
	return c.Sentence
}

// MarginWords tells the margin and where it comes from; "" without one.
func (c *Compared) MarginWords() string {
	if !isNumber(c.Margin) {
		return ""
	}
	text := "± " + FormatGiven(roundTo(c.Margin, 3), "V") + ", set " + Clean(c.MarginSet) + " the readings"
	if c.MarginFrom != "" {
		text += ": " + Clean(c.MarginFrom)
	}
	return text
}

// roundTo leaves n significant digits of x.
func roundTo(x float64, n int) float64 {
	r, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', n, 64), 64)
	if err != nil {
		return x
	}
	return r
}

// ShownBand picks the few currents of a curve comparison that stand for all: first
// and last, and up to three between them.
func ShownBand(points []compare.BandPoint) []compare.BandPoint {
	const shown = 5
	n := len(points)
	if n <= shown {
		return points
	}
	out := make([]compare.BandPoint, shown)
	for i := range out {
		out[i] = points[(i*(n-1)+(shown-1)/2)/(shown-1)]
	}
	return out
}
