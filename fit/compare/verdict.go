package compare

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
)

// decide finds the verdict, its sentence, and how many devices would tell where
// these do not.
func (c *comparing) decide() {
	o := &c.out
	if c.whyNot != "" {
		o.Verdict, o.Sentence = TooFew, "too few to tell: "+c.whyNot
		c.moreWithoutShift()
		return
	}
	c.judge()
	if o.Verdict == TooFew {
		c.more()
		switch {
		case math.Abs(o.Shift) > c.opt.Margin:
			o.Sentence += "; the shift seen lies outside it, and more devices would rather show that"
		case o.MoreText != "":
			o.Sentence += "; " + o.MoreText
		}
	}
	o.Sentence += c.benchWords() + c.offWords() + c.pairWords() + c.populationWords()
}

// judge finds the verdict of a shift that there is.
func (c *comparing) judge() {
	if math.IsNaN(c.opt.Margin) {
		c.decideByZero()
	} else {
		c.decideByMargin()
	}
}

// decideByZero is the verdict without a margin.
func (c *comparing) decideByZero() {
	o := &c.out
	interval := levelWords(o.Level) + " interval " + rangeWords(o.Low, o.High)
	if c.pairs != nil {
		c.decidePairsByZero(interval)
		return
	}
	if o.Low > 0 || o.High < 0 {
		o.Verdict = Differs
		o.Sentence = fmt.Sprintf("lot %s needs %s %s gate voltage than lot %s: shift %s, %s, %s",
			o.Candidate, millivolts(math.Abs(o.Shift)), c.higher(o.Shift), o.Reference, shiftWithin(o.Shift, o.Low, o.High), interval, pWords(o.P))
		return
	}
	o.Verdict = NoDifference
	o.Sentence = fmt.Sprintf("no difference seen between lot %s and lot %s: shift %s, %s; a shift of up to %s is not excluded",
		o.Candidate, o.Reference, shiftWithin(o.Shift, o.Low, o.High), interval, millivolts(o.NotExcluded))
}

// decidePairsByZero is the verdict without a margin on the same devices, read twice:
// nothing is said of lots.
func (c *comparing) decidePairsByZero(interval string) {
	o := &c.out
	if o.Low > 0 || o.High < 0 {
		o.Verdict = Differs
		o.Sentence = fmt.Sprintf("the same devices read %s %s in lot %s than in lot %s: shift %s, %s, %s",
			millivolts(math.Abs(o.Shift)), c.higher(o.Shift), o.Candidate, o.Reference, shiftWithin(o.Shift, o.Low, o.High), interval, pWords(o.P))
		return
	}
	o.Verdict = NoDifference
	o.Sentence = fmt.Sprintf("no difference seen between the readings of the same devices in lot %s and lot %s: shift %s, %s; a shift of up to %s is not excluded",
		o.Candidate, o.Reference, shiftWithin(o.Shift, o.Low, o.High), interval, millivolts(o.NotExcluded))
}

// benchWords says of the same devices where a shift that all share comes from.
func (c *comparing) benchWords() string {
	if o := &c.out; c.pairs == nil || !(o.Low > 0 || o.High < 0) {
		return ""
	}
	// The next step of that warning, the same parts measured with both, is what was done.
	c.out.Warnings = slices.DeleteFunc(c.out.Warnings, func(w fit.Warning) bool { return w.Code == fit.CodeCommonUnknown })
	if !math.IsNaN(c.out.Raw) {
		return "; what all of them share is the bench or the session rather than the parts"
	}
	return "; what all of them share is the bench, the temperature or the session rather than the parts"
}

// decideByMargin is the verdict with a margin.
func (c *comparing) decideByMargin() {
	o, m := &c.out, c.opt.Margin
	margin := "margin of " + millivolts(m)
	if o.MarginSet == After {
		margin += " (set after the first reading)"
	}
	interval := fmt.Sprintf("its %s interval, %s", levelWords(marginLevel), rangeWords(o.MarginLow, o.MarginHigh))
	switch {
	case o.MarginLow >= -m && o.MarginHigh <= m:
		o.Verdict = InsideMargin
		o.Sentence = fmt.Sprintf("the shift of %s lies inside the %s, and so does all of %s", shiftWithin(o.Shift, o.MarginLow, o.MarginHigh), margin, interval)
	case o.MarginLow > m || o.MarginHigh < -m:
		o.Verdict = OutsideMargin
		o.Sentence = fmt.Sprintf("the shift of %s lies outside the %s, and so does all of %s", shiftWithin(o.Shift, o.MarginLow, o.MarginHigh), margin, interval)
	default:
		o.Verdict = TooFew
		o.Sentence = fmt.Sprintf("too few to tell: the shift is %s, and %s, lies partly inside and partly outside the %s", shiftWithin(o.Shift, o.MarginLow, o.MarginHigh), interval, margin)
	}
}

// offWords says what was taken off the shift.
func (c *comparing) offWords() string {
	o := &c.out
	switch {
	case o.Common.Controls > 0:
		return fmt.Sprintf("; %s of control parts were taken off (%s), before that the shift was %s",
			shiftWords(o.Common.Offset), stand(o.Common.Controls, "part", "parts"), shiftWords(o.Raw))
	case !math.IsNaN(o.Raw):
		return fmt.Sprintf("; %s were taken off for the temperature (%.1f °C against %.1f °C at %s mV/K%s), before that the shift was %s",
			shiftWords(o.ForTemp), c.cand.lot.Temp, c.ref.lot.Temp, signed(c.opt.Tempco), c.tempUWords(), shiftWords(o.Raw))
	}
	return ""
}

// pairWords says what the pairs alone show where the interval holds more than them.
func (c *comparing) pairWords() string {
	if c.pairs == nil || !(c.out.Common.U > 0) {
		return ""
	}
	own := c.pairs.out.Own
	return fmt.Sprintf("; the %d pairs alone, without what the bench adds, say %s (%s)", c.pairs.out.Pairs, shiftWithin(own.Value, own.Low, own.High), rangeWords(own.Low, own.High))
}

// populationWords says where a lot is two.
func (c *comparing) populationWords() string {
	text := ""
	for _, v := range []*values{c.ref, c.cand} {
		if v.lot.Populations > 1 {
			text += fmt.Sprintf("; lot %s falls into two populations, and its centre stands for neither", v.lot.Name)
			c.warn(fit.CodeTwoPopulations, "lot "+v.lot.Name+": "+orWords(v.lot.Parted, "two populations"))
		}
	}
	return text
}

func orWords(text, other string) string {
	if text == "" {
		return other
	}
	return text
}

// moreWithoutShift says what would tell where there is no shift at all.
func (c *comparing) moreWithoutShift() {
	o := &c.out
	if c.ref.counts.WithValue < fewest || c.cand.counts.WithValue < fewest {
		o.More = fewest
		o.MoreText = fmt.Sprintf("%d devices with a value on either side give an interval; whether it is narrow enough is not known before", fewest)
		if c.ref.counts.Above > 0 || c.cand.counts.Above > 0 {
			o.More = 0
			o.MoreText = "more devices do not help where they never reach the current: compare at a smaller current, or sweep further"
		}
		return
	}
	switch {
	case c.pairs != nil && c.pairs.out.Pairs < fewest:
		o.MoreText = fmt.Sprintf("measure at least %d of the same devices in both lots, or compare without pairing", fewest)
	case c.ref.counts.Above > 0 || c.cand.counts.Above > 0:
		o.MoreText = "more devices do not help where they never reach the current: compare at a smaller current, or sweep further"
	default:
		o.MoreText = "a finer display or range would tell"
	}
}
