package fit

import "math"

// maxDegree is the highest degree of a local polynomial.
const maxDegree = 3

// poly is a weighted least-squares polynomial over a few points, held in the
// polynomials that are orthogonal over just these points. That needs no matrix,
// and gives value and slope anywhere as a linear map of the ordinates, so that
// their uncertainties follow from the map.
//
// Source: G. E. Forsythe, "Generation and use of orthogonal polynomials for
// data-fitting with a digital computer", J. SIAM 5 (1957) 74–88 (from memory).
// On a uniform grid with equal weights it is the smoothing and differentiation
// of A. Savitzky and M. J. E. Golay, Anal. Chem. 36 (1964) 1627–1639.
// Checked: TestSavitzkyGolay, TestPolyExact, TestPolyNIST.
type poly struct {
	x, w   []float64 // abscissas and weights (nil: all one); not copied
	degree int
	alpha  [maxDegree + 1]float64
	beta   [maxDegree + 1]float64
	norm   [maxDegree + 1]float64
	c      [maxDegree + 1]float64
	b      []float64 // basis k at point j: b[k*len(x)+j]
}

// basis evaluates the polynomials and their slopes at x.
func (p *poly) basis(x float64) (v, s [maxDegree + 1]float64) {
	v[0] = 1
	for k := range p.degree {
		v[k+1] = (x - p.alpha[k]) * v[k]
		s[k+1] = v[k] + (x-p.alpha[k])*s[k]
		if k > 0 {
			v[k+1] -= p.beta[k] * v[k-1]
			s[k+1] -= p.beta[k] * s[k-1]
		}
	}
	return v, s
}

// fit finds the polynomial of that degree through x, y with weights w (1/σ²;
// nil: equal), x ascending. It returns false when there are not more different
// abscissas than the degree.
func (p *poly) fit(x, y, w []float64, degree int) bool {
	m := len(x)
	if m <= degree || m > 1 && !(x[m-1] > x[0]) {
		return false
	}
	p.x, p.w, p.degree = x, w, degree
	if need := (degree + 1) * m; cap(p.b) < need {
		room := need
		if degree > 1 { // a window that may grow
			room = max(need, (maxDegree+1)*(2*windowSide+2))
		}
		p.b = make([]float64, need, room)
	} else {
		p.b = p.b[:need]
	}
	for j := range m {
		p.b[j] = 1
	}
	scale, span := 0.0, x[m-1]-x[0]
	for k := 0; ; k++ {
		b := p.b[k*m : (k+1)*m]
		var norm, xnorm, c float64
		for j, v := range b {
			g := v
			if w != nil {
				g *= w[j]
			}
			c += g * y[j]
			g *= v
			norm += g
			xnorm += g * x[j]
		}
		if !(norm > 1e-22*scale) || math.IsInf(norm, 0) {
			return false
		}
		scale = norm * span * span
		p.norm[k], p.c[k] = norm, c/norm
		if k == degree {
			return true
		}
		a := xnorm / norm
		p.alpha[k] = a
		next := p.b[(k+1)*m : (k+2)*m]
		if k == 0 {
			for j := range next {
				next[j] = x[j] - a
			}
			continue
		}
		p.beta[k] = norm / p.norm[k-1]
		before := p.b[(k-1)*m : k*m]
		for j := range next {
			next[j] = (x[j]-a)*b[j] - p.beta[k]*before[j]
		}
	}
}

// at gives value and slope at x.
func (p *poly) at(x float64) (value, slope float64) {
	v, s := p.basis(x)
	for k := range p.degree + 1 {
		value += p.c[k] * v[k]
		slope += p.c[k] * s[k]
	}
	return value, slope
}

// maps writes the linear maps from the ordinates to value and slope at x:
// value = Σ value[j] y[j]. Either may be nil.
func (p *poly) maps(x float64, value, slope []float64) {
	v, s := p.basis(x)
	if value != nil {
		p.row(v, value)
	}
	if slope != nil {
		p.row(s, slope)
	}
}

// row writes the linear map to Σ at[k] c[k].
func (p *poly) row(at [maxDegree + 1]float64, row []float64) {
	for j := range p.x {
		row[j] = p.share(&at, j)
	}
}

// share is the part that ordinate j has in Σ at[k] c[k].
func (p *poly) share(at *[maxDegree + 1]float64, j int) float64 {
	g, m := 0.0, len(p.x)
	for k := 0; k <= p.degree; k++ {
		g += p.b[k*m+j] * at[k] / p.norm[k]
	}
	if p.w != nil {
		g *= p.w[j]
	}
	return g
}

// scatter is the standard deviation that uncertainties sigma of the ordinates
// leave in the value (slope false) or the slope (true) at x.
func (p *poly) scatter(x float64, sigma []float64, slope bool) float64 {
	v, s := p.basis(x)
	if slope {
		v = s
	}
	sum := 0.0
	for j := range p.x {
		g := p.share(&v, j) * sigma[j]
		sum += g * g
	}
	return math.Sqrt(sum)
}

// solve finds x near start with value y by Newton's rule, kept within lo…hi;
// NaN when the polynomial does not rise there.
func (p *poly) solve(y, start, lo, hi float64) (x, slope float64) {
	x = start
	for range 12 {
		v, s := p.at(x)
		if !(s > 0) {
			return math.NaN(), math.NaN()
		}
		next := math.Min(math.Max(x-(v-y)/s, lo), hi)
		if math.Abs(next-x) <= 1e-6*(hi-lo) { // the step after it squares that
			_, s = p.at(next)
			return next, s
		}
		x = next
	}
	return math.NaN(), math.NaN()
}
