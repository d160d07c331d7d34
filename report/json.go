package report

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"math"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// Schema is the number of the layout of every JSON object written here.
const Schema = 1

// member is one key of a JSON object. An object is written in the order of its
// members, and an array among them with one element a line, so that the output
// can be read, compared and searched line by line.
type member struct {
	key   string
	value any
}

// rows is an array whose elements each get a line.
type rows []any

func writeObject(w io.Writer, members ...member) error {
	b := bufio.NewWriterSize(w, 1<<16)
	for i, m := range members {
		open := ",\n "
		if i == 0 {
			open = "{"
		}
		fmt.Fprintf(b, "%s%q:", open, m.key)
		if err := writeValue(b, m.value); err != nil {
			return fmt.Errorf("JSON of %s: %w", m.key, err)
		}
	}
	b.WriteString("}\n")
	return b.Flush()
}

func writeValue(b *bufio.Writer, value any) error {
	list, ok := value.(rows)
	if !ok {
		return writeCompact(b, value)
	}
	b.WriteByte('[')
	for i, v := range list {
		if i > 0 {
			b.WriteByte(',')
		}
		b.WriteString("\n  ")
		if err := writeCompact(b, v); err != nil {
			return err
		}
	}
	return b.WriteByte(']')
}

func writeCompact(b *bufio.Writer, value any) error {
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(value); err != nil {
		return err
	}
	_, err := b.Write(bytes.TrimSuffix(buf.Bytes(), []byte("\n")))
	return err
}

// number is a float64 that is null when it is not finite.
type number float64

func (x number) MarshalJSON() ([]byte, error) {
	if f := float64(x); math.IsNaN(f) || math.IsInf(f, 0) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(x))
}

// optional is a string that is null when it is empty.
type optional string

func (t optional) MarshalJSON() ([]byte, error) {
	if t == "" {
		return []byte("null"), nil
	}
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	err := enc.Encode(string(t))
	return bytes.TrimSuffix(buf.Bytes(), []byte("\n")), err
}

// byKey is a JSON object keyed by quantity, in the order of [KeysIn].
type byKey[V any] map[fit.Key]V

func (m byKey[V]) MarshalJSON() ([]byte, error) {
	buf := []byte{'{'}
	for _, k := range KeysIn(m) {
		if len(buf) > 1 {
			buf = append(buf, ',')
		}
		name, err := json.Marshal(k)
		if err != nil {
			return nil, err
		}
		body, err := json.Marshal(m[k])
		if err != nil {
			return nil, err
		}
		buf = append(append(append(buf, name...), ':'), body...)
	}
	return append(buf, '}'), nil
}

type quantities struct {
	Vgsth   fit.Quantity `json:"vgsth_V"`
	VgsIdle fit.Quantity `json:"vgs_idle_V"`
	Vt      fit.Quantity `json:"vt_V"`
	Beta    fit.Quantity `json:"beta_A_per_V2"`
	Theta   fit.Quantity `json:"theta_per_V"`
	GmMax   fit.Quantity `json:"gm_max_S"`
	GmIdle  fit.Quantity `json:"gm_idle_S"`
	Idss    fit.Quantity `json:"idss_A"`
}

func quantitiesOf(r *fit.Result) quantities {
	return quantities{r.Vgsth, r.VgsIdle, r.Vt, r.Beta, r.Theta, r.GmMax, r.GmIdle, r.Idss}
}

type sweepDoc struct {
	Sweep     string       `json:"sweep"`
	Direction string       `json:"direction"`
	Vgsth     fit.Quantity `json:"vgsth_V"`
	Vt        fit.Quantity `json:"vt_V"`
}

type deviceDoc struct {
	Device  string   `json:"device"`
	Package optional `json:"package"`
	Side    optional `json:"side"`
	State   string   `json:"state"`
	Sweeps  []string `json:"sweeps"`
	quantities
	Method   optional          `json:"method"`
	PerSweep []sweepDoc        `json:"per_sweep"`
	Warnings []fit.Warning     `json:"warnings"`
	Budget   *byKey[budgetDoc] `json:"budget,omitempty"`
	Shape    *shapeDoc         `json:"shape,omitempty"`
}

