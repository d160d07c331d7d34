package table

import (
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// overloadWords are what meters and programs write above their range. Points,
// blanks and case are taken out before they are compared: O.L, 0.L and OL are
// one.
var overloadWords = map[string]bool{
	"OL": true, "0L": true, "OVLD": true, "OVL": true, "OVLOAD": true, "OVRLD": true, "OVER": true, "OVERRANGE": true,
	"OVERLOAD": true, "OVERLD": true, "OVERFLOW": true, "OVF": true, "OVFL": true, "OFL": true, "OFLOW": true, "OOR": true, "OUTOFRANGE": true,
	"INF": true, "INFINITY": true, "\u221e": true,
}

var underloadWords = map[string]bool{
	"UL": true, "UFL": true, "UNFL": true, "UNDER": true, "UNDERRANGE": true, "UNDERLOAD": true, "UNDERFLOW": true, "UNLD": true,
}

// missingWords are what stands where there was no reading.
var missingWords = map[string]bool{
	"": true, "NA": true, "N/A": true, "NAN": true, "NULL": true, "NIL": true, "NONE": true, "NOREADING": true, "NODATA": true, "MISSING": true,
	"BLANK": true, "EMPTY": true, "?": true, "??": true, "???": true, "*": true, "\u2013": true, "\u2014": true, "\u2026": true,
	"#N/A": true, "#DIV/0!": true, "#NV": true, "#VALUE!": true, "#WERT!": true, "#REF!": true, "#NUM!": true, "KA": true, "ERR": true, "ERROR": true,
}

// stateOf tells a cell that stands for a state: above the range, below it, or
// nothing written.
func stateOf(text []byte) (record.PointState, bool) {
	if len(text) == 0 {
		return record.Missing, true
	}
	if len(text) > 24 {
		return dashes(text)
	}
	key := strings.ToUpper(strings.NewReplacer(" ", "", ".", "", "\u00a0", "", "_", "").Replace(string(text)))
	if missingWords[key] {
		return record.Missing, true
	}
	if st, ok := dashes([]byte(key)); ok {
		return st, ok
	}
	sign := ""
	if i := len(key) - len(strings.TrimLeft(key, "+->\u2212")); i > 0 {
		sign, key = key[:i], key[i:]
	}
	minus := strings.ContainsAny(sign, "-\u2212")
	word := key
	if !overloadWords[word] && !underloadWords[word] {
		word = withoutUnit(word)
	}
	switch {
	case word == "":
		return "", false
	case underloadWords[word], overloadWords[word] && minus:
		return record.Underload, true
	case overloadWords[word]:
		return record.Overload, true
	case missingWords[word] && word == "NAN":
		return record.Missing, true
	}
	return "", false
}

// withoutUnit takes a unit off the end of an overload word: OLMV, OL MΩ.
func withoutUnit(key string) string {
	for _, w := range []string{"OL", "0L", "OVLD", "OFL", "OVERLOAD", "OVERFLOW", "INF"} {
		if rest, ok := strings.CutPrefix(key, w); ok {
			if _, ok := readUnit(rest); ok {
				return w
			}
		}
	}
	return ""
}

// dashes tells a cell of dashes only, which some meters show between readings.
func dashes(text []byte) (record.PointState, bool) {
	for _, c := range text {
		if c != '-' && c != ' ' && c != '_' {
			return "", false
		}
	}
	return record.Missing, true
}

// meterState tells the numbers that SCPI instruments send for no number:
// 9.9E37 above the range, -9.9E37 below it, 9.91E37 not a number (SCPI 1999,
// volume 1, 7.2.1.4 and 7.2.1.5, from memory).
func (d *decimal) meterState() record.PointState {
	if d.exp < 30 && len(d.whole) < 30 {
		return ""
	}
	x, err := strconv.ParseFloat(string(d.json(nil, 0)), 64)
	if err != nil {
		return ""
	}
	switch a := math.Abs(x); {
	case a < 9.895e37 || a >= 9.995e37:
		return ""
	case math.Abs(a-9.91e37) < 1e34:
		return record.Missing
	case x < 0:
		return record.Underload
	}
	return record.Overload
}
