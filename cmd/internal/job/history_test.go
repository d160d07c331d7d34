package job

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// A lot of five is judged by the gains, too, of an earlier lot of the same part
// (curves of a square law with mobility degradation, self-made).
func TestHistoryOfGains(t *testing.T) {
	dir := t.TempDir()
	ctx := context.Background()
	var out bytes.Buffer
	env := &Env{Store: filepath.Join(dir, "s.db"), Out: &out, Err: io.Discard, Quiet: true, Version: "test"}
	rng := rand.New(rand.NewPCG(1, 1))
	add := func(lot string, n int, times func(i int) float64) {
		var rows strings.Builder
		rows.WriteString("device,vg_V,id_A\n")
		for i := range n {
			vt := 3 + 0.05*rng.NormFloat64()
			beta := 2 * math.Exp(0.05*rng.NormFloat64()) * times(i)
			for v := 2.8; v < 4.2; v += 0.05 {
				x := max(v-vt, 0)
				fmt.Fprintf(&rows, "D%d,%.3f,%.6f\n", i+1, v, beta/2*x*x/(1+0.1*x)*(1+1e-3*rng.NormFloat64()))
			}
		}
		file := filepath.Join(dir, lot+".csv")
		require.NoError(t, os.WriteFile(file, []byte(rows.String()), 0o644))
		part, idle := "X1", record.Known(0.25)
		require.NoError(t, LotAdd(ctx, env, lot, LotEdit{Part: &part, IdleCurrent: &idle}))
		rq := ImportRequest{Lot: lot, Files: []string{file}}
		rq.Table.Given.Circuit = record.Diode
		require.NoError(t, Import(ctx, env, rq))
	}
	alike := func(int) float64 { return 1 }
	add("many", 20, alike)
	add("few", 5, func(i int) float64 {
		if i == 3 {
			return 0.6
		}
		return 1
	})
	env.JSON = true
	out.Reset()
	require.NoError(t, Spread(ctx, env, "few", SheetOptions{Method: "auto"}, false))
	var doc struct {
		Limits  map[string]struct{ Basis string }
		Devices []struct {
			Device  string
			Reasons []struct{ Code, Text string }
		}
	}
	require.NoError(t, json.Unmarshal(out.Bytes(), &doc))
	for _, k := range []string{"vgs_idle_V", "gm_idle_S", "beta_A_per_V2"} {
		require.Equal(t, "part history", doc.Limits[k].Basis, k)
	}
	for i, d := range doc.Devices {
		off := slices.ContainsFunc(d.Reasons, func(r struct{ Code, Text string }) bool { return r.Code == "off-family-gain" })
		require.Equal(t, i == 3, off, "%s: %v", d.Device, d.Reasons)
	}
}
