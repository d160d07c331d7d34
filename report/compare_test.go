package report_test

import (
	"bytes"
	"encoding/json"
	"io"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/report/internal/invented"
)

// comparedLots is a reference lot and n lots held against it, numbers invented for
// their layout: nothing was computed.
func comparedLots(n int) report.ComparedLots {
	ref := invented.Lot(invented.Options{Devices: 30, Points: 20, Clean: true, Seed: 1})
	ref.Lot.Name = "2431"
	c := report.ComparedLots{Reference: &ref}
	for i := range n {
		s := invented.Lot(invented.Options{Devices: 30, Points: 20, Clean: true, Seed: uint64(2 + i)})
		s.Lot.Name = []string{"2612", "2613", "2620"}[i]
		s.Compared = &report.Compared{
			Reference:  &ref,
			MarginFrom: "50 mV, stored with lot 2431 on 2026-04-30, before the first reading of lot 2612 on 2026-05-04",
			Comparison: compare.Comparison{
				Reference: "2431", Candidate: s.Lot.Name, Quantity: fit.KeyVgsIdle, Test: "Yuen's test on trimmed means (20 %)",
				Shift: 0.1452, Low: 0.1108, High: 0.1797, Level: 0.95, DF: 34.2, P: 1.5e-11, MarginLow: 0.1165, MarginHigh: 0.1740, Margin: 0.05, MarginSet: compare.Before,
				Verdict: compare.OutsideMargin, Sentence: "the shift of +145 mV lies outside the margin of 50 mV, as does its whole 90 % interval",
				NotExcluded: 0.1797, Raw: 0.1322, Spread: compare.Interval{Value: 1.146, Low: 0.79, High: 1.66}, SpreadTest: "Bonett's interval",
				Secondary: []compare.Secondary{{Test: "Welch's t", Shift: compare.Interval{Value: 0.145, Low: 0.111, High: 0.180}, Statistic: 8.414, P: 1.5e-11, PAdjusted: 6e-11}, {Test: "rank sum", Shift: compare.Interval{Value: 0.141, Low: math.NaN(), High: math.NaN()}, Statistic: 812, P: 3e-10, PAdjusted: 9e-10}, {Test: "spread", Shift: compare.Interval{Value: math.NaN(), Low: math.NaN(), High: math.NaN()}, Statistic: math.NaN(), P: 0.47, PAdjusted: 0.47}},
				Counts:    [2]compare.Counts{{N: 30, WithValue: 30}, {N: 31, WithValue: 29, Above: 1, Flagged: 2, Aside: 1, Without: 1, Control: 2}},
				Centre:    [2]float64{3.0427, 3.1879}, SD: [2]float64{0.0620, 0.0710},
				Common: compare.Common{U: 0.0042, Basis: "sessions of one bench", Controls: 2, Offset: 0.013, OffsetU: 0.002},
				Paired: &compare.Paired{Pairs: 12, Why: "the serials stand in both lots and their values go together (r = 0.98)", OnlyRef: []string{"D1", "D2"}, SD: 0.0015},
				Curves: &compare.Band{Level: 0.95, Changes: true, Differs: true, Text: "the lots differ from 1 mA to 500 mA, by 130 to 170 mV"},
				Gain:   &compare.Gain{Key: fit.KeyBeta, Percent: compare.Interval{Value: -3.1, Low: -7.2, High: 1.2}, P: 0.16, N: [2]int{30, 29}, Adjusted: true},
				Options: []compare.Option{
					{Name: "re-adjust", Text: "the gate bias of 3.042 V gives 90 mA instead of 250 mA; set anew, 3.188 V gives 250 mA"},
					{Name: "send back", Text: "0 of 29 lie outside 2 to 4 V", Rule: "your rule is to send back what is outside the margin: it is met"},
				},
				Warnings: []fit.Warning{{Code: fit.CodeNoCircuit, Text: "the circuit is given for neither lot"}},
			},
		}
		for j := range 9 {
			x := 0.13 + 0.005*float64(j)
			s.Compared.Curves.Points = append(s.Compared.Curves.Points, compare.BandPoint{I: fit.LevelCurrents[3+j], Shift: x, Low: x - 0.05, High: x + 0.05, Reference: 30, Candidate: 29})
		}
		c.Candidates = append(c.Candidates, s)
	}
	if n > 1 {
		c.Trend = &compare.Trend{By: fit.KeyVgsIdle, Centre: 3.1, Low: 2.93, High: 3.28, Provisional: true, Text: []string{"too few lots to see a trend"}}
		for i, name := range []string{"2431", "2612", "2613"} {
			c.Trend.Lots = append(c.Trend.Lots, compare.TrendLot{Name: name, At: "2026-05-04T10:00:00.000Z", DateCode: name, N: 30, Centre: 3.04 + 0.1*float64(i), U: 0.011, SD: 0.061, Outside: i == 2})
		}
		c.Trend.Pairs = []compare.PairOfLots{{A: "2431", B: "2612", Shift: 0.145, Low: 0.1, High: 0.19, P: 1e-11, PAdjusted: 3e-11}, {A: "2431", B: "2613", Shift: 0.002, Low: -0.02, High: 0.024, P: 0.8, PAdjusted: 0.8}}
	}
	return c
}

func compareLayout(n int) layout {
	return func(w io.Writer, s report.Sheet, style report.Style) error {
		c := comparedLots(n)
		if strings.HasPrefix(s.Lot.Name, "\x1b") {
			hostile(&c, s.Lot.Name)
		}
		return report.CompareTable(w, c, style)
	}
}

