package lot

import (
	"math"

	"gatesill/fit/stats"
)

// How the limits are set. One quantity of a lot can raise a false alarm in three
// ways: the lot looks like two populations; a device is farther than k robust
// spreads from the median; a device fails the generalised ESD test among the
// others. The last is much the stronger in lots below forty devices, where the
// median absolute deviation is a poor measure of spread; the first two hold
// where many devices are odd. The levels of the parting and of the ESD test are
// fixed below, and k was found by simulation so that all three together, over
// all quantities looked at, happen in 1.9 % of normal lots: see tables.go and
// TestLongTables, which makes the tables again. Quantities are taken as
// independent, which errs on the side of fewer flags where they are not: gain
// factor and transconductance mostly say the same, and counting them as one would
// give limits 7 % nearer in lots of ten and 3 % in lots of forty.
const (
	totalLevel = 0.019 // of any false alarm in a lot
	splitLevel = 0.004 // of these, of being called two populations
	splitOther = 0.008 // of lots spread evenly or with tails like t5, of being called two populations
	esdLevel   = 0.008 // of these, nominal level of the ESD test
	knownLevel = 0.015 // where the spread is known from earlier lots
)

// fewest is the smallest number of devices that can judge one another.
const fewest = 8

// mostQuantities is what the tables cover; more are taken as that many.
const mostQuantities = 6

// DefaultLimit is the number of robust spreads beyond which one of n devices is
// flagged when that many quantities are looked at. NaN below 8 devices: they are
// too few to judge one another.
//
// Source: simulation of normal lots, at least 20,000 runs for each size; between
// the sizes interpolated over the logarithm of n. The values are a little above
// those for a limit alone at 2 % (one quantity: n = 10 5.9, 20 4.7, 40 4.2)
// because the parting and the ESD test have their share. Checked:
// TestLimitAlone, TestFalseAlarms.
func DefaultLimit(n, quantities int) float64 {
	if n < fewest {
		return math.NaN()
	}
	return lookup(limitTable, n, float64(quantities-1))
}

// curveLimit is the limit for one departure of the curve, of that many quantities
// in all with each departure taken as one. Lots are not parted by the curve, so it
// has the share of the parting too.
func curveLimit(n, quantities int) float64 {
	if n < fewest {
		return math.NaN()
	}
	// Columns for 2, 4, 8 ... quantities.
	return lookup(curveTable, n, math.Log2(float64(max(quantities, 2)))-1)
}

// splitCritical is the score that the parting of a lot of n must exceed where that
// many quantities are looked at.
func splitCritical(n, quantities int) float64 {
	return lookup(splitTable, n, float64(quantities-1))
}

// sizeRow is one row of a table: values for 1 to 6 quantities, or for 2 to 64.
type sizeRow struct {
	n      int
	values [mostQuantities]float64
}

// at gives the value of a column, between two columns on the straight line.
func (r *sizeRow) at(column float64) float64 {
	column = min(max(column, 0), mostQuantities-1)
	i := min(int(column), mostQuantities-2)
	return r.values[i] + (column-float64(i))*(r.values[i+1]-r.values[i])
}

// lookup interpolates over ln n, between rows that are both even or both odd
// while the sizes are small: a median of an odd number is another thing than one
// of an even number. Beyond the last row it goes on in the direction of the last
// two rows.
func lookup(table []sizeRow, n int, column float64) float64 {
	var a, b *sizeRow
	for i := range table {
		r := &table[i]
		if r.n == n {
			return r.at(column)
		}
		if n < sameParityBelow && r.n < sameParityBelow && (r.n-n)%2 != 0 {
			continue
		}
		if r.n > n && b != nil && b.n > n {
			break
		}
		a, b = b, r
	}
	at := (math.Log(float64(n)) - math.Log(float64(a.n))) / (math.Log(float64(b.n)) - math.Log(float64(a.n)))
	x, y := a.at(column), b.at(column)
	return x + at*(y-x)
}

// sameParityBelow is the size from which odd and even lots are alike.
const sameParityBelow = 60

// band is the range in which the devices of one family lie, on the judged scale.
type band struct {
	n        int
	mid, sd  float64 // median and robust spread
	k        float64
	low      float64
	high     float64
	narrowed bool // by the ESD test
	basis    string
}

// bandOf gives the limits of a column of at least 8 devices. k 0: the default
// for that many quantities.
func bandOf(c *column, k float64, quantities int) band {
	b := center(c)
	b.basis, b.k = BasisLot, k
	if k > 0 {
		b.widen(c, b.sd)
		return b
	}
	if b.k = DefaultLimit(b.n, quantities); isCurve(c.key) {
		b.k = curveLimit(b.n, quantities)
	}
	// A median distance of readings in steps is itself a whole number of steps,
	// up to half a step less than it should be: in a large lot that alone would
	// make false alarms.
	even := stats.MADScale * stats.MADSorted(withAbove(evened(c.sorted, c.step), c.numAbove()))
	b.widen(c, math.Max(b.sd, even))
	b.narrow(c, esdLevel/float64(quantities))
	b.allowSkew(c)
	b.takeInCrowd(c)
	return b
}

