package store

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// fullSweep has every field filled, with numbers that tell the fields apart.
func fullSweep(deviceID, sessionID, sourceID string) record.Sweep {
	nan, n := math.NaN(), record.Known
	isolated := true
	columns := []record.Column{
		{Quantity: record.VG, Values: []float64{3, 3.01, 3.02}, Text: []byte("[3.000,3.010,3.020]")},
		{Quantity: record.ID, Values: []float64{0.0012, nan, 0.0031}, Text: []byte("[1.2e-3,null,3.1e-3]")},
		{Quantity: record.VL, Values: []float64{0.012, 0.02, 0.031}},
	}
	for _, q := range record.Quantities[3:] {
		columns = append(columns, record.Column{Quantity: q, Values: []float64{1, 2, nan}, Text: []byte("[1.0,2,null]")})
	}
	return record.Sweep{
		DeviceID: deviceID, SessionID: sessionID, SourceID: sourceID, Position: 7, Direction: record.Down, MeasuredAt: "2024-05-06T07:08:09.123Z",
		Condition: record.Condition{Circuit: record.Load, RL: n(10), RLTol: n(0.01), RLRating: n(25), VDD: n(12), VDS: n(28), Ammeter: "source",
			Burden: n(0.1), GateReturn: "ground", Pulsed: "pulsed", PulseWidth: n(3e-4), PulseDuty: n(0.02), PulseDelay: n(1e-4), Dwell: n(0.5),
			Temp: n(25), TempOf: "case", SpotCurrent: n(0.25)},
		Instruments: []record.Instrument{{Role: "gate", Name: "invented meter", Serial: "7", Coverage: "limit",
			Ranges:   []record.RangeAccuracy{{Top: 6, Percent: 0.5, Counts: 3, Resolution: 0.001, Noise: n(2e-4)}},
			Isolated: &isolated, Calibrated: "2024-01-02", Due: "2025-01-02"}},
		Columns: columns,
		Marks:   []record.Mark{{Index: 1, Quantity: record.ID, State: record.Overload, Raw: "O.L"}, {Index: 2, Quantity: record.T, State: record.Missing}},
		Lines:   []record.Lines{{Point: 0, Line: 5, Count: 2}, {Point: 2, Line: 9, Count: 1}},
	}
}

func TestSweepComesBackWhole(t *testing.T) {
	db := newStore(t)
	var lot record.Lot
	var want record.Sweep
	update(t, db, func(tx *Tx) {
		l, ds := addLot(t, tx, "A", 1)
		lot = l
		session := record.Session{Name: "S", Bench: "B"}
		require.NoError(t, tx.AddSession(&session))
		source := record.Source{LotID: lot.ID, Name: "a.csv", Hash: contentID("x") + contentID("y"), Dialect: "{}"}
		require.NoError(t, tx.AddSource(&source))
		ss := []record.Sweep{fullSweep(ds[0].ID, session.ID, source.ID)}
		require.NoError(t, tx.AddSweeps(ss))
		want = ss[0]
	})
	require.Len(t, want.ID, 36)
	require.Equal(t, lot.ID, want.LotID)
	require.Equal(t, 3, want.Points)
	require.Equal(t, "[0.012,0.02,0.031]", string(want.Column(record.VL).Text), "made from the values")
	view(t, db, func(tx *Tx) {
		got, err := tx.Sweep(want.ID)
		require.NoError(t, err)
		nanToZero(t, &got, &want)
		require.Equal(t, want, got)
		require.Equal(t, want.DataHash, got.Hash())

		bare, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		want.Columns, want.Marks, want.Lines = nil, nil, nil
		require.Equal(t, []record.Sweep{want}, bare, "without data")
		of, err := tx.SweepsOf(want.DeviceID, false)
		require.NoError(t, err)
		require.Equal(t, bare, of)
		_, err = tx.Sweep("no such sweep")
		require.ErrorIs(t, err, ErrNotFound)
	})
}