// hostile puts a text into every place that takes one.
func hostile(c *report.ComparedLots, bad string) {
	c.Reference.Lot.Name, c.Reference.TestBasis = bad, bad
	for i := range c.Candidates {
		s := &c.Candidates[i]
		q := s.Compared
		s.Lot.Name, q.MarginFrom, q.Reference.Lot.Name, q.Candidate, q.Test, q.Sentence, q.MoreText, q.SpreadTest, q.Beside = bad, bad, bad, bad, bad, bad, bad, bad, bad
		q.Secondary[0].Test, q.Common.Basis, q.Paired.Why, q.Paired.OnlyRef, q.Curves.Text, q.Gain.Text = bad, bad, bad, []string{bad}, bad, bad
		q.Options[0] = compare.Option{Name: bad, Text: bad, Rule: bad}
		q.Warnings = []fit.Warning{{Code: bad, Text: bad}}
	}
	if t := c.Trend; t != nil {
		t.Lots[0].Name, t.Lots[0].At, t.Lots[0].DateCode, t.Text, t.Pairs[0].A, t.Pairs[0].B = bad, bad, bad, []string{bad}, bad, bad
	}
}

func init() { layouts["compare"], layouts["comparemany"] = compareLayout(1), compareLayout(2) }

// A comparison in JSON has the keys that scripts are promised, and null for what
// could not be had.
func TestCompareJSONKeys(t *testing.T) {
	c := comparedLots(1)
	q := &c.Candidates[0].Compared.Comparison
	q.NotExcluded, q.Margin, q.MarginLow, q.MarginHigh, q.MarginSet, q.Paired, q.Curves, q.Gain = math.NaN(), math.NaN(), math.NaN(), math.NaN(), compare.None, nil, nil, nil
	var b bytes.Buffer
	require.NoError(t, report.CompareJSON(&b, c))
	var doc map[string]any
	require.NoError(t, json.Unmarshal(b.Bytes(), &doc))
	for _, k := range strings.Fields(`schema reference candidate quantity test shift_V ci_low_V ci_high_V level margin_ci_low_V margin_ci_high_V margin_level
		verdict margin_V margin_set not_excluded_V more_parts_needed spread_ratio secondary counts options curves gain paired common_error raw_shift_V warnings`) {
		require.Contains(t, doc, k)
	}
	for _, k := range strings.Fields("margin_ci_low_V margin_ci_high_V margin_V not_excluded_V more_parts_needed paired curves gain") {
		require.Nil(t, doc[k], k)
	}
	require.Equal(t, "none", doc["margin_set"])
	require.Equal(t, 0.9, doc["margin_level"])
	counts := doc["counts"].(map[string]any)["candidate"].(map[string]any)
	require.Equal(t, map[string]any{"n": 31., "with_value": 29., "above": 1., "flagged": 2., "set_aside": 1., "without_value": 1., "control": 2.}, counts)

	b.Reset()
	require.NoError(t, report.CompareJSON(&b, comparedLots(2)))
	doc = nil
	require.NoError(t, json.Unmarshal(b.Bytes(), &doc))
	require.Len(t, doc["comparisons"], 2)
	require.Equal(t, "2612", doc["comparisons"].([]any)[0].(map[string]any)["candidate"])
	require.Contains(t, doc, "trend")
}

// A shift is written with the digits of its interval, one prefix for all three.
func TestShiftWords(t *testing.T) {
	check := func(v, l, h float64, want string) {
		t.Helper()
		require.Equal(t, want, report.ShiftWords(v, l, h, "V"))
	}
	check(0.1452, 0.1108, 0.1797, "+145 mV (+111 to +180 mV)")
	check(-0.0002, -0.0011, 0.0007, "-0.20 mV (-1.10 to +0.70 mV)")
	check(0.0001, -0.04, 0.04, "0 mV (-40 to +40 mV)")
	check(1.234, 1.1, 1.36, "+1.234 V (+1.100 to +1.360 V)")
	check(math.NaN(), math.NaN(), math.NaN(), "n/a")
	require.Equal(t, "p < 1e-300", report.PWords(0))
	require.Equal(t, "p = 1.0", report.PWords(0.9999))
	require.Equal(t, "p = 9.9e-04", report.PWords(0.00099))
	require.Equal(t, "p = 0.034", report.PWords(0.0342))
	check(0.145, math.NaN(), math.NaN(), "+145 mV")
}

// What says nothing is left out: a band that is parallel, a rule that is not stored, an
// error that a warning names. What counts stands with the verdict.
func TestCompareTableSaysNoEmptyThing(t *testing.T) {
	write := func(change func(c *report.Compared)) string {
		cl := comparedLots(1)
		s := &cl.Candidates[0]
		c := *s.Compared
		change(&c)
		s.Compared = &c
		cl.Candidates, cl.Trend = cl.Candidates[:1], nil
		var b strings.Builder
		if err := report.CompareTable(&b, cl, report.Style{}); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	all := write(func(c *report.Compared) { c.Beside = "beside it nothing is seen" })
	for _, want := range []string{"band of all", "send back:", "common error", "Beside it nothing is seen."} {
		if !strings.Contains(all, want) {
			t.Errorf("%q is not in %s", want, all)
		}
	}
	less := write(func(c *report.Compared) {
		band := *c.Curves
		band.Changes = false
		c.Curves, c.Options, c.Common = &band, []compare.Option{{Name: compare.SendBack, Text: "no stored rule asks for it"}}, compare.Common{U: math.NaN(), OffsetU: math.NaN()}
		c.Warnings = []fit.Warning{{Code: fit.CodeCommonUnknown, Text: "not known"}}
	})
	for _, not := range []string{"band of all", "send back:", "common error "} {
		if strings.Contains(less, not) {
			t.Errorf("%q is in %s", not, less)
		}
	}
}
