package report

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"unicode/utf8"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/store/record"
)

// inventedGauge is a study of ten devices by two operators on two days half a year
// apart, with a control part; all numbers invented.
func inventedGauge() (Sheet, Gauge) {
	r := rand.New(rand.NewPCG(20261201, 1))
	s := Sheet{Lot: record.Lot{Name: "bag 1"}, TestCurrent: 10e-3, TestBasis: "part", IdleCurrent: math.NaN(), Codes: fit.Codes}
	var ms []gauge.Measuring
	for k := range 2 {
		place := 0
		for range 3 {
			for _, d := range r.Perm(11) {
				place++
				ms = append(ms, gauge.Measuring{
					Device: fmt.Sprint("D", d), Control: d == 10, Value: 3 + 0.03*float64(d) - 17e-3*float64(k) + 1.5e-3*r.NormFloat64(), U: 0.3e-3,
					Sitting: fmt.Sprintf("2026-0%d-05, operator %d", 1+6*k, k), Operator: fmt.Sprint("operator ", k), Occasion: fmt.Sprintf("2026-0%d-05", 1+6*k),
					Place: place, Rank: len(ms) + 1, Temp: 21 + 4.2*float64(k),
				})
			}
		}
	}
	for d := range 11 {
		s.Devices = append(s.Devices, Device{Device: record.Device{Name: fmt.Sprint("D", d)}})
	}
	return s, Gauge{By: fit.KeyVgsth, Finding: gauge.FindingOf(ms, gauge.None(), -4e-3), Used: gauge.StudyOf(ms, math.NaN()).Repeatability}
}

func TestGaugeTable(t *testing.T) {
	s, g := inventedGauge()
	for _, width := range []int{0, 72, 100} {
		var out bytes.Buffer
		if err := GaugeTable(&out, s, g, Style{Width: width}); err != nil {
			t.Fatal(err)
		}
		text := out.String()
		for _, want := range []string{
			"By V_GS(th) at 10 mA (test current of the part).", "same device put in again", "between operators", "Control part D10", "From 2026-01-05 (21.0 °C) to 2026-07-05 (25.2 °C)",
		} {
			if !strings.Contains(text, want) {
				t.Errorf("width %d: no %q in\n%s", width, want, text)
			}
		}
		for _, l := range strings.Split(text, "\n") {
			if width > 0 && utf8.RuneCountInString(l) > width {
				t.Errorf("width %d: a line of %d:\n%s", width, utf8.RuneCountInString(l), l)
			}
		}
		if strings.Contains(text, "NaN") || strings.Contains(text, "Inf") {
			t.Errorf("a number that is none:\n%s", text)
		}
		// Devices in the order of the lot, not of the measuring.
		if a, b := strings.Index(text, "\nD1 "), strings.Index(text, "\nD9 "); a < 0 || b < a {
			t.Errorf("D1 at %d, D9 at %d", a, b)
		}
	}
}

func TestGaugeJSON(t *testing.T) {
	s, g := inventedGauge()
	for name, g := range map[string]Gauge{"study": g, "nothing": {By: fit.KeyVgsIdle, Finding: gauge.FindingOf(nil, gauge.None(), math.NaN()), Used: gauge.None()}} {
		var out bytes.Buffer
		if err := GaugeJSON(&out, s, g); err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		var doc map[string]any
		if err := json.Unmarshal(out.Bytes(), &doc); err != nil {
			t.Fatalf("%s: %v\n%s", name, err, out.String())
		}
		r := doc["repeatability"].(map[string]any)
		if name == "nothing" {
			if r["value_V"] != nil || doc["used"] != nil || doc["categories"] != nil || len(doc["drift"].([]any)) != 0 {
				t.Errorf("nothing: %s", out.String())
			}
			continue
		}
		if got := r["value_V"].(float64); got != g.Study.Repeatability.Value {
			t.Errorf("repeatability %v, want %v", got, g.Study.Repeatability.Value)
		}
		if len(doc["history"].([]any)) != 1 || len(doc["control"].([]any)) != 1 || len(doc["drift"].([]any)) != 2 {
			t.Errorf("%s", out.String())
		}
	}
}

// Sessions in which nothing but a large drift would show are told of in one line.
func TestGaugeBlindSessions(t *testing.T) {
	r := rand.New(rand.NewPCG(20261201, 5))
	s, g := inventedGauge()
	var ms []gauge.Measuring
	for k := range 4 {
		for place, d := range r.Perm(10) {
			ms = append(ms, gauge.Measuring{
				Device: fmt.Sprint("D", d), Value: 3 + 0.03*float64(d), U: math.NaN(), Temp: math.NaN(),
				Sitting: fmt.Sprint("session ", k), Occasion: fmt.Sprint("session ", k), Place: place + 1, Rank: len(ms) + 1,
			})
		}
	}
	g.Drifts = gauge.DriftsOf(ms, gauge.None())
	blind := 0
	for i := range g.Drifts {
		if g.Drifts[i].Blind() && g.Drifts[i].First == nil {
			blind++
		}
	}
	if blind < 2 {
		t.Fatalf("%d blind sessions of %d", blind, len(g.Drifts))
	}
	var out bytes.Buffer
	if err := GaugeTable(&out, s, g, Style{}); err != nil {
		t.Fatal(err)
	}
	text := out.String()
	if !strings.Contains(text, fmt.Sprintf("  %d sessions: No drift seen", blind)) || strings.Count(text, "only a large one would show") != 1 || strings.Contains(text, "would show a large one only") {
		t.Error(text)
	}
}
