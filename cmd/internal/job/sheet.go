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
	Method   string     // "auto", "current", "sqrt", "linear", "ratio"
	Limit    float64    // spread limit in robust spreads, 0: by the lot's size
	Devices  []string   // only these, empty: all
	ReadOnly bool       // keep no estimates
}

// defaultTestCurrent is taken when neither part nor spot list says one: the
// current at which most small power parts state V_GS(th) (common practice, no
// source).
const defaultTestCurrent = 1e-3

// Sheet reads a lot, fits every sweep of it, keeps what is new among the
// estimates, and lays everything out for the reports.
func (e *Env) Sheet(ctx context.Context, name string, o SheetOptions) (report.Sheet, error) {
	var s report.Sheet
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
		return err
	})
	if err != nil {
		return s, storeFailure(err)
	}
	if err := keepNamed(&s, o.Devices); err != nil {
		return s, err
	}
	s.Version, s.Codes = e.Version, fit.Codes
	placeSweeps(&s, sweeps)
	currents(&s, o.At)
	start := time.Now()
	if err := fitSheet(ctx, &s, o.Method); err != nil {
		return s, err
	}
	e.detail("%s of %s fitted in %v", count(len(sweeps), "sweep"), count(len(s.Devices), "device"), time.Since(start).Round(time.Millisecond))
	s.SortedBy = sortedBy(&s)
	known, err := history(ctx, db, &s, o.Method)
	if err != nil {
		return s, storeFailure(err)
	}
	judge(&s, o.Limit, known)
	s.Hash = dataHash(&s)
	if !o.ReadOnly {
		err := db.Update(ctx, func(tx *store.Tx) error { return tx.PutEstimates(estimates(&s, o.Method)) })
		if errors.Is(err, store.ErrReadOnly) || errors.Is(err, store.ErrBusy) || errors.Is(err, store.ErrFull) {
			e.warn("estimates not kept: %v", err)
		} else if err != nil {
			return s, storeFailure(err)
		}
	}
	return s, nil
}

