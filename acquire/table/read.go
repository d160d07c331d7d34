package table

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strings"

	"gatesill/store/record"
)

const (
	defaultMax = 1 << 30 // bytes
	maxSweeps  = 100000
	keptRows   = 10 // refusals that are kept with their text
)

// Codes of the remarks of this package.
const (
	CodeSameRows       = "same-rows"       // one block of rows under two devices
	CodeFlagWins       = "flag-wins"       // a flag contradicts the file
	CodeUnitDoubtful   = "unit-doubtful"   // no bench gives such numbers in that unit
	CodeCommentsDiffer = "comments-differ" // two comments contradict one another
	CodeCutOff         = "cut-off"         // the file seems to end too early
	CodeColumnNotUsed  = "column-not-used" // a column in a unit that is not read
)

// reader is one file while it is read. Its steps run once, in the order of
// [reader.read].
type reader struct {
	place string // file as given, for messages
	opt   Options
	file  *File

	text       []byte // UTF-8
	delim      byte
	marks      *comments
	headings   []heading
	headerLine int
	headerRow  []byte
	unitLine   int
	unitCells  []string
	body       []sampled // rows of data in the head of the file
	bodyLine   int       // where the data begins
	bodyStart  int       // its place in the text
	cols       []column
	num        numeral
	layout     string
	summaries  []remarkLine // refused rows whose device cell is a summary word, with it
	numbered   bool         // devices are numbered by their rows
	sided      bool         // devices are named by package and side
	footer     int          // refused rows that are the foot of a spreadsheet

	talk        []remarkLine // comments and what stands above the header
	talkCond    record.Condition
	talkText    map[Role]string // operator, fixture, date as comments say
	talkChannel string          // "p", "n" as comments say
	unread      []remarkLine    // conditions in comments that cannot be read
	talkDevice  string          // the device of a file without device column
}

// remarkLine is a comment with its line.
type remarkLine struct {
	line int
	text string
}

// ReadFile reads one file. What cannot be read as a table is refused in plain
// words: a folder, an absent or empty file, a compressed or binary one, one
// beyond Options.MaxBytes.
//
// Errors: *[Error] wrapping [ErrRefused], [ErrAmbiguous] or [ErrTooMany], and
// the error of the file system where there was one. With ErrTooMany the File is
// returned too, with its refusals and what was recognised of its text.
func ReadFile(path string, opt Options) (*File, error) {
	r := newReader(path, opt)
	raw, err := r.load(path)
	if err != nil {
		return nil, err
	}
	return r.read(raw)
}

// load takes in the bytes of a file.
func (r *reader) load(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, r.ioError(err)
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, r.ioError(err)
	}
	if info.IsDir() {
		return nil, r.refused(0, "it is a folder")
	}
	size := int64(-1)
	if info.Mode().IsRegular() {
		size = info.Size()
	}
	return r.takeIn(f, size)
}

// Read reads a table from r; name is what the file is called, and names the
// device in a file without device column. Errors as of [ReadFile].
func Read(name string, rd io.Reader, opt Options) (*File, error) {
	r := newReader(name, opt)
	raw, err := r.takeIn(rd, -1)
	if err != nil {
		return nil, err
	}
	return r.read(raw)
}

