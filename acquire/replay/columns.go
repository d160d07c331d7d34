package replay

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"gatesill/acquire/table"
)

const sampleRows = 300

// shape is what one cell looks like.
type shape uint8

const (
	shapeText shape = iota
	shapeTime
	shapeNumber
	shapeState
	shapeUnit
	shapeEmpty
)

func shapeOf(c []byte) shape {
	if len(c) == 0 {
		return shapeEmpty
	}
	if _, ok := readStamp(string(c)); ok {
		return shapeTime
	}
	bare, _ := cutCoupling(c)
	switch {
	case table.LooksNumber(bare):
		return shapeNumber
	case table.LooksState(c):
		return shapeState
	}
	if _, _, ok := coupledUnit(string(c)); ok {
		return shapeUnit
	}
	return shapeText
}

// understood says whether a row may be one of readings, and which share of its
// cells is understood.
func understood(cells [][]byte) (share float64) {
	var n [6]int
	for _, c := range cells {
		n[shapeOf(c)]++
	}
	readings := n[shapeNumber] + n[shapeState]
	if len(cells) == 0 || !(n[shapeTime] > 0 && readings > 0 || readings > 1 && n[shapeNumber] > 0) {
		return 0
	}
	return 1 - float64(n[shapeText])/float64(len(cells))
}

// layout finds delimiter, header and columns from the head of the file.
func (rd *logReader) layout() error {
	candidates, err := rd.text.Delimiters()
	if err != nil {
		return err
	}
	best := 0.0
	for _, d := range candidates {
		sum, n := 0.0, 0
		for row := range rd.text.Rows(d) {
			if row.Comment {
				continue
			}
			sum += understood(row.Cells)
			if n++; n == sampleRows {
				break
			}
		}
		if n > 0 && sum/float64(n) > best+0.02 {
			best, rd.delim = sum/float64(n), d
		}
	}
	if best == 0 {
		return rd.text.Refuse(0, "a log has a column of times and a column of readings, or lines TIME VALUE UNIT", "no row has a time and a reading")
	}
	rd.log.Found.Delimiter = table.DelimiterName(rd.delim)
	rd.head()
	if err := rd.findTime(); err != nil {
		return err
	}
	return rd.findValue()
}

// head takes the sample and finds the header above it.
func (rd *logReader) head() {
	var above []sampled
	var all []sampled
	comment := sampled{}
	counts := map[int]int{}
	for row := range rd.text.Rows(rd.delim) {
		s := sampled{line: row.Line, text: string(row.Text)}
		if row.Comment {
			if len(all) == 0 {
				comment = s
			}
			continue
		}
		for _, c := range row.Cells {
			s.cells = append(s.cells, string(c))
		}
		if understood(row.Cells) == 0 {
			if len(all) == 0 {
				above = append(above, s)
			}
			continue
		}
		all = append(all, s)
		counts[len(s.cells)]++
		if len(all) == sampleRows {
			break
		}
	}
	for n, c := range counts {
		if c > counts[rd.width] || c == counts[rd.width] && n > rd.width {
			rd.width = n
		}
	}
	for _, s := range all {
		if len(s.cells) == rd.width {
			rd.sample = append(rd.sample, s)
		}
	}
	if n := len(above); n > 0 && isUnits(above[n-1].cells) {
		rd.unitLine = above[n-1].cells
		above = above[:n-1]
	}
	if n := len(above); n > 0 {
		if cells := rd.fitHeader(above[n-1].cells, above[n-1].text); cells != nil {
			rd.header, rd.headRow, rd.log.Found.Header = cells, above[n-1].text, above[n-1].line
		}
	}
	if rd.header == nil && comment.line > 0 {
		text := strings.TrimLeft(comment.text, "#%/!'; \t")
		var cells []string
		if rd.delim == ' ' {
			cells = strings.Fields(text)
		} else {
			cells = strings.Split(text, string(rune(rd.delim)))
		}
		if cells = rd.fitHeader(cells, text); cells != nil && namesSomething(cells) {
			rd.header, rd.log.Found.Header = cells, comment.line
		}
	}
}

var gaps = regexp.MustCompile(`\t[ \t]*| [ \t]+`)

