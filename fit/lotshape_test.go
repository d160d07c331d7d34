package fit

import (
	"math"
	"testing"
)

// A lot of which most parts were swept in 60 mV steps and some were read at a few
// points far apart (self-made: smooth and kinked knees, gains spread by 3 %, thresholds
// by 50 mV): read along the lot's median shape, those few tell V_GS at 5 mA far better
// than alone, and u stays honest.
func TestLotShapeHelps(t *testing.T) {
	r := randomSource(44)
	b := simBench{circuit: Diode}
	for _, l := range []law{smoothLaw, kinkedLaw} {
		for _, step := range []float64{0.15, 0.25} {
			var alone, helped honesty
			for range 12 {
				s := b.setup()
				s.TestCurrent = 5e-3
				beta, n := 1+3*r.Float64(), 1.2+0.3*r.Float64()
				part := func() simDevice {
					return simDevice{law: l, vt: 3 + 0.05*r.NormFloat64(), beta: beta * (1 + 0.03*r.NormFloat64()), n: n, theta: 0.1}
				}
				var results []Result
				for range 8 {
					results = append(results, One(part().sweep(r, b, fineMeters(), 2.5+0.06*r.Float64(), 4, 0.06, 0.01), s))
				}
				shape, ok := ShapeOfLot(results)
				if !ok {
					t.Fatalf("law %d, %g V steps: no shape", l, step)
				}
				with := s
				with.Lot = &shape
				for range 8 {
					d := part()
					c := d.sweep(r, b, fineMeters(), 2.9-step*r.Float64(), 3.6, step, step/7)
					want := d.gateFor(b, 5e-3)
					p, q := One(c, s), One(c, with)
					if p.Vgsth.Ok() {
						alone.add(p.Vgsth.Value-want, p.Vgsth.U)
					}
					if !q.Vgsth.Ok() {
						t.Errorf("law %d, %g V steps: %s %s", l, step, q.State, q.Why)
						continue
					}
					if !q.Has(CodeLotShape) {
						t.Errorf("law %d, %g V steps: helped, and not said: %s", l, step, codesOf(q))
					}
					helped.add(q.Vgsth.Value-want, q.Vgsth.U)
				}
			}
			t.Logf("law %d, %g V steps: alone %s; with the lot's shape %s", l, step, &alone, &helped)
			// Where each alone is good to half a millivolt there is nothing to help.
			if !(rms(helped.errors) < math.Max(0.5*rms(alone.errors), 0.5e-3)) || helped.within(2) < 0.9 {
				t.Errorf("law %d, %g V steps: no help", l, step)
			}
		}
	}
}

// With points enough of its own a device is not touched by the shape of its lot.
func TestLotShapeLeavesOthersAlone(t *testing.T) {
	c, s := thirtyPoints(Diode)
	alone := One(c, s)
	s.Lot = &LotShape{Foot: KinkedFoot, LnBeta: 3, LnBetaSpread: 0.01, LnN: 1, LnNSpread: 0.01, Theta: 2, ThetaSpread: 0.01, Devices: 9}
	r := One(c, s)
	if alone.Own.Sparse || r.Has(CodeLotShape) || r.Vgsth.Value != alone.Vgsth.Value || r.VgsIdle.Value != alone.VgsIdle.Value {
		t.Errorf("%+v without, %+v with", alone.Vgsth, r.Vgsth)
	}
}

func TestShapeOfLot(t *testing.T) {
	var rs []Result
	for k := range 4 {
		rs = append(rs, Result{Own: OwnShape{Ok: true, LnBeta: float64(k), Foot: SharpFoot}})
	}
	if _, ok := ShapeOfLot(rs); ok {
		t.Error("four devices are too few")
	}
	rs = append(rs, Result{Own: OwnShape{Ok: true, LnBeta: 9}}, Result{Own: OwnShape{Ok: true, Sparse: true, LnBeta: 99}}, Result{}) // these two are not asked
	s, ok := ShapeOfLot(rs)
	if !ok || s.Devices != 5 || s.Foot != SharpFoot || s.LnBeta != 2 || math.Abs(s.LnBetaSpread-1.4826) > 1e-12 || s.ThetaSpread != leastThetaSpread {
		t.Errorf("%+v %v", s, ok)
	}
}
