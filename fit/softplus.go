package fit

import "math"

// softplus is ln(1+exp(-m)) and exp(-m)/(1+exp(-m)) for 0 <= m <= far, by the
// Taylor series about the nearest sixteenth: good to a relative 1e-15 and 1e-14, and
// twice as fast as by exponential and logarithm.
func softplus(m float64) (f, d float64) {
	k := int(16*m + 0.5)
	h := float64(k)/16 - m
	t := &softplusSeries[k]
	f, d = t[7], t[7]
	f = f*h + t[6]
	d = d*h + f
	f = f*h + t[5]
	d = d*h + f
	f = f*h + t[4]
	d = d*h + f
	f = f*h + t[3]
	d = d*h + f
	f = f*h + t[2]
	d = d*h + f
	f = f*h + t[1]
	d = d*h + f
	return f*h + t[0], d
}

// softplusSeries are the coefficients of ln(1+exp(z)) about z = -k/16. Its slope
// s(z) obeys s' = s - s², which gives coefficient after coefficient.
var softplusSeries = func() (t [16*far + 1][8]float64) {
	for k := range t {
		e := math.Exp(-float64(k) / 16)
		var s [7]float64
		s[0] = e / (1 + e)
		t[k][0] = math.Log1p(e)
		for n := range s {
			t[k][n+1] = s[n] / float64(n+1)
			if n+1 < len(s) {
				square := 0.0
				for i := range n + 1 {
					square += s[i] * s[n-i]
				}
				s[n+1] = (s[n] - square) / float64(n+1)
			}
		}
	}
	return t
}()
