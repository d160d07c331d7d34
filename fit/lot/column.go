package lot

import (
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// column is one quantity over the devices of the lot, on the scale on which it
// is judged: voltages as they are (turned round for p-channel parts, so that
// greater always means more gate voltage), gains by their logarithm. On that
// scale a lot is near enough to a normal distribution, and a gain that is off by
// half counts the same at every size.
type column struct {
	key    fit.Key
	at     float64 // A, of a departure of the curve; 0: of another quantity
	log    bool
	sign   float64   // -1 for the voltages of p-channel parts
	v      []float64 // by device, as it is, in the unit of the quantity
	x      []float64 // by device, on the judged scale; NaN: no value
	u      []float64 // by device, standard uncertainty within the session; 0: not known
	slack  []float64 // by device, by how much x may be off besides; nil: not at all
	above  []bool    // by device: never reaches the current; nil: none can
	step   float64   // of the readings, 0: none seen
	least  float64   // spread below which nothing is told apart: a microvolt, or a millionth of a gain
	usual  float64   // median of the u that are known; 0: none is
	plain  []float64 // sign × v of the devices with a value, ascending
	sorted []float64 // x of the devices with a value, ascending
}

// raw turns a value on the judged scale back into the unit of the quantity.
func (c *column) raw(x float64) float64 {
	if c.log {
		return math.Exp(x)
	}
	return c.sign * x
}

// numAbove counts the devices that are above every value.
func (c *column) numAbove() int {
	n := 0
	for _, a := range c.above {
		if a {
			n++
		}
	}
	return n
}

// medianOf gives the median of the numbers above 0, 0 where there is none.
func medianOf(u []float64) float64 {
	var known []float64
	for _, v := range u {
		if v > 0 {
			known = append(known, v)
		}
	}
	if len(known) == 0 {
		return 0
	}
	slices.Sort(known)
	return stats.MedianSorted(known)
}

// floorOf is the smallest robust spread that can be told from readings with that
// step and uncertainty. When more than half of the readings are the same, all
// that is known is that half of the values lie within half a step, which is
// 1.4826/2 steps of standard deviation.
func floorOf(step, u float64) float64 {
	return math.Max(stats.MADScale*step/2, u)
}

// without is the column with some devices left out.
func (c *column) without(out []bool) *column {
	d := *c
	d.x = slices.Clone(c.x)
	d.above = slices.Clone(c.above)
	var gone []float64
	for i, yes := range out {
		if !yes {
			continue
		}
		if d.above != nil {
			d.above[i] = false
		}
		if !math.IsNaN(d.x[i]) {
			gone = append(gone, d.x[i])
			d.x[i] = math.NaN()
		}
	}
	slices.Sort(gone)
	d.sorted = make([]float64, 0, len(c.sorted))
	for _, v := range c.sorted {
		if len(gone) > 0 && v == gone[0] {
			gone = gone[1:]
		} else {
			d.sorted = append(d.sorted, v)
		}
	}
	d.plain = nil // only the whole lot is summed up
	return &d
}

// order fills the sorted slices.
func (c *column) order() {
	c.plain = make([]float64, 0, len(c.x))
	for i, x := range c.x {
		if !math.IsNaN(x) {
			c.plain = append(c.plain, c.sign*c.v[i])
		}
	}
	slices.Sort(c.plain)
	c.sorted = c.plain
	if c.log {
		c.sorted = make([]float64, len(c.plain))
		for i, v := range c.plain {
			c.sorted[i] = math.Log(math.Abs(v))
		}
		if len(c.plain) > 0 && c.plain[0] < 0 {
			slices.Sort(c.sorted)
		}
	}
}

// isGain reports whether a quantity is a measure of drive strength.
func isGain(k fit.Key) bool {
	return k == fit.KeyBeta || k == fit.KeyGmMax || k == fit.KeyGmIdle || k == KeySpan
}

// isThreshold reports whether a quantity is a gate voltage at a current.
func isThreshold(k fit.Key) bool { return k == fit.KeyVgsth || k == fit.KeyVgsIdle }

// isCurve reports whether a quantity is the departure of the curve at a current.
func isCurve(k fit.Key) bool { return strings.HasPrefix(string(k), "curve_at_") }

// counts reports whether a device takes part in the statistics of its lot.
func counts(d *Device) bool {
	return !d.Control && (d.Result.State == fit.Measured || d.Result.State == fit.Above)
}

// valueOf is a quantity of a device with its uncertainty; NaN: none. KeySpan is
// made from two spots. A largest transconductance at the end of a sweep says how
// far the sweep went, not what the device is: it is compared with no other.
func valueOf(r *fit.Result, k fit.Key) (x, u float64) {
	if k == KeySpan {
		a, b := r.Vgsth, r.VgsIdle
		return b.Value - a.Value, math.Hypot(a.U, b.U)
	}
	q := r.At(k)
	if k == fit.KeyGmMax && r.GmRising {
		q = nil
	}
	if q == nil || math.IsInf(q.Value, 0) {
		return math.NaN(), math.NaN()
	}
	return q.Value, q.U
}

// Read is a quantity of a device as lots are judged by it, with its standard
// uncertainty within the session: x is NaN where the device has none; above where
// it is known to exceed every value because it never reaches the current of a gate
// voltage. Whether the device takes part at all is not asked.
func Read(r *fit.Result, k fit.Key) (x, u float64, above bool) {
	x, u = valueOf(r, k)
	if math.IsInf(x, 0) {
		x = math.NaN()
	}
	above = math.IsNaN(x) && isThreshold(k) && (r.State == fit.Above || r.Has(fit.CodeAboveRange))
	return x, u, above
}

// columnOf reads one quantity off the devices that count. step is that of the
// readings, in the unit of the quantity; 0 or NaN: to be found.
func columnOf(devs []Device, k fit.Key, pchannel bool, step float64) *column {
	c := &column{key: k, log: isGain(k), sign: 1, least: 1e-6,
		v: make([]float64, len(devs)), x: make([]float64, len(devs)), u: make([]float64, len(devs))}
	if pchannel && !c.log {
		c.sign = -1
	}
	for i := range devs {
		c.x[i] = math.NaN()
		if !counts(&devs[i]) {
			continue
		}
		v, u, _ := Read(&devs[i].Result, k)
		if math.IsNaN(v) || c.log && v == 0 {
			continue // no gain is 0
		}
		c.v[i], c.x[i] = v, c.sign*v
		if c.log {
			// A gain may have the sign of its device's currents.
			c.x[i], u = math.Log(math.Abs(v)), u/math.Abs(v)
		}
		if u > 0 && !math.IsInf(u, 0) {
			c.u[i] = u
		}
	}
	c.order()
	c.usual = medianOf(c.u)
	c.step = step
	if !(step > 0) || math.IsInf(step, 0) {
		c.step = 0
		if k != KeySpan { // the step of a difference is that of its parts
			c.step = StepOf(c.plain)
		}
	}
	if c.log && c.step > 0 && len(c.plain) > 0 {
		c.step /= math.Abs(stats.MedianSorted(c.plain))
	}
	if isThreshold(k) {
		c.markAbove(devs)
	}
	return c
}

// markAbove finds the devices that never reach the current of the quantity. A
// quantity that no device has was not asked for.
func (c *column) markAbove(devs []Device) {
	c.above = make([]bool, len(devs))
	for i := range devs {
		_, _, above := Read(&devs[i].Result, c.key)
		c.above[i] = counts(&devs[i]) && above
	}
}

// summary of the column, in the unit of the quantity. For gains it is taken of
// the values themselves, not of their logarithms.
func (c *column) summary() Summary {
	nan := math.NaN()
	s := Summary{N: len(c.sorted), Mean: nan, SD: nan, Median: nan, RobustSD: nan, Min: nan, Max: nan}
	if s.N == 0 {
		s.Above = c.numAbove()
		return s
	}
	plain := slices.Clone(c.plain)
	s.Mean, s.SD = stats.MeanSD(plain)
	s.Min, s.Max = plain[0], plain[s.N-1]
	s.Above = c.numAbove()
	for range s.Above {
		plain = append(plain, math.Inf(1))
	}
	s.Median = stats.MedianSorted(plain)
	s.Step = c.step
	u := c.usual
	if c.log {
		s.Step *= math.Abs(s.Median)
		u *= math.Abs(s.Median)
	}
	if s.N > 1 {
		if mad := stats.MADSorted(plain); !math.IsNaN(mad) {
			s.RobustSD = math.Max(stats.MADScale*mad, floorOf(s.Step, u))
		}
	}
	if c.sign < 0 {
		s.Mean, s.Median, s.Min, s.Max = -s.Mean, -s.Median, -s.Max, -s.Min
	}
	return s
}
