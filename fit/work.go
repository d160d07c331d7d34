package fit

import (
	"cmp"
	"math"
	"slices"
)

// work is one curve being evaluated. Inside it every part is an n-channel part:
// the sign of a p-channel part is taken off on the way in and put back on the
// way out, so that gate drive and current always rise together.
type work struct {
	c    Curve
	s    Setup
	sign float64 // 1 for n-channel, -1 for p-channel: puts results back

	gate    float64 // factor that makes gate readings those of an n-channel part
	current float64 // same for ammeter readings
	load    float64 // same for load-voltage readings
	drain   float64 // same for drain-voltage readings
	turned  bool    // current readings carry the opposite sign of what the channel gives

	ammeter bool    // there are ammeter readings
	byLoad  bool    // there are currents from R_L and V_L
	byDrain bool    // there are currents from R_L and V_DD-V_D, in place of V_L
	ratio   float64 // ammeter current over load current, 1 when there is no telling
	warm    float64 // 1/A², by how much that ratio changes with the square of the load current
	doubt   float64 // relative standard uncertainty because two currents disagree
	onLoad  bool    // the currents used are on the scale of V_L/R_L, not of the ammeter
	vdd     float64 // V, supply; NaN when not known
	vddRead bool    // V_DD was read point by point
	least   float64 // V, lower bound of the supply from the greatest V_L; NaN

	ties      bool    // several points share a gate reading: its display is coarse against the steps
	base      float64 // A, smallest current of the curve if above zero: leakage
	tiny      float64 // A, current below which no spikes are looked for
	falling   bool    // the current falls as the gate is driven harder
	odd       int     // points left out that contradict a rising curve without a sign of a leftover
	unsettled int     // points kept that the others contradict
	jumps     string  // where the current jumps at constant gate voltage, a sentence
	limit     float64 // V, least displacement of a point that is called a fault; 0: not yet known

	pts       []point      // usable points in the order in which the part turns on
	grid      float64      // V, step that the digits of the gate readings show; 0: none
	poly      poly         // scratch
	win       window       // scratch
	residuals [][2]float64 // squares and their known parts, V²; a known part below zero: none
	model     *whole       // the transfer model laid through the curve; nil: none
	laid      bool         // it was tried
	along     along        // the model near a crossing, scratch
	out       []standout   // scratch

	apart          bool    // the next two were found
	gateScatter    float64 // V, of single gate readings about the curve
	currentScatter float64 // of single currents, as a share
	left           []LeftOut
	warns          []Warning
}

// point is one usable point, with the signs of an n-channel part.
type point struct {
	k   int     // index of the curve's slices
	vg  float64 // V
	ux  float64 // V, standard deviation of the gate reading as far as stated; 0: not
	i   float64 // A, current used
	u   float64 // A, standard deviation of i as far as stated or seen in its digits
	q   float64 // A, one count of i; 0: not known
	vds float64 // V, NaN when not known
	rt  float64 // √i, of a current above zero
	ln  float64 // ln i, of a current above zero
	lf  float64 // ln of what flows above the leakage; NaN: nothing that stands out

	a, l   float64 // A, by ammeter and by load resistor; NaN: none
	qa, ql float64 // A, one count of these
	na, nl float64 // A, stated noise of these
	wa, wl float64 // A, what these may be off by; for judging faults only, see [work.room]

	room     float64 // A, what i may be off by, for judging faults only: at least u
	disputed bool    // the two readings disagree
	load     bool    // i is that of the load resistor
}

// at reads element k, NaN beyond the slice.
func at(x []float64, k int) float64 {
	if k >= len(x) {
		return math.NaN()
	}
	return x[k]
}

