package gauge

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit"
	"gatesill/fit/stats"
)

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: %v, want %v ± %v", what, got, want, tol)
	}
}

// bench is an invented bench: devices in sittings, each measured some times.
type bench struct {
	devices, operators, rounds   int
	lot, repeat, operator, drift float64 // V; drift per place
	fixed                        bool    // the same order in every round
}

// run draws the measurings of every operator's sitting.
func (b bench) run(r *rand.Rand) []Measuring {
	var ms []Measuring
	base := make([]float64, b.devices)
	for i := range base {
		base[i] = 3 + b.lot*r.NormFloat64()
	}
	for o := range b.operators {
		off, place := b.operator*r.NormFloat64(), 0
		for range b.rounds {
			order := r.Perm(b.devices)
			for i := range order {
				if b.fixed {
					order[i] = i
				}
			}
			for _, d := range order {
				place++
				ms = append(ms, Measuring{
					Device: fmt.Sprint("D", d), Value: base[d] + off + b.repeat*r.NormFloat64() + b.drift*float64(place),
					U: math.NaN(), Sitting: fmt.Sprint("S", o), Operator: fmt.Sprint("O", o), Occasion: "2026-03-02",
					Place: place, Rank: len(ms) + 1, Temp: math.NaN(),
				})
			}
		}
	}
	return ms
}

// Two devices, 3.000 3.002 and 3.100 3.104: squares 2 and 8 mV² with one degree of
// freedom each, sigma² = 5 mV². The means 3.001 and 3.102 lie 101 mV apart, so that
// s² = 101²/2 = 5100.5 and the lot's variance 5100.5 - 5/2 = 5098 mV².
func TestStudyByHand(t *testing.T) {
	var ms []Measuring
	for i, v := range []float64{3.000, 3.100, 3.002, 3.104, 3.2, 3.2} {
		ms = append(ms, Measuring{Device: []string{"A", "B", "A", "B", "C", "C"}[i], Value: v, Place: i + 1, Rank: i + 1, Control: i > 3})
	}
	s := StudyOf(ms[:4], math.NaN())
	near(t, "sigma", s.Repeatability.Value, math.Sqrt(5e-6), 1e-12)
	if s.Repeatability.DF != 2 || s.Repeatability.Devices != 2 || s.Repeatability.Basis != "2 devices x 2" {
		t.Errorf("%+v", s.Repeatability)
	}
	// Interval by chi-square with 2 degrees of freedom: quantiles -2 ln(1 - p).
	near(t, "low", s.Repeatability.Low, math.Sqrt(10e-6/(-2*math.Log(0.025))), 1e-12)
	near(t, "high", s.Repeatability.High, math.Sqrt(10e-6/(-2*math.Log(0.975))), 1e-9)
	near(t, "counts", s.Repeatability.Counts(), 2*math.Sqrt2*math.Sqrt(5e-6), 1e-12)
	near(t, "counts at 95 %", s.Repeatability.Counts95(), 1.959964*math.Sqrt2*math.Sqrt(5e-6), 1e-8)
	near(t, "width", s.Repeatability.Width(), 4*math.Sqrt(5e-6), 1e-12)
	if s.Repeatability.Enough() || s.MoreDevices != 3 || s.MoreRepeats != 5 {
		t.Errorf("enough %v, %d devices and %d repeats more; want no, 3 and 5", s.Repeatability.Enough(), s.MoreDevices, s.MoreRepeats)
	}
	if !has(s.Warnings, fit.CodeTooFewRepeats) {
		t.Errorf("no warning of too few: %v", s.Warnings)
	}
	// A control part counts for the repeatability, not for the lot.
	s = StudyOf(ms, math.NaN())
	near(t, "sigma with a control part", s.Repeatability.Value, math.Sqrt(10e-6/3), 1e-12)
	if s.LotDevices != 2 {
		t.Errorf("the lot has %d devices, want 2", s.LotDevices)
	}
}

func has(ws []fit.Warning, code string) bool {
	for _, w := range ws {
		if w.Code == code {
			return true
		}
	}
	return false
}

