package store

import (
	"context"
	"path/filepath"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// pairOf is a set of two devices, not kept yet.
func pairOf(a, b record.Device) record.Set {
	member := func(d record.Device, v float64) record.SetMember {
		return record.SetMember{DeviceID: d.ID, Device: d.Name, Readings: map[string]record.Value{
			"vgs_idle_V": {Value: record.Known(v), U: record.Known(0.0004), N: 3}, "gm_idle_S": {Value: record.Known(1.4)}}}
	}
	return record.Set{
		At: record.Known(0.25), SourceResistor: record.Known(0.22), Spread: record.Known(0.004),
		By:      []record.Criterion{{Quantity: "vgs_idle_V", Within: record.Known(0.01), Weight: record.Known(1)}, {Quantity: "gm_idle_S", Within: record.Known(0.05)}},
		Members: []record.SetMember{member(a, 3.38), member(b, 3.384)},
	}
}

func TestSets(t *testing.T) {
	db := newStore(t)
	var lot record.Lot
	var ds []record.Device
	update(t, db, func(tx *Tx) { lot, ds = addLot(t, tx, "A", 6) })
	first, second := pairOf(ds[0], ds[3]), pairOf(ds[1], ds[2])
	first.Unit = "amplifier 7"
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.PutSet(&first, ""))
		require.NoError(t, tx.PutSet(&second, ""))
	})
	require.Len(t, first.ID, 36)
	require.Equal(t, []any{1, "S1", record.Reserved}, []any{first.Number, first.Name, first.State})
	require.Equal(t, 2, second.Number)
	for i := range first.Members { // what queries fill
		first.Members[i].LotID, first.Members[i].Lot = lot.ID, "A"
	}
	view(t, db, func(tx *Tx) {
		got, err := tx.Set(first.ID)
		require.NoError(t, err)
		require.Equal(t, first, got)
		for _, text := range []string{"1", "S1", first.ID, first.ID[:35]} {
			list, err := tx.FindSets(text)
			require.NoError(t, err)
			require.Len(t, list, 1, text)
			require.Equal(t, first.ID, list[0].ID)
		}
		for _, text := range []string{"3", "S3", "", first.ID[:3], "%", "____"} {
			list, err := tx.FindSets(text)
			require.NoError(t, err)
			require.Empty(t, list, text)
		}
		list, err := tx.FindSets(first.ID[:4])
		require.NoError(t, err)
		require.Len(t, list, 2, "made in the same hour: both begin so")
		in, err := tx.SetOf(ds[3].ID)
		require.NoError(t, err)
		require.Equal(t, "S1", in.Name)
		_, err = tx.SetOf(ds[4].ID)
		require.ErrorIs(t, err, ErrNotFound)
	})

	// A device is in one set at a time, and a refused set leaves nothing behind.
	both := pairOf(ds[4], ds[0])
	err := db.Update(background, func(tx *Tx) error { return tx.PutSet(&both, "") })
	require.ErrorIs(t, err, ErrExists)
	require.ErrorContains(t, err, `device "D0001": in set S1`)
	for name, s := range map[string]record.Set{
		"one device":     {Members: second.Members[:1]},
		"used at once":   {State: record.Used, Unit: "u", Members: second.Members},
		"released":       {State: record.Released, Reason: "r", Members: second.Members},
		"the same twice": {Members: []record.SetMember{second.Members[0], second.Members[0]}},
	} {
		require.ErrorIs(t, db.Update(background, func(tx *Tx) error { return tx.PutSet(&s, "") }), record.ErrInvalid, name)
	}

	update(t, db, func(tx *Tx) {
		used, err := tx.UseSet(first.ID, "", "final test passed")
		require.NoError(t, err)
		require.Equal(t, []any{record.Used, "amplifier 7"}, []any{used.State, used.Unit})
		_, err = tx.UseSet(second.ID, "", "")
		require.ErrorIs(t, err, record.ErrInvalid, "in no unit")
		_, err = tx.ReleaseSet(first.ID, "")
		require.ErrorIs(t, err, record.ErrInvalid, "without a reason")
		released, err := tx.ReleaseSet(first.ID, "D0001 failed")
		require.NoError(t, err)
		require.Equal(t, first.Members, released.Members, "what was in it stays on record")
		_, err = tx.UseSet(first.ID, "amplifier 8", "")
		require.ErrorIs(t, err, record.ErrInvalid, "does not come back")
		require.NoError(t, tx.PutSet(&both, ""), "free again")
		require.Equal(t, "S3", both.Name, "numbers are not used again")
		trail, err := tx.Changes("set", first.ID)
		require.NoError(t, err)
		require.Equal(t, []string{"set S1 created by tester", "state: reserved > used (final test passed)", "reason:  > final test passed (final test passed)",
			"state: used > released (D0001 failed)", "reason: final test passed > D0001 failed (D0001 failed)"}, briefly(trail))
		list, err := tx.SetsOf(ds[0].ID)
		require.NoError(t, err)
		require.Equal(t, []string{"S1", "S3"}, []string{list[0].Name, list[1].Name})
		for id, want := range map[string]int{lot.ID: 3, "": 3, "other": 0} {
			list, err := tx.Sets(id)
			require.NoError(t, err)
			require.Len(t, list, want)
		}
	})
}

