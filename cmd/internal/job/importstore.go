package job

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"strings"

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
	next := im.next
	var added map[string]record.Device
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
		if added, err = im.devices(tx, lot, sweeps); err != nil {
			return err
		}
		sessions, err := im.sessions(tx, lot, sweeps)
		if err != nil {
			return err
		}
		rows := make([]record.Sweep, len(sweeps))
		for i := range sweeps {
			next++
			r := sweeps[i].Sweep
			device, ok := added[sweeps[i].Device]
			if !ok {
				device = im.have[sweeps[i].Device]
			}
			r.LotID, r.DeviceID, r.SessionID, r.SourceID, r.Position = lot.ID, device.ID, sessions[i], src.ID, next
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
	im.next, im.stored = next, true
	maps.Copy(im.have, added) // only now: a transaction that failed has added none
	for i := range sweeps {
		im.seen[sweeps[i].DataHash] = sweeps[i].Device
	}
	return nil
}

// seenAs looks for a source with that hash among the lot's.
func (im *importer) seenAs(ctx context.Context, hash string) (prior record.Source, ok bool, err error) {
	if im.db == nil {
		return prior, false, nil
	}
	err = im.db.View(ctx, func(tx *store.Tx) error {
		lot, err := tx.Lot(im.rq.Lot)
		if err != nil {
			return err
		}
		prior, err = tx.SourceByHash(lot.ID, hash)
		return err
	})
	if errors.Is(err, store.ErrNotFound) {
		return prior, false, nil
	}
	return prior, err == nil, storeFailure(err)
}

// seenReason says that a source was imported before, and what to do about it.
func seenReason(prior record.Source) string {
	return fmt.Sprintf("the same bytes were imported as %s on %s; nothing was changed. To read the file anew, with what is given now, use --again: the earlier sweeps are set aside", report.Clean(prior.Name), prior.ImportedAt[:10])
}

// setAside excludes the sweeps of earlier imports of the same bytes, so that
// reading a file again corrects what was said wrongly the first time. The rows
// stay, and the audit trail says why.
func (im *importer) setAside(tx *store.Tx, lot record.Lot, f *table.File) error {
	if _, err := tx.SourceByHash(lot.ID, f.Hash); errors.Is(err, store.ErrNotFound) {
		return nil // nearly always: nothing else of the lot has to be read
	} else if err != nil {
		return err
	}
	sources, err := tx.Sources(lot.ID)
	if err != nil {
		return err
	}
	same := map[string]bool{}
	for _, s := range sources {
		if s.Hash == f.Hash {
			same[s.ID] = true
		}
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

// devices adds the file's new devices to the lot and gives them by name. What
// the lot has already is read once for all files of the import.
func (im *importer) devices(tx *store.Tx, lot record.Lot, sweeps []table.Sweep) (map[string]record.Device, error) {
	if im.have == nil {
		have, err := tx.Devices(lot.ID)
		if err != nil {
			return nil, err
		}
		im.have = make(map[string]record.Device, len(have))
		for _, d := range have {
			im.have[d.Name] = d
		}
	}
	seen := map[string]bool{}
	var fresh []record.Device
	for i := range sweeps {
		s := &sweeps[i]
		if _, ok := im.have[s.Device]; ok || seen[s.Device] {
			continue
		}
		seen[s.Device] = true
		fresh = append(fresh, record.Device{
			LotID: lot.ID, Name: s.Device, Package: s.Package, Side: s.Side, DateCode: s.DateCode, Marking: s.Marking, Tube: s.Tube,
			Role: record.Sample, Note: s.Note, CreatedAt: record.Now(),
		})
	}
	if err := tx.AddDevices(lot.ID, fresh); err != nil {
		return nil, invalid(err)
	}
	added := make(map[string]record.Device, len(fresh))
	for _, d := range fresh {
		added[d.Name] = d
	}
	return added, nil
}

// sessions gives the session of every sweep: one for each operator, fixture and
// day, "" where neither they nor a bench or a name is known. A session of the
// same facts that the lot has already is used again.
func (im *importer) sessions(tx *store.Tx, lot record.Lot, sweeps []table.Sweep) ([]string, error) {
	bench := ""
	if im.bench != nil {
		bench = im.bench.Name
		if _, err := tx.AddBench(bench, im.bench.Text); err != nil {
			return nil, err
		}
	}
	have, err := tx.Sessions(lot.ID)
	if err != nil {
		return nil, err
	}
	known := map[sessionFacts]string{}
	for _, h := range have {
		known[sessionFacts{h.Name, h.Bench, h.Operator, h.Fixture, day(h.StartedAt)}] = h.ID
	}
	ids := make([]string, len(sweeps))
	for i := range sweeps {
		t := &sweeps[i]
		facts := sessionFacts{im.rq.Session, bench, first(im.rq.Operator, t.Operator), first(im.rq.Fixture, t.Fixture), day(t.MeasuredAt)}
		if facts == (sessionFacts{day: facts.day}) {
			continue
		}
		id, ok := known[facts]
		if !ok {
			s := record.Session{Name: facts.name, Bench: facts.bench, Operator: facts.operator, Fixture: facts.fixture, StartedAt: t.MeasuredAt}
			if t.Condition.TempOf == "ambient" {
				s.Ambient = t.Condition.Temp
			}
			if err := tx.AddSession(&s); err != nil {
				return nil, err
			}
			id = s.ID
			known[facts] = id
		}
		ids[i] = id
	}
	return ids, nil
}

// sessionFacts tell one session from another.
type sessionFacts struct{ name, bench, operator, fixture, day string }

// day is the date of a stamp or a bare date.
func day(stamp string) string {
	date, _, _ := strings.Cut(stamp, "T")
	return date
}

// first is the first text that is not empty.
func first(texts ...string) string {
	for _, t := range texts {
		if t != "" {
			return t
		}
	}
	return ""
}
