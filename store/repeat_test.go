package store

import (
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func TestRepeatsOn(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, ds := addLot(t, tx, "A", 2)
		other, others := addLot(t, tx, "B", 1)
		require.Equal(t, lot.PartID, other.PartID)
		attic, cellar := record.Session{Bench: "attic"}, record.Session{Bench: "cellar"}
		require.NoError(t, tx.AddSession(&attic))
		require.NoError(t, tx.AddSession(&cellar))
		points := 1
		add := func(device, session string, dirs ...record.Direction) (ids []string) {
			for _, d := range dirs {
				points++
				s := invented(device, points)
				s.SessionID, s.Direction = session, d
				list := []record.Sweep{s}
				require.NoError(t, tx.AddSweeps(list))
				ids = append(ids, list[0].ID)
			}
			return ids
		}
		repeats := func(bench string) []Repeats {
			list, err := tx.RepeatsOn(lot.PartID, bench)
			require.NoError(t, err)
			return list
		}
		add(ds[0].ID, attic.ID, record.Up, record.Down) // one insertion
		add(ds[0].ID, cellar.ID, record.Up)             // another session
		require.Empty(t, repeats("attic"))
		more := add(ds[0].ID, attic.ID, record.Up, record.Down, record.Up)
		add(ds[1].ID, attic.ID, record.Up)
		add(others[0].ID, attic.ID, record.Spot, record.Spot)
		require.Equal(t, []Repeats{{"A", 3}, {"B", 1}}, repeats("attic"))
		require.Empty(t, repeats("cellar"))
		require.NoError(t, tx.ExcludeSweep(more[0], true, "bad contact"))
		require.Equal(t, []Repeats{{"A", 2}, {"B", 1}}, repeats("attic"))
		none, err := tx.RepeatsOn("x", "attic")
		require.NoError(t, err)
		require.Empty(t, none)
	})
}
