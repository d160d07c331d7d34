package fit

import (
	"math"
	"slices"
)

const (
	// clearCounts is how many counts a reading must have for a ratio of two
	// readings to tell of gains and not of the last digit.
	clearCounts = 20
	// typicalNoise is the share of a reading that two handheld meters scatter by
	// (common practice, no source). It only shares out the weight between two
	// readings that agree, so that neither alone decides.
	typicalNoise = 1e-3
	// unstatedMismatch is the disagreement of two currents that is shown when
	// nothing is known of the meters: 1 % each for the meters and for R_L.
	unstatedMismatch = 0.03
	// nominalSupply is how well a supply is known that was not read (judgement).
	nominalSupply = 0.01
)

// settleCurrents decides which current is used at every point. An ammeter and a
// load resistor that both tell of it are compared over the whole curve first: a
// ratio near a power of 1000 means that the meter's prefix went missing on the
// way, one off by some percent that the resistor is not what was said. Then
// point by point: where they agree both count, each by its own uncertainty, and
// where they do not, the one that continues the curve through the points beside
// it.
func (w *work) settleCurrents() {
	if len(w.pts) == 0 {
		return
	}
	if w.byDrain && !w.vddRead {
		w.calibrateSupply()
	}
	if w.s.Spot && w.s.Circuit == Diode && w.byDrain {
		w.dropAmmeter() // a spot list's current is nominal, the jig tells the true one
	}
	if w.ammeter && (w.byLoad || w.byDrain) {
		w.compareMeters()
	}
	if w.pickCurrents() > 0 {
		w.guessDisputes()
	}
	w.pts = slices.DeleteFunc(w.pts, func(p point) bool {
		bad := !finiteNumber(p.i) || !finiteNumber(p.u)
		if bad {
			w.leave(p.k, CodeOutOfLine, "the current cannot be computed from the readings")
		}
		return bad
	})
}

// calibrateSupply puts the nominal supply right by the drain meter itself when
// the part is off at the first points, so that a small difference of two large
// voltages is not ruined by a supply that is not quite 12 V.
func (w *work) calibrateSupply() {
	if w.s.Circuit != Load {
		return
	}
	n := len(w.pts) / 5
	if n < 2 {
		return
	}
	rl := w.s.RL
	off := make([]float64, n)
	for j := range off {
		off[j] = w.pts[j].l
	}
	m := median(off)
	if math.Abs(m)*rl > 2*nominalSupply*w.vdd || slices.Max(off)-slices.Min(off) > 3*w.pts[0].ql+1e-9 {
		return
	}
	for j := range w.pts {
		w.pts[j].l -= m
	}
	w.vdd -= m * rl
	w.vddRead = true
}

// compareMeters finds the ratio of the two currents over the curve, says what is
// wrong with it, and decides whose scale is kept.
func (w *work) compareMeters() {
	var ratios, loads []float64
	var topA, topL, countL, countA float64
	for j := range w.pts {
		p := &w.pts[j]
		if !math.IsNaN(p.a) {
			topA, countA = math.Max(topA, math.Abs(p.a)), math.Max(countA, p.qa)
		}
		if !math.IsNaN(p.l) {
			topL, countL = math.Max(topL, math.Abs(p.l)), math.Max(countL, p.ql)
		}
	}
	deadA, deadL := true, true
	for j := range w.pts {
		p := &w.pts[j]
		clearA := p.a > clearCounts*p.qa && p.a > 0
		clearL := p.l > clearCounts*p.ql && p.l > w.supplyDoubt()*clearCounts/4
		deadA = deadA && !(math.Abs(p.a) > 5*p.qa)
		deadL = deadL && !(math.Abs(p.l) > 5*p.ql)
		if clearA && clearL && p.a > 0.03*topA && p.l > 0.03*topL {
			ratios, loads = append(ratios, p.a/p.l), append(loads, p.l)
		}
	}
	other := w.loadName()
	switch {
	case deadA && topL > clearCounts*countL && topL > w.supplyDoubt()*clearCounts:
		w.warn(CodeCurrentMismatch, "The ammeter reads nothing while "+other+" reaches "+amps(topL)+": "+other+" is used.")
		w.dropAmmeter()
		return
	case deadL && w.byLoad && topA > clearCounts*countA:
		w.warn(CodeCurrentMismatch, "V_L reads nothing while the ammeter reaches "+amps(topA)+": the ammeter is used.")
		w.dropLoad()
		return
	case len(ratios) == 0 || len(ratios) < 3 && len(w.pts) > 3:
		return
	}
	w.ratio = median(slices.Clone(ratios))
	lg := math.Log10(w.ratio)
	if k := 3 * math.Round(lg/3); k != 0 && math.Abs(lg-k) < 0.1 {
		w.warn(CodePrefixLost, "The ammeter's current is "+si(math.Pow(10, k), "")+
			"times "+other+": a unit prefix was lost; "+other+" is used.")
		w.onLoad = true
		return
	}
	w.onLoad = w.loadIsFiner(topA)
	if w.byLoad && w.warming(ratios, loads) {
		w.onLoad = false // whatever its statement says, this R_L is not constant
	}
	if tol := w.mismatchLimit(topA); math.Abs(w.ratio-1) > tol {
		w.doubt = math.Abs(w.ratio-1) / math.Sqrt(3) // either may be right
		kept := "the ammeter is used"
		if w.onLoad {
			kept = other + " is used"
		}
		w.warn(CodeCurrentMismatch, "The ammeter's current is "+number(w.ratio)+" times "+other+
			" (limit of the statements "+percent(tol)+"): R_L, its heating or a lead; "+kept+".")
	}
}

