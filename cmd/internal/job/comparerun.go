package job

import (
	"context"
	"fmt"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store"
)

// runOfLots lays the lots of the part out in time: the two that were compared, and
// every other that was measured as they were. Only lots with a known time have a
// place in it, and of lots that hold the same devices the first named; what was left
// out is said in one line. nil where fewer than three remain.
func (e *Env) runOfLots(ctx context.Context, ref, cand *report.Sheet, by fit.Key, o SheetOptions) (*compare.Trend, error) {
	var names []string
	if err := e.view(ctx, func(tx *store.Tx) (err error) {
		names, err = tx.LotsOfPart(ref.Part.ID)
		return err
	}); err != nil {
		return nil, err
	}
	r := run{by: by}
	r.add(comparedLot(ref))
	r.add(comparedLot(cand))
	for _, name := range names {
		if name == ref.Lot.Name || name == cand.Lot.Name {
			continue
		}
		s, err := e.candidateSheet(ctx, ref, name, o)
		if err != nil {
			return nil, err
		}
		if differ, _ := unlikeLots(ref, &s, by, false); differ == nil && hasAny(&s, by) {
			r.add(comparedLot(&s))
		} else {
			r.unlike = append(r.unlike, name)
		}
	}
	if len(r.lots) < 3 {
		return nil, nil
	}
	t, err := compare.TrendOf(r.lots, optionsOf(ref, by, CompareRequest{Level: 95}))
	if err != nil {
		return nil, failed("", "the run of lots: %w", err)
	}
	if left := r.leftOut(); left != "" {
		t.Text = append(t.Text, left)
	}
	return &t, nil
}

// run collects the lots of a run, and why others are not in it.
type run struct {
	by                     fit.Key
	lots                   []compare.Lot
	untimed, twice, unlike []string
}

// add takes a lot in, or notes why not.
func (r *run) add(l compare.Lot) {
	if l.At == "" {
		r.untimed = append(r.untimed, l.Name)
		return
	}
	for i := range r.lots {
		if compare.SameDevices(r.lots[i], l, r.by) {
			r.twice = append(r.twice, fmt.Sprintf("%s (those of %s)", l.Name, r.lots[i].Name))
			return
		}
	}
	r.lots = append(r.lots, l)
}

// leftOut says which lots of the part are not in the run; "" when all are.
func (r *run) leftOut() string {
	var parts []string
	for _, left := range []struct {
		why   string
		names []string
	}{
		{"without a time", r.untimed}, {"the same devices once more", r.twice}, {"not measured alike, or without a value", r.unlike},
	} {
		if len(left.names) > 0 {
			shown := left.names[:min(len(left.names), 8)]
			text := left.why + ": " + strings.Join(shown, ", ")
			if more := len(left.names) - len(shown); more > 0 {
				text += fmt.Sprintf(" and %d more", more)
			}
			parts = append(parts, text)
		}
	}
	if parts == nil {
		return ""
	}
	return "all lots of the part in the store were looked at; left out: " + strings.Join(parts, "; ")
}
