package job

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/fit/stats"
	"gatesill/report"
	"gatesill/store/record"
)

// sittingRun is what was measured at one bench in one go.
type sittingRun struct {
	name       string         // as people read it, another for each
	session    record.Session // zero: none is stored
	occasion   string         // its day, else its name
	circuit    string         // with what else must be alike, as of conditionOf
	condition  string         // circuit, and temperature where there are several
	start      string         // time of its first sweep, "" not known
	insertions []insertion    // in the order in which they were measured
}

// insertion is one device that was put in once, with what was measured of it
// until it was taken out.
type insertion struct {
	device *report.Device
	sweeps []*report.Sweep
	result fit.Result // over its sweeps
}

// sittingsOf finds out which sweeps belong to one sitting, and which of them to one
// insertion of a device.
//
// A sitting is a session of the store; without one, what was measured on one day,
// or read from files on one day. The order in it is that of the times where all its
// sweeps have one, else that in which they were added. An up and a down sweep of one
// device with no other device between them are one insertion; any other sweep, and
// every spot, is a new one. Sittings are in the order of their time where all have
// one, else of their first sweep.
func sittingsOf(s *report.Sheet) []sittingRun {
	type placed struct {
		device *report.Device
		sweep  *report.Sweep
	}
	imported := map[string]string{}
	for _, src := range s.Sources {
		imported[src.ID] = day(src.ImportedAt)
	}
	sessions := map[string]record.Session{}
	for _, x := range s.Sessions {
		sessions[x.ID] = x
	}
	warm := warmth(s)
	byKey := map[string][]placed{}
	var keys []string
	for i := range s.Devices {
		d := &s.Devices[i]
		for j := range d.Sweeps {
			sw := &d.Sweeps[j]
			if d.Excluded || sw.Excluded || sw.Result.State == fit.Excluded {
				continue
			}
			key := sw.SessionID
			if key == "" {
				key = first(day(sw.MeasuredAt), "imported "+imported[sw.SourceID])
			}
			// What is read in another circuit or much warmer is no repetition.
			key += sittingMark + conditionOf(&sw.Condition) + warm(sw.Condition.Temp)
			if _, ok := byKey[key]; !ok {
				keys = append(keys, key)
			}
			byKey[key] = append(byKey[key], placed{d, sw})
		}
	}
	var runs []sittingRun
	for _, key := range keys {
		list := byKey[key]
		timed := !slices.ContainsFunc(list, func(p placed) bool { return !strings.Contains(p.sweep.MeasuredAt, "T") })
		slices.SortFunc(list, func(a, b placed) int {
			if c := cmp.Compare(a.sweep.MeasuredAt, b.sweep.MeasuredAt); timed && c != 0 {
				return c
			}
			return cmp.Compare(a.sweep.ID, b.sweep.ID)
		})
		key, condition, _ := strings.Cut(key, sittingMark)
		x := sessions[key] // the zero session where there is none
		run := sittingRun{session: x, circuit: conditionOf(&list[0].sweep.Condition), condition: condition, start: first(list[0].sweep.MeasuredAt, x.StartedAt)}
		run.occasion = first(day(run.start), x.Name, imported[list[0].sweep.SourceID], key)
		run.name = key
		if x.ID != "" {
			run.name = sessionWords(x, day(run.start))
		}
		for _, p := range list {
			if n := len(run.insertions); n > 0 && run.insertions[n-1].goesOn(p.device, p.sweep) {
				run.insertions[n-1].sweeps = append(run.insertions[n-1].sweeps, p.sweep)
				continue
			}
			run.insertions = append(run.insertions, insertion{device: p.device, sweeps: []*report.Sweep{p.sweep}})
		}
		runs = append(runs, run)
	}
	dated := !slices.ContainsFunc(runs, func(r sittingRun) bool { return r.start == "" })
	slices.SortStableFunc(runs, func(a, b sittingRun) int {
		if c := cmp.Compare(a.start, b.start); dated && c != 0 {
			return c
		}
		return cmp.Compare(a.insertions[0].sweeps[0].ID, b.insertions[0].sweeps[0].ID)
	})
	apart(runs)
	return runs
}

// sessionWords names a session by what is known of it.
func sessionWords(x record.Session, day string) string {
	var words []string
	for _, w := range []string{x.Name, day, x.Operator, x.Fixture} {
		if w != "" {
			words = append(words, w)
		}
	}
	return first(strings.Join(words, ", "), x.Bench, x.ID)
}

