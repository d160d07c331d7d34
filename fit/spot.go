package fit

import "math"

const (
	// spotNear is how far, relative, a spot's current may lie from the one asked
	// for and still be its value; two counts count as well.
	spotNear = 0.01
	// spotLoose is how far a spot's current may lie from the one asked for and the
	// reading still stand in for it, with spotSlope, V, per unit of relative
	// difference as uncertainty: the square law gives half the overdrive, and 0.4 V
	// is a large one for a bias current (judgement).
	spotLoose = 0.10
	spotSlope = 0.2
	// spotStep is the greatest ratio of currents over which a given g_m corrects
	// a spot.
	spotStep = 2.0
	// spotPlaces is the least number of decimals, of a volt, that a spot's
	// display is taken to have: a trailing zero does not show.
	spotPlaces = 2
	// spotModel divides the distance between square law and chord to what the
	// square law between two readings may be wrong by (chosen on self-made curves,
	// TestTwoSpotGainIsHonest).
	spotModel = 6.0
	// spotKnee is the overdrive, V, over which a smooth knee fades into the square
	// law: 2 n kT/q with n = 1.7, by the interpolation of Enz, Krummenacher and
	// Vittoz, Analog Integr. Circuits Signal Process. 8 (1995) 83–114 (from memory).
	spotKnee = 2 * 1.7 * thermalVoltage
)

// isSpot reports whether the curve is one or two readings rather than a sweep.
func (w *work) isSpot() bool { return len(w.pts) <= 2 }

// spot evaluates one or two readings of V_GS at known currents.
//
// The value at a current is the reading itself where its current is within 1 %
// or two counts; between two readings the rule of [work.gateAt]; else, with a
// given g_m, one step of it along the square law for at most a factor of two in
// current; else, within 10 %, the reading with what that may be worth added to
// its uncertainty. Anything else declines. A one-resistor jig does not hold its
// current: with V_DD and R_L known it is (V_DD - V_GS)/R_L of each part. Uncertainty: the step of the display and the
// stated noise; the display is taken to have two decimals at least.
//
// Source: common practice, no source. Checked: TestSpots.
func (w *work) spot(r *Result) {
	w.warn(CodeSpotOnly, "Read at "+count(len(w.pts), "current", "currents")+" only: nothing is known of the curve or of heating.")
	state, why := w.deadSpot()
	if state != "" {
		r.State, r.Why = state, why
		return
	}
	r.Vgsth = w.spotAt(w.s.TestCurrent)
	r.VgsIdle = w.spotAt(w.s.IdleCurrent)
	r.ReadTest = w.readOn(0, len(w.pts), w.s.TestCurrent, w.spotPerCurrent(&w.pts[0], w.s.TestCurrent))
	r.ReadIdle = w.readOn(0, len(w.pts), w.s.IdleCurrent, w.spotPerCurrent(&w.pts[0], w.s.IdleCurrent))
	w.spotGain(r)
	asked, got := 0, 0
	for _, x := range [...]struct {
		i float64
		q Quantity
	}{{w.s.TestCurrent, r.Vgsth}, {w.s.IdleCurrent, r.VgsIdle}} {
		if !positive(x.i) {
			continue
		}
		asked++
		if x.q.Ok() {
			got++
		}
	}
	switch {
	case got > 0:
		r.State = Measured
		if got < asked && !r.GmIdle.Ok() {
			w.warn(CodeFewPoints, w.spotReason())
		}
		if r.Vgsth.Ok() {
			w.diodeLike(w.sign * r.Vgsth.Value)
		}
	case asked == 0:
		r.State, r.Why = Declined, "No current was asked for."
	default:
		r.State, r.Why = Declined, w.spotReason()
	}
}

func (w *work) spotReason() string {
	asked := amps(w.s.TestCurrent)
	if !positive(w.s.TestCurrent) {
		asked = amps(w.s.IdleCurrent)
	} else if positive(w.s.IdleCurrent) {
		asked += " or " + amps(w.s.IdleCurrent)
	}
	read := amps(w.pts[0].i)
	if len(w.pts) > 1 {
		read += " and " + amps(w.pts[1].i)
	}
	return "Read at " + read + ", which does not reach to " + asked + "."
}

