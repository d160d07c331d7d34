package replay

import (
	"math"
	"strconv"
	"strings"
	"time"

	"gatesill/acquire/table"
)

// what a text looks like as a time.
type look uint8

const (
	noTime   look = iota
	aDate         // a date without a time of day
	aClock        // h:m:s, of the day or elapsed
	aMoment       // date and time
	aZoned        // date and time with zone
	aNumeral      // a number: Unix or elapsed
)

// stamp is one time as it was written.
type stamp struct {
	look  look
	date  [3]int // year, month, day; or as written where the order is open
	order dateOrder
	hour  int
	sec   float64 // of minutes and whole seconds
	parts int     // of the clock: 2 or 3
	frac  string  // digits behind the second
	ampm  bool
	zone  int // s east of UTC
	utc   bool
}

// dateOrder is which part of a date is which.
type dateOrder uint8

const (
	yearFirst dateOrder = iota
	dayFirst
	openOrder // day or month first: the file as a whole tells
)

// readStamp reads a text as a time that is no bare number.
func readStamp(text string) (s stamp, ok bool) {
	t := strings.TrimSpace(text)
	if len(t) < 3 || len(t) > 48 || t[0]-'0' > 9 {
		return s, false
	}
	if strings.IndexByte(t, ':') < 0 {
		s.look = aDate
		return s, s.readDate(t)
	}
	date, clock := "", t
	for i := 1; i < len(t); i++ {
		if c := t[i]; c == 'T' || c == 't' || c == ' ' || c == '_' || c == ',' && strings.IndexByte(t[:i], ':') < 0 {
			if strings.IndexByte(t[:i], ':') >= 0 {
				break // "10:02 PM"
			}
			date, clock = t[:i], strings.TrimLeft(t[i+1:], " ")
			break
		}
	}
	s.look = aClock
	if date != "" {
		s.look = aMoment
		if !s.readDate(date) {
			return s, false
		}
		rest, zone, utc, hasZone := cutZone(clock)
		if hasZone {
			s.look, s.zone, s.utc, clock = aZoned, zone, utc, rest
		}
	}
	return s, s.readClock(clock)
}

// readDate reads year-month-day, day.month.year, or two numbers whose order the
// file tells.
func (s *stamp) readDate(t string) bool {
	sep := strings.IndexAny(t, "-/.")
	if sep < 1 {
		return false
	}
	parts := strings.Split(t, t[sep:sep+1])
	if len(parts) != 3 {
		return false
	}
	var n [3]int
	for i, p := range parts {
		if len(p) < 1 || len(p) > 4 {
			return false
		}
		for _, c := range []byte(p) {
			if c-'0' > 9 {
				return false
			}
			n[i] = n[i]*10 + int(c-'0')
		}
	}
	switch {
	case len(parts[0]) == 4:
		s.date, s.order = n, yearFirst
	case len(parts[2]) == 4 || len(parts[2]) == 2 && len(parts[0]) <= 2:
		if len(parts[2]) == 2 {
			n[2] += 2000
		}
		s.date, s.order = [3]int{n[2], n[1], n[0]}, openOrder
		if t[sep] == '.' {
			s.order = dayFirst
		}
	default:
		return false
	}
	y, m, d := s.date[0], s.date[1], s.date[2]
	if y < 1950 || y > 2200 {
		return false
	}
	if s.order == openOrder {
		return m >= 1 && d >= 1 && min(m, d) <= 12 && max(m, d) <= 31
	}
	return validDate(y, m, d)
}

func validDate(y, m, d int) bool {
	t := time.Date(y, time.Month(m), d, 0, 0, 0, 0, time.UTC)
	return m >= 1 && m <= 12 && t.Day() == d && t.Month() == time.Month(m)
}

// cutZone takes a zone off the end: Z, UTC, +02:00, +0200, +02.
func cutZone(t string) (rest string, zone int, utc, ok bool) {
	for _, z := range []string{"UTC", "GMT", "Z", "z"} {
		if head, ok := strings.CutSuffix(t, z); ok {
			return strings.TrimRight(head, " "), 0, true, true
		}
	}
	i := strings.LastIndexAny(t, "+-")
	if i < 1 {
		return t, 0, false, false
	}
	zone, ok = readZone(t[i:])
	return strings.TrimRight(t[:i], " "), zone, false, ok
}

// readZone reads +02:00, +0200, +02, UTC, Z as seconds east.
func readZone(t string) (int, bool) {
	switch strings.ToUpper(t) {
	case "UTC", "Z", "GMT":
		return 0, true
	}
	if len(t) < 3 || t[0] != '+' && t[0] != '-' {
		return 0, false
	}
	digits := strings.Replace(t[1:], ":", "", 1)
	if len(digits) == 2 {
		digits += "00"
	}
	if len(digits) != 4 {
		return 0, false
	}
	n, err := strconv.Atoi(digits)
	if err != nil || n < 0 || n/100 > 14 || n%100 > 59 {
		return 0, false
	}
	z := n/100*3600 + n%100*60
	if t[0] == '-' {
		z = -z
	}
	return z, true
}

