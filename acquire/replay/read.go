package replay

import (
	"bytes"
	"fmt"
	"math"
	"strings"

	"gatesill/acquire/table"
	"gatesill/store/record"
)

// roleQuantity is what the meter of a role reads.
var roleQuantity = map[string]struct {
	short, dim string
	quantity   record.Quantity
}{
	"gate":        {"vg", "V", record.VG},
	"current":     {"id", "A", record.ID},
	"load":        {"vl", "V", record.VL},
	"drain":       {"vd", "V", record.VD},
	"supply":      {"vdd", "V", record.VDD},
	"temperature": {"temp", "degC", record.Temp},
}

// Roles lists the roles that a log may have, but for the notes.
var Roles = []string{"gate", "current", "load", "drain", "supply", "temperature"}

const keptRefusals = 10

// ReadLog reads the log of the meter in that role. Errors: *[table.Error] with
// file, line and hint, wrapping [table.ErrRefused], [table.ErrAmbiguous] or
// [table.ErrTooMany].
func ReadLog(path, role string, opt Options) (*Log, error) {
	t, err := table.ReadText(path, opt.Table)
	if err != nil {
		return nil, err
	}
	return readLog(t, path, role, opt)
}

func readLog(t *table.Text, path, role string, opt Options) (*Log, error) {
	l := &Log{Role: role, Path: path, Name: t.Name, Hash: t.Hash, Size: t.Size}
	l.Found = Found{Role: role, File: t.Name, Encoding: t.Encoding, Notes: []string{}}
	rd := &logReader{text: t, log: l, opt: opt, digits: map[float64]bool{}}
	for _, step := range []func() error{rd.layout, rd.settleForm, rd.settleUnit, rd.entries} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	l.Found.Notes = append(l.Found.Notes, t.Notes...)
	return l, nil
}

// logReader is one log while it is read.
type logReader struct {
	text *table.Text
	log  *Log
	opt  Options

	delim     byte
	sample    []sampled
	header    []string
	headRow   string
	unitLine  []string
	width     int
	timeCol   int
	clockCol  int // the time of day beside a column of dates, else -1
	valueCol  int
	unitCol   int // -1: none
	mark      byte
	unit      table.Unit // of the value column; zero: in the cells or their own column
	order     dateOrder
	timeScale table.Unit       // of elapsed numbers
	minutes   bool             // m:s, not h:m
	zeros     bool             // a reading ends in a zero behind the decimal mark
	digits    map[float64]bool // last digits of the readings
}

// sampled is a row of the head of the file.
type sampled struct {
	line  int
	text  string
	cells []string
}

// entries reads all rows.
func (rd *logReader) entries() error {
	l := rd.log
	var in []instant
	for row := range rd.text.Rows(rd.delim) {
		if row.Comment || row.Line <= l.Found.Header || string(row.Text) == rd.headRow {
			continue
		}
		if len(in) == 0 && (rd.isUnitLine(row.Cells) || row.Line < rd.sample[0].line) {
			continue
		}
		l.Rows++
		at, why := rd.timeOf(row.Cells)
		var r record.Reading
		if why == "" {
			r, why = rd.readingOf(row.Cells)
		}
		if why != "" {
			l.refuse(row.Line, why, row.Text)
			continue
		}
		r.Role, r.Meter = l.Role, l.Name
		r.Raw = []byte(strings.ToValidUTF8(string(row.Text[:min(len(row.Text), 400)]), "\ufffd"))
		if r.State != "" {
			l.Found.States++
		}
		l.Entries = append(l.Entries, Entry{Line: row.Line, Reading: r})
		in = append(in, at)
	}
	if err := rd.checkRefused(); err != nil {
		return err
	}
	rd.settleDigits()
	times, res, lost := settleFractions(in)
	l.Found.Resolution = res
	if l.Found.Form == Elapsed {
		l.Found.Resolution = rd.numberStep()
	}
	if lost != "" {
		l.note("%s", lost)
	}
	if err := l.settleSteps(rd.text, times); err != nil {
		return err
	}
	l.spread(times)
	for i := range l.Entries {
		l.Entries[i].At = times[i]
	}
	l.Found.Cycle, l.Found.Readings = usualStep(times), len(times)
	return nil
}

