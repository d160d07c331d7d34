package report_test

import (
	"bytes"
	"gatesill/fit/plan"
	"io"
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

// specified is an invented lot held against limits.
func specified(o lot.SpecOptions) report.Sheet {
	s := invented.Lot(invented.Options{Devices: 30, Points: 30, Seed: 4})
	s.Part.TestVDS = record.Known(10)
	devs := make([]lot.Device, len(s.Devices))
	for i := range devs {
		devs[i] = lot.Device{Name: s.Devices[i].Name, Control: s.Devices[i].Role == record.Control, Result: s.Devices[i].Result}
	}
	s.Spec = lot.SpecOf(devs, o)
	return s
}

func fieldsOf(s report.Sheet) string {
	var b strings.Builder
	for _, f := range s.SpecFields() {
		b.WriteString(f.Label + ": " + f.Value + "\n")
	}
	return b.String()
}

func TestSpecFields(t *testing.T) {
	none := math.NaN()
	check := func(o lot.SpecOptions, want ...string) string {
		t.Helper()
		text := fieldsOf(specified(o))
		for _, w := range want {
			require.Contains(t, text, w)
		}
		return text
	}
	text := check(lot.SpecOptions{Min: 2, Max: 4, GuardSet: lot.RuleNone},
		"limits: V_GS(th) 2 V to 4 V at ", ", V_DS = 10 V\n", "rule: none set beforehand: simple acceptance", "Ppk: ")
	require.NotContains(t, text, "send back")
	require.NotContains(t, text, "conditional")
	check(lot.SpecOptions{Min: none, Max: 4, Guard: lot.Guard{Value: 0.02, Unit: "V"}, GuardSet: lot.RuleAfter},
		"limits: V_GS(th) up to 4 V", "rule: guard band 20 mV, set after the first reading", "0 conditional fail")
	check(lot.SpecOptions{Min: 2, Max: none, Guard: lot.Guard{Unit: "V"}, GuardSet: lot.RuleBefore},
		"limits: V_GS(th) from 2 V", "rule: guard band 0: simple acceptance", "set before the first reading")
	check(lot.SpecOptions{Min: 2, Max: 2.5, SendBack: true, SendBackSet: lot.RuleBefore, GuardSet: lot.RuleNone},
		"fail: ", "broken by ", "; by it the lot is to be sent back")
	check(lot.SpecOptions{Min: 2, Max: 4, Populations: 2, GuardSet: lot.RuleNone},
		"Ppk: declined, because the lot is two populations", "tolerance interval: declined, because the lot is two populations")
	s := invented.Lot(invented.Options{Devices: 5, Points: 30, Seed: 4})
	require.Nil(t, s.SpecFields())
	require.Empty(t, s.GuardRule())
}

// Some parts never conduct: what is said holds for the others.
func TestSpecOfConducting(t *testing.T) {
	s := specified(lot.SpecOptions{Min: 2, Max: 4, GuardSet: lot.RuleNone})
	var devs []lot.Device
	for i := range 30 {
		d := lot.Device{Name: s.Devices[i].Name, Result: fit.NewResult()}
		d.Result.State = fit.Measured
		d.Result.Vgsth.Value = 3 + 0.01*float64(i%10) - 0.005*float64(i%7)
		devs = append(devs, d)
		s.Devices[i].Result, s.Devices[i].Role = d.Result, record.Sample
	}
	devs[3].Result.State, devs[3].Result.Vgsth = fit.Open, fit.None()
	s.Devices = s.Devices[:30]
	s.Devices[3].Result = devs[3].Result
	s.Spec = lot.SpecOf(devs, lot.SpecOptions{Min: 2, Max: 4, GuardSet: lot.RuleNone})
	text := fieldsOf(s)
	require.Contains(t, text, "95 % of the parts that conduct lie from")
	require.Contains(t, text, "no verdict: "+s.Devices[3].Name+": has no V_GS(th)")
	require.Contains(t, text, "the parts that conduct only")
}

func TestConformWords(t *testing.T) {
	for p, want := range map[float64]string{
		math.NaN(): report.NotAvailable, 1: "above 99.9 %", 0.9996: "above 99.9 %", 0.9973: "99.7 %", 0.874: "87 %", 0.0123: "1.2 %", 0.0004: "below 0.1 %", 0: "below 0.1 %",
	} {
		require.Equal(t, want, report.ConformWords(p))
	}
}

// The keys that scripts get.
func TestKeysOfSpecification(t *testing.T) {
	s := specified(lot.SpecOptions{Min: 2, Max: 4, Guard: lot.Guard{Value: 0.02, Unit: "V"}, GuardSet: lot.RuleBefore, SendBack: true, SendBackSet: lot.RuleBefore})
	s.Spread.Split = &lot.Split{By: fit.KeyVgsth, Score: 30, Bar: 20, Low: []string{"a"}, High: []string{"b"},
		Origins: []lot.Origin{{Of: "tube", P: 0.5, Groups: []lot.OriginGroup{{Name: "T1", Low: 1, High: 1}}}}}
	shape := shapeOf(t, func(w io.Writer) error { return report.SpreadJSON(w, s) })
	for _, want := range []string{
		"split {by text, gap_low num, gap_high num, score num, bar num, basis text, also null, text text, low [text], high [text], " +
			"origins [{of text, p num, follows bool, text null, groups [{name text, low num, high num}]}]}",
		"specification {quantity text, low_V num, high_V num, guard {value num, unit text}, guard_set text, why null, " +
			"verdicts {pass num, conditional_pass num, conditional_fail num, fail num, no_verdict num}, ",
		"outside {count num, n num, share_upper num, level num}, send_back {rule text, set text, broken bool, by []}}",
		"verdict text, conformance_probability ",
	} {
		require.Contains(t, shape, want)
	}
	var b bytes.Buffer
	require.NoError(t, report.WriteJSON(&b, s))
	require.Contains(t, b.String(), `"specification":{"quantity":"vgsth_V"`)
	require.Contains(t, b.String(), `"verdict":"pass"`)
}

func TestOriginWords(t *testing.T) {
	o := lot.Origin{Of: "tube", P: math.NaN(), Groups: []lot.OriginGroup{{Name: "T1", Low: 3}, {Name: "", Low: 1, High: 4}}}
	require.Equal(t, "T1 has 3 lower, 0 upper; not given has 1 lower, 4 upper", report.OriginWords(o))
	o.P, o.Follows = 0.001, true
	require.Contains(t, report.OriginWords(o), ": the groups follow the tube (p = 0.001")
	for range 9 {
		o.Groups = append(o.Groups, lot.OriginGroup{Name: "X", High: 1})
	}
	require.Contains(t, report.OriginWords(o), "and 5 more")
}

// What holds of the lot does not wait for verdicts on its devices, and where these
// cannot be had for want of an uncertainty, the way to them is named.
func TestSpecWithoutVerdicts(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 30, Points: 30, Seed: 4})
	var devs []lot.Device
	for i := range s.Devices {
		d := lot.Device{Name: s.Devices[i].Name, Result: fit.NewResult()}
		d.Result.State, d.Result.Vgsth.Value = fit.Measured, 3+0.01*float64(i%10)-0.005*float64(i%7)
		devs = append(devs, d)
	}
	o := lot.SpecOptions{Min: 2, Max: 4, Guard: lot.Guard{Value: 2, Unit: "u"}, GuardSet: lot.RuleBefore}
	s.Spec = lot.SpecOf(devs, o)
	text := fieldsOf(s)
	for _, want := range []string{"no verdict: " + lot.NoAbsolute + "; give the accuracy of the meters in a bench file", "lot edit --guard 20mV", "Ppk: at least ", "tolerance interval: 95 % of all parts lie from ", "outside: 0 of "} {
		require.Contains(t, text, want)
	}
	require.NotContains(t, text, "verdicts: ")
	for i := range devs { // measured in another way than the data sheet says: nothing holds
		devs[i].Unlike = "measured with the drain tied to the gate"
	}
	s.Spec = lot.SpecOf(devs, o)
	text = fieldsOf(s)
	require.NotContains(t, text, "Ppk")
	require.NotContains(t, text, "bench file")
}

// What is proven is rounded down, in every place alike.
func TestIndexRoundsDown(t *testing.T) {
	s := specified(lot.SpecOptions{Min: 2, Max: 4, GuardSet: lot.RuleNone})
	s.Spec.Ppk = lot.Capability{Value: 1.23999, Lower: 1.01579, Level: 0.95, N: 50, Of: "all parts"}
	require.Contains(t, fieldsOf(s), "Ppk: at least 1.01 (95 % confidence; 1.23 in these 50 devices)")
	var b bytes.Buffer
	a := &plan.Capability{CapabilityRequest: plan.CapabilityRequest{Target: 1.33, Confidence: 0.95, Lot: plan.Lot{Name: "C", N: 50}, Low: 2, High: 4}, BoundOf: 1.01579}
	a.Index.Cpk, a.Index.Cp = 1.23999, math.NaN()
	require.NoError(t, report.PlanTable(&b, a, report.Style{}))
	require.Contains(t, b.String(), "C: Ppk 1.23, at least 1.01 at 95 % confidence")
}
