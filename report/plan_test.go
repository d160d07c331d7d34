package report_test

import (
	"bytes"
	"encoding/json"
	"math"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"gatesill/fit/plan"
	"gatesill/report"
)

// plans are one answer of every kind, with and without a number of parts.
func plans(t *testing.T) []plan.Answer {
	t.Helper()
	none := math.NaN()
	var list []plan.Answer
	add := func(a plan.Answer, err error) {
		t.Helper()
		require.NoError(t, err)
		list = append(list, a)
	}
	lot := plan.LotOf("a lot\x1b[31m", []float64{3, 3.01, 2.98, 3.05, 2.9, 2.96, 3.02, 3.07, 2.99})
	for _, n := range []int{0, 9} {
		f, err := plan.ToFind(plan.FindRequest{Bad: none, Confidence: 0.95, N: n})
		add(f, err)
		s, err := plan.ToSee(plan.ShiftRequest{Shift: 0.05, SD: lot.SD, Risk: 0.2, Confidence: 0.95, N: n, Lot: lot})
		add(s, err)
		m, err := plan.ToShowSame(plan.SameRequest{Margin: 0.05, SD: 0.08, Risk: 0.2, N: n})
		add(m, err)
		c, err := plan.ToCover(plan.CoverRequest{Share: 0.9, Confidence: 0.9, N: n})
		add(c, err)
		k, err := plan.ToBeCapable(plan.CapabilityRequest{Target: 1.33, Expected: 1.67, Confidence: 0.95, N: n, Low: none, High: none})
		add(k, err)
		a, err := plan.ToAccept(plan.AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none, N: n, Low: none, High: none})
		add(a, err)
	}
	c, err := plan.ToCover(plan.CoverRequest{Share: 0.9, Confidence: 0.9, N: lot.N, Lot: lot})
	add(c, err)
	k, err := plan.ToBeCapable(plan.CapabilityRequest{Target: 1.33, Expected: none, Confidence: 0.95, N: lot.N, Lot: lot, Low: 2, High: 4})
	add(k, err)
	a, err := plan.ToAccept(plan.AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none, Lot: lot, Low: 2, High: none})
	add(a, err)
	return list
}

// Every answer fits the terminal, says no NaN, and lets no control character of a
// name through; its JSON is one object with schema and kind.
func TestPlanLayouts(t *testing.T) {
	for _, a := range plans(t) {
		for _, width := range []int{0, 80, 40} {
			var b bytes.Buffer
			require.NoError(t, report.PlanTable(&b, a, report.Style{Width: width}))
			for _, line := range strings.Split(b.String(), "\n") {
				if width >= 80 && utf8.RuneCountInString(line) > width {
					t.Errorf("%s: %d columns of %d: %s", a.Kind(), utf8.RuneCountInString(line), width, line)
				}
			}
			require.NotContains(t, b.String(), "NaN", a.Kind())
			require.NotContains(t, b.String(), "\x1b", a.Kind())
			require.Greater(t, b.Len(), 60, a.Kind())
		}
		var b bytes.Buffer
		require.NoError(t, report.PlanJSON(&b, a))
		var doc map[string]any
		require.NoError(t, json.Unmarshal(b.Bytes(), &doc), a.Kind())
		require.EqualValues(t, 1, doc["schema"])
		require.Equal(t, a.Kind(), doc["plan"])
	}
}

// A chance is never rounded to certainty, nor to none.
func TestChance(t *testing.T) {
	for x, want := range map[float64]string{
		0: "0 %", 1: "100 %", 0.412834: "41 %", 0.0035: "0.35 %", 0.097: "9.7 %", 0.0999: "10 %", 0.9949: "99.5 %", 0.99999: "more than 99.9 %", 0.0001: "less than 0.1 %", 0.994: "99 %",
	} {
		require.Equal(t, want, report.Chance(x), x)
	}
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.Float64Range(1e-300, 1-1e-15).Draw(t, "x")
		if got := report.Chance(x); got == "0 %" || got == "100 %" {
			t.Fatalf("%v is %s", x, got)
		}
	})
}

// The text curve falls from the upper left to the lower right, one mark a column.
func TestPlanCurve(t *testing.T) {
	none := math.NaN()
	a, err := plan.ToAccept(plan.AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none, Low: none, High: none})
	require.NoError(t, err)
	var b bytes.Buffer
	require.NoError(t, report.PlanTable(&b, a, report.Style{Width: 60}))
	last, rows := 0, 0
	for _, line := range strings.Split(b.String(), "\n") {
		_, marks, found := strings.Cut(line, "|")
		if !found {
			continue
		}
		rows++
		first := strings.IndexAny(marks, "*o")
		if first >= 0 {
			require.GreaterOrEqual(t, first, last, line)
			last = first
		}
	}
	require.Equal(t, 11, rows)
	require.Equal(t, 2, strings.Count(b.String()[strings.Index(b.String(), "accepted\n"):strings.Index(b.String(), "+--")], "o"), b.String())
}

// A standard deviation of two devices is doubted before anything else is built on it;
// that few parts cannot show a margin comes after what was asked.
func TestPlanCautions(t *testing.T) {
	lines := func(a plan.Answer, err error) []string {
		t.Helper()
		require.NoError(t, err)
		var b bytes.Buffer
		require.NoError(t, report.PlanTable(&b, a, report.Style{}))
		return strings.Split(b.String(), "\n")
	}
	two := plan.LotOf("two", []float64{3, 3.06})
	text := lines(plan.ToSee(plan.ShiftRequest{Shift: 0.05, SD: two.SD, Risk: 0.2, Confidence: 0.95, Lot: two}))
	require.Contains(t, text[0], "measure ")
	require.Contains(t, strings.Join(text[1:3], "\n"), "Caution: from only 2 devices the sd is known badly.")
	text = lines(plan.ToShowSame(plan.SameRequest{Margin: 0.05, SD: 0.08, Risk: 0.2}))
	require.Equal(t, "To show that two lots are alike within ±50 mV, measure 52 of either lot.", text[0])
	require.Contains(t, text, "As few as 6 of either lot would show it only 0.56 % of the time.")
	text = lines(plan.ToShowSame(plan.SameRequest{Margin: 0.05, SD: 0.08, Risk: 0.2, N: 6}))
	require.Contains(t, text[0], "6 of either lot cannot show")
}
