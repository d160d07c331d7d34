package job

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"slices"
	"strings"
	"time"

	"gatesill/acquire/bench"
	"gatesill/acquire/table"
	"gatesill/fit"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// ImportRequest is what the import verb was asked to do.
type ImportRequest struct {
	Lot     string
	Files   []string
	Table   table.Options
	Channel record.Channel // "": as the part has it

	Operator, Fixture, Session string
	Bench                      string // bench file, "" for none
	DryRun                     bool
	Again                      bool // import although seen before
	Stdin                      io.Reader

	MeterLogs map[string]string // logs of single meters by role, and "notes"; Files is empty then
	Device    string            // of all readings in the logs; "": by notes, or by the gate
	LogTimes  map[string]string // by role, as of replay.Options
	LogZone   string
	LogDate   string
}

// rowsAlike is how many points a sweep must have before the same ones under
// another name are remarkable: single readings are alike by chance.
const rowsAlike = 5

// fateDry is the fate of a file that was only looked at.
const fateDry = "looked at, not stored"

// stdinName stands for stdin where a file has a name.
const stdinName = "stdin"

// Import reads files into a lot. Each file is one transaction; a store or a lot
// that is not there is made with the first file that succeeds.
func Import(ctx context.Context, env *Env, rq ImportRequest) error {
	if err := record.CheckName("lot", rq.Lot); err != nil {
		return invalid(err)
	}
	im := &importer{env: env, rq: rq}
	if err := im.prepare(ctx); err != nil {
		return err
	}
	defer im.close()
	if len(rq.MeterLogs) > 0 {
		return im.meterLogs(ctx)
	}
	doc := report.ImportDoc{Lot: rq.Lot, Files: make([]report.ImportFile, len(rq.Files))}
	code := ExitDone
	todo := make([]int, len(rq.Files))
	for i := range todo {
		todo[i] = i
	}
	for round := 0; len(todo) > 0; round++ {
		var later []int
		for _, i := range todo {
			f, err := im.one(ctx, rq.Files[i])
			if errors.Is(err, context.Canceled) {
				return err
			}
			var fatal *Failure
			if errors.As(err, &fatal) && fatal.Code == ExitUsage {
				return err
			}
			// A dead device tells nothing of its columns; files of the same
			// header may.
			if round == 0 && len(rq.Files) > 1 && errors.Is(err, table.ErrAmbiguous) {
				later = append(later, i)
				continue
			}
			if err != nil {
				code = ExitFailed
				f.Fate, f.Reason = report.FateRefused, reason(err)
				WriteError(env.Err, err)
			}
			doc.Files[i] = f
		}
		todo = later
	}
	if err := im.conclude(doc); err != nil {
		return err
	}
	if code != ExitDone {
		return &Failure{Code: code}
	}
	return nil
}

// conclude tells the fate of the files: as JSON, as a table of several, or in a
// line of the one. A refused file has been told on stderr.
func (im *importer) conclude(doc report.ImportDoc) error {
	switch {
	case im.env.JSON:
		return report.ImportJSON(im.env.Out, doc)
	case im.env.Quiet:
		return nil
	case len(doc.Files) > 1:
		if _, err := fmt.Fprintln(im.env.Out); err != nil {
			return err
		}
		return report.ImportTable(im.env.Out, doc, im.env.style())
	case doc.Files[0].Fate == report.FateRefused:
		return nil
	}
	f := doc.Files[0]
	why := ""
	if f.Reason != "" {
		why = ": " + f.Reason
	}
	_, err := fmt.Fprintf(im.env.Out, "lot %s: %s %s%s\n", report.Clean(doc.Lot), report.Clean(f.File), f.Fate, report.Clean(why))
	return err
}

// importer carries what the files of one import share.
type importer struct {
	env     *Env
	rq      ImportRequest
	db      *store.DB
	made    bool // this import made the store
	stored  bool // at least one file was stored
	bench   *bench.Bench
	part    record.Part
	seen    map[string]string // data hash -> device, over the lot and the files of this import
	next    int               // position of the next sweep
	same    string            // how the file before was read
	sameAs  string            // its name
	answers map[string]string // to questions of the reader, by their text

	have map[string]record.Device // the lot's devices by name; nil: not read yet

	settled map[string]map[string]string // columns found by behaviour, by the header's signature
}

