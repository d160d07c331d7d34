package report

import (
	"encoding/json"
	"io"
	"math"

	"gatesill/fit"
	"gatesill/store/record"
)

type partDoc struct {
	Name        string     `json:"name"`
	Channel     string     `json:"channel"`
	Mode        string     `json:"mode"`
	OffVoltage  record.Num `json:"off_voltage_V"`
	TestCurrent record.Num `json:"test_current_A"`
	TestVDS     record.Num `json:"test_vds_V"`
	IdleCurrent record.Num `json:"idle_current_A"`
	VgsthMin    record.Num `json:"vgsth_min_V"`
	VgsthMax    record.Num `json:"vgsth_max_V"`
	MaxVgs      record.Num `json:"max_vgs_V"`
	MaxVds      record.Num `json:"max_vds_V"`
	MaxID       record.Num `json:"max_id_A"`
	MaxPD       record.Num `json:"max_pd_W"`
	MaxTemp     record.Num `json:"max_temp_degC"`
	Rth         record.Num `json:"rth_K_per_W"`
	Note        optional   `json:"note"`
}

func partDocOf(p record.Part) partDoc {
	return partDoc{
		p.Name, string(p.Channel), string(p.Mode), p.OffVoltage, p.TestCurrent, p.TestVDS, p.IdleCurrent,
		p.VgsthMin, p.VgsthMax, p.MaxVgs, p.MaxVds, p.MaxID, p.MaxPD, p.MaxTemp, p.Rth, optional(p.Note),
	}
}

type amountDoc struct {
	Value float64 `json:"value"`
	Unit  string  `json:"unit"`
}

func amountDocOf(a record.Amount) *amountDoc {
	if a.IsZero() {
		return nil
	}
	return &amountDoc{a.Value, a.Unit}
}

type lotDoc struct {
	ID          string     `json:"id"`
	Name        string     `json:"name"`
	Supplier    optional   `json:"supplier"`
	DateCode    optional   `json:"date_code"`
	Marking     optional   `json:"marking"`
	Quantity    record.Num `json:"quantity"`
	Sampled     optional   `json:"sampled"`
	Margin      *amountDoc `json:"margin"`
	MarginSetAt optional   `json:"margin_set_at"`
	Guard       *amountDoc `json:"guard"`
	SendBack    optional   `json:"send_back"`
	DecidedAt   optional   `json:"decided_at"`
	Note        optional   `json:"note"`
	CreatedAt   optional   `json:"created_at"`
}

func lotDocOf(l record.Lot) lotDoc {
	return lotDoc{
		l.ID, l.Name, optional(l.Supplier), optional(l.DateCode), optional(l.Marking), l.Quantity, optional(l.Sampled),
		amountDocOf(l.Margin), optional(l.MarginSetAt), amountDocOf(l.Guard), optional(l.SendBack), optional(l.DecidedAt),
		optional(l.Note), optional(l.CreatedAt),
	}
}

type sourceDoc struct {
	ID         string   `json:"id"`
	File       string   `json:"file"`
	SHA256     string   `json:"sha256"`
	Bytes      int64    `json:"bytes"`
	Layout     optional `json:"layout"`
	ImportedAt optional `json:"imported_at"`
}

type sessionDoc struct {
	ID        string     `json:"id"`
	Name      optional   `json:"name"`
	Bench     optional   `json:"bench"`
	Operator  optional   `json:"operator"`
	Fixture   optional   `json:"fixture"`
	Ambient   record.Num `json:"ambient_degC"`
	StartedAt optional   `json:"started_at"`
	Note      optional   `json:"note"`
}

type markDoc struct {
	Point  int    `json:"point"` // from 0
	Column string `json:"column"`
	State  string `json:"state"`
	Raw    string `json:"raw,omitempty"`
}

type leftOutDoc struct {
	Point int    `json:"point"` // from 0
	Line  *int   `json:"line"`
	Code  string `json:"code"`
	Text  string `json:"text"`
}

