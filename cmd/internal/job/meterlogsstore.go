package job

import (
	"context"
	"fmt"
	"io"
	"maps"
	"strings"

	"gatesill/acquire/replay"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// storeLogs puts the set into the store in one transaction: source, session with
// what happened in it, devices, and sweeps with the readings they were made of.
func (im *importer) storeLogs(ctx context.Context, set *logSet) error {
	if im.db == nil {
		db, err := im.env.open(ctx, true, false)
		if err != nil {
			return err
		}
		im.db, im.made = db, true
	}
	err := im.db.Update(ctx, func(tx *store.Tx) error {
		lot, err := im.lot(tx)
		if err != nil {
			return err
		}
		if err := im.setAside(tx, lot, &set.file); err != nil {
			return err
		}
		f := &set.file
		src := record.Source{LotID: lot.ID, Name: f.Name, Hash: f.Hash, Size: f.Size, Layout: f.Layout, Dialect: mustJSON(set.dialect), ImportedAt: record.Now()}
		if err := tx.AddSource(&src); err != nil {
			return err
		}
		added, err := im.devices(tx, lot, f.Sweeps)
		if err != nil {
			return err
		}
		session, err := im.logSession(tx, set)
		if err != nil {
			return err
		}
		shown := shownRanges{}
		for _, list := range set.readings {
			for _, reading := range list {
				shown.note(reading)
			}
		}
		var meters []record.Instrument
		if im.bench != nil {
			meters = im.bench.Meters
		}
		next := im.next
		for i := range f.Sweeps {
			next++
			r := f.Sweeps[i].Sweep
			device, ok := added[f.Sweeps[i].Device]
			if !ok {
				device = im.have[f.Sweeps[i].Device]
			}
			r.LotID, r.DeviceID, r.SessionID, r.SourceID, r.Position = lot.ID, device.ID, session.ID, src.ID, next
			r.Instruments = shown.complete(meters)
			if err := im.storeSweep(tx, r, set.readings[i]); err != nil {
				return fmt.Errorf("sweep %d of %d: %w", i+1, len(f.Sweeps), err)
			}
		}
		if err := tx.AddEvents(logEvents(session.ID, set.session)); err != nil {
			return err
		}
		im.next = next
		maps.Copy(im.have, added)
		return nil
	})
	if err != nil {
		return storeFailure(err)
	}
	im.stored = true
	return nil
}

// storeSweep keeps a sweep as one that was taken live: its readings, then its
// points.
func (im *importer) storeSweep(tx *store.Tx, r record.Sweep, readings []record.Reading) error {
	started := r
	started.Columns, started.Marks, started.DataHash = nil, nil, ""
	if err := tx.StartSweep(&started); err != nil {
		return err
	}
	r.ID = started.ID
	for i := range readings {
		readings[i].SweepID = r.ID
	}
	if err := tx.AddReadings(readings); err != nil {
		return err
	}
	return tx.SealSweep(&r)
}

// logSession adds the sitting of the logs.
func (im *importer) logSession(tx *store.Tx, set *logSet) (record.Session, error) {
	s := record.Session{Name: im.rq.Session, Operator: im.rq.Operator, Fixture: im.rq.Fixture, StartedAt: set.session.Started}
	if im.rq.Table.Given.TempOf == "ambient" {
		s.Ambient = im.rq.Table.Given.Temp
	}
	if im.bench != nil {
		id, err := tx.AddBench(im.bench.Name, im.bench.Text)
		if err != nil {
			return s, err
		}
		s.Bench, s.BenchID = im.bench.Name, id
	}
	return s, tx.AddSession(&s)
}

// logEvents are what is kept of the session besides readings: the clocks, what was
// decided about the times, and the notes.
func logEvents(session string, s *replay.Session) (es []record.Event) {
	add := func(at float64, kind, text string) {
		es = append(es, record.Event{SessionID: session, At: at, Kind: kind, Text: text})
	}
	for _, l := range s.Logs {
		if l.Found.Clock != nil {
			add(0, "clock", l.Name+": "+clockText(l))
		}
		for _, n := range l.Found.Notes {
			add(0, "clock", l.Name+": "+n)
		}
	}
	for _, n := range s.Notes {
		add(n.At, "note", n.Text)
	}
	return es
}

// clockText tells how far the clock of a log is off.
func clockText(l *replay.Log) string {
	c := l.Found.Clock
	if c.Assumed {
		return fmt.Sprintf("clock taken as that of the %s log, within %.3g s: %s", c.Against, c.Bound, c.Why)
	}
	text := fmt.Sprintf("clock corrected by %+.3f s ± %.3f s against the %s log", c.Offset, c.OffsetU, c.Against)
	if c.DriftU > 0 {
		text += fmt.Sprintf(", drift %+.0f ppm ± %.0f ppm", c.Drift, c.DriftU)
	}
	return text + ": " + c.Why
}

// logsRecognised tells what the logs of a set were taken for.
func logsRecognised(w io.Writer, set *logSet, refused int) error {
	var b strings.Builder
	line := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "  %-10s %s\n", label, report.Clean(fmt.Sprintf(format, args...)))
	}
	s := set.session
	for _, l := range s.Logs {
		f := &l.Found
		fmt.Fprintf(&b, "%s: log of the %s meter\n", report.Clean(l.Name), l.Role)
		header := fmt.Sprintf("header in line %d", f.Header)
		if f.Header == 0 {
			header = "no header"
		}
		line("text", "%s, delimiter %s, decimal %s, %s", f.Encoding, f.Delimiter, f.Decimal, header)
		line("times", "column %s, %s, every %.3g s", f.TimeColumn, f.Form, f.Cycle)
		unit := "in " + f.Unit
		if f.Unit == "" {
			unit = "unit with every reading"
		}
		line("readings", "column %s, %s: %d, of them %d without a number; %s refused", f.Column, unit, f.Readings, f.States, count(l.Refused, "row"))
		for _, r := range l.Refusals {
			line("refused", "%s:%d: %s: %s", l.Name, r.Line, r.Reason, r.Text)
		}
		if f.Clock != nil {
			line("clock", "%s", clockText(l))
		}
		for _, n := range f.Notes {
			line("note", "%s", n)
		}
	}
	if n := s.NotesLog; n != nil {
		devices := 0
		for _, note := range s.Notes {
			if note.In != "" {
				devices++
			}
		}
		fmt.Fprintf(&b, "%s: notes\n", report.Clean(n.Name))
		line("times", "%s", n.Found.Form)
		line("notes", "%d, by which %s went in", len(s.Notes), count(devices, "device"))
		for _, t := range n.Found.Notes {
			line("note", "%s", t)
		}
	}
	b.WriteString("together\n")
	if s.Started != "" {
		line("start", "%s, %.0f s long", s.Started, s.Span)
	}
	if len(set.file.Sweeps) > 0 {
		line("circuit", "%s", circuits(set.file.Sweeps))
	}
	for _, n := range s.Remarks {
		line("note", "%s", n)
	}
	const most = 12
	for i, st := range s.Stretches {
		switch n := len(s.Stretches); {
		case n <= most || i < most/2 || i >= n-most/2:
			line("device", "%s from %.1f s to %.1f s", st.Device, st.From, st.To)
		case i == most/2:
			line("", "and %d more", n-most)
		}
	}
	line("points", "%d in %s: %s", set.file.Points, count(len(set.file.Sweeps), "sweep"), set.counts())
	_, err := io.WriteString(w, b.String())
	return err
}
