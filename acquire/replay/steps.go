package replay

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"gatesill/acquire/table"
)

const (
	hour = 3600.0
	day  = 86400.0
)

// jump is a step of one hour in a log that keeps the time on the wall: it may be
// the clock that was put forward, or an hour without a reading.
type jump struct {
	at   int // the first entry behind it
	line int
}

// settleFractions gives the times of a file in seconds and the step of their last
// digit. Some loggers write the milliseconds as a bare number, so that .005 stands
// as .5; that shows by times that go back within a second, or by a short fraction
// that ends in a zero.
func settleFractions(in []instant) (times []float64, resolution float64, lost string) {
	most, same, leading, trailing := 0, true, false, false
	for _, x := range in {
		most = max(most, len(x.frac))
		leading = leading || len(x.frac) > 1 && x.frac[0] == '0'
	}
	for _, x := range in {
		n := len(x.frac)
		same = same && n == most
		trailing = trailing || n > 1 && n < most && x.frac[n-1] == '0'
	}
	read := func(bare bool) (times []float64, back int) {
		times = make([]float64, len(in))
		for i, x := range in {
			n := len(x.frac)
			if bare {
				n = most
			}
			f, _ := strconv.ParseFloat("0"+x.frac, 64)
			times[i] = x.whole + f/math.Pow10(n)
			if i > 0 && times[i] < times[i-1] && times[i] > times[i-1]-1 {
				back++
			}
		}
		return times, back
	}
	times, back := read(false)
	resolution = math.Pow10(-most)
	if same || leading || back == 0 && !trailing {
		return times, resolution, ""
	}
	bare, bareBack := read(true)
	if bareBack > 0 {
		return times, resolution, ""
	}
	why := "short ones end in a zero"
	if back > 0 {
		why = fmt.Sprintf("read as decimals they jump back %d times", back)
	}
	return bare, resolution, fmt.Sprintf("the fractions of the seconds have lost their leading zeros (%s): .5 is read as .%0*d", why, most, 5)
}

// settleSteps makes the times of a log rise: midnight in times of day, the hour
// that comes twice when a clock is put back. A step of an hour forward is kept for
// the comparison with the other logs. Times that go back otherwise are refused.
func (l *Log) settleSteps(t *table.Text, times []float64) error {
	usual := usualStep(times)
	add := 0.0
	nights := 0
	wall := l.Found.Form == Local || l.Found.Form == TimeOfDay
	for i := 1; i < len(times); i++ {
		step := times[i] + add - times[i-1]
		line := l.Entries[i].Line
		if l.Found.Form == TimeOfDay && step < -day/2 {
			add, step, nights = add+day, step+day, nights+1
			if nights <= 3 {
				l.note("midnight between lines %d and %d", l.Entries[i-1].Line, line)
			}
		}
		if wall && step < 0 && math.Abs(step+hour-usual) <= max(2*usual, 2) {
			add, step = add+hour, step+hour
			l.note("the clock was put back by an hour between lines %d and %d (end of daylight saving time)", l.Entries[i-1].Line, line)
		}
		if step < 0 {
			hint := "put the lines in the order of their times, or cut the file there"
			if l.Found.Form.elapsed() {
				hint = "the logger was started again there: cut the file into one for each run"
			}
			return t.Refuse(line, hint, "the time goes back by %s", seconds(-step))
		}
		if wall && math.Abs(step-hour-usual) <= max(2*usual, 2) && crossesHour(times[i-1], usual) {
			l.jumps = append(l.jumps, jump{i, line})
		}
		times[i] += add
	}
	return nil
}

// crossesHour reports whether the next reading is due behind a full hour: clocks
// are put forward there.
func crossesHour(at, usual float64) bool {
	slack := max(2*usual, 2)
	left := hour - math.Mod(at, hour)
	return left <= slack
}

// spread sets readings that bear one and the same time of coarse digits evenly
// over the step of the last digit.
func (l *Log) spread(times []float64) {
	res := l.Found.Resolution
	if res < 0.1 {
		return
	}
	repeated := 0
	for i := 1; i < len(times); i++ {
		if times[i] == times[i-1] {
			repeated++
		}
	}
	if repeated == 0 {
		return
	}
	for i := 0; i < len(times); {
		n := 1
		for i+n < len(times) && times[i+n] == times[i] {
			n++
		}
		at := times[i]
		for k := range n {
			times[i+k] = at + res*(float64(k)+0.5)/float64(n)
		}
		i += n
	}
	l.note("times are written to %s only, several readings to one: they are spread evenly within it", seconds(res))
}

// usualStep is the median of the steps that are above zero.
func usualStep(times []float64) float64 {
	var steps []float64
	for i := 1; i < len(times); i++ {
		if d := times[i] - times[i-1]; d > 0 {
			steps = append(steps, d)
		}
	}
	return median(steps)
}

// median sorts x and gives its middle, 0 of none.
func median(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	slices.Sort(x)
	if n := len(x); n%2 == 0 {
		return (x[n/2-1] + x[n/2]) / 2
	}
	return x[len(x)/2]
}

// seconds writes a time span for people.
func seconds(x float64) string {
	switch a := math.Abs(x); {
	case a >= 2*day:
		return fmt.Sprintf("%.3g days", x/day)
	case a >= 2*hour:
		return fmt.Sprintf("%.4g h", x/hour)
	case a >= 1:
		return strconv.FormatFloat(math.Round(x*1000)/1000, 'f', -1, 64) + " s"
	}
	return strconv.FormatFloat(math.Round(x*1e4)/10, 'f', -1, 64) + " ms"
}

func (l *Log) note(format string, args ...any) {
	l.Found.Notes = append(l.Found.Notes, fmt.Sprintf(format, args...))
}
