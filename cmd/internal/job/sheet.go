package job

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// SheetOptions are the choices of [Env.Sheet].
type SheetOptions struct {
	At       record.Num // A, test current; unknown: the part's, the spot list's own, else 1 mA
	Idle     record.Num // A, idle current; unknown: the part's, else what a spot list tells
	Method   string     // "auto", "current", "sqrt", "linear", "ratio", "curve"
	Limit    float64    // spread limit in robust spreads, 0: by the lot's size
	Devices  []string   // only these, empty: all
	ReadOnly bool       // keep no estimates
	Budget   bool       // show how the uncertainties come about
}

// defaultTestCurrent is taken when neither part nor spot list says one: the
// current at which most small power parts state V_GS(th) (common practice, no
// source).
const defaultTestCurrent = 1e-3

// Sheet reads a lot, fits every sweep of it, keeps what is new among the
// estimates, and lays everything out for the reports.
func (e *Env) Sheet(ctx context.Context, name string, o SheetOptions) (report.Sheet, error) {
	var s report.Sheet
	if o.At.IsKnown() && !(o.At.Float() != 0) {
		return s, Usage("for instance --at 250uA", "--at: a current of %v A is none to look for", o.At.Float())
	}
	db, err := e.open(ctx, false, o.ReadOnly)
	if errors.Is(err, store.ErrReadOnly) && !o.ReadOnly {
		db, err = e.open(ctx, false, true)
		o.ReadOnly = true
	}
	if err != nil {
		return s, err
	}
	defer db.Close()
	var sweeps []record.Sweep
	err = db.View(ctx, func(tx *store.Tx) (err error) {
		s, sweeps, err = load(tx, name)
		if err == nil {
			err = signOf(&s, o)
		}
		return err
	})
	if err != nil {
		return s, storeFailure(err)
	}
	only, err := named(&s, o.Devices)
	if err != nil {
		return s, err
	}
	s.Version, s.Codes, s.Budget = e.Version, fit.Codes, o.Budget
	placeSweeps(&s, sweeps)
	currents(&s, o.At, o.Idle)
	start := time.Now()
	digits := lastDigitsOf(&s)
	if err := fitSheet(ctx, &s, o.Method, digits); err != nil {
		return s, err
	}
	if err := takeRepeatability(ctx, db, &s, o.Method); err != nil {
		return s, storeFailure(err)
	}
	e.detail("%s of %s fitted in %v", count(len(sweeps), "sweep"), count(len(s.Devices), "device"), time.Since(start).Round(time.Millisecond))
	// Only now: a device is fitted the same whether it is asked for alone or not.
	if only != nil {
		s.Devices = slices.DeleteFunc(s.Devices, func(d report.Device) bool { return !slices.Contains(only, d.ID) })
	}
	s.SortedBy = sortedBy(&s)
	known, err := history(ctx, db, &s, o.Method)
	if err != nil {
		return s, storeFailure(err)
	}
	judge(&s, lot.SpreadOptions{K: o.Limit, Known: known})
	specify(&s)
	s.Hash = dataHash(&s)
	if !o.ReadOnly {
		err := db.Update(ctx, func(tx *store.Tx) error { return tx.PutEstimates(estimates(&s, o.Method, digits)) })
		if errors.Is(err, store.ErrReadOnly) || errors.Is(err, store.ErrBusy) || errors.Is(err, store.ErrFull) {
			e.warn("estimates not kept: %v", err)
		} else if err != nil {
			return s, storeFailure(err)
		}
	}
	return s, nil
}

// signOf refuses a negative current asked for of an n-channel part: its drain current
// is positive, while that of a p-channel part may be written either way.
func signOf(s *report.Sheet, o SheetOptions) error {
	for _, n := range []record.Num{o.At, o.Idle} {
		if x, ok := n.Get(); ok && x < 0 && s.Part.Channel != record.PChannel {
			return Usage("for instance --at "+strings.ReplaceAll(report.FormatGiven(-x, "A"), " ", ""), "--at: a current of %s, and the part of lot %q is n-channel: its drain current is positive", report.FormatGiven(x, "A"), s.Lot.Name)
		}
	}
	return nil
}

// load reads one lot with its sweeps.
func load(tx *store.Tx, name string) (s report.Sheet, sweeps []record.Sweep, err error) {
	if s.Lot, s.Part, err = lotOf(tx, name); err != nil {
		return s, nil, err
	}
	if err = rulesSetAt(tx, &s); err != nil {
		return s, nil, err
	}
	if s.Sources, err = tx.Sources(s.Lot.ID); err != nil {
		return s, nil, err
	}
	if s.Sessions, err = tx.Sessions(s.Lot.ID); err != nil {
		return s, nil, err
	}
	if s.Sets, err = tx.Sets(s.Lot.ID); err != nil {
		return s, nil, err
	}
	devices, err := tx.Devices(s.Lot.ID)
	for _, d := range devices {
		s.Devices = append(s.Devices, report.Device{Device: d})
	}
	if err != nil {
		return s, nil, err
	}
	sweeps, err = tx.Sweeps(s.Lot.ID, true)
	return s, sweeps, err
}