func (w *work) loadName() string {
	if w.byDrain {
		return "(V_DD-V_D)/R_L"
	}
	return "V_L/R_L"
}

// supplyDoubt is the current by which (V_DD-V_D)/R_L may be off because V_DD was
// not read.
func (w *work) supplyDoubt() float64 {
	if !w.byDrain || w.vddRead {
		return 0
	}
	return nominalSupply * w.vdd / w.s.RL
}

func (w *work) dropAmmeter() {
	w.ammeter = false
	for j := range w.pts {
		w.pts[j].a = math.NaN()
	}
	w.onLoad = true
}

func (w *work) dropLoad() {
	w.byLoad = false
	for j := range w.pts {
		w.pts[j].l = math.NaN()
	}
}

// mismatchLimit is the relative difference of the two currents beyond which
// they contradict their statements (three standard uncertainties, at least 1 %).
func (w *work) mismatchLimit(i float64) float64 {
	a, l := w.relative(i, false), w.relative(i, true)
	if math.IsNaN(a) || math.IsNaN(l) {
		return unstatedMismatch
	}
	return math.Max(0.01, 3*rss(a, l))
}

// loadIsFiner decides whose scale is kept: the one with the smaller stated
// uncertainty, the ammeter when that is not known of both, for R_L is what
// heats up.
func (w *work) loadIsFiner(i float64) bool {
	a, l := w.relative(i, false), w.relative(i, true)
	return !math.IsNaN(a) && !math.IsNaN(l) && l < a
}

// relative is the relative standard uncertainty of a current i against the SI
// unit, by load resistor or by ammeter; NaN when there is no statement.
func (w *work) relative(i float64, onLoad bool) float64 {
	s := w.scaleAt(i, onLoad)
	return rss(rss(s.gain, s.offset/math.Abs(i)), s.resistor)
}

// both gives the two currents of a point on the scale that is kept.
func (w *work) both(p *point) (a, l float64) {
	if w.onLoad {
		return p.a / w.ratio, p.l
	}
	return p.a, p.l * (w.ratio + w.warm*p.l*p.l)
}

// pickCurrents sets the current of every point where the readings agree or only
// one is there, and marks the others with NaN; it returns how many.
func (w *work) pickCurrents() (disputed int) {
	prefix := w.onLoad && math.Abs(math.Log10(w.ratio)) > 2
	for j := range w.pts {
		p := &w.pts[j]
		a, l := w.both(p)
		switch {
		case math.IsNaN(l):
			w.use(p, false)
		case math.IsNaN(a) || prefix:
			w.use(p, true)
		case !w.agree(p, a, l):
			p.i, p.disputed = math.NaN(), true
			disputed++
		case w.byDrain:
			w.use(p, false) // a difference of large voltages only checks
		default:
			w.mix(p, a, l)
		}
	}
	return disputed
}

