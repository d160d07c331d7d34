package bias

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"

	"gatesill/fit"
)

func isNumber(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// volts writes a gate voltage.
func volts(v float64) string { return fmt.Sprintf("%.3f V", v) }

// millivolts writes a difference with its sign.
func millivolts(v float64) string {
	d := 0
	if math.Abs(v) < 9.95e-3 {
		d = 1
	}
	return fmt.Sprintf("%+.*f mV", d, v*1e3)
}

// percent writes a share with two digits, or all that it has.
func percent(x float64) string {
	return strconv.FormatFloat(math.Round(x*1e4)/100, 'f', -1, 64) + " %"
}

// AmpWords writes a current.
func AmpWords(i float64) string {
	for _, p := range []struct {
		from float64
		unit string
	}{{1, "A"}, {1e-3, "mA"}, {1e-6, "µA"}} {
		if math.Abs(i) >= p.from*0.9995 {
			return strconv.FormatFloat(i/p.from, 'g', 3, 64) + " " + p.unit
		}
	}
	if i == 0 {
		return "0 A"
	}
	if math.Abs(i) < 1e-9 {
		return "< 1 nA" // of a magnitude that no curve tells
	}
	return strconv.FormatFloat(i*1e6, 'g', 2, 64) + " µA"
}

// DrawnWords writes a current that may lie beyond the end of a curve.
func DrawnWords(i fit.Drawn) string {
	switch {
	case math.IsNaN(i.I):
		return "not known"
	case i.Beyond > 0:
		return "more than " + AmpWords(i.I)
	case i.Beyond < 0:
		return "less than " + AmpWords(i.I)
	}
	return AmpWords(i.I)
}

// Ohms writes a resistor as it is ordered.
func Ohms(r float64) string {
	for _, p := range []struct {
		from float64
		unit string
	}{{1e6, "MΩ"}, {1e3, "kΩ"}} {
		if r >= p.from*(1-1e-9) {
			return strconv.FormatFloat(r/p.from, 'g', 4, 64) + " " + p.unit
		}
	}
	return strconv.FormatFloat(r, 'g', 4, 64) + " Ω"
}

// supplyWords writes a voltage that was given.
func supplyWords(v float64) string { return strconv.FormatFloat(v, 'g', 6, 64) + " V" }

// Drawing is the circuit in lines of text, its values with it.
func (n *Network) Drawing() []string {
	value := func(r float64) string {
		if !(r > 0) {
			return "?"
		}
		return Ohms(r)
	}
	head := supplyWords(n.Supply) + " --[ top " + value(n.Top) + " ]--"
	blank := strings.Repeat(" ", utf8.RuneCountInString(head))
	if n.In == AtGate {
		tap := "[ trimmer " + value(n.Trimmer) + " ]"
		arrow := blank + strings.Repeat(" ", utf8.RuneCountInString(tap)/2)
		return []string{
			head + tap + "--[ bottom " + value(n.Bottom) + " ]-- 0 V",
			arrow + "^ wiper",
			arrow + "+-- gate",
		}
	}
	down := "+--[ bottom " + value(n.Bottom) + " ]"
	if n.In == InBottom {
		down += "--[ trimmer " + value(n.Trimmer) + ", as a variable resistor ]"
	}
	return []string{head + "+-- gate", blank + "|", blank + down + "-- 0 V"}
}