func TestStudyOfNothing(t *testing.T) {
	for name, ms := range map[string][]Measuring{
		"nothing": nil, "no value": {{Device: "A", Value: math.NaN()}}, "once each": {{Device: "A", Value: 1}, {Device: "B", Value: 2}},
		"two sittings": {{Device: "A", Value: 1, Sitting: "a"}, {Device: "A", Value: 2, Sitting: "b"}},
		"all the same": {{Device: "A", Value: 1}, {Device: "A", Value: 1}, {Device: "B", Value: 1}, {Device: "B", Value: 1}},
	} {
		s := StudyOf(ms, math.NaN())
		if s.Repeatability.Enough() {
			t.Errorf("%s: enough: %+v", name, s.Repeatability)
		}
		FindingOf(ms, None(), math.NaN()) // must not panic
		FindingOf(ms, Given(1e-3), -4e-3)
	}
}

// With equal numbers the components are those of the analysis of variance of
// fit/stats, which is checked against published studies.
func TestFactorsByHand(t *testing.T) {
	for seed := range uint64(40) {
		b := bench{devices: 7, operators: 3, rounds: 3, lot: 50e-3, repeat: 1.5e-3, operator: 2e-3}
		ms := b.run(rand.New(rand.NewPCG(seed, 1)))
		y := make([][][]float64, b.devices)
		for d := range y {
			y[d] = make([][]float64, b.operators)
			for _, m := range ms {
				if m.Device == fmt.Sprint("D", d) {
					o := int(m.Operator[1] - '0')
					y[d][o] = append(y[d][o], m.Value)
				}
			}
		}
		want, err := stats.GaugeCrossed(y, 0.25, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		s := StudyOf(ms, math.NaN())
		if len(s.Factors) != 1 || s.Factors[0].Name != "operator" {
			t.Fatalf("factors: %+v", s.Factors)
		}
		f := s.Factors[0]
		near(t, "sigma", s.Whole.Value, math.Sqrt(want.Within.MS), 1e-12)
		near(t, "operators", f.SD.Value, want.OperatorAlone.SD, 1e-9)
		near(t, "p", f.P, want.Operator.P, 1e-6)
		sum := 0.0
		for _, l := range f.Levels {
			sum += l.Off
		}
		near(t, "levels add up", sum, 0, 1e-12)
	}
}

// A shift of all values changes nothing but the values; a factor scales all
// standard deviations.
func TestStudyShift(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := bench{
			devices: rapid.IntRange(2, 8).Draw(t, "devices"), operators: rapid.IntRange(1, 3).Draw(t, "operators"), rounds: rapid.IntRange(1, 3).Draw(t, "rounds"),
			lot: 50e-3, repeat: 1.5e-3, operator: 1e-3,
		}
		ms := b.run(rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 2)))
		// Some are missing: nothing is balanced any more.
		kept := ms[:0:0]
		for _, m := range ms {
			if rapid.IntRange(0, 9).Draw(t, "kept") > 1 {
				kept = append(kept, m)
			}
		}
		by, scale := rapid.Float64Range(-5, 5).Draw(t, "shift"), rapid.Float64Range(0.2, 5).Draw(t, "scale")
		moved := make([]Measuring, len(kept))
		for i, m := range kept {
			m.Value = by + scale*m.Value
			moved[i] = m
		}
		a, c := StudyOf(kept, math.NaN()), StudyOf(moved, math.NaN())
		same := func(what string, x, y float64) {
			if math.IsNaN(x) != math.IsNaN(y) || math.Abs(x-y) > 1e-9 {
				t.Fatalf("%s: %v and %v", what, x, y)
			}
		}
		same("sigma", scale*a.Repeatability.Value, c.Repeatability.Value)
		same("lot", scale*a.Lot.Value, c.Lot.Value)
		same("share", a.Share.Value, c.Share.Value)
		if len(a.Factors) != len(c.Factors) {
			t.Fatalf("%d and %d factors", len(a.Factors), len(c.Factors))
		}
		for i := range a.Factors {
			same("factor", scale*a.Factors[i].SD.Value, c.Factors[i].SD.Value)
			if a.Factors[i].SD.Value < 0 || a.Factors[i].SD.Low > a.Factors[i].SD.High {
				t.Fatalf("factor %+v", a.Factors[i])
			}
		}
	})
}