// spotU is the random uncertainty of the gate reading of a spot, V.
func (w *work) spotU(p *point) float64 {
	if p.ux > 0 {
		return p.ux
	}
	return random(math.Min(math.Max(w.grid, 1e-9), pow10(-spotPlaces)), 0)
}

// spotAt is the gate voltage at current i, as a quantity.
func (w *work) spotAt(i float64) Quantity {
	if !positive(i) {
		return None()
	}
	near := -1
	for j := range w.pts {
		p := &w.pts[j]
		if d := math.Abs(p.i - i); (d <= spotNear*i || d <= 2*p.q && d <= 0.1*i) && (near < 0 || d < math.Abs(w.pts[near].i-i)) {
			near = j
		}
	}
	if near >= 0 {
		p := &w.pts[near]
		return w.spotQuantity(p.vg, p, i, w.spotU(p), 0, 1)
	}
	if len(w.pts) == 2 {
		a, b := &w.pts[0], &w.pts[1]
		if a.i > 0 && a.i < i && b.i > i && b.vg > a.vg {
			return w.spotBetween(a, b, i)
		}
	}
	for j := range w.pts {
		p := &w.pts[j]
		gm := math.Abs(at(w.c.Gm, p.k))
		if !positive(gm) || !(p.i > 0) || p.i > spotStep*i || i > spotStep*p.i {
			continue
		}
		// Square law: √I is straight with slope g_m/(2√I).
		step := (math.Sqrt(i*p.i) - p.i) * 2 / gm
		w.warn(CodeSpotOnly, "Read at "+amps(p.i)+"; carried to "+amps(i)+" by the given transconductance, "+
			si(w.gate*step, "V")+".")
		// A given g_m is taken to be good to a tenth.
		return w.spotQuantity(p.vg+step, p, i, w.spotU(p), 0.1*step, 1)
	}
	p := &w.pts[0]
	if len(w.pts) == 2 && math.Abs(w.pts[1].i-i) < math.Abs(p.i-i) {
		p = &w.pts[1]
	}
	if d := math.Abs(p.i-i) / i; d <= spotLoose {
		w.warn(CodeSpotOnly, "Read at "+amps(p.i)+", not at "+amps(i)+": "+si(spotSlope*d, "V")+" of uncertainty for that.")
		return w.spotQuantity(p.vg, p, i, w.spotU(p), spotSlope*d, 1)
	}
	return None()
}

// spotBetween interpolates between two readings; the two rules bound the truth.
func (w *work) spotBetween(a, b *point, i float64) Quantity {
	c := noCrossing()
	c.b = 1
	w.bounds(&c, i, 0)
	t := (c.v - a.vg) / (b.vg - a.vg)
	w.warn(CodeCoarseNearCurrent, "Interpolated between "+amps(a.i)+" and "+amps(b.i)+" for "+amps(i)+".")
	return w.spotQuantity(c.v, b, i, rss((1-t)*w.spotU(a), t*w.spotU(b)), c.u, 2)
}

// spotQuantity makes a quantity of a gate voltage v read at or near point p: step and
// noise of the display, what carrying it to current i may be wrong by, V, and the rest
// as of a crossing.
func (w *work) spotQuantity(v float64, p *point, i, display, carried float64, n int) Quantity {
	var b budget
	b.add(InGateStep, display, 1)
	b.add(InReading, math.Abs(carried), 1)
	bound := w.pairing(p)
	if n == 2 { // between the two
		bound = w.pairingNear(1)
	}
	w.addPairing(&b, bound)
	perCurrent := w.spotPerCurrent(p, i)
	w.addGate(&b, v)
	w.addCurrent(&b, i, perCurrent, perCurrent/i)
	t, _ := w.warmth()
	w.addKelvin(&b, gatePerKelvin(perCurrent, t))
	return w.gateVoltage(v, &b, n, math.Inf(1))
}

// spotPerCurrent is what the gate voltage changes by per unit of relative current, V:
// I/g_m of a given transconductance, of the two readings, or as is common.
func (w *work) spotPerCurrent(p *point, i float64) float64 {
	gm := math.Abs(at(w.c.Gm, p.k))
	if positive(gm) {
		return i / gm
	}
	if len(w.pts) == 2 {
		if a, b := &w.pts[0], &w.pts[1]; b.i > a.i && b.vg > a.vg {
			return i * (b.vg - a.vg) / (b.i - a.i)
		}
	}
	// The square law with 0.3 V overdrive: v/2 per unit of relative current.
	return 0.15
}

