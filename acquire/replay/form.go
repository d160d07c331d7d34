package replay

import (
	"bytes"
	"fmt"
	"regexp"
	"slices"
	"strings"

	"gatesill/acquire/table"
)

var (
	elapsedWords = regexp.MustCompile(`(?i)elapsed|relativ|since|duration|runtime|laufzeit|dauer|ecoul|transcurrid|trascorso`)
	clockWords   = regexp.MustCompile(`(?i)clock|time of day|uhrzeit|heure|hora\b|\bora\b|local`)
)

// settleForm decides how the times of the file are written, once for the file.
func (rd *logReader) settleForm() error {
	role := rd.log.Role
	counts := map[look]int{}
	for _, s := range rd.sample {
		if st, ok := readStamp(s.cells[rd.timeCol]); ok {
			if rd.clockCol >= 0 {
				st.look = aMoment
			}
			counts[st.look]++
		} else if table.LooksNumber([]byte(s.cells[rd.timeCol])) {
			counts[aNumeral]++
		}
	}
	most := noTime
	for _, l := range []look{aZoned, aMoment, aClock, aNumeral} {
		if counts[l] > counts[most] {
			most = l
		}
	}
	if err := rd.settleDecimal(most == aNumeral); err != nil {
		return err
	}
	f := &rd.log.Found.Form
	switch most {
	case aZoned:
		*f = Zoned
	case aMoment:
		*f = Local
	case aClock:
		if err := rd.settleClock(); err != nil {
			return err
		}
	case aNumeral:
		_, u := rd.heading(rd.timeCol)
		v := rd.values(rd.timeCol)
		*f = unixForm(v[len(v)/2])
		if *f == Elapsed && u.Dim != "" {
			if u.Dim == "min" {
				return rd.text.Refuse(rd.log.Found.Header, "give them in seconds", "the times are in %s, which is not read", u.Text)
			}
			if u.Dim == "s" {
				rd.timeScale = u
			}
		}
	default:
		return rd.text.Refuse(rd.sample[0].line, "--map t=COLUMN names the column of times", "column %s holds no times", rd.title(rd.timeCol))
	}
	if err := rd.settleOrder(); err != nil {
		return err
	}
	switch given := rd.opt.Times[role]; {
	case given == "" || given == "elapsed" || given == "clock":
		if given == "elapsed" && !f.elapsed() || given == "clock" && f.elapsed() {
			return rd.text.Refuse(0, "", "its times are %s, not as --log-times %s=%s says", *f, role, given)
		}
	case f.elapsed():
		rd.log.start = given
	default:
		return rd.text.Refuse(0, "", "--log-times %s=%s: its times are %s and have their own origin", role, given, *f)
	}
	return nil
}

// settleClock tells the time of day from h:m:s that count from a start: by what
// the header or a flag says, by hours beyond the day, else it is asked where the
// first one is near zero.
func (rd *logReader) settleClock() error {
	f := &rd.log.Found.Form
	head := ""
	if rd.timeCol < len(rd.header) {
		head = rd.header[rd.timeCol]
	}
	var first stamp
	beyond, half, short := false, false, 0
	for i, s := range rd.sample {
		st, ok := readStamp(s.cells[rd.timeCol])
		if !ok {
			continue
		}
		if i == 0 {
			first = st
		}
		beyond, half = beyond || st.hour > 23, half || st.ampm
		if st.parts == 1 {
			short++
		}
	}
	start, _ := first.seconds(rd.order)
	given := rd.opt.Times[rd.log.Role]
	switch {
	case half:
		*f = TimeOfDay
	case given == "clock":
		*f = TimeOfDay
	case given != "", beyond, short > 0, elapsedWords.MatchString(head):
		*f = ElapsedHMS
		rd.minutes = first.parts == 2
	case clockWords.MatchString(head) || start >= 60:
		*f = TimeOfDay
	default:
		role := rd.log.Role
		answer, err := rd.text.Ask(table.Question{
			Text:    fmt.Sprintf("times like %s may be the time of day, or count from the start of the log", clip([]byte(rd.sample[0].cells[rd.timeCol]))),
			Choices: []string{"clock", "elapsed"}, Flag: "--log-times " + role + "=",
		}, rd.sample[0].line, "--log-times "+role+"=clock or --log-times "+role+"=elapsed")
		if err != nil {
			return err
		}
		*f = TimeOfDay
		if answer == "elapsed" {
			*f = ElapsedHMS
			rd.minutes = first.parts == 2
		}
	}
	return nil
}