// settleDigits gives all readings the finest digit of the file where the program
// that wrote it left zeros at the end of numbers out: else every such reading would
// look like one in another range of the meter.
func (rd *logReader) settleDigits() {
	if rd.zeros || len(rd.digits) < 2 {
		return
	}
	least := math.Inf(1)
	for d := range rd.digits {
		least = min(least, d)
	}
	for i := range rd.log.Entries {
		if e := &rd.log.Entries[i]; e.Digit.IsKnown() {
			e.Digit = record.Known(least)
		}
	}
	rd.log.note("no number ends in a zero behind the decimal mark: zeros at the end were left out, and all readings are taken to %.0e %s", least, roleQuantity[rd.log.Role].dim)
}

// endsInZero reports whether a number has a zero as its last digit behind the
// decimal mark.
func endsInZero(text []byte, mark byte) bool {
	i := bytes.IndexByte(text, mark)
	if i < 0 {
		return false
	}
	n := i + 1
	for n < len(text) && text[n]-'0' <= 9 {
		n++
	}
	return text[n-1] == '0'
}

// numberStep is the last digit of elapsed seconds written as numbers.
func (rd *logReader) numberStep() float64 {
	least := math.Inf(1)
	for _, s := range rd.sample {
		if n, why := table.ReadNumber([]byte(s.cells[rd.timeCol]), rd.mark, rd.timeScale); why == "" && n.State == "" {
			least = min(least, n.Digit)
		}
	}
	return least
}

func (l *Log) refuse(line int, why string, row []byte) {
	l.Refused++
	if len(l.Refusals) < keptRefusals {
		l.Refusals = append(l.Refusals, table.Refusal{Line: line, Reason: why, Text: strings.ToValidUTF8(string(row[:min(len(row), 80)]), "")})
	}
}

// checkRefused fails a log of which too many rows cannot be read, as for a table:
// more than a fifth, or any where that was asked for.
func (rd *logReader) checkRefused() error {
	l := rd.log
	if l.Refused == 0 && len(l.Entries) > 0 {
		return nil
	}
	if l.Refused*5 <= l.Rows && !rd.opt.Table.Strict && len(l.Entries) > 0 {
		return nil
	}
	if len(l.Refusals) == 0 {
		return rd.text.Refuse(0, "", "it holds no readings")
	}
	first := l.Refusals[0]
	return &table.Error{File: l.Path, Line: first.Line, Hint: "gatesill import --dry-run with the other files tells more; --map names the columns",
		Err: fmt.Errorf("%w: %d of %d rows refused, the first: %s", table.ErrTooMany, l.Refused, l.Rows, first.Reason)}
}

func cell(cells [][]byte, i int) []byte {
	if i < 0 || i >= len(cells) {
		return nil
	}
	return cells[i]
}

// timeOf reads the time of a row in the form of the file.
func (rd *logReader) timeOf(cells [][]byte) (instant, string) {
	text := cell(cells, rd.timeCol)
	if len(text) == 0 {
		return instant{}, "no time in it"
	}
	form := rd.log.Found.Form
	switch form {
	case UnixS, UnixMS, UnixUS, Elapsed:
		at, ok := numeral(text, rd.mark, form, rd.timeScale)
		if !ok {
			return at, fmt.Sprintf("%q is no time like the others (%s)", clip(text), form)
		}
		return at, ""
	}
	s, ok := readStamp(string(text))
	if ok && rd.clockCol >= 0 {
		var clock stamp
		if clock, ok = readStamp(string(cell(cells, rd.clockCol))); ok {
			s, ok = joinDate(s, clock)
		}
	}
	if ok {
		ok = s.fits(form)
	}
	var x float64
	if ok {
		x, ok = s.seconds(rd.order)
	}
	if !ok {
		return instant{}, fmt.Sprintf("%q is no time like the others (%s)", clip(text), form)
	}
	if rd.minutes && s.parts == 2 {
		x /= 60
	}
	if s.look == aZoned && !s.utc {
		rd.zone(s.zone)
	}
	return instant{x, s.frac}, ""
}