func newReader(path string, opt Options) *reader {
	name := path
	if i := strings.LastIndexAny(name, `/\`); i >= 0 {
		name = name[i+1:]
	}
	return &reader{place: path, opt: opt, file: &File{Name: name, Dialect: Dialect{Columns: []ColumnFound{}, Notes: []string{}}}, talkText: map[Role]string{}}
}

// ioError says in plain words what the file system said.
func (r *reader) ioError(err error) error {
	what := "it cannot be read"
	switch {
	case errors.Is(err, fs.ErrNotExist):
		what = "there is no such file"
	case errors.Is(err, fs.ErrPermission):
		what = "reading it is not permitted"
	}
	return &Error{File: r.place, Err: fmt.Errorf("%w: %s: %w", ErrRefused, what, err)}
}

// takeIn takes in the bytes, looking at the first of them before it asks for
// the rest.
func (r *reader) takeIn(rd io.Reader, size int64) ([]byte, error) {
	limit := r.opt.MaxBytes
	if limit <= 0 {
		limit = defaultMax
	}
	if size > limit {
		return nil, r.tooLarge(size, limit)
	}
	room := int64(headBytes)
	if size >= 0 {
		room = size + 1 // one more, to see the end without growing
	}
	raw, err := readUpTo(rd, make([]byte, 0, room), headBytes)
	if err != nil {
		return nil, r.ioError(err)
	}
	if len(raw) == 0 {
		e := r.refused(0, "it is empty")
		e.Hint = "save the readings anew: a header and a row for each reading, such as device,vgs_at_10mA_V"
		return nil, e
	}
	if err := r.checkHead(raw[:min(len(raw), headBytes)]); err != nil {
		return nil, err
	}
	if raw, err = readUpTo(rd, raw, limit+1); err != nil {
		return nil, r.ioError(err)
	}
	if int64(len(raw)) > limit {
		return nil, r.tooLarge(int64(len(raw)), limit)
	}
	return raw, nil
}

// readUpTo reads on behind what buf holds, until it holds n bytes or more or
// the end is reached.
func readUpTo(rd io.Reader, buf []byte, n int64) ([]byte, error) {
	for int64(len(buf)) < n {
		if len(buf) == cap(buf) {
			buf = append(buf, 0)[:len(buf)]
		}
		k, err := rd.Read(buf[len(buf):cap(buf)])
		buf = buf[:len(buf)+k]
		if err == io.EOF {
			break
		}
		if err != nil {
			return buf, err
		}
	}
	return buf, nil
}

// read is the way of one file from bytes to sweeps.
func (r *reader) read(raw []byte) (*File, error) {
	sum := sha256.Sum256(raw)
	r.file.Hash, r.file.Size = hex.EncodeToString(sum[:]), int64(len(raw))
	var err error
	if r.text, r.file.Dialect.Encoding, err = r.decode(raw); err != nil {
		return nil, err
	}
	r.trimEnd()
	for _, step := range []func() error{
		r.checkUnitOptions, r.findDelimiter, r.findTable, r.mapColumns, r.settle, r.readRows, r.finish,
	} {
		if err := step(); err != nil {
			if errors.Is(err, ErrTooMany) {
				r.describe()
				return r.file, err
			}
			return nil, err
		}
	}
	return r.file, nil
}

// trimEnd takes off what is no text at the end: the end mark of old systems,
// and zeros where the last block was never written.
func (r *reader) trimEnd() {
	n := len(r.text)
	r.text = bytes.TrimRight(r.text, "\x1a\x00")
	if zeros := n - len(r.text); zeros > 1 {
		r.remark(CodeCutOff, "%d zeros at the end are left out: the file was not written to its end", zeros)
	}
}

// findTable finds header, body, talk and columns.
func (r *reader) findTable() error {
	if err := r.findHeader(); err != nil {
		return err
	}
	if err := r.checkOneColumn(); err != nil {
		return err
	}
	r.readTalk()
	r.file.Dialect.Signature = r.signature()
	return r.findColumns()
}

// settle decides layout, decimal mark and units.
func (r *reader) settle() error {
	if err := r.findLayout(); err != nil {
		return err
	}
	cols := r.numberColumns()
	index := make([]int, len(cols))
	for i, c := range cols {
		index[i] = c.index
	}
	if err := r.findDecimal(index); err != nil {
		return err
	}
	return r.settleUnits(cols)
}

// numberColumns are the columns that are read as numbers.
func (r *reader) numberColumns() []*column {
	var list []*column
	for j := range r.cols {
		c := &r.cols[j]
		if _, ok := quantities[c.as]; ok || c.as == roleLoad {
			list = append(list, c)
		}
	}
	return list
}

func (r *reader) note(format string, args ...any) {
	r.file.Dialect.Notes = append(r.file.Dialect.Notes, fmt.Sprintf(format, args...))
}

func (r *reader) remark(code, format string, args ...any) {
	r.file.Remarks = append(r.file.Remarks, Remark{Code: code, Text: fmt.Sprintf(format, args...)})
}

func shortOf(q record.Quantity) string {
	for short, have := range quantities {
		if have == q {
			return short
		}
	}
	return ""
}
