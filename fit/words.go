package fit

import (
	"math"
	"strconv"
	"strings"
)

// si writes x with an SI prefix and up to four significant digits, as in
// "1.5 mA".
func si(x float64, unit string) string {
	prefix, scale := "", 1.0
	switch m := math.Abs(x); {
	case m == 0 || m >= 1:
	case m >= 1e-3:
		prefix, scale = "m", 1e3
	case m >= 1e-6:
		prefix, scale = "µ", 1e6
	default:
		prefix, scale = "n", 1e9
	}
	return strconv.FormatFloat(x*scale, 'g', 4, 64) + " " + prefix + unit
}

func volts(x float64) string { return strconv.FormatFloat(x, 'f', 3, 64) + " V" }

func amps(x float64) string { return si(x, "A") }

func percent(x float64) string { return strconv.FormatFloat(100*x, 'g', 3, 64) + " %" }

func number(x float64) string { return strconv.FormatFloat(x, 'g', 3, 64) }

func count(n int, one, more string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + more
}

// places lists up to four gate voltages, and how many more there are.
func places(vg []float64) string {
	const most = 4
	var b strings.Builder
	for i, v := range vg {
		if i == most {
			b.WriteString(" and " + strconv.Itoa(len(vg)-most) + " more")
			break
		}
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(volts(v))
	}
	return b.String()
}

func number4(x float64) string { return strconv.FormatFloat(x, 'g', 4, 64) }

// keyWords names the quantities as sentences do.
var keyWords = map[Key]string{
	KeyVgsth:   "V_GS(th)",
	KeyVgsIdle: "gate bias at the idle current",
	KeyVt:      "extrapolated threshold",
	KeyBeta:    "gain factor",
	KeyTheta:   "mobility degradation",
	KeyGmMax:   "largest transconductance",
	KeyGmIdle:  "transconductance at the idle current",
	KeyIdss:    "drain leakage",
}

// spoken writes a value of that key with its unit.
func spoken(k Key, x float64) string {
	switch k {
	case KeyVgsth, KeyVgsIdle, KeyVt:
		return strconv.FormatFloat(x, 'f', 4, 64) + " V"
	case KeyBeta:
		return number4(x) + " A/V²"
	case KeyTheta:
		return number4(x) + " 1/V"
	case KeyIdss:
		return amps(x)
	}
	return si(x, "S")
}

// capital begins a sentence.
func capital(s string) string { return strings.ToUpper(s[:1]) + s[1:] }
