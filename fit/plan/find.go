package plan

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

// FindRequest asks how many parts find a bad one, or what n parts can.
type FindRequest struct {
	Bad        float64 // share assumed to be bad; NaN: none assumed
	BadCount   int     // number assumed to be bad, instead of a share; 0: none
	Of         int     // parts in the lot; 0: a lot so large that it does not matter
	Confidence float64 // 1 - risk of missing
	N          int     // parts measured; 0: how many is asked
	Found      int     // bad ones among them
}

// Find is the answer to a [FindRequest].
type Find struct {
	FindRequest
	Needed   int        // parts that find one of the bad with the confidence; 0: no bad share was given
	Finds    float64    // chance that N parts find at least one; NaN
	Possible []Possible // what may be bad after N with Found bad ones; none without N
	Sizes    []ZeroRow  // how many all-good parts prove what; only where neither Bad nor N was given
}

// Possible is what cannot be excluded with a confidence.
type Possible struct {
	Confidence float64
	Share      float64 // upper bound of the share that is bad
	Count      int     // upper bound of the number, those found included; -1: the lot has no size
}

// ZeroRow is how many parts, all good, show that less than a share is bad.
type ZeroRow struct {
	Bad   float64 // share
	Count int     // the same in parts of the lot; 0: the lot has no size
	N     []int   // for each of [ZeroConfidences]
}

// ZeroConfidences are those of the columns of a table of all-good samples.
var ZeroConfidences = []float64{0.90, 0.95, 0.99}

// ToFind answers a [FindRequest]. Exact: hypergeometric where the lot has a size,
// else binomial. A share of a lot is rounded up to whole parts. Errors: [Invalid].
// Checked: TestFind.
func ToFind(r FindRequest) (*Find, error) {
	f := &Find{FindRequest: r, Finds: math.NaN()}
	if err := r.check(); err != nil {
		return nil, err
	}
	if r.Of > 0 && r.BadCount == 0 && !math.IsNaN(r.Bad) {
		f.BadCount = partsOf(r.Bad, r.Of)
	}
	if f.BadCount > 0 {
		f.Bad = float64(f.BadCount) / float64(r.Of)
	}
	switch {
	case f.BadCount > 0:
		f.Needed = stats.ZeroFailureSizeOfLot(f.BadCount, r.Of, r.Confidence)
		if r.N > 0 {
			f.Finds = stats.FindsBad(r.N, f.BadCount, r.Of)
		}
	case !math.IsNaN(f.Bad):
		f.Needed = stats.ZeroFailureSize(f.Bad, r.Confidence)
		if f.Needed == 0 {
			return nil, &Invalid{"bad", percent(f.Bad) + " is too small a share", "a larger share, or the size of the lot: --of 200"}
		}
		if r.N > 0 {
			f.Finds = stats.BinomialUpper(1, r.N, f.Bad)
		}
	case r.N == 0:
		f.Sizes = zeroTable(r.Of)
	}
	if r.N > 0 {
		for _, c := range confidences(r.Confidence) {
			p := Possible{Confidence: c, Share: stats.BadBound(r.Found, r.N, c), Count: -1}
			if r.Of > 0 {
				p.Count = stats.BadBoundOfLot(r.Found, r.N, r.Of, c)
				p.Share = float64(p.Count) / float64(r.Of)
			}
			f.Possible = append(f.Possible, p)
		}
	}
	return f, nil
}

func (r *FindRequest) check() error {
	if err := firstError(
		fraction("risk", 1-r.Confidence, "--risk 5%"),
		atLeast("of", r.Of, 1, "a lot has parts"), atMost("of", r.Of),
		atLeast("n", r.N, 1, "at least one part has to be measured"), atMost("n", r.N),
	); err != nil {
		return err
	}
	if !math.IsNaN(r.Bad) {
		if err := fraction("bad", r.Bad, "--bad 10%, or a number: --bad 20 --of 200"); err != nil {
			return err
		}
	}
	switch {
	case r.BadCount > 0 && r.Of == 0:
		return &Invalid{"bad", fmt.Sprintf("%d bad parts of how many?", r.BadCount), fmt.Sprintf("--bad %d --of 200", r.BadCount)}
	case r.BadCount > r.Of:
		return &Invalid{"bad", fmt.Sprintf("%d bad parts do not fit into a lot of %d", r.BadCount, r.Of), fmt.Sprintf("--bad from 1 to %d", r.Of)}
	case r.BadCount < 0:
		return &Invalid{"bad", fmt.Sprintf("%d bad parts cannot be", r.BadCount), "--bad 1 or more"}
	case r.Of > 0 && r.N > r.Of:
		return &Invalid{"n", fmt.Sprintf("%d parts cannot be taken from a lot of %d", r.N, r.Of), fmt.Sprintf("--n from 1 to %d", r.Of)}
	case r.Found < 0 || r.Found > 0 && r.N == 0 || r.Found > r.N:
		return &Invalid{"found", fmt.Sprintf("%d bad ones cannot be among %d measured", r.Found, r.N), "--n 22 --found 1"}
	case r.BadCount > 0 && r.Found > r.BadCount:
		return &Invalid{"found", fmt.Sprintf("%d bad ones found, and only %d assumed", r.Found, r.BadCount), "leave --bad out"}
	}
	return nil
}

// partsOf is a share of a lot in whole parts, rounded up.
func partsOf(share float64, of int) int {
	return max(1, int(math.Ceil(share*float64(of)-1e-9)))
}

// confidences are the usual ones, and the one asked for in its place.
func confidences(asked float64) []float64 {
	out := []float64{}
	done := false
	for _, c := range ZeroConfidences {
		if !done && asked < c-1e-9 {
			out = append(out, asked)
			done = true
		}
		done = done || math.Abs(asked-c) <= 1e-9
		out = append(out, c)
	}
	if !done {
		out = append(out, asked)
	}
	return out
}

func zeroTable(of int) []ZeroRow {
	var rows []ZeroRow
	for _, bad := range []float64{0.20, 0.10, 0.05, 0.02, 0.01} {
		row := ZeroRow{Bad: bad}
		if of > 0 {
			row.Count = partsOf(bad, of)
			if len(rows) > 0 && rows[len(rows)-1].Count == row.Count {
				continue
			}
			row.Bad = float64(row.Count) / float64(of)
		}
		for _, c := range ZeroConfidences {
			n := stats.ZeroFailureSize(bad, c)
			if of > 0 {
				n = stats.ZeroFailureSizeOfLot(row.Count, of, c)
			}
			row.N = append(row.N, n)
		}
		rows = append(rows, row)
	}
	return rows
}
