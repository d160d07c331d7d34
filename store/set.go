package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
	"strings"

	"gatesill/store/record"
)

const setColumns = `number, name, state, unit, reason, at_a, source_resistor_ohm, criteria, spread_v`

var setKind = kind{table: "device_set", what: "set", columns: strings.Split(setColumns, ", ")}

func setValues(s *record.Set) ([]any, error) {
	by := s.By
	if by == nil {
		by = []record.Criterion{}
	}
	criteria, err := json.Marshal(by)
	if err != nil {
		return nil, fmt.Errorf("criteria of set %q: %w", s.Name, err)
	}
	return []any{int64(s.Number), s.Name, string(s.State), s.Unit, s.Reason, s.At, s.SourceResistor, string(criteria), s.Spread}, nil
}

func setNoun(s *record.Set) string { return fmt.Sprintf("set %q", s.Name) }

// PutSet keeps a set. Without an ID it is a new one: it gets ID, number, name where
// it has none, and CreatedAt; a device that is in another set that is not released
// is refused with [ErrExists], with the name of that set. With an ID, name, state,
// unit and reason are changed by the audit trail, and all else stays; a released
// set that is to come back is refused.
func (tx *Tx) PutSet(s *record.Set, reason string) error {
	if s.ID == "" {
		return tx.addSet(s)
	}
	old, err := tx.Set(s.ID)
	if err != nil {
		return err
	}
	if old.State == record.Released && s.State != record.Released {
		return fmt.Errorf("%s: released, and does not come back: %w", setNoun(s), record.ErrInvalid)
	}
	changed := old
	changed.Name, changed.State, changed.Unit, changed.Reason = s.Name, s.State, s.Unit, s.Reason
	if err := changed.Validate(); err != nil {
		return err
	}
	*s = changed
	before, err := setValues(&old)
	if err != nil {
		return err
	}
	after, err := setValues(s)
	if err != nil {
		return err
	}
	return setKind.updateOf(tx, setNoun(s), s.ID, reason, before, after, []string{"name", "state", "unit", "reason"})
}

func (tx *Tx) addSet(s *record.Set) error {
	if s.Number == 0 {
		n, err := one(tx, "sets", func(r row) (n int, err error) {
			err = r.Scan(&n)
			return n, err
		}, `SELECT coalesce(max(number), 0) + 1 FROM device_set`)
		if err != nil {
			return err
		}
		s.Number = n
	}
	if s.Name == "" {
		s.Name = "S" + strconv.Itoa(s.Number)
	}
	if s.State == "" {
		s.State = record.Reserved
	}
	if err := s.Validate(); err != nil {
		return err
	}
	if s.State != record.Reserved {
		return fmt.Errorf("%s: a new set is reserved first, not %s: %w", setNoun(s), s.State, record.ErrInvalid)
	}
	for _, m := range s.Members {
		switch other, err := tx.SetOf(m.DeviceID); {
		case err == nil:
			return fmt.Errorf("device %q: in set %s %w", m.Device, other.Name, ErrExists)
		case !errors.Is(err, ErrNotFound):
			return err
		}
	}
	if err := newID(&s.ID); err != nil {
		return err
	}
	s.CreatedAt, s.CreatedBy = record.Now(), tx.who
	values, err := setValues(s)
	if err != nil {
		return err
	}
	if err := setKind.insert(tx, setNoun(s), s.ID, s.CreatedAt, values); err != nil {
		return err
	}
	for i, m := range s.Members {
		if err := tx.exec(fmt.Sprintf("%s, device %q", setNoun(s), m.Device), `INSERT INTO set_member (set_id, position, device_id, readings) VALUES (?, ?, ?, ?)`,
			s.ID, i+1, m.DeviceID, string(appendEstimates(nil, m.Readings))); err != nil {
			return err
		}
	}
	return nil
}

// UseSet marks a set as built into a unit; "" is the unit that it was reserved for.
func (tx *Tx) UseSet(id, unit, reason string) (record.Set, error) {
	s, err := tx.Set(id)
	if err != nil {
		return s, err
	}
	if unit != "" {
		s.Unit = unit
	}
	s.State, s.Reason = record.Used, reason
	return s, tx.PutSet(&s, reason)
}

// ReleaseSet gives the devices of a set free again; the set stays on record.
func (tx *Tx) ReleaseSet(id, reason string) (record.Set, error) {
	s, err := tx.Set(id)
	if err != nil {
		return s, err
	}
	s.State, s.Reason = record.Released, reason
	return s, tx.PutSet(&s, reason)
}

