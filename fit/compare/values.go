package compare

import (
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// trim is the share left out at either end before a mean is taken.
const trim = 0.2

// values are what one lot gives to a comparison by one quantity.
type values struct {
	lot    *Lot
	counts Counts
	x      []float64 // of the devices that take part and have one, ±Inf where above; unit of the quantity
	of     []*Member // behind x
	plain  []float64 // the finite ones of x, ascending
	usual  float64   // median standard uncertainty within a session; 0: none known
}

// takesPart reports whether a device counts in the statistics of its lot.
func takesPart(m *Member) bool {
	return !m.Control && m.Aside == "" && !faulty(m.Result.State)
}

// faulty reports whether a device has a fault that is its own.
func faulty(s fit.State) bool {
	return s == fit.Open || s == fit.Shorted || s == fit.WrongWayRound || s == fit.Excluded
}

// infinity is what lies above every value: a p-channel part that never reaches its
// current would need a more negative gate voltage than any other.
func (l *Lot) infinity() float64 {
	if l.PChannel {
		return math.Inf(-1)
	}
	return math.Inf(1)
}

// valuesOf collects one quantity. Devices that stand apart from their family take
// part like all others.
func valuesOf(l *Lot, by fit.Key) *values {
	v := &values{lot: l}
	var u []float64
	for i := range l.Members {
		m := &l.Members[i]
		switch {
		case m.Control:
			v.counts.Control++
			continue
		case !takesPart(m):
			v.counts.Aside++
			continue
		}
		v.counts.N++
		if m.Flagged {
			v.counts.Flagged++
		}
		x, ux, above := lot.Read(&m.Result, by)
		switch {
		case m.Result.State != fit.Measured && m.Result.State != fit.Above:
			v.counts.Without++ // declined: a number there may not be believed
		case above:
			v.counts.Above++
			v.x, v.of = append(v.x, l.infinity()), append(v.of, m)
		case math.IsNaN(x):
			v.counts.Without++
		default:
			v.counts.WithValue++
			v.x, v.of = append(v.x, x), append(v.of, m)
			v.plain = append(v.plain, x)
			if ux > 0 && !math.IsInf(ux, 0) {
				u = append(u, ux)
			}
		}
	}
	slices.Sort(v.plain)
	if len(u) > 0 {
		v.usual = stats.Median(u)
	}
	return v
}

// trimmedMean is the trimmed mean of x whose standard error is not below what a
// standard deviation of least gives: where a display steps by more than the lot is
// wide, most readings are the same, and their scatter of 0 is not that of the lot.
func trimmedMean(x []float64, least float64) stats.Trimmed {
	t := stats.TrimmedMean(x, trim)
	if t.WinsorizedSD < least && t.DF > 0 {
		t.WinsorizedSD = least
		t.SE = least * perSD(t.N)
	}
	return t
}

// perSD is the standard error of the trimmed mean of n values per winsorised
// standard deviation. NaN for fewer than 2.
func perSD(n int) float64 {
	h := float64(n - 2*cut(n))
	if n < 2 {
		return math.NaN()
	}
	return math.Sqrt(float64(n-1) / (h * (h - 1)))
}

// cut is how many of n values are left out at either end.
func cut(n int) int { return int(trim*float64(n) + 1e-9) }

// least is the spread below which readings of both lots tell nothing: that of a
// step of the display, or their own uncertainty.
func least(a, b *values) float64 {
	return math.Max(stepSpread(append(slices.Clone(a.plain), b.plain...)), math.Max(a.usual, b.usual))
}

// stepSpread is the standard deviation of readings within one step of the display
// that was found from them, in any order; 0: no step was found.
func stepSpread(x []float64) float64 { return lot.StepOf(stats.Sorted(x)) / math.Sqrt(12) }
