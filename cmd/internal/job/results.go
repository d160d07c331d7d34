package job

import (
	"context"
	"io"
	"path/filepath"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/page"
	"gatesill/store"
	"gatesill/store/record"
)

// Fit fits the lot's sweeps and shows the values.
func Fit(ctx context.Context, env *Env, name string, o SheetOptions) error {
	if o.Budget && len(o.Devices) != 1 {
		return Usage("gatesill fit "+Quote(name)+" DEVICE --budget", "--budget: needs exactly one device, not %d", len(o.Devices))
	}
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	if env.JSON {
		return report.FitJSON(env.Out, s)
	}
	return report.FitTable(env.Out, s, env.style())
}

// Spread shows what the lot's devices have in common and which stand apart.
// With fail it ends in [ExitNo] when a device is flagged.
func Spread(ctx context.Context, env *Env, name string, o SheetOptions, fail bool) error {
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	if env.JSON {
		env.tellWarnings(s.Spread.Warnings)
		err = report.SpreadJSON(env.Out, s)
	} else {
		err = report.SpreadTable(env.Out, s, env.style())
	}
	if err != nil || !fail {
		return err
	}
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			return &Failure{Code: ExitNo}
		}
	}
	return nil
}

// SortRequest is how a lot is put in bins.
type SortRequest struct {
	By    string // "vgsth", "vgs-idle", "gm-idle"; "": as the lot is sorted
	Width string // with unit; "" none
	Edges []string
	Bins  int
	Fail  bool
}

// sortKeys are the quantities that can be binned, by their names as flags take
// them, with their units.
var sortKeys = map[string]struct {
	key  fit.Key
	unit string
}{
	"vgsth": {fit.KeyVgsth, "V"}, "vgs-idle": {fit.KeyVgsIdle, "V"}, "gm-idle": {fit.KeyGmIdle, "S"},
}

// Sort puts the lot in bins. With Fail it ends in [ExitNo] when a device is in
// no bin.
func Sort(ctx context.Context, env *Env, name string, o SheetOptions, rq SortRequest) error {
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	opt, err := sortOptions(env, &s, rq)
	if err != nil {
		return err
	}
	if err := sortSheet(&s, opt); err != nil {
		return Usage("gatesill help sort", "%w", err)
	}
	if env.JSON {
		env.tellWarnings(s.Sorting.Warnings)
		err = report.SortJSON(env.Out, s)
	} else {
		err = report.SortTable(env.Out, s, env.style())
	}
	if err == nil && rq.Fail && len(s.Sorting.Unsorted) > 0 {
		return &Failure{Code: ExitNo}
	}
	return err
}

func sortSheet(s *report.Sheet, opt lot.SortOptions) error {
	sorting, err := lot.SortInto(lotDevices(s), opt)
	if err == nil {
		if w, ok := unlike(s); ok {
			sorting.Warnings = append([]fit.Warning{w}, sorting.Warnings...)
		}
		s.Sorting = &sorting
	}
	return err
}

func sortOptions(env *Env, s *report.Sheet, rq SortRequest) (lot.SortOptions, error) {
	opt := lot.SortOptions{By: s.SortedBy, Bins: rq.Bins}
	unit := "V"
	if rq.By != "" {
		k, ok := sortKeys[rq.By]
		if !ok {
			return opt, Usage("--by vgsth, --by vgs-idle or --by gm-idle", "--by %s: no such quantity", rq.By)
		}
		opt.By, unit = k.key, k.unit
	}
	given := 0
	for _, yes := range []bool{rq.Width != "", len(rq.Edges) > 0, rq.Bins != 0} {
		if yes {
			given++
		}
	}
	if given > 1 {
		return opt, Usage("leave two of them out", "--width, --edges and --bins exclude each other")
	}
	if rq.Width != "" {
		w, err := record.ParseNumber(rq.Width, unit)
		if err != nil {
			return opt, Usage("--width 50m"+unit, "--width: %w", err)
		}
		if w <= 0 {
			return opt, Usage("--width 50m"+unit, "--width: %s, must be above 0", rq.Width)
		}
		if unit == "V" && w >= 5 {
			env.warn("bins of %s V: a bare number is in volts, 50 mV is written 50mV", report.Clean(rq.Width))
		}
		opt.Width = w
	}
	for _, e := range rq.Edges {
		x, err := record.ParseNumber(e, unit)
		if err != nil {
			return opt, Usage("--edges 2.7,2.8,2.9", "--edges: %w", err)
		}
		opt.Edges = append(opt.Edges, x)
	}
	if given == 0 {
		opt.Width = lot.NiceWidth(lotDevices(s), opt.By)
	}
	return opt, nil
}