// named gives the IDs of the named devices of the sheet, nil for no names.
func named(s *report.Sheet, names []string) ([]string, error) {
	var ids []string
	for _, n := range names {
		i := slices.IndexFunc(s.Devices, func(d report.Device) bool { return d.Name == n })
		if i < 0 {
			return nil, failed("gatesill lot show "+Quote(s.Lot.Name)+" lists its devices", "device %q: not in lot %q", n, s.Lot.Name)
		}
		ids = append(ids, s.Devices[i].ID)
	}
	return ids, nil
}

// placeSweeps puts every sweep under its device.
func placeSweeps(s *report.Sheet, sweeps []record.Sweep) {
	source := map[string]string{}
	for _, src := range s.Sources {
		source[src.ID] = src.Name
	}
	byID := map[string]int{}
	for i := range s.Devices {
		byID[s.Devices[i].ID] = i
	}
	for i := range sweeps {
		sw := &sweeps[i]
		s.Latest = max(s.Latest, sw.MeasuredAt)
		if k, ok := byID[sw.DeviceID]; ok {
			s.Devices[k].Sweeps = append(s.Devices[k].Sweeps, report.Sweep{
				Sweep: *sw, SourceName: source[sw.SourceID], Curve: curveOf(sw),
			})
		}
	}
}

// fitSheet fits every sweep, on all cores; and once more, along the shape of the
// lot's curves, those of devices with too few points to tell their own.
func fitSheet(ctx context.Context, s *report.Sheet, method string, digits lastDigits) error {
	all := func(*report.Device) bool { return true }
	if err := fitDevices(ctx, s, method, digits, all); err != nil {
		return err
	}
	var rs []fit.Result
	for i := range s.Devices {
		if d := &s.Devices[i]; !d.Excluded && d.Role != record.Control {
			rs = append(rs, d.Result)
		}
	}
	shape, ok := fit.ShapeOfLot(rs)
	if !ok {
		return nil
	}
	s.Shape = &shape
	return fitDevices(ctx, s, method, digits, func(d *report.Device) bool {
		return slices.ContainsFunc(d.Sweeps, func(sw report.Sweep) bool { return sw.Result.Own.Sparse })
	})
}

// fitDevices fits those devices that want it.
func fitDevices(ctx context.Context, s *report.Sheet, method string, digits lastDigits, wants func(*report.Device) bool) error {
	var wg sync.WaitGroup
	workers := runtime.GOMAXPROCS(0)
	for w := range workers {
		wg.Go(func() {
			for i := w; i < len(s.Devices) && ctx.Err() == nil; i += workers {
				if d := &s.Devices[i]; wants(d) {
					fitDevice(s, d, method, digits)
				}
			}
		})
	}
	wg.Wait()
	return ctx.Err()
}

// fitDevice fits the sweeps of one device and joins them.
func fitDevice(s *report.Sheet, d *report.Device, method string, digits lastDigits) {
	var rs []fit.Result
	var dirs []string
	var swept []fit.Swept
	seen := map[string]bool{}
	for i := range d.Sweeps {
		sw := &d.Sweeps[i]
		why := sw.Why
		if !sw.Excluded && sw.Len() >= rowsAlike && seen[sw.DataHash] {
			why = "the same readings as an earlier sweep of this device, counted once"
		} else if !sw.Excluded {
			why = ""
		}
		if sw.Excluded || why != "" {
			sw.Result = fit.NewResult()
			sw.Result.State, sw.Result.Why = fit.Excluded, why
			continue
		}
		seen[sw.DataHash] = true
		setup := setupOf(s, &sw.Sweep, digits)
		sw.Result = fit.One(sw.Curve, setup)
		sw.Result.Choose(method)
		rs = append(rs, sw.Result)
		dirs = append(dirs, string(sw.Direction))
		swept = append(swept, fit.Swept{Curve: sw.Curve, Setup: setup, Direction: string(sw.Direction), Result: sw.Result})
	}
	d.Result = fit.Combine(rs, dirs)
	fit.Drift(swept, &d.Result)
	if len(rs) == 0 {
		d.Result.State, d.Result.Why = fit.Declined, "no sweep of it is stored"
	}
	if w, ok := overdue(s, d); ok {
		d.Result.Warnings = append(d.Result.Warnings, w)
	}
	if d.Excluded {
		d.Result.State, d.Result.Why = fit.Excluded, d.Why
	}
}

// sortedBy is the quantity that sorting uses: where the lot has an idle current,
// the gate bias there; otherwise the threshold.
func sortedBy(s *report.Sheet) fit.Key {
	if math.IsNaN(s.IdleCurrent) {
		return fit.KeyVgsth
	}
	if s.Part.IdleCurrent.IsKnown() {
		return fit.KeyVgsIdle
	}
	for _, d := range s.Devices {
		if d.Result.VgsIdle.Ok() {
			return fit.KeyVgsIdle
		}
	}
	return fit.KeyVgsth
}

