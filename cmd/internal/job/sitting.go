package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/rehearsal"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// resumeWithin is how long after its start a session that was cut short is gone
// on with, rather than a new one begun.
const resumeWithin = 18 * time.Hour

// sitting is one session at a bench, as far as the store is concerned: what is
// measured goes into its lot as it comes in.
type sitting struct {
	env     *Env
	db      *store.DB
	live    *store.Live
	bench   *bench.Bench
	given   record.Condition
	lot     record.Lot
	part    record.Part
	session record.Session
	started time.Time // of the session, on the monotonic clock
	next    int       // measuring order of the next sweep
	meters  shownRanges

	held  *holding      // of the session
	past  agreed        // in a session that is gone on with
	sweep *record.Sweep // being measured; nil: none
	cut   []cutShort    // sweeps that an earlier program left unfinished
	cutIn []string      // their sessions, one each
}

// cutShort is a sweep that a crash or a power cut ended.
type cutShort struct {
	device string
	points int
}

// sittingRequest is what a sitting is opened for.
type sittingRequest struct {
	Lot                        string
	Bench                      *bench.Bench
	Given                      record.Condition
	Operator, Fixture, Session string
	Ambient                    record.Num
}

// openSitting opens the store, makes the lot where it is absent, gives what an
// earlier program left unfinished its points, and begins a session or goes on
// with the one that was cut short.
func (e *Env) openSitting(ctx context.Context, rq sittingRequest) (*sitting, error) {
	if err := record.CheckName("lot", rq.Lot); err != nil {
		return nil, invalid(err)
	}
	s := &sitting{env: e, bench: rq.Bench, given: rq.Given, meters: shownRanges{}}
	db, err := e.open(ctx, true, false)
	if err != nil {
		return nil, err
	}
	s.db = db
	now := time.Now()
	err = s.db.Update(ctx, func(tx *store.Tx) error {
		if err := s.lotOrNew(tx, rq.Lot); err != nil {
			return err
		}
		if err := s.unmixed(tx); err != nil {
			return err
		}
		benchID, err := tx.AddBench(s.bench.Name, s.bench.Text)
		if err != nil {
			return err
		}
		if err := s.takeUp(tx, benchID, now); err != nil {
			return err
		}
		if s.session.ID == "" {
			s.session = record.Session{
				Name: rq.Session, Bench: s.bench.Name, BenchID: benchID, Operator: rq.Operator, Fixture: rq.Fixture,
				Ambient: rq.Ambient, StartedAt: record.Stamp(now),
			}
			if err := tx.AddSession(&s.session); err != nil {
				return err
			}
			s.started = now
			if s.held, err = hold(s.db.Path(), s.session.ID); err != nil {
				return err
			}
		}
		sweeps, err := tx.Sweeps(s.lot.ID, false)
		for _, sw := range sweeps {
			s.next = max(s.next, sw.Position)
		}
		return err
	})
	if err != nil {
		s.held.release()
		_, cerr := db.RemoveIfEmpty(ctx)
		return nil, storeFailure(errors.Join(err, cerr))
	}
	tidy(s.db.Path())
	s.live = s.db.NewLive(ctx)
	return s, nil
}

// lotOrNew finds the lot, or makes it with a part of its own.
func (s *sitting) lotOrNew(tx *store.Tx, name string) error {
	lot, err := tx.Lot(name)
	if err == nil {
		s.lot = lot
		s.part, err = tx.PartByID(lot.PartID)
		return err
	}
	if !errors.Is(err, store.ErrNotFound) {
		return err
	}
	s.part = record.NewPart(unnamedPart(name))
	if p, err := tx.Part(s.part.Name); err == nil {
		s.part = p
	} else if err := tx.PutPart(&s.part, "sweep"); err != nil {
		return invalid(err)
	}
	s.lot = record.Lot{Name: name, PartID: s.part.ID, CreatedAt: record.Now()}
	return invalid(tx.PutLot(&s.lot, "sweep"))
}

// unmixed refuses to put invented sweeps and measured ones into one lot.
func (s *sitting) unmixed(tx *store.Tx) error {
	sweeps, err := tx.Sweeps(s.lot.ID, false)
	if err != nil || len(sweeps) == 0 {
		return err
	}
	sessions, err := tx.Sessions(s.lot.ID)
	if err != nil {
		return err
	}
	invented := map[string]bool{}
	for _, x := range sessions {
		invented[x.ID] = x.Bench == rehearsal.BenchName
	}
	for _, sw := range sweeps {
		if invented[sw.SessionID] != (s.bench.Name == rehearsal.BenchName) {
			return failed("name another lot, or another store with --store", "lot %q: measured sweeps and those of a rehearsal do not go into one lot", s.lot.Name)
		}
	}
	return nil
}

