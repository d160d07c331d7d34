package replay

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"gatesill/acquire/table"
	"gatesill/store/record"
)

// kinds of origin that the times of a log may have.
type originKind uint8

const (
	inUTC    originKind = iota // points in time
	onDay                      // on the wall, with a date
	inTheDay                   // on the wall, without a date
	fromZero                   // from a start of its own
)

// origin says what the times of a log count from.
func (l *Log) origin() originKind {
	switch {
	case l.Found.Form.absolute():
		return inUTC
	case l.Found.Form == Local:
		return onDay
	case l.Found.Form == TimeOfDay:
		return inTheDay
	}
	return fromZero
}

func (l *Log) shift(by float64) {
	for i := range l.Entries {
		l.Entries[i].At += by
	}
}

func (l *Log) from() float64 { return l.Entries[0].At }
func (l *Log) to() float64   { return l.Entries[len(l.Entries)-1].At }

// origins brings the logs to one clock as far as their times say: all to UTC, or
// all to the wall. It returns the kind of time that they are in, the logs that
// count from a start of their own apart.
type origins struct {
	opt     Options
	logs    []*Log // notes among them
	kinds   map[*Log]originKind
	common  originKind // of all but those from a start of their own
	remarks []string
}

func (o *origins) remark(format string, args ...any) {
	o.remarks = append(o.remarks, fmt.Sprintf(format, args...))
}

func (o *origins) settle() error {
	o.kinds = map[*Log]originKind{}
	for _, l := range o.logs {
		o.kinds[l] = l.origin()
		if err := o.start(l); err != nil {
			return err
		}
	}
	if err := o.zone(); err != nil {
		return err
	}
	return o.days()
}

// start gives a log that counts from zero the start that a flag says.
func (o *origins) start(l *Log) error {
	if l.start == "" || slices.Contains(Roles, l.start) {
		return nil
	}
	s, ok := readStamp(l.start)
	at, valid := s.seconds(dayFirst)
	if !ok || !valid || s.look != aMoment && s.look != aZoned || s.order == openOrder {
		return &table.Error{File: l.Path, Hint: "--log-times " + l.Role + "=2026-05-20T10:02:03",
			Err: fmt.Errorf("%w: --log-times %s=%s: neither elapsed, clock, a date with a time, nor the role of another log", table.ErrRefused, l.Role, l.start)}
	}
	if s.frac != "" {
		at += fraction(s.frac)
	}
	l.shift(at)
	o.kinds[l] = onDay
	if s.look == aZoned {
		o.kinds[l] = inUTC
	}
	return nil
}

func fraction(digits string) float64 {
	f := 0.0
	for i := range len(digits) {
		f += float64(digits[i]-'0') / math.Pow10(i+1)
	}
	return f
}

func (o *origins) having(kinds ...originKind) (list []*Log) {
	for _, l := range o.logs {
		if slices.Contains(kinds, o.kinds[l]) {
			list = append(list, l)
		}
	}
	return list
}

// zone brings times on the wall to UTC where other logs are in UTC: by the zone
// that a flag says or that another log writes, else it is asked.
func (o *origins) zone() error {
	utc, wall := o.having(inUTC), o.having(onDay, inTheDay)
	o.common = onDay
	if len(utc) > 0 {
		o.common = inUTC
	}
	if len(wall) == 0 || len(utc) == 0 && o.opt.Zone == "" {
		return nil
	}
	zone, from := 0, ""
	if o.opt.Zone != "" {
		z, ok := readZone(o.opt.Zone)
		if !ok {
			return fmt.Errorf("%w: --log-zone %q is no zone: +02:00 or UTC", table.ErrRefused, o.opt.Zone)
		}
		zone = z
		o.common = inUTC
	} else {
		open := false
		for _, l := range utc {
			if len(l.zones) == 0 {
				continue
			}
			switch z := l.zones[0]; { // a zone that changes on the way is that of its start
			case from == "":
				zone, from = z, l.Name
			case z != zone:
				open = true
			}
		}
		if from == "" || open {
			text := fmt.Sprintf("the times of %s have no zone, and %s is in UTC", names(wall), names(utc))
			q := table.Question{Text: text + "; which zone are they in (+02:00)", Flag: "--log-zone"}
			answer, err := o.ask(wall[0], q, text, "--log-zone +02:00, or what it was")
			if err != nil {
				return err
			}
			z, ok := readZone(strings.TrimSpace(answer))
			if !ok {
				return &table.Error{File: wall[0].Path, Hint: "--log-zone +02:00", Err: fmt.Errorf("%w: %q is no zone", table.ErrRefused, answer)}
			}
			zone, from = z, ""
		}
		if from != "" {
			o.remark("the times of %s have no zone and are taken in that of %s, %s", names(wall), from, zoneText(zone))
		}
	}
	for _, l := range wall {
		l.shift(-float64(zone))
		if o.kinds[l] == onDay { // the others are still without a day
			o.kinds[l] = inUTC
		}
	}
	return nil
}

