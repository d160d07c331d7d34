package fit

import "math"

// What is known of inputs that no statement tells, typical values of power parts
// (common practice, no source).
const (
	// kappa is by how much the threshold falls, V/K, and alpha the power of the
	// absolute temperature by which the gain factor does: V_T(T) = V_T(T0) - kappa
	// (T - T0), beta(T) = beta(T0) (T/T0)^-alpha.
	kappa = 4e-3
	alpha = 1.7
	// leakPerKelvin is by what share a leakage grows: twice in 10 K.
	leakPerKelvin = math.Ln2 / 10
	// noted is the standard uncertainty, K, of a temperature that was recorded; a part
	// of which none was is taken to be within roomHalf of roomTemperature, deg C.
	noted           = 1.0
	roomTemperature = 23.0
	roomHalf        = 3.0
	// resistorPerKelvin is by what share a load resistor changes.
	resistorPerKelvin = 200e-6
	// burdenShare is how well the burden of an ammeter with its leads and fuse is
	// known, standard uncertainty as a share.
	burdenShare = 0.2
)

// warmth is the temperature of the part, K, and its standard uncertainty.
func (w *work) warmth() (t, u float64) {
	if finiteNumber(w.s.Temperature) {
		return w.s.Temperature + 273.15, noted
	}
	return roomTemperature + 273.15, roomHalf / math.Sqrt(3)
}

// gatePerKelvin is dV_GS/dT at constant current, V/K, of a part that carries i with
// slope g_m = i/iOverGm at temperature t, K.
//
// With I = beta f(V_GS - V_T), whatever f is: dV_GS = dV_T - (I/g_m) d ln beta, so
//
//	dV_GS/dT = -kappa + (alpha/T) I/g_m
//
// and with the square law, I/g_m = v/2, it is -kappa + alpha v/(2 T). In weak
// inversion, where f itself depends on the temperature, the second term is small
// and kappa is what counts. Source: V_T(T) and beta(T) as in I. M. Filanovsky and
// A. Allam, IEEE Trans. Circuits Syst. I 48(7), 2001 (from memory), re-derived.
// Checked: TestGatePerKelvin.
func gatePerKelvin(iOverGm, t float64) float64 { return -kappa + alpha/t*iOverGm }

// onScaleOfLoad reports whether the currents used are on the scale of the load
// resistor.
func (w *work) onScaleOfLoad() bool { return w.onLoad || !w.ammeter }

// parts are the two parts of an accuracy statement at a reading x as standard
// uncertainties: the counts, an offset, and what is left of the whole beside
// them, so that their squares add up to that of [Accuracy.absolute]: a statement is
// one limit, to which its parts add up. NaN without a statement.
func (a Accuracy) parts(x float64) (gain, offset float64) {
	whole := a.absolute(x)
	if math.IsNaN(whole) {
		return whole, whole
	}
	d := a.Divisor
	if !(d > 0) {
		d = math.Sqrt(3)
	}
	offset = a.Counts * a.Resolution / d
	return math.Sqrt(math.Max(0, whole*whole-offset*offset)), offset
}

// scale is how well the scale of the currents is known at one current.
type scale struct {
	gain     float64 // share, of the meter
	offset   float64 // A, of the meter
	resistor float64 // share, R_L against what was stated; 0 where it plays no part
}

// scaleAt is the scale of a current i, by load resistor or by ammeter; NaN where
// there is no statement. A current that is the difference of supply and drain
// voltage, both near V_DD, holds the error of one meter twice.
func (w *work) scaleAt(i float64, onLoad bool) scale {
	i = math.Abs(i)
	if !onLoad {
		gain, offset := rangeFor(w.s.Current, i).parts(i)
		return scale{gain: gain / i, offset: offset}
	}
	v, times := i*w.s.RL, 1.0
	ranges, x := w.s.Load, v
	if w.byDrain {
		ranges, x, times = w.s.Drain, w.vdd, math.Sqrt2
	}
	gain, offset := rangeFor(ranges, x).parts(x)
	return scale{gain: times * gain / v, offset: times * offset / w.s.RL, resistor: w.s.RLTol / math.Sqrt(3)}
}

