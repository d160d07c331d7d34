package fit

import (
	"math"
	"slices"
	"strings"
	"testing"
)

// denseCurve is one noise-free curve of testdata/spice, with the signs of an
// n-channel part, and the gate voltages at the currents of the test set.
type denseCurve struct {
	file, family, circuit, device string
	setup                         Setup
	vto, rs                       float64             // of the card, V and ohm
	even                          bool                // at even steps, else at those that a line between them needs
	v, i                          []float64           // V ascending, A
	truth                         map[float64]float64 // A -> V with the device's own sign; absent: never reached
}

// reaches reports whether the device carries that current in its circuit.
func (d *denseCurve) reaches(i float64) bool { _, ok := d.truth[i]; return ok }

// denseCurves reads all dense noise-free curves, those of held-back devices
// included: nothing may be chosen by what is found on these.
func denseCurves(t *testing.T) []*denseCurve {
	t.Helper()
	var all []*denseCurve
	held := 0
	for _, o := range readOutside(t, func(get func(string) string) bool {
		return get("meter") == "none" && (get("step") == "dense" || get("step") == "adaptive")
	}) {
		d := o.dense()
		if !d.even {
			d.family += " held"
			held++
		}
		all = append(all, d)
	}
	if held < 40 || len(all) < held+30 {
		t.Fatalf("%d dense curves only, %d of them held back", len(all), held)
	}
	return all
}

func (o *outsideCurve) dense() *denseCurve {
	d := &denseCurve{file: o.file, family: o.family, device: o.device, setup: o.setup, vto: o.vto, rs: o.rs, even: o.step == "dense", truth: map[float64]float64{}}
	d.circuit = o.circuit
	switch d.setup.Circuit {
	case Fixed:
		d.circuit = "fixed " + si(math.Abs(d.setup.Vds), "V")
	case Load:
		if d.setup.RL > 500 {
			d.circuit = "load1k"
		}
	}
	if !o.isDepletion {
		d.setup.OffV = 0
	}
	sign := 1.0
	if o.channelP {
		sign = -1
	}
	for k := range o.vg {
		d.v, d.i = append(d.v, sign*o.vg[k]), append(d.i, sign*o.id[k])
	}
	for k, v := range o.truth {
		if !math.IsNaN(v) {
			d.truth[o.currents[k]] = v
		}
	}
	return d
}

const (
	denseLeast  = 1e-9 // A, below which a straight line in I is good enough: no meter here shows it
	denseCorner = 1e-4 // V, what a corner must be worth to be told from a bend
)

// at is the drain current at gate voltage v by the dense curve: a straight line in
// ln I between neighbours, for which the points of held-back curves were picked.
// Where the others' slopes on either side say that there is a
// corner in between (level 3 has one at its knee), the lines on either side go on
// to where they meet.
//
// Checked: TestDenseInterpolation.
func (d *denseCurve) at(v float64) float64 {
	k, found := slices.BinarySearch(d.v, v)
	if found {
		return d.i[k]
	}
	k = min(max(k, 1), len(d.v)-1)
	h := d.v[k] - d.v[k-1]
	if d.i[k-1] < denseLeast {
		return d.i[k-1] + (d.i[k]-d.i[k-1])*(v-d.v[k-1])/h
	}
	slope := func(k int) float64 { return math.Log(d.i[k]/d.i[k-1]) / (d.v[k] - d.v[k-1]) }
	own := slope(k)
	y := math.Log(d.i[k-1]) + own*(v-d.v[k-1])
	if d.even && k >= 2 && k+1 < len(d.v) && d.i[k-2] >= denseLeast {
		left, right := slope(k-1), slope(k+1)
		if (right-left)*h/4 > denseCorner*own && left < own && own < right {
			before := math.Log(d.i[k-1]) + left*(v-d.v[k-1])
			after := math.Log(d.i[k]) + right*(v-d.v[k])
			y = math.Max(before, after)
		}
	}
	return math.Exp(y)
}

// span is where a sweep begins and ends, V: from where the part is off (a little
// way below 10 µA, or where the dense curve begins) to well above 250 mA where the
// circuit allows.
func (d *denseCurve) span() (from, to float64) {
	gate := func(i float64) float64 {
		k, _ := slices.BinarySearch(d.i, i)
		return d.v[min(k, len(d.v)-1)]
	}
	from = math.Max(d.v[0], gate(10e-6)-0.4)
	to = math.Min(gate(250e-3)+testTopOver, gate(testMaxId))
	return from, math.Min(to, d.v[len(d.v)-1])
}

// The interpolation of the dense curves lies within 0.05 mV of the simulator
// wherever a meter would show the current: the hand-turned files hold points of
// the same simulation at other gate voltages. Above 0.5 A, past every current
// that is asked for, where a load line comes to its end and the slope with it, it
// is the current that lies within half of the finest meters' noise.
func TestDenseInterpolation(t *testing.T) {
	const least, limit, strong, share = 1e-6, 0.05e-3, 0.5, 1.5e-4
	dense := map[string]*denseCurve{}
	for _, d := range denseCurves(t) {
		dense[strings.TrimSuffix(d.file, "_dense.csv")] = d
	}
	worst, where, n := 0.0, "", 0
	for _, o := range outsideCurves(t) {
		stem, ok := strings.CutSuffix(o.file, "_turned.csv")
		if !ok {
			continue
		}
		d, turned := dense[stem], o.dense()
		for k, v := range turned.v {
			i := turned.i[k]
			if i < least || v < d.v[0] || v > d.v[len(d.v)-1] {
				continue
			}
			if i > strong {
				if e := math.Abs(d.at(v)/i - 1); e > share {
					t.Errorf("%s at %g V (%g A): off by %.2g of the current", o.file, v, i, e)
				}
				continue
			}
			const h = 1e-4
			slope := (d.at(v+h) - d.at(v-h)) / (2 * h)
			e := math.Abs(d.at(v)-i) / slope
			if n++; e > worst {
				worst, where = e, o.file
			}
			if e > limit {
				t.Errorf("%s at %g V (%g A): off by %.4f mV", o.file, v, i, 1e3*e)
			}
		}
	}
	if n < 500 {
		t.Errorf("%d points compared only", n)
	}
	t.Logf("%d points, worst %.4f mV (%s)", n, 1e3*worst, where)
}
