package meter

import (
	"fmt"
	"strings"
	"unicode/utf8"

	"gatesill/store/record"
)

// stateWord tells a word that stands in place of a number. Points and case do not
// count. Dashes are no value, as they are in tables: some meters show them between
// two readings.
func stateWord(w string) (record.PointState, bool) {
	if len(w) > 16 {
		return "", false
	}
	key := strings.ToUpper(strings.ReplaceAll(w, ".", ""))
	if len(key) >= 2 && strings.Trim(key, "-") == "" {
		return record.Missing, true
	}
	minus := strings.HasPrefix(key, "-")
	switch strings.TrimLeft(key, "+-<>") {
	case "OL", "0L", "OVL", "OVLD", "OVER", "OVERLOAD", "OVERRANGE", "OVERFLOW", "OVF", "OFL", "INF", "INFINITY", "\u221e":
		if minus {
			return record.Underload, true
		}
		return record.Overload, true
	case "UL", "UNDER", "UNDERRANGE", "NINF":
		return record.Underload, true
	case "NAN", "NA", "NONE", "NULL", "ERR", "ERROR":
		return record.Missing, true
	}
	return "", false
}

// flag sets what a word beside a number says and reports whether it is known.
func (r *Reading) flag(w string) bool {
	switch strings.ToUpper(w) {
	case "DC":
		r.DC = true
	case "AC":
		r.AC = true
	case "AUTO", "MANU", "MANUAL":
		r.Auto = r.Auto || strings.EqualFold(w, "AUTO")
	case "HOLD":
		r.Hold = true
	case "REL":
		r.Relative = true
	case "MIN":
		r.Min = true
	case "MAX":
		r.Max = true
	case "BATT", "LOWBATT", "LOBAT":
		r.LowBatt = true
	case "DIODE":
		r.Test = "diode"
	case "BEEP":
		r.Test = "continuity"
	default:
		return false
	}
	return true
}

// utf takes a line that is no UTF-8 for Latin-1, where the signs of micro and
// degree come from.
func utf(line []byte) string {
	if utf8.Valid(line) {
		return strings.TrimSpace(string(line))
	}
	runes := make([]rune, len(line))
	for i, c := range line {
		runes[i] = rune(c)
	}
	return strings.TrimSpace(string(runes))
}

func quoted(s string) string { return fmt.Sprintf("%q", s) }