type fullSweepDoc struct {
	ID          string              `json:"id"`
	Session     optional            `json:"session"`
	Source      optional            `json:"source"`
	Position    int                 `json:"position"`
	Direction   string              `json:"direction"`
	MeasuredAt  optional            `json:"measured_at"`
	Condition   record.Condition    `json:"condition"`
	Instruments []record.Instrument `json:"instruments"`
	DataHash    optional            `json:"data_sha256"`
	Excluded    bool                `json:"excluded"`
	Why         optional            `json:"why"`
	Columns     columnsDoc          `json:"columns"`
	Marks       []markDoc           `json:"marks"`
	LeftOut     []leftOutDoc        `json:"left_out"`
	State       string              `json:"state"`
	quantities
	Method   optional      `json:"method"`
	Warnings []fit.Warning `json:"warnings"`
}

// columnsDoc writes the columns of a sweep as {"vg_V":[...],...}, every decimal
// as it was read.
type columnsDoc []record.Column

func (c columnsDoc) MarshalJSON() ([]byte, error) {
	buf := []byte{'{'}
	for i, col := range c {
		if i > 0 {
			buf = append(buf, ',')
		}
		buf = append(append(append(buf, '"'), headOf(col.Quantity)...), `":[`...)
		for j, t := range decimals(&col) {
			if j > 0 {
				buf = append(buf, ',')
			}
			if t == "" {
				t = "null"
			}
			buf = append(buf, t...)
		}
		buf = append(buf, ']')
	}
	return append(buf, '}'), nil
}

// heads names the columns of a sweep as files carry them.
var heads = map[record.Quantity]string{
	record.VG: "vg_V", record.ID: "id_A", record.VL: "vl_V", record.VD: "vd_V", record.VDD: "vdd_V",
	record.IG: "ig_A", record.GM: "gm_S", record.Temp: "temp_degC", record.T: "t_s",
	record.PairBound: "pair_bound_V", record.Settled: "settled",
}

func headOf(q record.Quantity) string {
	if h, ok := heads[q]; ok {
		return h
	}
	return string(q)
}

// decimals gives the numbers of a column as decimals: those that were read
// where the column carries them, else the shortest that read back alike. ""
// where there is no number.
func decimals(col *record.Column) []string {
	if list, ok := readDecimals(col); ok {
		return list
	}
	list := make([]string, len(col.Values))
	for i, x := range col.Values {
		if isNumber(x) {
			list[i] = exact(x)
		}
	}
	return list
}

func readDecimals(col *record.Column) ([]string, bool) {
	if len(col.Text) == 0 {
		return nil, false
	}
	var raw []json.Number
	var nulls []*json.Number
	if json.Unmarshal(col.Text, &nulls) != nil || len(nulls) != len(col.Values) {
		return nil, false
	}
	raw = make([]json.Number, len(nulls))
	list := make([]string, len(nulls))
	for i, n := range nulls {
		if n == nil {
			continue
		}
		raw[i] = *n
		x, err := raw[i].Float64()
		// The values are what everything else was made from: text that says
		// otherwise is not used.
		if err != nil || x != col.Values[i] && !math.IsNaN(col.Values[i]) {
			return nil, false
		}
		list[i] = raw[i].String()
	}
	return list, true
}

// columnsOf gives the columns of a sweep, made from its curve where the record
// has none.
func columnsOf(sw *Sweep) []record.Column {
	if len(sw.Columns) > 0 {
		return sw.Columns
	}
	var cols []record.Column
	add := func(q record.Quantity, values []float64) {
		if values != nil {
			cols = append(cols, record.Column{Quantity: q, Values: values})
		}
	}
	c := &sw.Curve
	add(record.VG, c.Vg)
	add(record.ID, c.Id)
	add(record.VL, c.Vl)
	add(record.VD, c.Vd)
	add(record.VDD, c.Vdd)
	add(record.GM, c.Gm)
	return cols
}