// takeUp gives the sweeps of the lot that were never finished the points that
// their readings make, sets them aside, and goes on with the session of the last
// one when it was on the same bench, not long ago.
func (s *sitting) takeUp(tx *store.Tx, benchID string, now time.Time) error {
	open, err := tx.StartedSweeps()
	if err != nil {
		return err
	}
	for i := range open {
		sw := &open[i]
		if sw.LotID != s.lot.ID {
			continue
		}
		if err := s.takeUpSweep(tx, sw, benchID, now); err != nil {
			return err
		}
	}
	return s.stillCut(tx, now)
}

// stillCut adds the devices whose last sweep was cut short lately and that have not
// been measured since: the program that took the sweep up may itself have ended
// before it came to them.
func (s *sitting) stillCut(tx *store.Tx, now time.Time) error {
	sweeps, err := tx.Sweeps(s.lot.ID, false)
	if err != nil {
		return err
	}
	up, err := tx.GivenUpSweeps(s.lot.ID)
	if err != nil {
		return err
	}
	last := map[string]*record.Sweep{}
	for _, list := range [][]record.Sweep{sweeps, up} {
		for i := range list {
			if sw := &list[i]; last[sw.DeviceID] == nil || last[sw.DeviceID].ID < sw.ID { // by the time in them
				last[sw.DeviceID] = sw
			}
		}
	}
	devices, err := tx.Devices(s.lot.ID)
	if err != nil {
		return err
	}
	for _, d := range devices {
		sw := last[d.ID]
		if sw == nil || !sw.Excluded || sw.Why != cutShortWhy || slices.ContainsFunc(s.cut, func(c cutShort) bool { return c.device == d.Name }) {
			continue
		}
		if at, err := time.Parse(time.RFC3339Nano, sw.MeasuredAt); err == nil && now.Sub(at) < resumeWithin {
			s.cut = append(s.cut, cutShort{d.Name, sw.Points})
		}
	}
	return nil
}

// cutShortWhy is why a sweep that a crash ended is set aside.
const cutShortWhy = "cut short: the program ended while it was measured"

// takeUpSweep takes up one sweep, unless another program is measuring it.
func (s *sitting) takeUpSweep(tx *store.Tx, sw *record.Sweep, benchID string, now time.Time) error {
	if sw.SessionID != "" && sw.SessionID != s.session.ID {
		held, err := hold(s.db.Path(), sw.SessionID)
		if err != nil {
			return nil
		}
		defer func() {
			if s.session.ID != sw.SessionID {
				held.release()
				return
			}
			s.held.release() // of one begun earlier, which is not gone on with
			s.held = held
		}()
	}
	points, err := s.recover(tx, sw)
	if err != nil {
		return err
	}
	device, err := tx.DeviceByID(sw.DeviceID)
	if err != nil {
		return err
	}
	s.cut = append(s.cut, cutShort{device.Name, points})
	s.cutIn = append(s.cutIn, sw.SessionID)
	if sw.SessionID == "" {
		return nil
	}
	session, err := tx.Session(sw.SessionID)
	if err != nil {
		return err
	}
	began, err := time.Parse(time.RFC3339Nano, session.StartedAt)
	if err != nil || session.BenchID != benchID || now.Sub(began) >= resumeWithin || !now.After(began) {
		return nil
	}
	s.session, s.started = session, now.Add(-now.Sub(began))
	es, err := tx.Events(session.ID)
	if err != nil {
		return err
	}
	s.past = agreedUntil(es, math.Inf(1))
	return tx.AddEvents([]record.Event{{SessionID: session.ID, SweepID: sw.ID, At: now.Sub(began).Seconds(), Kind: "resumed", Text: device.Name}})
}

// recover seals a sweep with what its readings give, and sets it aside: it is not
// whole. Without any point it is given up; its readings stay.
func (s *sitting) recover(tx *store.Tx, sw *record.Sweep) (int, error) {
	readings, err := tx.Readings(sw.ID)
	if err != nil {
		return 0, err
	}
	b := s.bench
	var es []record.Event
	if sw.SessionID != "" {
		session, err := tx.Session(sw.SessionID)
		if err != nil {
			return 0, err
		}
		if es, err = tx.Events(session.ID); err != nil {
			return 0, err
		}
		if session.BenchID != "" {
			if _, text, err := tx.Bench(session.BenchID); err == nil {
				if old, err := bench.Parse([]byte(text)); err == nil {
					b = old
				}
			}
		}
		last := 0.0
		for _, r := range readings {
			last = max(last, r.At)
		}
		b = exchangedBench(b, agreedUntil(es, last).swap)
	}
	var points []acquire.Point
	if typed, _ := typedBench(b); typed {
		points = acquire.Joint(asCounted(readings, es))
	} else {
		mode := acquire.ByHand
		for _, e := range es {
			if e.SweepID == sw.ID && e.Kind == "mode" {
				mode = acquire.Mode(e.Text)
			}
		}
		points, _ = acquire.Pair(asCounted(readings, es), pairingOf(b, mode))
	}
	if len(points) > 0 {
		sw.Columns, sw.Marks = acquire.Columns(points)
		if err := tx.SealSweep(sw); err != nil {
			return 0, err
		}
	}
	return len(points), tx.ExcludeSweep(sw.ID, true, cutShortWhy)
}

