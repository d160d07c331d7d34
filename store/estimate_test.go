package store

import (
	"context"
	"fmt"
	"path/filepath"
	"strconv"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func inventedEstimate(s record.Sweep, method, made string) record.Estimate {
	n := record.Known
	return record.Estimate{
		SweepID: s.ID, DataHash: s.DataHash, Method: method, Settings: `{"at_A":0.001}`, Version: "1", State: "measured", MadeAt: made,
		Values: map[string]record.Value{
			"vgsth_V": {Value: n(3.0123456789), U: n(0.0004), UBetween: n(0.002), UAbsolute: n(0.01), N: 4},
			"vt_V":    {Value: n(-2.5e-300), N: 1},
			"idss_A":  {},
		},
		Remarks: []record.Remark{{Code: "few-points", Text: "only \"two\" points <below>"}},
	}
}

func TestEstimates(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	const day = "2024-05-0%dT00:00:00.000Z"
	first := inventedEstimate(sweeps[0], "current", fmt.Sprintf(day, 1))
	second := inventedEstimate(sweeps[1], "current", fmt.Sprintf(day, 1))
	second.Remarks, second.Values = nil, map[string]record.Value{}
	newer := inventedEstimate(sweeps[0], "sqrt", fmt.Sprintf(day, 2))
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.PutEstimates([]record.Estimate{first, second, newer}))
	})
	update(t, db, func(tx *Tx) {
		latest, err := tx.Estimates(lot.ID)
		require.NoError(t, err)
		require.Equal(t, []record.Estimate{newer, second}, latest)
		known, err := tx.EstimatesBy(lot.ID, "current", first.Settings, "1")
		require.NoError(t, err)
		require.Equal(t, []record.Estimate{first, second}, known)
		for _, other := range [][3]string{{"linear", first.Settings, "1"}, {"current", "{}", "1"}, {"current", first.Settings, "2"}} {
			known, err = tx.EstimatesBy(lot.ID, other[0], other[1], other[2])
			require.NoError(t, err)
			require.Empty(t, known)
		}
		all, err := tx.EstimatesOf(sweeps[0].ID)
		require.NoError(t, err)
		require.Equal(t, []record.Estimate{first, newer}, all)

		// The same key adds nothing, whatever it says.
		same := first
		same.State, same.MadeAt = "declined", fmt.Sprintf(day, 9)
		require.NoError(t, tx.PutEstimates([]record.Estimate{same}))
		latest, err = tx.Estimates(lot.ID)
		require.NoError(t, err)
		require.Equal(t, []record.Estimate{newer, second}, latest)

		// Another part of the key adds a row.
		for i, change := range []func(*record.Estimate){
			func(e *record.Estimate) { e.Method = "m" },
			func(e *record.Estimate) { e.Settings = "{}" },
			func(e *record.Estimate) { e.Version = "2" },
		} {
			e := first
			change(&e)
			require.NoError(t, tx.PutEstimates([]record.Estimate{e}))
			all, err := tx.EstimatesOf(sweeps[0].ID)
			require.NoError(t, err)
			require.Len(t, all, 3+i)
		}
	})
	refused := func(change func(*record.Estimate), want error, says string) {
		t.Helper()
		e := inventedEstimate(sweeps[0], "refused", "")
		change(&e)
		err := db.Update(background, func(tx *Tx) error { return tx.PutEstimates([]record.Estimate{e}) })
		require.ErrorIs(t, err, want)
		require.ErrorContains(t, err, says)
	}
	refused(func(e *record.Estimate) { e.DataHash = sweeps[1].DataHash }, record.ErrInvalid, "the sweep has "+sweeps[0].DataHash)
	refused(func(e *record.Estimate) { e.SweepID = "x" }, ErrNotFound, "estimate of sweep x")
	refused(func(e *record.Estimate) { e.MadeAt = "x" }, record.ErrInvalid, "time of making")
	refused(func(e *record.Estimate) { e.Settings = "x" }, record.ErrInvalid, "json_valid")
}

func TestEstimateTimeIsFilled(t *testing.T) {
	db := newStore(t)
	_, sweeps := fill(t, db)
	es := []record.Estimate{inventedEstimate(sweeps[0], "current", "")}
	update(t, db, func(tx *Tx) { require.NoError(t, tx.PutEstimates(es)) })
	require.NoError(t, record.CheckStamp("", es[0].MadeAt))
}

func benchmarkEstimates(b *testing.B, n int) (*DB, record.Lot, []record.Estimate) {
	db, err := Open(background, filepath.Join(b.TempDir(), "x.db"), Options{Create: true})
	require.NoError(b, err)
	b.Cleanup(func() { require.NoError(b, db.Close()) })
	var lot record.Lot
	es := make([]record.Estimate, n)
	update(b, db, func(tx *Tx) {
		l, ds := addLot(b, tx, "A", n)
		lot = l
		ss := make([]record.Sweep, n)
		for i := range ss {
			ss[i] = invented(ds[i].ID, 2)
		}
		require.NoError(b, tx.AddSweeps(ss))
		for i := range es {
			es[i] = inventedEstimate(ss[i], "current", "")
			es[i].Values = map[string]record.Value{}
			for k := range 12 {
				x := record.Known(3 + float64(i)/1e4 + float64(k)/7)
				es[i].Values["quantity_"+strconv.Itoa(k)] = record.Value{Value: x, U: record.Known(1e-4 / 7), UBetween: x, UAbsolute: x, N: 5}
			}
		}
	})
	return db, lot, es
}

func BenchmarkPutEstimates(b *testing.B) {
	db, _, es := benchmarkEstimates(b, 5000)
	for i := 0; b.Loop(); i++ {
		for k := range es {
			es[k].Version = strconv.Itoa(i)
		}
		require.NoError(b, db.Update(background, func(tx *Tx) error { return tx.PutEstimates(es) }))
	}
}

func BenchmarkEstimates(b *testing.B) {
	db, lot, es := benchmarkEstimates(b, 5000)
	require.NoError(b, db.Update(background, func(tx *Tx) error { return tx.PutEstimates(es) }))
	for b.Loop() {
		require.NoError(b, db.View(context.Background(), func(tx *Tx) error {
			list, err := tx.EstimatesBy(lot.ID, "current", es[0].Settings, "1")
			require.Len(b, list, len(es))
			return err
		}))
	}
}