// nanToZero makes sweeps comparable: NaN must stand in the same places.
func nanToZero(t *testing.T, got, want *record.Sweep) {
	t.Helper()
	require.Len(t, got.Columns, len(want.Columns))
	for i := range got.Columns {
		g, w := got.Columns[i].Values, want.Columns[i].Values
		require.Len(t, g, len(w))
		for k := range g {
			require.Equal(t, math.IsNaN(w[k]), math.IsNaN(g[k]))
			if math.IsNaN(w[k]) {
				g[k], w[k] = 0, 0
			}
		}
	}
}

func TestSweepRefused(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	var other record.Lot
	update(t, db, func(tx *Tx) { other, _ = addLot(t, tx, "B", 1) })
	for name, c := range map[string]struct {
		change func(*record.Sweep)
		err    error
		says   string
	}{
		"not valid":        {func(s *record.Sweep) { s.Direction = "" }, record.ErrInvalid, "direction"},
		"unknown device":   {func(s *record.Sweep) { s.DeviceID = "x" }, ErrNotFound, "device x"},
		"no device":        {func(s *record.Sweep) { s.DeviceID = "" }, ErrNotFound, "device"},
		"another lot":      {func(s *record.Sweep) { s.LotID = other.ID }, record.ErrInvalid, "not of"},
		"unknown session":  {func(s *record.Sweep) { s.SessionID = "x" }, ErrNotFound, "belongs to"},
		"unknown source":   {func(s *record.Sweep) { s.SourceID = "x" }, ErrNotFound, "belongs to"},
		"its id is taken":  {func(s *record.Sweep) { s.ID = sweeps[0].ID }, ErrExists, "already there"},
		"id is no UUID":    {func(s *record.Sweep) { s.ID = "x" }, record.ErrInvalid, "CHECK"},
		"wrong hash":       {func(s *record.Sweep) { s.DataHash = sweeps[1].DataHash }, record.ErrInvalid, "data hash"},
		"text is no array": {func(s *record.Sweep) { s.Columns[1].Text = []byte("1,2") }, record.ErrInvalid, "column id_a"},
		"text too short":   {func(s *record.Sweep) { s.Columns[0].Text = []byte("[1]") }, record.ErrInvalid, "1 decimals for 50"},
		"another number": {func(s *record.Sweep) {
			s.Columns[1].Text = record.AppendDecimals(nil, s.Columns[0].Values)
		}, record.ErrInvalid, "point 0: decimal 1, value 0"},
		"a number for none": {func(s *record.Sweep) {
			s.Columns[1].Text = record.AppendDecimals(nil, s.Columns[1].Values)
			s.Columns[1].Values[3] = math.NaN()
		}, record.ErrInvalid, "point 3"},
	} {
		t.Run(name, func(t *testing.T) {
			err := db.Update(background, func(tx *Tx) error {
				good, bad := invented(sweeps[0].DeviceID, 50), invented(sweeps[0].DeviceID, 50)
				c.change(&bad)
				return tx.AddSweeps([]record.Sweep{good, bad})
			})
			require.ErrorIs(t, err, c.err)
			require.ErrorContains(t, err, c.says)
			require.ErrorContains(t, err, "sweep 2 of 2")
			holds(t, db, lot, sweeps)
		})
	}
}

func TestSameRows(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, ds := addLot(t, tx, "A", 3)
		other, others := addLot(t, tx, "B", 1)
		ss := []record.Sweep{invented(ds[0].ID, 9), invented(ds[1].ID, 9), invented(ds[2].ID, 8), invented(others[0].ID, 9)}
		require.NoError(t, tx.AddSweeps(ss))
		same, err := tx.SweepByDataHash(lot.ID, ss[0].DataHash)
		require.NoError(t, err)
		require.Len(t, same, 2)
		require.Equal(t, []string{ds[0].ID, ds[1].ID}, []string{same[0].DeviceID, same[1].DeviceID})
		same, err = tx.SweepByDataHash(other.ID, ss[0].DataHash)
		require.NoError(t, err)
		require.Len(t, same, 1)
		same, err = tx.SweepByDataHash(lot.ID, "none")
		require.NoError(t, err)
		require.Empty(t, same)
	})
}

