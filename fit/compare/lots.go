package compare

import (
	"errors"
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// The ways in which lots cannot be compared.
var (
	ErrSameLot  = errors.New("a lot cannot be compared with itself")
	ErrNothing  = errors.New("no device with a value")
	ErrQuantity = errors.New("not a quantity that lots are compared by")
	ErrLevel    = errors.New("level is not a number between 0 and 1")
	ErrMargin   = errors.New("margin is not a number above 0")
	ErrFewLots  = errors.New("fewer than two lots")
)

// fewest is the least number of devices with a value that a lot needs.
const fewest = 3

// marginLevel is the level of the interval held against the margin: both ends of
// 90 % are one-sided tests at 5 %.
const marginLevel = 0.90

// Lots compares a candidate lot with a reference lot by one quantity: the shift of
// the gate voltage, candidate - reference, as the difference of 20 % trimmed means
// with Yuen's interval, or, where devices are compared by serial, as the trimmed
// mean of their differences.
//
// Inputs: results of both lots at the same currents, not modified. Devices that
// never reach the current count as above every value: within the share that is
// trimmed they do no harm, beyond it there is no shift to be had and only tests by
// ranks remain. Devices that stand apart from their family take part; those with a
// fault of their own are counted and left out. What session and meters do to one
// lot and not to the other is part of the interval, see [Common].
// Result: the verdict follows the interval alone. With a margin that of 90 %: wholly
// within, wholly outside, or [TooFew]. Without: [Differs] where the interval at
// opt.Level leaves out 0. Fewer than 3 devices with a value on a side is [TooFew].
// Numbers that could not be had are NaN. Errors: [ErrSameLot], [ErrNothing],
// [ErrQuantity], [ErrLevel], [ErrMargin].
// Source: Yuen, "The two-sample trimmed t for unequal population variances",
// Biometrika 61 (1974) 165-170; the rule of the 90 % interval: Schuirmann, Journal
// of Pharmacokinetics and Biopharmaceutics 15 (1987) 657-680. Checked:
// TestTwoLotsBeforeTheRun, TestSimulated.
func Lots(reference, candidate Lot, opt Options) (Comparison, error) {
	c := &comparing{opt: opt}
	if err := c.begin(&reference, &candidate); err != nil {
		return Comparison{}, err
	}
	c.least = least(c.ref, c.cand)
	c.pairs = c.pairing()
	c.primary()
	c.decide()
	c.beside()
	c.out.Curves = c.curves()
	c.out.Gain = c.gain()
	c.out.Beside = c.besideWords()
	if c.pairs == nil { // of the same devices nothing is to be taken, sorted or sent back
		c.out.Options = c.goingOn()
	}
	return c.out, nil
}

// comparing is one comparison while it is worked out.
type comparing struct {
	opt       Options
	ref, cand *values
	least     float64 // spread below which nothing is told apart
	pairs     *pairs  // nil: not by serial
	shift     estimate
	tied      ties
	tempHeld  bool   // the common error holds what temperatures are uncertain by, or the lots share it
	whyNot    string // there is no shift to be had: one sentence
	out       Comparison
}

func (c *comparing) warn(code, text string) {
	c.out.Warnings = append(c.out.Warnings, fit.Warning{Code: code, Text: text})
}

// begin checks what was asked for and collects the values.
func (c *comparing) begin(ref, cand *Lot) error {
	if ref.Name == cand.Name {
		return fmt.Errorf("lot %q: %w", ref.Name, ErrSameLot)
	}
	if err := c.opt.check(); err != nil {
		return err
	}
	c.ref, c.cand = valuesOf(ref, c.opt.By), valuesOf(cand, c.opt.By)
	for _, v := range []*values{c.ref, c.cand} {
		if len(v.x) == 0 {
			return fmt.Errorf("lot %q: %s: %w", v.lot.Name, lot.NameOf(c.opt.By), ErrNothing)
		}
	}
	nan := math.NaN()
	none := Interval{nan, nan, nan}
	c.out = Comparison{
		Reference: ref.Name, Candidate: cand.Name, Quantity: c.opt.By,
		Shift: nan, Low: nan, High: nan, Level: c.opt.Level, DF: nan, P: nan,
		MarginLow: nan, MarginHigh: nan, Margin: c.opt.Margin, MarginSet: c.opt.MarginSet,
		NotExcluded: nan, Raw: nan, Spread: none,
		Counts: [2]Counts{c.ref.counts, c.cand.counts},
		Centre: [2]float64{nan, nan}, SD: [2]float64{stats.SD(c.ref.plain), stats.SD(c.cand.plain)},
		Common: Common{U: nan, OffsetU: nan},
	}
	if math.IsNaN(c.opt.Margin) || c.opt.MarginSet == "" {
		c.out.MarginSet = None
		if !math.IsNaN(c.opt.Margin) {
			c.out.MarginSet = After
		}
	}
	return nil
}

// check fills in the level and says what is wrong with the options.
func (opt *Options) check() error {
	if opt.Level == 0 {
		opt.Level = 0.95
	}
	if opt.By != fit.KeyVgsth && opt.By != fit.KeyVgsIdle {
		return fmt.Errorf("%q: %w", opt.By, ErrQuantity)
	}
	if !(opt.Level > 0 && opt.Level < 1) {
		return fmt.Errorf("%v: %w", opt.Level, ErrLevel)
	}
	if !math.IsNaN(opt.Margin) && !(opt.Margin > 0 && !math.IsInf(opt.Margin, 0)) {
		return fmt.Errorf("%v V: %w", opt.Margin, ErrMargin)
	}
	return nil
}

// primary finds the shift with its uncertainty and takes off what control parts and
// temperature say.
func (c *comparing) primary() {
	refMean, candMean := trimmedMean(c.ref.x, c.least), trimmedMean(c.cand.x, c.least)
	c.out.Centre = [2]float64{refMean.Mean, candMean.Mean}
	var nu float64
	if p := c.pairs; p != nil {
		c.out.Test = "20 % trimmed mean of the differences by serial, after Tukey and McLaughlin"
		c.shift = within(trimmedMean(p.d, 0))
		if c.out.Common = (Common{U: math.NaN(), OffsetU: math.NaN()}); len(p.d) > 0 {
			c.out.Common, nu = c.commonOf(p.ref, p.cand)
		}
	} else {
		c.out.Test = "Yuen's test on 20 % trimmed means"
		c.shift = between(refMean, candMean)
		c.out.Common, nu = c.commonOf(c.ref.of, c.cand.of)
	}
	if c.whyNot = c.whyNoShift(); c.whyNot != "" {
		return
	}
	if p := c.pairs; p != nil {
		own := c.shift
		p.out.Own.Value = own.shift
		p.out.Own.Low, p.out.Own.High = own.interval(c.opt.Level)
	}
	c.shift.with(c.out.Common.U, nu)
	c.takeOff()
	c.warnOfSizes()
	c.out.Shift = c.shift.shift
	c.out.DF, c.out.P = c.shift.df(), c.shift.p()
	c.out.Low, c.out.High = c.shift.interval(c.opt.Level)
	c.out.NotExcluded = math.Max(math.Abs(c.out.Low), math.Abs(c.out.High))
	if !math.IsNaN(c.opt.Margin) {
		c.out.MarginLow, c.out.MarginHigh = c.shift.interval(marginLevel)
	}
}

// few is up to how many devices a lot is small against one at least twice as large.
const few = 6

// warnOfSizes says that the interval of a small lot and a large one is a little too
// narrow, see between.
func (c *comparing) warnOfSizes() {
	a, b := len(c.ref.x), len(c.cand.x)
	if small := min(a, b); c.pairs == nil && small <= few && max(a, b) >= 2*small {
		c.warn(fit.CodeNTooSmall, fmt.Sprintf("%d devices against %d: with so few against so many an interval of 95 %% holds the true shift in 92 to 94 of 100 cases; a few more of the smaller lot mend that", small, max(a, b)))
	}
}

// takeOff corrects the shift by control parts, else by temperature: control parts
// were as warm as the lots they were measured with, so that they hold it.
func (c *comparing) takeOff() {
	raw := c.shift.shift
	if c.out.Common.Controls > 0 {
		c.shift.shift -= c.out.Common.Offset
		c.out.Raw = raw
		return
	}
	if math.IsNaN(c.opt.Tempco) || c.opt.Tempco == 0 {
		return
	}
	warmer := c.cand.lot.Temp - c.ref.lot.Temp
	if math.IsNaN(warmer) || math.IsInf(warmer, 0) {
		c.warn(fit.CodeUnlikeConditions, "the temperature of one of the lots is not known: nothing was taken off the shift for it")
		return
	}
	c.out.ForTemp = c.opt.Tempco * warmer
	c.out.TempU = c.opt.tempU(warmer, !c.tempHeld)
	c.shift.with(c.out.TempU, math.Inf(1))
	c.shift.shift -= c.out.ForTemp
	c.out.Raw = raw
}

// takenOff is how much was taken off the shift.
func (c *comparing) takenOff() float64 {
	if math.IsNaN(c.out.Raw) {
		return 0
	}
	return c.out.Raw - c.out.Shift
}

// whyNoShift says why there is no shift to be had, "" where there is one.
func (c *comparing) whyNoShift() string {
	for _, v := range []*values{c.ref, c.cand} {
		if n := v.counts.WithValue; n < fewest {
			return fmt.Sprintf("lot %s has %s with a value, and %d are needed on either side", v.lot.Name, devices(n), fewest)
		}
	}
	if p := c.pairs; p != nil {
		switch {
		case p.out.Pairs < fewest:
			return fmt.Sprintf("%s with a value in both lots, and %d are needed", stand(p.out.Pairs, "serial", "serials"), fewest)
		case !c.shift.ok() && len(p.d) > 0 && p.endless > cut(len(p.d)):
			return fmt.Sprintf("%s belong to devices that in one of the lots never reach the current, more than the share of 20 %% that a trimmed mean leaves out, so that there is no shift to be had", stand(p.endless, "serial", "serials"))
		}
	} else {
		for _, v := range []*values{c.ref, c.cand} {
			if n := len(v.x); v.counts.Above > cut(n) {
				return fmt.Sprintf("%d of %d devices of lot %s never reach the current, more than the share of 20 %% that a trimmed mean leaves out, so that there is no shift to be had; tests by ranks count them as above all others",
					v.counts.Above, n, v.lot.Name)
			}
		}
	}
	if !c.shift.ok() {
		return "all readings are the same and nothing is known of their uncertainty, so that the scatter of the lots is not known"
	}
	return ""
}
