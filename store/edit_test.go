package store

import (
	"fmt"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// briefly writes changes as "field: old > new (reason)".
func briefly(trail []record.Change) []string {
	var out []string
	for _, c := range trail {
		if c.Field == "created" {
			out = append(out, c.What+" "+c.Subject+" created by "+c.Who)
			continue
		}
		out = append(out, fmt.Sprintf("%s: %s > %s (%s)", c.Field, c.Old, c.New, c.Reason))
	}
	return out
}

func TestPart(t *testing.T) {
	db := newStore(t)
	n := record.Known
	p := record.Part{Name: "P1", Channel: record.PChannel, Mode: record.Depletion, OffVoltage: n(5), TestCurrent: n(0.001), TestVDS: n(0.1),
		IdleCurrent: n(0.25), VgsthMin: n(-4), VgsthMax: n(-2), MaxVgs: n(20), MaxVds: n(65), MaxID: n(5), MaxPD: n(80), MaxTemp: n(175), Rth: n(1.5), Note: "note"}
	update(t, db, func(tx *Tx) { require.NoError(t, tx.PutPart(&p, "")) })
	require.Len(t, p.ID, 36)
	update(t, db, func(tx *Tx) {
		got, err := tx.Part("P1")
		require.NoError(t, err)
		require.Equal(t, p, got)
		got, err = tx.PartByID(p.ID)
		require.NoError(t, err)
		require.Equal(t, p, got)

		byName := p
		byName.ID, byName.IdleCurrent, byName.Rth = "", n(0.3), record.Num{}
		require.NoError(t, tx.PutPart(&byName, "new board"))
		require.Equal(t, p.ID, byName.ID, "the part of that name")
		require.NoError(t, tx.PutPart(&byName, "once more"), "nothing changed: no entry")
		byName.Name = "P1B"
		require.NoError(t, tx.PutPart(&byName, "typing error"))
		trail, err := tx.Changes("part", p.ID)
		require.NoError(t, err)
		require.Equal(t, []string{"part P1B created by tester", "idle_current_a: 0.25 > 0.3 (new board)", "rth_k_per_w: 1.5 >  (new board)",
			"name: P1 > P1B (typing error)"}, briefly(trail))
		for _, c := range trail {
			require.NoError(t, record.CheckStamp("time", c.At))
			require.Equal(t, "tester", c.Who)
		}

		second := record.NewPart("P2")
		require.NoError(t, tx.PutPart(&second, ""))
		got, err = tx.Part("P2")
		require.NoError(t, err)
		require.Equal(t, second, got, "unknown numbers stay unknown")
		second.Name = "P1B"
		require.ErrorIs(t, tx.PutPart(&second, ""), ErrExists)
		require.ErrorIs(t, tx.PutPart(&record.Part{}, ""), record.ErrInvalid)
		_, err = tx.Part("P1")
		require.ErrorIs(t, err, ErrNotFound)
		require.ErrorContains(t, err, `part "P1": not found`)
		p10 := record.NewPart("P10")
		require.NoError(t, tx.PutPart(&p10, ""))
		parts, err := tx.Parts()
		require.NoError(t, err)
		require.Equal(t, []string{"P1B", "P2", "P10"}, []string{parts[0].Name, parts[1].Name, parts[2].Name})
	})
}

func TestLot(t *testing.T) {
	db := newStore(t)
	n := record.Known
	update(t, db, func(tx *Tx) {
		p := record.NewPart("P")
		require.NoError(t, tx.PutPart(&p, ""))
		l := record.Lot{Name: "A10", PartID: p.ID, Supplier: "S", DateCode: "2401", Marking: "M", Quantity: n(250), Sampled: "every tenth",
			Margin: record.Amount{Value: 0.05, Unit: "V"}, Guard: record.Amount{Value: 2, Unit: "u"}, SendBack: "outside-limits", Note: "n"}
		require.NoError(t, tx.PutLot(&l, ""))
		require.NoError(t, record.CheckStamp("", l.CreatedAt))
		require.NoError(t, record.CheckStamp("", l.MarginSetAt))
		require.NoError(t, record.CheckStamp("", l.DecidedAt))
		got, err := tx.Lot("A10")
		require.NoError(t, err)
		require.Equal(t, l, got)

		bare := record.Lot{Name: "A9", PartID: p.ID, MarginSetAt: "2001-01-01T00:00:00Z"}
		require.NoError(t, tx.PutLot(&bare, ""))
		require.Empty(t, bare.MarginSetAt, "no margin, so it was never set")
		got, err = tx.LotByID(bare.ID)
		require.NoError(t, err)
		require.Equal(t, bare, got)

		require.NoError(t, tx.AddDevices(l.ID, []record.Device{{Name: "D1"}, {Name: "D2"}}))
		lots, err := tx.Lots()
		require.NoError(t, err)
		require.Equal(t, []string{"A9", "A10"}, []string{lots[0].Name, lots[1].Name})
		require.Equal(t, []int{0, 2}, []int{lots[0].DevicesCount, lots[1].DevicesCount})
		names, err := tx.LotsOfPart(p.ID)
		require.NoError(t, err)
		require.Equal(t, []string{"A9", "A10"}, names)

		l.PartID = "x"
		require.ErrorIs(t, tx.PutLot(&l, ""), ErrNotFound)
		require.ErrorIs(t, tx.RenameLot(bare.ID, "A10", ""), ErrExists)
		require.ErrorIs(t, tx.RenameLot("x", "A10", ""), ErrNotFound)
		require.ErrorIs(t, tx.RenameLot(bare.ID, "", ""), record.ErrInvalid)
		require.NoError(t, tx.RenameLot(bare.ID, "B", "clearer"))
		q := record.NewPart("Q")
		require.NoError(t, tx.PutPart(&q, ""))
		l.PartID = q.ID
		require.NoError(t, tx.PutLot(&l, "wrong part"))
		trail, err := tx.Changes("lot", l.ID)
		require.NoError(t, err)
		require.Equal(t, []string{"lot A10 created by tester", "part: P > Q (wrong part)"}, briefly(trail))
	})
}

// Setting the margin later must show; everything else must not move its time.
func TestTimeOfTheDecision(t *testing.T) {
	db := newStore(t)
	var l record.Lot
	update(t, db, func(tx *Tx) { l, _ = addLot(t, tx, "A", 0) })
	put := func() (margin, decided string) {
		t.Helper()
		time.Sleep(2 * time.Millisecond) // stamps have milliseconds
		update(t, db, func(tx *Tx) { require.NoError(t, tx.PutLot(&l, "")) })
		view(t, db, func(tx *Tx) {
			got, err := tx.Lot("A")
			require.NoError(t, err)
			require.Equal(t, got, l)
		})
		return l.MarginSetAt, l.DecidedAt
	}
	margin, decided := put()
	require.Empty(t, margin)
	require.Empty(t, decided)
	l.Margin = record.Amount{Value: 0.05, Unit: "V"}
	first, decided := put()
	require.NotEmpty(t, first)
	require.Empty(t, decided)
	l.Note, l.MarginSetAt = "a note", "2001-01-01T00:00:00.000Z"
	margin, _ = put()
	require.Equal(t, first, margin, "not moved by another field, nor by hand")
	l.SendBack = "outside-margin"
	margin, decided = put()
	require.Equal(t, first, margin)
	require.NotEmpty(t, decided)
	l.Margin.Value = 0.06
	margin, _ = put()
	require.Greater(t, margin, first)
	l.Margin = record.Amount{}
	margin, again := put()
	require.Greater(t, margin, first, "taken back is set too")
	require.Equal(t, decided, again)
}

func TestDevices(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, _ := addLot(t, tx, "A", 0)
		other, _ := addLot(t, tx, "B", 0)
		ds := []record.Device{
			{Name: "D10", Package: "F1", Side: "A", DateCode: "2401", Marking: "M", Tube: "T1", Role: record.Control, Excluded: true, Why: "w", Note: "n"},
			{Name: "D2", Package: "F1", Side: "B"},
			{Name: "D1"},
		}
		require.NoError(t, tx.AddDevices(lot.ID, ds))
		require.Equal(t, ds[0].PackageID, ds[1].PackageID)
		require.Len(t, ds[0].PackageID, 36)
		require.Empty(t, ds[2].PackageID)
		require.Equal(t, record.Sample, ds[1].Role)
		got, err := tx.Devices(lot.ID)
		require.NoError(t, err)
		require.Equal(t, []record.Device{ds[2], ds[1], ds[0]}, got)
		one, err := tx.Device(lot.ID, "D10")
		require.NoError(t, err)
		require.Equal(t, ds[0], one)
		_, err = tx.Device(other.ID, "D10")
		require.ErrorIs(t, err, ErrNotFound)

		require.NoError(t, tx.AddDevices(other.ID, []record.Device{{Name: "D2", Package: "F1", Side: "B"}}))
		found, err := tx.FindDevices("D2")
		require.NoError(t, err)
		require.Len(t, found, 2)
		require.NotEqual(t, found[0].PackageID, found[1].PackageID, "a package belongs to its lot")
		found, err = tx.FindDevices("D3")
		require.NoError(t, err)
		require.Empty(t, found)

		err = tx.AddDevices(lot.ID, []record.Device{{Name: "D7"}, {Name: "D2"}})
		require.ErrorIs(t, err, ErrExists)
		require.EqualError(t, err, `device "D2": already there`)
		err = tx.AddDevices(lot.ID, []record.Device{{Name: "D8", Package: "F1", Side: "A"}})
		require.ErrorIs(t, err, ErrExists)
		require.ErrorContains(t, err, `package "F1" side A`)
		require.ErrorIs(t, tx.AddDevices(lot.ID, []record.Device{{Name: "D8", Package: " x"}}), record.ErrInvalid)
		require.ErrorIs(t, tx.AddDevices(lot.ID, []record.Device{{Name: ""}}), record.ErrInvalid)
		require.ErrorIs(t, tx.AddDevices("x", []record.Device{{Name: "D8"}}), ErrNotFound)
	})
}

