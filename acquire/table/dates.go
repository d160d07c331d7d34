package table

import (
	"strings"
	"time"

	"gatesill/store/record"
)

// dateForms are the ways a date may be written, each a set that a file keeps to.
// A form with a zone gives a time, the others the bare date: a time of day
// without a zone is no point in time.
var dateForms = []struct {
	layouts []string
	zone    bool
	name    string
}{
	{[]string{time.RFC3339, "2006-01-02 15:04:05Z07:00", "2006-01-02 15:04Z07:00", "2006-01-02T15:04Z07:00", "2006-01-02 15:04:05 MST"}, true, "with zone"},
	{withTimes("2006-01-02", "2006-1-2", "2006/01/02", "2006/1/2", "2006.01.02"), false, "year first"},
	{withTimes("2.1.2006", "02.01.2006", "2.1.06", "02.01.06"), false, "day first"},
	{withTimes("2/1/2006", "2-1-2006", "2/1/06", "2-1-06"), false, "day first"},
	{withTimes("1/2/2006", "1-2-2006", "1/2/06", "1-2-06"), false, "month first"},
	{withTimes("2 Jan 2006", "2 January 2006", "Jan 2, 2006", "January 2, 2006", "2-Jan-2006", "2-Jan-06", "Mon Jan _2 2006"), false, "month by name"},
}

// withTimes adds the same layouts with a time of day.
func withTimes(layouts ...string) []string {
	out := layouts[:len(layouts):len(layouts)]
	for _, l := range layouts {
		for _, t := range []string{"15:04", "15:04:05", "3:04 PM", "3:04:05 PM"} {
			out = append(out, l+" "+t, l+"T"+t)
		}
	}
	return out
}

// settleDates reads the dates of the sweeps in one form for the whole file and
// sets MeasuredAt: a UTC stamp where a zone is written, else the bare date. What
// is in no one form, or could be day or month first, is left out and noted; the
// text stays in Date.
func (r *reader) settleDates() {
	seen := map[string]bool{}
	var texts []string
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		s.MeasuredAt = ""
		if t := s.Date; t != "" && !seen[t] {
			seen[t] = true
			texts = append(texts, t)
		}
	}
	if len(texts) == 0 {
		return
	}
	var read map[string]string
	for _, f := range dateForms {
		got := datesIn(texts, f.layouts, f.zone)
		switch {
		case got == nil:
		case read == nil:
			read = got
		case !sameDates(read, got):
			r.note("dates like %q may be day first or month first: left out; write them as YYYY-MM-DD", texts[0])
			return
		}
	}
	if read == nil {
		r.note("dates like %q are in no one form that is known: left out; write them as YYYY-MM-DD", texts[0])
		return
	}
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		s.MeasuredAt = read[s.Date]
	}
}

// datesIn reads all texts by the layouts, nil when one cannot be read.
func datesIn(texts, layouts []string, zone bool) map[string]string {
	out := make(map[string]string, len(texts))
	for _, text := range texts {
		t, ok := dateIn(strings.Join(strings.Fields(text), " "), layouts)
		if !ok || t.Year() < 1950 || t.Year() > 9999 {
			return nil
		}
		if zone {
			out[text] = record.Stamp(t)
		} else {
			out[text] = t.Format(time.DateOnly)
		}
	}
	return out
}

func dateIn(text string, layouts []string) (time.Time, bool) {
	for _, l := range layouts {
		if t, err := time.Parse(l, text); err == nil {
			return t, true
		}
	}
	return time.Time{}, false
}

func sameDates(a, b map[string]string) bool {
	for k, v := range a {
		if b[k] != v {
			return false
		}
	}
	return true
}
