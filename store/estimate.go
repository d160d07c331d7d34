package store

import (
	"database/sql"
	"encoding/json"
	"fmt"

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
	hashes     map[string]string    // data hash by sweep, of the lots met so far
	json       []byte               // scratch
}

func (tx *Tx) newEstimatePutter() (*estimatePutter, error) {
	insert, err := tx.sql.PrepareContext(tx.ctx, `INSERT INTO estimate (sweep_id, procedure_id, data_hash, made_at, state, estimates, remarks)
		VALUES (?, ?, ?, ?, ?, ?, ?) ON CONFLICT DO NOTHING`)
	if err != nil {
		return nil, tx.fail("estimates", err)
	}
	return &estimatePutter{tx: tx, insert: insert, procedures: map[[3]string]string{}, hashes: map[string]string{}}, nil
}

func (p *estimatePutter) put(e *record.Estimate) error {
	if e.MadeAt == "" {
		e.MadeAt = record.Now()
	}
	if err := record.CheckStamp("time of making", e.MadeAt); err != nil {
		return err
	}
	if err := p.fits(e); err != nil {
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
	_, err = p.insert.ExecContext(p.tx.ctx, e.SweepID, procedure, e.DataHash, e.MadeAt, e.State, string(p.json), remarks)
	return p.tx.fail("estimate", err)
}

// fits checks that the estimate was made from the data that its sweep has.
func (p *estimatePutter) fits(e *record.Estimate) error {
	hash, ok := p.hashes[e.SweepID]
	if !ok {
		if err := p.meet(e.SweepID); err != nil {
			return err
		}
		if hash, ok = p.hashes[e.SweepID]; !ok {
			return ErrNotFound
		}
	}
	if e.DataHash != hash {
		return fmt.Errorf("it was made from data %s, the sweep has %s: %w", e.DataHash, hash, record.ErrInvalid)
	}
	return nil
}

// meet looks up the hash of a sweep, with those of all complete sweeps of its
// lot.
func (p *estimatePutter) meet(sweepID string) error {
	pairs, err := all(p.tx, "sweeps", func(r row) (s [2]string, err error) {
		err = r.Scan(&s[0], &s[1])
		return s, err
	}, `SELECT sweep.id, data_hash FROM sweep JOIN device ON device.id = sweep.device_id
		WHERE data_hash IS NOT NULL AND lot_id = (
			SELECT lot_id FROM sweep JOIN device ON device.id = sweep.device_id WHERE sweep.id = ?)`, sweepID)
	for _, s := range pairs {
		p.hashes[s[0]] = s[1]
	}
	return err
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

const selectEstimate = `SELECT estimate.sweep_id, estimate.data_hash, method, settings, version, state, estimates, remarks, made_at
	FROM estimate JOIN fit_procedure ON fit_procedure.id = estimate.procedure_id
	JOIN sweep ON sweep.id = estimate.sweep_id JOIN device ON device.id = sweep.device_id `

func scanEstimate(r row) (e record.Estimate, err error) {
	var values, remarks string
	if err := r.Scan(&e.SweepID, &e.DataHash, &e.Method, &e.Settings, &e.Version, &e.State, &values, maybe{&remarks}, stamp{&e.MadeAt}); err != nil {
		return e, err
	}
	if e.Values, err = parseEstimates(values); err != nil {
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