// elapsed is the time in the session, s.
func (s *sitting) elapsed() float64 { return time.Since(s.started).Seconds() }

// begin starts the sweep of a device, which is added to the lot when it is new.
func (s *sitting) begin(ctx context.Context, device string, direction record.Direction) error {
	if err := record.CheckName("device", device); err != nil {
		return invalid(err)
	}
	sw := &record.Sweep{
		LotID: s.lot.ID, SessionID: s.session.ID, Position: s.next + 1, Direction: direction, MeasuredAt: record.Now(),
		Condition: s.given, Instruments: s.instruments(),
	}
	err := s.db.Update(ctx, func(tx *store.Tx) error {
		d, err := tx.Device(s.lot.ID, device)
		if errors.Is(err, store.ErrNotFound) {
			ds := []record.Device{{LotID: s.lot.ID, Name: device, Role: record.Sample, CreatedAt: record.Now()}}
			if err = tx.AddDevices(s.lot.ID, ds); err == nil {
				d = ds[0]
			}
		}
		if err != nil {
			return err
		}
		sw.DeviceID = d.ID
		return tx.StartSweep(sw)
	})
	if err != nil {
		return storeFailure(invalid(err))
	}
	s.next++
	s.sweep = sw
	return nil
}

// hear keeps the readings of an event, in a sweep; what the meters showed is
// noted in any case.
func (s *sitting) hear(e acquire.Event) error {
	for i := range e.Readings {
		r := e.Readings[i]
		s.meters.note(r)
		if s.sweep == nil {
			continue
		}
		r.SweepID = s.sweep.ID
		if err := s.live.Add(r); err != nil {
			return storeFailure(err)
		}
	}
	return nil
}

// event keeps what happened besides readings.
func (s *sitting) event(kind, format string, args ...any) error {
	e := record.Event{SessionID: s.session.ID, At: s.elapsed(), Kind: kind, Text: fmt.Sprintf(format, args...)}
	if s.sweep != nil {
		e.SweepID = s.sweep.ID
	}
	return storeFailure(s.live.AddEvent(e))
}

// finish seals the sweep with its points; why is given when it is to be set
// aside; returned says that the last point was taken again at low power after the
// sweep. Without points it is given up. It returns the sweep as it is kept.
func (s *sitting) finish(ctx context.Context, points []acquire.Point, returned bool, direction record.Direction, why string) (record.Sweep, error) {
	sw := s.sweep
	if err := s.live.Flush(); err != nil {
		return *sw, storeFailure(err)
	}
	s.sweep = nil
	sw.Direction, sw.Instruments = direction, s.instruments()
	fillSweep(sw, points, returned)
	err := s.db.Update(ctx, func(tx *store.Tx) error {
		if len(points) > 0 {
			if err := tx.SealSweep(sw); err != nil {
				return err
			}
		} else if why == "" {
			why = "no point was taken"
		}
		if why == "" {
			return nil
		}
		sw.Excluded, sw.Why = true, why
		return tx.ExcludeSweep(sw.ID, true, why)
	})
	return *sw, storeFailure(err)
}

// fillSweep makes points the columns of a sweep; returned says that the last one was
// taken again.
func fillSweep(sw *record.Sweep, points []acquire.Point, returned bool) {
	sw.Columns, sw.Marks = acquire.Columns(points)
	if c := sw.Column(record.Settled); c != nil && returned {
		c.Values[len(c.Values)-1], c.Text = record.TakenAgain, nil
	}
}

// close ends the sitting. A sweep that is still open stays so, to be taken up.
func (s *sitting) close() error {
	err := errors.Join(s.live.Close(), s.db.Close())
	s.held.release()
	return storeFailure(err)
}

// instruments are those of the bench file, with what they were seen to show.
func (s *sitting) instruments() []record.Instrument { return s.meters.complete(s.bench.Meters) }

// tellCut says what an earlier program left unfinished, and gives the devices that are
// measured again: of those named, or all when none is named.
func (s *sitting) tellCut(named []string) (again []string) {
	for _, c := range s.cut {
		then := "; name it to measure it again"
		if len(named) == 0 || slices.Contains(named, c.device) {
			again = append(again, c.device)
			then = ", and it is measured again"
		}
		s.env.talk("device %s: its sweep was cut short after %s; these are kept, set aside%s", report.Clean(c.device), count(c.points, "point"), then)
	}
	return again
}
