package job

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/replay"
	"gatesill/acquire/table"
	"gatesill/report"
	"gatesill/store/record"
)

// layoutMeterLogs is the layout of a set of logs, one a meter.
const layoutMeterLogs = "meter-logs"

// notesLog is what the file of notes is called among the logs.
const notesLog = "notes"

// logDialect is what was recognised about a set of logs.
type logDialect struct {
	Logs     []replay.Found `json:"logs"`
	Notes    []string       `json:"notes"`
	Warnings []string       `json:"warnings"`
	Pairing  pairCounts     `json:"pairing"`
}

// pairCounts is what became of the readings of a set.
type pairCounts struct {
	Settled       int `json:"settled"`
	Interpolated  int `json:"interpolated"`
	OverTolerance int `json:"over_tolerance"`
	Unpaired      int `json:"unpaired"`
}

// logSet is a set of logs on the way from its files to the store.
type logSet struct {
	session *replay.Session
	file    table.File // what the checks of an import look at
	dialect logDialect

	readings [][]record.Reading // that each sweep was made of, beside file.Sweeps
}

// meterLogs imports a set of logs that were recorded meter by meter: one
// transaction, one source.
func (im *importer) meterLogs(ctx context.Context) error {
	doc := report.ImportDoc{Lot: im.rq.Lot, Files: []report.ImportFile{{File: strings.Join(im.logFiles(), ", "), Layout: layoutMeterLogs}}}
	code := ExitDone
	if err := im.logs(ctx, &doc.Files[0]); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		code = ExitFailed
		doc.Files[0].Fate, doc.Files[0].Reason = report.FateRefused, reason(err)
		WriteError(im.env.Err, err)
	}
	if err := im.conclude(doc); err != nil {
		return err
	}
	if code != ExitDone {
		return &Failure{Code: code}
	}
	return nil
}

// logRoles are the roles of the set in their order, the notes last.
func (im *importer) logRoles() (roles []string) {
	for _, role := range append(slices.Clone(replay.Roles), notesLog) {
		if _, ok := im.rq.MeterLogs[role]; ok {
			roles = append(roles, role)
		}
	}
	return roles
}

func (im *importer) logFiles() (names []string) {
	for _, role := range im.logRoles() {
		names = append(names, filepath.Base(im.rq.MeterLogs[role]))
	}
	return names
}

// logs reads and stores the set.
func (im *importer) logs(ctx context.Context, out *report.ImportFile) error {
	opt := replay.Options{Table: im.rq.Table, Times: im.rq.LogTimes, Zone: im.rq.LogZone, Date: im.rq.LogDate}
	if im.env.Ask != nil {
		opt.Table.Ask = im.ask
	}
	if err := im.checkSameFile(); err != nil {
		return err
	}
	set := &logSet{file: table.File{Name: strings.Join(im.logFiles(), ", "), Layout: layoutMeterLogs}}
	var logs []*replay.Log
	var notesFile *replay.Log
	var notes []replay.Note
	sum := sha256.New()
	for _, role := range im.logRoles() {
		if err := ctx.Err(); err != nil {
			return err
		}
		var l *replay.Log
		var err error
		if path := im.rq.MeterLogs[role]; role == notesLog {
			l, notes, err = replay.ReadNotes(path, opt)
			notesFile = l
		} else if l, err = replay.ReadLog(path, role, opt); err == nil {
			logs = append(logs, l)
		}
		if err != nil {
			return err
		}
		fmt.Fprintf(sum, "%s %s\n", role, l.Hash)
		set.file.Size += l.Size
		out.RowsRefused += l.Refused
	}
	set.file.Hash = hex.EncodeToString(sum.Sum(nil))
	if prior, ok, err := im.seenAs(ctx, set.file.Hash); err != nil {
		return err
	} else if ok && !im.rq.Again {
		out.Fate, out.Layout, out.Reason = report.FateSeen, prior.Layout, seenReason(prior)
		return nil
	}
	var err error
	if set.session, err = replay.Join(logs, notesFile, notes, opt); err != nil {
		return err
	}
	if err := set.session.Cut(im.socket()); err != nil {
		return err
	}
	im.pair(set)
	out.Dialect = set.dialect
	out.Sweeps = len(set.file.Sweeps)
	devices := map[string]bool{}
	for i := range set.file.Sweeps {
		devices[set.file.Sweeps[i].Device] = true
		out.Points += set.file.Sweeps[i].Len()
	}
	out.Devices = len(devices)
	for _, w := range set.dialect.Warnings {
		im.env.warn("%s", report.Clean(w))
	}
	if !im.env.JSON && !im.env.Quiet {
		if err := logsRecognised(im.env.Out, set, out.RowsRefused); err != nil {
			return err
		}
	}
	if len(set.file.Sweeps) == 0 {
		return &table.Error{File: set.file.Name, Hint: "a point needs the gate to stand still for some seconds, or to move slowly enough for the meters",
			Err: fmt.Errorf("%w: no reading of the gate goes together with one of the current: %s", table.ErrRefused, set.counts())}
	}
	if err := currentless(&set.file, set.file.Sweeps); err != nil {
		return err
	}
	im.tell(&set.file, set.file.Sweeps)
	if im.rq.DryRun {
		out.Fate = fateDry
		return nil
	}
	if err := im.storeLogs(ctx, set); err != nil {
		return err
	}
	out.Fate = report.FateStored
	return nil
}

