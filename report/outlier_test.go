package report_test

import (
	"bytes"
	"encoding/json"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
)

// withTypo is an invented lot with one threshold whose decimal mark slipped,
// as a spot list may have it; spread and bins as they are worked out.
func withTypo() report.Sheet {
	s := invented.Lot(invented.Options{Devices: 10, Points: 1, Spots: true, Clean: true, Seed: 2})
	s.Devices[3].Result.Vgsth.Value = 33.5
	var devs []lot.Device
	for _, d := range s.Devices {
		devs = append(devs, lot.Device{Name: d.Name, Result: d.Result})
	}
	s.Spread = lot.SpreadOf(devs, lot.SpreadOptions{SortedBy: fit.KeyVgsth})
	srt, err := lot.SortInto(devs, lot.SortOptions{By: fit.KeyVgsth, Width: 0.05})
	if err != nil {
		panic(err)
	}
	s.Sorting = &srt
	return s
}

func TestOneTypoLeavesTheDigits(t *testing.T) {
	s := withTypo()
	m := s.Spread.Summary[fit.KeyVgsth]
	require.Greater(t, m.SD, 9.0)
	require.Less(t, m.RobustSD, 0.2)
	text := show(t, report.SpreadTable, s, report.Style{})
	// n, above, then median and robust sd with the digits of the others.
	require.Regexp(t, `(?m)^V_GS\(th\) at 10 mA +V +10 +0 +3\.\d{2,3} +0\.0\d{2,3} +\d\.\d +3\.\d +9\.\d `, text)
	require.NotContains(t, text, " 0.0 ")
}

func TestScaleOfASummary(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		why  string
		m    lot.Summary
		want string
	}{
		{"one leaky device among good ones", lot.Summary{N: 20, Median: 2e-6, RobustSD: 5e-7, Mean: 0.015, Max: 0.3, SD: 0.06}, "µA"},
		{"a median within its spread", lot.Summary{N: 20, Median: 1e-9, RobustSD: 5e-6, Mean: 1e-6, Max: 1e-5, SD: 5e-6}, "µA"},
		{"no median", lot.Summary{N: 2, Median: nan, RobustSD: nan, Mean: 3e-3, Max: 4e-3, SD: nan}, "mA"},
		{"half of them nothing", lot.Summary{N: 5, Median: 0, RobustSD: 0, Mean: 3e-3, Max: 4e-3, SD: 1e-3}, "mA"},
	} {
		require.Equal(t, c.want, report.SummaryScale(fit.KeyIdss, c.m).Unit("A"), c.why)
	}
	require.InDelta(t, 0.25, report.SummaryDigits(lot.Summary{N: 4, SD: 0.5, RobustSD: 0}), 1e-12, "a robust sd of 0 has no digits")
	require.InDelta(t, 0.05, report.SummaryDigits(lot.Summary{N: 4, SD: 0.5, RobustSD: 0.1}), 1e-12)
	require.InDelta(t, 0.05, report.SummaryDigits(lot.Summary{N: 4, SD: 0.1, RobustSD: 0.5}), 1e-12)
	require.True(t, math.IsNaN(report.SummaryDigits(lot.Summary{N: 1, SD: nan, RobustSD: nan})))
}

func TestRunsOfEmptyBinsAreFolded(t *testing.T) {
	s := withTypo()
	require.Greater(t, len(s.Sorting.Bins), 600)
	text := show(t, report.SortTable, s, report.Style{})
	require.Less(t, strings.Count(text, "\n"), 50)
	require.Regexp(t, `(?m)^[A-Z]+ to [A-Z]+ +3\.\d+ +33\.500 +none$`, text)

	var b bytes.Buffer
	require.NoError(t, report.SortJSON(&b, s))
	var doc struct {
		Bins []struct{} `json:"bins"`
	}
	require.NoError(t, json.Unmarshal(b.Bytes(), &doc))
	require.Len(t, doc.Bins, len(s.Sorting.Bins), "programs get every bin")
}

func TestBinRows(t *testing.T) {
	one := []lot.Placed{{Name: "x"}}
	srt := &lot.Sorting{Bins: []lot.Bin{
		{Name: "A", Low: 0, High: 1}, {Name: "B", Low: 1, High: 2, Devices: one}, {Name: "C", Low: 2, High: 3},
		{Name: "D", Low: 3, High: 4, Devices: one}, {Name: "E", Low: 4, High: 5}, {Name: "F", Low: 5, High: 6}, {Name: "G", Low: 6, High: 7},
	}}
	var got []string
	for _, r := range report.BinRows(srt) {
		got = append(got, r.Name+" "+r.Count())
	}
	require.Equal(t, []string{"A 0", "B 1", "C 0", "D 1", "E to G none"}, got)
	last := report.BinRows(srt)[4]
	require.Equal(t, []float64{4, 7}, []float64{last.Low, last.High})
	require.Empty(t, report.BinRows(&lot.Sorting{}))
}
