package table

import "bytes"

const (
	maxLine   = 1 << 20  // bytes of one row; a longer one is refused
	maxQuoted = 64 << 10 // bytes of one quoted cell; a longer one is a quote that nobody closed
)

// splitter cuts text into rows and rows into cells. It is the only tokenizer of
// the package: it looks for line ends and quotes with the fast byte search, and
// walks a row byte by byte only when it is split.
type splitter struct {
	text  []byte
	pos   int  // of the next row
	line  int  // number of the line at pos, from 1
	eol   byte // '\n', or '\r' in a file without any '\n'
	delim byte // ' ' means runs of blanks and tabs; 0 means one column

	at       int      // line number of the row
	start    int      // where the row starts
	end      int      // its first line end
	row      []byte   // the row, without its line end
	cells    [][]byte // of the row, after split; valid until the next one
	oneLine  bool     // quoted cells may not run over line ends: one was never closed
	unclosed bool     // the row has a quote that is never closed
}

func newSplitter(text []byte, delim byte) splitter {
	eol := byte('\n')
	if bytes.IndexByte(text, '\n') < 0 {
		eol = '\r'
	}
	return splitter{text: text, line: 1, eol: eol, delim: delim}
}

// next moves to the next line and reports whether there was one.
func (s *splitter) next() bool {
	if s.pos >= len(s.text) {
		return false
	}
	rest := s.text[s.pos:]
	n := bytes.IndexByte(rest, s.eol)
	if n < 0 {
		n = len(rest)
	}
	s.at, s.start, s.end = s.line, s.pos, s.pos+n
	s.row = s.trimCR(rest[:n])
	s.pos += n + 1
	s.line++
	return true
}

func (s *splitter) trimCR(row []byte) []byte {
	if n := len(row); n > 0 && row[n-1] == '\r' {
		return row[:n-1]
	}
	return row
}

// split cuts the row into cells, quotes taken off; it stops at one more than
// any file may have. A quoted cell that runs over line ends takes the lines that
// follow into the row.
func (s *splitter) split() {
	s.unclosed = false
	if bytes.IndexByte(s.row, '"') >= 0 {
		s.splitQuoted()
		return
	}
	cells, row, lo := s.cells[:0], s.row, 0
	switch delim := s.delim; delim {
	case 0:
		cells = append(cells, row)
	case ' ':
		for i, c := range row {
			if c == ' ' || c == '\t' {
				if i > lo && len(cells) <= maxColumns {
					cells = append(cells, row[lo:i])
				}
				lo = i + 1
			}
		}
		if lo < len(row) {
			cells = append(cells, row[lo:])
		}
	default:
		for i, c := range row {
			if c == delim {
				cells = append(cells, row[lo:i])
				lo = i + 1
				if len(cells) > maxColumns {
					break
				}
			}
		}
		cells = append(cells, row[lo:])
	}
	s.cells = cells
}

// splitQuoted is split for a row with quotes (RFC 4180: doubled quotes stand
// for one, delimiters and line ends inside are part of the cell). A quote that
// does not open a cell is an ordinary character.
func (s *splitter) splitQuoted() {
	s.cells = s.cells[:0]
	p, end := s.start, s.end
	for {
		for p < end && (s.text[p] == ' ' || s.delim == ' ' && s.text[p] == '\t') {
			p++
		}
		if s.delim == ' ' && p >= end {
			break
		}
		q := p
		if p < end && s.text[p] == '"' {
			cell, behind, ok := s.quoted(p + 1)
			if !ok {
				s.unclosed, s.oneLine = true, true
				break
			}
			for ; end < behind; end = s.lineEnd(end + 1) {
				s.line++
			}
			q = s.cellEnd(behind, end)
			if tail := bytes.Trim(s.text[behind:q], " \t\r"); len(tail) > 0 {
				cell = append(append([]byte{}, cell...), tail...)
			}
			s.cells = append(s.cells, cell)
		} else {
			q = s.cellEnd(p, end)
			s.cells = append(s.cells, s.trimCR(s.text[p:q]))
		}
		p = q
		if p >= end || len(s.cells) > maxColumns {
			break
		}
		p++ // the delimiter
	}
	s.row = s.trimCR(s.text[s.start:end])
	s.pos = end + 1
}

// cellEnd is the place of the first delimiter in text[p:end], else end.
func (s *splitter) cellEnd(p, end int) int {
	for p < end {
		c := s.text[p]
		if s.delim != 0 && c == s.delim || s.delim == ' ' && c == '\t' {
			break
		}
		p++
	}
	return p
}

// lineEnd is the place of the line end at or behind p.
func (s *splitter) lineEnd(p int) int {
	if p < len(s.text) {
		if n := bytes.IndexByte(s.text[p:], s.eol); n >= 0 {
			return p + n
		}
	}
	return len(s.text)
}

// quoted reads a cell from behind its opening quote and returns it with the
// place behind the closing one; false when the quote is never closed.
func (s *splitter) quoted(p int) ([]byte, int, bool) {
	limit := min(len(s.text), p+maxQuoted)
	if s.oneLine {
		limit = min(limit, s.lineEnd(p))
	}
	var head []byte // what stands before a doubled quote
	for from := p; p <= limit; {
		n := bytes.IndexByte(s.text[p:limit], '"')
		if n < 0 {
			break
		}
		p += n + 1
		if p < len(s.text) && s.text[p] == '"' {
			head = append(head, s.text[from:p]...)
			p++
			from = p
			continue
		}
		if head == nil {
			return s.text[from : p-1], p, true
		}
		return append(head, s.text[from:p-1]...), p, true
	}
	return nil, 0, false
}