// stateCodes names the warning code that goes with a state.
var stateCodes = map[fit.State]string{
	fit.Above:         fit.CodeAboveRange,
	fit.Open:          fit.CodeOpen,
	fit.Shorted:       fit.CodeShorted,
	fit.WrongWayRound: fit.CodeWrongWayRound,
	fit.Declined:      fit.CodeDeclined,
	fit.Excluded:      fit.CodeExcluded,
	"":                fit.CodeNotMeasured,
}

// warningsOf gives the warnings of a device; a state other than measured is
// always among them, and what tells why a measured one lacks a quantity, so that a
// null has its reason.
func (s *Sheet) warningsOf(d *Device) []fit.Warning {
	list := append([]fit.Warning{}, d.Result.Warnings...)
	if d.State() == fit.Measured {
		list = append(list, d.Result.Missing(isNumber(s.TestCurrent), isNumber(s.IdleCurrent))...)
	}
	code, ok := stateCodes[d.State()]
	if !ok || d.Result.Has(code) || d.State() == fit.Declined && len(list) > 0 {
		return list
	}
	return append(list, fit.Warning{Code: code, Text: d.Reason()})
}

func (s *Sheet) deviceDocOf(d *Device) deviceDoc {
	doc := deviceDoc{
		Device: d.Name, Package: optional(d.Package), Side: optional(d.Side), State: string(d.State()),
		Sweeps: []string{}, quantities: quantitiesOf(&d.Result), Method: optional(d.Result.Method),
		PerSweep: []sweepDoc{}, Warnings: s.warningsOf(d),
	}
	if s.Budget {
		doc.Budget, doc.Shape = byBudget(&d.Result), shapeDocOf(d.Result.Shape)
	}
	if doc.State == "" {
		doc.State = string(fit.Declined)
	}
	for i := range d.Sweeps {
		sw := &d.Sweeps[i]
		doc.Sweeps = append(doc.Sweeps, sw.ID)
		doc.PerSweep = append(doc.PerSweep, sweepDoc{sw.ID, string(sw.Direction), sw.Result.Vgsth, sw.Result.Vt})
	}
	return doc
}

// FitJSON writes what `fit --json` gives: every device of the lot with its
// values, uncertainties and warnings.
func FitJSON(w io.Writer, s Sheet) error {
	devices := make(rows, 0, len(s.Devices))
	for i := range s.Devices {
		devices = append(devices, s.deviceDocOf(&s.Devices[i]))
	}
	return writeObject(w,
		member{"schema", Schema}, member{"lot", s.Lot.Name}, member{"sorted_by", optional(s.SortedBy)},
		member{"test_current_A", number(s.TestCurrent)}, member{"idle_current_A", number(s.IdleCurrent)},
		member{"devices", devices})
}

type summaryDoc struct {
	N        int    `json:"n"`
	Above    int    `json:"above"`
	Mean     number `json:"mean"`
	SD       number `json:"sd"`
	Median   number `json:"median"`
	RobustSD number `json:"robust_sd"`
	Min      number `json:"min"`
	Max      number `json:"max"`
}

type limitDoc struct {
	K     number `json:"k"`
	Basis string `json:"basis"`
	Low   number `json:"low"`
	High  number `json:"high"`
}

type reasonDoc struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

type verdictDoc struct {
	Device  string      `json:"device"`
	Flagged bool        `json:"flagged"`
	Reasons []reasonDoc `json:"reasons"`
	*judgementDoc
}

func summaryDocs(sp *lot.Spread) byKey[summaryDoc] {
	m := byKey[summaryDoc]{}
	for k, x := range sp.Summary {
		m[k] = summaryDoc{x.N, x.Above, number(x.Mean), number(x.SD), number(x.Median), number(x.RobustSD), number(x.Min), number(x.Max)}
	}
	return m
}

func limitDocs(sp *lot.Spread) byKey[limitDoc] {
	m := byKey[limitDoc]{}
	for k, x := range sp.Limits {
		m[k] = limitDoc{number(x.K), x.Basis, number(x.Low), number(x.High)}
	}
	return m
}

