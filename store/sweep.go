package store

import (
	"database/sql"
	"encoding/json"
	"fmt"
	"math"

	"gatesill/store/record"
)

// conditionColumns and dataColumns are the columns of a sweep in the order in
// which sweepValues and scanSweep take them; each data column bears the name of
// its record.Quantity.
const (
	conditionColumns = `circuit, rl_ohm, rl_tol, rl_rating_w, vdd_nominal_v, vds_nominal_v, ammeter, burden_ohm, gate_return, ` +
		`pulsed, pulse_width_s, pulse_duty, pulse_delay_s, dwell_s, temp_nominal_c, temp_of, spot_current_a`
	dataColumns = `vg_v, id_a, vl_v, vd_v, vdd_v, ig_a, gm_s, temp_c, t_s, pair_bound_v, settled`

	insertSweep = `INSERT INTO sweep (id, device_id, session_id, source_id, position, direction, measured_at, excluded, why, ` +
		conditionColumns + `, instruments_id, data_hash, points, source_lines, marks, ` + dataColumns + `)
		VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?,  ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?,  ` +
		`?, ?, ?, ?, ?,  ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)`
)

// AddSweeps adds whole sweeps and fills ID, LotID, DataHash, Points, and the
// Text of columns that have none, in place. Every device must belong to the
// sweep's lot (to any, when LotID is empty). A sweep that is not valid, whose
// Text is no array of the same numbers as its Values, or whose DataHash is not
// that of its data, is refused.
func (tx *Tx) AddSweeps(ss []record.Sweep) error {
	a, err := tx.newSweepAdder()
	if err != nil {
		return err
	}
	defer a.insert.Close()
	for i := range ss {
		if err := tx.live.Err(); err != nil {
			return err
		}
		if err := a.add(&ss[i]); err != nil {
			return fmt.Errorf("sweep %d of %d: %w", i+1, len(ss), err)
		}
	}
	return nil
}

// sweepAdder keeps what the sweeps of one batch share.
type sweepAdder struct {
	tx          *Tx
	insert      *sql.Stmt
	devices     map[string]string // lot by device, of the lots met so far
	lots        map[string]bool   // lots in devices
	instruments instrumentCache
	numbers     []float64 // scratch
}

func (tx *Tx) newSweepAdder() (*sweepAdder, error) {
	insert, err := tx.sql.PrepareContext(tx.ctx, insertSweep)
	if err != nil {
		return nil, tx.fail("sweeps", err)
	}
	return &sweepAdder{tx: tx, insert: insert, devices: map[string]string{}, lots: map[string]bool{}}, nil
}

func (a *sweepAdder) add(s *record.Sweep) error {
	if err := s.Validate(); err != nil {
		return err
	}
	if err := a.place(s); err != nil {
		return err
	}
	if err := a.seal(s); err != nil {
		return err
	}
	values, err := a.values(s)
	if err != nil {
		return err
	}
	_, err = a.insert.ExecContext(a.tx.ctx, values...)
	return a.tx.fail("device "+s.DeviceID, err)
}

// place checks that the device is one of the sweep's lot, and gives the sweep
// its id.
func (a *sweepAdder) place(s *record.Sweep) error {
	lot, ok := a.devices[s.DeviceID]
	if !ok {
		if err := a.meet(s); err != nil {
			return err
		}
		lot = a.devices[s.DeviceID]
	}
	if s.LotID == "" {
		s.LotID = lot
	}
	if s.LotID != lot {
		return fmt.Errorf("device %s is of lot %s, not of %s: %w", s.DeviceID, lot, s.LotID, record.ErrInvalid)
	}
	return newID(&s.ID)
}

// meet looks a device up, with all others of its lot when that is a new one.
func (a *sweepAdder) meet(s *record.Sweep) error {
	d, err := a.tx.DeviceByID(s.DeviceID)
	if err != nil {
		return err
	}
	a.devices[d.ID] = d.LotID
	if a.lots[d.LotID] {
		return nil
	}
	a.lots[d.LotID] = true
	ids, err := all(a.tx, "devices", text, `SELECT id FROM device WHERE lot_id = ?`, d.LotID)
	for _, id := range ids {
		a.devices[id] = d.LotID
	}
	return err
}

