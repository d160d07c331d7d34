package job

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store/record"
)

// sheetAt is a lot of one device, measured at that time.
func sheetAt(lot, at string) *report.Sheet {
	return &report.Sheet{
		Lot: record.Lot{Name: lot}, Part: record.NewPart("X"), IdleCurrent: 0.25, TestCurrent: 1e-3,
		Sources: []record.Source{{ID: "f" + lot, ImportedAt: "2026-06-01T10:00:00.000Z"}},
		Devices: []report.Device{{Device: record.Device{Name: "D1", Role: record.Sample}, Result: fit.NewResult(), Sweeps: []report.Sweep{{
			Sweep: record.Sweep{SourceID: "f" + lot, MeasuredAt: at}, Result: fit.NewResult(),
		}}}},
	}
}

// A margin counts as set before only where it is stored and older than the first
// reading; with a bare date, older than that day.
func TestMarginSetBefore(t *testing.T) {
	stored := record.Amount{Value: 0.05, Unit: "V"}
	check := func(setAt, measured string, given record.Amount, want string) {
		t.Helper()
		ref, cand := sheetAt("A", "2026-01-01"), sheetAt("B", measured)
		ref.Lot.Margin, ref.Lot.MarginSetAt = stored, setAt
		m, err := marginOf(ref, cand, CompareRequest{Margin: given})
		require.NoError(t, err)
		require.Equal(t, want, m.set, m.text)
	}
	none := record.Amount{}
	check("2026-05-20T09:59:59.999Z", "2026-05-20T10:00:00.000Z", none, compare.Before)
	check("2026-05-20T10:00:00.000Z", "2026-05-20T10:00:00.000Z", none, compare.After)
	check("2026-05-20T10:00:00.001Z", "2026-05-20T10:00:00.000Z", none, compare.After)
	check("2026-05-19T23:59:59.999Z", "2026-05-20", none, compare.Before)
	check("2026-05-20T00:00:00.000Z", "2026-05-20", none, compare.After)
	check("2026-05-31T10:00:00.000Z", "", none, compare.Before) // only the import is known
	check("2026-06-01T11:00:00.000Z", "", none, compare.After)
	check("", "2026-05-20", none, compare.After)
	// A file that gives a date in the future: its readings were there when it was imported.
	check("2026-06-01T09:59:59.999Z", "2099-05-20", none, compare.Before)
	check("2026-06-01T10:00:00.000Z", "2099-05-20", none, compare.After)
	check("2026-06-01T11:00:00.000Z", "2099-05-20", none, compare.After)
	check("2026-05-19T00:00:00.000Z", "2026-05-20", stored, compare.Before) // the stored one, given again
	check("2026-05-19T00:00:00.000Z", "2026-05-20", record.Amount{Value: 0.051, Unit: "V"}, compare.After)

	m, err := marginOf(sheetAt("A", ""), sheetAt("B", ""), CompareRequest{})
	require.NoError(t, err)
	require.Equal(t, compare.None, m.set)
	require.True(t, math.IsNaN(m.volts))
}

// The rules of a lot go by the same first reading as a margin, that of a session too.
func TestRuleSetBefore(t *testing.T) {
	s := sheetAt("A", "2099-05-20")
	require.Equal(t, lot.RuleAfter, ruleSet(s, true, "2026-06-01T10:00:00.001Z"), "after the import")
	require.Equal(t, lot.RuleBefore, ruleSet(s, true, "2026-06-01T09:00:00.000Z"))
	require.Equal(t, lot.RuleAfter, ruleSet(s, true, ""))
	require.Equal(t, lot.RuleNone, ruleSet(s, false, "2026-06-01T09:00:00.000Z"))
	s.Devices[0].Sweeps[0].SessionID = "x"
	s.Sessions = []record.Session{{ID: "x", StartedAt: "2026-05-30T08:00:00.000Z"}}
	require.Equal(t, lot.RuleAfter, ruleSet(s, true, "2026-05-30T08:30:00.000Z"), "after the session began")
	require.Equal(t, "2026-05-30T08:00:00.000Z", comparedLot(s).At, "its place in the run of lots")
	s.Devices[0].Sweeps = nil
	require.Equal(t, lot.RuleBefore, ruleSet(s, true, "2026-06-01T10:00:00.001Z"), "no reading yet")
}

