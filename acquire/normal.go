package acquire

import "math"

// normal are the sums of a linear fit by least squares.
type normal struct {
	k  int
	m  []float64 // k by k
	y  []float64
	yy float64
}

// add takes a point: the values of the basis there, and what was measured.
func (s *normal) add(basis []float64, v float64) {
	if s.k == 0 {
		s.k = len(basis)
		s.m, s.y = make([]float64, s.k*s.k), make([]float64, s.k)
	}
	for i, a := range basis {
		for j, b := range basis {
			s.m[i*s.k+j] += a * b
		}
		s.y[i] += a * v
	}
	s.yy += v * v
}

// solve gives the coefficients, the inverse of the matrix of the sums (k by k) and the sum of
// squares that is left, by Gauss and Jordan. Everything is NaN when the points do not
// determine the coefficients.
func (s *normal) solve() (x, inverse []float64, left float64) {
	k := s.k
	a := append([]float64(nil), s.m...)
	inverse, x = make([]float64, k*k), make([]float64, k)
	for i := range k {
		inverse[i*k+i] = 1
	}
	for c := range k {
		p := c
		for r := c + 1; r < k; r++ {
			if math.Abs(a[r*k+c]) > math.Abs(a[p*k+c]) {
				p = r
			}
		}
		if !(math.Abs(a[p*k+c]) > 1e-13*math.Abs(s.m[c*k+c])) {
			for i := range inverse {
				inverse[i] = math.NaN()
			}
			break
		}
		for j := range k {
			a[c*k+j], a[p*k+j] = a[p*k+j], a[c*k+j]
			inverse[c*k+j], inverse[p*k+j] = inverse[p*k+j], inverse[c*k+j]
		}
		f := a[c*k+c]
		for j := range k {
			a[c*k+j] /= f
			inverse[c*k+j] /= f
		}
		for r := range k {
			if f := a[r*k+c]; r != c && f != 0 {
				for j := range k {
					a[r*k+j] -= f * a[c*k+j]
					inverse[r*k+j] -= f * inverse[c*k+j]
				}
			}
		}
	}
	left = s.yy
	for i := range k {
		for j := range k {
			x[i] += inverse[i*k+j] * s.y[j]
		}
		left -= x[i] * s.y[i]
	}
	return x, inverse, math.Max(0, left)
}
