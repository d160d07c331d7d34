package page_test

import (
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
	"gatesill/store/record"
)

// specified is an invented lot with limits that cut through it.
func specified() report.Sheet {
	s := invented.Lot(invented.Options{Devices: 30, Points: 30, Seed: 6})
	devs := make([]lot.Device, len(s.Devices))
	for i := range devs {
		d := &s.Devices[i]
		d.Result.Vgsth.UAbsolute = 0.01
		devs[i] = lot.Device{Name: d.Name, Control: d.Role == record.Control, Result: d.Result}
	}
	at := s.Spread.Summary[fit.KeyVgsth].Median
	s.Spec = lot.SpecOf(devs, lot.SpecOptions{Min: math.NaN(), Max: at, Guard: lot.Guard{Value: 2, Unit: "u"}, GuardSet: lot.RuleBefore})
	return s
}

// A part with limits has a section of its own, and every device its verdict.
func TestSpecification(t *testing.T) {
	s := specified()
	page := write(t, s)
	require.Contains(t, page, `<section id="specification"`)
	require.Contains(t, page, `href="#specification"`)
	text := words(page)
	require.Contains(t, text, "guard band 2 absolute standard uncertainties (k = 1) of the device")
	require.Contains(t, text, "set before the first reading")
	require.Contains(t, text, "JCGM 106:2012")
	require.NotContains(t, text, "sent back", "no rule is stored")
	table := page[strings.Index(page, `id="device-table"`):]
	table = table[:strings.Index(table, "</table>")]
	for _, d := range lot.Decisions {
		require.Positive(t, s.Spec.Count[d], "the limits cut through the lot")
		require.Contains(t, table, string(d))
	}
	// Measured otherwise than the data sheet says: the reason, no verdicts.
	for i := range s.Spec.Devices {
		s.Spec.Devices[i] = lot.Judgement{Name: s.Spec.Devices[i].Name, Why: "measured otherwise"}
	}
	s.Spec.Why, s.Spec.Count = "measured otherwise", map[lot.Decision]int{}
	page = write(t, s)
	require.Contains(t, words(page), "Measured otherwise.")
	require.NotContains(t, page, "conditional")
	s.Spec = nil
	require.NotContains(t, write(t, s), `id="specification"`)
}

// Names and texts of a specification cannot break out of the page.
func TestHostileSpecification(t *testing.T) {
	s := specified()
	s.Spec.Devices[0].Why, s.Spec.Devices[0].Decision = "<script>alert(1)</script>", lot.Undecided
	s.Spread.Split = &lot.Split{By: fit.KeyVgsth, Text: "two", Origins: []lot.Origin{{Of: "tube", Groups: []lot.OriginGroup{{Name: "<img src=x>", Low: 3}, {Name: "T", High: 4}}}}}
	page := write(t, s)
	require.NotContains(t, page, "<script>alert")
	require.NotContains(t, page, "<img src=x>")
}