func (o *origins) ask(l *Log, q table.Question, text, hint string) (string, error) {
	if o.opt.Table.Ask != nil {
		answer, err := o.opt.Table.Ask(q)
		if err == nil {
			return answer, nil
		}
		text += fmt.Sprintf(" (%v)", err)
	}
	return "", &table.Error{File: l.Path, Hint: hint, Err: fmt.Errorf("%w: %s", table.ErrAmbiguous, text)}
}

func zoneText(z int) string { return time.Unix(0, 0).In(time.FixedZone("", z)).Format("-07:00") }

func names(list []*Log) string {
	var n []string
	for _, l := range list {
		n = append(n, l.Name)
	}
	return strings.Join(n, ", ")
}

// days gives times of the day their day: that of a flag, or the one on which they
// overlap with a log that has dates; without either all are set on one day, and
// no date is known.
func (o *origins) days() error {
	dayless := o.having(inTheDay)
	if len(dayless) == 0 {
		return nil
	}
	zone := 0.0
	if z, ok := readZone(o.opt.Zone); ok {
		zone = float64(z)
	}
	dated := o.having(inUTC, onDay)
	dated = slices.DeleteFunc(dated, func(l *Log) bool { return l.Role == notesRole && len(dated) > 1 })
	var ref float64
	switch {
	case o.opt.Date != "":
		d, err := time.Parse(time.DateOnly, o.opt.Date)
		if err != nil {
			return fmt.Errorf("%w: --log-date %q is no date: YYYY-MM-DD", table.ErrRefused, o.opt.Date)
		}
		first := dayless[0]
		first.shift(float64(d.Unix()) - math.Floor((first.from()+zone)/day)*day)
		o.kinds[first] = o.common
		ref = first.from()
		if len(dated) > 0 && math.Abs(dated[0].from()-ref) > day {
			return &table.Error{File: first.Path, Hint: "leave --log-date out", Err: fmt.Errorf("%w: --log-date %s is another day than that of %s", table.ErrRefused, o.opt.Date, dated[0].Name)}
		}
	case len(dated) > 0:
		ref = dated[0].from()
	default:
		ref = dayless[0].from()
		o.common = inTheDay
	}
	for _, l := range dayless {
		n := math.Round((ref - l.from()) / day)
		l.shift(n * day)
		if len(dated) > 0 && o.opt.Date == "" {
			o.remark("%s has times of the day only: set on the day on which it overlaps with %s", l.Name, dated[0].Name)
		}
		o.kinds[l] = o.common
	}
	return nil
}

// clocksForward takes out the steps of an hour by which clocks on the wall were
// put forward: where another log has readings in that hour.
func (o *origins) clocksForward() {
	for _, l := range o.logs {
		for _, j := range l.jumps {
			before, behind := l.Entries[j.at-1].At, l.Entries[j.at].At
			if behind-before < hour/2 { // an earlier jump moved both
				continue
			}
			if w := o.witness(l, before, behind); w != nil {
				for i := j.at; i < len(l.Entries); i++ {
					l.Entries[i].At -= hour
				}
				l.note("the clock was put forward by an hour before line %d (daylight saving time): %s has readings in that hour", j.line, w.Name)
			}
		}
	}
}

// witness is another log with readings between two times of l, or one from a
// start of its own that ran as long as l did without the hour.
func (o *origins) witness(l *Log, before, behind float64) *Log {
	for _, w := range o.logs {
		if w == l || w.Role == notesRole {
			continue
		}
		gap := 0.0
		for i := range w.Entries {
			at := w.Entries[i].At
			if o.kinds[w] != fromZero && at > before+10 && at < behind-10 {
				return w
			}
			if i > 0 {
				gap = max(gap, at-w.Entries[i-1].At)
			}
		}
		own := l.to() - l.from() - hour
		if o.kinds[w] == fromZero && gap < 3000 && math.Abs(w.to()-w.from()-own) < max(60, own/5) {
			return w
		}
	}
	return nil
}

// stamp gives a time on the common clock as it is kept: a stamp in UTC, or a bare
// date where no zone is known, "" where no date is.
func (o *origins) stamp(at float64) string {
	if math.Abs(at) > 1e11 {
		return ""
	}
	t := time.Unix(0, 0).UTC().Add(time.Duration(at * float64(time.Second)))
	if math.Abs(at) > 9e9 {
		return ""
	}
	switch o.common {
	case inUTC:
		return record.Stamp(t)
	case onDay:
		return t.Format(time.DateOnly)
	}
	return ""
}

// span writes when a log began and ended.
func (o *origins) span(l *Log) string {
	if o.kinds[l] == fromZero {
		return fmt.Sprintf("%s to %s", seconds(l.from()), seconds(l.to()))
	}
	text := func(at float64) string {
		t := time.Unix(int64(math.Floor(at)), 0).UTC()
		if o.common == inTheDay {
			return t.Format("15:04:05")
		}
		return t.Format("2006-01-02 15:04:05")
	}
	zone := ""
	if o.common == inUTC {
		zone = " UTC"
	}
	return text(l.from()) + " to " + text(l.to()) + zone
}