// sittingMark parts a session from the conditions in the key of a sitting.
const sittingMark = "\x00"

// warmth parts the temperatures of a lot where two neighbours lie more than half of
// [warmer] apart, and gives each a word; none where all belong together or are not
// known.
func warmth(s *report.Sheet) func(record.Num) string {
	var all []float64
	counted(s, func(sw *report.Sweep) {
		if t, ok := sw.Condition.Temp.Get(); ok {
			all = append(all, t)
		}
	})
	slices.Sort(all)
	var starts []float64
	for i, t := range all {
		if i == 0 || t-all[i-1] > warmer/2 {
			starts = append(starts, t)
		}
	}
	return func(n record.Num) string {
		t, ok := n.Get()
		if !ok || len(starts) < 2 {
			return ""
		}
		at := 0
		for at+1 < len(starts) && starts[at+1] <= t {
			at++
		}
		return fmt.Sprintf(", %.4g °C", starts[at])
	}
}

// apart gives sittings of the same name their conditions, and where that does not
// tell them apart a number.
func apart(runs []sittingRun) {
	names := map[string]int{}
	for _, r := range runs {
		names[r.name]++
	}
	seen := map[string]int{}
	for i := range runs {
		if names[runs[i].name] > 1 {
			runs[i].name += ", " + runs[i].condition
		}
		name := runs[i].name
		if seen[name]++; seen[name] > 1 {
			runs[i].name += fmt.Sprintf(" (%d)", seen[name])
		}
	}
}

// goesOn reports whether a sweep belongs to the insertion before it: the same
// device, swept in a direction in which it was not swept yet.
func (in *insertion) goesOn(d *report.Device, sw *report.Sweep) bool {
	return in.device == d && sw.Direction != record.Spot && !slices.ContainsFunc(in.sweeps, func(o *report.Sweep) bool {
		return o.Direction == sw.Direction || o.Direction == record.Spot
	})
}

// join combines the sweeps of the insertion.
func (in *insertion) join() {
	if len(in.sweeps) == 1 {
		in.result = in.sweeps[0].Result
		return
	}
	var rs []fit.Result
	var dirs []string
	for _, sw := range in.sweeps {
		rs, dirs = append(rs, sw.Result), append(dirs, string(sw.Direction))
	}
	in.result = fit.Combine(rs, dirs)
}

// measurings are the values of one quantity, one an insertion.
func measurings(runs []sittingRun, key fit.Key) []gauge.Measuring {
	var out []gauge.Measuring
	for _, r := range runs {
		for i := range r.insertions {
			in := &r.insertions[i]
			in.join()
			q := in.result.At(key)
			out = append(out, gauge.Measuring{
				Device: in.device.Name, Control: in.device.Role == record.Control, Value: q.Value, U: q.U,
				Sitting: r.name, Operator: r.session.Operator, Fixture: r.session.Fixture, Occasion: r.occasion,
				Place: i + 1, Rank: len(out) + 1, Temp: tempOf(in.sweeps[0], r.session),
			})
		}
	}
	return out
}

// tempOf is the temperature of a sweep: as given for it, else the mean of its
// readings of it, else that of the room in its session; NaN where none is known.
func tempOf(sw *report.Sweep, session record.Session) float64 {
	if t, ok := sw.Condition.Temp.Get(); ok {
		return t
	}
	read := slices.DeleteFunc(slices.Clone(sw.Values(record.Temp)), math.IsNaN)
	if len(read) > 0 {
		return stats.Mean(read)
	}
	return session.Ambient.Float()
}

// mostly keeps the sittings in the circuit in which most was measured, and tells how
// many insertions were left out: readings in another are no repetitions.
func mostly(runs []sittingRun) (kept []sittingRun, left int) {
	count := map[string]int{}
	most := ""
	for _, r := range runs {
		count[r.circuit] += len(r.insertions)
		if count[r.circuit] > count[most] {
			most = r.circuit
		}
	}
	for _, r := range runs {
		if r.circuit == most {
			kept = append(kept, r)
		} else {
			left += len(r.insertions)
		}
	}
	return kept, left
}

// repeatedIn counts the insertions beyond the first of each device in each
// sitting: the degrees of freedom that a repeatability has at most.
func repeatedIn(runs []sittingRun) int {
	n := 0
	for _, r := range runs {
		seen := map[*report.Device]bool{}
		for i := range r.insertions {
			if seen[r.insertions[i].device] {
				n++
			}
			seen[r.insertions[i].device] = true
		}
	}
	return n
}
