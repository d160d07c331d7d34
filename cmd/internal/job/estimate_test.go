package job

import (
	"context"
	"io"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store"
	"gatesill/store/record"
)

// The same fit keeps one estimate; what changes its outcome keeps another beside
// it.
func TestEstimatesAreKeptOncePerSettings(t *testing.T) {
	dir := t.TempDir()
	ctx := context.Background()
	env := &Env{Store: filepath.Join(dir, "s.db"), Out: io.Discard, Err: io.Discard, Quiet: true, Version: "test"}
	file := filepath.Join(dir, "c.csv")
	require.NoError(t, os.WriteFile(file, []byte("device,vg_V,id_mA\nD1,2.8,0.2\nD1,2.9,1.9\nD1,3.0,9.8\nD1,3.1,29\n"), 0o644))
	rq := ImportRequest{Lot: "a", Files: []string{file}}
	rq.Table.Given.Circuit = record.Diode
	require.NoError(t, Import(ctx, env, rq))
	kept := func() (n int) {
		require.NoError(t, Fit(ctx, env, "a", SheetOptions{Method: "auto"}))
		require.NoError(t, env.view(ctx, func(tx *store.Tx) error {
			lot, err := tx.Lot("a")
			if err != nil {
				return err
			}
			sweeps, err := tx.Sweeps(lot.ID, false)
			if err != nil {
				return err
			}
			es, err := tx.EstimatesOf(sweeps[0].ID)
			n = len(es)
			return err
		}))
		return n
	}
	require.Equal(t, 1, kept())
	require.Equal(t, 1, kept())
	top := record.Known(4)
	require.NoError(t, LotEditJob(ctx, env, "a", LotEdit{VgsthMax: &top}, ""))
	require.Equal(t, 2, kept())
	require.Equal(t, 2, kept())
}