// settleOrder tells day first from month first, from all dates of the file.
func (rd *logReader) settleOrder() error {
	open, dayFirstSeen, monthFirstSeen := 0, 0, 0
	line := 0
	for row := range rd.text.Rows(rd.delim) {
		if row.Comment {
			continue
		}
		s, ok := readStamp(string(cell(row.Cells, rd.timeCol)))
		if !ok || s.order != openOrder || s.look == aClock {
			continue
		}
		if open++; line == 0 {
			line = row.Line
		}
		if s.date[2] > 12 {
			dayFirstSeen = row.Line
		} else if s.date[1] > 12 {
			monthFirstSeen = row.Line
		}
	}
	switch {
	case open == 0:
	case dayFirstSeen > 0 && monthFirstSeen > 0:
		return rd.text.Refuse(max(dayFirstSeen, monthFirstSeen), "write the dates as YYYY-MM-DD", "some dates have the day first, others the month")
	case dayFirstSeen > 0:
		rd.order = dayFirst
	case monthFirstSeen > 0:
		rd.order = openOrder
	default:
		e := rd.text.Refuse(line, "write the dates as YYYY-MM-DD", "the dates may have the day or the month first")
		e.Err = fmt.Errorf("%w: the dates may have the day or the month first", table.ErrAmbiguous)
		return e
	}
	return nil
}

// settleUnit finds the unit of the readings: --units, the header, a column of
// units, the cells.
func (rd *logReader) settleUnit() error {
	role := rd.log.Role
	q := roleQuantity[role]
	found := &rd.log.Found
	for _, k := range []string{q.short, q.short + "s"} {
		if given, ok := rd.opt.Table.Units[k]; ok {
			u, ok := table.ReadUnit(given)
			if !ok || u.Dim != q.dim {
				return rd.text.Refuse(0, "", "--units %s=%s is no unit of the %s meter", k, given, role)
			}
			rd.unit, rd.unitCol, found.Unit = u, -1, u.Text
			return nil
		}
	}
	inCells := map[string]int{}
	for _, s := range rd.sample {
		text := s.cells[rd.valueCol]
		if rd.unitCol >= 0 {
			if u, _, ok := coupledUnit(s.cells[rd.unitCol]); ok {
				inCells[u.Dim]++
				continue
			}
		}
		bare, _ := cutCoupling([]byte(text))
		if n, why := table.ReadNumber(bare, rd.mark, table.Unit{Dim: q.dim}); why == "" && n.Unit.Dim != "" {
			inCells[n.Unit.Dim]++
		}
	}
	other := ""
	for dim, n := range inCells {
		if dim != q.dim && n > inCells[q.dim] {
			other = dim
		}
	}
	_, u := rd.heading(rd.valueCol)
	if other == "" && len(inCells) == 0 && u.Dim != "" && u.Dim != q.dim {
		other = u.Text
	}
	switch {
	case other != "":
		return rd.text.Refuse(rd.sample[0].line, "is it the log of another meter? --meter-logs "+otherRole(role, other)+"="+rd.text.Name,
			"given as the log of the %s meter, but it reads %s", role, other)
	case u.Dim == q.dim:
		rd.unit, found.Unit = u, u.Text
		return nil
	case inCells[q.dim] > 0:
		return nil
	}
	if dim := q.dim; dim == "degC" {
		rd.unit = table.Unit{Text: "°C", Dim: dim}
		rd.log.note("column %s has no unit and is taken in °C", rd.title(rd.valueCol))
		return nil
	}
	choices := []string{q.dim, "m" + q.dim, "u" + q.dim}
	answer, err := rd.text.Ask(table.Question{Text: fmt.Sprintf("no unit for column %s, the readings of the %s meter", rd.title(rd.valueCol), role), Choices: choices, Flag: "--units " + q.short + "="},
		max(found.Header, 1), fmt.Sprintf("--units %s=%s or --units %s=m%s", q.short, q.dim, q.short, q.dim))
	if err != nil {
		return err
	}
	if !slices.Contains(choices, answer) {
		return rd.text.Refuse(0, "", "unit %q is not known", answer)
	}
	rd.unit, _ = table.ReadUnit(answer)
	found.Unit = rd.unit.Text
	return nil
}

// otherRole names a role that reads the unit.
func otherRole(role, unit string) string {
	switch {
	case strings.HasSuffix(unit, "A"):
		return "current"
	case role == "gate":
		return "load"
	}
	return "gate"
}

// settleDecimal settles the decimal mark from the readings and numeric times. A
// comma before the fraction of the seconds settles what readings like 3,012 leave
// open.
func (rd *logReader) settleDecimal(times bool) error {
	var err error
	points, commas := false, false
	for _, s := range rd.sample {
		points = points || strings.Contains(s.cells[rd.valueCol], ".")
		at := max(rd.clockCol, rd.timeCol)
		commas = commas || strings.Contains(s.cells[at], ":") && strings.Contains(s.cells[at], ",")
	}
	rd.mark, err = rd.text.Decimal(rd.delim, func(yield func([]byte) bool) {
		if commas && !points && !yield([]byte("0,5")) {
			return
		}
		for row := range rd.text.Rows(rd.delim) {
			if row.Comment || row.Line <= rd.log.Found.Header {
				continue
			}
			bare, _ := cutCoupling(cell(row.Cells, rd.valueCol))
			if !yield(bare) || times && !yield(bytes.TrimSpace(cell(row.Cells, rd.timeCol))) {
				return
			}
		}
	})
	rd.log.Found.Decimal = map[byte]string{'.': "point", ',': "comma"}[rd.mark]
	return err
}
