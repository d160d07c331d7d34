package report_test

import (
	"bytes"
	"encoding/json"
	"io"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit/bias"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
	"gatesill/store/record"
)

// biased lays out the bias of an invented lot in a divider with a trimmer.
func biased(s report.Sheet) (report.Bias, error) {
	l := bias.Lot{Name: s.Lot.Name, Populations: 1}
	for _, d := range s.Devices {
		l.Devices = append(l.Devices, lot.Device{Name: d.Name, Control: d.Role == record.Control, Result: d.Result})
	}
	tempco := bias.NoTempco()
	tempco.Value, tempco.Basis = -3e-3, bias.TempcoGiven
	p, err := bias.Of(l, bias.Options{
		Idle: s.IdleCurrent, Beta: math.NaN(), Temp: 25, Tempco: tempco, Turns: 25,
		Network: &bias.Network{Supply: 12, SupplyTol: 0.04, Top: 8200, Bottom: 3000, Trimmer: 500, In: bias.AtGate, Tol: 0.01, TrimTol: 0.1},
	})
	if err != nil {
		return report.Bias{}, err
	}
	b := report.Bias{Sheet: &s, Plan: p, AssumedTrimmer: true}
	b.Extremes = p.ExtremeLine(lineConditions)
	return b, nil
}

var lineConditions = bias.LineOptions{Source: 0.1, VDS: 12, Rth: 2, Sink: 50, Temp: 25, Tempco: -3e-3}

func biasOf(w io.Writer, s report.Sheet, style report.Style) error {
	b, err := biased(s)
	if err != nil {
		return err
	}
	return report.BiasTable(w, b, style)
}

func biasLine(w io.Writer, s report.Sheet, style report.Style) error {
	b, err := biased(s)
	if err != nil {
		return err
	}
	b.Lines = []*bias.Line{b.Extremes, b.Extremes}
	return report.BiasTable(w, b, style)
}

// TestBiasJSON: every key of the object is there, numbers that were not had are null, and
// every device of the lot is listed.
func TestBiasJSON(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	b, err := biased(s)
	require.NoError(t, err)
	b.Lines = []*bias.Line{b.Extremes}
	var out bytes.Buffer
	require.NoError(t, report.BiasJSON(&out, b))
	var doc map[string]any
	require.NoError(t, json.Unmarshal(out.Bytes(), &doc))
	for _, key := range []string{"schema", "lot", "idle_A", "centre_V", "tolerance_interval", "covered", "choices", "devices", "bins", "lines", "trimmer_for_lot", "temperature", "against", "ways", "warnings"} {
		require.Contains(t, doc, key)
	}
	require.Len(t, doc["devices"], len(s.Devices))
	for _, c := range doc["choices"].([]any) {
		for _, key := range []string{"top_ohm", "bottom_ohm", "gate_V", "idle_low_A", "idle_high_A"} {
			require.Contains(t, c, key)
		}
	}
	covered := doc["covered"].(map[string]any)
	for _, key := range []string{"count", "of", "share_outside_upper"} {
		require.Contains(t, covered, key)
	}
	require.Nil(t, doc["against"])
	require.NotContains(t, out.String(), "NaN")
}