// A stored margin of the idle current counts as set before only where all that makes
// volts of it was settled then as well.
func TestSizeOfMarginSetBefore(t *testing.T) {
	check := func(want, why string, change func(ref, cand *report.Sheet, rq *CompareRequest)) {
		t.Helper()
		ref, cand := sheetAt("A", "2026-01-01"), sheetAt("B", "2026-05-20")
		ref.Lot.Margin, ref.Lot.MarginSetAt = record.Amount{Value: 10, Unit: "%"}, "2026-05-01T08:00:00.000Z"
		ref.Part.IdleCurrent, ref.IdleSetAt = record.Known(0.25), "2026-01-01T08:00:00.000Z"
		ref.Devices[0].Result.GmIdle = fit.Quantity{Value: 1.25}
		rq := CompareRequest{}
		if change != nil {
			change(ref, cand, &rq)
		}
		m, err := marginOf(ref, cand, rq)
		require.NoError(t, err)
		require.Equal(t, want, m.set, m.text)
		require.Contains(t, m.text, why)
	}
	check(compare.Before, "before the first reading", nil)
	check(compare.After, "idle current that its size rests on was set on 2026-06-02", func(ref, _ *report.Sheet, _ *CompareRequest) {
		ref.IdleSetAt = "2026-06-02T08:00:00.000Z"
	})
	check(compare.After, "is not that of the part", func(ref, _ *report.Sheet, _ *CompareRequest) { ref.IdleCurrent = 0.3 })
	check(compare.After, "--beta", func(ref, _ *report.Sheet, rq *CompareRequest) {
		ref.Devices[0].Result.GmIdle, rq.Beta = fit.None(), record.Known(3.8)
	})
	check(compare.Before, "", func(_, _ *report.Sheet, rq *CompareRequest) { rq.Beta = record.Known(3.8) }) // not used
	check(compare.After, "readings of lot A that came no earlier", func(ref, _ *report.Sheet, _ *CompareRequest) {
		ref.Devices[0].Sweeps[0].MeasuredAt = "2026-05-25"
	})
	check(compare.Before, "", func(ref, _ *report.Sheet, _ *CompareRequest) { // in volts nothing is left open
		ref.Lot.Margin, ref.IdleSetAt = record.Amount{Value: 0.05, Unit: "V"}, "2026-06-02T08:00:00.000Z"
	})
}

// Leaving out devices of the reference lot does not change what a margin is in volts;
// control parts and faulty ones never counted.
func TestMarginKeepsItsDevices(t *testing.T) {
	ref := sheetAt("A", "")
	one := ref.Devices[0]
	ref.Devices = nil
	for _, gm := range []float64{1, 1.2, 2} {
		d := one
		d.Result.GmIdle = fit.Quantity{Value: gm}
		ref.Devices = append(ref.Devices, d)
	}
	require.Equal(t, 1.2, medianGm(ref))
	ref.Devices[0].Excluded = true
	require.Equal(t, 1.2, medianGm(ref))
	ref.Devices[1].Role = record.Control
	ref.Devices[0].Result.State = fit.Shorted
	require.Equal(t, 1.5, medianGm(ref), "excluded, whatever its state was")
	ref.Devices[0].Excluded = false
	require.Equal(t, 2.0, medianGm(ref))
}

// The lot's own margin goes before that of the reference lot.
func TestMarginOfWhichLot(t *testing.T) {
	ref, cand := sheetAt("A", "2026-01-01"), sheetAt("B", "2026-02-01")
	ref.Lot.Margin = record.Amount{Value: 0.05, Unit: "V"}
	cand.Lot.Margin = record.Amount{Value: 0.03, Unit: "V"}
	m, err := marginOf(ref, cand, CompareRequest{})
	require.NoError(t, err)
	require.Equal(t, 0.03, m.volts)
	require.Contains(t, m.text, "stored with lot B")
}

