package store

import (
	"errors"
	"fmt"
	"slices"

	"gatesill/store/record"
)

const partColumns = `name, channel, mode, off_voltage_v, test_current_a, test_vds_v, idle_current_a, ` +
	`vgsth_min_v, vgsth_max_v, max_vgs_v, max_vds_v, max_id_a, max_pd_w, max_temp_c, rth_k_per_w, note`

var partKind = newKind("part", partColumns)

func partValues(p *record.Part) []any {
	return []any{p.Name, string(p.Channel), string(p.Mode), p.OffVoltage, p.TestCurrent, p.TestVDS, p.IdleCurrent,
		p.VgsthMin, p.VgsthMax, p.MaxVgs, p.MaxVds, p.MaxID, p.MaxPD, p.MaxTemp, p.Rth, p.Note}
}

func scanPart(r row) (p record.Part, err error) {
	err = r.Scan(&p.ID, &p.Name, &p.Channel, &p.Mode, &p.OffVoltage, &p.TestCurrent, &p.TestVDS, &p.IdleCurrent,
		&p.VgsthMin, &p.VgsthMax, &p.MaxVgs, &p.MaxVds, &p.MaxID, &p.MaxPD, &p.MaxTemp, &p.Rth, &p.Note)
	return p, err
}

// Part finds a part by its name, or gives [ErrNotFound].
func (tx *Tx) Part(name string) (record.Part, error) {
	return one(tx, fmt.Sprintf("part %q", name), scanPart, `SELECT id, `+partColumns+` FROM part WHERE name = ?`, name)
}

// PartByID finds a part by its id, or gives [ErrNotFound].
func (tx *Tx) PartByID(id string) (record.Part, error) {
	return one(tx, "part "+id, scanPart, `SELECT id, `+partColumns+` FROM part WHERE id = ?`, id)
}

// Parts lists all parts by name.
func (tx *Tx) Parts() ([]record.Part, error) {
	list, err := all(tx, "parts", scanPart, `SELECT id, `+partColumns+` FROM part`)
	slices.SortFunc(list, func(a, b record.Part) int { return record.NaturalCompare(a.Name, b.Name) })
	return list, err
}

// PutPart keeps the part: as the one with its ID, or else as the one with its
// name, or else as a new one. It fills p.ID. Every changed field goes to the
// audit trail with its old value. A part that is not valid is refused, a new
// name that another part has with [ErrExists].
func (tx *Tx) PutPart(p *record.Part, reason string) error {
	if err := p.Validate(); err != nil {
		return err
	}
	noun := fmt.Sprintf("part %q", p.Name)
	var old record.Part
	var err error
	if p.ID != "" {
		old, err = tx.PartByID(p.ID)
	} else {
		old, err = tx.Part(p.Name)
	}
	switch {
	case errors.Is(err, ErrNotFound):
		if err := newID(&p.ID); err != nil {
			return err
		}
		return partKind.insert(tx, noun, p.ID, record.Now(), partValues(p))
	case err != nil:
		return err
	}
	p.ID = old.ID
	return partKind.update(tx, noun, p.ID, reason, partValues(&old), partValues(p))
}

// LotsOfPart lists the names of the lots of a part.
func (tx *Tx) LotsOfPart(partID string) ([]string, error) {
	names, err := all(tx, "lots of part "+partID, text, `SELECT name FROM lot WHERE part_id = ?`, partID)
	slices.SortFunc(names, record.NaturalCompare)
	return names, err
}
