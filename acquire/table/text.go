package table

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"iter"
	"math"
	"strconv"

	"gatesill/store/record"
)

// Text is a text file that is no table of sweeps: its encoding is settled, its
// rows are cut on demand, and its cells are read as those of a table are. Logs of
// single meters are read through it.
type Text struct {
	Name     string // as given, without its folder
	Hash     string // SHA-256 of the bytes, hex
	Size     int64  // bytes
	Encoding string
	Notes    []string // what was decided on the way

	r *reader
}

// ReadText takes in a text file. Of the options it obeys Encoding, Delimiter,
// Decimal, Ask and MaxBytes. Errors as of [ReadFile].
func ReadText(path string, opt Options) (*Text, error) {
	r := newReader(path, opt)
	raw, err := r.load(path)
	if err != nil {
		return nil, err
	}
	return r.asText(raw)
}

// TextOf is [ReadText] of bytes that are there already.
func TextOf(name string, raw []byte, opt Options) (*Text, error) {
	r := newReader(name, opt)
	if raw, err := r.takeIn(bytes.NewReader(raw), int64(len(raw))); err != nil {
		return nil, err
	} else {
		return r.asText(raw)
	}
}

func (r *reader) asText(raw []byte) (*Text, error) {
	sum := sha256.Sum256(raw)
	t := &Text{Name: r.file.Name, Hash: hex.EncodeToString(sum[:]), Size: int64(len(raw)), r: r}
	var err error
	if r.text, t.Encoding, err = r.decode(raw); err != nil {
		return nil, err
	}
	r.trimEnd()
	for _, m := range r.file.Remarks {
		t.Notes = append(t.Notes, m.Text)
	}
	return t, nil
}

// Row is one row of a text with the line it begins in. Cells share the text.
type Row struct {
	Line    int
	Text    []byte
	Cells   [][]byte // without blanks at their ends; valid until the next row
	Comment bool     // not cut
}

// Rows cuts the text at the delimiter: a sign, ' ' for runs of blanks and tabs, 0
// for none. Blank rows, rows that are far too long and a line that declares the
// delimiter are left out.
func (t *Text) Rows(delim byte) iter.Seq[Row] {
	return func(yield func(Row) bool) {
		marks := commentsFor(delim)
		s := newSplitter(t.r.text, delim)
		for s.next() {
			if len(bytes.TrimSpace(s.row)) == 0 || len(s.row) > maxLine || s.at == 1 && bytes.HasPrefix(s.row, []byte("sep=")) {
				continue
			}
			row := Row{Line: s.at, Text: s.row}
			if marks.is(s.row) {
				row.Comment = true
			} else {
				s.split()
				for i, c := range s.cells {
					s.cells[i] = trim(c)
				}
				row.Text, row.Cells = s.row, s.cells
			}
			if !yield(row) {
				return
			}
		}
	}
}

// Delimiters lists the delimiters in the order in which they are preferred; the
// one that was given or declared alone, when there is one.
func (t *Text) Delimiters() ([]byte, error) {
	given, err := t.r.delimiterOption()
	if err != nil {
		return nil, err
	}
	if d, ok := t.r.declared(); ok && given == 0 {
		given = d
	}
	if given != 0 {
		return []byte{given}, nil
	}
	var all []byte
	for _, d := range delimiters {
		all = append(all, d.char)
	}
	return all, nil
}

// DelimiterName is what a delimiter is called.
func DelimiterName(c byte) string { return delimiterName(c) }

// Decimal settles the decimal mark from cells that hold numbers, '.' or ',', as
// it is settled for a table cut at that delimiter.
func (t *Text) Decimal(delim byte, cells iter.Seq[[]byte]) (byte, error) {
	r := t.r
	switch r.opt.Decimal {
	case "point":
		return '.', nil
	case "comma":
		return ',', nil
	case "":
	default:
		return 0, r.refused(0, "decimal mark %q is not known: point or comma", r.opt.Decimal)
	}
	var e evidence
	for c := range cells {
		e.see(c)
	}
	r.delim = delim
	noted := len(r.file.Dialect.Notes)
	if err := r.decideDecimal(e); err != nil {
		return 0, err
	}
	t.Notes = append(t.Notes, r.file.Dialect.Notes[noted:]...)
	return r.num.mark, nil
}

