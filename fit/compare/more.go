package compare

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

const (
	// power is the chance with which the number of devices given would tell.
	power = 0.8
	// mostDevices is where a number is no longer worth giving.
	mostDevices = 100_000
)

// more says how many devices a lot would tell, or why no number would.
//
// The number is that with which a lot without any shift would be found inside the
// margin with a chance of 0.8: the least n for which
//
//	P(|T| < margin/se(n) - t(0.95, ν(n))) ≥ 0.8,  se² = k σ_w² (n-1)/(h(h-1)) + u²
//
// with T Student's t of ν degrees of freedom, h of n values kept, σ_w the winsorised
// standard deviation (k = 2, from both lots together; by serial k = 1, of the
// differences) and u the common error, which more devices do not lessen. The shift
// that was seen does not enter. Checked: TestMoreTells.
func (c *comparing) more() {
	o, u := &c.out, c.out.Common.U
	if math.IsNaN(u) {
		u = 0
	}
	u = math.Hypot(u, o.TempU)
	what, k := "devices a lot", 2.0
	var scatter float64 // of one value of a normal lot that is winsorised like this
	if c.pairs != nil {
		d := trimmedMean(c.pairs.d, 0)
		what, k = "pairs", 1
		scatter = d.WinsorizedSD / winsorised(d.N)
	} else {
		a, b := trimmedMean(c.ref.x, c.least), trimmedMean(c.cand.x, c.least)
		va, vb := a.WinsorizedSD/winsorised(a.N), b.WinsorizedSD/winsorised(b.N)
		scatter = math.Sqrt((va*va*float64(a.N-1) + vb*vb*float64(b.N-1)) / float64(a.N+b.N-2))
	}
	m := c.opt.Margin
	if limit := tells(m/u, math.Inf(1)); u > 0 && limit < power {
		o.MoreText = fmt.Sprintf("no number of devices would tell: what bench and temperature add to one lot and not to the other is uncertain by %s (one standard uncertainty) and no less with more devices; measure both lots in one session on one bench, or control parts with both", millivolts(u))
		return
	}
	if o.Low > 0 || o.High < 0 {
		o.MoreText = fmt.Sprintf("the shift is not 0 and lies near the margin: more devices tell only if the true shift stands well off %s", millivolts(math.Copysign(m, o.Shift)))
		return
	}
	n := enough(m, scatter, k, u)
	have := min(len(c.ref.x), len(c.cand.x))
	if c.pairs != nil {
		have = len(c.pairs.d)
	}
	switch {
	case math.Abs(o.Shift) > m:
		o.MoreText = "the shift seen lies outside the margin: more devices would rather show that"
		if n > have {
			o.More = n
			o.MoreText += fmt.Sprintf("; were the lots truly alike, %d %s would show it with a chance of 80 %%", n, what)
		}
	case n == 0:
		o.MoreText = fmt.Sprintf("more than %d %s would be needed", mostDevices, what)
	case n <= have:
		o.MoreText = fmt.Sprintf("%d %s would have told with a chance of 80 %% if there were no shift: there may be one, near the margin, and more devices help only if it stands well off", n, what)
	default:
		o.More = n
		o.MoreText = fmt.Sprintf("%d %s would show, with a chance of 80 %%, that the shift is inside the margin, if there is none", n, what)
	}
}

// tells is the chance that a shift of 0 is found inside a margin of that many
// standard errors.
func tells(margin, df float64) float64 {
	room := margin - stats.UpperT((1-marginLevel)/2, df)
	if !(room > 0) {
		return 0
	}
	return 1 - 2*stats.TUpper(room, df)
}

// enough is the least number of devices a lot that tells; 0: more than mostDevices.
func enough(margin, scatter, lots, u float64) int {
	if lots == 2 && u == 0 {
		n := stats.YuenEquivalenceSize(0, -margin, margin, scatter, trim, (1-marginLevel)/2, power)
		if n == 0 || n > mostDevices {
			return 0
		}
		return max(fewest, n)
	}
	chance := func(n int) float64 {
		e := estimate{}
		sd := scatter * winsorised(n)
		for range int(lots) {
			df := float64(n - 2*cut(n) - 1)
			if lots == 1 {
				df *= 1 - float64(cut(n))/float64(n) // as within has them
			}
			e.with(sd*perSD(n), df)
		}
		e.with(u, math.Inf(1))
		return tells(margin/e.se(), e.df())
	}
	low, high := fewest-1, fewest
	for chance(high) < power {
		if high >= mostDevices {
			return 0
		}
		low, high = high, min(2*high, mostDevices)
	}
	for high-low > 1 {
		if mid := (low + high) / 2; chance(mid) < power {
			low = mid
		} else {
			high = mid
		}
	}
	return high
}

// winsorised is the winsorised standard deviation of n values that lie as those of
// a standard normal distribution do: what trimming leaves of it at that n.
func winsorised(n int) float64 {
	n = min(n, 200) // beyond, it no longer changes
	x := make([]float64, n)
	for i := range x {
		x[i] = stats.NormalQuantile((float64(i) + 0.5) / float64(n))
	}
	t := stats.TrimmedMean(x, trim)
	return t.WinsorizedSD / stats.SD(x)
}
