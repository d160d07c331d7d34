package match

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"gatesill/fit"
)

// nameOf is a quantity as it stands in a sentence.
func (p *problem) nameOf(k fit.Key) string {
	switch k {
	case fit.KeyVgsIdle, fit.KeyVgsth:
		return "gate voltage at " + p.currentOf(k)
	case fit.KeyVt:
		return "extrapolated threshold"
	case fit.KeyBeta:
		return "gain factor"
	case fit.KeyGmMax:
		return "greatest transconductance"
	case fit.KeyGmIdle:
		return "transconductance at " + p.currentOf(fit.KeyVgsIdle)
	case KeyCurve:
		return "transfer curve"
	}
	return string(k)
}

// currentOf is the current at which a gate voltage is taken.
func (p *problem) currentOf(k fit.Key) string {
	switch {
	case k == fit.KeyVgsth && p.opt.TestCurrent > 0:
		return amperes(p.opt.TestCurrent)
	case k == fit.KeyVgsth:
		return "the test current"
	case p.opt.At > 0:
		return amperes(p.opt.At)
	}
	return "the idle current"
}

func currentRange(from, to float64) string {
	switch {
	case from > 0 && to > 0:
		return "currents from " + amperes(from) + " to " + amperes(to)
	case from > 0:
		return "currents from " + amperes(from)
	case to > 0:
		return "currents up to " + amperes(to)
	}
	return "all currents"
}

// digits writes a number with at most three significant digits.
func digits(x float64) string {
	s := strconv.FormatFloat(x, 'g', 3, 64)
	if strings.ContainsRune(s, 'e') {
		s = strconv.FormatFloat(x, 'f', 0, 64)
	}
	return s
}

func amperes(x float64) string {
	switch a := math.Abs(x); {
	case a < 1e-3 && a > 0:
		return digits(x*1e6) + " µA"
	case a < 1:
		return digits(x*1e3) + " mA"
	}
	return digits(x) + " A"
}

func volts(x float64) string {
	switch a := math.Abs(x); {
	case a < 1e-3 && a > 0:
		return digits(x*1e6) + " µV"
	case a < 1:
		return digits(x*1e3) + " mV"
	}
	return digits(x) + " V"
}

func ohms(x float64) string {
	if math.Abs(x) < 1 {
		return digits(x*1e3) + " milliohm"
	}
	return digits(x) + " ohm"
}

func percent(x float64) string { return digits(100*x) + " %" }

// plural writes a number with its noun.
func plural(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %ss", n, one)
}

func listed(names []string) string {
	switch len(names) {
	case 0:
		return ""
	case 1:
		return names[0]
	}
	return strings.Join(names[:len(names)-1], ", ") + " and " + names[len(names)-1]
}
