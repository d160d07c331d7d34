package store

import (
	"fmt"

	"gatesill/store/record"
)

// StartSweep adds a sweep whose points are still to come, for the readings that
// are taken of it, and fills its ID. It is in no listing until [Tx.SealSweep].
func (tx *Tx) StartSweep(s *record.Sweep) error {
	a, err := tx.newSweepAdder()
	if err != nil {
		return err
	}
	defer a.insert.Close()
	if len(s.Columns) > 0 {
		return fmt.Errorf("device %s: a sweep starts without points: %w", s.DeviceID, record.ErrInvalid)
	}
	if err := s.ValidateStart(); err != nil {
		return err
	}
	if err := a.place(s); err != nil {
		return err
	}
	values, err := a.values(s)
	if err != nil {
		return err
	}
	clear(values[len(values)-dataValues:])
	_, err = a.insert.ExecContext(tx.ctx, values...)
	return tx.fail("device "+s.DeviceID, err)
}

// SealSweep gives a started sweep its points, marks and hash, once and for all,
// and the direction and the instruments as they turned out; the rest of s does
// not change what was kept. [ErrNotFound] when there is no such sweep, or it is
// sealed.
func (tx *Tx) SealSweep(s *record.Sweep) error {
	if err := s.Validate(); err != nil {
		return err
	}
	a, err := tx.newSweepAdder()
	if err != nil {
		return err
	}
	defer a.insert.Close()
	if err := a.seal(s); err != nil {
		return err
	}
	values, err := appendData(nil, s)
	if err != nil {
		return err
	}
	instruments, err := a.instruments.id(tx, s.Instruments)
	if err != nil {
		return err
	}
	noun := "started sweep " + s.ID
	result, err := tx.sql.ExecContext(tx.ctx, `UPDATE sweep SET (data_hash, points, source_lines, marks, `+dataColumns+`, direction, instruments_id) = (`+
		places(len(values)+2)+`) WHERE id = ? AND data_hash IS NULL`, append(values, string(s.Direction), orNull(instruments), s.ID)...)
	if err != nil {
		return tx.fail(noun, err)
	}
	if n, err := result.RowsAffected(); err != nil || n == 1 {
		return tx.fail(noun, err)
	}
	return fmt.Errorf("%s: %w", noun, ErrNotFound)
}

// StartedSweeps lists the sweeps that were never sealed, without data: those
// being measured, and those that a crash cut short. One that was excluded
// ([Tx.ExcludeSweep]) was given up and is not listed.
func (tx *Tx) StartedSweeps() ([]record.Sweep, error) {
	return tx.sweeps("started sweeps", false, started+` AND sweep.excluded = 0`)
}

// GivenUpSweeps lists the sweeps of a lot that were never sealed and given up,
// without data.
func (tx *Tx) GivenUpSweeps(lotID string) ([]record.Sweep, error) {
	return tx.sweeps("sweeps given up", false, started+` AND sweep.excluded = 1 AND device.lot_id = ?`, lotID)
}

// AddReadings adds readings in the order of their arrival; those of one sweep
// continue where the ones before ended.
func (tx *Tx) AddReadings(rs []record.Reading) error {
	insert, err := tx.sql.PrepareContext(tx.ctx, `INSERT INTO reading (sweep_id, n, role, meter, at_s, value, unit, state, raw, digit, refused)
		VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)`)
	if err != nil {
		return tx.fail("readings", err)
	}
	defer insert.Close()
	last := map[string]int64{} // n of the last reading by sweep
	for i := range rs {
		r := &rs[i]
		if err := r.Validate(); err != nil {
			return err
		}
		n, ok := last[r.SweepID]
		if !ok {
			if n, err = one(tx, "readings", func(from row) (n int64, err error) {
				err = from.Scan(&n)
				return n, err
			}, `SELECT coalesce(max(n), 0) FROM reading WHERE sweep_id = ?`, r.SweepID); err != nil {
				return err
			}
		}
		last[r.SweepID] = n + 1
		if _, err := insert.ExecContext(tx.ctx, r.SweepID, n+1, r.Role, r.Meter, r.At, r.Value, r.Unit, string(r.State), r.Raw, r.Digit, r.Refused); err != nil {
			return tx.fail("reading of "+r.Meter, err)
		}
	}
	return nil
}

// Readings lists the readings of a sweep in the order of their arrival.
func (tx *Tx) Readings(sweepID string) ([]record.Reading, error) {
	return all(tx, "readings of sweep "+sweepID, func(from row) (r record.Reading, err error) {
		err = from.Scan(&r.SweepID, &r.Role, &r.Meter, &r.At, &r.Value, &r.Unit, &r.State, &r.Raw, &r.Digit, &r.Refused)
		return r, err
	}, `SELECT sweep_id, role, meter, at_s, value, unit, state, raw, digit, refused FROM reading WHERE sweep_id = ? ORDER BY n`, sweepID)
}

// AddEvents keeps what happened in a session, in the order given.
func (tx *Tx) AddEvents(es []record.Event) error {
	for i := range es {
		e := &es[i]
		if err := tx.exec("event of session "+e.SessionID, `INSERT INTO event (session_id, sweep_id, at_s, kind, text) VALUES (?, ?, ?, ?, ?)`,
			e.SessionID, orNull(e.SweepID), e.At, e.Kind, e.Text); err != nil {
			return err
		}
	}
	return nil
}

// Events lists what happened in a session, in the order in which it was added.
func (tx *Tx) Events(sessionID string) ([]record.Event, error) {
	return all(tx, "events of session "+sessionID, func(from row) (e record.Event, err error) {
		err = from.Scan(&e.SessionID, maybe{&e.SweepID}, &e.At, &e.Kind, &e.Text)
		return e, err
	}, `SELECT session_id, sweep_id, at_s, kind, text FROM event WHERE session_id = ? ORDER BY rowid`, sessionID)
}