func TestPutDevice(t *testing.T) {
	db := newStore(t)
	var lot record.Lot
	var d record.Device
	update(t, db, func(tx *Tx) {
		l, _ := addLot(t, tx, "A", 0)
		lot = l
		ds := []record.Device{{Name: "D1", Package: "F1", Side: "A"}, {Name: "D2"}}
		require.NoError(t, tx.AddDevices(lot.ID, ds))
		d = ds[0]
	})
	update(t, db, func(tx *Tx) {
		d.Name, d.Package, d.Excluded, d.Why, d.Role = "D1x", "F2", true, "bent lead", record.Control
		require.NoError(t, tx.PutDevice(&d, "seen under the lens"))
		got, err := tx.Device(lot.ID, "D1x")
		require.NoError(t, err)
		require.Equal(t, d, got)
		d.Package = ""
		require.NoError(t, tx.PutDevice(&d, "single"))
		got, err = tx.DeviceByID(d.ID)
		require.NoError(t, err)
		require.Equal(t, d, got)
		require.Empty(t, got.PackageID)
		trail, err := tx.Changes("device", d.ID)
		require.NoError(t, err)
		require.Equal(t, []string{"device D1x created by tester", "name: D1 > D1x (seen under the lens)", "package: F1 > F2 (seen under the lens)",
			"role: sample > control (seen under the lens)", "excluded: no > yes (seen under the lens)", "why:  > bent lead (seen under the lens)",
			"package: F2 >  (single)"}, briefly(trail))

		other, _ := addLot(t, tx, "B", 0)
		moved := d
		moved.LotID = other.ID
		require.ErrorIs(t, tx.PutDevice(&moved, ""), record.ErrInvalid)
		taken := d
		taken.Name = "D2"
		require.ErrorIs(t, tx.PutDevice(&taken, ""), ErrExists)
		require.ErrorIs(t, tx.PutDevice(&record.Device{ID: "x", Name: "D", Role: record.Sample}, ""), ErrNotFound)
	})
}

