package job

import (
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store/record"
)

// changedPairs tells of the same devices measured in two lots which one moved by
// itself, more than the repeatability of the bench and what is common to all explain:
// a pair's own difference decides nothing in the comparison, but says whether a part
// has changed or was mixed up.
func changedPairs(ref, cand *report.Sheet, by fit.Key, rq CompareRequest) []fit.Warning {
	known := gauge.None()
	for _, s := range []*report.Sheet{ref, cand} {
		if r, ok := s.Repeatability[by]; ok && !(r.Value <= known.Value) {
			known = r
		}
	}
	histories := gauge.HistoryOf(append(measuredIn(ref, by, 0), measuredIn(cand, by, len(ref.Devices))...),
		gauge.HistoryOptions{Tempco: rq.Tempco.Float(), Known: known})
	var out []fit.Warning
	for i := range histories {
		h := &histories[i]
		for _, name := range h.ChangedDevices() {
			out = append(out, fit.Warning{Code: fit.CodeDeviceChanged, Text: "device " + name + ": " + h.Of(name)})
		}
	}
	return out
}

// measuredIn gives the devices of a lot, as measured on the one occasion of it.
func measuredIn(s *report.Sheet, by fit.Key, before int) []gauge.Measuring {
	var out []gauge.Measuring
	for i := range s.Devices {
		d := &s.Devices[i]
		q := d.Result.At(by)
		if d.Excluded || len(d.Sweeps) == 0 || !q.Ok() || math.IsInf(q.Value, 0) {
			continue
		}
		var session record.Session
		if k := slices.IndexFunc(s.Sessions, func(x record.Session) bool { return x.ID == d.Sweeps[0].SessionID }); k >= 0 {
			session = s.Sessions[k]
		}
		out = append(out, gauge.Measuring{
			Device: d.Name, Control: d.Role == record.Control, Value: q.Value, U: q.U, Sitting: s.Lot.ID,
			Occasion: "lot " + s.Lot.Name, Place: len(out) + 1, Rank: before + len(out) + 1, Temp: tempOf(&d.Sweeps[0], session),
		})
	}
	return out
}
