package store

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"

	"gatesill/store/record"
)

const (
	complete = `data_hash IS NOT NULL`
	started  = `data_hash IS NULL`
)

// selectSweep reads sweeps, whole or all but their data.
func selectSweep(withData bool, where string) string {
	data := ""
	if withData {
		data = `, source_lines, marks, ` + dataColumns
	}
	return `SELECT sweep.id, device.lot_id, device_id, session_id, source_id, position, direction, measured_at, sweep.excluded, sweep.why, ` +
		conditionColumns + `, instruments_id, data_hash, coalesce(points, 0)` + data + `
		FROM sweep JOIN device ON device.id = sweep.device_id
		WHERE ` + where
}

// Sweeps lists the complete sweeps of a lot in the order in which they were
// added. Without data, Columns, Marks and Lines are left out. The sweeps of a
// file share one slice of Instruments.
func (tx *Tx) Sweeps(lotID string, withData bool) ([]record.Sweep, error) {
	return tx.sweeps("sweeps of lot "+lotID, withData, complete+` AND device.lot_id = ?`, lotID)
}

// SweepsOf lists the complete sweeps of a device; see [Tx.Sweeps].
func (tx *Tx) SweepsOf(deviceID string, withData bool) ([]record.Sweep, error) {
	return tx.sweeps("sweeps of device "+deviceID, withData, complete+` AND device_id = ?`, deviceID)
}

// Sweep finds a complete sweep by its id, or gives [ErrNotFound].
func (tx *Tx) Sweep(id string) (record.Sweep, error) {
	list, err := tx.sweeps("sweep "+id, true, complete+` AND sweep.id = ?`, id)
	if err == nil && len(list) == 0 {
		err = fmt.Errorf("sweep %s: %w", id, ErrNotFound)
	}
	if err != nil {
		return record.Sweep{}, err
	}
	return list[0], nil
}

// SweepByDataHash lists the sweeps of a lot with exactly those data, without
// the data: the same block of rows, under whatever device it stands.
func (tx *Tx) SweepByDataHash(lotID, hash string) ([]record.Sweep, error) {
	return tx.sweeps("sweeps with the same rows", false, complete+` AND data_hash = ? AND device.lot_id = ?`, hash, lotID)
}

func (tx *Tx) sweeps(noun string, withData bool, where string, args ...any) ([]record.Sweep, error) {
	r := sweepReader{withData: withData}
	list, err := all(tx, noun, r.scan, selectSweep(withData, where), args...)
	if err != nil {
		return nil, err
	}
	if err := tx.addInstruments(list, r.instruments); err != nil {
		return nil, err
	}
	// In Go: a sorter of SQLite's would carry the data along.
	slices.SortFunc(list, func(a, b record.Sweep) int { return strings.Compare(a.ID, b.ID) })
	return list, nil
}

// sweepReader scans the rows of selectSweep.
type sweepReader struct {
	withData    bool
	instruments []string // id of the list of each sweep scanned so far
}

func (r *sweepReader) scan(from row) (s record.Sweep, err error) {
	c := &s.Condition
	var instruments, lines, marks string
	to := []any{&s.ID, &s.LotID, &s.DeviceID, maybe{&s.SessionID}, maybe{&s.SourceID}, &s.Position, &s.Direction,
		stamp{&s.MeasuredAt}, &s.Excluded, &s.Why,
		&c.Circuit, &c.RL, &c.RLTol, &c.RLRating, &c.VDD, &c.VDS, &c.Ammeter, &c.Burden, &c.GateReturn,
		&c.Pulsed, &c.PulseWidth, &c.PulseDuty, &c.PulseDelay, &c.Dwell, &c.Temp, &c.TempOf, &c.SpotCurrent,
		maybe{&instruments}, maybe{&s.DataHash}, &s.Points}
	data := make([]string, len(record.Quantities))
	if r.withData {
		to = append(to, maybe{&lines}, maybe{&marks})
		for i := range data {
			to = append(to, maybe{&data[i]})
		}
	}
	if err := from.Scan(to...); err != nil {
		return s, err
	}
	r.instruments = append(r.instruments, instruments)
	if !r.withData {
		return s, nil
	}
	if err := unpack(&s, lines, marks, data); err != nil {
		return s, fmt.Errorf("sweep %s: %w", s.ID, err)
	}
	return s, nil
}

// unpack fills lines, marks and columns.
func unpack(s *record.Sweep, lines, marks string, data []string) (err error) {
	if s.Lines, err = unpackLines(lines, s.Points); err != nil {
		return err
	}
	if marks != "" {
		if err := json.Unmarshal([]byte(marks), &s.Marks); err != nil {
			return fmt.Errorf("%w: marks: %w", ErrCorrupt, err)
		}
	}
	for i, q := range record.Quantities {
		if data[i] == "" {
			continue
		}
		text := []byte(data[i])
		values, err := record.ParseDecimals(make([]float64, 0, min(s.Points, len(text))), text)
		if err != nil {
			return fmt.Errorf("%w: column %s: %v", ErrCorrupt, q, err)
		}
		if len(values) != s.Points {
			return fmt.Errorf("%w: column %s has %d of %d points", ErrCorrupt, q, len(values), s.Points)
		}
		s.Columns = append(s.Columns, record.Column{Quantity: q, Values: values, Text: text})
	}
	return nil
}

// addInstruments fills in the instruments; ids belong to the sweeps one by one.
func (tx *Tx) addInstruments(list []record.Sweep, ids []string) error {
	known := map[string][]record.Instrument{"": nil}
	for i, id := range ids {
		instruments, ok := known[id]
		if !ok {
			s, err := one(tx, "instruments "+id, text, `SELECT instruments FROM instrument_list WHERE id = ?`, id)
			if err != nil {
				return err
			}
			if err := json.Unmarshal([]byte(s), &instruments); err != nil {
				return tx.fail("instruments "+id, fmt.Errorf("%w: %w", ErrCorrupt, err))
			}
			known[id] = instruments
		}
		list[i].Instruments = instruments
	}
	return nil
}
