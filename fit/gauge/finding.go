package gauge

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
)

// FindingOf puts together all that measurings of one lot say of the bench and of
// the devices: [StudyOf], [DriftsOf], [ChartsOf] and [HistoryOf], with the
// warnings of each. known is the repeatability of the bench where that comes from
// elsewhere; the study's own goes before it, where it is enough.
func FindingOf(ms []Measuring, known Repeatability, tempco float64) Finding {
	f := Finding{Study: StudyOf(ms, tempco)}
	if f.Study.Repeatability.Enough() {
		known = f.Study.Repeatability
	}
	f.Drifts = DriftsOf(f.Study.kept, known)
	f.Charts = ChartsOf(ms, tempco)
	for _, h := range HistoryOf(ms, HistoryOptions{Tempco: tempco, Known: known}) {
		if slices.ContainsFunc(h.Changes, func(c Change) bool { return !c.Control }) { // the chart tells of others
			f.History = append(f.History, h)
		}
	}
	f.Warnings = f.Study.Warnings
	for i := range f.Drifts {
		d := &f.Drifts[i]
		if d.Seen() || d.First != nil && d.First.Beyond {
			f.add(fit.CodeBenchDrift, "%s%s", inSitting(d.Sitting), d.Text)
		}
	}
	for i := range f.Charts {
		c := &f.Charts[i]
		if out := c.Outside(); len(out) > 0 {
			f.add(fit.CodeControlOutside, "control part %s: %s outside the limits at %s %s", c.Device, strings.ToLower(c.By), "place", places(out))
		}
		if c.Trends() {
			f.add(fit.CodeControlTrend, "control part %s moves by %s per %s (p %s)", c.Device, signed(c.Trend.Value), c.By, pWords(c.TrendP))
		}
	}
	for i := range f.History {
		h := &f.History[i]
		for _, c := range h.Changes {
			if c.Changed {
				f.add(fit.CodeDeviceChanged, "%s moved by %s from %s to %s besides what is common to all (limit %s): changed or mixed up: check the serial, measure again",
					c.Device, signed(c.Own), h.From.Name, h.To.Name, volts(h.Limit))
			}
		}
		if h.Moved() {
			f.add(fit.CodeAllShifted, "from %s to %s %s", h.From.Name, h.To.Name, h.Texts[0])
		}
	}
	return f
}

func inSitting(name string) string {
	if name == "" {
		return ""
	}
	return "session " + name + ": "
}

func (f *Finding) add(code, format string, args ...any) {
	f.Warnings = append(f.Warnings, fit.Warning{Code: code, Text: fmt.Sprintf(format, args...)})
}

// None is the repeatability that is not known.
func None() Repeatability {
	return Repeatability{Estimate: noEstimate(), Across: math.NaN()}
}

// Given is a repeatability told by the user, in V.
func Given(sigma float64) Repeatability {
	return Repeatability{Estimate: Estimate{Value: sigma, Low: math.NaN(), High: math.NaN(), DF: math.Inf(1)}, Across: sigma, Basis: "given"}
}
