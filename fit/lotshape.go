package fit

import (
	"math"
	"slices"
)

// LotShape is what the curves of a lot have in common: medians over its devices, and
// by how much these differ. A device with too few points of its own is read along it.
type LotShape struct {
	Foot                 Foot
	LnBeta, LnBetaSpread float64 // ln of the gain factor in A/V²
	LnN, LnNSpread       float64 // ln of the width of the knee, as n
	Theta, ThetaSpread   float64 // 1/V
	Devices              int
}

// OwnShape is the shape that one device's points near a crossing tell.
type OwnShape struct {
	Ok     bool
	Sparse bool // too few points to tell: a shape of the lot would help
	Foot   Foot
	LnBeta float64 // ln of A/V²
	LnN    float64
	Theta  float64 // 1/V
}

const (
	// fewestShapes is the fewest devices that tell the shape of a lot (judgement).
	fewestShapes = 5
	// The least that devices of a lot differ by: another die may be among them.
	leastLnBetaSpread, leastLnNSpread, leastThetaSpread = 0.08, 0.15, 0.03
	// sparseOn is the number of points with a current below which a device tells
	// nothing of its own shape, and sparsePoints the fewest it may be read from with
	// the lot's.
	sparseOn     = 7
	sparsePoints = 3
)

// ShapeOfLot gives the shape of a lot from the results of its devices; false where
// too few have points enough to tell theirs. Those with too few points are not asked:
// together they tell no better than each alone (tried on self-made lots).
//
// Source: median and 1.4826 MAD, common practice. Checked: TestLotShapeHelps.
func ShapeOfLot(rs []Result) (LotShape, bool) {
	var beta, n, theta []float64
	var s LotShape
	feet := map[Foot]int{}
	for i := range rs {
		if o := &rs[i].Own; o.Ok && !o.Sparse {
			beta, n, theta = append(beta, o.LnBeta), append(n, o.LnN), append(theta, o.Theta)
			feet[o.Foot]++
		}
	}
	if s.Devices = len(beta); s.Devices < fewestShapes {
		return LotShape{}, false
	}
	for f := range feet {
		if feet[f] > feet[s.Foot] || feet[f] == feet[s.Foot] && f < s.Foot {
			s.Foot = f
		}
	}
	s.LnBeta, s.LnBetaSpread = middle(beta, leastLnBetaSpread)
	s.LnN, s.LnNSpread = middle(n, leastLnNSpread)
	s.Theta, s.ThetaSpread = middle(theta, leastThetaSpread)
	return s, true
}

// middle is the median of x and 1.4826 times the median distance from it, at least
// least.
func middle(x []float64, least float64) (m, spread float64) {
	x = slices.Clone(x)
	m = median(x)
	for i := range x {
		x[i] = math.Abs(x[i] - m)
	}
	return m, math.Max(least, 1.4826*median(x))
}

// sparse reports whether the points around the crossing tell nothing of the shape.
func (t *along) sparse() bool { return t.squeezed || t.w.standing() < sparseOn }

// lotPriors puts what is known of the lot in place of what is usual.
func (t *along) lotPriors(s *LotShape) {
	t.mean[parBeta], t.sd[parBeta] = s.LnBeta, s.LnBetaSpread
	t.mean[parTheta], t.sd[parTheta] = s.Theta, s.ThetaSpread
	t.p[parBeta], t.p[parTheta] = s.LnBeta, s.Theta
	// The threshold that puts the first point above the current on the lot's curve.
	over := math.Sqrt(2 * t.i[t.b] / math.Exp(s.LnBeta))
	if t.f.drain == 0 && t.w.resistive() {
		over = t.i[t.b]/(math.Exp(s.LnBeta)*t.vtop[t.b]) + t.vtop[t.b]/2
	}
	t.p[parVt] = t.vg[t.b] - over
}
