package store

import (
	"database/sql"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strconv"

	"gatesill/store/record"
)

// PutEstimates keeps estimates of sweeps. One whose sweep, data hash, method,
// settings and version are kept already adds nothing. MadeAt is filled where it
// is empty. A data hash that is not that of the sweep is refused.
func (tx *Tx) PutEstimates(es []record.Estimate) error {
	p, err := tx.newEstimatePutter()
	if err != nil {
		return err
	}
	defer p.insert.Close()
	for i := range es {
		if err := p.put(&es[i]); err != nil {
			return fmt.Errorf("estimate of sweep %s: %w", es[i].SweepID, err)
		}
	}
	return nil
}

// estimatePutter keeps what the estimates of one batch share.
type estimatePutter struct {
	tx         *Tx
	insert     *sql.Stmt
	procedures map[[3]string]string // id by method, settings, version
	json       []byte               // scratch
}

func (tx *Tx) newEstimatePutter() (*estimatePutter, error) {
	// Nothing is selected, and so nothing added, when the sweep has other data.
	insert, err := tx.sql.PrepareContext(tx.ctx, `INSERT INTO estimate (sweep_id, procedure_id, data_hash, made_at, state, estimates, remarks)
		SELECT id, ?, data_hash, ?, ?, ?, ? FROM sweep WHERE id = ? AND data_hash = ?
		ON CONFLICT DO NOTHING`)
	if err != nil {
		return nil, tx.fail("estimates", err)
	}
	return &estimatePutter{tx: tx, insert: insert, procedures: map[[3]string]string{}}, nil
}

func (p *estimatePutter) put(e *record.Estimate) error {
	if e.MadeAt == "" {
		e.MadeAt = record.Now()
	}
	if err := record.CheckStamp("time of making", e.MadeAt); err != nil {
		return err
	}
	procedure, err := p.procedure(e)
	if err != nil {
		return err
	}
	var remarks any
	if len(e.Remarks) > 0 {
		b, err := json.Marshal(e.Remarks)
		if err != nil {
			return err
		}
		remarks = string(b)
	}
	p.json = appendEstimates(p.json[:0], e.Values)
	result, err := p.insert.ExecContext(p.tx.ctx, procedure, e.MadeAt, e.State, string(p.json), remarks, e.SweepID, e.DataHash)
	if err != nil {
		return p.tx.fail("estimate", err)
	}
	if n, err := result.RowsAffected(); err != nil || n == 1 {
		return p.tx.fail("estimate", err)
	}
	return p.kept(e, procedure)
}

// kept says why nothing was added, unless the estimate is there already.
func (p *estimatePutter) kept(e *record.Estimate, procedure string) error {
	_, err := one(p.tx, "estimate", text, `SELECT made_at FROM estimate WHERE sweep_id = ? AND procedure_id = ? AND data_hash = ?`,
		e.SweepID, procedure, e.DataHash)
	if !errors.Is(err, ErrNotFound) {
		return err
	}
	hash, err := one(p.tx, "sweep", text, `SELECT data_hash FROM sweep WHERE data_hash IS NOT NULL AND id = ?`, e.SweepID)
	if err != nil {
		return err
	}
	return fmt.Errorf("it was made from data %s, the sweep has %s: %w", e.DataHash, hash, record.ErrInvalid)
}

// procedure gives the id of method, settings and version, which it keeps if
// they are new.
func (p *estimatePutter) procedure(e *record.Estimate) (string, error) {
	key := [3]string{e.Method, e.Settings, e.Version}
	if id, ok := p.procedures[key]; ok {
		return id, nil
	}
	id := contentID(key[:]...)
	if err := p.tx.exec("method and settings", `INSERT INTO fit_procedure (id, method, settings, version) VALUES (?, ?, ?, ?)
		ON CONFLICT (id) DO NOTHING`, id, e.Method, e.Settings, e.Version); err != nil {
		return "", err
	}
	p.procedures[key] = id
	return id, nil
}

