package job

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store/record"
)

// margin is the largest shift that does not matter, as it is held against a
// candidate.
type margin struct {
	volts float64 // NaN: none
	set   string  // compare.Before, After or None
	text  string  // where it comes from, in words
}

// marginOf settles the margin: the one given, else that stored for the
// candidate's lot, else that of the reference's. It counts as set before only
// where it is a stored one, set earlier than the first reading of the candidate; on
// the day of a reading of which only the date is known it does not. One given on
// the command line that is not the stored one was chosen with the data there, and so
// was one of the idle current when what makes volts of it is newer than these readings.
func marginOf(ref, cand *report.Sheet, rq CompareRequest) (margin, error) {
	m := margin{volts: math.NaN(), set: compare.None}
	stored := []*record.Lot{&cand.Lot, &ref.Lot}
	amount := rq.Margin
	var from *record.Lot
	for _, l := range stored {
		if l.Margin.Unit != "" && (amount.Unit == "" || amount == l.Margin) {
			amount, from = l.Margin, l
			break
		}
	}
	if amount.Unit == "" {
		return m, nil
	}
	volts, how, err := inVolts(ref, amount, rq.Beta, from != nil)
	if err != nil {
		return m, err
	}
	m.volts, m.set = volts, compare.After
	if how != "" {
		how += ", "
	}
	if from == nil {
		m.text = how + "given with --margin"
		return m, nil
	}
	at, of := firstReading(cand)
	when := "after"
	if setBefore(cand, from.MarginSetAt) {
		m.set, when = compare.Before, "before"
	}
	event := map[string]string{
		fromReading: "first reading of lot " + cand.Lot.Name, fromSession: "start of the session of lot " + cand.Lot.Name, fromImport: "import of lot " + cand.Lot.Name,
	}[of]
	m.text = how + fmt.Sprintf("stored with lot %s on %s, %s the %s", from.Name, day(from.MarginSetAt), when, event)
	if d := day(at); d != "" {
		m.text += " on " + d
	}
	if m.set == compare.Before && amount.Unit != "V" {
		if why := lateSize(ref, cand); why != "" {
			m.set = compare.After
			m.text += "; it counts as set after it, because " + why
		}
	}
	return m, nil
}

// lateSize says why the size of a margin of the idle current was open when the first
// reading of the candidate was there, "" where it was not.
func lateSize(ref, cand *report.Sheet) string {
	begun, _ := firstReading(cand)
	switch {
	case ref.IdleCurrent != ref.Part.IdleCurrent.Or(math.NaN()):
		return "the idle current that its size rests on is not that of the part"
	case !setBefore(cand, ref.IdleSetAt):
		return "the idle current that its size rests on was set on " + day(ref.IdleSetAt)
	case math.IsNaN(medianGm(ref)):
		return "its size rests on the gain factor given with --beta"
	}
	for _, m := range newest(ref) {
		if m >= begun {
			return "its size rests on readings of lot " + ref.Lot.Name + " that came no earlier"
		}
	}
	return ""
}

// newest lists for every sweep of a lot behind its transconductance when it was there
// at the latest.
func newest(s *report.Sheet) []string {
	var out []string
	for i := range s.Devices {
		d := s.Devices[i]
		if _, ok := gmOf(&d); !ok {
			continue
		}
		for j := range d.Sweeps {
			one := *s
			one.Devices = []report.Device{{Sweeps: d.Sweeps[j : j+1]}}
			at, _ := firstReading(&one)
			out = append(out, at)
		}
	}
	return out
}

// inVolts turns a margin into a shift of the gate voltage. One of the idle
// current, in percent or amperes, is divided by the transconductance there: the
// median of the reference lot, else √(2·beta·I) of the square law.
func inVolts(ref *report.Sheet, a record.Amount, beta record.Num, stored bool) (volts float64, how string, err error) {
	given := report.AmountWords(a)
	if a.Unit == "V" {
		return a.Value, "", nil
	}
	idle := ref.IdleCurrent
	refuse := func(hint, format string, args ...any) error {
		f := Failure{Code: ExitUsage, Hint: hint, Err: fmt.Errorf(format, args...)}
		if stored {
			f.Code = ExitFailed
		}
		return &f
	}
	if !(idle > 0) {
		return 0, "", refuse("gatesill lot edit "+Quote(ref.Lot.Name)+" --idle-current 250mA, or a margin in volts",
			"margin of %s: lot %q has no idle current that it could be of", given, ref.Lot.Name)
	}
	current := a.Value
	if a.Unit == "%" {
		current = a.Value / 100 * idle
	}
	gm, basis := medianGm(ref), "median of lot "+ref.Lot.Name
	if b, ok := beta.Get(); math.IsNaN(gm) && ok {
		gm, basis = math.Sqrt(2*b*idle), fmt.Sprintf("√(2·beta·I), beta %s", report.FormatGiven(b, "A/V²"))
	}
	if math.IsNaN(gm) {
		return 0, "", refuse("--beta 3.8 gives the gain factor in A/V², or give a margin in volts",
			"margin of %s: no device of lot %q has a transconductance to make volts of it", given, ref.Lot.Name)
	}
	volts = current / gm
	what := given
	if a.Unit == "%" {
		what = fmt.Sprintf("%s of %s = %s", given, report.FormatGiven(idle, "A"), report.FormatGiven(current, "A"))
	}
	return volts, fmt.Sprintf("%s over a g_m of %s at the idle current (%s) is %s", what, report.FormatTwoDigits(gm, "S"), basis, report.FormatTwoDigits(volts, "V")), nil
}

// medianGm is the median transconductance of a lot at its idle current, S; NaN
// where it has none. Devices that were excluded count: a margin must not become
// another by leaving out devices when the readings are there.
func medianGm(s *report.Sheet) float64 {
	var all []float64
	for i := range s.Devices {
		if g, ok := gmOf(&s.Devices[i]); ok {
			all = append(all, g)
		}
	}
	return median(all)
}

// gmOf is the transconductance of a device as far as it counts for a margin.
func gmOf(d *report.Device) (float64, bool) {
	q := d.Result.At(fit.KeyGmIdle)
	faulty := asideOf(d) != "" && d.State() != fit.Excluded
	return q.Value, q.Value > 0 && d.Role != record.Control && !faulty
}