func TestSweepsKeepTheirOrder(t *testing.T) {
	db := newStore(t)
	update(t, db, func(tx *Tx) {
		lot, ds := addLot(t, tx, "A", 40)
		ss := make([]record.Sweep, 200)
		for i := range ss {
			ss[i] = invented(ds[(i*7)%40].ID, 2)
			ss[i].Position = i + 1
		}
		require.NoError(t, tx.AddSweeps(ss))
		got, err := tx.Sweeps(lot.ID, false)
		require.NoError(t, err)
		require.Len(t, got, len(ss))
		for i := range got {
			require.Equal(t, i+1, got[i].Position)
		}
	})
}

func TestExcludeSweep(t *testing.T) {
	db := newStore(t)
	_, sweeps := fill(t, db)
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.ExcludeSweep(sweeps[0].ID, true, "probe slipped"))
		require.NoError(t, tx.ExcludeSweep(sweeps[0].ID, true, "probe slipped"), "again: nothing new")
		s, err := tx.Sweep(sweeps[0].ID)
		require.NoError(t, err)
		require.True(t, s.Excluded)
		require.Equal(t, "probe slipped", s.Why)
		require.NoError(t, tx.ExcludeSweep(sweeps[0].ID, false, "it did not"))
		s, err = tx.Sweep(sweeps[0].ID)
		require.NoError(t, err)
		require.False(t, s.Excluded)
		require.Empty(t, s.Why)
		trail, err := tx.Changes("sweep", sweeps[0].ID)
		require.NoError(t, err)
		require.Equal(t, []string{"excluded: no > yes (probe slipped)", "why:  > probe slipped (probe slipped)",
			"excluded: yes > no (it did not)", "why: probe slipped >  (it did not)"}, briefly(trail))
		require.Equal(t, "D0001", trail[0].Subject)
		require.ErrorIs(t, tx.ExcludeSweep("x", true, ""), ErrNotFound)
	})
}

func TestLiveSweep(t *testing.T) {
	db := newStore(t)
	lot, kept := fill(t, db)
	s := invented(kept[0].DeviceID, 3)
	whole := s.Columns
	s.Columns = nil
	readings := []record.Reading{
		{Role: "gate", Meter: "m1", At: 0.1, Value: record.Known(3.01), Unit: "V", Raw: []byte{0, 1, 0xff}, Digit: record.Known(0.01)},
		{Role: "current", Meter: "m2", At: 0.2, State: record.Overload, Unit: "A", Raw: []byte("O.L"), Refused: "held"},
	}
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.StartSweep(&s))
		for i := range readings {
			readings[i].SweepID = s.ID
		}
		require.NoError(t, tx.AddReadings(readings[:1]))
		require.NoError(t, tx.AddReadings(readings[1:]))
	})
	holds(t, db, lot, kept) // it is in no listing yet
	view(t, db, func(tx *Tx) {
		open, err := tx.StartedSweeps()
		require.NoError(t, err)
		require.Len(t, open, 1)
		require.Equal(t, s.ID, open[0].ID)
		got, err := tx.Readings(s.ID)
		require.NoError(t, err)
		require.Equal(t, readings, got)
	})
	given := invented(kept[1].DeviceID, 2)
	given.Columns = nil
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.StartSweep(&given))
		require.NoError(t, tx.ExcludeSweep(given.ID, true, "given up"))
		up, err := tx.GivenUpSweeps(lot.ID)
		require.NoError(t, err)
		require.Len(t, up, 1)
		require.Equal(t, given.ID, up[0].ID)
		session := record.Session{Name: "S"}
		require.NoError(t, tx.AddSession(&session))
		events := []record.Event{{SessionID: session.ID, At: 1, Kind: "zero", Text: "{}"}, {SessionID: session.ID, SweepID: s.ID, At: 0.5, Kind: "limit", Text: "P_D"}}
		require.NoError(t, tx.AddEvents(events))
		got, err := tx.Events(session.ID)
		require.NoError(t, err)
		require.Equal(t, events, got)
		require.ErrorIs(t, tx.AddEvents([]record.Event{{SessionID: "x", Kind: "zero"}}), ErrNotFound)
	})
	s.Columns = whole
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.SealSweep(&s))
		require.ErrorIs(t, tx.SealSweep(&s), ErrNotFound, "sealed is sealed")
		open, err := tx.StartedSweeps()
		require.NoError(t, err)
		require.Empty(t, open)
		require.ErrorIs(t, tx.StartSweep(&s), record.ErrInvalid, "with points")
		require.ErrorIs(t, tx.AddReadings([]record.Reading{{SweepID: "x", Value: record.Known(1)}}), ErrNotFound)
		require.ErrorIs(t, tx.AddReadings([]record.Reading{{SweepID: s.ID}}), record.ErrInvalid)
	})
	holds(t, db, lot, append(kept, s))
}

