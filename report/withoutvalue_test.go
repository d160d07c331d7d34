package report_test

import (
	"io"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/internal/invented"
)

// Devices with the same reason share one sentence, and a warning that repeats
// the state is not said a second time.
func TestSameReasonOnce(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for _, i := range []int{8, 12} { // D09, D13
		r := fit.NewResult()
		r.State, r.Why = fit.Open, s.Devices[6].Result.Why
		s.Devices[i].Result = r
	}
	for i := range s.Devices {
		r := &s.Devices[i].Result
		switch r.State {
		case fit.Open:
			r.Warnings = []fit.Warning{{Code: fit.CodeOpen, Text: r.Why}}
		case fit.Above:
			r.Warnings = []fit.Warning{{Code: fit.CodeAboveRange, Text: r.Why}, {Code: fit.CodeFewPoints, Text: "Two points."}}
		}
	}
	const line = "  D07, D09, D13 (open): No current above the noise of the meter at any gate voltage.\n"
	text := show(t, report.FitTable, s, report.Style{})
	require.Equal(t, 1, strings.Count(text, line))
	require.Equal(t, 1, strings.Count(text, "No current above the noise"))
	require.NotContains(t, text, "above-range")
	require.Regexp(t, `few-points \(D05, D08\)`, text, "a warning that is not the state stays")
	require.Contains(t, show(t, report.SpreadTable, s, report.Style{}), line)
	require.Contains(t, show(t, report.SortTable, s, report.Style{}), "In no bin: ")

	history := show(t, func(w io.Writer, s report.Sheet, st report.Style) error {
		return report.DeviceHistory(w, report.DeviceFile{Device: s.Devices[6]}, s, st)
	}, s, report.Style{})
	require.Equal(t, 1, strings.Count(history, "No current above the noise"))
}

func TestInNoBinForTheSameReason(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for i := range s.Sorting.Unsorted[:3] {
		s.Sorting.Unsorted[i].Why = "outside the edges given"
	}
	text := show(t, report.SortTable, s, report.Style{})
	require.Contains(t, text, "In no bin: 6\n  D05, D06, D07: Outside the edges given.\n")
}