// The intervals hold the truth as often as they say: of repeatability, of the
// lot's share and of operators, with a third of the measurings missing at random.
func TestStudyIntervals(t *testing.T) {
	runs := 400
	if os.Getenv("GATESILL_LONG") != "" {
		runs = 20_000
	}
	r := rand.New(rand.NewPCG(20261201, 3))
	b := bench{devices: 10, operators: 4, rounds: 3, lot: 10e-3, repeat: 1.5e-3, operator: 2e-3}
	share := b.repeat / math.Hypot(b.repeat, b.lot)
	var repeat, operator, shares, lots int
	for range runs {
		ms := b.run(r)
		kept := ms[:0:0]
		for _, m := range ms {
			if r.Float64() > 1.0/3 {
				kept = append(kept, m)
			}
		}
		s := StudyOf(kept, math.NaN())
		hit := func(e Estimate, truth float64) int {
			if e.Low <= truth && truth <= e.High {
				return 1
			}
			return 0
		}
		repeat += hit(s.Repeatability.Estimate, b.repeat)
		operator += hit(s.Factors[0].SD, b.operator)
		shares += hit(s.Share, share)
		lots += hit(s.Lot, b.lot)
	}
	for what, n := range map[string]int{"repeatability": repeat, "operators": operator, "share": shares, "lot": lots} {
		got := float64(n) / float64(runs)
		t.Logf("%s: %.1f %%", what, 100*got)
		// Four standard deviations of the count, and 1.5 % for what is approximate.
		if slack := 4*math.Sqrt(0.95*0.05/float64(runs)) + 0.015; math.Abs(got-0.95) > slack {
			t.Errorf("%s: interval holds the truth in %.1f %% of studies, want 95 ± %.1f %%", what, 100*got, 100*slack)
		}
	}
}

// Sittings within operators: the operators' own part comes out apart from that of
// their sittings, on average.
func TestFactorsSimulated(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 4))
	const runs, operators, sittings, devices = 300, 4, 3, 6
	var of, se float64
	for range runs {
		var ms []Measuring
		for o := range operators {
			off := 2e-3 * r.NormFloat64()
			for k := range sittings {
				here := 1e-3 * r.NormFloat64()
				for d := range devices {
					ms = append(ms, Measuring{Device: fmt.Sprint(d), Value: float64(d) + off + here + 0.5e-3*r.NormFloat64(), Operator: fmt.Sprint(o), Sitting: fmt.Sprint(o, k)})
				}
			}
		}
		f := StudyOf(ms, math.NaN()).Factors
		if len(f) != 2 || f[0].Name != "operator" || f[1].Name != "session" {
			t.Fatalf("factors: %+v", f)
		}
		of += f[0].SD.Value * f[0].SD.Value / runs
		se += f[1].SD.Value * f[1].SD.Value / runs
	}
	// Estimates are cut at 0, which makes them a little large on average.
	near(t, "variance of operators, mV²", of*1e6, 4, 0.6)
	// All sittings together differ by operator and sitting: 4 times 9/11 and 1, mV².
	near(t, "variance of sittings, mV²", se*1e6, 4*9.0/11+1, 0.6)
}

// Two sittings at 21 and 25.2 deg C of parts with -4 mV/K: without the coefficient they
// differ, with it they do not.
func TestFactorsAtOneTemperature(t *testing.T) {
	b := bench{devices: 8, operators: 2, rounds: 3, lot: 50e-3, repeat: 1e-3}
	ms := b.run(rand.New(rand.NewPCG(3, 9)))
	for i := range ms {
		ms[i].Temp = 21
		if ms[i].Operator == "O1" {
			ms[i].Temp, ms[i].Value = 25.2, ms[i].Value-16.8e-3
		}
	}
	raw, at := StudyOf(ms, math.NaN()), StudyOf(ms, -4e-3)
	if !(raw.Factors[0].P < 1e-6) || !has(raw.Warnings, fit.CodeOperatorsDiffer) || raw.FactorWords() == "" {
		t.Errorf("as read: %+v", raw.Factors[0])
	}
	if !(at.Factors[0].P > 0.05) || !at.AtOneTemp || has(at.Warnings, fit.CodeOperatorsDiffer) {
		t.Errorf("at one temperature: %+v", at.Factors[0])
	}
	if raw.Repeatability.Value != at.Repeatability.Value {
		t.Errorf("repeatability %v and %v", raw.Repeatability.Value, at.Repeatability.Value)
	}
}

