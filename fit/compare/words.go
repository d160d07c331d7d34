package compare

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// volts writes a gate voltage.
func volts(v float64) string { return fmt.Sprintf("%.3f V", v) }

// digits is how many decimals of a millivolt a number of that size is given.
func digits(v float64) int {
	if math.Abs(v) < 9.95e-3 {
		return 1
	}
	return 0
}

// millivolts writes a width, without a sign where it is above 0; one far below a
// millivolt in µV.
func millivolts(v float64) string {
	if a := math.Abs(v); a > 0 && a < 0.995e-3 {
		return strconv.FormatFloat(v*1e6, 'f', 0, 64) + " µV"
	}
	return fmt.Sprintf("%.*f mV", digits(v), v*1e3)
}

// shiftWords writes a shift, always with its sign.
func shiftWords(v float64) string { return signed(v) + " mV" }

func signed(v float64) string { return signedTo(v, digits(v)) }

func signedTo(v float64, decimals int) string {
	s := strconv.FormatFloat(v*1e3, 'f', decimals, 64)
	if f, err := strconv.ParseFloat(s, 64); err == nil && f == 0 {
		return "0"
	}
	if v > 0 {
		return "+" + s
	}
	return s
}

// rangeWords writes the ends of an interval of shifts.
func rangeWords(low, high float64) string {
	d := digitsOf(low, high)
	return signedTo(low, d) + " to " + signedTo(high, d) + " mV"
}

// shiftWithin writes a shift with the digits of its interval.
func shiftWithin(v, low, high float64) string { return signedTo(v, digitsOf(low, high)) + " mV" }

// digitsOf is how many decimals of a millivolt an interval allows: as many as leave
// two digits of a quarter of it, which is about the standard error.
func digitsOf(low, high float64) int {
	u := (high - low) / 4 * 1e3
	if !(u > 0) || math.IsInf(u, 0) {
		return digits(math.Max(math.Abs(low), math.Abs(high)))
	}
	text := strconv.FormatFloat(u, 'e', 1, 64) // so that 0.996 counts as 1.0
	exp, err := strconv.Atoi(text[strings.IndexByte(text, 'e')+1:])
	if err != nil {
		return 1
	}
	return min(max(0, 1-exp), 4)
}

// levelWords writes a level of confidence.
func levelWords(level float64) string {
	return strconv.FormatFloat(math.Round(level*1e6)/1e4, 'g', 6, 64) + " %"
}

// pWords writes a probability.
func pWords(p float64) string {
	if p < 1e-4 {
		return fmt.Sprintf("p %.1e", p)
	}
	return fmt.Sprintf("p %.2g", p)
}

// amps writes a current with its prefix.
func amps(i float64) string {
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
	return strconv.FormatFloat(i*1e6, 'g', 2, 64) + " µA"
}

// stand writes a number of things.
func stand(n int, one, more string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + more
}

func devices(n int) string { return stand(n, "device", "devices") }

// neverReach says that so many devices do not come to the current.
func neverReach(n int) string {
	return stand(n, "device never reaches", "devices never reach") + " the current"
}

// higher says which way a shift goes: more gate voltage or less.
func (c *comparing) higher(shift float64) string {
	if c.ref.lot.PChannel {
		shift = -shift
	}
	if shift < 0 {
		return "less"
	}
	return "more"
}