func TestAllChanges(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, ds := addLot(t, tx, "A", 1)
		_, others := addLot(t, tx, "B", 1)
		ss := []record.Sweep{invented(ds[0].ID, 2)}
		require.NoError(t, tx.AddSweeps(ss))
		time.Sleep(2 * time.Millisecond)
		require.NoError(t, tx.RenameLot(lot.ID, "A1", "r1"))
		ds[0].Note = "x"
		require.NoError(t, tx.PutDevice(&ds[0], "r2"))
		others[0].Note = "not of this lot"
		require.NoError(t, tx.PutDevice(&others[0], "r3"))
		require.NoError(t, tx.ExcludeSweep(ss[0].ID, true, "r4"))
		p, err := tx.PartByID(lot.PartID)
		require.NoError(t, err)
		p.Note = "y"
		require.NoError(t, tx.PutPart(&p, "r5"))
		trail, err := tx.AllChanges(lot.ID)
		require.NoError(t, err)
		got := briefly(trail)
		require.ElementsMatch(t, []string{"part invented part created by tester", "lot A1 created by tester", "device D0001 created by tester"}, got[:3])
		require.Equal(t, []string{"name: A > A1 (r1)", "note:  > x (r2)", "excluded: no > yes (r4)", "why:  > r4 (r4)", "note:  > y (r5)"}, got[3:])
	})
}