func TestTogether(t *testing.T) {
	b := bench{devices: 6, operators: 2, rounds: 2, lot: 50e-3, repeat: 1e-3, operator: 5e-3}
	ms := b.run(rand.New(rand.NewPCG(5, 5)))
	for i := range ms {
		ms[i].Fixture = "F" + ms[i].Operator
	}
	f := StudyOf(ms, math.NaN()).Factors
	if len(f) != 2 || f[0].With != "fixture" || f[1].With != "operator" {
		t.Errorf("operators and fixtures that change together: %+v", f)
	}
}

// One device with a bad contact is named; of clean studies little more than 1 % name one.
func TestUneven(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 6))
	b := bench{devices: 10, operators: 1, rounds: 3, lot: 50e-3, repeat: 1e-3}
	false1, found := 0, 0
	runs := 500
	if os.Getenv("GATESILL_LONG") != "" {
		runs = 20_000
	}
	for range runs {
		ms := b.run(r)
		if has(StudyOf(ms, math.NaN()).Warnings, fit.CodeUnevenRepeats) {
			false1++
		}
		for i := range ms {
			if ms[i].Device == "D3" {
				ms[i].Value += 10e-3 * r.NormFloat64()
			}
		}
		if has(StudyOf(ms, math.NaN()).Warnings, fit.CodeUnevenRepeats) {
			found++
		}
	}
	p := float64(false1) / float64(runs)
	t.Logf("%.2f %% of clean studies name a device, and %.0f %% of those with one ten times worse", 100*p, 100*float64(found)/float64(runs))
	if p > 0.015+4*math.Sqrt(0.01*0.99/float64(runs)) {
		t.Errorf("%.2f %% of clean studies name a device, want at most 1.5 %%", 100*p)
	}
	if found < runs/2 {
		t.Errorf("a device ten times worse is named in %d of %d", found, runs)
	}
}

// Two devices exchanged in one round stand out by their scatter, both of them, and
// the repeatability is that of the others.
func TestExchanged(t *testing.T) {
	b := bench{devices: 10, operators: 1, rounds: 3, lot: 50e-3, repeat: 1e-3}
	ms := b.run(rand.New(rand.NewPCG(21, 7)))
	clean := StudyOf(ms, math.NaN())
	at := [2]int{10, 10} // the least and the greatest of the second round
	for i := range ms[10:20] {
		if ms[10+i].Value < ms[at[0]].Value {
			at[0] = 10 + i
		}
		if ms[10+i].Value > ms[at[1]].Value {
			at[1] = 10 + i
		}
	}
	ms[at[0]].Value, ms[at[1]].Value = ms[at[1]].Value, ms[at[0]].Value
	s := StudyOf(ms, math.NaN())
	if len(s.Odd) != 2 || len(clean.Odd) != 0 || !has(s.Warnings, fit.CodeUnevenRepeats) {
		t.Fatalf("named %v, want the two exchanged; before %v", s.Odd, clean.Odd)
	}
	if s.Repeatability.DF != 16 || !(s.Repeatability.Value < 1.5e-3) || !(s.Whole.Value > 5e-3) {
		t.Errorf("%+v, with all %+v", s.Repeatability, s.Whole)
	}
}

func TestOrder(t *testing.T) {
	of := func(rounds ...string) Order {
		var ms []Measuring
		for _, r := range rounds {
			for _, d := range r {
				ms = append(ms, Measuring{Device: string(d), Value: 1, Place: len(ms) + 1})
			}
		}
		return orderOf(ms)
	}
	for _, c := range []struct {
		rounds        []string
		known, random bool
	}{
		{[]string{"ABCDE", "ABCDE"}, true, false},
		{[]string{"ABCDE", "EDCBA"}, true, false},
		{[]string{"AABBCCDD"}, true, false},
		{[]string{"ABCDE", "BADCE"}, true, true},
		{[]string{"ABCDE", "ABDCE", "ABCDE"}, true, true},
		{[]string{"ABC", "ABC"}, false, true}, // one of six orders
		{[]string{"ABCDE"}, false, true},
		{[]string{"ABCDEFG", "ABCDE"}, true, false}, // two were left out
	} {
		if o := of(c.rounds...); o.Known != c.known || o.Random != c.random {
			t.Errorf("%v: %+v, want known %v random %v", c.rounds, o, c.known, c.random)
		}
	}
}
