package report_test

import (
	"bytes"
	"encoding/json"
	"fmt"
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

// shape writes the keys of a JSON value in their order, one level a pair of
// braces; of an array only its first element. Leaves are their kind.
func shape(t *testing.T, d *json.Decoder) string {
	t.Helper()
	tok, err := d.Token()
	require.NoError(t, err)
	switch v := tok.(type) {
	case json.Delim:
		var parts []string
		for d.More() {
			if v == '{' {
				key, err := d.Token()
				require.NoError(t, err)
				parts = append(parts, fmt.Sprintf("%s %s", key, shape(t, d)))
			} else {
				parts = append(parts, shape(t, d))
			}
		}
		_, err := d.Token()
		require.NoError(t, err)
		if v == '{' {
			return "{" + strings.Join(parts, ", ") + "}"
		}
		if len(parts) == 0 {
			return "[]"
		}
		return "[" + parts[0] + "]"
	case float64:
		return "num"
	case string:
		return "text"
	case bool:
		return "bool"
	case nil:
		return "null"
	}
	return "?"
}

func shapeOf(t *testing.T, write func(io.Writer) error) string {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, write(&b))
	d := json.NewDecoder(&b)
	s := shape(t, d)
	_, err := d.Token()
	require.ErrorIs(t, err, io.EOF, "more than one object")
	return s
}

const (
	quantity = "{value num, u num, u_between num, u_absolute num, n num}"
	absent   = "{value null, u null, u_between null, u_absolute null, n num}"
)

// The objects hold exactly the keys that scripts are promised, in that order.
func TestKeysOfTheContract(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	require.Equal(t, "{schema num, lot text, sorted_by text, test_current_A num, idle_current_A num, devices [{"+
		"device text, package null, side null, state text, sweeps [text], vgsth_V "+quantity+", vgs_idle_V "+quantity+", vt_V "+quantity+
		", beta_A_per_V2 "+quantity+", theta_per_V "+absent+", gm_max_S "+absent+", gm_idle_S "+quantity+", idss_A "+quantity+
		", method text, per_sweep [{sweep text, direction text, vgsth_V "+quantity+", vt_V "+quantity+"}], warnings [{code text, text text}]}]}",
		shapeOf(t, func(w io.Writer) error { return report.FitJSON(w, s) }))

	summary := "{n num, above num, mean num, sd num, median num, robust_sd num, min num, max num}"
	limit := "{k num, basis text, low num, high num}"
	s.Spread.Devices[0].Flagged = true
	s.Spread.Devices[0].Reasons = []lot.Reason{{Code: "drain-leakage", Text: "It leaks."}}
	require.Equal(t, "{schema num, lot text, populations num, split null, summary {vgsth_V "+summary+", vgs_idle_V "+summary+", vt_V "+summary+", beta_A_per_V2 "+summary+
		", gm_idle_S "+summary+", idss_A "+summary+"}, limits {vgs_idle_V "+limit+", gm_idle_S "+limit+"}, specification null, devices [{device text, flagged bool, reasons [{code text, text text}]}]}",
		shapeOf(t, func(w io.Writer) error { return report.SpreadJSON(w, s) }))

	require.Equal(t, "{schema num, lot text, by text, smallest_honest_width_V num, bins [{bin text, low_V num, high_V num, devices [{device text, value num, u num, maybe null}]}], unsorted [{device text, why text}]}",
		shapeOf(t, func(w io.Writer) error { return report.SortJSON(w, s) }))

	doc := report.ImportDoc{Lot: "L", Files: []report.ImportFile{{File: "a.csv", Fate: report.FateStored, Layout: "long", Dialect: map[string]string{"decimal": "point"}, Devices: 6, Sweeps: 6, Points: 180}}}
	require.Equal(t, "{schema num, lot text, files [{file text, fate text, layout text, dialect {decimal text}, devices num, sweeps num, points num, rows_refused num, reason null}]}",
		shapeOf(t, func(w io.Writer) error { return report.ImportJSON(w, doc) }))
}

// A quantity that only limits know is passed on, behind the others.
func TestLimitsOfOtherQuantities(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 8, Points: 30, Clean: true})
	s.Spread.Limits["gate_span_V"] = lot.Limit{K: 6, Basis: "this lot", Low: 0.38, High: 0.46}
	doc := decode[struct {
		Limits map[string]struct{ Low float64 }
	}](t, func(w io.Writer) error { return report.SpreadJSON(w, s) })
	require.Equal(t, 0.38, doc.Limits["gate_span_V"].Low)
	require.Regexp(t, `(?m)^gate span +mV +380 +460 +± 6 +this lot$`, show(t, report.SpreadTable, s, report.Style{}))
}

// Edges of transconductance are not volts and their keys do not say so.
func TestSortedByTransconductance(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 8, Points: 30, Clean: true})
	s.Sorting = &lot.Sorting{By: fit.KeyGmIdle, SmallestWidth: 0.05, Bins: []lot.Bin{{Name: "A", Low: 1.2, High: 1.3}}}
	require.Contains(t, shapeOf(t, func(w io.Writer) error { return report.SortJSON(w, s) }), "smallest_honest_width_S num, bins [{bin text, low_S num, high_S num, devices []}]")
}

func decode[T any](t *testing.T, write func(io.Writer) error) T {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, write(&b))
	var v T
	require.NoError(t, json.Unmarshal(b.Bytes(), &v), b.String())
	return v
}

type fitDoc struct {
	IdleCurrent *float64 `json:"idle_current_A"`
	Devices     []struct {
		Device, State string
		Vgsth         struct{ Value *float64 } `json:"vgsth_V"`
		Warnings      []struct{ Code, Text string }
	}
}

