package report_test

import (
	"bytes"
	"encoding/csv"
	"math"
	"strconv"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/report"
	"gatesill/report/internal/invented"
	"gatesill/store/record"
)

// readCSV reads a file back with every row checked to have the columns of the
// first, and gives its rows by their heads.
func readCSV(t *testing.T, data []byte) []map[string]string {
	t.Helper()
	r := csv.NewReader(bytes.NewReader(data)) // FieldsPerRecord 0: all rows as the first
	all, err := r.ReadAll()
	require.NoError(t, err)
	var rows []map[string]string
	for _, rec := range all[1:] {
		row := map[string]string{}
		for i, h := range all[0] {
			_, twice := row[h]
			require.False(t, twice, "column %s twice", h)
			row[h] = rec[i]
		}
		rows = append(rows, row)
	}
	return rows
}

func TestDevicesCSV(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1, PChannel: true})
	s.Devices[0].Note = "two lines,\n\"quoted\""
	var b bytes.Buffer
	require.NoError(t, report.WriteDevicesCSV(&b, s))
	rows := readCSV(t, b.Bytes())
	require.Len(t, rows, 20)
	bin, _ := s.BinOf()
	for i, row := range rows {
		d := &s.Devices[i]
		require.Equal(t, d.Name, row["device"])
		require.Equal(t, string(d.State()), row["state"])
		require.Equal(t, bin[d.Name], row["bin"])
		if d.Result.Vgsth.Ok() {
			got, err := strconv.ParseFloat(row["vgsth_V"], 64)
			require.NoError(t, err)
			require.Equal(t, d.Result.Vgsth.Value, got, "all digits are kept")
			require.Negative(t, got, "the sign of a p-channel part is kept")
			require.Equal(t, strconv.Itoa(d.Result.Vgsth.N), row["vgsth_n"])
		} else {
			require.Empty(t, row["vgsth_V"])
			require.NotEmpty(t, row["why"])
		}
	}
	require.Equal(t, s.Devices[0].Note, rows[0]["note"])
}

// What stands in a points file is what was read, to the last digit.
func TestPointsCSVReadsBack(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	sw := &s.Devices[1].Sweeps[0]
	sw.Columns = []record.Column{
		{Quantity: record.VG, Values: []float64{1, 2.5, 3}, Text: []byte(`[1.000,2.50,3.000]`)},
		{Quantity: record.ID, Values: []float64{math.NaN(), math.NaN(), math.NaN()}},
		{Quantity: record.VL, Values: []float64{0.1, 0.2, 0.3}},
	}
	sw.Marks = []record.Mark{{Index: 0, Quantity: record.ID, State: record.Underload}, {Index: 1, Quantity: record.ID, State: record.Overload}, {Index: 2, Quantity: record.ID, State: record.Missing}}
	var b bytes.Buffer
	require.NoError(t, report.WritePointsCSV(&b, s))
	rows := readCSV(t, b.Bytes())
	k, leftOut := 0, 0
	for i := range s.Devices {
		for _, sw := range s.Devices[i].Sweeps {
			vg, id := sw.Values(record.VG), sw.Values(record.ID)
			for p := range vg {
				row := rows[k]
				k++
				require.Equal(t, s.Devices[i].Name, row["device"])
				require.Equal(t, sw.ID, row["sweep"])
				require.Equal(t, strconv.Itoa(p+1), row["point"])
				got, err := strconv.ParseFloat(row["vg_V"], 64)
				require.NoError(t, err)
				require.Equal(t, vg[p], got)
				if !math.IsNaN(id[p]) {
					got, err = strconv.ParseFloat(row["id_A"], 64)
					require.NoError(t, err)
					require.Equal(t, id[p], got)
				}
				if row["left_out"] != "" {
					leftOut++
				}
			}
		}
	}
	require.Equal(t, len(rows), k)
	require.Positive(t, leftOut)
	first := len(s.Devices[0].Sweeps[0].Curve.Vg)
	require.Equal(t, []string{"-OL", "OL", ""}, []string{rows[first]["id_A"], rows[first+1]["id_A"], rows[first+2]["id_A"]})
	require.Equal(t, "2.50", rows[first+1]["vg_V"], "the decimals as they were read")
	require.Equal(t, "0.2", rows[first+1]["vl_V"])
	require.Empty(t, rows[0]["vl_V"], "a column that a sweep has not is empty")
}

// Names are data: a spreadsheet formula stays as it is, in quotes, and can be
// warned of.
func TestFormulaLikeNamesStayExact(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 4, Points: 2, Clean: true})
	names := []string{"=1+1", "+49", "-D1", "@x, \"y\""}
	for i, n := range names {
		s.Devices[i].Name = n
	}
	var b bytes.Buffer
	require.NoError(t, report.WriteDevicesCSV(&b, s))
	for i, row := range readCSV(t, b.Bytes()) {
		require.Equal(t, names[i], row["device"])
	}
	require.Contains(t, b.String(), `,"=1+1",`)
	require.Equal(t, names, report.FormulaLike(s))
}