// spotGain fills in the transconductance at the idle current: as given at about
// that current, else from two readings around it. Without an idle current it is
// that at the test current.
//
// Two readings give g(I) = 2 √I (√I₂-√I₁)/(V₂-V₁), the slope of the square law
// through both. The chord (I₂-I₁)/(V₂-V₁) is that slope at one current between
// them only and a third too small at the upper of two that are ten times apart.
// The uncertainty holds a spotModel-th of the distance between the two at either
// reading, (√I₂-√I₁)²/(V₂-V₁), for mobility and series resistance, and what
// a smooth knee moves and bends at these overdrives.
//
// Source: square law, H. Shichman and D. A. Hodges, IEEE J. Solid-State Circuits
// SC-3 (1968) 285–289. Checked: TestTwoSpots, TestTwoSpotGainIsHonest.
func (w *work) spotGain(r *Result) {
	i := w.s.IdleCurrent
	if !positive(i) {
		i = w.s.TestCurrent
	}
	if !positive(i) {
		return
	}
	for k := range w.c.Gm { // a list may give it at a current of its own, without a gate voltage
		gm, id := math.Abs(w.c.Gm[k]), math.Abs(at(w.c.Id, k))
		if positive(gm) && math.Abs(id-i) <= 0.05*i {
			q := None()
			q.Value, q.N = gm, 1
			q.U = random(spotGmStep(gm), 0)
			r.GmIdle = q
			w.warn(CodeSpotOnly, "Transconductance as given at "+amps(id)+".")
			return
		}
	}
	if len(w.pts) < 2 {
		return
	}
	a, b := &w.pts[0], &w.pts[1]
	if !(b.vg > a.vg) || !(b.i > a.i) || i < a.i*(1-spotNear) || i > b.i*(1+spotNear) {
		return
	}
	d := b.vg - a.vg
	rise := math.Sqrt(b.i) - math.Sqrt(math.Max(a.i, 0))
	g := 2 * math.Sqrt(i) * rise / d
	// A reading's own error: of the gate in the distance, of the current in its root.
	root := func(p *point) float64 { return math.Sqrt(i/math.Max(p.i, p.u)) * p.u }
	u := rss(g*rss(w.spotU(a), w.spotU(b))/d, rss(root(a), root(b))/d)
	u = rss(u, rise*rise/d/spotModel)
	// Shares of the knee: the lower reading lies below the square law, and the
	// slope at i is smaller than its own.
	fade := func(i float64) float64 { return math.Exp(-math.Sqrt(math.Max(i, 0)) * d / rise / spotKnee) }
	u = rss(u, g*rss(spotKnee*(fade(a.i)-fade(b.i))/d, fade(i)))
	r.GmIdle = w.gainQuantity(g, u, 2, math.Inf(1), i, w.slopeFollows())
	w.warn(CodeSpotOnly, "Transconductance is from the two spots at "+amps(a.i)+" and "+amps(b.i)+", as of a square law through both.")
}

// spotGmStep is the step of a given transconductance by its digits.
func spotGmStep(gm float64) float64 {
	d, ok := decimals(gm)
	if !ok {
		return 0
	}
	return pow10(-d)
}

// deadSpot judges one or two readings. With drain and gate tied, a part that
// cannot be brought above a small voltage is shorted, one that takes the whole
// supply without current is open.
func (w *work) deadSpot() (State, string) {
	p := &w.pts[len(w.pts)-1]
	if w.s.Circuit != Diode && !(w.s.Spot && w.s.Circuit == NoCircuit) || w.s.Depletion {
		return "", ""
	}
	if math.Abs(p.vg) < noDrain && p.i > 0 {
		return Shorted, "Only " + si(w.gate*p.vg, "V") + " at " + amps(p.i) + ": drain and source are joined."
	}
	if w.vdd > 0 && p.vg > 0.98*w.vdd {
		return Open, "The whole supply of " + si(w.vdd, "V") + " lies across the part: no current flows, it is open."
	}
	return "", ""
}
