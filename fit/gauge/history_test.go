package gauge

import (
	"encoding/csv"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// halfAYear reads testdata/scenarios/s6_remeasure.csv: twelve devices, twice
// (invented data; one of them moved).
func halfAYear(t *testing.T) []Measuring {
	t.Helper()
	f, err := os.Open("../../testdata/scenarios/s6_remeasure.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var ms []Measuring
	for _, r := range rows[1:] {
		temp, err := strconv.ParseFloat(r[2], 64)
		v, err2 := strconv.ParseFloat(r[3], 64)
		if err != nil || err2 != nil {
			t.Fatal(err, err2)
		}
		ms = append(ms, Measuring{Device: r[0], Occasion: r[1], Sitting: r[1], Temp: temp, Value: v, U: math.NaN(), Place: len(ms)%12 + 1, Rank: len(ms) + 1})
	}
	return ms
}

func TestHistoryHalfAYear(t *testing.T) {
	ms := halfAYear(t)
	h := HistoryOf(ms, HistoryOptions{Tempco: -4e-3, Known: None()})
	if len(h) != 1 || len(h[0].Changes) != 12 {
		t.Fatalf("%+v", h)
	}
	one := h[0]
	// 12 devices: raw changes -18 -16 -18 -15 -15 -14 -17 -62 -18 -18 -17 -16 mV, by hand;
	// 4.2 K at -4 mV/K are -16.8 mV.
	near(t, "raw", one.Raw.Value, -17.0e-3, 1e-9)
	near(t, "corrected", one.Corrected.Value, -0.2e-3, 1e-9)
	// Deviations from the median: 0 0 1 1 1 1 1 1 2 2 3 45, median 1 mV: 1.4826/√2.
	near(t, "sigma from the differences", one.FromDiffs, 1.0484e-3, 1e-7)
	if got := one.ChangedDevices(); !slices.Equal(got, []string{"R08"}) {
		t.Errorf("changed: %v, want R08", got)
	}
	near(t, "R08", one.Changes[7].Own, -45e-3, 1e-9)
	if one.Moved() {
		t.Error("after correction all moved together")
	}
	near(t, "days", one.Days, 192, 0)

	// As read only: all moved, R08 besides.
	raw := HistoryOf(ms, HistoryOptions{Tempco: math.NaN(), Known: None()})[0]
	if !raw.Moved() || !math.IsNaN(raw.Corrected.Value) || !slices.Equal(raw.ChangedDevices(), []string{"R08"}) {
		t.Errorf("as read: %+v", raw)
	}
	if text := strings.Join(raw.Texts, "\n"); !strings.Contains(text, "--tempco") {
		t.Errorf("no hint of the coefficient: %s", text)
	}

	// Known repeatability of 1.5 mV.
	known := HistoryOf(ms, HistoryOptions{Tempco: -4e-3, Known: Given(1.5e-3)})[0]
	near(t, "limit for one", known.LimitOne, 4.24e-3, 0.005e-3)
	near(t, "limit for twelve", known.Limit, 6.14e-3, 0.005e-3)
	if got := known.ChangedDevices(); !slices.Equal(got, []string{"R08"}) {
		t.Errorf("changed at 1.5 mV: %v, want R08", got)
	}
}

// For one device the limit is two standard deviations of a difference; for n the
// probability of any is the same to first order.
func TestHistoryLimit(t *testing.T) {
	near(t, "one", limitFor(1, 1, math.Inf(1)), 2*math.Sqrt2, 1e-4)
	// Python 3.11: statistics.NormalDist().inv_cdf(1 - 0.0455/24) is 2.894993265918276.
	near(t, "twelve", limitFor(12, 1, math.Inf(1)), 2.894993265918276*math.Sqrt2, 1e-9)
	if !(limitFor(12, 1, 10) > limitFor(12, 1, 100)) {
		t.Error("fewer degrees of freedom do not widen the limit")
	}
}

// Of sets without any change not more than 7 % name a device, by a known
// repeatability as by one another, whatever the number of devices: 4.55 % is meant,
// and the median taken off, or two sought at once, make it a little more among few.
func TestHistoryFalseAlarms(t *testing.T) {
	runs := 500
	if os.Getenv("GATESILL_LONG") != "" {
		runs = 40_000
	}
	r := rand.New(rand.NewPCG(11, 7))
	for _, n := range []int{5, 8, 12, 40} {
		alarms := [2]int{}
		for range runs {
			var ms []Measuring
			for k := range 2 {
				for d := range n {
					ms = append(ms, Measuring{Device: fmt.Sprint(d), Occasion: fmt.Sprint(k), Sitting: fmt.Sprint(k), Value: float64(d) - 17e-3*float64(k) + 1.5e-3*r.NormFloat64(), Temp: math.NaN(), Rank: len(ms) + 1})
				}
			}
			for i, known := range []Repeatability{None(), Given(1.5e-3)} {
				if len(HistoryOf(ms, HistoryOptions{Tempco: math.NaN(), Known: known})[0].ChangedDevices()) > 0 {
					alarms[i]++
				}
			}
		}
		for i, what := range []string{"by one another", "known repeatability"} {
			p := float64(alarms[i]) / float64(runs)
			t.Logf("%d devices, %s: %.1f %%", n, what, 100*p)
			if most := 0.07 + 4*math.Sqrt(0.05/float64(runs)); p > most {
				t.Errorf("%d devices, %s: %.1f %% of unchanged sets name a device, want at most %.1f %%", n, what, 100*p, 100*most)
			}
		}
	}
}

func TestHistoryFew(t *testing.T) {
	var ms []Measuring
	for k := range 2 {
		for d := range 3 {
			ms = append(ms, Measuring{Device: fmt.Sprint(d), Occasion: fmt.Sprint(k), Value: float64(d + 10*k), Temp: math.NaN(), Rank: len(ms) + 1})
		}
	}
	h := HistoryOf(ms, HistoryOptions{Tempco: math.NaN(), Known: None()})[0]
	if len(h.ChangedDevices()) > 0 || h.Moved() || !math.IsNaN(h.Limit) {
		t.Errorf("three devices: %+v", h)
	}
	// With a repeatability they are told, without taking off what is common.
	h = HistoryOf(ms, HistoryOptions{Tempco: math.NaN(), Known: Given(1e-3)})[0]
	if len(h.ChangedDevices()) != 3 {
		t.Errorf("10 V apart at 1 mV: %v", h.ChangedDevices())
	}
}

func TestTimeline(t *testing.T) {
	ms := halfAYear(t)
	m := TimelineOf(ms, "R08", -4e-3)
	if len(m) != 2 {
		t.Fatalf("%+v", m)
	}
	near(t, "raw", m[1].Raw, -62e-3, 1e-9)
	near(t, "corrected", m[1].Corrected, -45.2e-3, 1e-9)
	if m := TimelineOf(ms, "R08", math.NaN()); !math.IsNaN(m[1].Corrected) {
		t.Error("corrected without a coefficient")
	}
}