// seal fills texts, hash and number of points, and checks those that are there.
func (a *sweepAdder) seal(s *record.Sweep) error {
	for i := range s.Columns {
		c := &s.Columns[i]
		if len(c.Text) == 0 {
			c.Text = record.AppendDecimals(nil, c.Values)
			continue
		}
		if err := a.compare(c); err != nil {
			return fmt.Errorf("column %s: %w", c.Quantity, err)
		}
	}
	hash := s.Hash()
	if s.DataHash != "" && s.DataHash != hash {
		return fmt.Errorf("data hash %s given, %s found: %w", s.DataHash, hash, record.ErrInvalid)
	}
	s.DataHash, s.Points = hash, s.Len()
	return nil
}

// compare reads the text of a column back: what is kept must be what was
// computed with.
func (a *sweepAdder) compare(c *record.Column) (err error) {
	if a.numbers, err = record.ParseDecimals(a.numbers[:0], c.Text); err != nil {
		return err
	}
	if len(a.numbers) != len(c.Values) {
		return fmt.Errorf("%d decimals for %d points: %w", len(a.numbers), len(c.Values), record.ErrInvalid)
	}
	for i, x := range a.numbers {
		if x != c.Values[i] && !(math.IsNaN(x) && math.IsNaN(c.Values[i])) {
			return fmt.Errorf("point %d: decimal %v, value %v: %w", i, x, c.Values[i], record.ErrInvalid)
		}
	}
	return nil
}

// values gives the values of insertSweep.
func (a *sweepAdder) values(s *record.Sweep) ([]any, error) {
	instruments, err := a.instruments.id(a.tx, s.Instruments)
	if err != nil {
		return nil, err
	}
	values := make([]any, 0, 42)
	values = append(values, s.ID, s.DeviceID, orNull(s.SessionID), orNull(s.SourceID), s.Position, string(s.Direction),
		orNull(s.MeasuredAt), s.Excluded, s.Why)
	values = append(values, conditionValues(&s.Condition)...)
	values = append(values, orNull(instruments))
	return appendData(values, s)
}

func conditionValues(c *record.Condition) []any {
	return []any{string(c.Circuit), c.RL, c.RLTol, c.RLRating, c.VDD, c.VDS, c.Ammeter, c.Burden, c.GateReturn,
		c.Pulsed, c.PulseWidth, c.PulseDuty, c.PulseDelay, c.Dwell, c.Temp, c.TempOf, c.SpotCurrent}
}

// dataValues is how many values appendData appends.
var dataValues = 4 + len(record.Quantities)

// appendData appends hash, number of points, source lines, marks and data
// columns.
func appendData(values []any, s *record.Sweep) ([]any, error) {
	var marks any
	if len(s.Marks) > 0 {
		b, err := json.Marshal(s.Marks)
		if err != nil {
			return nil, fmt.Errorf("marks: %w", err)
		}
		marks = string(b)
	}
	values = append(values, s.DataHash, s.Points, orNull(packLines(s.Lines)), marks)
	for _, q := range record.Quantities {
		if c := s.Column(q); c != nil {
			values = append(values, string(c.Text))
		} else {
			values = append(values, nil)
		}
	}
	return values, nil
}

// instrumentCache knows the id of the list that came last: the sweeps of a file
// share one.
type instrumentCache struct {
	list []record.Instrument
	key  string
}

// id gives the id of the list of instruments, which it keeps if it is new; ""
// when there are none.
func (c *instrumentCache) id(tx *Tx, list []record.Instrument) (string, error) {
	if len(list) == 0 {
		return "", nil
	}
	if len(list) == len(c.list) && &list[0] == &c.list[0] {
		return c.key, nil
	}
	b, err := json.Marshal(list)
	if err != nil {
		return "", fmt.Errorf("instruments: %w", err)
	}
	key := contentID(string(b))
	if err := tx.exec("instruments", `INSERT INTO instrument_list (id, instruments) VALUES (?, ?) ON CONFLICT (id) DO NOTHING`,
		key, string(b)); err != nil {
		return "", err
	}
	c.list, c.key = list, key
	return key, nil
}

// ExcludeSweep leaves a sweep out of everything, or takes it back in; the audit
// trail keeps both. An unknown id is [ErrNotFound].
func (tx *Tx) ExcludeSweep(id string, excluded bool, reason string) error {
	noun := "sweep " + id
	type state struct {
		excluded bool
		why      string
	}
	old, err := one(tx, noun, func(r row) (s state, err error) {
		err = r.Scan(&s.excluded, &s.why)
		return s, err
	}, `SELECT excluded, why FROM sweep WHERE id = ?`, id)
	if err != nil {
		return err
	}
	why := ""
	if excluded {
		why = reason
	}
	k := newKind("sweep", "excluded, why")
	return k.update(tx, noun, id, reason, []any{old.excluded, old.why}, []any{excluded, why})
}
