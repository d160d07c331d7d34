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
// Checked: TestSavitzkyGolay, TestPolyExact.
type poly struct {
	x, w   []float64 // abscissas and weights (nil: all one); not copied
	degree int
	alpha  [maxDegree + 1]float64
	beta   [maxDegree + 1]float64
	norm   [maxDegree + 1]float64
	c      [maxDegree + 1]float64
}

func (p *poly) weight(j int) float64 {
	if p.w == nil {
		return 1
	}
	return p.w[j]
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
// nil: equal). It returns false when there are not more different abscissas
// than the degree.
func (p *poly) fit(x, y, w []float64, degree int) bool {
	if len(x) <= degree {
		return false
	}
	*p = poly{x: x, w: w}
	for k := 0; ; k++ {
		// The basis up to degree k is known here; project on its last member.
		var norm, xnorm, c float64
		for j := range x {
			v, _ := p.basis(x[j])
			g := p.weight(j) * v[k]
			norm += g * v[k]
			xnorm += g * v[k] * x[j]
			c += g * y[j]
		}
		if !(norm > 0) || math.IsInf(norm, 0) {
			return false
		}
		p.norm[k], p.c[k] = norm, c/norm
		if k == degree {
			return true
		}
		p.alpha[k] = xnorm / norm
		if k > 0 {
			p.beta[k] = norm / p.norm[k-1]
		}
		p.degree = k + 1
		// Nothing left to be spanned: fewer different abscissas than thought.
		span := x[len(x)-1] - x[0]
		if !(span > 0) {
			return false
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
	for k := range p.degree + 1 {
		v[k] /= p.norm[k]
		s[k] /= p.norm[k]
	}
	for j := range p.x {
		b, _ := p.basis(p.x[j])
		g, d := 0.0, 0.0
		for k := range p.degree + 1 {
			g += b[k] * v[k]
			d += b[k] * s[k]
		}
		if value != nil {
			value[j] = p.weight(j) * g
		}
		if slope != nil {
			slope[j] = p.weight(j) * d
		}
	}
}

// scatter is the standard deviation that uncertainties sigma of the ordinates
// leave in the value (slope false) or the slope (true) at x.
func (p *poly) scatter(x float64, sigma []float64, slope bool) float64 {
	v, s := p.basis(x)
	if slope {
		v = s
	}
	for k := range p.degree + 1 {
		v[k] /= p.norm[k]
	}
	sum := 0.0
	for j := range p.x {
		b, _ := p.basis(p.x[j])
		g := 0.0
		for k := range p.degree + 1 {
			g += b[k] * v[k]
		}
		g *= p.weight(j) * sigma[j]
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
		if math.Abs(next-x) <= 1e-12*(hi-lo) {
			_, s = p.at(next)
			return next, s
		}
		x = next
	}
	return math.NaN(), math.NaN()
}
