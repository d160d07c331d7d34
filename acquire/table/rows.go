package table

import (
	"bytes"
	"fmt"
	"strings"
)

// rows walks over the rows of data: it leaves out blank lines, comments and
// repeated headers, counts, and keeps the refusals.
type rows struct {
	splitter
	r       *reader
	onTalk  func(line int, text []byte) // a comment among the rows; may be nil
	onBreak func()                      // a header stands there again; may be nil
	shown   int                         // bytes told to Progress
}

func (r *reader) rowsOfData() *rows {
	return &rows{splitter: r.bodySplitter(), r: r}
}

// bodySplitter stands before the first row of data.
func (r *reader) bodySplitter() splitter {
	s := newSplitter(r.text, r.delim)
	s.pos, s.line = r.bodyStart, r.bodyLine
	return s
}

// nextRow moves to the next row of data and splits it.
func (w *rows) nextRow() bool {
	for w.splitter.next() {
		row := w.row
		if len(row) == 0 {
			continue
		}
		if c := row[0]; w.r.marks[c] && w.r.marks.is(row) {
			if w.onTalk != nil {
				w.onTalk(w.at, row)
			}
			continue
		} else if c <= ' ' && len(bytes.TrimSpace(row)) == 0 {
			continue
		}
		if len(row) > maxLine {
			w.r.file.Rows++
			w.refuse("the row is " + mebibytes(int64(len(row))) + " long")
			continue
		}
		w.split()
		if w.unclosed {
			w.r.file.Rows++
			w.refuse("a quote is opened and never closed")
			continue
		}
		if len(w.cells) > 1 && len(w.cells[0]) == 0 && w.blank() {
			continue
		}
		w.r.file.Rows++
		if w.r.opt.Progress != nil && w.pos-w.shown > 1<<20 {
			w.shown = w.pos
			size := w.r.file.Size // the text may be longer or shorter than the bytes it was decoded from
			w.r.opt.Progress(int64(float64(w.pos)/float64(len(w.text))*float64(size)), size)
		}
		return true
	}
	return false
}

// blank reports whether the row is nothing but delimiters.
func (w *rows) blank() bool {
	for _, c := range w.cells {
		if len(trim(c)) > 0 {
			return false
		}
	}
	return true
}

// refuse counts the row as refused; the first ones are kept.
func (w *rows) refuse(why string) {
	f := w.r.file
	f.Refused++
	if len(f.Refusals) < keptRows {
		row := w.row
		text := string(row[:min(len(row), 81)])
		if len(text) > 80 {
			text = strings.ToValidUTF8(text[:80], "")
		}
		f.Refusals = append(f.Refusals, Refusal{Line: w.at, Reason: why, Text: text})
	}
}

// noteSummary keeps the place of a refused row that sums up the rows above.
func (w *rows) noteSummary() {
	c := w.r.first(string(RoleDevice))
	if c == nil || c.index >= len(w.cells) || len(w.r.summaries) == maxSummaries {
		return
	}
	if name := string(trim(w.cells[c.index])); isSummaryWord(name) {
		w.r.summaries = append(w.r.summaries, remarkLine{w.at, name})
	}
}

// refuseUnlessHeader is refuse for a row that has text where a number should
// be: where files were joined, the header stands there again and is no refusal.
func (w *rows) refuseUnlessHeader(why string) {
	if w.isHeaderAgain() {
		w.r.file.Rows--
		if w.onBreak != nil {
			w.onBreak()
		}
		return
	}
	w.noteSummary()
	w.refuse(why)
}

// isHeaderAgain reports whether the row is the header or the unit line again.
func (w *rows) isHeaderAgain() bool {
	if w.r.headerLine == 0 {
		return false
	}
	if bytes.Equal(bytes.TrimSpace(w.row), bytes.TrimSpace(w.r.headerRow)) {
		return true
	}
	same := len(w.r.unitCells) > 0 && len(w.cells) == len(w.r.unitCells)
	for j := 0; same && j < len(w.cells); j++ {
		same = string(trim(w.cells[j])) == w.r.unitCells[j]
	}
	return same
}

// misfit says how the row has too few cells to hold all that is read, or more
// than the header names; "" when it fits.
func (w *rows) misfit(want int) string {
	n := len(w.cells)
	switch {
	case n < want:
		return fmt.Sprintf("the row has %d cells, want %d", n, want)
	case n <= len(w.r.cols):
		return ""
	}
	for n > len(w.r.cols) && len(trim(w.cells[n-1])) == 0 {
		n--
	}
	if n > len(w.r.cols) {
		return fmt.Sprintf("the row has %d cells, want %d", n, len(w.r.cols))
	}
	return ""
}