// zone keeps a zone that was written.
func (rd *logReader) zone(z int) {
	for _, have := range rd.log.zones {
		if have == z {
			return
		}
	}
	if len(rd.log.zones) < 4 {
		rd.log.zones = append(rd.log.zones, z)
	}
}

// fits reports whether a time is written in the form.
func (s *stamp) fits(form Form) bool {
	switch s.look {
	case aZoned:
		return form == Zoned
	case aMoment:
		return form == Local
	case aClock:
		return form == ElapsedHMS || form == TimeOfDay && s.hour < 24
	}
	return false
}

// notFresh are the words by which a meter says that its display is no fresh reading.
var notFresh = map[string]string{
	"HOLD": "held", "HLD": "held", "H": "", "REL": "relative to another reading", "DELTA": "relative to another reading", "ZERO": "",
	"MAX": "a maximum", "MIN": "a minimum", "PEAK": "a peak", "PMAX": "a maximum", "PMIN": "a minimum", "AVG": "",
}

// readingOf reads the value of a row.
func (rd *logReader) readingOf(cells [][]byte) (r record.Reading, why string) {
	q := roleQuantity[rd.log.Role]
	text := cell(cells, rd.valueCol)
	if rd.valueCol >= len(cells) {
		return r, fmt.Sprintf("the row has %d cells, want %d", len(cells), rd.valueCol+1)
	}
	unit := rd.unit
	alternating := false
	if rd.unitCol >= 0 {
		if u, ac, ok := coupledUnit(string(cell(cells, rd.unitCol))); ok {
			unit, alternating = u, ac
		}
	}
	bare, ac := cutCoupling(text)
	n, why := table.ReadNumber(bare, rd.mark, orBase(unit, q.dim))
	if why != "" {
		return r, why
	}
	if n.Unit.Dim != "" {
		unit = n.Unit
	}
	r.Unit = q.dim
	if r.State = n.State; r.State == "" {
		r.Value, r.Digit = record.Known(n.Value), record.Known(n.Digit)
		rd.zeros = rd.zeros || endsInZero(bare, rd.mark)
		rd.digits[n.Digit] = true
	}
	switch {
	case ac || alternating:
		r.Refused = "an AC reading"
	case unit.Dim != q.dim && r.State == "":
		r.Refused = "in " + unit.Text
	default:
		for i, c := range cells {
			if i != rd.valueCol && i != rd.timeCol && len(c) <= 40 {
				for _, w := range strings.Fields(strings.ToUpper(string(c))) {
					if said := notFresh[w]; said != "" {
						r.Refused = said
					}
				}
			}
		}
	}
	return r, ""
}

// orBase is the unit, or the base unit of the dimension when there is none.
func orBase(u table.Unit, dim string) table.Unit {
	if u.Dim == "" {
		return table.Unit{Text: dim, Dim: dim}
	}
	return u
}

// cutCoupling takes DC or AC off the end of a number with its unit: 5.1 VDC.
func cutCoupling(text []byte) (bare []byte, ac bool) {
	n := len(text)
	if n < 4 {
		return text, false
	}
	switch strings.ToUpper(string(text[n-2:])) {
	case "DC":
		return []byte(strings.TrimRight(string(text[:n-2]), " ")), false
	case "AC":
		return []byte(strings.TrimRight(string(text[:n-2]), " ")), true
	}
	return text, false
}

// coupledUnit reads a unit with DC or AC before or behind it: VDC, DC mA.
func coupledUnit(text string) (u table.Unit, ac, ok bool) {
	t := strings.TrimSpace(text)
	up := strings.ToUpper(t)
	for _, w := range []string{"DC", "AC"} {
		if strings.HasSuffix(up, w) && len(t) > 2 {
			t, ac = strings.TrimSpace(t[:len(t)-2]), w == "AC"
			break
		}
		if strings.HasPrefix(up, w) && len(t) > 2 {
			t, ac = strings.TrimSpace(t[2:]), w == "AC"
			break
		}
	}
	u, ok = table.ReadUnit(t)
	return u, ac, ok
}

func clip(b []byte) string {
	if len(b) > 40 {
		return strings.ToValidUTF8(string(b[:40]), "") + "..."
	}
	return string(b)
}
