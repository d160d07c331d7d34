package table

import (
	"bytes"
	"regexp"
	"slices"
	"strings"
)

// scoredCells is how many cells of a row are looked at to tell whether it is
// the header.
const scoredCells = 500

// findHeader finds header, unit line and first row of data in the head of the
// file, and keeps what stands above them as talk.
func (r *reader) findHeader() error {
	rows := r.sample(r.delim, r.marks)
	for _, s := range rows {
		if len(s.cells) > maxColumns {
			return r.refused(s.line, "it has more columns than may be: at most %d", maxColumns)
		}
	}
	var plain []sampled // without comments and the delimiter declaration
	for _, s := range rows {
		if !s.comment && !(s.line == 1 && bytes.HasPrefix(s.row, []byte("sep="))) {
			plain = append(plain, s)
		}
	}
	usual := usualKinds(plain)
	first := firstData(plain, usual)
	at := bestHeader(plain[:min(len(plain), max(first+1, 60))], len(usual))
	switch {
	case at >= 0:
		first = at + 1
	case r.commentedHeader(rows, plain, first, len(usual)):
	case first > 0:
		at = first - 1
		if at > 0 && isUnitLine(plain[at].cells) {
			at--
		}
		first = at + 1
	}
	if at >= 0 {
		plain[at].cells = r.headerCells(plain[at], len(usual))
		r.setHeader(plain[at])
	}
	if r.headerLine > 0 && first < len(plain) && isUnitLine(plain[first].cells) {
		if r.delim != ' ' || len(plain[first].cells) == len(r.headings) { // blanks hide an empty cell
			r.unitCells = texts(plain[first].cells)
		}
		r.unitLine = plain[first].line
		first++
	}
	above := at
	if at < 0 {
		above = first
	}
	for i := 0; i < min(above, len(plain)); i++ {
		r.talk = append(r.talk, remarkLine{plain[i].line, pairText(texts(plain[i].cells))})
	}
	r.body = plain[min(first, len(plain)):]
	if len(r.body) == 0 {
		return r.refused(0, "it holds no rows of readings")
	}
	r.bodyLine, r.bodyStart = r.body[0].line, r.body[0].start
	r.beginBehindHeader()
	for _, s := range rows {
		if s.comment && s.line < r.bodyLine && s.line != r.headerLine {
			r.talk = append(r.talk, remarkLine{s.line, string(s.row[:min(len(s.row), maxTalk)])})
		}
	}
	slices.SortStableFunc(r.talk, func(a, b remarkLine) int { return a.line - b.line })
	return nil
}

// beginBehindHeader moves the begin of the data to the first row behind header
// and unit line. Rows that are no sample (a quote never closed, a row far too
// long) are rows of the file all the same, to be refused with their place.
func (r *reader) beginBehindHeader() {
	if r.headerLine == 0 {
		return
	}
	s := newSplitter(r.text, r.delim)
	for s.next() && s.at < r.bodyLine {
		if r.marks.is(s.row) || len(bytes.TrimSpace(s.row)) == 0 {
			continue
		}
		if s.at > max(r.headerLine, r.unitLine) {
			r.bodyLine, r.bodyStart = s.at, s.start
			return
		}
		if len(s.row) <= maxLine {
			s.split() // a quoted name may run over line ends
		}
	}
}

// headerCells gives the cells of a header in a file cut at blanks, where blanks
// stand inside the header names too: the row is cut at tabs and wider gaps, or a
// unit in brackets is joined to the name before it, when that makes as many
// cells as the rows have.
func (r *reader) headerCells(s sampled, width int) [][]byte {
	if r.delim != ' ' || len(s.cells) <= width {
		return s.cells
	}
	if wide := gaps.Split(string(bytes.TrimSpace(s.row)), -1); len(wide) == width {
		cells := make([][]byte, width)
		for i, c := range wide {
			cells[i] = []byte(c)
		}
		return cells
	}
	var joined [][]byte
	for _, c := range s.cells {
		if n := len(joined); n > 0 && bytes.IndexByte([]byte("([{"), c[0]) >= 0 {
			joined[n-1] = append(append(slices.Clone(joined[n-1]), ' '), c...)
			continue
		}
		joined = append(joined, c)
	}
	if len(joined) == width {
		return joined
	}
	return s.cells
}

var gaps = regexp.MustCompile(`\t[ \t]*| [ \t]+`)

func (r *reader) setHeader(s sampled) {
	r.headerLine, r.headerRow = s.line, s.row
	for _, c := range s.cells {
		r.headings = append(r.headings, readHeading(string(trim(c))))
	}
	for n := len(r.headings); n > 0 && r.headings[n-1].text == ""; n = len(r.headings) {
		r.headings = r.headings[:n-1] // left by delimiters at the end of the line
	}
}

// pairText writes a row above the table, key in the first cell and value in the
// next ones, as a comment would.
func pairText(cells []string) string {
	key, rest := cells[0], strings.TrimSpace(strings.Join(cells[1:], " "))
	if rest == "" || strings.ContainsAny(key, ":=") {
		return strings.TrimSpace(key + " " + rest)
	}
	return key + ": " + rest
}