func TestSessionsSourcesBenches(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, ds := addLot(t, tx, "A", 2)
		other, others := addLot(t, tx, "B", 1)
		bench, err := tx.AddBench("bench.toml", "a = 1\n")
		require.NoError(t, err)
		again, err := tx.AddBench("bench.toml", "a = 1\n")
		require.NoError(t, err)
		changed, err := tx.AddBench("bench.toml", "a = 2\n")
		require.NoError(t, err)
		require.Equal(t, bench, again)
		require.NotEqual(t, bench, changed)
		name, text, err := tx.Bench(bench)
		require.NoError(t, err)
		require.Equal(t, "bench.toml a = 1\n", name+" "+text)
		_, _, err = tx.Bench("x")
		require.ErrorIs(t, err, ErrNotFound)

		sessions := []record.Session{
			{Name: "first", Bench: "b", BenchID: bench, Operator: "o", Fixture: "f", Ambient: record.Known(23.5), StartedAt: "2024-05-06T07:00:00Z", Note: "n"},
			{}, {Name: "of the other lot"},
		}
		for i := range sessions {
			require.NoError(t, tx.AddSession(&sessions[i]))
		}
		ss := []record.Sweep{invented(ds[0].ID, 2), invented(ds[1].ID, 2), invented(ds[0].ID, 3), invented(others[0].ID, 2)}
		ss[0].SessionID, ss[1].SessionID, ss[2].SessionID, ss[3].SessionID = sessions[1].ID, sessions[0].ID, sessions[1].ID, sessions[2].ID
		require.NoError(t, tx.AddSweeps(ss))
		got, err := tx.Sessions(lot.ID)
		require.NoError(t, err)
		require.Equal(t, sessions[:2], got)
		s, err := tx.Session(sessions[0].ID)
		require.NoError(t, err)
		require.Equal(t, sessions[0], s)
		require.ErrorIs(t, tx.AddSession(&record.Session{StartedAt: "now"}), record.ErrInvalid)
		require.ErrorIs(t, tx.AddSession(&record.Session{BenchID: "x"}), ErrNotFound)

		hash := contentID("a") + contentID("b")
		sources := []record.Source{
			{LotID: lot.ID, Name: "a.csv", Hash: hash, Size: 12, Layout: "long", Dialect: `{"decimal":"point"}`},
			{LotID: lot.ID, Name: "copy.csv", Hash: hash, ImportedAt: "2024-05-06T07:00:00Z", Dialect: "{}"},
		}
		for i := range sources {
			require.NoError(t, tx.AddSource(&sources[i]))
		}
		list, err := tx.Sources(lot.ID)
		require.NoError(t, err)
		require.Equal(t, sources, list)
		first, err := tx.SourceByHash(lot.ID, hash)
		require.NoError(t, err)
		require.Equal(t, sources[0], first)
		_, err = tx.SourceByHash(other.ID, hash)
		require.ErrorIs(t, err, ErrNotFound)
		require.ErrorIs(t, tx.AddSource(&record.Source{LotID: lot.ID, Hash: "short"}), record.ErrInvalid)
		require.ErrorIs(t, tx.AddSource(&record.Source{LotID: lot.ID, Hash: hash, ImportedAt: "x"}), record.ErrInvalid)
	})
}

func TestMapping(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		_, ok, err := tx.Mapping("a|b")
		require.NoError(t, err)
		require.False(t, ok)
		require.NoError(t, tx.PutMapping("a|b", map[string]string{"vg": "a", "id": "b\"x"}))
		require.NoError(t, tx.PutMapping("c", nil))
		m, ok, err := tx.Mapping("a|b")
		require.NoError(t, err)
		require.True(t, ok)
		require.Equal(t, map[string]string{"vg": "a", "id": "b\"x"}, m)
		require.NoError(t, tx.PutMapping("a|b", map[string]string{"vg": "b"}))
		m, _, err = tx.Mapping("a|b")
		require.NoError(t, err)
		require.Equal(t, map[string]string{"vg": "b"}, m)
	})
}

// The audit trail has an amount in one entry, also where only its unit changed.
func TestAmountsInTheTrail(t *testing.T) {
	db := newStore(t)
	var l record.Lot
	update(t, db, func(tx *Tx) { l, _ = addLot(t, tx, "A", 0) })
	for _, a := range []record.Amount{{Value: 0.05, Unit: "V"}, {Value: 0.02, Unit: "V"}, {Value: 0.02, Unit: "%"}, {}} {
		l.Margin = a
		update(t, db, func(tx *Tx) { require.NoError(t, tx.PutLot(&l, "")) })
		view(t, db, func(tx *Tx) {
			got, err := tx.Lot("A")
			require.NoError(t, err)
			require.Equal(t, a, got.Margin)
		})
	}
	view(t, db, func(tx *Tx) {
		trail, err := tx.Changes("lot", l.ID)
		require.NoError(t, err)
		var entries []string
		for _, c := range trail {
			if c.Field != "created" && c.Field != "margin_set_at" {
				entries = append(entries, c.Field+" "+c.Old+" > "+c.New)
			}
		}
		require.Equal(t, []string{"margin  > 0.05V", "margin 0.05V > 0.02V", "margin 0.02V > 0.02%", "margin 0.02% > "}, entries)
	})
}