// checkSameFile refuses one file for two meters.
func (im *importer) checkSameFile() error {
	var infos []os.FileInfo
	roles := im.logRoles()
	for i, role := range roles {
		st, err := os.Stat(im.rq.MeterLogs[role])
		infos = append(infos, st)
		for k := range i {
			if err == nil && infos[k] != nil && os.SameFile(st, infos[k]) {
				return &table.Error{File: im.rq.MeterLogs[role], Hint: "a table with several columns is imported as it is: gatesill import LOT FILE",
					Err: fmt.Errorf("%w: it is given as the log of %s and of %s", table.ErrRefused, roles[k], role)}
			}
		}
	}
	return nil
}

// socket says what is known of the devices.
func (im *importer) socket() replay.Socket {
	k := replay.Socket{Device: im.rq.Device, Off: im.part.OffVoltage.Float(), PChannel: im.part.Channel == record.PChannel}
	if !im.part.OffVoltage.IsKnown() && im.part.Mode != record.Depletion {
		k.Off = 0
	}
	return k
}

// pairing says how the meters of the set are brought together. Clocks that were held
// against each other by the readings were so with all delays of the meters, so only
// what remains open counts; where an offset was assumed, what the bench file says of
// the delays is taken, against that of the meter the others are held against.
func (im *importer) pairing(s *replay.Session) acquire.Pairing {
	p := acquire.Pairing{Timing: map[string]acquire.Timing{}, Free: true}
	known := map[string]acquire.Timing{}
	if im.bench != nil {
		known = Timings(im.bench)
	}
	for _, l := range s.Logs {
		t := acquire.Timing{}
		if c := l.Found.Clock; c != nil {
			t.LagU = c.Bound
			if own, ok := known[l.Role]; ok && c.Assumed {
				ref := known[c.Against]
				t.Lag = ref.Instant(0) - own.Instant(0)
				t.LagU += own.LagU + ref.LagU
			}
		}
		p.Timing[l.Role] = t
	}
	return p
}

// pair makes the sweeps of every stretch.
func (im *importer) pair(set *logSet) {
	s := set.session
	set.dialect = logDialect{Notes: orNone(s.Remarks), Warnings: orNone(s.Warnings)}
	for _, l := range s.Logs {
		set.dialect.Logs = append(set.dialect.Logs, l.Found)
	}
	if s.NotesLog != nil {
		set.dialect.Logs = append(set.dialect.Logs, s.NotesLog.Found)
	}
	sign := 1.0
	if im.rq.Table.PChannel {
		sign = -1
	}
	for _, st := range s.Stretches {
		readings := s.Readings(st.From, st.To)
		points, did := acquire.Pair(readings, im.pairing(s))
		c := &set.dialect.Pairing
		c.Settled += did.Settled
		c.Interpolated += did.Interpolated
		c.OverTolerance += did.OverTolerance
		c.Unpaired += did.Unpaired
		if len(points) == 0 {
			set.dialect.Warnings = append(set.dialect.Warnings, fmt.Sprintf("device %s: no point could be made of %s, it is left out", st.Device, count(len(readings), "reading")))
			continue
		}
		im.sweeps(set, st, points, readings, sign)
	}
}

func orNone(list []string) []string {
	if list == nil {
		return []string{}
	}
	return list
}

// sweeps cuts the points of a stretch where the gate turns, and gives each its
// readings.
func (im *importer) sweeps(set *logSet, st replay.Stretch, points []acquire.Point, readings []record.Reading, sign float64) {
	vg := make([]float64, len(points))
	for i := range points {
		vg[i] = points[i].Vg
	}
	passes := table.Passes(vg, sign)
	from := math.Inf(-1)
	for k, p := range passes {
		to := math.Inf(1)
		if k+1 < len(passes) {
			to = (points[p.Hi-1].At + points[p.Hi].At) / 2
		}
		sw := table.Sweep{Device: st.Device}
		sw.Direction = p.Dir
		sw.Condition = im.rq.Table.Given
		sw.MeasuredAt = stampAfter(set.session.Started, points[p.Lo].At)
		sw.Columns, sw.Marks = acquire.Columns(points[p.Lo:p.Hi])
		sw.DataHash = sw.Hash()
		set.file.Sweeps = append(set.file.Sweeps, sw)
		var own []record.Reading
		for _, r := range readings {
			if r.At > from && r.At <= to {
				own = append(own, r)
			}
		}
		set.readings = append(set.readings, own)
		set.file.Points += sw.Len()
		from = to
	}
}

// counts says in words what the pairing came to.
func (set *logSet) counts() string {
	c := set.dialect.Pairing
	return fmt.Sprintf("%d points while all stood still, %d on the move, %d too uncertain, %d without a reading of the gate on both sides",
		c.Settled, c.Interpolated, c.OverTolerance, c.Unpaired)
}

func stampAfter(started string, at float64) string {
	t, err := time.Parse(time.RFC3339Nano, started)
	if err != nil {
		return started // a bare date, or nothing
	}
	return record.Stamp(t.Add(time.Duration(at * float64(time.Second))))
}