func fullSweepDocOf(sw *Sweep) fullSweepDoc {
	doc := fullSweepDoc{
		ID: sw.ID, Session: optional(sw.SessionID), Source: optional(sw.SourceName), Position: sw.Position,
		Direction: string(sw.Direction), MeasuredAt: optional(sw.MeasuredAt), Condition: sw.Condition,
		Instruments: append([]record.Instrument{}, sw.Instruments...), DataHash: optional(sw.DataHash),
		Excluded: sw.Excluded, Why: optional(sw.Why), Columns: columnsDoc(columnsOf(sw)),
		Marks: []markDoc{}, LeftOut: []leftOutDoc{}, State: string(sw.Result.State),
		quantities: quantitiesOf(&sw.Result), Method: optional(sw.Result.Method),
		Warnings: append([]fit.Warning{}, sw.Result.Warnings...),
	}
	for _, m := range sw.Marks {
		doc.Marks = append(doc.Marks, markDoc{m.Index, headOf(m.Quantity), string(m.State), m.Raw})
	}
	for _, l := range sw.Result.LeftOut {
		out := leftOutDoc{Point: l.Index, Code: l.Code, Text: l.Text}
		if line := sw.Line(l.Index); line > 0 {
			out.Line = &line
		}
		doc.LeftOut = append(doc.LeftOut, out)
	}
	return doc
}

type fullDeviceDoc struct {
	ID       string   `json:"id"`
	Device   string   `json:"device"`
	Package  optional `json:"package"`
	Side     optional `json:"side"`
	DateCode optional `json:"date_code"`
	Marking  optional `json:"marking"`
	Tube     optional `json:"tube"`
	Role     string   `json:"role"`
	Excluded bool     `json:"excluded"`
	Why      optional `json:"why"`
	Note     optional `json:"note"`
	State    string   `json:"state"`
	quantities
	Method   optional      `json:"method"`
	Warnings []fit.Warning `json:"warnings"`
	Flagged  bool          `json:"flagged"`
	Reasons  []reasonDoc   `json:"reasons"`
	*judgementDoc
	Sweeps []fullSweepDoc `json:"sweeps"`
}

type sortingDoc struct {
	By       string        `json:"by"`
	Width    number        `json:"smallest_honest_width"` // in the unit of By
	Bins     []binDoc      `json:"bins"`
	Unsorted []unsortedDoc `json:"unsorted"`
	Warnings []fit.Warning `json:"warnings"`
}

