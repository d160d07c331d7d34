package lot

import (
	"math"
	"strings"
	"testing"

	"gatesill/fit"
)

// Ranges to 2 and 20 V of a 20,000-count meter (0.05 % + 3 counts): at 2 V the
// statements are 1 mV + 0.3 mV and 1 mV + 3 mV, 5.3 mV together.
func TestRangeEdge(t *testing.T) {
	low := fit.Accuracy{Top: 2, Percent: 0.05, Counts: 3, Resolution: 1e-4}
	high := fit.Accuracy{Top: 20, Percent: 0.05, Counts: 3, Resolution: 1e-3}
	lotOf := func(volts ...float64) (devs []Device) {
		for k, v := range volts {
			d := Device{Name: string(rune('A' + k)), Result: fit.NewResult()}
			d.Result.State = fit.Measured
			d.Result.VgsIdle = fit.Quantity{Value: v, U: 1e-3, N: 3}
			d.Result.ReadIdle = fit.ReadOn{Gate: low, Meter: "ammeter", PerCurrent: 0.16,
				Current: fit.Accuracy{Top: 0.2, Percent: 0.2, Counts: 0, Resolution: 1e-5}}
			if v > 2 {
				d.Result.ReadIdle.Gate = high
			}
			devs = append(devs, d)
		}
		return devs
	}
	said := func(ws []fit.Warning) (texts []string) {
		for _, w := range ws {
			if w.Code == fit.CodeRangeEdge {
				texts = append(texts, w.Text)
			}
		}
		return texts
	}
	devs := lotOf(1.95, 1.99, 2.03)
	for name, ws := range map[string][]fit.Warning{
		"spread": SpreadOf(devs, SpreadOptions{SortedBy: fit.KeyVgsIdle}).Warnings,
		"sort":   must(SortInto(devs, SortOptions{By: fit.KeyVgsIdle, Width: 0.05})).Warnings,
	} {
		got := said(ws)
		if len(got) != 1 || !strings.Contains(got[0], "2 devices were read on the gate meter's range to 2 V, 1 on a higher one") || !strings.Contains(got[0], "5.3 mV") {
			t.Errorf("%s: %q", name, got)
		}
	}
	// All on one side, by another quantity, without statements, or the odd one not
	// counting: nothing to say.
	if got := said(rangeEdges(lotOf(1.95, 1.99), fit.KeyVgsIdle)); got != nil {
		t.Errorf("one range: %q", got)
	}
	if got := said(rangeEdges(lotOf(2.01, 2.9), fit.KeyVgsIdle)); got != nil {
		t.Errorf("the other range: %q", got)
	}
	if got := said(rangeEdges(devs, fit.KeyGmIdle)); got != nil {
		t.Errorf("gains: %q", got)
	}
	devs[0].Result.ReadIdle.Gate = fit.Accuracy{Top: math.Inf(1), Resolution: 1e-4}
	if got := said(rangeEdges(devs, fit.KeyVgsIdle)); got != nil {
		t.Errorf("no statement: %q", got)
	}
	devs = lotOf(1.95, 2.03)
	devs[1].Control = true
	if got := said(rangeEdges(devs, fit.KeyVgsIdle)); got != nil {
		t.Errorf("control part: %q", got)
	}
	// The current's meter: 0.2 % twice is 0.4 % of current, times 0.16 V 0.64 mV, told as 0.6.
	devs = lotOf(1.95, 1.96)
	devs[1].Result.ReadIdle.Current.Top = 2
	if got := said(rangeEdges(devs, fit.KeyVgsIdle)); len(got) != 1 || !strings.Contains(got[0], "0.4 % of current, 0.6 mV") || !strings.Contains(got[0], "ammeter's range to 0.2 A") {
		t.Errorf("current: %q", got)
	}
}

func must(s Sorting, err error) Sorting {
	if err != nil {
		panic(err)
	}
	return s
}
