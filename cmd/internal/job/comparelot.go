package job

import (
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store/record"
)

// comparedLot is the lot of a sheet as a comparison sees it.
func comparedLot(s *report.Sheet) compare.Lot {
	l := compare.Lot{
		Name: s.Lot.Name, PChannel: s.Part.Channel == record.PChannel, Populations: max(1, s.Spread.Populations),
		Idle: s.IdleCurrent, DateCode: dateCode(s), Temp: lotTemperature(s),
	}
	if s.Spread.Split != nil {
		l.Parted = s.Spread.Split.Text
	}
	l.At = measuredAt(s)
	verdicts, sittings := s.Verdicts(), newSittings(s)
	for i := range s.Devices {
		d := &s.Devices[i]
		if len(d.Sweeps) == 0 {
			continue
		}
		l.Members = append(l.Members, compare.Member{
			Name: d.Name, Result: d.Result, Control: d.Role == record.Control, Aside: asideOf(d),
			Flagged: verdicts[d.Name].Flagged, Sittings: sittings.of(d),
		})
	}
	return l
}

// asideOf says why a device takes no part; "" where it does.
func asideOf(d *report.Device) string {
	switch st := d.State(); st {
	case fit.Open, fit.Shorted, fit.WrongWayRound, fit.Excluded:
		return report.WordsOf(st).Word
	}
	return ""
}

// dateCode is that of the lot, else the one that all its devices share.
func dateCode(s *report.Sheet) string {
	if s.Lot.DateCode != "" || len(s.Devices) == 0 {
		return s.Lot.DateCode
	}
	code := s.Devices[0].DateCode
	for _, d := range s.Devices {
		if d.DateCode != code {
			return ""
		}
	}
	return code
}

// lotTemperature is the median temperature of the sweeps that count, °C; NaN
// where none has one.
func lotTemperature(s *report.Sheet) float64 {
	var all []float64
	counted(s, func(sw *report.Sweep) {
		if t, ok := sweepTemperature(sw); ok {
			all = append(all, t)
		}
	})
	return median(all)
}

// sweepTemperature is the temperature given for a sweep, else the median of what
// was read during it.
func sweepTemperature(sw *report.Sweep) (float64, bool) {
	if t, ok := sw.Condition.Temp.Get(); ok {
		return t, true
	}
	t := median(slices.DeleteFunc(slices.Clone(sw.Values(record.Temp)), math.IsNaN))
	return t, !math.IsNaN(t)
}

// median of a list, which it sorts; NaN of none.
func median(xs []float64) float64 {
	n := len(xs)
	if n == 0 {
		return math.NaN()
	}
	slices.Sort(xs)
	return (xs[(n-1)/2] + xs[n/2]) / 2
}

// What the time of the first reading of a lot rests on.
const (
	fromReading = "first reading"
	fromSession = "start of its session"
	fromImport  = "import of its file"
)

// moment is a time told of the readings of a lot, a stamp or a bare date, and what
// tells it.
type moment struct{ at, from string }

// momentsOf gathers what is told of when the sweeps of a lot were taken: by the
// readings themselves, by their session, and by the import of their file, before which
// they were there. Set-aside sweeps count: their values have been seen.
func momentsOf(s *report.Sheet) []moment {
	started, imported := map[string]string{}, map[string]string{}
	for _, x := range s.Sessions {
		started[x.ID] = x.StartedAt
	}
	for _, x := range s.Sources {
		imported[x.ID] = x.ImportedAt
	}
	var out []moment
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j]
			out = append(out, moment{sw.MeasuredAt, fromReading}, moment{started[sw.SessionID], fromSession}, moment{imported[sw.SourceID], fromImport})
		}
	}
	return out
}

// earliest of moments; zero where none has a time. A bare date sorts before every
// stamp of its day.
func earliest(ms []moment) (e moment) {
	for _, m := range ms {
		if m.at != "" && (e.at == "" || m.at < e.at) {
			e = m
		}
	}
	return e
}

// firstReading is when the first reading of a lot was there at the latest: the
// earliest of all that is told of its sweeps. What stood in the store before a rule
// was set had been seen, whatever date its file gives.
func firstReading(s *report.Sheet) (at, from string) {
	m := earliest(momentsOf(s))
	return m.at, m.from
}

// setBefore reports whether a rule was set before the first reading of a lot. Stamps
// compare as texts, and a day alone comes before every time on it: a rule set on the
// day of the first reading is not known to be older.
func setBefore(s *report.Sheet, set string) bool {
	at, _ := firstReading(s)
	return set != "" && (at == "" || set < at)
}

// measuredAt is when a lot was measured by what its sweeps or their sessions say, its
// place in the run of lots; "" where they say nothing: the import of a file is no time
// of measuring.
func measuredAt(s *report.Sheet) string {
	return earliest(slices.DeleteFunc(momentsOf(s), func(m moment) bool { return m.from == fromImport })).at
}

// sittings tells session and meters behind the sweeps of one lot.
type sittings struct {
	session map[string]record.Session
}

func newSittings(s *report.Sheet) sittings {
	m := map[string]record.Session{}
	for _, x := range s.Sessions {
		m[x.ID] = x
	}
	return sittings{m}
}

// of gives the sittings behind the values of a device.
func (t sittings) of(d *report.Device) []compare.Sitting {
	var out []compare.Sitting
	for i := range d.Sweeps {
		if sw := &d.Sweeps[i]; sw.Result.State != fit.Excluded {
			out = append(out, compare.Sitting{Session: t.name(&sw.Sweep), Meters: metersText(t.session[sw.SessionID].Bench, sw.Instruments)})
		}
	}
	return out
}

// name tells one session from another across lots: each lot has records of its
// own, so that only a name given by the person joins two. Sweeps without a session
// are those of one file and day.
func (t sittings) name(sw *record.Sweep) string {
	s, ok := t.session[sw.SessionID]
	switch {
	case !ok && sw.SourceID == "":
		return ""
	case !ok:
		return strings.Join([]string{"file", sw.SourceID, day(sw.MeasuredAt)}, "\x1f")
	case s.Name == "":
		return s.ID
	}
	return strings.Join([]string{"named", s.Name, s.Bench, s.Operator, s.Fixture, day(s.StartedAt)}, "\x1f")
}

// metersText writes bench and meters that enter a gate voltage at a current; ""
// where neither the bench nor one of them has a name.
func metersText(bench string, meters []record.Instrument) string {
	var words []string
	named := bench != ""
	for _, m := range meters {
		if m.Role == "gate" || m.Role == "current" || m.Role == "load" || m.Role == "drain" {
			words = append(words, strings.TrimSpace(m.Role+" "+m.Name+" "+m.Serial))
			named = named || m.Name+m.Serial != ""
		}
	}
	if words == nil || !named {
		return ""
	}
	slices.Sort(words)
	return strings.Join(append([]string{bench}, words...), "\x1f")
}