// judge fills spread and flags of the sheet; opt is completed by what the sheet
// says.
func judge(s *report.Sheet, opt lot.SpreadOptions) {
	opt.SortedBy, opt.TestCurrent = s.SortedBy, s.TestCurrent
	opt.PChannel = s.Part.Channel == record.PChannel
	if sheetCurrent(s) { // at another current they say nothing
		opt.VgsthMin, opt.VgsthMax = s.Part.VgsthMin.Float(), s.Part.VgsthMax.Float()
	}
	s.Spread = lot.SpreadOf(lotDevices(s), opt)
	if w, ok := unlike(s); ok {
		s.Spread.Warnings = append([]fit.Warning{w}, s.Spread.Warnings...)
	}
}

func lotDevices(s *report.Sheet) []lot.Device {
	out := make([]lot.Device, len(s.Devices))
	for i, d := range s.Devices {
		out[i] = lot.Device{
			Name: d.Name, Control: d.Role == record.Control, DateCode: d.DateCode, Tube: d.Tube, Unlike: unlikeSheet(s, &s.Devices[i]), Reached: reached(s, &s.Devices[i]), Result: d.Result,
		}
	}
	return out
}

// settings writes all that a result depends on besides the data.
func settings(s *report.Sheet, sw *report.Sweep, method string, digits lastDigits) string {
	last := map[record.Quantity]float64{}
	for _, c := range sw.Columns {
		if step := digits[digitKey{sw.SourceID, c.Quantity}]; step > 0 {
			last[c.Quantity] = step
		}
	}
	b, err := json.Marshal(struct {
		Method    string                      `json:"method"`
		Test      record.Num                  `json:"test_current_a"`
		Idle      record.Num                  `json:"idle_current_a"`
		Channel   record.Channel              `json:"channel"`
		Mode      record.Mode                 `json:"mode"`
		Off       record.Num                  `json:"off_v"`
		VgsthMax  record.Num                  `json:"vgsth_max_v"`
		MaxID     record.Num                  `json:"max_id_a"`
		Digits    map[record.Quantity]float64 `json:"last_digits"`
		Condition record.Condition            `json:"condition"`
		Meters    []record.Instrument         `json:"instruments"`
		Shape     *fit.LotShape               `json:"lot_shape,omitempty"`
	}{method, record.Known(s.TestCurrent), record.Known(s.IdleCurrent), s.Part.Channel, s.Part.Mode, s.Part.OffVoltage, s.Part.VgsthMax, s.Part.MaxID, last, sw.Condition, sw.Instruments, shapeUsed(s, sw)})
	if err != nil { // only numbers and texts in it
		panic(fmt.Sprintf("settings of a fit: %v", err))
	}
	return string(b)
}

// shapeUsed is the shape of the lot where a sweep was read along it.
func shapeUsed(s *report.Sheet, sw *report.Sweep) *fit.LotShape {
	if sw.Result.Has(fit.CodeLotShape) {
		return s.Shape
	}
	return nil
}

// estimates maps every result of the sheet to the rows that are kept.
func estimates(s *report.Sheet, method string, digits lastDigits) []record.Estimate {
	now := record.Now()
	var out []record.Estimate
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j]
			if sw.Result.State == fit.Excluded {
				continue
			}
			est := record.Estimate{
				SweepID: sw.ID, DataHash: sw.DataHash, Method: sw.Result.Method, Settings: settings(s, sw, method, digits),
				Version: s.Version, State: string(sw.Result.State), Values: map[string]record.Value{}, MadeAt: now,
			}
			for _, k := range fit.Keys {
				if q := sw.Result.At(k); q.Ok() {
					est.Values[string(k)] = record.Value{
						Value: record.Known(q.Value), U: record.Known(q.U), UBetween: record.Known(q.UBetween), UAbsolute: record.Known(q.UAbsolute), N: q.N,
					}
				}
			}
			for _, w := range sw.Result.Warnings {
				est.Remarks = append(est.Remarks, record.Remark{Code: w.Code, Text: w.Text})
			}
			out = append(out, est)
		}
	}
	return out
}

// dataHash is the checksum over the canonical rows of the sheet: names, roles,
// conditions and the hashes of the sweeps' data, in the order of the sheet.
func dataHash(s *report.Sheet) string {
	h := sha256.New()
	enc := json.NewEncoder(h)
	lot := s.Lot
	lot.DevicesCount, lot.SweepsCount = 0, 0
	must := func(v any) {
		if err := enc.Encode(v); err != nil { // only numbers and texts in it
			panic(fmt.Sprintf("checksum of a lot: %v", err))
		}
	}
	must(s.Part)
	must(lot)
	for i := range s.Devices {
		d := &s.Devices[i]
		must(d.Device)
		for j := range d.Sweeps {
			sw := &d.Sweeps[j]
			must([]any{sw.ID, sw.Direction, sw.MeasuredAt, sw.Condition, sw.Instruments, sw.DataHash, sw.Excluded, sw.Why})
		}
	}
	return hex.EncodeToString(h.Sum(nil))
}