// WriteJSON writes the whole sheet: part, lot, sources, sessions, every device
// with its sweeps, readings and results, spread and bins. Numbers are in SI base
// units; readings keep the decimals they were read with.
func WriteJSON(w io.Writer, s Sheet) error {
	verdicts := verdictDocs(&s)
	devices := make(rows, 0, len(s.Devices))
	for i := range s.Devices {
		d := &s.Devices[i]
		short := s.deviceDocOf(d)
		doc := fullDeviceDoc{
			ID: d.ID, Device: d.Name, Package: short.Package, Side: short.Side, DateCode: optional(d.DateCode),
			Marking: optional(d.Marking), Tube: optional(d.Tube), Role: string(d.Role), Excluded: d.Excluded,
			Why: optional(d.Device.Why), Note: optional(d.Note), State: short.State, quantities: short.quantities,
			Method: short.Method, Warnings: short.Warnings, Flagged: verdicts[i].Flagged, Reasons: verdicts[i].Reasons,
			judgementDoc: verdicts[i].judgementDoc, Sweeps: []fullSweepDoc{},
		}
		for j := range d.Sweeps {
			doc.Sweeps = append(doc.Sweeps, fullSweepDocOf(&d.Sweeps[j]))
		}
		devices = append(devices, doc)
	}
	sources, sessions := rows{}, rows{}
	for _, x := range s.Sources {
		sources = append(sources, sourceDoc{x.ID, x.Name, x.Hash, x.Size, optional(x.Layout), optional(x.ImportedAt)})
	}
	for _, x := range s.Sessions {
		sessions = append(sessions, sessionDoc{x.ID, optional(x.Name), optional(x.Bench), optional(x.Operator), optional(x.Fixture), x.Ambient, optional(x.StartedAt), optional(x.Note)})
	}
	var sorting *sortingDoc
	if s.Sorting != nil {
		sorting = &sortingDoc{string(s.Sorting.By), number(s.Sorting.SmallestWidth), binDocs(s.Sorting), unsortedDocs(&s), append([]fit.Warning{}, s.Sorting.Warnings...)}
	}
	return writeObject(w,
		member{"schema", Schema}, member{"lot", s.Lot.Name}, member{"about_lot", lotDocOf(s.Lot)}, member{"part", partDocOf(s.Part)},
		member{"sorted_by", optional(s.SortedBy)}, member{"test_current_A", number(s.TestCurrent)},
		member{"test_current_from", optional(s.TestBasis)}, member{"idle_current_A", number(s.IdleCurrent)},
		member{"sources", sources}, member{"sessions", sessions}, member{"devices", devices},
		member{"populations", max(1, s.Spread.Populations)}, member{"summary", summaryDocs(&s.Spread)},
		member{"limits", limitDocs(&s.Spread)}, member{"split", splitDocOf(s.Spread.Split)},
		member{"specification", specDocOf(s.Spec)}, member{"spread_warnings", append([]fit.Warning{}, s.Spread.Warnings...)},
		member{"sorting", sorting}, member{"data_sha256", optional(s.Hash)}, member{"latest", optional(s.Latest)},
		member{"program_version", optional(s.Version)})
}

// LotsJSON writes a list of lots with their parts.
func LotsJSON(w io.Writer, list []LotRow) error {
	docs := make(rows, 0, len(list))
	for _, r := range list {
		docs = append(docs, lotRowDocOf(r))
	}
	return writeObject(w, member{"schema", Schema}, member{"lots", docs})
}

type lotRowDoc struct {
	lotDoc
	Devices int     `json:"devices"`
	Sweeps  int     `json:"sweeps"`
	Part    partDoc `json:"part"`
}

func lotRowDocOf(r LotRow) lotRowDoc {
	return lotRowDoc{lotDocOf(r.Lot), r.Lot.DevicesCount, r.Lot.SweepsCount, partDocOf(r.Part)}
}

type changeDoc struct {
	At      string   `json:"at"`
	Who     optional `json:"who"`
	What    string   `json:"what"`
	Subject optional `json:"subject"`
	Field   string   `json:"field"`
	Old     string   `json:"old"`
	New     string   `json:"new"`
	Reason  optional `json:"reason"`
}

// DeviceJSON writes the history and the audit trail of one device; s is the sheet of
// its lot.
func DeviceJSON(w io.Writer, f DeviceFile, s Sheet) error {
	d := &f.Device
	sweeps, changes := rows{}, rows{}
	for i := range d.Sweeps {
		sweeps = append(sweeps, fullSweepDocOf(&d.Sweeps[i]))
	}
	for _, c := range f.Changes {
		changes = append(changes, changeDocOf(c))
	}
	return writeObject(w, member{"schema", Schema}, member{"lot", f.Lot.Name}, member{"device", s.deviceDocOf(d)},
		member{"role", string(d.Role)}, member{"note", optional(d.Note)}, member{"sweeps", sweeps}, member{"timeline", timelineDocs(&f)},
		member{"sets", storedSetDocs(f.Sets)}, member{"changes", changes})
}

func changeDocOf(c record.Change) changeDoc {
	return changeDoc{c.At, optional(c.Who), c.What, optional(c.Subject), c.Field, c.Old, c.New, optional(c.Reason)}
}
