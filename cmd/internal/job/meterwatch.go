package job

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/port"
	"gatesill/report"
	"gatesill/report/screen"
	"gatesill/store/record"
)

// meterWatch keeps what each meter of a bench said last. Times are seconds since
// the listening began.
type meterWatch struct {
	bench  *bench.Bench
	today  string // YYYY-MM-DD, for calibrations that are due
	meters []watched
}

// watched is one meter.
type watched struct {
	last      record.Reading
	has       bool      // last is something
	times     []float64 // of the last readings, for the rate
	readings  int
	bad       int // frames that could not be read
	open      bool
	err       error // of the line when it is not open
	ended     bool  // the line was a recorded log and is at its end
	lastBad   error
	lastBadAt float64
}

// keptTimes are the arrivals that the rate is taken from.
const keptTimes = 16

func newMeterWatch(b *bench.Bench, now time.Time) *meterWatch {
	return &meterWatch{bench: b, today: now.Format(time.DateOnly), meters: make([]watched, len(b.Meters))}
}

// on gives the meters whose line it is.
func (w *meterWatch) on(line string) []int {
	var out []int
	for i, l := range w.bench.Lines {
		if l.Path == line {
			out = append(out, i)
		}
	}
	return out
}

// take takes in an event.
func (w *meterWatch) take(e acquire.Event) {
	for _, i := range w.on(e.Line) {
		m := &w.meters[i]
		switch {
		case e.Opened:
			m.open, m.err = true, nil
		case e.Lost && errors.Is(e.Err, port.ErrEnd):
			m.open, m.ended = false, true
		case e.Lost:
			m.open, m.err = false, e.Err
		case e.Err != nil:
			m.bad, m.lastBad, m.lastBadAt = m.bad+1, e.Err, e.At
		}
	}
	for _, r := range e.Readings {
		i := slices.IndexFunc(w.bench.Meters, func(in record.Instrument) bool { return in.Role == r.Role })
		if i < 0 {
			continue
		}
		m := &w.meters[i]
		m.last, m.has, m.open, m.err = r, true, true, nil
		m.readings++
		if m.times = append(m.times, r.At); len(m.times) > keptTimes {
			m.times = m.times[1:]
		}
	}
}

// period is the usual time between two readings, NaN before the second.
func (m *watched) period() float64 {
	var d []float64
	for i := 1; i < len(m.times); i++ {
		d = append(d, m.times[i]-m.times[i-1])
	}
	if len(d) == 0 {
		return math.NaN()
	}
	slices.Sort(d)
	return d[len(d)/2]
}

// least time without a reading that is worth a word, s: below it, it is the
// computer that was busy.
const leastSilence = 0.3

// stale tells whether the last reading is older than two usual periods.
func (m *watched) stale(now float64) bool {
	p := m.period()
	if math.IsNaN(p) {
		p = 0.5 // the slowest handheld of the usual ones
	}
	return m.has && !m.ended && now-m.last.At > max(2*p, leastSilence)
}

// state says in a few words what there is to say of a meter.
func (m *watched) state(now float64) string {
	switch {
	case m.err != nil && m.has:
		return "line lost"
	case m.err != nil:
		return "line not open"
	case !m.has && m.bad > 0:
		return "unreadable"
	case !m.has:
		return "nothing yet"
	case m.stale(now):
		return "stale"
	case m.last.Refused != "":
		return m.last.Refused
	case m.last.State == record.Overload:
		return "over range"
	case m.last.State == record.Underload:
		return "under range"
	case m.last.State != "":
		return "no number"
	case m.lastBad != nil && now-m.lastBadAt < 2:
		return "bad frames"
	case m.ended:
		return "end of log"
	}
	return stateOK
}

const stateOK = "ok"

// text is the reading as it is shown, with its unit apart.
func (m *watched) text() (text, unit string) {
	switch x, known := m.last.Value.Get(); {
	case !m.has:
		return "", ""
	case m.last.State == record.Overload:
		return screen.Over, m.last.Unit
	case m.last.State == record.Underload:
		return screen.Under, m.last.Unit
	case !known:
		return screen.Nothing, m.last.Unit
	default:
		return screen.Fixed(x, m.last.Digit.Or(0), m.last.Unit)
	}
}