// verdictDocs lists every device of the lot, those too that the spread did not
// look at.
func verdictDocs(s *Sheet) []verdictDoc {
	verdicts, judgements := s.Verdicts(), judgementDocs(s.Spec)
	docs := make([]verdictDoc, 0, len(s.Devices))
	for _, d := range s.Devices {
		v := verdicts[d.Name]
		doc := verdictDoc{d.Name, v.Flagged, []reasonDoc{}, judgements[d.Name]}
		for _, r := range v.Reasons {
			doc.Reasons = append(doc.Reasons, reasonDoc(r))
		}
		docs = append(docs, doc)
	}
	return docs
}

func rowsOf[T any](list []T) rows {
	r := make(rows, len(list))
	for i, v := range list {
		r[i] = v
	}
	return r
}

// SpreadJSON writes what `spread --json` gives.
func SpreadJSON(w io.Writer, s Sheet) error {
	return writeObject(w, append([]member{
		{"schema", Schema}, {"lot", s.Lot.Name}, {"populations", max(1, s.Spread.Populations)},
		{"split", splitDocOf(s.Spread.Split)}, {"summary", summaryDocs(&s.Spread)}, {"limits", limitDocs(&s.Spread)},
		{"specification", specDocOf(s.Spec)}, {"devices", rowsOf(verdictDocs(&s))}}, heldMembers(&s, s.SortedBy)...)...)
}

type placedDoc struct {
	Device string   `json:"device"`
	Value  number   `json:"value"`
	U      number   `json:"u"`
	Maybe  optional `json:"maybe"`
}

type unsortedDoc struct {
	Device string `json:"device"`
	Why    string `json:"why"`
}

// binDoc is one bin; the unit of the edges, which ends their keys, is that of
// the quantity sorted by.
type binDoc struct {
	unit      string
	Bin       string
	Low, High float64
	Devices   []placedDoc
}

func (d binDoc) MarshalJSON() ([]byte, error) {
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	err := enc.Encode(d.Devices)
	if err != nil {
		return nil, err
	}
	low, _ := number(d.Low).MarshalJSON()
	high, _ := number(d.High).MarshalJSON()
	name, err := optional(d.Bin).MarshalJSON()
	return fmt.Appendf(nil, `{"bin":%s,"low_%s":%s,"high_%s":%s,"devices":%s}`, name, d.unit, low, d.unit, high, bytes.TrimSpace(buf.Bytes())), err
}

// sortUnit ends the keys of a sorting.
func sortUnit(by fit.Key) string {
	if u := KeyOf(by).Suffix; u != "" {
		return u
	}
	return "V"
}

func binDocs(srt *lot.Sorting) []binDoc {
	docs := make([]binDoc, 0, len(srt.Bins))
	for _, b := range srt.Bins {
		doc := binDoc{unit: sortUnit(srt.By), Bin: b.Name, Low: b.Low, High: b.High, Devices: []placedDoc{}}
		for _, d := range b.Devices {
			doc.Devices = append(doc.Devices, placedDoc{d.Name, number(d.Value), number(d.U), optional(d.Maybe)})
		}
		docs = append(docs, doc)
	}
	return docs
}

func unsortedDocs(s *Sheet) []unsortedDoc {
	docs := []unsortedDoc{}
	for _, u := range s.Unsorted() {
		docs = append(docs, unsortedDoc{u.Name, u.Why})
	}
	return docs
}

// SortJSON writes what `sort --json` gives. Sorted by a transconductance, the
// keys of the edges end in _S instead of _V, because they are not volts.
func SortJSON(w io.Writer, s Sheet) error {
	if s.Sorting == nil {
		return fmt.Errorf("lot %q: %w", s.Lot.Name, ErrNotSorted)
	}
	return writeObject(w, append([]member{
		{"schema", Schema}, {"lot", s.Lot.Name}, {"by", string(s.Sorting.By)},
		{"smallest_honest_width_" + sortUnit(s.Sorting.By), number(s.Sorting.SmallestWidth)},
		{"bins", rowsOf(binDocs(s.Sorting))}, {"unsorted", rowsOf(unsortedDocs(&s))}}, heldMembers(&s, s.Sorting.By)...)...)
}

// writeLine writes one object of a stream, in one line.
func writeLine(w io.Writer, value any) error {
	b := bufio.NewWriter(w)
	if err := writeCompact(b, value); err != nil {
		return err
	}
	b.WriteByte('\n')
	return b.Flush()
}
