package store

import (
	"database/sql/driver"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// kind is a table whose rows may be edited, with the audit trail of its edits.
type kind struct {
	table   string
	what    string // in the audit trail
	columns []string
}

func newKind(table, columns string) kind {
	return kind{table: table, what: table, columns: strings.Split(columns, ", ")}
}

// insert adds a row; values belong to k.columns.
func (k kind) insert(tx *Tx, noun, id, at string, values []any) error {
	query := `INSERT INTO ` + k.table + ` (id, created_at, created_by, ` + strings.Join(k.columns, ", ") +
		`) VALUES (` + places(3+len(values)) + `)`
	return tx.exec(noun, query, append([]any{id, at, tx.who}, values...)...)
}

// update sets the row of id to values, which belong to k.columns, and enters
// what differs from old in the audit trail.
func (k kind) update(tx *Tx, noun, id, reason string, old, values []any) error {
	return k.updateOf(tx, noun, id, reason, old, values, k.columns)
}

// updateOf is update for a table of which only some columns may be changed; old and
// values belong to all of them.
func (k kind) updateOf(tx *Tx, noun, id, reason string, old, values []any, only []string) error {
	changed := false
	var write []any
	for i, column := range k.columns {
		if !slices.Contains(only, column) {
			continue
		}
		write = append(write, values[i])
		before, after := asText(old[i]), asText(values[i])
		if before == after {
			continue
		}
		changed = true
		if _, ok := values[i].(amountUnit); ok {
			continue // stands in the entry of its amount
		}
		if _, ok := values[i].(ref); ok {
			column = strings.TrimSuffix(column, "_id")
		}
		if err := tx.enter(k.what, id, column, before, after, reason); err != nil {
			return err
		}
	}
	if !changed {
		return nil
	}
	query := `UPDATE ` + k.table + ` SET (` + strings.Join(only, ", ") + `) = (` + places(len(write)) + `) WHERE id = ?`
	return tx.exec(noun, query, append(write, id)...)
}

// asText writes a value as the audit trail shows it.
func asText(v any) string {
	switch x := v.(type) {
	case nil:
		return ""
	case string:
		return x
	case ref:
		return x.name
	case record.Num:
		return x.String()
	case amount:
		return x.of.String()
	case float64:
		return strconv.FormatFloat(x, 'g', -1, 64)
	case bool:
		if x {
			return "yes"
		}
		return "no"
	}
	return fmt.Sprint(v)
}

// amount is the number of an amount whose unit is the next column, as [amountUnit].
// The audit trail has one entry for the two.
type amount struct{ of record.Amount }

// Value gives the driver the number.
func (a amount) Value() (driver.Value, error) { return a.of.Value, nil }

// amountUnit is the unit of the amount in the column before it.
type amountUnit string

// ref is the id of another row, NULL when it is empty. The audit trail shows the
// name of that row, under the column's name without _id.
type ref struct{ id, name string }

// Value gives the driver the id.
func (r ref) Value() (driver.Value, error) { return orNull(r.id), nil }

// enter writes one line of the audit trail.
func (tx *Tx) enter(what, id, field, before, after, reason string) error {
	var key string
	if err := newID(&key); err != nil {
		return err
	}
	return tx.exec("audit trail", `INSERT INTO change (id, at, who, what, subject_id, field, old_value, new_value, reason)
		VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)`, key, record.Now(), tx.who, what, id, field, before, after, reason)
}

const historyColumns = `SELECT at, who, what, subject_id, subject, field, old_value, new_value, reason FROM history `

func scanChange(r row) (c record.Change, err error) {
	err = r.Scan(stamp{&c.At}, &c.Who, &c.What, &c.ID, &c.Subject, &c.Field, &c.Old, &c.New, &c.Reason)
	return c, err
}

// Changes is the audit trail of one part, lot, device, sweep or set, the oldest
// first; what is "part", "lot", "device", "sweep" or "set". That it was made is the
// first entry, with the field "created"; a sweep has no such entry.
func (tx *Tx) Changes(what, id string) ([]record.Change, error) {
	return all(tx, "audit trail of "+what+" "+id, scanChange,
		historyColumns+`WHERE what = ? AND subject_id = ? ORDER BY at, change_id`, what, id)
}

// AllChanges is the audit trail of a lot: of the lot itself, its part, its
// devices and their sweeps, the oldest first.
func (tx *Tx) AllChanges(lotID string) ([]record.Change, error) {
	return all(tx, "audit trail of lot "+lotID, scanChange,
		historyColumns+`WHERE lot_id = ? OR what = 'part' AND subject_id = (SELECT part_id FROM lot WHERE id = ?)
		ORDER BY at, change_id`, lotID, lotID)
}