// rows are the meters that have a line, in the order of the file.
func (w *meterWatch) rows(now float64) []report.MeterRow {
	var out []report.MeterRow
	for i, in := range w.bench.Meters {
		if w.bench.Lines[i].Path == "" {
			continue
		}
		m := &w.meters[i]
		row := report.MeterRow{
			Role: in.Role, Name: in.Name, Line: w.bench.Lines[i].Path, Value: math.NaN(), Unit: m.last.Unit, State: m.state(now),
			Readings: m.readings, BadFrames: m.bad, Rate: 1 / m.period(), Age: math.NaN(),
			Isolated: in.Isolated, Due: in.Due, Overdue: in.Due != "" && in.Due < w.today,
		}
		if text, unit := m.text(); m.has {
			row.Text, row.Age, row.Value = text+" "+unit, now-m.last.At, m.last.Value.Or(math.NaN())
		}
		switch {
		case m.err != nil:
			row.Error = m.err.Error()
		case m.lastBad != nil:
			row.Error = m.lastBad.Error()
		}
		out = append(out, row)
	}
	return out
}

// picture is what is drawn on a terminal.
func (w *meterWatch) picture(now float64, invented bool) screen.Model {
	m := screen.Model{Title: "meters", Instruction: "any key ends", Power: screen.Power{Watts: math.NaN()}}
	if w.bench.Name != "" {
		m.Title += "  bench " + w.bench.Name
	}
	if invented {
		m.Status = "rehearsal: all is invented"
	}
	rows := w.rows(now)
	for _, r := range rows {
		i := slices.IndexFunc(w.bench.Meters, func(in record.Instrument) bool { return in.Role == r.Role })
		v := screen.Value{Role: r.Role, Label: r.Name, Age: r.Age}
		v.Text, v.Unit = w.meters[i].text()
		switch {
		case r.State == "stale":
			v.Stale = true
		case r.State != stateOK:
			v.Note = r.State
		}
		m.Values = append(m.Values, v)
		if r.Error != "" && w.meters[i].err != nil {
			m.Notices = append(m.Notices, screen.Notice{Text: r.Error})
		}
	}
	for _, c := range w.cautions() {
		m.Notices = append(m.Notices, screen.Notice{Text: c})
	}
	roles := 0
	for _, r := range rows {
		roles = max(roles, len(r.Role))
	}
	for _, r := range rows {
		rate := "   --   "
		if !math.IsNaN(r.Rate) && !math.IsInf(r.Rate, 0) {
			rate = fmt.Sprintf("%6.1f/s", r.Rate)
		}
		line := fmt.Sprintf("%-*s %s  %6d readings", roles, r.Role, rate, r.Readings)
		if r.BadFrames > 0 {
			line += fmt.Sprintf(", %d bad frames", r.BadFrames)
		}
		m.Lines = append(m.Lines, line+"  "+r.Line)
	}
	return m
}

// cautions are those of the bench and of calibrations that are overdue.
func (w *meterWatch) cautions() []string {
	out := append(w.bench.Cautions(), lapsed(w.bench, w.today)...)
	for _, s := range w.bench.Supplies {
		if s.Due != "" && s.Due < w.today {
			out = append(out, fmt.Sprintf("the calibration of the %s supply%s was due on %s", s.Drives, quoted(s.Name), s.Due))
		}
	}
	return out
}

// lapsed says which calibrations of meters were due before a day, YYYY-MM-DD.
func lapsed(b *bench.Bench, day string) (out []string) {
	for _, m := range b.Overdue(day) {
		out = append(out, fmt.Sprintf("the calibration of the %s meter%s was due on %s", m.Role, quoted(m.Name), m.Due))
	}
	return out
}

func quoted(name string) string {
	if name == "" {
		return ""
	}
	return fmt.Sprintf(" %q", name)
}
