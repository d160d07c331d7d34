package fit

import (
	"math"
	"sync"
)

// kneeSeries is a function y(z), exp(z) far below 0 and z far above, by its Taylor series
// about every sixteenth from -far to far: good to a relative 5e-15, its slope to
// 2e-12, and two to three times as fast as exponentials and logarithms.
type kneeSeries [32*far + 1][8]float64

// far is the argument of the knee beyond which it is straight (or nothing) to the
// last bit.
const far = 37

// at gives y and its slope, for -far <= z <= far.
func (k *kneeSeries) at(z float64) (y, slope float64) {
	j := int(16*(z+far) + 0.5)
	h := z - (float64(j)/16 - far)
	t := &k[j]
	y = t[7]*h + t[6]
	slope = t[7]*h + y
	y = y*h + t[5]
	slope = slope*h + y
	y = y*h + t[4]
	slope = slope*h + y
	y = y*h + t[3]
	slope = slope*h + y
	y = y*h + t[2]
	slope = slope*h + y
	y = y*h + t[1]
	slope = slope*h + y
	return y*h + t[0], slope
}

// smoothKnee is ln(1 + exp(z)); its slope s obeys s' = s - s².
var smoothKnee = sync.OnceValue(func() *kneeSeries {
	return newKnee(2, func(z float64) (y, slope float64) {
		e := math.Exp(-math.Abs(z))
		return math.Max(0, z) + math.Log1p(e), 1 / (1 + math.Exp(-z))
	})
})

// sharpKnee is asinh(exp(z)/2); its slope s obeys s' = s - s³.
var sharpKnee = sync.OnceValue(func() *kneeSeries {
	return newKnee(3, func(z float64) (y, slope float64) {
		e := math.Exp(z) / 2
		return math.Asinh(e), e / math.Sqrt(1+e*e)
	})
})

// newKnee makes the coefficients from value and slope at every place, and from
// s' = s - s^power, which gives one coefficient of the slope after the other.
func newKnee(power int, at func(z float64) (y, slope float64)) *kneeSeries {
	k := new(kneeSeries)
	for j := range k {
		t := &k[j]
		t[0], t[1] = at(float64(j)/16 - far)
		s := [7]float64{t[1]}
		for n := range 6 {
			p := s // coefficients of s^power up to the n-th
			for range power - 1 {
				p = product(p, s)
			}
			s[n+1] = (s[n] - p[n]) / float64(n+1)
			t[n+2] = s[n+1] / float64(n+2)
		}
	}
	return k
}

// product is the product of two series.
func product(a, b [7]float64) (c [7]float64) {
	for i, x := range a {
		for j, y := range b[:len(b)-i] {
			c[i+j] += x * y
		}
	}
	return c
}
