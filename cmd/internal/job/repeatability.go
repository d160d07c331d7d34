package job

import (
	"context"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// repeatedKeys are the quantities of which a repeatability is worked out.
var repeatedKeys = []fit.Key{fit.KeyVgsth, fit.KeyVgsIdle}

// takeRepeatability finds out how well the bench repeats, by the lot's own
// measurings or by those of another lot of the part on the same bench, and lets no
// value of the sheet be surer than that. Lots without devices put in again, on
// benches without a study, stay as they are.
func takeRepeatability(ctx context.Context, db *store.DB, s *report.Sheet, method string) error {
	var runs []sittingRun
	if slices.ContainsFunc(s.Devices, func(d report.Device) bool { return len(d.Sweeps) > 1 }) {
		runs = sittingsOf(s)
	}
	known := ownRepeatability(runs)
	if len(known) == 0 {
		var err error
		if known, err = repeatabilityElsewhere(ctx, db, s, method); err != nil {
			return err
		}
	}
	if len(known) == 0 {
		return nil
	}
	s.Repeatability = known
	if runs == nil {
		runs = sittingsOf(s)
	}
	ins := map[*report.Device][]*fit.Result{}
	for _, r := range runs {
		for i := range r.insertions {
			in := &r.insertions[i]
			in.join()
			ins[in.device] = append(ins[in.device], &in.result)
		}
	}
	for i := range s.Devices {
		d := &s.Devices[i]
		if d.Result.State != fit.Measured {
			continue
		}
		for key, r := range known {
			var qs []fit.Quantity
			for _, res := range ins[d] {
				qs = append(qs, *res.At(key))
			}
			fit.Repeated(&d.Result, key, qs, r.Value, r.Across, r.DF)
		}
	}
	return nil
}

// ownRepeatability is that of the sittings, by quantity; only what rests on
// enough.
func ownRepeatability(runs []sittingRun) map[fit.Key]gauge.Repeatability {
	if repeatedIn(runs) < gauge.FewestDF {
		return nil
	}
	known := map[fit.Key]gauge.Repeatability{}
	like, _ := mostly(runs)
	for _, key := range repeatedKeys {
		if r := gauge.StudyOf(measurings(like, key), math.NaN()).Repeatability; r.Enough() {
			known[key] = r
		}
	}
	return known
}

// repeatabilityElsewhere looks for a study of the same part on the same bench: all
// sweeps of this lot and those of the study must name one and the same bench. The
// largest study counts. Only lots with enough measured again are read and fitted.
func repeatabilityElsewhere(ctx context.Context, db *store.DB, s *report.Sheet, method string) (map[fit.Key]gauge.Repeatability, error) {
	bench := benchOf(s)
	if bench == "" {
		return nil, nil
	}
	var best map[fit.Key]gauge.Repeatability
	most := 0.0
	err := db.View(ctx, func(tx *store.Tx) error {
		lots, err := tx.RepeatsOn(s.Part.ID, bench)
		if err != nil {
			return err
		}
		for _, l := range lots {
			// No lot has more degrees of freedom than times.
			if l.Lot == s.Lot.Name || l.Times < gauge.FewestDF || float64(l.Times) <= most {
				continue
			}
			known, err := studyOnBench(ctx, tx, s, l.Lot, bench, method)
			if err != nil {
				return err
			}
			for _, r := range known {
				if r.DF > most {
					best, most = known, r.DF
				}
			}
		}
		return nil
	})
	return best, err
}

// studyOnBench is the repeatability of one other lot, at the currents of s, from
// its sweeps on one bench.
func studyOnBench(ctx context.Context, tx *store.Tx, s *report.Sheet, name, bench, method string) (map[fit.Key]gauge.Repeatability, error) {
	other, sweeps, err := load(tx, name)
	if err != nil {
		return nil, err
	}
	onBench := map[string]bool{}
	for _, x := range other.Sessions {
		onBench[x.ID] = x.Bench == bench
	}
	sweeps = slices.DeleteFunc(sweeps, func(sw record.Sweep) bool { return !onBench[sw.SessionID] })
	placeSweeps(&other, sweeps)
	if repeatedIn(sittingsOf(&other)) < gauge.FewestDF {
		return nil, nil
	}
	other.TestCurrent, other.IdleCurrent = s.TestCurrent, s.IdleCurrent
	if err := fitSheet(ctx, &other, method, lastDigitsOf(&other)); err != nil {
		return nil, err
	}
	known := ownRepeatability(sittingsOf(&other))
	for key, r := range known {
		r.Basis += " of lot " + name
		known[key] = r
	}
	return known, nil
}

// benchOf is the bench on which all sweeps of the sheet were taken, "" where it is
// not known or there are several.
func benchOf(s *report.Sheet) string {
	of := map[string]string{}
	for _, x := range s.Sessions {
		of[x.ID] = x.Bench
	}
	bench, all := "", true
	counted(s, func(sw *report.Sweep) {
		b := of[sw.SessionID]
		all = all && b != "" && (bench == "" || bench == b)
		bench = b
	})
	if !all {
		return ""
	}
	return bench
}