// readClock reads h:m, h:m:s with a fraction, 12 hours with AM or PM too.
func (s *stamp) readClock(t string) bool {
	half := 0
	for i, w := range []string{"AM", "PM"} {
		if len(t) > 2 && strings.EqualFold(t[len(t)-2:], w) {
			half, t = i+1, strings.TrimRight(t[:len(t)-2], " ")
		}
	}
	parts := strings.Split(t, ":")
	if n := len(parts); n == 4 && len(parts[3]) == 3 { // 10:02:03:125
		parts = []string{parts[0], parts[1], parts[2] + "." + parts[3]}
	} else if n != 2 && n != 3 {
		return false
	}
	s.parts = len(parts)
	last := &parts[len(parts)-1]
	if i := strings.IndexAny(*last, ".,"); i >= 0 {
		*last, s.frac = (*last)[:i], (*last)[i+1:]
		if s.frac == "" || len(s.frac) > 9 || !digitsOnly(s.frac) {
			return false
		}
	}
	var n [3]int
	for i, p := range parts {
		most := 2
		if i == 0 {
			most = 4
		}
		if len(p) < 1 || len(p) > most || !digitsOnly(p) {
			return false
		}
		n[i], _ = strconv.Atoi(p)
	}
	if n[1] > 59 || n[2] > 60 || half > 0 && (n[0] < 1 || n[0] > 12) {
		return false
	}
	if half > 0 {
		s.ampm = true
		n[0] %= 12
		if half == 2 {
			n[0] += 12
		}
	}
	if s.look != aClock && n[0] > 23 {
		return false
	}
	s.hour, s.sec = n[0], float64(n[1]*60+n[2])
	if s.parts == 2 && s.frac != "" { // m:s.f
		s.hour, s.sec = 0, float64(n[0]*60+n[1])
		s.parts = 1
	}
	return true
}

func digitsOnly(t string) bool {
	for i := range len(t) {
		if t[i]-'0' > 9 {
			return false
		}
	}
	return true
}

// seconds gives the whole seconds of the time: since 1970 as written, the zone
// taken off, or of the day, or elapsed.
func (s *stamp) seconds(order dateOrder) (float64, bool) {
	x := float64(s.hour)*3600 + s.sec
	if s.look == aClock {
		return x, true
	}
	y, m, d := s.date[0], s.date[1], s.date[2]
	if s.order == openOrder && order != dayFirst {
		m, d = d, m
	}
	if !validDate(y, m, d) {
		return 0, false
	}
	return x + float64(time.Date(y, time.Month(m), d, 0, 0, 0, 0, time.UTC).Unix()) - float64(s.zone), true
}

// joinDate makes a moment of a date and a clock from two columns.
func joinDate(date, clock stamp) (stamp, bool) {
	if date.look != aDate || clock.look != aClock || clock.hour > 23 {
		return clock, false
	}
	clock.look, clock.date, clock.order = aMoment, date.date, date.order
	return clock, true
}

// instant is one time of a file, whole seconds and the digits behind apart until
// it is known how they were written.
type instant struct {
	whole float64
	frac  string
}

// numeral reads a number as a time of the form: Unix times keep their fraction
// as digits.
func numeral(cell []byte, mark byte, form Form, unit table.Unit) (instant, bool) {
	if form == Elapsed {
		n, why := table.ReadNumber(cell, mark, table.Unit{Dim: "s", Exp: unit.Exp})
		if why != "" || n.State != "" || n.Unit.Dim != "" && n.Unit.Dim != "s" {
			return instant{}, false
		}
		return instant{whole: n.Value}, math.Abs(n.Value) < 1e9
	}
	t := strings.TrimSpace(string(cell))
	whole, frac := t, ""
	if i := strings.IndexByte(t, mark); i >= 0 {
		whole, frac = t[:i], t[i+1:]
	}
	if !digitsOnly(whole) || !digitsOnly(frac) || whole == "" || len(frac) > 9 {
		return instant{}, false
	}
	switch shift := map[Form]int{UnixMS: 3, UnixUS: 6}[form]; {
	case len(whole) <= shift || len(whole)-shift > 10:
		return instant{}, false
	case shift > 0:
		whole, frac = whole[:len(whole)-shift], whole[len(whole)-shift:]+frac
	}
	x, err := strconv.ParseFloat(whole, 64)
	return instant{x, frac}, err == nil && x >= 1e8
}

// unixForm tells Unix times by their size: seconds from 1973 to 2286,
// milliseconds and microseconds likewise; anything else is elapsed.
func unixForm(x float64) Form {
	switch {
	case x >= 1e8 && x < 1e10:
		return UnixS
	case x >= 1e11 && x < 1e13:
		return UnixMS
	case x >= 1e14 && x < 1e16:
		return UnixUS
	}
	return Elapsed
}