// fitHeader gives the header cut into as many cells as the rows have, nil when
// that cannot be: with blanks for delimiters, units in brackets stand apart.
func (rd *logReader) fitHeader(cells []string, text string) []string {
	for len(cells) > rd.width && strings.TrimSpace(cells[len(cells)-1]) == "" {
		cells = cells[:len(cells)-1]
	}
	if len(cells) != rd.width && rd.delim == ' ' {
		if wide := gaps.Split(strings.TrimSpace(text), -1); len(wide) == rd.width {
			return wide
		}
		var joined []string
		for _, c := range cells {
			if n := len(joined); n > 0 && strings.ContainsAny(c[:1], "([{") {
				joined[n-1] += " " + c
			} else {
				joined = append(joined, c)
			}
		}
		cells = joined
	}
	if len(cells) != rd.width {
		return nil
	}
	for i := range cells {
		cells[i] = strings.Trim(strings.TrimSpace(cells[i]), `"`)
	}
	return cells
}

func namesSomething(cells []string) bool {
	return slices.ContainsFunc(cells, func(c string) bool {
		role, u := table.ReadHeading(c)
		return role != "" || u.Dim != ""
	})
}

func isUnits(cells []string) bool {
	units := 0
	for _, c := range cells {
		t := strings.Trim(c, "()[]{} ")
		if t == "" || t == "-" {
			continue
		}
		if _, ok := table.ReadUnit(t); !ok {
			return false
		}
		units++
	}
	return units > 0
}

func (rd *logReader) isUnitLine(cells [][]byte) bool {
	if rd.unitLine == nil || len(cells) != len(rd.unitLine) {
		return false
	}
	for i, c := range cells {
		if string(c) != rd.unitLine[i] {
			return false
		}
	}
	return true
}

// share is the part of the sample whose cell in that column is of a shape, empty
// cells aside.
func (rd *logReader) share(col int, ok func(c string, s shape) bool) float64 {
	hits, n := 0, 0
	for _, s := range rd.sample {
		sh := shapeOf([]byte(s.cells[col]))
		if sh == shapeEmpty {
			continue
		}
		n++
		if ok(s.cells[col], sh) {
			hits++
		}
	}
	if n == 0 {
		return 0
	}
	return float64(hits) / float64(n)
}

func (rd *logReader) numbers(col int) bool {
	return rd.share(col, func(_ string, s shape) bool { return s == shapeNumber || s == shapeState }) >= 0.8 &&
		rd.share(col, func(_ string, s shape) bool { return s == shapeNumber }) > 0
}

func (rd *logReader) looks(col int, l look) bool {
	return rd.share(col, func(c string, _ shape) bool {
		s, ok := readStamp(c)
		return ok && s.look == l
	}) >= 0.8
}

// heading gives role and unit that the header of a column names.
func (rd *logReader) heading(col int) (role string, u table.Unit) {
	if col < len(rd.header) {
		role, u = table.ReadHeading(rd.header[col])
	}
	if u.Dim == "" && col < len(rd.unitLine) {
		u, _ = table.ReadUnit(strings.Trim(rd.unitLine[col], "()[]{} "))
	}
	return role, u
}

// title names a column in messages.
func (rd *logReader) title(col int) string {
	if col < len(rd.header) && rd.header[col] != "" {
		return fmt.Sprintf("%d %q", col+1, clip([]byte(rd.header[col])))
	}
	return strconv.Itoa(col + 1)
}

// named finds the column that --map names for one of the keys, -1 for none.
func (rd *logReader) named(keys ...string) (int, error) {
	for _, k := range keys {
		want, ok := rd.opt.Table.Map[k]
		if !ok {
			continue
		}
		for i, h := range rd.header {
			if strings.EqualFold(h, want) {
				return i, nil
			}
		}
		if n, err := strconv.Atoi(want); err == nil && n >= 1 && n <= rd.width {
			return n - 1, nil
		}
		return -1, rd.text.Refuse(rd.log.Found.Header, "", "--map %s=%s: there is no such column, the log has %d", k, want, rd.width)
	}
	return -1, nil
}

// findTime finds the column of times.
func (rd *logReader) findTime() error {
	rd.clockCol = -1
	defer func() { rd.log.Found.TimeColumn = rd.title(rd.timeCol) }()
	given, err := rd.named("t")
	if err != nil {
		return err
	}
	if given >= 0 {
		rd.timeCol = given
		return nil
	}
	first := func(l look) int {
		for c := range rd.width {
			if rd.looks(c, l) {
				return c
			}
		}
		return -1
	}
	date, clock := first(aDate), first(aClock)
	for _, l := range []look{aZoned, aMoment} {
		if rd.timeCol = first(l); rd.timeCol >= 0 {
			return nil
		}
	}
	switch {
	case date >= 0 && clock >= 0:
		rd.timeCol, rd.clockCol = date, clock
		return nil
	case clock >= 0:
		rd.timeCol = clock
		return nil
	}
	rising := -1
	for c := range rd.width {
		if !rd.numbers(c) {
			continue
		}
		role, u := rd.heading(c)
		if role == "t" || role == "" && u.Dim == "s" || c < len(rd.header) && strings.EqualFold(rd.header[c], "t") {
			rd.timeCol = c
			return nil
		}
		if rising < 0 && rd.rises(c) {
			rising = c
		}
	}
	rd.timeCol = max(rising, 0)
	if rising < 0 || rd.isIndex(rising) {
		return rd.text.Refuse(rd.sample[0].line, "--map t=COLUMN names it by header or number", "no column is certain to hold times")
	}
	return nil
}

