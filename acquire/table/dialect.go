package table

import (
	"bytes"
	"slices"
	"strings"
)

const (
	sampleRows  = 200       // rows of the head that are looked at
	sampleBytes = 256 << 10 // of a file with very long rows fewer, but
	sampleLeast = 10        // at least so many
)

// kind is what a cell looks like, whatever the decimal mark.
type kind uint8

const (
	empty kind = iota
	number
	state
	text
)

// kindOf tells what a cell looks like. A number may have either decimal mark
// and a unit behind it.
func kindOf(cell []byte) kind {
	t := trim(cell)
	if len(t) == 0 {
		return empty
	}
	if looksNumber(t) {
		return number
	}
	if _, ok := stateOf(t); ok {
		return state
	}
	return text
}

func looksNumber(t []byte) bool {
	if plainDigits(t) {
		return true
	}
	if len(t) > maxDigits || bytes.IndexByte([]byte("+-.,0123456789\xe2"), t[0]) < 0 {
		return false
	}
	for _, n := range [2]numeral{{'.', ','}, {',', '.'}} {
		d, rest, ok := n.decimal(strip(string(t)))
		if !ok {
			continue
		}
		if rest == "" {
			return true
		}
		if _, ok := readUnit(rest); ok {
			return true
		}
		for _, dim := range []string{"V", "A", "S"} {
			if _, why := d.suffix(rest, &scale{dim: dim}); why == "" {
				return true
			}
		}
	}
	return false
}

// plainDigits reports whether t is nothing but a sign, digits and one decimal
// mark, as most numbers are.
func plainDigits(t []byte) bool {
	digits, marks := 0, 0
	for i, c := range t {
		switch {
		case c-'0' <= 9:
			digits++
		case c == '.' || c == ',':
			marks++
		case c == '-' && i == 0:
		default:
			return false
		}
	}
	return digits > 0 && marks <= 1 && len(t) <= maxDigits
}

// commentMarks are what a comment line may begin with.
var commentMarks = []string{"#", "%", "//", "!", "'", ";"}

// comments says which marks begin a comment in this file, by first byte.
type comments [256]bool

func (c *comments) is(row []byte) bool {
	return len(row) > 0 && c[row[0]] && (row[0] != '/' || len(row) > 1 && row[1] == '/')
}

// commentsFor gives the comment marks for a delimiter: all but the delimiter
// itself.
func commentsFor(delim byte) *comments {
	c := new(comments)
	for _, m := range commentMarks {
		if m[0] != delim {
			c[m[0]] = true
		}
	}
	return c
}

// sampled is one row of the head of the file.
type sampled struct {
	line    int
	start   int // place in the text
	row     []byte
	cells   [][]byte
	comment bool
}

// sample reads the rows of the head of the file with that delimiter, blank ones
// left out, comments unsplit.
func (r *reader) sample(delim byte, marks *comments) []sampled {
	s := newSplitter(r.text, delim)
	var rows []sampled
	data := 0
	for data < sampleRows && len(rows) < 10*sampleRows && (s.pos < sampleBytes || data < sampleLeast) && s.next() {
		if len(bytes.TrimSpace(s.row)) == 0 || len(s.row) > maxLine {
			continue
		}
		if marks.is(s.row) {
			rows = append(rows, sampled{line: s.at, start: s.start, row: s.row, comment: true})
			continue
		}
		s.split()
		if s.unclosed {
			continue
		}
		rows = append(rows, sampled{line: s.at, start: s.start, row: s.row, cells: slices.Clone(s.cells[:min(len(s.cells), maxColumns+1)])})
		data++
	}
	return rows
}

// delimiters in the order in which they are preferred when several fit: what
// stands inside numbers and texts comes last.
var delimiters = []struct {
	name string
	char byte
}{
	{"tab", '\t'}, {"semicolon", ';'}, {"pipe", '|'}, {"comma", ','}, {"blank", ' '},
}

func delimiterName(c byte) string {
	for _, d := range delimiters {
		if d.char == c {
			return d.name
		}
	}
	if c == 0 {
		return "none"
	}
	return string(rune(c))
}