func finiteNumber(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func positive(x float64) bool { return x > 0 && !math.IsInf(x, 1) }

func (w *work) warn(code, text string) {
	for _, v := range w.warns {
		if v.Code == code && v.Text == text {
			return
		}
	}
	w.warns = append(w.warns, Warning{code, text})
}

func (w *work) leave(k int, code, text string) {
	w.left = append(w.left, LeftOut{k, code, text})
}

// newWork orients the curve and gathers its points with every current they
// offer.
func newWork(c Curve, s Setup) *work {
	w := &work{c: c, s: s, sign: 1, ratio: 1}
	if s.PChannel {
		w.sign = -1
	}
	w.s.TestCurrent = math.Abs(s.TestCurrent)
	w.s.IdleCurrent = math.Abs(s.IdleCurrent)
	w.s.Vds = math.Abs(s.Vds)
	w.s.OffV = w.sign * s.OffV
	if math.IsNaN(w.s.OffV) && !s.Depletion {
		w.s.OffV = 0 // an enhancement part is off at 0 V
	}
	w.orient()
	w.supply()
	w.gather()
	return w
}

// orient finds the sign of each column. Columns of a p-channel part may hold
// signed readings or magnitudes; a meter's leads may be exchanged. The greatest
// reading tells, for what is near zero is noise.
func (w *work) orient() {
	w.gate = w.sign
	if w.s.PChannel && !w.s.Depletion && greatest(w.c.Vg) > 0 {
		w.gate = 1 // V_SG was written down
	}
	w.current, w.load, w.drain = w.sign, w.sign, w.sign
	magnitudes := w.gate != w.sign // then those of the current say nothing of its direction
	if w.sign*greatest(w.c.Id) < 0 {
		w.current = -w.sign
		w.turned = !magnitudes
	}
	if w.sign*greatest(w.c.Vl) < 0 {
		w.load = -w.sign
		w.turned = w.turned || w.c.Id == nil && !magnitudes
	}
	if w.sign*greatest(w.c.Vd) < 0 {
		w.drain = -w.sign
	}
}

// greatest is the element of the greatest magnitude among the finite ones, 0
// when there is none.
func greatest(x []float64) float64 {
	g := 0.0
	for _, v := range x {
		if math.Abs(v) > math.Abs(g) && !math.IsInf(v, 0) {
			g = v
		}
	}
	return g
}

// supply settles what V_DD is: read point by point, stated, or not known. In
// the load circuit it is at least the greatest V_L.
func (w *work) supply() {
	w.vdd, w.least = math.Abs(w.s.Vdd), math.NaN()
	if !positive(w.vdd) {
		w.vdd = math.NaN()
	}
	if v := math.Abs(greatest(w.c.Vdd)); v > 0 {
		w.vdd, w.vddRead = v, true
	}
	if w.s.Circuit != Load {
		return
	}
	w.least = math.Abs(greatest(w.c.Vl))
	if w.c.Vl == nil && positive(w.s.RL) {
		w.least = math.Abs(greatest(w.c.Id)) * w.s.RL
	}
}

// supplyAt is V_DD at point k.
func (w *work) supplyAt(k int) float64 {
	if v := math.Abs(at(w.c.Vdd, k)); finiteNumber(v) && v > 0 {
		return v
	}
	return w.vdd
}

// gather makes a point of every gate reading that has a current, and leaves out
// the others.
func (w *work) gather() {
	n := len(w.c.Vg)
	w.pts = make([]point, 0, n)
	rl := w.s.RL
	w.ammeter = len(w.c.Id) > 0
	w.byLoad = positive(rl) && len(w.c.Vl) > 0
	w.byDrain = positive(rl) && !w.byLoad && w.vdd > 0 &&
		(w.s.Circuit == Load && len(w.c.Vd) > 0 || w.s.Circuit == Diode && (w.vddRead || w.s.Spot))
	for k := range n {
		vg := w.c.Vg[k]
		if !finiteNumber(vg) {
			if math.IsInf(vg, 0) || !positive(math.Abs(at(w.c.Gm, k))) { // else a transconductance given for itself
				w.leaveUnread(k, vg)
			}
			continue
		}
		p := point{k: k, vg: w.gate * vg, a: math.NaN(), l: math.NaN()}
		a := at(w.c.Id, k)
		v := math.NaN()
		if finiteNumber(a) {
			p.a = w.current * a
			p.na = rangeFor(w.s.Current, a).Noise
		}
		switch {
		case w.byLoad:
			v = at(w.c.Vl, k)
			p.l = w.load * v / rl
			p.nl = rangeFor(w.s.Load, v).Noise / rl
		case w.byDrain:
			v = w.drainAt(k)
			p.l = (w.supplyAt(k) - v) / rl
			p.nl = rangeFor(w.s.Drain, v).Noise / rl
		}
		if !finiteNumber(p.l) {
			p.l = math.NaN()
		}
		if math.IsNaN(p.a) && math.IsNaN(p.l) {
			if math.IsInf(v, 0) {
				a = v
			}
			w.leaveUnread(k, a)
			continue
		}
		w.pts = append(w.pts, p)
	}
	// Ties are ordered by current so that the result does not depend on the
	// order in which equal gate voltages were written.
	before := func(p, q *point) int {
		if c := cmp.Compare(p.vg, q.vg); c != 0 {
			return c
		}
		if c := cmp.Compare(p.a, q.a); c != 0 {
			return c
		}
		return cmp.Compare(p.l, q.l)
	}
	for j := 1; j < len(w.pts); j++ {
		if before(&w.pts[j-1], &w.pts[j]) > 0 {
			slices.SortStableFunc(w.pts, func(p, q point) int { return before(&p, &q) })
			break
		}
	}
	w.counts()
}

// drainAt is the drain voltage read at point k; with drain and gate tied it is
// the gate voltage.
func (w *work) drainAt(k int) float64 {
	if len(w.c.Vd) > 0 {
		return w.drain * at(w.c.Vd, k)
	}
	if w.s.Circuit == Diode {
		return w.gate * at(w.c.Vg, k)
	}
	return math.NaN()
}

func (w *work) leaveUnread(k int, x float64) {
	if math.IsInf(x, 0) {
		w.leave(k, CodeOverload, "meter over its range")
		return
	}
	w.leave(k, CodeMissingReading, "no reading")
}

// fewestForDigits is the fewest currents whose digits tell the step of the
// display: "0.2" alone is not a reading of one digit.
const fewestForDigits = 8

// roomCounts is the least standard deviation of a reading, in counts, that is
// allowed for where faults are judged: cheap meters flicker by that (judgement).
const roomCounts = 2

// counts finds the step of each display at every point: as stated for the
// range, or as its digits show where they are coarser. A gate grid may be set
// rather than read, so its digits count only where nothing is stated.
func (w *work) counts() {
	n := len(w.pts)
	if n == 0 {
		return
	}
	x, q, place := make([]float64, n), make([]float64, n), make([]int8, n)
	each := func(fewest int, read func(p *point) float64, set func(p *point, q, last float64)) {
		for j := range w.pts {
			x[j] = read(&w.pts[j])
		}
		quanta(x, q, place)
		if n < fewest {
			clear(q)
		}
		for j := range w.pts {
			set(&w.pts[j], q[j], lastDigit(place[j:min(n, j+3)]))
		}
	}
	rl := w.s.RL
	if w.ammeter {
		each(fewestForDigits, func(p *point) float64 { return at(w.c.Id, p.k) }, func(p *point, q, last float64) {
			p.qa = max(q, rangeFor(w.s.Current, p.a).Resolution)
			p.wa = max(roomCounts*p.qa, random(last, p.na))
		})
	}
	if w.byLoad {
		each(fewestForDigits, func(p *point) float64 { return at(w.c.Vl, p.k) }, func(p *point, q, last float64) {
			p.ql = max(q, rangeFor(w.s.Load, p.l*rl).Resolution) / rl
			p.wl = max(roomCounts*p.ql, random(last/rl, p.nl))
		})
	}
	if w.byDrain {
		each(fewestForDigits, func(p *point) float64 { return w.drainAt(p.k) }, func(p *point, q, last float64) {
			v := w.drainAt(p.k)
			p.ql = max(q, rangeFor(w.s.Drain, v).Resolution) / rl
			// A difference of two large voltages: their noise is what counts.
			p.wl = rss(max(roomCounts*p.ql, random(last/rl, p.nl)), typicalNoise*v/rl)
		})
	}
	each(1, func(p *point) float64 { return p.vg }, func(p *point, q, _ float64) {
		a := rangeFor(w.s.Gate, p.vg)
		p.ux = random(a.Resolution, a.Noise)
		w.grid = max(w.grid, q)
	})
}

// lastDigit is the step of the last digit that the first of some readings shows,
// or a later one where it is finer: zeros at the end hide the digits of single
// readings. 0: not to be told.
func lastDigit(place []int8) float64 {
	m := int8(-128)
	for k, p := range place {
		if p == 127 || k == 0 && p == -128 {
			return 0
		}
		m = max(m, p)
	}
	return pow10(-int(m))
}
