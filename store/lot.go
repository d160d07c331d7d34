package store

import (
	"errors"
	"fmt"
	"slices"

	"gatesill/store/record"
)

const lotColumns = `name, part_id, supplier, date_code, marking, quantity, sampled, margin, margin_unit, margin_set_at, ` +
	`guard, guard_unit, send_back, decided_at, note`

var lotKind = newKind("lot", lotColumns)

// lotValues gives the values of lotColumns; part is the name of the lot's part.
func lotValues(l *record.Lot, part string) []any {
	var quantity any
	if q, ok := l.Quantity.Get(); ok {
		quantity = int64(q)
	}
	return []any{l.Name, ref{l.PartID, part}, l.Supplier, l.DateCode, l.Marking, quantity, l.Sampled, amount{l.Margin}, amountUnit(l.Margin.Unit),
		orNull(l.MarginSetAt), amount{l.Guard}, amountUnit(l.Guard.Unit), l.SendBack, orNull(l.DecidedAt), l.Note}
}

const selectLot = `SELECT id, created_at, ` + lotColumns + ` FROM lot `

func lotTargets(l *record.Lot) []any {
	return []any{&l.ID, stamp{&l.CreatedAt}, &l.Name, &l.PartID, &l.Supplier, &l.DateCode, &l.Marking, &l.Quantity, &l.Sampled,
		&l.Margin.Value, &l.Margin.Unit, stamp{&l.MarginSetAt}, &l.Guard.Value, &l.Guard.Unit, &l.SendBack,
		stamp{&l.DecidedAt}, &l.Note}
}

func scanLot(r row) (l record.Lot, err error) {
	err = r.Scan(lotTargets(&l)...)
	return l, err
}

func scanCountedLot(r row) (l record.Lot, err error) {
	err = r.Scan(append(lotTargets(&l), &l.DevicesCount, &l.SweepsCount)...)
	return l, err
}

// Lot finds a lot by its name, or gives [ErrNotFound].
func (tx *Tx) Lot(name string) (record.Lot, error) {
	return one(tx, fmt.Sprintf("lot %q", name), scanLot, selectLot+`WHERE name = ?`, name)
}

// LotByID finds a lot by its id, or gives [ErrNotFound].
func (tx *Tx) LotByID(id string) (record.Lot, error) {
	return one(tx, "lot "+id, scanLot, selectLot+`WHERE id = ?`, id)
}

// Lots lists all lots by name, with the numbers of their devices and sweeps.
func (tx *Tx) Lots() ([]record.Lot, error) {
	list, err := all(tx, "lots", scanCountedLot, `SELECT id, created_at, `+lotColumns+`,
			(SELECT count(*) FROM device WHERE device.lot_id = lot.id),
			(SELECT count(*) FROM sweep JOIN device ON device.id = sweep.device_id
				WHERE device.lot_id = lot.id AND sweep.data_hash IS NOT NULL)
		FROM lot`)
	slices.SortFunc(list, func(a, b record.Lot) int { return record.NaturalCompare(a.Name, b.Name) })
	return list, err
}

// PutLot keeps the lot: as the one with its ID, or else as the one with its
// name, or else as a new one. It fills ID and CreatedAt, and it sets MarginSetAt
// and DecidedAt to the present time whenever margin, or guard band or send-back
// rule, are not what they were before. Every changed field goes to the audit
// trail with its old value. A lot that is not valid is refused, one of an
// unknown part with [ErrNotFound], a new name that another lot has with
// [ErrExists].
func (tx *Tx) PutLot(l *record.Lot, reason string) error {
	if err := l.Validate(); err != nil {
		return err
	}
	noun := fmt.Sprintf("lot %q", l.Name)
	var old record.Lot
	var err error
	if l.ID != "" {
		old, err = tx.LotByID(l.ID)
	} else {
		old, err = tx.Lot(l.Name)
	}
	if err != nil && !errors.Is(err, ErrNotFound) {
		return err
	}
	isNew := err != nil
	part, err := tx.PartByID(l.PartID)
	if err != nil {
		return fmt.Errorf("%s: %w", noun, err)
	}
	dateDecisions(l, old)
	if !isNew {
		l.ID, l.CreatedAt = old.ID, old.CreatedAt
		oldPart, err := tx.PartByID(old.PartID)
		if err != nil {
			return fmt.Errorf("%s: %w", noun, err)
		}
		return lotKind.update(tx, noun, l.ID, reason, lotValues(&old, oldPart.Name), lotValues(l, part.Name))
	}
	if err := newID(&l.ID); err != nil {
		return err
	}
	l.CreatedAt = record.Now()
	return lotKind.insert(tx, noun, l.ID, l.CreatedAt, lotValues(l, part.Name))
}

// dateDecisions sets the times at which margin and decision rule were set. They
// decide whether a comparison was planned, so nobody else sets them.
func dateDecisions(l *record.Lot, old record.Lot) {
	l.MarginSetAt, l.DecidedAt = old.MarginSetAt, old.DecidedAt
	if l.Margin != old.Margin {
		l.MarginSetAt = record.Now()
	}
	if l.Guard != old.Guard || l.SendBack != old.SendBack {
		l.DecidedAt = record.Now()
	}
}

// RenameLot gives a lot another name, or [ErrExists] when another lot has it.
func (tx *Tx) RenameLot(id, name, reason string) error {
	l, err := tx.LotByID(id)
	if err != nil {
		return err
	}
	l.Name = name
	return tx.PutLot(&l, reason)
}
