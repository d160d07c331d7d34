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
	disputed := w.pickCurrents()
	if disputed > 0 {
		w.settleDisputes()
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
	var ratios []float64
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
			ratios = append(ratios, p.a/p.l)
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
	w.ratio = median(ratios)
	lg := math.Log10(w.ratio)
	if k := 3 * math.Round(lg/3); k != 0 && math.Abs(lg-k) < 0.1 {
		w.warn(CodePrefixLost, "The ammeter's current is "+si(math.Pow(10, k), "")+
			"times "+other+": a unit prefix was lost; "+other+" is used.")
		w.onLoad = true
		return
	}
	w.onLoad = w.loadIsFiner(topA)
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
	if !onLoad {
		return rangeFor(w.s.Current, i).absolute(i) / math.Abs(i)
	}
	ranges := w.s.Load
	v := i * w.s.RL
	if w.byDrain {
		// The difference of two readings of one meter: both near V_DD.
		ranges = w.s.Drain
		u := rangeFor(ranges, w.vdd).absolute(w.vdd)
		return rss(math.Sqrt2*u/math.Abs(v), w.s.RLTol/math.Sqrt(3))
	}
	return rss(rangeFor(ranges, v).absolute(v)/math.Abs(v), w.s.RLTol/math.Sqrt(3))
}

// both gives the two currents of a point on the scale that is kept.
func (w *work) both(p *point) (a, l float64) {
	if w.onLoad {
		return p.a / w.ratio, p.l
	}
	return p.a, p.l * w.ratio
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
			p.i = math.NaN()
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
	u := rss(random(p.qa, p.na), random(p.ql, p.nl))
	return math.Abs(a-l) <= 4*u+p.qa+p.ql+0.02*math.Max(math.Abs(a), math.Abs(l))+2*w.supplyDoubt()
}

// use takes one of the two readings alone.
func (w *work) use(p *point, load bool) {
	a, l := w.both(p)
	if load {
		p.i, p.q, p.u = l, p.ql, random(p.ql, p.nl)
		return
	}
	p.i, p.q, p.u = a, p.qa, random(p.qa, p.na)
	if w.onLoad {
		p.q, p.u = p.q/w.ratio, p.u/w.ratio
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
	p.q = p.ql
	if wa > wl {
		p.q = p.qa
	}
}

// settleDisputes asks the neighbours where the two readings of a point
// disagree, keeps the reading that lies where a rising curve must lie, and
// leaves the point out when neither does.
func (w *work) settleDisputes() {
	var kinds [3]struct{ ammeter, load []float64 }
	codes := [3]string{CodePrefixLost, CodeDecadeSpike, CodeCurrentMismatch}
	settled := make([]point, 0, len(w.pts))
	for j := range w.pts {
		p := w.pts[j]
		if !math.IsNaN(p.i) {
			settled = append(settled, p)
			continue
		}
		a, l := w.both(&p)
		lo, hi := w.expected(j)
		da, dl := outside(a, lo, hi), outside(l, lo, hi)
		kind := 2
		if r := math.Abs(math.Log10(math.Abs(a / l))); math.Abs(r-3) < 0.1 {
			kind = 0
		} else if math.Abs(r-1) < 0.06 {
			kind = 1
		}
		// 30 %: beyond what interpolation between neighbours may be wrong by.
		if math.IsNaN(lo) || math.Min(da, dl) > 0.3 {
			w.leave(p.k, codes[kind], "ammeter and "+w.loadName()+" disagree ("+amps(p.a)+
				" and "+amps(p.l)+") and the neighbours fit neither")
			continue
		}
		useLoad := dl < da || dl == da && random(p.ql, p.nl) < random(p.qa, p.na)
		w.use(&p, useLoad)
		if useLoad {
			kinds[kind].ammeter = append(kinds[kind].ammeter, w.gate*p.vg)
		} else {
			kinds[kind].load = append(kinds[kind].load, w.gate*p.vg)
		}
		settled = append(settled, p)
	}
	w.pts = settled
	for k, v := range kinds {
		if len(v.ammeter) > 0 {
			w.warn(codes[k], "The ammeter's reading contradicts "+w.loadName()+" and the neighbours at "+places(v.ammeter)+"; "+w.loadName()+" is used there.")
		}
		if len(v.load) > 0 {
			w.warn(codes[k], w.loadName()+" contradicts the ammeter and the neighbours at "+places(v.load)+"; the ammeter is used there.")
		}
	}
}

// expected is the range in which the current of point j must lie by its nearest
// settled neighbours; NaN when there is none.
func (w *work) expected(j int) (lo, hi float64) {
	before, after := j-1, j+1
	for before >= 0 && math.IsNaN(w.pts[before].i) {
		before--
	}
	for after < len(w.pts) && math.IsNaN(w.pts[after].i) {
		after++
	}
	switch {
	case before < 0 && after >= len(w.pts):
		return math.NaN(), math.NaN()
	case before < 0:
		return math.Inf(-1), w.pts[after].i
	case after >= len(w.pts):
		return w.pts[before].i, math.Inf(1)
	}
	return w.between(&w.pts[before], &w.pts[after], w.pts[j].vg)
}

// between is where a transfer curve may lie at vg between two of its points:
// its logarithm bends down and, until load or series resistance limit it, its
// square root bends up, so it lies between the two chords. A leakage under the
// foot bends the logarithm up: it is taken off before.
func (w *work) between(a, b *point, vg float64) (lo, hi float64) {
	if !(b.vg > a.vg) {
		return math.Min(a.i, b.i), math.Max(a.i, b.i)
	}
	t := (vg - a.vg) / (b.vg - a.vg)
	ia, ib := math.Max(a.i, 0), math.Max(b.i, 0)
	r := (1-t)*math.Sqrt(ia) + t*math.Sqrt(ib)
	hi = r * r
	lo = math.Min(ia, ib)
	if fa, fb := ia-w.base, ib-w.base; fa > 2*a.q+3*a.u && fa > 0.02*w.base && fb > fa {
		lo = w.base + math.Exp((1-t)*math.Log(fa)+t*math.Log(fb))
	}
	if lo > hi {
		lo, hi = hi, lo
	}
	return lo, hi
}

// outside is the logarithm of the factor by which x lies outside lo…hi, 0
// within.
func outside(x, lo, hi float64) float64 {
	switch {
	case x > hi:
		if hi <= 0 {
			return math.Inf(1)
		}
		return math.Log(x / hi)
	case x < lo:
		if x <= 0 {
			return math.Inf(1)
		}
		return math.Log(lo / x)
	}
	return 0
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
