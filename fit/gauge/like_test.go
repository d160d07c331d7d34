package gauge

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// atDate gives measurings an occasion, with a sitting for each operator at it.
func atDate(ms []Measuring, date string, rank int) []Measuring {
	for i := range ms {
		ms[i].Occasion, ms[i].Sitting, ms[i].Rank = date, date+ms[i].Operator, rank+i
	}
	return ms
}

// reads is what an operator reads of n devices, off by off.
func reads(r *rand.Rand, operator string, n, times int, off float64) []Measuring {
	var ms []Measuring
	for range times {
		for d := range n {
			ms = append(ms, Measuring{
				Device: fmt.Sprint("D", d), Operator: operator, Value: 3 + 0.01*float64(d) + off + 1e-3*r.NormFloat64(),
				U: math.NaN(), Place: len(ms) + 1, Temp: math.NaN(),
			})
		}
	}
	return ms
}

// A control part that one operator alone measured at eight dates, the last 50 mV
// higher, does not enter what the operators differ by; one measured by both does.
func TestFactorsOfSharedDevices(t *testing.T) {
	r := rand.New(rand.NewPCG(20261201, 21))
	ms := append(atDate(reads(r, "anna", 10, 3, -10e-3), "2026-03-02", 1), atDate(reads(r, "bert", 10, 3, 10e-3), "2026-03-02", 31)...)
	alone := StudyOf(ms, math.NaN()).Factors
	control := func(operator, date string, value float64) Measuring {
		return Measuring{Device: "K1", Control: true, Operator: operator, Occasion: date, Sitting: date + operator, Value: value, U: math.NaN(), Place: 31, Rank: 100, Temp: math.NaN()}
	}
	with := append([]Measuring{}, ms...)
	for k := range 8 {
		value := 3.2
		if k == 7 {
			value += 50e-3
		}
		date := "2026-03-02"
		if k > 0 {
			date = fmt.Sprintf("2026-1%d-01", k)
		}
		with = append(with, control("anna", date, value), control("anna", date, value+1e-3))
	}
	found := StudyOf(with, math.NaN()).Factors
	if len(found) == 0 || found[0].Name != "operator" || len(alone) == 0 {
		t.Fatalf("factors: %+v, without the control part %+v", found, alone)
	}
	a, b := alone[0], found[0]
	near(t, "p", b.P, a.P, 1e-12)
	if !(b.P < 1e-4) {
		t.Errorf("20 mV between the operators are not seen: p %v", b.P)
	}
	for i := range a.Levels {
		near(t, a.Levels[i].Name, b.Levels[i].Off, a.Levels[i].Off, 1e-12)
		if b.Levels[i].Measurings != 30 {
			t.Errorf("%s: n %d, want the 30 of the shared devices", b.Levels[i].Name, b.Levels[i].Measurings)
		}
	}
	shared := append(append([]Measuring{}, ms...), control("anna", "2026-03-02", 3.19), control("bert", "2026-03-02", 3.21))
	if l := StudyOf(shared, math.NaN()).Factors[0].Levels; l[0].Measurings != 31 || l[1].Measurings != 31 {
		t.Errorf("a control part measured by both is left out: %+v", l)
	}
	// Sittings of nobody known take nothing from what is known.
	unknown := append(append([]Measuring{}, ms...), atDate(reads(r, "", 10, 1, 0), "2026-06-01", 200)...)
	if f := StudyOf(unknown, math.NaN()).Factors; len(f) == 0 || f[0].Name != "operator" || f[0].Levels[0].Measurings != 30 {
		t.Errorf("with a sitting of an unknown operator: %+v", f)
	}
}

// Operators 20 mV apart, both at the first date and one at the last: nothing changed.
// Averaged over both, all would have moved by 10 mV.
func TestHistoryByOperators(t *testing.T) {
	r := rand.New(rand.NewPCG(20261201, 22))
	first := append(atDate(reads(r, "anna", 10, 3, -10e-3), "2026-03-02", 1), atDate(reads(r, "bert", 10, 3, 10e-3), "2026-03-02", 31)...)
	of := func(last []Measuring) History {
		list := HistoryOf(append(append([]Measuring{}, first...), atDate(last, "2026-09-01", 100)...), HistoryOptions{Tempco: math.NaN(), Known: Given(1e-3)})
		if len(list) != 1 {
			t.Fatalf("%d histories", len(list))
		}
		return list[0]
	}
	h := of(reads(r, "anna", 10, 3, -10e-3))
	near(t, "anna against anna", h.Raw.Value, 0, 1e-3)
	if h.Moved() || !strings.Contains(strings.Join(h.Texts, "\n"), "what bert read at one of the two only is left out") {
		t.Errorf("moved %v, %v", h.Moved(), h.Texts)
	}
	// Both at both dates, in unequal numbers: each counts the same.
	h = of(append(reads(r, "anna", 10, 1, -10e-3), reads(r, "bert", 10, 4, 10e-3)...))
	near(t, "both against both", h.Raw.Value, 0, 1e-3)
	if h.Moved() || len(h.LeftOut) > 0 || len(h.Apart) > 0 {
		t.Errorf("%+v", h)
	}
	// A third alone: what he reads differently is in the change, and that is said.
	h = of(reads(r, "carl", 10, 3, 30e-3))
	near(t, "carl", h.Raw.Value, 30e-3, 1e-3)
	text := strings.Join(h.Texts, "\n")
	if !strings.Contains(text, "so the bench, the operator or the temperature") || !strings.Contains(text, "by another operator (anna, bert, then carl)") {
		t.Errorf("%s", text)
	}
	// Who measured last is not known: nothing is left out, nothing is claimed.
	h = of(reads(r, "", 10, 3, 0))
	if len(h.LeftOut) > 0 || len(h.Apart) > 0 {
		t.Errorf("unknown operator: %+v", h)
	}
}

// Limits of a device of which several operators' means are compared rest on all their
// insertions: three of either at both dates, six in all.
func TestHistoryWeight(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 23))
	var ms []Measuring
	for k, date := range []string{"2026-03-02", "2026-09-01"} {
		ms = append(ms, atDate(append(reads(r, "anna", 6, 3, 0), reads(r, "bert", 6, 3, 0)...), date, 1+100*k)...)
	}
	h := HistoryOf(ms, HistoryOptions{Tempco: math.NaN(), Known: Given(1e-3)})[0]
	near(t, "limit for one", h.LimitOne, 2*math.Sqrt2*1e-3/math.Sqrt(6), 1e-12)
}

// Of sittings in which each device was measured once it is said how large a drift would
// have been seen, and for how many sittings a p is adjusted.
func TestDriftWords(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 24))
	var ms []Measuring
	for k := range 3 {
		ms = append(ms, atDate(reads(r, "anna", 10, 1, 0), fmt.Sprint("2026-03-0", k+1), 1+100*k)...)
	}
	ms = append(ms, atDate(reads(r, "bert", 10, 3, 0), "2026-03-05", 400)...)
	list := DriftsOf(ms, None())
	if len(list) != 4 || list[3].Tried != 4 || !strings.Contains(list[3].Text, "adjusted for 4 sessions") {
		t.Fatalf("%+v", list)
	}
	for i := range 3 {
		if d := &list[i]; !(d.PAdjusted < 0.05) && (!d.Blind() || !(d.Large() > 0)) {
			t.Errorf("%+v", d)
		}
	}
	if list[3].Blind() {
		t.Error("devices put in again do show a drift")
	}
}