// Refuse is an error with its place, wrapping [ErrRefused]; line 0 is the file.
func (t *Text) Refuse(line int, hint, format string, args ...any) *Error {
	e := t.r.refused(line, format, args...)
	e.Hint = hint
	return e
}

// Ask puts a question, or is an error wrapping [ErrAmbiguous] with the hint when
// nobody answers.
func (t *Text) Ask(q Question, line int, hint string) (string, error) {
	return t.r.ask(q, line, hint)
}

// Unit is a unit with its SI prefix; the zero Unit is none.
type Unit struct {
	Text string // as shown: "mA"
	Dim  string // "V", "A", "ohm", "degC", "s" ...
	Exp  int    // power of ten to the base unit
}

// ReadUnit reads a text that is nothing but a unit.
func ReadUnit(text string) (Unit, bool) {
	u, ok := readUnit(text)
	return Unit{u.text, u.dim, u.exp}, ok
}

// ReadHeading reads the header of a column: the role it names ("" for none) and
// its unit (zero for none).
func ReadHeading(text string) (role string, u Unit) {
	h := readHeading(text)
	if h.hasUnit {
		u = Unit{h.unit.text, h.unit.dim, h.unit.exp}
	}
	switch h.role {
	case roleTime, string(RoleDate), "t":
		return "t", u
	case roleTorT:
		return "", u
	case roleLoad:
		return "vl", u
	case roleVth:
		return "vg", u
	}
	return h.role, u
}

// Number is what a cell with a reading says.
type Number struct {
	Value float64           // base unit; NaN with a State
	Digit float64           // one count of its last digit, base unit; NaN with a State
	State record.PointState // "" for a number
	Unit  Unit              // as written in the cell; zero: none there
}

// LooksNumber reports whether a cell may be a number, with either decimal mark
// and a unit behind it; LooksState whether it says that there is none.
func LooksNumber(cell []byte) bool { return kindOf(cell) == number }

// LooksState reports whether a cell stands for no number: over the range, or
// nothing read.
func LooksState(cell []byte) bool { return kindOf(cell) == state }

// ReadNumber reads one cell: a number with that decimal mark, in its own unit
// when it has one, else in u; or a mark for no number. The text why is not empty
// when it is neither. A unit of its own may be of any dimension.
func ReadNumber(cell []byte, mark byte, u Unit) (out Number, why string) {
	nan := math.NaN()
	text := trim(cell)
	if st, ok := stateOf(text); ok {
		return Number{Value: nan, Digit: nan, State: st}, ""
	}
	n := numeral{mark: mark}
	if len(text) > maxDigits {
		return out, "a cell of " + strconv.Itoa(len(text)) + " characters is no number"
	}
	d, rest, ok := n.decimal(strip(string(text)))
	if !ok {
		return out, n.complain(text, "")
	}
	exp := u.Exp
	if rest == "" {
		if st := d.meterState(); st != "" {
			return Number{Value: nan, Digit: nan, State: st}, ""
		}
	} else if own, ok := ReadUnit(rest); ok {
		out.Unit, exp = own, own.Exp
	} else {
		var why string
		if exp, why = d.suffix(rest, &scale{dim: u.Dim, exp: u.Exp}); why != "" {
			return out, n.complain(text, why)
		}
	}
	x, err := strconv.ParseFloat(string(d.json(nil, exp)), 64)
	if err != nil || math.Abs(x) > maxValue {
		return out, strconv.QuoteToGraphic(string(text)) + " is too large for a reading"
	}
	out.Value, out.Digit = x, math.Pow10(exp+d.exp-len(d.frac))
	return out, ""
}

// Pass is a run of points in which the gate goes one way: [Lo, Hi).
type Pass struct {
	Lo, Hi int
	Dir    record.Direction
}

// Passes cuts gate voltages (V, NaN for none) at their turning points, as those
// of one device in a table; sign -1 where a falling gate turns the device on.
func Passes(vg []float64, sign float64) []Pass {
	var out []Pass
	for _, p := range passes(vg, sign) {
		out = append(out, Pass{p.lo, p.hi, p.dir})
	}
	return out
}