// addGate adds the statement of the gate meter to the budget of a gate voltage v, V.
func (w *work) addGate(b *budget, v float64) {
	gain, offset := rangeFor(w.s.Gate, v).parts(v)
	size := math.Abs(v)
	if size == 0 {
		size = 1
	}
	b.add(InGateGain, gain/size, size)
	b.add(InGateOffset, offset, 1)
}

// addCurrent adds the scale of the currents, at current i, A, to the budget of a
// quantity that changes by gain per unit of relative current, and by offset per A
// that all readings are off by.
func (w *work) addCurrent(b *budget, i, gain, offset float64) {
	load := w.onScaleOfLoad()
	s := w.scaleAt(i, load)
	b.add(InCurrentGain, s.gain, gain)
	b.add(InCurrentOffset, s.offset, offset)
	b.add(InTwoCurrents, w.doubt, gain)
	if !load {
		return
	}
	b.add(InResistor, s.resistor, gain)
	if s.resistor != 0 { // a resistor without tolerance is no real one
		_, u := w.warmth()
		b.add(InResistorDrift, resistorPerKelvin*u, gain)
	}
}

// pairingCovers is how many standard uncertainties the bound of a pairing is taken for.
// The bound holds the worst that lags, tremor and displays can do together, and every error
// lies inside it; as a rectangle, bound/√3, it would count as if the worst were as likely as
// anything else. Source: an interval that holds practically all values is three standard
// uncertainties, JCGM 100:2008 4.3.5 and 4.3.6 (from memory). That the errors are no greater
// is found in simulation, with half of the lags at the ends of what is said of them: the rms of
// error over bound of points on the move is 0.16 to 0.34, errors of the displays
// included (TestBoundsHold in package acquire holds it at that); no real meter was at hand.
const pairingCovers = 3

// addPairing adds what a gate voltage may be off by, V, because the meters did not read at
// one instant. Within a sweep it is much the same for all points (a lag times the rate
// of the gate), so that it is not averaged over them; it moves the curve and leaves its
// slope. From one device to the next it is anew, as the rate of a hand is.
//
// Checked: TestPairing.
func (w *work) addPairing(b *budget, bound float64) { b.add(InPairing, bound/pairingCovers, 1) }

// pairing is the bound of that at a point, V; 0 when it is not known.
func (w *work) pairing(p *point) float64 {
	if x := math.Abs(at(w.c.VgBound, p.k)); finiteNumber(x) {
		return x
	}
	return 0
}

// pairingNear is the greater bound of the two points around a crossing, of which j is the
// first at or above it.
func (w *work) pairingNear(j int) float64 {
	bound := 0.0
	for k := max(0, j-1); k <= j && k < len(w.pts); k++ {
		bound = math.Max(bound, w.pairing(&w.pts[k]))
	}
	return bound
}

// addKelvin adds the temperature to the budget of a quantity that changes by c per K.
func (w *work) addKelvin(b *budget, c float64) {
	_, u := w.warmth()
	b.add(InTemperature, u, c)
}

// addBurden adds what is not known of the ammeter's share in a small drain voltage
// that was not read; the quantity changes by c per unit of relative drain voltage.
func (w *work) addBurden(b *budget, i, c float64) {
	if w.s.Circuit == Fixed && len(w.c.Vd) == 0 && positive(w.s.Burden) && w.s.Vds < unreadVds {
		b.add(InBurden, burdenShare*math.Abs(i)*w.s.Burden/w.s.Vds, c)
	}
}

// crossingQuantity makes a quantity of the gate voltage at a current: what the
// reading there scatters by and what reading between points may be wrong by, the
// gate meter's statement, that of the current over the slope, and the temperature.
func (w *work) crossingQuantity(c crossing, i float64) Quantity {
	if math.IsNaN(c.v) {
		return None()
	}
	var b budget
	nu := w.addReading(&b, &c, i)
	b.raise(w.stepFloor(c.b))
	w.addPairing(&b, w.pairingNear(c.b))
	perCurrent := i / c.gm
	w.addGate(&b, c.v)
	w.addCurrent(&b, i, perCurrent, 1/c.gm)
	w.addBurden(&b, i, perCurrent)
	t, _ := w.warmth()
	if math.IsNaN(perCurrent) {
		perCurrent = 0
	}
	w.addKelvin(&b, gatePerKelvin(perCurrent, t))
	return w.gateVoltage(c.v, &b, c.n, nu)
}

