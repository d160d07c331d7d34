package gauge

import (
	"fmt"
	"math"
	"strconv"
)

// count writes a number of things: "1 device", "3 devices".
func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return strconv.Itoa(n) + " " + what + "s"
}

// volts writes a difference of gate voltages with two digits, in the prefix that
// suits it.
func volts(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "n/a"
	}
	scale, unit := 1e3, "mV"
	switch a := math.Abs(v); {
	case a == 0:
		return "0 mV"
	case a >= 0.9995:
		scale, unit = 1, "V"
	case a < 0.00995e-3:
		scale, unit = 1e6, "µV"
	}
	x := v * scale
	d := 1
	switch a := math.Abs(x); {
	case a >= 99.5:
		d = 0
	case a < 0.995:
		d = 2
	}
	return fmt.Sprintf("%.*f %s", d, x, unit)
}

// signed is [volts] with its sign always written.
func signed(v float64) string {
	if v > 0 {
		return "+" + volts(v)
	}
	return volts(v)
}

// pWords writes a probability.
func pWords(p float64) string {
	switch {
	case math.IsNaN(p):
		return "n/a"
	case p < 0.0001:
		return "< 0.0001"
	case p < 0.0995:
		return fmt.Sprintf("%.2g", p)
	}
	return fmt.Sprintf("%.2f", p)
}

func (f Factor) withWords() string {
	if f.With == "" {
		return ""
	}
	return "; " + f.Name + " and " + f.With + " change together and cannot be told apart"
}
