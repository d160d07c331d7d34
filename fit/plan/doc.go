// Package plan says how many parts have to be measured for a purpose, and what a
// given number can show: find bad parts, see a shift between two lots, show that
// two lots are alike, cover a share of a lot with limits, bound a capability,
// accept a lot by its values.
//
// It plans beforehand, from what is assumed; it does not judge lots, but for the
// accepting rule that a plan consists of, and it never takes the shift that was
// seen for the one to plan with. Everything by values takes them for normal.
//
// Shares, risks and confidences are fractions, 0..1. What was not asked for is NaN,
// or 0 for a number of parts; 0 parts is also 'no number would do', and the answer
// then says why.
package plan

import (
	"fmt"
	"math"
	"strings"

	"gatesill/fit/stats"
)

// Answer is what one of the kinds found: a pointer to [Find], [Shift], [Same],
// [Cover], [Capability] or [Accept].
type Answer interface {
	// Kind is the word that asks for it: "find".
	Kind() string
}

// Kind is "find".
func (*Find) Kind() string { return "find" }

// Kind is "shift".
func (*Shift) Kind() string { return "shift" }

// Kind is "same".
func (*Same) Kind() string { return "same" }

// Kind is "cover".
func (*Cover) Kind() string { return "cover" }

// Kind is "capability".
func (*Capability) Kind() string { return "capability" }

// Kind is "accept".
func (*Accept) Kind() string { return "accept" }

// Invalid is an input that nothing can be planned with.
type Invalid struct {
	Input string // name of the input: "risk", "of", "sd"
	Why   string // what is wrong with it, as the rest of a sentence
	Hint  string // what to give instead
}

// Error says which input is wrong, and why.
func (e *Invalid) Error() string { return e.Input + ": " + e.Why }

// Lot is a sample that is at hand already; the zero Lot is none.
type Lot struct {
	Name   string
	Of     string  // what was measured: "V_GS(th)"
	N      int     // devices with a value
	Mean   float64 // V
	SD     float64 // V, between devices
	Values []float64
	Mixed  bool // it looks like two populations
}

// unfit says why nothing that rests on one normal distribution holds for the lot;
// "" where it may.
func (l *Lot) unfit(n Normality) string {
	switch {
	case l.Mixed:
		return "the lot is two populations"
	case n.Doubts:
		return fmt.Sprintf("the lot is far from normal (Anderson-Darling p = %.2g)", n.P)
	}
	return ""
}

// LotOf is a sample of values, V, with their mean and standard deviation.
func LotOf(name string, values []float64) Lot {
	mean, sd := stats.MeanSD(values)
	return Lot{Name: name, N: len(values), Mean: mean, SD: sd, Values: values}
}

func (l *Lot) given() bool { return l.N > 0 || l.Name != "" }

// fraction checks a share, risk or confidence.
func fraction(input string, x float64, hint string) error {
	if !(x > 0 && x < 1) {
		return &Invalid{input, percent(x) + ", must lie above 0 and below 100 %", hint}
	}
	return nil
}

func percent(x float64) string {
	if math.IsNaN(x) {
		return "nothing"
	}
	return fmt.Sprintf("%.6g %%", 100*x)
}

// above checks a quantity that has to be above 0.
func above(input string, x float64, unit, hint string) error {
	switch {
	case math.IsNaN(x):
		return &Invalid{input, "needed", hint}
	case !(x > 0) || math.IsInf(x, 0):
		return &Invalid{input, strings.TrimSpace(fmt.Sprintf("%.6g %s", x, unit)) + ", must be above 0", hint}
	}
	return nil
}

// atLeast checks a number of parts; 0 is none given.
func atLeast(input string, n, least int, why string) error {
	if n != 0 && n < least {
		return &Invalid{input, fmt.Sprintf("%d: %s", n, why), fmt.Sprintf("--%s %d or more", input, least)}
	}
	return nil
}

// mostParts is the largest number of parts that is planned with.
const mostParts = 1_000_000

func atMost(input string, n int) error {
	if n > mostParts {
		return &Invalid{input, fmt.Sprintf("%d: more than %d parts are not planned with", n, mostParts), "a smaller number"}
	}
	return nil
}

func firstError(list ...error) error {
	for _, err := range list {
		if err != nil {
			return err
		}
	}
	return nil
}