// A margin of the idle current becomes volts by the transconductance: the median
// of the reference lot, else that of the square law.
func TestMarginInVolts(t *testing.T) {
	ref := sheetAt("A", "")
	ref.Devices[0].Result.GmIdle = fit.Quantity{Value: 1.25}
	v, how, err := inVolts(ref, record.Amount{Value: 10, Unit: "%"}, record.Num{}, false)
	require.NoError(t, err)
	require.InDelta(t, 0.025/1.25, v, 1e-12)
	require.Contains(t, how, "10 % of 250 mA = 25 mA")
	v, _, err = inVolts(ref, record.Amount{Value: 0.025, Unit: "A"}, record.Known(3.8), false)
	require.NoError(t, err)
	require.InDelta(t, 0.025/1.25, v, 1e-12, "what was measured goes before --beta")

	ref.Devices[0].Result.GmIdle = fit.None()
	v, _, err = inVolts(ref, record.Amount{Value: 0.025, Unit: "A"}, record.Known(3.8), false)
	require.NoError(t, err)
	require.InDelta(t, 0.025/math.Sqrt(2*3.8*0.25), v, 1e-12)
	_, _, err = inVolts(ref, record.Amount{Value: 0.025, Unit: "A"}, record.Num{}, false)
	require.ErrorContains(t, err, "transconductance")
	ref.IdleCurrent = math.NaN()
	_, _, err = inVolts(ref, record.Amount{Value: 10, Unit: "%"}, record.Known(3.8), true)
	require.ErrorContains(t, err, "idle current")
}

// Only a session with a name joins two lots; without one each lot has its own.
func TestSittingsAcrossLots(t *testing.T) {
	sitting := func(s *report.Sheet) compare.Sitting { return newSittings(s).of(&s.Devices[0])[0] }
	a, b := sheetAt("A", "2026-05-20"), sheetAt("B", "2026-05-20")
	require.NotEqual(t, sitting(a).Session, sitting(b).Session)
	require.Empty(t, sitting(a).Meters)
	for _, s := range []*report.Sheet{a, b} {
		s.Devices[0].Sweeps[0].SessionID = "of " + s.Lot.Name
		s.Sessions = []record.Session{{ID: "of " + s.Lot.Name, Bench: "attic", StartedAt: "2026-05-20T09:00:00.000Z"}}
		s.Devices[0].Sweeps[0].Instruments = []record.Instrument{{Role: "temperature", Name: "T"}, {Role: "gate", Name: "G", Serial: "1"}, {Role: "current", Name: "I"}}
	}
	require.NotEqual(t, sitting(a).Session, sitting(b).Session)
	require.Equal(t, sitting(a).Meters, sitting(b).Meters)
	a.Sessions[0].Name, b.Sessions[0].Name = "may", "may"
	require.Equal(t, sitting(a).Session, sitting(b).Session)
	b.Sessions[0].StartedAt = "2026-06-20T09:00:00.000Z"
	require.NotEqual(t, sitting(a).Session, sitting(b).Session, "another day")
	b.Devices[0].Sweeps[0].Instruments = append(b.Devices[0].Sweeps[0].Instruments[:1:1], record.Instrument{Role: "gate", Name: "G", Serial: "2"})
	require.NotEqual(t, sitting(a).Meters, sitting(b).Meters)
}

// The limits of V_GS(th) hold at the part's test current only.
func TestLimitsHoldAtTheTestCurrent(t *testing.T) {
	s := sheetAt("A", "")
	s.Part.VgsthMin, s.Part.VgsthMax = record.Known(2), record.Known(4)
	check := func(stated record.Num, by fit.Key, test, idle float64, want bool) {
		t.Helper()
		s.Part.TestCurrent, s.TestCurrent, s.IdleCurrent = stated, test, idle
		low, high := limitsOf(s, by)
		require.Equal(t, want, low == 2 && high == 4)
		require.Equal(t, want, !math.IsNaN(low))
	}
	check(record.Known(1e-3), fit.KeyVgsth, 1e-3, 0.25, true)
	check(record.Known(1e-3), fit.KeyVgsth, 2e-3, 0.25, false)
	check(record.Num{}, fit.KeyVgsth, 2e-3, 0.25, true)
	check(record.Known(1e-3), fit.KeyVgsIdle, 1e-3, 0.25, false)
	check(record.Known(0.25), fit.KeyVgsIdle, 0.25, 0.25, true)
	check(record.Num{}, fit.KeyVgsIdle, 0.25, 0.25, false)
}