// prepare reads the bench file and looks whether store and lot are there.
func (im *importer) prepare(ctx context.Context) error {
	if im.rq.Bench != "" {
		b, err := bench.ReadFile(im.rq.Bench)
		if err != nil {
			return failed("gatesill help bench-file shows every key", "%w", err)
		}
		im.bench = b
		if given := merge(im.rq.Table.Given, b.Given); given != merge(b.Given, im.rq.Table.Given) {
			im.env.warn("flags and bench file %s differ about the circuit; the flags were taken [%s]", report.Clean(im.rq.Bench), fit.CodeFlagWins)
		}
		im.rq.Table.Given = merge(im.rq.Table.Given, b.Given)
		for _, text := range lapsed(b, time.Now().UTC().Format(time.DateOnly)) {
			im.env.warn("%s [%s]", report.Clean(text), fit.CodeOverdue)
		}
	}
	im.seen, im.answers, im.settled = map[string]string{}, map[string]string{}, map[string]map[string]string{}
	im.part = record.NewPart(unnamedPart(im.rq.Lot))
	db, err := im.env.open(ctx, false, im.rq.DryRun)
	if errors.Is(err, store.ErrNoStore) {
		err = nil
	}
	if err != nil {
		return err
	}
	im.db = db
	if db != nil {
		err = db.View(ctx, im.look)
	}
	if im.rq.Channel != "" {
		im.part.Channel = im.rq.Channel
	}
	im.rq.Table.PChannel = im.part.Channel == record.PChannel
	if err != nil {
		im.close()
	}
	return storeFailure(err)
}

// look reads what the store knows of lot and part.
func (im *importer) look(tx *store.Tx) error {
	lot, err := tx.Lot(im.rq.Lot)
	if errors.Is(err, store.ErrNotFound) {
		part, err := tx.Part(unnamedPart(im.rq.Lot))
		if err == nil {
			im.part = part
		}
		return nil
	}
	if err != nil {
		return err
	}
	if im.part, err = tx.PartByID(lot.PartID); err != nil {
		return err
	}
	devices, err := tx.Devices(lot.ID)
	if err != nil {
		return err
	}
	names := map[string]string{}
	for _, d := range devices {
		names[d.ID] = d.Name
	}
	sweeps, err := tx.Sweeps(lot.ID, false)
	for _, s := range sweeps {
		im.seen[s.DataHash] = names[s.DeviceID]
		im.next = max(im.next, s.Position)
	}
	return err
}

// close leaves no store behind when nothing was stored.
func (im *importer) close() {
	if im.db == nil {
		return
	}
	var err error
	if im.made && !im.stored {
		_, err = im.db.RemoveIfEmpty(context.Background())
	} else {
		err = im.db.Close()
	}
	if err != nil {
		im.env.warn("%v", err)
	}
	im.db = nil
}

// one reads and stores one file.
func (im *importer) one(ctx context.Context, name string) (report.ImportFile, error) {
	out := report.ImportFile{File: name}
	data, display, err := im.bytes(ctx, name)
	if err != nil {
		return out, err
	}
	if name == "-" { // it cannot be read again
		im.rq.Stdin = nil
	}
	if prior, ok, err := im.seenBefore(ctx, name, data); err != nil {
		return out, err
	} else if ok && !im.rq.Again {
		out.Fate, out.Layout, out.Reason = report.FateSeen, prior.Layout, seenReason(prior)
		return out, nil
	}
	opt, progress := im.options(ctx, display)
	var f *table.File
	if data != nil {
		f, err = table.Read(display, bytes.NewReader(data), opt)
	} else {
		f, err = table.ReadFile(name, opt)
	}
	progress.Done()
	if err != nil {
		if f != nil { // refused for its rows: say which
			out.Layout, out.Dialect, out.RowsRefused = f.Layout, f.Dialect, f.Refused
			for _, r := range f.Refusals {
				fmt.Fprintf(im.env.Err, "  %s\n", report.Clean(fmt.Sprintf("%s:%d: %s: %s", f.Name, r.Line, r.Reason, r.Text)))
			}
		}
		return out, err
	}
	sweeps, left, err := im.ofLot(f)
	if err != nil {
		return out, err
	}
	if err := currentless(f, sweeps); err != nil {
		return out, err
	}
	im.learn(f)
	out.Layout, out.Dialect, out.RowsRefused = f.Layout, f.Dialect, f.Refused
	out.Sweeps = len(sweeps)
	devices := map[string]bool{}
	for i := range sweeps {
		devices[sweeps[i].Device] = true
		out.Points += sweeps[i].Len()
	}
	out.Devices = len(devices)
	im.tell(f, sweeps)
	if !im.env.JSON && !im.env.Quiet {
		like := ""
		same := sameReading(f, sweeps)
		if same == im.same {
			like = im.sameAs
		} else {
			im.same, im.sameAs = same, f.Name
		}
		if err := recognised(im.env.Out, f, sweeps, left, like); err != nil {
			return out, err
		}
	}
	if im.rq.DryRun {
		out.Fate = fateDry
		return out, nil
	}
	if err := im.store(ctx, f, sweeps); err != nil {
		return out, err
	}
	out.Fate = report.FateStored
	return out, nil
}

// seenBefore looks for the same bytes among the lot's sources.
func (im *importer) seenBefore(ctx context.Context, name string, data []byte) (prior record.Source, ok bool, err error) {
	if im.db == nil {
		return prior, false, nil
	}
	h := sha256.New()
	if data != nil {
		h.Write(data)
	} else {
		f, err := os.Open(name)
		if err != nil {
			return prior, false, nil // the reader says it better
		}
		defer f.Close()
		if st, err := f.Stat(); err != nil || !st.Mode().IsRegular() {
			return prior, false, nil
		}
		if _, err := io.Copy(h, f); err != nil {
			return prior, false, err
		}
	}
	return im.seenAs(ctx, hex.EncodeToString(h.Sum(nil)))
}