// addReading parts the random uncertainty of a crossing: the scatter of the
// readings as a single reading there is parted between gate and current, and the
// rest, which is reading between points. It returns the degrees of freedom of the
// scatter, as far as the table is wanted.
func (w *work) addReading(b *budget, c *crossing, i float64) (nu float64) {
	p := &w.pts[max(0, min(c.b, len(w.pts)-1))]
	random := math.Min(math.Max(c.random, 0), c.u)
	if math.IsNaN(random) {
		random = 0
	}
	e := w.scatterNear(c.b)
	noise := p.u / c.gm
	if !(noise > 0) { // no slope, or nothing known of the current
		noise = 0
	}
	if single := rss(rss(e, p.ux), noise); single > 0 {
		f := random / single
		b.add(InGateScatter, e, f)
		b.add(InGateStep, p.ux, f)
		if noise > 0 {
			b.add(InCurrentNoise, p.u/i, f*i/c.gm)
		}
	} else {
		random = 0
	}
	b.add(InReading, math.Sqrt(math.Max(0, c.u*c.u-random*random)), 1)
	if w.s.Budget {
		nu = w.scatterFreedom(c.b)
	}
	return nu
}

// lineQuantity makes a quantity of an extrapolated gate voltage v: scatter u of the
// points, V, at least the step of the display near index b; by how much curves that
// do nearly as well differ, V; what the equation may be wrong by, V; the gate meter's statement; the temperature; and perOffset, V/A, by
// which it follows an offset of all currents at about i.
//
// A gain of the currents does not move it: the root of c I meets zero at the same
// gate voltage.
func (w *work) lineQuantity(v, u, others, model float64, b, n int, nu, i, perOffset float64) Quantity {
	var bud budget
	bud.add(InScatter, u, 1)
	bud.raise(w.stepFloor(b))
	w.addPairing(&bud, w.pairingNear(b))
	bud.add(InReading, others, 1)
	bud.add(InModel, model, 1)
	w.addGate(&bud, v)
	w.addCurrent(&bud, i, 0, perOffset)
	if w.s.Vds > 0 {
		w.addBurden(&bud, i, w.s.Vds/2)
	}
	w.addKelvin(&bud, -kappa)
	return w.gateVoltage(v, &bud, n, nu)
}

// perOffset is what n readings of currents near i make of a quantity, per A that
// the meter is off at i: each reading is off by the counts of its own range. at gives
// for reading k what the quantity changes by per A, and the current.
func (w *work) perOffset(i float64, n int, at func(k int) (c, current float64)) float64 {
	load := w.onScaleOfLoad()
	unit := w.scaleAt(i, load).offset
	sum := 0.0
	for k := range n {
		c, current := at(k)
		if unit > 0 {
			c *= w.scaleAt(current, load).offset / unit
		}
		sum += c
	}
	return sum
}

// follows is how a gain factor, slope or curvature goes with what it is made of, as
// powers (magnitudes): it is proportional to current^current and, inversely, to gate^gate,
// and to beta^beta.
type follows struct{ current, gate, beta float64 }

// gainBudget is the budget of a quantity of that value with scatter u, taken at
// current i, that goes with the gains of current and gate and with the gain factor as f
// says. An offset of the gate meter does not change a slope, but its counts may also be a bend: the
// whole statement counts as a gain, at the greatest gate voltage.
func (w *work) gainBudget(value, u, i float64, f follows) budget {
	var b budget
	size := math.Abs(value)
	b.add(InScatter, u, 1)
	v := w.midGate()
	if v == 0 {
		v = 1 // a gain is what matters
	}
	b.add(InGateGain, rangeFor(w.s.Gate, v).absolute(v)/v, f.gate*size)
	w.addCurrent(&b, i, f.current*size, f.current*size/i)
	w.addBurden(&b, i, f.current*size)
	t, _ := w.warmth()
	w.addKelvin(&b, -f.beta*alpha/t*size)
	return b
}

// gainQuantity is the quantity of [work.gainBudget] as it is.
func (w *work) gainQuantity(value, u float64, n int, nu, i float64, f follows) Quantity {
	b := w.gainBudget(value, u, i, f)
	return w.quantity(value, &b, n, nu)
}