// Report writes the self-contained page of a lot, held against a reference lot
// where one is named, as rq has it.
func Report(ctx context.Context, env *Env, name, path, reference string, o SheetOptions, rq CompareRequest) error {
	s, err := env.reportSheet(ctx, name, reference, o, rq)
	if err != nil {
		return err
	}
	if err := sortSheet(&s, lot.SortOptions{By: s.SortedBy, Width: lot.NiceWidth(lotDevices(&s), s.SortedBy)}); err != nil {
		return err
	}
	if err := env.WriteFile(path, func(w io.Writer) error { return page.Write(w, s) }); err != nil {
		return err
	}
	if path != "-" {
		env.talk("report of lot %s: %s", report.Clean(name), report.Clean(path))
	}
	return nil
}

// sheetPage writes a page of one purpose where a file for it is named.
func (e *Env) sheetPage(path, what string, write func(io.Writer) error) error {
	if path == "" {
		return nil
	}
	if err := e.WriteFile(path, write); err != nil {
		return err
	}
	if path != "-" {
		e.talk("page of %s: %s", what, report.Clean(path))
	}
	return nil
}

// reportSheet fits a lot, and compares it with the reference lot where one is
// named, at the currents of that.
func (e *Env) reportSheet(ctx context.Context, name, reference string, o SheetOptions, rq CompareRequest) (report.Sheet, error) {
	if reference == "" {
		return e.Sheet(ctx, name, o)
	}
	var s report.Sheet
	if err := rq.check(reference, []string{name}); err != nil {
		return s, err
	}
	ref, err := e.referenceSheet(ctx, reference, o, rq)
	if err != nil {
		return s, err
	}
	e.doubt(&ref, rq)
	if s, err = e.candidateSheet(ctx, &ref, name, o); err != nil {
		return s, err
	}
	by, err := comparedBy(&ref, []report.Sheet{s}, rq, o.At.IsKnown())
	if err != nil {
		return s, err
	}
	c, err := compareSheets(&ref, &s, by, rq)
	if err != nil {
		return s, err
	}
	s.Compared = &c
	s.Trend, err = e.runOfLots(ctx, &ref, &s, by, o)
	return s, err
}

// Export writes the lot for programs: estimates by device or points as CSV, or
// everything as JSON; the file's ending decides.
func Export(ctx context.Context, env *Env, name, path string, points bool, o SheetOptions) error {
	var write func(io.Writer, report.Sheet) error
	switch ext := strings.ToLower(filepath.Ext(path)); {
	case ext == ".csv" && points:
		write = report.WritePointsCSV
	case ext == ".csv":
		write = report.WriteDevicesCSV
	case ext == ".json", path == "-" && env.JSON:
		write = report.WriteJSON
	case path == "-" && points:
		write = report.WritePointsCSV
	case path == "-":
		write = report.WriteDevicesCSV
	default:
		return Usage("-o FILE.csv or -o FILE.json", "%s: the ending says the format, and %q is none of .csv, .json", path, ext)
	}
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	if err := env.WriteFile(path, func(w io.Writer) error { return write(w, s) }); err != nil {
		return err
	}
	if names := report.FormulaLike(s); len(names) > 0 && !strings.HasSuffix(strings.ToLower(path), ".json") {
		env.warn("%s that a spreadsheet may take for a formula, kept as it is: %s", count(len(names), "text"), report.Clean(strings.Join(names[:min(3, len(names))], ", ")))
	}
	if path != "-" {
		env.talk("%s of lot %s: %s", count(len(s.Devices), "device"), report.Clean(name), report.Clean(path))
	}
	return nil
}

// Backup copies the store, also while something writes to it.
func Backup(ctx context.Context, env *Env, path string) error {
	if path == "-" {
		return Usage("gatesill backup FILE", "backup: a copy needs a file of its own, not stdout")
	}
	db, err := env.open(ctx, false, false)
	if err != nil {
		return err
	}
	defer db.Close()
	p := newProgress(env, "backup")
	err = db.Backup(ctx, path, func(done, total int) { p.At(int64(done), int64(total)) })
	p.Done()
	if err != nil {
		return storeFailure(err)
	}
	if env.JSON {
		return report.BackupJSON(env.Out, db.Path(), path)
	}
	env.talk("copy of %s: %s", report.Clean(db.Path()), report.Clean(path))
	return nil
}

// Names lists lots, or the devices of one, for completion; nothing when there
// is no store.
func Names(ctx context.Context, env *Env, lotName string) []string {
	var out []string
	quiet := *env
	quiet.Err = io.Discard
	_ = quiet.view(ctx, func(tx *store.Tx) error { // completion has nobody to tell an error
		if lotName == "" {
			lots, err := tx.Lots()
			for _, l := range lots {
				out = append(out, l.Name)
			}
			return err
		}
		l, err := tx.Lot(lotName)
		if err != nil {
			return err
		}
		ds, err := tx.Devices(l.ID)
		for _, d := range ds {
			out = append(out, d.Name)
		}
		return err
	})
	return slices.DeleteFunc(out, func(n string) bool { return strings.ContainsAny(n, "\n\t") })
}