// Every device is listed, and one without a value says by a code why.
func TestEveryDeviceIsListedAndEveryNullHasItsReason(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	s.Devices = append(s.Devices, report.Device{Device: record.Device{Name: "never seen", Role: record.Sample}, Result: fit.NewResult()})
	doc := decode[fitDoc](t, func(w io.Writer) error { return report.FitJSON(w, s) })
	require.Len(t, doc.Devices, 21)
	states := map[string]bool{}
	for i, d := range doc.Devices {
		require.Equal(t, s.Devices[i].Name, d.Device)
		states[d.State] = true
		if d.Vgsth.Value == nil || d.State != "measured" {
			require.NotEmpty(t, d.Warnings, "%s is %s without a reason", d.Device, d.State)
			for _, w := range d.Warnings {
				require.NotEmpty(t, w.Code)
				require.NotEmpty(t, w.Text)
			}
		}
	}
	for _, want := range []string{"measured", "above", "open", "shorted", "wrong-way-round", "declined", "excluded"} {
		require.True(t, states[want], "no device is %s", want)
	}

	type listed struct{ Devices []struct{ Device string } }
	spread := decode[listed](t, func(w io.Writer) error { return report.SpreadJSON(w, s) })
	require.Len(t, spread.Devices, 21, "an excluded device or one without a sweep is missing")

	sorted := decode[struct {
		Bins     []struct{ Devices []struct{ Device string } }
		Unsorted []struct{ Device, Why string }
	}](t, func(w io.Writer) error { return report.SortJSON(w, s) })
	n := len(sorted.Unsorted)
	for _, b := range sorted.Bins {
		n += len(b.Devices)
	}
	require.Equal(t, 21, n)
	for _, u := range sorted.Unsorted {
		require.NotEmpty(t, u.Why, u.Device)
	}
}

func TestNotFiniteIsNull(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 4, Points: 1, Spots: true})
	s.TestCurrent = math.Inf(1)
	s.Devices[0].Result.Vgsth = fit.Quantity{Value: math.Inf(1), U: math.NaN(), N: 1}
	doc := decode[fitDoc](t, func(w io.Writer) error { return report.FitJSON(w, s) })
	require.Nil(t, doc.IdleCurrent)
	require.Nil(t, doc.Devices[0].Vgsth.Value)
	s.Spread.Summary[fit.KeyVgsth] = lot.Summary{N: 1, SD: math.NaN(), RobustSD: math.NaN(), Mean: 3}
	text := decode[map[string]any](t, func(w io.Writer) error { return report.SpreadJSON(w, s) })
	require.Nil(t, text["summary"].(map[string]any)["vgsth_V"].(map[string]any)["sd"])
}

func TestHostileNamesInJSON(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 3, Points: 5, Clean: true})
	s.Lot.Name = "</script>\u2028\x1b[31m\""
	s.Devices[0].Name = "=cmd|' /C calc'!A0"
	s.Devices[0].Note = "<&>"
	got := decode[struct {
		Lot     string
		Devices []struct{ Device string }
	}](t, func(w io.Writer) error { return report.FitJSON(w, s) })
	require.Equal(t, s.Lot.Name, got.Lot)
	require.Equal(t, s.Devices[0].Name, got.Devices[0].Device)
	decode[map[string]any](t, func(w io.Writer) error { return report.WriteJSON(w, s) })
}

// The export holds every reading with the decimals it was read with.
func TestExportHoldsEverything(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	sw := &s.Devices[0].Sweeps[0]
	sw.Columns = []record.Column{
		{Quantity: record.VG, Values: []float64{1, 2.50, 3}, Text: []byte(`[1.000,2.50,3e0]`)},
		{Quantity: record.ID, Values: []float64{1e-3, math.NaN(), 0.2}, Text: []byte(`[1.00e-3,null,200e-3]`)},
	}
	sw.Marks = []record.Mark{{Index: 1, Quantity: record.ID, State: record.Overload, Raw: "O.L"}}
	var b bytes.Buffer
	require.NoError(t, report.WriteJSON(&b, s))
	require.Contains(t, b.String(), `"columns":{"vg_V":[1.000,2.50,3e0],"id_A":[1.00e-3,null,200e-3]}`)
	require.Contains(t, b.String(), `{"point":1,"column":"id_A","state":"overload","raw":"O.L"}`)
	var doc struct {
		Lot     string
		Devices []struct {
			Device string
			Sweeps []struct {
				Columns map[string][]*float64
			}
		}
		Sorting struct{ Bins []any }
		Hash    string `json:"data_sha256"`
	}
	require.NoError(t, json.Unmarshal(b.Bytes(), &doc))
	require.Equal(t, "2612", doc.Lot)
	require.Len(t, doc.Devices, 20)
	require.Len(t, doc.Devices[5].Sweeps[0].Columns["vg_V"], len(s.Devices[5].Sweeps[0].Curve.Vg))
	require.NotEmpty(t, doc.Sorting.Bins)
	require.Equal(t, s.Hash, doc.Hash)
}

// Text that says something else than the values is not passed on.
func TestDecimalsMustAgreeWithTheValues(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 1, Points: 3, Clean: true})
	s.Devices[0].Sweeps[0].Columns[0] = record.Column{Quantity: record.VG, Values: []float64{1, 2, 3}, Text: []byte(`[1,2,4]`)}
	var b bytes.Buffer
	require.NoError(t, report.WriteJSON(&b, s))
	require.Contains(t, b.String(), `"vg_V":[1,2,3]`)
}
