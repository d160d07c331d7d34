package job

import (
	"bytes"
	"context"
	"encoding/csv"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// TestPointsComeBack imports tables of each layout, exports the points, imports
// those into another lot and exports them again: readings, states, directions
// and order must be the same to the digit; only the sweeps have new names.
func TestPointsComeBack(t *testing.T) {
	for _, c := range []struct {
		name, text string
		channel    record.Channel
		circuit    record.Circuit
	}{
		{"long, up and down, over range", "device,vg_V,id_mA,vl_V\nD1,2.8,0.20,0.002\nD1,2.9,1.90,0.019\nD1,3.0,9.8,0.098\nD1,3.1,29,0.29\nD1,3.2,OL,0.6\n" +
			"D1,3.1,29.1,0.29\nD1,3.0,9.9,0.099\nD1,2.9,1.9,0.019\nD1,2.8,0.2,0.002\n", "", record.Diode},
		{"wide", "Vg (V);D1 (mA);D2 (mA)\n2,8;0,20;0,10\n2,9;1,90;1,20\n3,0;9,80;7,70\n3,1;29,0;23,0\n", "", record.Diode},
		{"spots with transconductance", "serial,vgs_at_250mA_V,gm_at_250mA_S\n=P1,3.380,1.406\n../P2,3.290,1.385\nP3,3.306,1.389\n", "", ""},
		{"p-channel", "device,vg_V,id_A\nD1,-2.8,-1e-4\nD1,-2.9,-1.9e-3\nD1,-3.0,-9.8E-3\nD1,-3.1,-2.9e-2\n", record.PChannel, record.Diode},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			env := &Env{Store: filepath.Join(dir, "s.db"), Out: io.Discard, Err: io.Discard, Quiet: true, Version: "test"}
			first := filepath.Join(dir, "first.csv")
			require.NoError(t, os.WriteFile(first, []byte(c.text), 0o644))
			read := func(lot, file string) string {
				rq := ImportRequest{Lot: lot, Files: []string{file}, Channel: c.channel}
				rq.Table.Given.Circuit = c.circuit
				require.NoError(t, Import(context.Background(), env, rq))
				out := filepath.Join(dir, lot+".csv")
				require.NoError(t, Export(context.Background(), env, lot, out, true, SheetOptions{Method: "auto"}))
				return out
			}
			once := read("once", first)
			twice := read("twice", once)
			require.Equal(t, withoutSweeps(t, once), withoutSweeps(t, twice))
			require.Greater(t, len(withoutSweeps(t, once)), 3)
		})
	}
}

// withoutSweeps gives the rows of a points file with its sweeps numbered.
func withoutSweeps(t *testing.T, path string) [][]string {
	t.Helper()
	b, err := os.ReadFile(path)
	require.NoError(t, err)
	rows, err := csv.NewReader(bytes.NewReader(b)).ReadAll()
	require.NoError(t, err)
	names := map[string]string{}
	for _, r := range rows[1:] {
		if _, ok := names[r[1]]; !ok {
			names[r[1]] = strings.Repeat("i", len(names)+1)
		}
		r[1] = names[r[1]]
	}
	return rows
}
