package lot

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// leakRule is what drain leakage is too much.
//
// Without a limit given there are two rules, both our own judgement, no source:
// a tenth of the test current, because then the current at the threshold is not
// the channel's alone; and a hundred times the median of the lot, as long as
// that is more than a hundredth of the test current (of 1 mA where it is not
// known) and more than the meter's step can make of nothing.
type leakRule struct {
	limit   float64 // A
	limitAs string  // what the limit is
	lot     float64 // A, by comparison with the lot; +Inf: none
	median  float64 // A
}

func leakRuleOf(c *column, opt *SpreadOptions) leakRule {
	r := leakRule{limit: math.Inf(1), lot: math.Inf(1)}
	if opt.LeakageLimit > 0 {
		r.limit, r.limitAs = opt.LeakageLimit, "the limit of"
		return r
	}
	test := 1e-3
	if opt.TestCurrent > 0 && !math.IsInf(opt.TestCurrent, 0) {
		test = opt.TestCurrent
		r.limit, r.limitAs = test/10, "a tenth of the test current of "+engineering(test, "A")+", that is"
	}
	if len(c.sorted) >= fewest {
		var size []float64
		for i, x := range c.x {
			if !math.IsNaN(x) {
				size = append(size, math.Abs(c.v[i]))
			}
		}
		r.median = stats.Median(size)
		r.lot = max(100*r.median, test/100, 3*c.step)
	}
	return r
}

// leaks gives the sentence for a device that leaks too much, "" for others.
func (r *leakRule) leaks(res *fit.Result) string {
	size := math.Abs(res.Idss.Value)
	if math.IsNaN(size) || math.IsInf(size, 0) {
		return warned(res, fit.CodeDrainLeakage)
	}
	sure := size
	if u := res.Idss.U; u > 0 {
		sure -= 2 * u
	}
	if !(sure > r.limit || sure > r.lot) {
		return warned(res, fit.CodeDrainLeakage)
	}
	is := fmt.Sprintf("drain leakage is %s with the gate off", engineering(size, "A"))
	switch {
	case sure > r.limit:
		return fmt.Sprintf("%s, more than %s %s", is, r.limitAs, engineering(r.limit, "A"))
	case r.median > 0:
		return fmt.Sprintf("%s, %s times the lot's median of %s", is, short(size/r.median), engineering(r.median, "A"))
	}
	return is + ", where half of the lot shows none"
}

// warned is the text of a fit's own warning of that code, "" where there is none.
func warned(res *fit.Result, code string) string {
	for _, w := range res.Warnings {
		if w.Code == code {
			if w.Text != "" {
				return w.Text
			}
			return code
		}
	}
	return ""
}

// stateReasons are the flags that come from the state of a device.
var stateReasons = map[fit.State]Reason{
	fit.Open:          {fit.CodeOpen, "no drain current flows at any gate voltage of the sweep"},
	fit.Shorted:       {fit.CodeShorted, "drain current flows whatever the gate voltage"},
	fit.WrongWayRound: {fit.CodeWrongWayRound, "the device conducts like its body diode: drain and source look exchanged"},
	fit.Above:         {fit.CodeAboveRange, "the device never reaches the current within the sweep"},
}

// physical gives the flags that a device earns by itself, whatever its lot.
func physical(d *Device, leak *leakRule, opt *SpreadOptions) []Reason {
	res := &d.Result
	var out []Reason
	if r, ok := stateReasons[res.State]; ok {
		if res.Why != "" {
			r.Text = res.Why
		}
		out = append(out, r)
	} else if text := warned(res, fit.CodeAboveRange); text != "" {
		out = append(out, Reason{fit.CodeAboveRange, text})
	}
	if text := leak.leaks(res); text != "" {
		out = append(out, Reason{fit.CodeDrainLeakage, text})
	}
	if res.State == fit.Measured || res.State == fit.Above {
		if text := outsideSheet(res.Vgsth.Value, opt); text != "" {
			out = append(out, Reason{fit.CodeOutsideLimits, text})
		}
	}
	return out
}

// outsideSheet compares a threshold with the limits of the data sheet, p-channel
// parts by magnitude; "" inside. A microvolt of slack is left, so that the limit
// itself is inside.
func outsideSheet(v float64, opt *SpreadOptions) string {
	low, high := opt.VgsthMin, opt.VgsthMax
	if math.IsNaN(v) || math.IsInf(v, 0) || low == 0 && high == 0 {
		return ""
	}
	x, least, most := v, low, high
	if opt.PChannel {
		x, least, most = math.Abs(v), math.Abs(low), math.Abs(high)
	}
	if least > most {
		least, most, low, high = most, least, high, low
	}
	const slack = 1e-6
	what := fmt.Sprintf("V_GS(th) is %s", volts(v))
	switch {
	case x < least-slack && opt.PChannel:
		return fmt.Sprintf("%s, short of the data-sheet limit of %s", what, volts(low))
	case x < least-slack:
		return fmt.Sprintf("%s, below the data-sheet limit of %s", what, volts(low))
	case x > most+slack && opt.PChannel:
		return fmt.Sprintf("%s, beyond the data-sheet limit of %s", what, volts(high))
	case x > most+slack:
		return fmt.Sprintf("%s, above the data-sheet limit of %s", what, volts(high))
	}
	return ""
}
