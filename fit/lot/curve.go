package lot

import (
	"math"
	"math/bits"
	"slices"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// How the curve of a device is judged. Its threshold shifts the whole curve along
// the gate voltage and its gain factor stretches it along the current; both are
// judged already, and what they leave is judged here, current by current:
//
//	departure(I) = V(I) - a - G(I / g)
//
// G is the lot's curve, the median of all; a and g, the shift and the gain of the
// device against the lot, are those of least squares over its own currents.
// Nothing is supposed of the law of the curve but that a gain factor multiplies
// the current. Each departure is a sum of readings with fixed weights, so in a
// normal lot it is normal, and its limits are those of any other quantity; all
// currents together count as one quantity, shared out among as many as are left
// free by a and g. A root of mean square or a greatest departure as the measure
// would have limits that depend on how the departures hang together, which
// differs from lot to lot and cannot be told from ten devices; two contrasts over
// all currents (bend at the top, bend at the foot) miss a kink between them.
const (
	fewestLevels = 4 // currents, of a curve that is judged: two more than are fitted
	mostOfLot    = 4 // a current counts that all but one in so many curves have
)

// curves are the transfer curves of the lot's devices at the same currents, with
// what threshold and gain leave of them. Voltages of p-channel parts are turned
// round, so that greater is always more gate voltage.
type curves struct {
	at     []float64   // A, ascending
	mask   []uint32    // by device: which of them it has
	v, u   [][]float64 // V, by device and current; 0: none, or u not known
	weight []float64   // by current
	shape  []float64   // V, the lot's curve, but for a constant
	slope  []float64   // V, dV/dln I of the lot's curve
	bow    []float64   // V, I d²V/d(√I)² of the lot's curve
	ohm    float64     // ohm, what of the lot's curve goes with the current at its top
	gain   []float64   // by device: e, see depart
	left   [][]float64 // V, by device and current: departures
	leftU  [][]float64 // V, their standard uncertainty within the session
	slack  [][]float64 // V, by how much the effect of the gain may be another
	fits   map[uint32]*curveFit
}

// Currents gives the currents, A, at which the curves of a lot are compared: those
// of [fit.LevelCurrents] that at least three quarters of the curves reach, nil
// where fewer than four are left. Curves of fewer than four levels are not
// counted.
func Currents(devs []Device) []float64 {
	count := make([]int, len(fit.LevelCurrents))
	curves := 0
	for i := range devs {
		d := &devs[i]
		if !counts(d) || len(d.Result.Levels) < fewestLevels {
			continue
		}
		curves++
		for _, l := range d.Result.Levels {
			if k, ok := slices.BinarySearch(fit.LevelCurrents, l.I); ok {
				count[k]++
			}
		}
	}
	var out []float64
	for k, n := range count {
		if n > 0 && mostOfLot*(curves-n) <= curves {
			out = append(out, fit.LevelCurrents[k])
		}
	}
	if len(out) < fewestLevels {
		return nil
	}
	return out
}

// curvesOf compares the curves of the devices that count, at the currents given
// (A, ascending, of [fit.LevelCurrents]); nil where there are none.
//
// Source: least squares, common practice; that shift and gain are taken out and
// each current is judged for itself was chosen by simulation. Checked:
// TestCurveFindsDamage, TestCurveLeavesShiftAndGain, TestCurveOfOneLaw,
// TestCurveSentence, TestFalseAlarms.
func curvesOf(devs []Device, at []float64, pchannel bool) *curves {
	if len(at) < fewestLevels || len(at) > 32 {
		return nil
	}
	c := &curves{at: at, fits: map[uint32]*curveFit{}}
	any := false
	for i := range devs {
		mask, v, u := levelsOf(&devs[i], at, pchannel)
		c.mask, c.v, c.u = append(c.mask, mask), append(c.v, v), append(c.u, u)
		any = any || mask != 0
	}
	if !any {
		return nil
	}
	c.weigh()
	c.firstShape()
	c.depart()
	for k := range at {
		if m := c.median(func(i int) float64 { return c.left[i][k] }, 1<<k); !math.IsNaN(m) {
			c.shape[k] += m
		}
	}
	c.depart()
	c.doubt()
	return c
}

// levelsOf reads the levels of a device; mask 0 where it takes no part or has too
// few.
func levelsOf(d *Device, at []float64, pchannel bool) (mask uint32, v, u []float64) {
	v, u = make([]float64, len(at)), make([]float64, len(at))
	if !counts(d) {
		return 0, v, u
	}
	for _, l := range d.Result.Levels {
		k, ok := slices.BinarySearch(at, l.I)
		if !ok || math.IsNaN(l.Vg) || math.IsInf(l.Vg, 0) {
			continue
		}
		mask |= 1 << k
		v[k] = l.Vg
		if pchannel {
			v[k] = -l.Vg
		}
		if l.U > 0 && !math.IsInf(l.U, 0) {
			u[k] = l.U
		}
	}
	if bits.OnesCount32(mask) < fewestLevels {
		mask = 0
	}
	return mask, v, u
}

// median over the devices that have the currents of need.
func (c *curves) median(of func(i int) float64, need uint32) float64 {
	all := make([]float64, 0, len(c.mask))
	for i, m := range c.mask {
		if m&need == need {
			all = append(all, of(i))
		}
	}
	slices.Sort(all)
	return stats.MedianSorted(all)
}

// weigh gives every current the weight of its usual uncertainty; none counts for
// more than one of the median uncertainty, for what devices really differ in is
// not in u.
func (c *curves) weigh() {
	u := make([]float64, len(c.at))
	c.weight = make([]float64, len(c.at))
	for k := range u {
		var all []float64
		for i := range c.u {
			all = append(all, c.u[i][k])
		}
		u[k] = medianOf(all)
	}
	usual := medianOf(u)
	for k := range u {
		c.weight[k] = 1
		if u[k] > usual {
			c.weight[k] = usual / u[k] * (usual / u[k])
		}
	}
}

// firstShape takes medians of the differences from a current in the middle, so
// that the spread of thresholds does not come in.
func (c *curves) firstShape() {
	c.shape = make([]float64, len(c.at))
	mid := len(c.at) / 2
	for k := range c.shape {
		c.shape[k] = c.median(func(i int) float64 { return c.v[i][k] - c.v[i][mid] }, 1<<k|1<<mid)
		if math.IsNaN(c.shape[k]) {
			c.shape[k] = 0
		}
	}
}

// derive takes slope and bow of the lot's curve from the parabola in √I through
// three neighbouring currents, which a square law with series resistance is, and
// one with mobility degradation to first order.
func (c *curves) derive() {
	n := len(c.at)
	c.slope, c.bow = make([]float64, n), make([]float64, n)
	for k := range c.at {
		m := min(max(k, 1), n-2)
		r := [3]float64{math.Sqrt(c.at[m-1]), math.Sqrt(c.at[m]), math.Sqrt(c.at[m+1])}
		first := (c.shape[m] - c.shape[m-1]) / (r[1] - r[0])
		second := ((c.shape[m+1]-c.shape[m])/(r[2]-r[1]) - first) / (r[2] - r[0])
		s := math.Sqrt(c.at[k])
		c.slope[k] = s / 2 * (first + second*(2*s-r[0]-r[1]))
		c.bow[k] = s * s * 2 * second
		c.ohm = math.Max(0, second)
	}
	clear(c.fits)
}

// depart finds shift and gain of every device and what they leave. Where the
// lot's curve does not rise there is no gain, and the device takes no part.
//
// In √I a gain g is a stretch: G(I/g) is the parabola at (1 - e/2)√I, with
// 1 - e/2 = 1/√g, that is G - e slope + e²/8 bow. e is found by least squares, the
// bow from the e before.
func (c *curves) depart() {
	c.derive()
	n := len(c.at)
	c.left, c.gain = make([][]float64, len(c.v)), make([]float64, len(c.v))
	y := make([]float64, n)
	for i, mask := range c.mask {
		if mask == 0 {
			continue
		}
		f := c.fitOf(mask)
		if !(f.rise > 0) {
			c.mask[i] = 0
			continue
		}
		var e float64
		for range 4 {
			for k := range y {
				y[k] = c.v[i][k] - c.shape[k] - e*e/8*c.bow[k]
			}
			e = min(max(-f.dot(f.line, y)/f.rise, -2), 1.4) // gains from a quarter to eleven times
		}
		c.left[i], c.gain[i] = f.residual(y), e
	}
}

// doubt finds how far the departures may be off: by the readings, and by a series
// resistance, which does not go with the gain factor. How much of the bow at the
// top of the lot's curve is one is not known: slack is what all of it being one
// would make.
func (c *curves) doubt() {
	n := len(c.at)
	c.leftU, c.slack = make([][]float64, len(c.v)), make([][]float64, len(c.v))
	y := make([]float64, n)
	for i, mask := range c.mask {
		if mask == 0 {
			continue
		}
		f, e := c.fitOf(mask), c.gain[i]
		c.leftU[i] = make([]float64, n)
		for k := range y {
			var sum float64
			for j, w := range f.keeps[k] {
				sum += w * w * c.u[i][j] * c.u[i][j]
			}
			c.leftU[i][k] = math.Sqrt(sum)
			y[k] = (e - e*e/4) * c.ohm * c.at[k]
		}
		c.slack[i] = f.residual(y)
	}
}

// curveFit is the fit of shift and gain over some of the currents: orthogonal by
// their weights, 0 elsewhere.
type curveFit struct {
	weight []float64
	total  float64
	line   []float64   // slope of the lot's curve less its mean
	rise   float64     // weighted sum of squares of line; 0: no gain to be found
	keeps  [][]float64 // by current, what its residual takes of the reading at each
}

func (c *curves) fitOf(mask uint32) *curveFit {
	if f := c.fits[mask]; f != nil {
		return f
	}
	n := len(c.at)
	f := &curveFit{weight: make([]float64, n), line: make([]float64, n), keeps: make([][]float64, n)}
	var mean float64
	for k, w := range c.weight {
		if mask>>k&1 == 1 {
			f.weight[k] = w
			f.total += w
			mean += w * c.slope[k]
		}
	}
	mean /= f.total
	for k := range f.line {
		if mask>>k&1 == 1 {
			f.line[k] = c.slope[k] - mean
		}
	}
	f.rise = f.dot(f.line, f.line)
	if mean <= 0 {
		f.rise = 0
	}
	for k := range f.keeps {
		f.keeps[k] = make([]float64, n)
	}
	for j := range n {
		one := make([]float64, n)
		one[j] = 1
		for k, r := range f.residual(one) {
			f.keeps[k][j] = r
		}
	}
	c.fits[mask] = f
	return f
}

func (f *curveFit) dot(a, b []float64) float64 {
	var s float64
	for k, w := range f.weight {
		s += w * a[k] * b[k]
	}
	return s
}

// residual of y from the fit, 0 at currents that are not in it.
func (f *curveFit) residual(y []float64) []float64 {
	r := make([]float64, len(y))
	var mean float64
	for k, w := range f.weight {
		mean += w * y[k]
	}
	mean /= f.total
	along := f.dot(f.line, y) / f.rise
	for k, w := range f.weight {
		if w > 0 {
			r[k] = y[k] - mean - along*f.line[k]
		}
	}
	return r
}

// columns of the departures, one for each current.
func (c *curves) columns() []*column {
	out := make([]*column, len(c.at))
	for k, at := range c.at {
		n := len(c.mask)
		col := &column{key: CurveKey(at), at: at, sign: 1, least: 1e-6,
			v: make([]float64, n), x: make([]float64, n), u: make([]float64, n), slack: make([]float64, n)}
		for i, mask := range c.mask {
			col.x[i] = math.NaN()
			if mask>>k&1 == 1 {
				col.v[i], col.x[i], col.u[i], col.slack[i] = c.left[i][k], c.left[i][k], c.leftU[i][k], math.Abs(c.slack[i][k])
			}
		}
		col.order()
		col.usual = medianOf(col.u)
		out[k] = col
	}
	return out
}
