package report_test

import (
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/internal/invented"
)

func doubtful() report.Sheet {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	add := func(i int, code, text string) {
		r := &s.Devices[i].Result
		r.Warnings = append(r.Warnings, fit.Warning{Code: code, Text: text})
	}
	add(2, fit.CodeSweepsDisagree, "V_GS(th) of its sweeps differs by 60 mV")
	add(2, fit.CodeSweepsDisagree, "V_T of its sweeps differs by 70 mV")
	add(8, fit.CodeHeating, "Up and down sweep lie 12 mV apart.")
	add(8, fit.CodeOscillation, "5 points contradict a rising curve.")
	add(10, fit.CodeSweepsDisagree, "An excluded one.")
	return s
}

// Whoever reads a spread or a sorting sees which of its values are in doubt.
func TestSweepsThatDisagreeAreNamed(t *testing.T) {
	const want = "\nSweeps disagree: 2 of 20\n" +
		"  D03: V_GS(th) of its sweeps differs by 60 mV. (sweeps-disagree, and 1 more)\n" +
		"  D09: Up and down sweep lie 12 mV apart. (heating) 5 points contradict a rising curve. (oscillation)\n"
	s := doubtful()
	for _, l := range []layout{report.SpreadTable, report.SortTable} {
		require.Contains(t, show(t, l, s, report.Style{}), want)
	}
	none := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for _, l := range []layout{report.SpreadTable, report.SortTable} {
		require.NotContains(t, show(t, l, none, report.Style{}), "Sweeps disagree")
	}
}