// center is median and robust spread of a column, with no limits yet.
func center(c *column) band {
	all := withAbove(c.sorted, c.numAbove())
	sd := stats.MADScale * stats.MADSorted(all)
	if !math.IsNaN(sd) {
		sd = math.Max(math.Max(sd, c.least), floorOf(c.step, c.usual))
	}
	return band{n: len(c.sorted), mid: stats.MedianSorted(all), sd: sd, low: math.Inf(-1), high: math.Inf(1)}
}

// withAbove puts devices above every value behind sorted values.
func withAbove(sorted []float64, above int) []float64 {
	if above == 0 {
		return sorted
	}
	all := append(make([]float64, 0, len(sorted)+above), sorted...)
	for range above {
		all = append(all, math.Inf(1))
	}
	return all
}

// evened spreads equal readings evenly over the step that they were rounded to.
func evened(sorted []float64, step float64) []float64 {
	if step == 0 {
		return sorted
	}
	out := make([]float64, 0, len(sorted))
	for i := 0; i < len(sorted); {
		j := i + 1
		for j < len(sorted) && sorted[j]-sorted[i] < step/2 {
			j++
		}
		for k := i; k < j; k++ {
			out = append(out, sorted[i]+step*((float64(k-i)+0.5)/float64(j-i)-0.5))
		}
		i = j
	}
	return out
}

// widen sets the limits k spreads of sd from the median, with half a step of
// slack: a reading may be that much nearer than it looks.
func (b *band) widen(c *column, sd float64) {
	b.low = b.mid - b.k*sd - c.step/2
	b.high = b.mid + b.k*sd + c.step/2
}

// narrow takes the limits in to what the generalised ESD test lets pass: the
// range, seen from the devices it leaves, in which one more device would not be
// taken out.
func (b *band) narrow(c *column, level float64) {
	n := len(c.sorted)
	lo, hi := stats.ESDInner(c.sorted, level, n/4)
	mean, sd := stats.MeanSD(c.sorted[lo:hi])
	sd = math.Max(math.Max(sd, c.least), math.Max(c.step/2, c.usual))
	left := float64(hi - lo)
	reach := stats.UpperT(level/(2*(left+1)), left-1)*sd*math.Sqrt(1+1/left) + c.step/2
	if low := mean - reach; low > b.low {
		b.low, b.narrowed = low, true
	}
	if high := mean + reach; high < b.high {
		b.high, b.narrowed = high, true
	}
}

// bandKnown gives the limits of a column from the spread of earlier lots, sd on
// the judged scale: each of n devices against the median of this lot, corrected
// for their number and that of the quantities.
//
// A spread found from some devices is itself uncertain: a median absolute
// deviation of N values is about as good as a standard deviation of 0.37 N.
func bandKnown(c *column, sd float64, devices int, k float64, quantities int) band {
	b := center(c)
	b.sd = math.Max(math.Max(sd, c.least), floorOf(c.step, c.usual))
	b.basis, b.k = BasisHistory, k
	if k == 0 {
		b.k = stats.UpperT(knownLevel/float64(2*max(b.n, 1)*quantities), 0.37*float64(devices))
	}
	b.widen(c, b.sd)
	b.allowSkew(c)
	return b
}

// outside reports whether device i lies beyond the limits. Where its own reading
// is worse than the spread of the lot, the limits are as many times as far; where
// part of its distance is another quantity's, the limits are farther by that.
func (b *band) outside(c *column, i int) bool {
	x := c.x[i]
	if math.IsNaN(x) {
		return false
	}
	if c.slack != nil {
		off := x - b.mid
		x = b.mid + math.Copysign(math.Max(0, math.Abs(off)-c.slack[i]), off)
	}
	if worse := c.u[i] / b.sd; worse > 1 {
		x = b.mid + (x-b.mid)/worse
	}
	return x < b.low || x > b.high
}

// distance of device i from the median in robust spreads, NaN where it has no
// value or the lot no spread.
func (b *band) distance(c *column, i int) float64 {
	d := c.x[i] - b.mid
	if d == 0 {
		return 0
	}
	return d / math.Max(b.sd, c.u[i])
}

// limit is the band in the unit of the quantity.
func (b *band) limit(c *column) Limit {
	l := Limit{K: b.k, Basis: b.basis, Low: c.raw(b.low), High: c.raw(b.high)}
	if l.Low > l.High {
		l.Low, l.High = l.High, l.Low
	}
	return l
}