func texts(cells [][]byte) []string {
	t := make([]string, len(cells))
	for i, c := range cells {
		t[i] = string(trim(c))
	}
	return t
}

// usualKinds tells for every column of the usual row whether it holds numbers,
// from the second half of the sample: the first may hold talk.
func usualKinds(rows []sampled) []kind {
	half := rows[len(rows)/2:]
	counts := map[int]int{}
	for _, s := range half {
		counts[len(s.cells)]++
	}
	kinds := make([]kind, commonest(counts))
	for j := range kinds {
		var n [4]int
		for _, s := range half {
			if j < len(s.cells) {
				n[kindOf(s.cells[j])]++
			}
		}
		switch {
		case n[text] > n[number] && n[text] > 0:
			kinds[j] = text
		case n[number] > 0 || n[state] > 0:
			kinds[j] = number
		}
	}
	return kinds
}

// firstData is the first row that looks like the usual one.
func firstData(rows []sampled, usual []kind) int {
	for i, s := range rows {
		if len(s.cells) < len(usual) || len(usual) == 0 {
			continue
		}
		ok, numbers := true, 0
		for j, k := range usual {
			got := kindOf(s.cells[j])
			if k == number && got == text {
				ok = false
				break
			}
			if k == number && got == number {
				numbers++
			}
		}
		if ok && numbers > 0 {
			return i
		}
	}
	return len(rows)
}

// bestHeader is the row that names most quantities over columns of numbers, -1
// when none names any.
func bestHeader(rows []sampled, width int) int {
	best, score := -1, 0
	units := -1 // a line of units is a header only when there is no other
	for i, s := range rows {
		if len(s.cells) < 2 && width > 1 || len(s.cells) == 0 {
			continue
		}
		switch n := headerScore(s, rows[i+1:]); {
		case n > 0 && isUnitLine(s.cells):
			if units < 0 {
				units = i
			}
		case n > score:
			best, score = i, n
		}
	}
	if best < 0 {
		return units
	}
	return best
}

func headerScore(s sampled, below []sampled) int {
	score := 0
	for j, c := range s.cells[:min(len(s.cells), scoredCells)] {
		if len(c) > 400 || kindOf(c) == number {
			continue
		}
		h := readHeading(string(trim(c)))
		switch {
		case h.role == "":
		case dimOf(h.role) == "" && h.role != roleDrain && h.role != roleTorT:
			if len(below) > 0 && len(below[0].cells) >= len(s.cells) {
				score++
			}
		case numbersBelow(j, below):
			score += 100
		}
	}
	if score < 100 {
		return 0 // talk like "Operator;Smith" above the table
	}
	return score
}

// numbersBelow reports whether the next rows hold numbers in that column.
func numbersBelow(j int, below []sampled) bool {
	seen := 0
	for i := 0; i < len(below) && seen < 3; i++ {
		if i == 0 && isUnitLine(below[0].cells) {
			continue
		}
		if j >= len(below[i].cells) {
			return false
		}
		switch kindOf(below[i].cells[j]) {
		case text:
			return false
		case number, state:
			return true
		}
		seen++
	}
	return false
}

// isUnitLine reports whether a row holds nothing but units.
func isUnitLine(cells [][]byte) bool {
	units := 0
	for _, c := range cells {
		t := strings.Trim(string(trim(c)), "()[]{}<> ")
		switch {
		case t == "" || t == "-" || t == "1":
		case len(t) > 20:
			return false
		default:
			if _, ok := readUnit(t); !ok {
				return false
			}
			units++
		}
	}
	return units > 0
}

// commentedHeader takes the last comment above the data for the header when it
// has as many cells and names quantities: # Vg(V) Id(A).
func (r *reader) commentedHeader(rows, plain []sampled, first, width int) bool {
	if first >= len(plain) || width < 2 {
		return false
	}
	for i := len(rows) - 1; i >= 0; i-- {
		s := rows[i]
		if !s.comment || s.line >= plain[first].line {
			continue
		}
		mark := s.row[:1]
		if s.row[0] == '/' {
			mark = s.row[:2]
		}
		split := newSplitter(bytes.TrimLeft(bytes.TrimPrefix(s.row, mark), " \t"), r.delim)
		if !split.next() {
			continue
		}
		split.split()
		head := sampled{line: s.line, row: split.row, cells: slices.Clone(split.cells)}
		head.cells = r.headerCells(head, width)
		head.row = s.row
		if len(head.cells) == width-1 && string(mark) == "#" { // "# ; Vgs" or, in blanks, a column headed #
			head.cells = append([][]byte{[]byte("#")}, head.cells...)
		} else if len(head.cells) == width && len(trim(head.cells[0])) == 0 {
			head.cells[0] = []byte("#")
		}
		if len(head.cells) == width && headerScore(head, plain[first:]) > 0 {
			r.setHeader(head)
			return true
		}
		if plain[first].line-s.line > 3 {
			break
		}
	}
	return false
}