// Whatever writes to the file, SQLite itself keeps a device out of a second set, and
// a set as it was.
func TestSetsBySQL(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true, Who: "tester"})
	require.NoError(t, err)
	var s record.Set
	var ds []record.Device
	update(t, db, func(tx *Tx) {
		_, ds = addLot(t, tx, "A", 4)
		s = pairOf(ds[0], ds[1])
		require.NoError(t, tx.PutSet(&s, ""))
		other := pairOf(ds[2], ds[3])
		require.NoError(t, tx.PutSet(&other, ""))
	})
	_, err = db.writes.Exec("INSERT OR REPLACE INTO device_set SELECT * FROM device_set")
	require.ErrorContains(t, err, "never deleted", "in place of a row")
	require.NoError(t, db.Close())
	pool := raw(t, path)
	refuse := func(statement, says string) {
		t.Helper()
		_, err := pool.Exec(statement)
		require.ErrorContains(t, err, says, statement)
	}
	again := "INSERT INTO set_member SELECT (SELECT id FROM device_set WHERE number = 2), 3, device_id, readings FROM set_member WHERE device_id = '" + ds[0].ID + "'"
	refuse(again, "in a set already")
	for _, column := range []string{"at_a = 1", "source_resistor_ohm = 1", "criteria = '[]'", "spread_v = 0", "created_by = ''"} {
		refuse("UPDATE device_set SET "+column, "never changed")
	}
	refuse("UPDATE set_member SET readings = '{}'", "never changed")
	refuse("DELETE FROM set_member", "never deleted")
	refuse("DELETE FROM device_set", "never deleted")
	refuse("INSERT OR REPLACE INTO set_member SELECT * FROM set_member", "in a set already")
	refuse("UPDATE device_set SET state = 'sold'", "CHECK")
	_, err = pool.Exec("UPDATE device_set SET state = 'released', reason = 'r' WHERE number = 1")
	require.NoError(t, err)
	refuse("UPDATE device_set SET state = 'reserved' WHERE number = 1", "does not come back")
	_, err = pool.Exec(again)
	require.NoError(t, err, "free again")
	_, err = pool.Exec("UPDATE device_set SET state = 'used', unit = 'u' WHERE number = 2")
	require.NoError(t, err)
	refuse("INSERT INTO set_member SELECT (SELECT id FROM device_set WHERE number = 2), 4, '"+ds[1].ID+"', '{}'", "no device joins")

	var n int
	require.NoError(t, pool.QueryRow(`SELECT count(*) FROM device_in_set WHERE set_name = 'S1' AND lot = 'A' AND quantity = 'vgs_idle_V' AND abs(value - 3.382) < 0.0021`).Scan(&n))
	require.Equal(t, 2, n)
}

// Of many at once only one gets a device.
func TestSetsAtOnce(t *testing.T) {
	db := newStore(t)
	var ds []record.Device
	update(t, db, func(tx *Tx) { _, ds = addLot(t, tx, "A", 9) })
	var wg sync.WaitGroup
	var mu sync.Mutex
	got := 0
	for i := 1; i < len(ds); i++ {
		wg.Go(func() {
			s := pairOf(ds[0], ds[i])
			if err := db.Update(context.Background(), func(tx *Tx) error { return tx.PutSet(&s, "") }); err == nil {
				mu.Lock()
				got++
				mu.Unlock()
			}
		})
	}
	wg.Wait()
	require.Equal(t, 1, got)
	view(t, db, func(tx *Tx) {
		list, err := tx.SetsOf(ds[0].ID)
		require.NoError(t, err)
		require.Len(t, list, 1)
	})
}

// TestFormTwo brings a store of the second form forward: its audit trail stays as
// it was, and sets can be made in it.
func TestFormTwo(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gatesill.db")
	db, err := open(background, path, Options{Create: true, Who: "tester"}, migrations[:2])
	require.NoError(t, err)
	var ds []record.Device
	var before []record.Change
	update(t, db, func(tx *Tx) {
		var lot record.Lot
		lot, ds = addLot(t, tx, "A", 2)
		ds[0].Note = "x"
		require.NoError(t, tx.PutDevice(&ds[0], "why"))
		before, err = tx.AllChanges(lot.ID)
		require.NoError(t, err)
	})
	require.NoError(t, db.Close())
	_, err = Open(background, path, Options{ReadOnly: true})
	require.ErrorIs(t, err, ErrOlder)
	db = openStore(t, path, Options{Who: "tester"})
	update(t, db, func(tx *Tx) {
		s := pairOf(ds[0], ds[1])
		require.NoError(t, tx.PutSet(&s, ""))
		_, err := tx.ReleaseSet(s.ID, "no longer wanted")
		require.NoError(t, err)
		after, err := tx.AllChanges(ds[0].LotID)
		require.NoError(t, err)
		require.Equal(t, before, after)
	})
	_, err = db.writes.Exec("DELETE FROM change")
	require.ErrorContains(t, err, "never deleted")
	fresh, _, _ := closedStore(t)
	require.Equal(t, schema(t, fresh), schema(t, path))
	copies, err := filepath.Glob(path + ".form2.*")
	require.NoError(t, err)
	require.Len(t, copies, 1)
}
