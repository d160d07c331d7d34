package job

import (
	"context"
	"fmt"
	"math"
	"slices"

	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// history gives the spread of the same part in earlier lots that were measured
// under like conditions, for a lot too small to judge itself; nil when the lot
// is large enough or there is none.
func history(ctx context.Context, db *store.DB, s *report.Sheet, method string) (*lot.Known, error) {
	if measured := s.Counts().Measured; measured == 0 || !lot.TooFew(measured) {
		return nil, nil
	}
	like := conditions(s)
	var past []lot.Spread
	err := db.View(ctx, func(tx *store.Tx) error {
		names, err := tx.LotsOfPart(s.Part.ID)
		if err != nil {
			return err
		}
		for _, name := range names {
			if name == s.Lot.Name {
				continue
			}
			other, sweeps, err := load(tx, name)
			if err != nil {
				return err
			}
			placeSweeps(&other, sweeps)
			if !slices.Equal(conditions(&other), like) {
				continue
			}
			other.TestCurrent, other.IdleCurrent = s.TestCurrent, s.IdleCurrent
			if err := fitSheet(ctx, &other, method); err != nil {
				return err
			}
			other.SortedBy = s.SortedBy
			judge(&other, 0, nil)
			past = append(past, other.Spread)
		}
		return nil
	})
	return lot.Pool(past), err
}

// conditions are what must be alike for the spread of one lot to hold for
// another: circuit, drain voltage where it is held, dc or pulsed. Temperature
// shifts a lot as a whole and does not widen it.
func conditions(s *report.Sheet) []string {
	var out []string
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			c := s.Devices[i].Sweeps[j].Condition
			key := string(c.Circuit) + " " + c.Pulsed
			if c.Circuit == record.Fixed {
				key += fmt.Sprintf(" %.2g", c.VDS.Or(math.NaN()))
			}
			if !slices.Contains(out, key) {
				out = append(out, key)
			}
		}
	}
	slices.Sort(out)
	return out
}
