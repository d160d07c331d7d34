package main

import (
	"cmp"
	"errors"
	"fmt"
	"strconv"
	"strings"

	"github.com/spf13/pflag"

	"gatesill/store/record"
)

// numFlag takes a number with its unit: --rl 4k7, --idle-current 250mA.
type numFlag struct {
	unit string
	dst  *record.Num
}

func (f numFlag) String() string {
	if f.dst == nil {
		return ""
	}
	return f.dst.String()
}
func (f numFlag) Type() string { return cmp.Or(f.unit, "NUMBER") }
func (f numFlag) Set(text string) error {
	x, err := record.ParseNumber(text, f.unit)
	if err == nil {
		*f.dst = record.Known(x)
	}
	return err
}

// num adds a flag for a number in a unit.
func num(fs *pflag.FlagSet, dst *record.Num, name, unit, usage string) {
	fs.Var(numFlag{unit, dst}, name, usage)
}

// shareFlag takes "1%" or a bare fraction.
type shareFlag struct{ dst *record.Num }

func (f shareFlag) String() string {
	if f.dst == nil {
		return ""
	}
	return f.dst.String()
}
func (f shareFlag) Type() string { return "%" }
func (f shareFlag) Set(text string) error {
	head, percent := strings.CutSuffix(strings.TrimSpace(text), "%")
	x, err := record.ParseNumber(head, "")
	if err != nil {
		return err
	}
	if percent {
		x /= 100
	}
	if x < 0 || x >= 1 {
		if !percent && x >= 1 && x < 100 {
			return fmt.Errorf("must lie between 0 and 100 %%; %s percent are written %s%%", head, head)
		}
		return errors.New("must lie between 0 and 100 %")
	}
	*f.dst = record.Known(x)
	return nil
}

// countFlag takes a whole number of parts, at least so many.
type countFlag struct {
	dst   *record.Num
	least int
}

func (f countFlag) String() string {
	if f.dst == nil {
		return ""
	}
	return f.dst.String()
}
func (f countFlag) Type() string { return "NUMBER" }
func (f countFlag) Set(text string) error {
	n, err := wholeNumber(text, f.least, 0)
	if err == nil {
		*f.dst = record.Known(float64(n))
	}
	return err
}

// wholeNumber reads a whole number from least to most; most 0 is no limit.
func wholeNumber(text string, least, most int) (int, error) {
	n, err := strconv.Atoi(strings.TrimSpace(text))
	switch {
	case err == nil && n >= least && (most == 0 || n <= most):
		return n, nil
	case most > 0:
		return 0, fmt.Errorf("must be a whole number from %d to %d", least, most)
	}
	return 0, fmt.Errorf("must be a whole number, %d or more", least)
}

// wholeFlag takes a whole number from least to most, 0 for no greatest.
type wholeFlag struct {
	dst         *int
	least, most int
}

func (f wholeFlag) String() string {
	if f.dst == nil || *f.dst == 0 {
		return ""
	}
	return strconv.Itoa(*f.dst)
}
func (f wholeFlag) Type() string { return "NUMBER" }
func (f wholeFlag) Set(text string) error {
	n, err := wholeNumber(text, f.least, f.most)
	if err == nil {
		*f.dst = n
	}
	return err
}

// choice takes one of some words.
type choice struct {
	dst     *string
	allowed []string
}

func (f choice) String() string {
	if f.dst == nil {
		return ""
	}
	return *f.dst
}
func (f choice) Type() string { return strings.Join(f.allowed, "|") }
func (f choice) Set(text string) error {
	for _, a := range f.allowed {
		if a == text {
			*f.dst = text
			return nil
		}
	}
	return choiceError{f.allowed}
}

type choiceError struct{ allowed []string }

func (e choiceError) Error() string { return "must be one of " + strings.Join(e.allowed, ", ") }

// amountFlag takes a number in one of several units: --margin 50mV|10%|25mA.
type amountFlag struct {
	dst   *record.Amount
	units []string
}

func (f amountFlag) String() string {
	if f.dst == nil {
		return ""
	}
	return f.dst.String()
}
func (f amountFlag) Type() string { return strings.Join(f.units, "|") }
func (f amountFlag) Set(text string) error {
	a, err := record.ParseAmount(text, f.units...)
	if err == nil {
		*f.dst = a
	}
	return err
}

// clearable is an amount that is kept in the store, where "none" takes it away again.
type clearable struct{ amountFlag }

func (f clearable) Type() string { return f.amountFlag.Type() + "|none" }
func (f clearable) Set(text string) error {
	if strings.TrimSpace(text) == "none" {
		*f.dst = record.Amount{}
		return nil
	}
	return f.amountFlag.Set(text)
}
