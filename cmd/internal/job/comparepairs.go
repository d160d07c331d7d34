package job

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store/record"
)

// changedPairs tells of the same devices measured in two lots which one moved by
// itself, more than the repeatability of the bench and what is common to all explain:
// a pair's own difference decides nothing in the comparison, but says whether a part
// has changed or was mixed up. words name them for the sentence of the verdict, "" for
// none.
func changedPairs(ref, cand *report.Sheet, by fit.Key, rq CompareRequest) (out []fit.Warning, words string) {
	histories := gauge.HistoryOf(append(measuredIn(ref, by, 0), measuredIn(cand, by, len(ref.Devices))...),
		gauge.HistoryOptions{Tempco: rq.Tempco.Float(), Known: repeatabilityOf(ref, cand, by)})
	var named []string
	for i := range histories {
		h := &histories[i]
		for _, c := range h.Changes {
			if !c.Changed {
				continue
			}
			out = append(out, fit.Warning{Code: fit.CodeDeviceChanged, Text: "device " + c.Device + ": " + h.Of(c.Device)})
			named = append(named, fmt.Sprintf("%s (%+.0f mV)", c.Device, c.Own*1e3))
		}
	}
	switch n := len(named); {
	case n == 1:
		words = "; 1 device moved by itself: " + named[0]
	case n > namedMoved:
		words = fmt.Sprintf("; %d devices moved by themselves: %s and %d more", n, strings.Join(named[:namedMoved], ", "), n-namedMoved)
	case n > 1:
		words = fmt.Sprintf("; %d devices moved by themselves: %s", n, strings.Join(named, ", "))
	}
	return out, words
}

// namedMoved is how many devices that moved the sentence of the verdict names.
const namedMoved = 4

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
