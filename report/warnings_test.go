package report_test

import (
	"fmt"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
)

// judged fills in the spread of a sheet as it is worked out.
func judged(s *report.Sheet) {
	var devs []lot.Device
	for _, d := range s.Devices {
		devs = append(devs, lot.Device{Name: d.Name, Result: d.Result})
	}
	s.Spread = lot.SpreadOf(devs, lot.SpreadOptions{SortedBy: s.SortedBy})
}

// A lot too small to judge itself says so once, for all quantities.
func TestTooFewIsSaidOnce(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 6, Points: 20, Clean: true})
	s.Codes = fit.Codes
	r := &s.Devices[2].Result
	r.GmIdle, r.GmMax, r.Beta = fit.None(), fit.None(), fit.None()
	judged(&s)
	require.Greater(t, len(s.Spread.Warnings), 1)
	require.Len(t, report.JoinWarnings(s.Spread.Warnings), 1)
	text := show(t, report.SpreadTable, s, report.Style{})
	require.Equal(t, 1, strings.Count(text, "(n-too-small)"), text)
	require.Equal(t, 1, strings.Count(text, "next: Measure more devices."))
	require.Regexp(t, regexp.MustCompile(`(?m)^Too few to judge one another by .+ and .+: 5 to 6 devices have a value, 8 are needed; no device is flagged for standing apart in them\. \(n-too-small\)$`), text)
}

func TestJoinWarnings(t *testing.T) {
	in := []fit.Warning{
		{Code: "a", Text: "V_GS(th): the readings step by 10 mV"},
		{Code: "b", Text: "something else"},
		{Code: "a", Text: "gain factor: the readings step by 10 mV"},
		{Code: "a", Text: "drain leakage: the readings step by 1 µA"},
		{Code: "b", Text: "something else"},
		{Code: "c", Text: "extrapolated threshold: the readings step by 10 mV"},
	}
	require.Equal(t, []fit.Warning{
		{Code: "a", Text: "V_GS(th) and gain factor: the readings step by 10 mV"},
		{Code: "b", Text: "something else"},
		{Code: "a", Text: "drain leakage: the readings step by 1 µA"},
		{Code: "c", Text: "extrapolated threshold: the readings step by 10 mV"},
	}, report.JoinWarnings(in))
	require.Empty(t, report.JoinWarnings(nil))
}

// Where a lot is two populations the groups are told once; a device of the
// smaller one says only that it is in it.
func TestGroupsAreToldOnce(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 24, Points: 20, Clean: true})
	for i := range 4 {
		r := &s.Devices[i*5].Result
		for _, k := range []fit.Key{fit.KeyVgsth, fit.KeyVgsIdle, fit.KeyVt} {
			r.At(k).Value -= 0.8
		}
		r.GmIdle.Value *= 0.5
	}
	judged(&s)
	require.NotNil(t, s.Spread.Split)
	groups, both := "", 0
	for _, v := range s.Spread.Devices {
		for _, r := range v.Reasons {
			if r.Code == fit.CodeTwoPopulations {
				_, groups, _ = strings.Cut(r.Text, "groups: ")
				both++
			}
		}
	}
	require.Equal(t, 4, both, "the lot's own sentences stay for programs")
	require.NotEmpty(t, groups)
	text := show(t, report.SpreadTable, s, report.Style{})
	require.NotContains(t, text, groups)
	require.Equal(t, 1, strings.Count(text, "Two populations by"))
	require.Regexp(t, fmt.Sprintf(`(?m)^  %s: In the smaller group with .* of 2\.\d+ V\. \(two-populations\)$`, s.Devices[5].Name), text)
	require.Equal(t, 4, strings.Count(text, "In the smaller group"))
}