// agree allows four standard deviations of the last digits, a count each for
// offsets, and 2 % for noise and heating of R_L.
func (w *work) agree(p *point, a, l float64) bool {
	u := rss(p.wa, p.wl)
	return math.Abs(a-l) <= 4*u+p.qa+p.ql+0.02*math.Max(math.Abs(a), math.Abs(l))+2*w.supplyDoubt()
}

// use takes one of the two readings alone.
func (w *work) use(p *point, load bool) {
	a, l := w.both(p)
	p.load = load
	if load {
		p.i, p.q, p.u, p.room = l, p.ql, random(p.ql, p.nl), p.wl
		return
	}
	p.i, p.q, p.u, p.room = a, p.qa, random(p.qa, p.na), p.wa
	if w.onLoad {
		p.q, p.u, p.room = p.q/w.ratio, p.u/w.ratio, p.room/w.ratio
	}
}

// mix takes the weighted mean of two readings that agree.
func (w *work) mix(p *point, a, l float64) {
	ua, ul := random(p.qa, p.na), random(p.ql, p.nl)
	va := ua*ua + typicalNoise*typicalNoise*a*a
	vl := ul*ul + typicalNoise*typicalNoise*l*l
	if va+vl == 0 {
		w.use(p, w.onLoad)
		return
	}
	wa := vl / (va + vl)
	wl := 1 - wa
	p.i = wa*a + wl*l
	p.u = rss(wa*ua, wl*ul)
	p.room = rss(wa*p.wa, wl*p.wl)
	p.q = p.ql
	if wa > wl {
		p.q = p.qa
	}
}

// leastWarming is the least change of the ratio of two currents along a sweep that
// is called a warming resistor: ranges of one meter may differ by a percent.
const leastWarming = 0.02

// warming finds out whether the ratio of the two currents changes with the power in
// the load resistor, I² R_L, as it does when the resistor warms up; says so, and
// lets the load current follow the ammeter along the curve. Not for a difference of
// supply and drain voltage, whose own error changes along the curve.
//
// A straight line of the ratios over the power by least squares, those off by more
// than 30 % left out; a change by 2 %, four times its standard deviation and twice the
// scatter about the line counts. Checked: TestLoadWarmsUp.
func (w *work) warming(ratios, loads []float64) bool {
	top := 0.0
	n, sx, sy, sxx, sxy, syy := 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
	cool, hot := 0, 0
	for k, r := range ratios {
		if math.Abs(r/w.ratio-1) < 0.3 {
			top = math.Max(top, loads[k])
		}
	}
	for k, r := range ratios {
		if math.Abs(r/w.ratio-1) >= 0.3 {
			continue
		}
		x := loads[k] / top
		x *= x
		if x < 0.4 {
			cool++
		} else if x > 0.5 {
			hot++
		}
		n, sx, sy, sxx, sxy, syy = n+1, sx+x, sy+r, sxx+x*x, sxy+x*r, syy+r*r
	}
	if cool < 2 || hot < 2 {
		return false // no two ends to compare
	}
	sxx, sxy, syy = sxx-sx*sx/n, sxy-sx*sy/n, syy-sy*sy/n
	change := sxy / sxx
	scatter := math.Sqrt(math.Max(0, syy-change*sxy) / (n - 2))
	if !(math.Abs(change) > leastWarming) || !(math.Abs(change) > 4*scatter/math.Sqrt(sxx)) || !(math.Abs(change) > 2*scatter) {
		return false
	}
	cold := (sy - change*sx) / n
	why := "R_L warms up, its resistance grows by " + percent(-change/cold)
	if change > 0 {
		why = "the ammeter or R_L changes with the current"
	}
	w.warn(CodeCurrentMismatch, "The ammeter's current goes from "+number(cold)+" to "+number(cold+change)+" times "+w.loadName()+
		" as the power in R_L rises to "+si(top*top*w.s.RL, "W")+": "+why+"; the ammeter is used.")
	w.ratio, w.warm = cold, change/(top*top)
	return true
}

// median of x, which is sorted in place; NaN when empty.
func median(x []float64) float64 {
	n := len(x)
	if n == 0 {
		return math.NaN()
	}
	slices.Sort(x)
	if n%2 == 1 {
		return x[n/2]
	}
	return (x[n/2-1] + x[n/2]) / 2
}