// appendEstimates writes the values as a JSON object, the keys in order, what
// is not known left out.
func appendEstimates(b []byte, values map[string]record.Value) []byte {
	b = append(b, '{')
	for i, key := range slices.Sorted(maps.Keys(values)) {
		if i > 0 {
			b = append(b, ',')
		}
		v := values[key]
		b = append(appendText(b, key), ":{"...)
		start := len(b)
		for _, f := range []struct {
			name string
			n    record.Num
		}{{`"value":`, v.Value}, {`"u":`, v.U}, {`"u_between":`, v.UBetween}, {`"u_absolute":`, v.UAbsolute}} {
			if x, ok := f.n.Get(); ok {
				b = strconv.AppendFloat(append(b, f.name...), x, 'g', -1, 64)
				b = append(b, ',')
			}
		}
		if v.N != 0 {
			b = append(strconv.AppendInt(append(b, `"n":`...), int64(v.N), 10), ',')
		}
		if len(b) > start {
			b = b[:len(b)-1] // the last comma
		}
		b = append(b, '}')
	}
	return append(b, '}')
}

// appendText writes a text as a JSON string.
func appendText(b []byte, s string) []byte {
	q, err := json.Marshal(s)
	if err != nil { // no text fails
		return append(b, `""`...)
	}
	return append(b, q...)
}

const selectEstimate = `SELECT estimate.sweep_id, estimate.data_hash, method, settings, version, state, estimates, remarks, made_at
	FROM estimate JOIN fit_procedure ON fit_procedure.id = estimate.procedure_id
	JOIN sweep ON sweep.id = estimate.sweep_id JOIN device ON device.id = sweep.device_id `

func scanEstimate(r row) (e record.Estimate, err error) {
	var values, remarks string
	if err := r.Scan(&e.SweepID, &e.DataHash, &e.Method, &e.Settings, &e.Version, &e.State, &values, maybe{&remarks}, stamp{&e.MadeAt}); err != nil {
		return e, err
	}
	if err := json.Unmarshal([]byte(values), &e.Values); err != nil {
		return e, fmt.Errorf("%w: estimate of sweep %s: %w", ErrCorrupt, e.SweepID, err)
	}
	if remarks != "" {
		if err := json.Unmarshal([]byte(remarks), &e.Remarks); err != nil {
			return e, fmt.Errorf("%w: remarks on sweep %s: %w", ErrCorrupt, e.SweepID, err)
		}
	}
	return e, nil
}

// Estimates lists the latest estimate of each sweep of a lot, whatever its
// method.
func (tx *Tx) Estimates(lotID string) ([]record.Estimate, error) {
	return all(tx, "estimates of lot "+lotID, scanEstimate, selectEstimate+`WHERE device.lot_id = ? AND NOT EXISTS (
			SELECT 1 FROM estimate AS newer WHERE newer.sweep_id = estimate.sweep_id
			AND (newer.made_at, newer.procedure_id) > (estimate.made_at, estimate.procedure_id))
		ORDER BY estimate.sweep_id`, lotID)
}

// EstimatesBy lists the estimates of a lot that were made by exactly that
// method, those settings and that version from the data as they are, one a
// sweep at most: what is in the list need not be fitted again.
func (tx *Tx) EstimatesBy(lotID, method, settings, version string) ([]record.Estimate, error) {
	return all(tx, "estimates of lot "+lotID, scanEstimate, selectEstimate+`WHERE device.lot_id = ?
		AND fit_procedure.id = ? AND estimate.data_hash = sweep.data_hash ORDER BY estimate.sweep_id`,
		lotID, contentID(method, settings, version))
}

// EstimatesOf lists all estimates that were ever made of a sweep, the oldest
// first.
func (tx *Tx) EstimatesOf(sweepID string) ([]record.Estimate, error) {
	return all(tx, "estimates of sweep "+sweepID, scanEstimate, selectEstimate+`WHERE estimate.sweep_id = ?
		ORDER BY made_at, procedure_id`, sweepID)
}
