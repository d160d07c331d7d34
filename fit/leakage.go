package fit

import "math"

const (
	// offReach is how near to the off voltage a point must lie to tell of the
	// drain leakage, V.
	offReach = 0.2
	// leakShare of the test current, but at least leakLeast, is more drain
	// current at the off voltage than a sound part shows. Data sheets allow 5 mA
	// at a test current of 100 mA (MRF150, Motorola 1998), and sound parts stay
	// far below their limit: the share is a judgement.
	leakShare = 0.02
	leakLeast = 20e-6
	// noTestCurrent stands in when no test current is given, A.
	noTestCurrent = 1e-3
)

// leakage fills in the drain current at the off voltage, from the point or
// points nearest to it. Points on the conducting side count only when they lie
// well below turn-on: a logarithmic slope there shows conduction, not leakage.
//
// Result: A; [None] when nothing was measured within 0.2 V of the off voltage.
// Warns drain-leakage above 2 % of the test current, at least 20 µA, where the
// meter can tell that from its zero and from its noise: five standard deviations,
// those of the difference of two large voltages included. Checked: TestLeakage.
func (w *work) leakage(r *Result) {
	off := w.s.OffV
	if math.IsNaN(off) {
		return
	}
	near := math.Inf(1)
	for j := range w.pts {
		near = math.Min(near, math.Abs(w.pts[j].vg-off))
	}
	if !(near <= offReach) {
		return
	}
	sum, uu, q, room, n := 0.0, 0.0, 0.0, 0.0, 0
	top := 0.0
	least, most := math.Inf(1), math.Inf(-1)
	for j := range w.pts {
		p := &w.pts[j]
		if math.Abs(p.vg-off) <= near+1e-9 {
			least, most = math.Min(least, p.i), math.Max(most, p.i)
			sum += p.i
			uu += p.u * p.u
			q = math.Max(q, p.q)
			room = math.Max(room, p.room)
			n++
			top = math.Max(top, p.vg)
		}
	}
	i := sum / float64(n)
	if top > off+0.02 && w.turningOn(top) || w.byDrain && !w.ammeter && !w.vddRead {
		return
	}
	u := math.Max(math.Sqrt(uu)/float64(n), q/math.Sqrt(12*float64(n)))
	if most-least < q/4 {
		u = math.Max(u, q/math.Sqrt(12)) // equal readings share one error of rounding
	}
	size := math.Max(math.Abs(i), q)
	abs := w.relativeUsed(size) * size
	var b budget
	b.add(InScatter, u, 1)
	w.addCurrent(&b, size, size, 1)
	w.addKelvin(&b, leakPerKelvin*i)
	r.Idss = w.quantity(w.sign*i, &b, n, float64(n-1))
	w.judgeLeakage(i, q, math.Max(room/math.Sqrt(float64(n)), u), abs)
}

// turningOn reports whether the current at vg already rises as a channel does,
// by e-fold in less than 0.1 V, to the points after it.
func (w *work) turningOn(vg float64) bool {
	for j := 0; j+1 < len(w.pts); j++ {
		p, q := &w.pts[j], &w.pts[j+1]
		if p.vg < vg {
			continue
		}
		return p.above() && q.i > p.i && math.Log(q.i/p.i) > (q.vg-p.vg)/0.1 && q.vg-p.vg < 0.5
	}
	return false
}

func (w *work) judgeLeakage(i, q, noise, abs float64) {
	test := w.s.TestCurrent
	if !positive(test) {
		test = noTestCurrent
	}
	limit := math.Max(leakShare*test, leakLeast)
	if i <= limit || i <= floorCounts*q || i <= 5*noise || i <= 3*abs {
		return
	}
	w.warn(CodeDrainLeakage, "The drain carries "+amps(i)+" at the off voltage (more than "+amps(limit)+
		"): the part is leaky or its gate is not at "+volts(w.gate*w.s.OffV)+".")
}