// load reads one lot with its sweeps.
func load(tx *store.Tx, name string) (s report.Sheet, sweeps []record.Sweep, err error) {
	if s.Lot, s.Part, err = lotOf(tx, name); err != nil {
		return s, nil, err
	}
	if s.Sources, err = tx.Sources(s.Lot.ID); err != nil {
		return s, nil, err
	}
	if s.Sessions, err = tx.Sessions(s.Lot.ID); err != nil {
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

// keepNamed leaves only the named devices in the sheet.
func keepNamed(s *report.Sheet, names []string) error {
	if len(names) == 0 {
		return nil
	}
	var out []report.Device
	for _, n := range names {
		i := slices.IndexFunc(s.Devices, func(d report.Device) bool { return d.Name == n })
		if i < 0 {
			return failed("gatesill lot show "+Quote(s.Lot.Name)+" lists its devices", "device %q: not in lot %q", n, s.Lot.Name)
		}
		out = append(out, s.Devices[i])
	}
	s.Devices = out
	return nil
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

// currents settles test current and idle current of the sheet.
func currents(s *report.Sheet, at record.Num) {
	s.IdleCurrent = s.Part.IdleCurrent.Float()
	spots, gm := spotCurrents(s)
	switch {
	case at.IsKnown():
		s.TestCurrent, s.TestBasis = math.Abs(at.Float()), "--at"
	case s.Part.TestCurrent.IsKnown():
		s.TestCurrent, s.TestBasis = s.Part.TestCurrent.Float(), "part"
	case len(spots) > 0:
		s.TestCurrent, s.TestBasis = spots[0], "spot list"
	default:
		s.TestCurrent, s.TestBasis = defaultTestCurrent, "default"
	}
	switch {
	case s.Part.IdleCurrent.IsKnown():
	case len(gm) == 1: // a list that states g_m at a current means that as the idle current
		s.IdleCurrent = gm[0]
	case len(spots) == 2:
		s.IdleCurrent = spots[1]
	}
}

// spotCurrents gives the currents at which the spots of the lot were taken,
// ascending, and those at which their transconductance was; none when there are
// curves, or spots at more than two currents.
func spotCurrents(s *report.Sheet) (spots, gm []float64) {
	for _, d := range s.Devices {
		for _, sw := range d.Sweeps {
			if sw.Direction != record.Spot {
				return nil, nil
			}
			id, vg, g := sw.Values(record.ID), sw.Values(record.VG), sw.Values(record.GM)
			for i, x := range id {
				if math.IsNaN(x) {
					continue
				}
				if vg != nil && !math.IsNaN(vg[i]) {
					spots = withCurrent(spots, math.Abs(x))
				}
				if g != nil && !math.IsNaN(g[i]) {
					gm = withCurrent(gm, math.Abs(x))
				}
			}
		}
	}
	if len(spots) > 2 {
		spots = nil
	}
	slices.Sort(spots)
	return spots, gm
}

// withCurrent adds a current to the list unless one within a tenth is there: a
// one-resistor jig does not hold its current exactly.
func withCurrent(list []float64, x float64) []float64 {
	for _, have := range list {
		if math.Abs(have-x) <= 0.1*have {
			return list
		}
	}
	return append(list, x)
}

// curveOf hands the columns of a sweep to the fit, overload as ±Inf.
func curveOf(sw *record.Sweep) fit.Curve {
	c := fit.Curve{
		Vg: sw.Values(record.VG), Id: sw.Values(record.ID), Vl: sw.Values(record.VL),
		Vd: sw.Values(record.VD), Vdd: sw.Values(record.VDD), Gm: sw.Values(record.GM),
	}
	over := func(xs *[]float64, i int, sign int) {
		if i < len(*xs) {
			(*xs)[i] = math.Inf(sign)
		}
	}
	for _, m := range sw.Marks {
		sign := 1
		switch m.State {
		case record.Overload:
		case record.Underload:
			sign = -1
		default:
			continue
		}
		switch m.Quantity {
		case record.VG:
			over(&c.Vg, m.Index, sign)
		case record.ID:
			over(&c.Id, m.Index, sign)
		case record.VL:
			over(&c.Vl, m.Index, sign)
		case record.VD:
			over(&c.Vd, m.Index, sign)
		case record.VDD:
			over(&c.Vdd, m.Index, sign)
		}
	}
	if c.Vg == nil {
		c.Vg = nans(sw.Len())
	}
	return c
}

func nans(n int) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = math.NaN()
	}
	return xs
}

// setupOf says under what a sweep was taken and what is asked of it.
func setupOf(s *report.Sheet, sw *record.Sweep, digits lastDigits) fit.Setup {
	c := sw.Condition
	return fit.Setup{
		Circuit: fit.Circuit(c.Circuit), PChannel: s.Part.Channel == record.PChannel, Depletion: s.Part.Mode == record.Depletion,
		OffV: offVoltage(s.Part),
		RL:   c.RL.Float(), RLTol: c.RLTol.Float(), Vdd: c.VDD.Float(), Vds: c.VDS.Float(), Burden: burden(sw),
		TestCurrent: s.TestCurrent, IdleCurrent: s.IdleCurrent, MaxID: s.Part.MaxID.Float(), VgsthMax: s.Part.VgsthMax.Float(),
		Gate: accuracy(sw, "gate", record.VG, digits), Current: accuracy(sw, "current", record.ID, digits), Load: accuracy(sw, "load", record.VL, digits), Drain: accuracy(sw, "drain", record.VD, digits),
		Spot: sw.Direction == record.Spot, Temperature: c.Temp.Float(),
	}
}

// offVoltage is the part's, 0 for an enhancement part of which none is known,
// NaN for such a depletion part.
func offVoltage(p record.Part) float64 {
	if p.Mode == record.Enhancement {
		return p.OffVoltage.Or(0)
	}
	return p.OffVoltage.Float()
}

func burden(sw *record.Sweep) float64 {
	if sw.Condition.Burden.IsKnown() {
		return sw.Condition.Burden.Float()
	}
	if sw.Condition.Ammeter == "none" {
		return 0
	}
	for _, m := range sw.Instruments {
		if m.Role != "current" {
			continue
		}
		for _, r := range m.Ranges {
			if r.Burden.IsKnown() {
				return r.Burden.Float()
			}
		}
	}
	return math.NaN()
}

// divisors turn the limit of an accuracy statement into a standard uncertainty
// (JCGM 100:2008 4.3.7 for a limit, 4.3.4 for a stated coverage).
var divisors = map[string]float64{"limit": math.Sqrt(3), "k=2": 2, "99 %": 2.5758293035489}

// accuracy is what is known of the meter in a role: its statement by range, else
// the last digit that was written down of its quantity, without a statement.
func accuracy(sw *record.Sweep, role string, q record.Quantity, digits lastDigits) []fit.Accuracy {
	var out []fit.Accuracy
	for _, m := range sw.Instruments {
		if m.Role != role {
			continue
		}
		div := divisors[m.Coverage]
		if div == 0 {
			div = math.Sqrt(3)
		}
		for _, r := range m.Ranges {
			out = append(out, fit.Accuracy{Top: r.Top, Percent: r.Percent, Counts: r.Counts, Resolution: r.Resolution, Noise: r.Noise.Or(0), Divisor: div})
		}
	}
	if step := digits[digitKey{sw.SourceID, q}]; len(out) == 0 && step > 0 && sw.Column(q) != nil {
		out = append(out, fit.Accuracy{Top: math.Inf(1), Resolution: step})
	}
	return out
}

// lastDigits holds the last digit in which each quantity of each source was
// written, in SI units. It is that of the whole file: spreadsheets drop trailing
// zeros, so that a single value may show fewer digits than its meter did.
type lastDigits map[digitKey]float64

type digitKey struct {
	source   string
	quantity record.Quantity
}

func lastDigitsOf(s *report.Sheet) lastDigits {
	out := lastDigits{}
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j].Sweep
			for k := range sw.Columns {
				c := &sw.Columns[k]
				key := digitKey{sw.SourceID, c.Quantity}
				if step := c.LastDigit(); step > 0 && (out[key] == 0 || step < out[key]) {
					out[key] = step
				}
			}
		}
	}
	return out
}