// options completes the reader's options for one file.
func (im *importer) options(ctx context.Context, name string) (table.Options, *progress) {
	opt := im.rq.Table
	if im.env.Ask != nil {
		opt.Ask = im.ask
	}
	opt.Remembered = func(signature string) (m map[string]string, ok bool) {
		if m, ok := im.settled[signature]; ok {
			return m, true
		}
		if im.db == nil {
			return nil, false
		}
		err := im.db.View(ctx, func(tx *store.Tx) (err error) {
			m, ok, err = tx.Mapping(signature)
			return err
		})
		return m, ok && err == nil
	}
	p := newProgress(im.env, report.Clean(name))
	opt.Progress = p.At
	return opt, p
}

// ask puts a question once for all files of the import that raise it in the
// same words.
func (im *importer) ask(q table.Question) (string, error) {
	if answer, ok := im.answers[q.Text]; ok {
		return answer, nil
	}
	answer, err := im.env.Ask(q)
	if err == nil {
		im.answers[q.Text] = answer
	}
	return answer, err
}

// ofLot picks the sweeps that belong to the lot. A file with a lot column gives
// the lot its own rows; the others are named, so that they can be imported in
// their turn.
func (im *importer) ofLot(f *table.File) ([]table.Sweep, map[string]int, error) {
	byLot := map[string]int{}
	for i := range f.Sweeps {
		byLot[f.Sweeps[i].Lot]++
	}
	if len(byLot) == 1 && im.rq.Table.LotColumn == "" || byLot[""] == len(f.Sweeps) {
		for l := range byLot {
			if l != "" && l != im.rq.Lot {
				im.env.warn("%s: its lot column says %s, stored in lot %s as asked", report.Clean(f.Name), report.Clean(l), report.Clean(im.rq.Lot))
			}
		}
		return f.Sweeps, nil, nil
	}
	if byLot[im.rq.Lot] == 0 {
		var names []string
		for _, l := range slices.Sorted(maps.Keys(byLot)) {
			names = append(names, Quote(l))
		}
		return nil, nil, &table.Error{
			File: f.Name, Err: fmt.Errorf("%w: its lot column has no lot %q, it has %s", table.ErrRefused, im.rq.Lot, strings.Join(names, ", ")),
			Hint: "import one of these lots by its name",
		}
	}
	var out []table.Sweep
	for _, s := range f.Sweeps {
		if s.Lot == im.rq.Lot {
			out = append(out, s)
		}
	}
	delete(byLot, im.rq.Lot)
	return out, byLot, nil
}

// merge fills what a leaves unknown from b.
func merge(a, b record.Condition) record.Condition {
	text := func(x, y string) string {
		if x != "" {
			return x
		}
		return y
	}
	return record.Condition{
		Circuit: record.Circuit(text(string(a.Circuit), string(b.Circuit))),
		RL:      a.RL.Else(b.RL), RLTol: a.RLTol.Else(b.RLTol), RLRating: a.RLRating.Else(b.RLRating), VDD: a.VDD.Else(b.VDD), VDS: a.VDS.Else(b.VDS),
		Ammeter: text(a.Ammeter, b.Ammeter), Burden: a.Burden.Else(b.Burden), GateReturn: text(a.GateReturn, b.GateReturn),
		Pulsed: text(a.Pulsed, b.Pulsed), PulseWidth: a.PulseWidth.Else(b.PulseWidth), PulseDuty: a.PulseDuty.Else(b.PulseDuty), PulseDelay: a.PulseDelay.Else(b.PulseDelay),
		Dwell: a.Dwell.Else(b.Dwell), Temp: a.Temp.Else(b.Temp), TempOf: text(a.TempOf, b.TempOf), SpotCurrent: a.SpotCurrent.Else(b.SpotCurrent),
	}
}

func mustJSON(v any) string {
	b, err := json.Marshal(v)
	if err != nil { // only texts and whole numbers in it
		panic(err)
	}
	return string(b)
}

// reason is an error in one line, without its hint.
func reason(err error) string { return strings.ReplaceAll(err.Error(), "\n", "; ") }

// WriteError writes an error with its place, and the hint that goes with it.
func WriteError(w io.Writer, err error) {
	var f *Failure
	var t *table.Error
	hint := ""
	switch {
	case errors.As(err, &f):
		if f.Err == nil {
			return
		}
		hint = f.Hint
	case errors.As(err, &t):
		hint = t.Hint
	}
	fmt.Fprintf(w, "gatesill: error: %s\n", report.Clean(err.Error()))
	if hint != "" {
		fmt.Fprintf(w, "gatesill: hint: %s\n", report.Clean(hint))
	}
}
