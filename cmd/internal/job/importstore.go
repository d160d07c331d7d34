package job

import (
	"context"
	"errors"

	"gatesill/acquire/table"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// store puts one file into the store in one transaction.
func (im *importer) store(ctx context.Context, f *table.File, sweeps []table.Sweep) error {
	if im.db == nil {
		db, err := im.env.open(ctx, true, false)
		if err != nil {
			return err
		}
		im.db, im.made = db, true
	}
	session, next := im.session, im.next
	err := im.db.Update(ctx, func(tx *store.Tx) error {
		lot, err := im.lot(tx)
		if err != nil {
			return err
		}
		if err := im.setAside(tx, lot, f); err != nil {
			return err
		}
		src := record.Source{LotID: lot.ID, Name: f.Name, Hash: f.Hash, Size: f.Size, Layout: f.Layout, Dialect: mustJSON(f.Dialect), ImportedAt: record.Now()}
		if err := tx.AddSource(&src); err != nil {
			return err
		}
		devices, err := im.devices(tx, lot, sweeps)
		if err != nil {
			return err
		}
		if session, err = im.sessionFor(tx, lot, sweeps); err != nil {
			return err
		}
		rows := make([]record.Sweep, len(sweeps))
		for i := range sweeps {
			next++
			r := sweeps[i].Sweep
			r.LotID, r.DeviceID, r.SessionID, r.SourceID, r.Position = lot.ID, devices[sweeps[i].Device].ID, session, src.ID, next
			if im.bench != nil {
				r.Instruments = im.bench.Meters
			}
			rows[i] = r
		}
		if err := tx.AddSweeps(rows); err != nil {
			return err
		}
		if len(im.rq.Table.Map) > 0 && f.Dialect.Signature != "" {
			return tx.PutMapping(f.Dialect.Signature, im.rq.Table.Map)
		}
		return nil
	})
	if err != nil {
		return storeFailure(err)
	}
	im.session, im.next, im.stored = session, next, true
	for i := range sweeps {
		im.seen[sweeps[i].DataHash] = sweeps[i].Device
	}
	return nil
}

// setAside excludes the sweeps of earlier imports of the same bytes, so that
// reading a file again corrects what was said wrongly the first time. The rows
// stay, and the audit trail says why.
func (im *importer) setAside(tx *store.Tx, lot record.Lot, f *table.File) error {
	sources, err := tx.Sources(lot.ID)
	if err != nil {
		return err
	}
	same := map[string]bool{}
	for _, s := range sources {
		same[s.ID] = s.Hash == f.Hash
	}
	sweeps, err := tx.Sweeps(lot.ID, false)
	if err != nil {
		return err
	}
	n := 0
	for _, s := range sweeps {
		if same[s.SourceID] && !s.Excluded {
			n++
			if err := tx.ExcludeSweep(s.ID, true, "imported again from the same file"); err != nil {
				return err
			}
		}
	}
	if n > 0 {
		im.env.talk("%s: %s of its earlier import set aside", report.Clean(f.Name), count(n, "sweep"))
	}
	return nil
}

// lot gives the lot, made with its part when it is not there yet.
func (im *importer) lot(tx *store.Tx) (record.Lot, error) {
	lot, err := tx.Lot(im.rq.Lot)
	absent := errors.Is(err, store.ErrNotFound)
	if err != nil && !absent {
		return lot, err
	}
	if absent || im.rq.Channel != "" {
		if err := tx.PutPart(&im.part, "import"); err != nil {
			return lot, invalid(err)
		}
	}
	if absent {
		lot = record.Lot{Name: im.rq.Lot, PartID: im.part.ID, CreatedAt: record.Now()}
		err = tx.PutLot(&lot, "import")
		return lot, invalid(err)
	}
	return lot, nil
}

// devices gives the lot's devices by name, with the new ones of the file added.
func (im *importer) devices(tx *store.Tx, lot record.Lot, sweeps []table.Sweep) (map[string]record.Device, error) {
	have, err := tx.Devices(lot.ID)
	if err != nil {
		return nil, err
	}
	byName := make(map[string]record.Device, len(have)+len(sweeps))
	for _, d := range have {
		byName[d.Name] = d
	}
	var fresh []record.Device
	for i := range sweeps {
		s := &sweeps[i]
		if _, ok := byName[s.Device]; ok {
			continue
		}
		d := record.Device{
			LotID: lot.ID, Name: s.Device, Package: s.Package, Side: s.Side, DateCode: s.DateCode, Marking: s.Marking, Tube: s.Tube,
			Role: record.Sample, Note: s.Note, CreatedAt: record.Now(),
		}
		fresh = append(fresh, d)
		byName[s.Device] = d
	}
	if err := tx.AddDevices(lot.ID, fresh); err != nil {
		return nil, invalid(err)
	}
	for _, d := range fresh {
		byName[d.Name] = d
	}
	return byName, nil
}

// sessionFor gives the session of this import: the one of that name, or a new
// one when operator, fixture, bench or name were given, else none.
func (im *importer) sessionFor(tx *store.Tx, lot record.Lot, sweeps []table.Sweep) (string, error) {
	if im.session != "" {
		return im.session, nil
	}
	s := record.Session{Name: im.rq.Session, Operator: im.rq.Operator, Fixture: im.rq.Fixture, StartedAt: record.Now()}
	for i := range sweeps {
		t := &sweeps[i]
		if s.Operator == "" {
			s.Operator = t.Operator
		}
		if s.Fixture == "" {
			s.Fixture = t.Fixture
		}
		if t.Condition.TempOf == "ambient" {
			s.Ambient = s.Ambient.Else(t.Condition.Temp)
		}
	}
	if im.bench != nil {
		s.Bench = im.bench.Name
		if _, err := tx.AddBench(im.bench.Name, im.bench.Text); err != nil {
			return "", err
		}
	}
	if s.Name == "" && s.Operator == "" && s.Fixture == "" && s.Bench == "" {
		return "", nil
	}
	if s.Name != "" {
		have, err := tx.Sessions(lot.ID)
		if err != nil {
			return "", err
		}
		for _, h := range have {
			if h.Name == s.Name && h.Bench == s.Bench && h.Operator == s.Operator && h.Fixture == s.Fixture {
				return h.ID, nil
			}
		}
	}
	err := tx.AddSession(&s)
	return s.ID, err
}