// values reads a column of the sample with whatever decimal mark fits, NaN where
// there is no number.
func (rd *logReader) values(col int) []float64 {
	out := make([]float64, len(rd.sample))
	for i, s := range rd.sample {
		mark := byte('.')
		if strings.IndexByte(s.cells[col], ',') >= 0 && strings.IndexByte(s.cells[col], '.') < 0 {
			mark = ','
		}
		bare, _ := cutCoupling([]byte(s.cells[col]))
		n, why := table.ReadNumber(bare, mark, table.Unit{})
		if out[i] = n.Value; why != "" || n.State != "" {
			out[i] = math.NaN()
		}
	}
	return out
}

// rises reports whether the numbers of a column never go down, and not all are
// the same.
func (rd *logReader) rises(col int) bool {
	v := rd.values(col)
	for i := 1; i < len(v); i++ {
		if !(v[i] >= v[i-1]) {
			return false
		}
	}
	return len(v) > 1 && v[len(v)-1] > v[0]
}

// isIndex reports whether a column counts its rows.
func (rd *logReader) isIndex(col int) bool {
	v := rd.values(col)
	for i := 1; i < len(v); i++ {
		if v[i] != v[i-1]+1 {
			return false
		}
	}
	return len(v) > 0 && math.Abs(v[0]) <= 1
}

// findValue finds the column of readings and, where there is one, that of their
// units.
func (rd *logReader) findValue() error {
	q := roleQuantity[rd.log.Role]
	rd.unitCol = -1
	col, err := rd.named(q.short, q.short+"s", rd.log.Role)
	if err != nil {
		return err
	}
	var free, named, fitting []int
	for c := range rd.width {
		if c == rd.timeCol || c == rd.clockCol || !rd.numbers(c) {
			continue
		}
		role, u := rd.heading(c)
		if role == "t" || role == "device" {
			continue
		}
		free = append(free, c)
		if role == q.short {
			named = append(named, c)
		}
		if u.Dim == q.dim {
			fitting = append(fitting, c)
		}
	}
	if len(free) > 1 {
		free = slices.DeleteFunc(free, rd.isIndex)
	}
	switch {
	case col >= 0:
	case len(named) == 1:
		col = named[0]
	case len(fitting) == 1:
		col = fitting[0]
	case len(free) == 1:
		col = free[0]
	case len(free) == 0:
		return rd.text.Refuse(rd.sample[0].line, "--map "+q.short+"=COLUMN names it by header or number", "no column holds the readings of the %s meter", rd.log.Role)
	default:
		question := table.Question{Text: fmt.Sprintf("%d columns of %s may hold the readings of the %s meter", len(free), rd.text.Name, rd.log.Role), Flag: "--map " + q.short + "="}
		var flags []string
		for _, c := range free {
			question.Choices = append(question.Choices, strconv.Itoa(c+1))
			flags = append(flags, "--map "+q.short+"="+strconv.Itoa(c+1))
		}
		answer, err := rd.text.Ask(question, max(rd.log.Found.Header, 1), strings.Join(flags[:min(3, len(flags))], " or "))
		if err != nil {
			return err
		}
		n, _ := strconv.Atoi(answer)
		col = n - 1
	}
	rd.valueCol = col
	rd.log.Found.Column = rd.title(col)
	for _, c := range append([]int{col + 1}, slices.Collect(rangeOf(rd.width))...) {
		if c < rd.width && c != col && c != rd.timeCol && rd.share(c, func(_ string, s shape) bool { return s == shapeUnit }) >= 0.8 {
			rd.unitCol = c
			break
		}
	}
	return nil
}

func rangeOf(n int) func(func(int) bool) {
	return func(yield func(int) bool) {
		for i := range n {
			if !yield(i) {
				return
			}
		}
	}
}