const selectSet = `SELECT id, created_at, created_by, ` + setColumns + ` FROM device_set `

func scanSet(r row) (s record.Set, err error) {
	var criteria string
	if err = r.Scan(&s.ID, stamp{&s.CreatedAt}, &s.CreatedBy, &s.Number, &s.Name, &s.State, &s.Unit, &s.Reason, &s.At, &s.SourceResistor, &criteria, &s.Spread); err != nil {
		return s, err
	}
	if err := json.Unmarshal([]byte(criteria), &s.By); err != nil {
		return s, fmt.Errorf("%w: criteria of set %s: %w", ErrCorrupt, s.Name, err)
	}
	return s, nil
}

// sets reads sets with their members.
func (tx *Tx) sets(noun, where string, args ...any) ([]record.Set, error) {
	list, err := all(tx, noun, scanSet, selectSet+where+` ORDER BY number`, args...)
	for i := range list {
		if err != nil {
			break
		}
		list[i].Members, err = all(tx, noun, scanMember, `SELECT m.device_id, device.name, lot.id, lot.name, m.readings
			FROM set_member AS m JOIN device ON device.id = m.device_id JOIN lot ON lot.id = device.lot_id
			WHERE m.set_id = ? ORDER BY m.position`, list[i].ID)
	}
	return list, err
}

func scanMember(r row) (m record.SetMember, err error) {
	var readings string
	if err = r.Scan(&m.DeviceID, &m.Device, &m.LotID, &m.Lot, &readings); err != nil {
		return m, err
	}
	if m.Readings, err = parseEstimates(readings); err != nil {
		return m, fmt.Errorf("%w: readings of device %q in its set: %w", ErrCorrupt, m.Device, err)
	}
	return m, nil
}

// Sets lists sets by number, those with a device of the lot, or with lotID "" all;
// released ones too.
func (tx *Tx) Sets(lotID string) ([]record.Set, error) {
	if lotID == "" {
		return tx.sets("sets", ``)
	}
	return tx.sets("sets of lot "+lotID, `WHERE id IN (SELECT set_id FROM set_member JOIN device ON device.id = set_member.device_id WHERE device.lot_id = ?)`, lotID)
}

// Set finds a set by its id, or gives [ErrNotFound].
func (tx *Tx) Set(id string) (record.Set, error) {
	return oneSet(tx.sets("set "+id, `WHERE id = ?`, id))("set " + id)
}

// oneSet gives the only set of a list.
func oneSet(list []record.Set, err error) func(noun string) (record.Set, error) {
	return func(noun string) (record.Set, error) {
		switch {
		case err != nil:
			return record.Set{}, err
		case len(list) == 0:
			return record.Set{}, fmt.Errorf("%s: %w", noun, ErrNotFound)
		}
		return list[0], nil
	}
}

// SetOf finds the set, not released, that a device is in, or gives [ErrNotFound].
func (tx *Tx) SetOf(deviceID string) (record.Set, error) {
	noun := "set of device " + deviceID
	return oneSet(tx.sets(noun, `WHERE state <> 'released' AND id IN (SELECT set_id FROM set_member WHERE device_id = ?)`, deviceID))(noun)
}

// SetsOf lists all sets that a device is or was in, by number.
func (tx *Tx) SetsOf(deviceID string) ([]record.Set, error) {
	return tx.sets("sets of device "+deviceID, `WHERE id IN (SELECT set_id FROM set_member WHERE device_id = ?)`, deviceID)
}

// shortestID is how much of an id names a set: below that it is rather a number
// mistyped.
const shortestID = 4

// FindSets lists the sets that a text means: the one of that name, else the one of
// that number, else those whose id begins with it (4 characters at least).
func (tx *Tx) FindSets(text string) ([]record.Set, error) {
	noun := fmt.Sprintf("set %q", text)
	list, err := tx.sets(noun, `WHERE name = ?`, text)
	if err != nil || len(list) > 0 {
		return list, err
	}
	if n, e := strconv.Atoi(text); e == nil {
		if list, err = tx.sets(noun, `WHERE number = ?`, n); err != nil || len(list) > 0 {
			return list, err
		}
	}
	if len(text) < shortestID {
		return nil, nil
	}
	return tx.sets(noun, `WHERE substr(id, 1, ?) = ?`, len(text), strings.ToLower(text))
}