// fitSheet fits every sweep, on all cores.
func fitSheet(ctx context.Context, s *report.Sheet, method string) error {
	digits := lastDigitsOf(s)
	var wg sync.WaitGroup
	workers := runtime.GOMAXPROCS(0)
	for w := range workers {
		wg.Go(func() {
			for i := w; i < len(s.Devices) && ctx.Err() == nil; i += workers {
				fitDevice(s, &s.Devices[i], method, digits)
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
	}
	d.Result = fit.Combine(rs, dirs)
	if len(rs) == 0 {
		d.Result.State, d.Result.Why = fit.Declined, "no sweep of it is stored"
	}
	if d.Excluded {
		d.Result.State, d.Result.Why = fit.Excluded, d.Why
	}
}

// sortedBy is the quantity that sorting uses: the gate bias at the idle current
// when the lot has one, else the threshold.
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

// judge fills spread and flags of the sheet.
func judge(s *report.Sheet, limit float64, known *lot.Known) {
	s.Spread = lot.SpreadOf(lotDevices(s), lot.SpreadOptions{
		SortedBy: s.SortedBy, K: limit, Known: known, TestCurrent: s.TestCurrent, PChannel: s.Part.Channel == record.PChannel,
		VgsthMin: s.Part.VgsthMin.Float(), VgsthMax: s.Part.VgsthMax.Float(),
	})
	if w, ok := unlike(s); ok {
		s.Spread.Warnings = append([]fit.Warning{w}, s.Spread.Warnings...)
	}
}

func lotDevices(s *report.Sheet) []lot.Device {
	out := make([]lot.Device, len(s.Devices))
	for i, d := range s.Devices {
		out[i] = lot.Device{Name: d.Name, Control: d.Role == record.Control, Result: d.Result}
	}
	return out
}

// settings writes all that a result depends on besides the data.
func settings(s *report.Sheet, sw *report.Sweep, method string) string {
	b, err := json.Marshal(struct {
		Method    string              `json:"method"`
		Test      record.Num          `json:"test_current_a"`
		Idle      record.Num          `json:"idle_current_a"`
		Channel   record.Channel      `json:"channel"`
		Mode      record.Mode         `json:"mode"`
		Off       record.Num          `json:"off_v"`
		Condition record.Condition    `json:"condition"`
		Meters    []record.Instrument `json:"instruments"`
	}{method, record.Known(s.TestCurrent), record.Known(s.IdleCurrent), s.Part.Channel, s.Part.Mode, s.Part.OffVoltage, sw.Condition, sw.Instruments})
	if err != nil { // only numbers and texts in it
		panic(fmt.Sprintf("settings of a fit: %v", err))
	}
	return string(b)
}

// estimates maps every result of the sheet to the rows that are kept.
func estimates(s *report.Sheet, method string) []record.Estimate {
	now := record.Now()
	var out []record.Estimate
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j]
			if sw.Result.State == fit.Excluded {
				continue
			}
			est := record.Estimate{
				SweepID: sw.ID, DataHash: sw.DataHash, Method: sw.Result.Method, Settings: settings(s, sw, method),
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