// What makes two lots unlike, and what is only told.
func TestUnlikeLots(t *testing.T) {
	with := func(name string, change func(*record.Condition)) *report.Sheet {
		s := sheetAt(name, "")
		c := &s.Devices[0].Sweeps[0].Condition
		c.Circuit, c.RL, c.VDD = record.Load, record.Known(10), record.Known(12)
		if change != nil {
			change(c)
		}
		return s
	}
	check := func(what string, corrected bool, a, b func(*record.Condition)) {
		t.Helper()
		differ, _ := unlikeLots(with("A", a), with("B", b), fit.KeyVgsth, corrected)
		if what == "" {
			require.Empty(t, differ)
			return
		}
		require.Len(t, differ, 1)
		require.Equal(t, what, differ[0].what)
		require.NotEmpty(t, differ[0].hint)
		require.NotEqual(t, differ[0].ref, differ[0].cand)
	}
	vdd := func(x float64) func(*record.Condition) { return func(c *record.Condition) { c.VDD = record.Known(x) } }
	temp := func(x float64) func(*record.Condition) {
		return func(c *record.Condition) { c.Temp = record.Known(x) }
	}
	kind := func(x string) func(*record.Condition) { return func(c *record.Condition) { c.Pulsed = x } }
	check("", false, nil, nil)
	check("V_DS", false, nil, vdd(13.8))
	check("", false, nil, vdd(12.3))
	check("V_DS", false, nil, func(c *record.Condition) { c.VDD = record.Num{} })
	check("circuit", false, nil, func(c *record.Condition) { c.Circuit = record.Diode })
	check("circuit", false, nil, func(c *record.Condition) { c.Circuit = record.NoCircuit })
	check("current", false, kind("dc"), kind("pulsed"))
	check("", false, kind("dc"), nil)
	check("", false, temp(25), temp(30))
	check("temperature", false, temp(25), temp(30.1))
	check("", true, temp(25), temp(60))
	check("", false, temp(25), nil)

	// The drain falls with the current: at 250 mA, 10 ohm leave 9.5 V of 12 V and 22 ohm 6.5 V.
	differ, _ := unlikeLots(with("A", nil), with("B", func(c *record.Condition) { c.RL = record.Known(22) }), fit.KeyVgsIdle, false)
	require.Len(t, differ, 1)
	differ, _ = unlikeLots(with("A", nil), with("B", func(c *record.Condition) { c.RL = record.Known(22) }), fit.KeyVgsth, false)
	require.Empty(t, differ)

	codes := func(a, b *report.Sheet) (out []string) {
		_, ws := unlikeLots(a, b, fit.KeyVgsth, false)
		for _, w := range ws {
			out = append(out, w.Code)
		}
		return out
	}
	require.Equal(t, []string{fit.CodeUnlikeConditions}, codes(with("A", kind("pulsed")), with("B", nil)))
	require.Equal(t, []string{fit.CodeUnlikeConditions}, codes(with("A", temp(25)), with("B", temp(27))))
	require.Empty(t, codes(with("A", temp(25)), with("B", temp(25.4))))
	a, b := with("A", nil), with("B", nil)
	a.Devices[0].Sweeps[0].Result.ReadTest.Gate.Top, b.Devices[0].Sweeps[0].Result.ReadTest.Gate.Top = 4, 40
	require.Equal(t, []string{fit.CodeRangeEdge}, codes(a, b))
}

// Flagged devices take part, all of them if need be; dead and excluded ones are set
// aside with the reason, and a device without a sweep is in no count.
func TestWhoTakesPart(t *testing.T) {
	s := sheetAt("A", "2026-05-20")
	d := s.Devices[0]
	d.Result.State = fit.Measured
	s.Devices = nil
	for _, change := range []func(*report.Device){
		func(*report.Device) {},
		func(d *report.Device) { d.Result.State = fit.Shorted },
		func(d *report.Device) { d.Excluded = true },
		func(d *report.Device) { d.Role = record.Control },
		func(d *report.Device) { d.Result.State = fit.Above },
		func(d *report.Device) { d.Sweeps = nil },
	} {
		x := d
		x.Name = string(rune('a' + len(s.Devices)))
		change(&x)
		s.Devices = append(s.Devices, x)
		s.Spread.Devices = append(s.Spread.Devices, lot.Verdict{Name: x.Name, Flagged: true})
	}
	l := comparedLot(s)
	var aside []string
	for _, m := range l.Members {
		require.True(t, m.Flagged)
		aside = append(aside, m.Aside)
	}
	require.Equal(t, []string{"", "shorted", "excluded", "", ""}, aside)
	require.True(t, l.Members[3].Control)
	require.Equal(t, "2026-05-20", l.At)
}