func TestLines(t *testing.T) {
	type runs = []record.Lines
	check := func(lines runs, points int, want string) {
		t.Helper()
		got := packLines(lines)
		require.Equal(t, want, got)
		back, err := unpackLines(got, points)
		require.NoError(t, err)
		a, b := record.Sweep{Lines: lines}, record.Sweep{Lines: back}
		for i := range points {
			require.Equal(t, a.Line(i), b.Line(i), "point %d", i)
		}
	}
	check(nil, 3, "")
	check(runs{{Point: 0, Line: 2, Count: 200}}, 200, "[[0,2,200,1]]")
	check(runs{{Point: 0, Line: 2, Count: 1}}, 1, "[[0,2,1,1]]")
	// Devices by turns, with a refused row between; then a run.
	check(runs{{Point: 0, Line: 2, Count: 1}, {Point: 1, Line: 5, Count: 1}, {Point: 2, Line: 8, Count: 1}, {Point: 3, Line: 13, Count: 1}, {Point: 4, Line: 16, Count: 1}, {Point: 5, Line: 20, Count: 9}}, 14, "[[0,2,3,3],[3,13,2,3],[5,20,9,1]]")
	check(runs{{Point: 0, Line: 7, Count: 1}, {Point: 1, Line: 7, Count: 1}}, 2, "[[0,7,2,0]]") // two spots in one line
	check(runs{{Point: 0, Line: 9, Count: 1}, {Point: 2, Line: 8, Count: 1}}, 3, "[[0,9,1,1],[2,8,1,1]]")
	check(runs{{Point: 0, Line: 9, Count: 1}, {Point: 1, Line: 10, Count: 1}, {Point: 2, Line: 11, Count: 1}}, 3, "[[0,9,3,1]]")
	for _, text := range []string{"x", "[1]", "[[0,1,4,2]]", "[[-1,1,1,1]]", "[[0,1,0,1]]", "[[2,1,9223372036854775807,1]]"} {
		_, err := unpackLines(text, 3)
		require.ErrorIs(t, err, ErrCorrupt, text)
	}
}

func TestCancelled(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	ctx, cancel := context.WithCancel(background)
	err := db.Update(ctx, func(tx *Tx) error {
		if err := tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 5)}); err != nil {
			return err
		}
		cancel()
		return tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 5)})
	})
	require.ErrorIs(t, err, context.Canceled)
	err = db.Update(ctx, func(*Tx) error { return nil })
	require.ErrorIs(t, err, context.Canceled)
	holds(t, db, lot, sweeps)
}

func TestPanicRollsBack(t *testing.T) {
	db := newStore(t)
	lot, sweeps := fill(t, db)
	require.PanicsWithValue(t, "on purpose", func() {
		_ = db.Update(background, func(tx *Tx) error {
			require.NoError(t, tx.AddSweeps([]record.Sweep{invented(sweeps[0].DeviceID, 5)}))
			panic("on purpose")
		})
	})
	holds(t, db, lot, sweeps)
	update(t, db, func(*Tx) {}) // and the store goes on working
}