// delimiterOption reads the option; 0 means that it was not given.
func (r *reader) delimiterOption() (byte, error) {
	o := r.opt.Delimiter
	for _, d := range delimiters {
		if o == d.name || o == string(rune(d.char)) {
			return d.char, nil
		}
	}
	switch {
	case o == "":
		return 0, nil
	case o == "\\t":
		return '\t', nil
	case o == "space" || o == "blanks":
		return ' ', nil
	case len(o) == 1 && o[0] > ' ' && o[0] < 0x7f && !strings.ContainsAny(o, "\"+-.0123456789eE"):
		return o[0], nil
	}
	return 0, r.refused(0, "delimiter %q is not known: comma, semicolon, tab, pipe, blank or one character", o)
}

// findDelimiter settles delimiter and comment marks from the head of the file.
func (r *reader) findDelimiter() error {
	given, err := r.delimiterOption()
	if err != nil {
		return err
	}
	if d, ok := r.declared(); ok && given == 0 {
		given = d
		r.note("the first line declares the delimiter %s", delimiterName(d))
	}
	if given != 0 {
		r.delim, r.marks = given, r.commentMarks(given)
		return nil
	}
	best := -1.0
	for _, d := range delimiters {
		marks := r.commentMarks(d.char)
		if score := fitness(r.sample(d.char, marks)); score > best+0.05 {
			best, r.delim, r.marks = score, d.char, marks
		}
	}
	if best <= 0 || r.delim == ' ' && numbersWithUnits(r.sample(' ', r.marks)) {
		r.delim = 0
		r.marks = r.commentMarks(0)
	}
	return nil
}

// declared reads a first line "sep=;", which spreadsheets write and obey.
func (r *reader) declared() (byte, bool) {
	rest, ok := bytes.CutPrefix(r.text[:min(len(r.text), 16)], []byte("sep="))
	if !ok || len(rest) < 2 || rest[1] != '\n' && rest[1] != '\r' {
		return 0, false
	}
	return rest[0], true
}

// commentMarks drops the marks that begin rows of data in this file: devices
// may be called #1, #2.
func (r *reader) commentMarks(delim byte) *comments {
	marks := commentsFor(delim)
	var data int
	commented := map[byte]int{}
	s := newSplitter(r.text, delim)
	for n := 0; n < 2*sampleRows && (s.pos < sampleBytes || n < sampleLeast) && s.next(); n++ {
		if len(s.row) == 0 || len(s.row) > maxLine {
			continue
		}
		first := s.row[0]
		s.split()
		numbers := 0
		for _, c := range s.cells[min(1, len(s.cells)):] {
			if k := kindOf(c); k == number {
				numbers++
			}
		}
		switch {
		case numbers == 0 || numbers < len(s.cells)/2:
		case marks[first] && numbers == len(s.cells)-1:
			commented[first]++
		case !marks[first]:
			data++
		}
	}
	for c, n := range commented {
		if n >= 2 && n > data {
			marks[c] = false
		}
	}
	return marks
}

// fitness says how well a delimiter cuts the sample: the share of rows with the
// usual number of cells, times the share of cells that are numbers or whole
// texts; 0 when it cuts nothing.
func fitness(rows []sampled) float64 {
	counts := map[int]int{}
	total := 0
	for _, s := range rows {
		if !s.comment {
			counts[len(s.cells)]++
			total++
		}
	}
	usual := commonest(counts)
	if usual < 2 || total == 0 {
		return 0
	}
	var numbers, cells int
	for _, s := range rows {
		if s.comment || len(s.cells) != usual {
			continue
		}
		for _, c := range s.cells {
			cells++
			switch kindOf(c) {
			case number, state, empty:
				numbers++
			}
		}
	}
	return float64(counts[usual]) / float64(total) * (0.2 + float64(numbers)/float64(cells))
}

// commonest gives the key counted most often, the greatest of several.
func commonest(counts map[int]int) int {
	best, n := 0, 0
	for k, c := range counts {
		if c > n || c == n && k > best {
			best, n = k, c
		}
	}
	return best
}
