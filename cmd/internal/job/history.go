package job

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// history gives the spread of the same part in earlier lots that were measured
// under like conditions, for a lot too small to judge itself; nil when the lot
// is large enough or there is none. The other lots are fitted again from their
// sweeps, at this lot's currents: how much a curve departs at a current depends on
// the currents it is fitted over, so that no kept number would do.
func history(ctx context.Context, db *store.DB, s *report.Sheet, method string) (*lot.Known, error) {
	if measured := s.Counts().Measured; measured == 0 || !lot.TooFew(measured) {
		return nil, nil
	}
	like, currents := conditions(s), lot.Currents(lotDevices(s))
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
			if err := fitSheet(ctx, &other, method, lastDigitsOf(&other)); err != nil {
				return err
			}
			other.SortedBy = s.SortedBy
			judge(&other, lot.SpreadOptions{Currents: currents})
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
	counted(s, func(sw *report.Sweep) {
		if key := conditionOf(&sw.Condition); !slices.Contains(out, key) {
			out = append(out, key)
		}
	})
	slices.Sort(out)
	return out
}

// conditionOf tells circuit, held drain voltage and kind of current in words.
func conditionOf(c *record.Condition) string {
	words := []string{first(string(c.Circuit), "circuit not given")}
	if c.Circuit == record.Fixed {
		words = append(words, "V_DS "+first(c.VDS.String(), "not given"))
	}
	if c.Pulsed != "" {
		words = append(words, c.Pulsed)
	}
	return strings.Join(words, " ")
}

// counted calls f for every sweep that counts.
func counted(s *report.Sheet, f func(*report.Sweep)) {
	for i := range s.Devices {
		d := &s.Devices[i]
		for j := range d.Sweeps {
			if sw := &d.Sweeps[j]; !d.Excluded && !sw.Excluded && sw.Result.State != fit.Excluded {
				f(sw)
			}
		}
	}
}

// warmer is the difference of temperature from which devices are not measured
// alike: some ten millivolts at the slopes of [fit.UsualSlope].
const warmer = compare.Apart // K

// unlike says when the sweeps of a lot were not taken under like conditions:
// what then looks like spread, or like two populations, may be the bench's.
func unlike(s *report.Sheet) (fit.Warning, bool) {
	var differ []string
	if all := conditions(s); len(all) > 1 {
		differ = append(differ, strings.Join(all, "; "))
	}
	low, high := math.Inf(1), math.Inf(-1)
	counted(s, func(sw *report.Sweep) {
		if t, ok := sw.Condition.Temp.Get(); ok {
			low, high = min(low, t), max(high, t)
		}
	})
	if high-low > warmer {
		differ = append(differ, fmt.Sprintf("%.4g to %.4g °C", low, high))
	}
	if differ == nil {
		return fit.Warning{}, false
	}
	return fit.Warning{Code: fit.CodeUnlikeConditions, Text: "not all sweeps were taken under like conditions (" + strings.Join(differ, "; ") +
		"): differences between devices may be the bench's"}, true
}
