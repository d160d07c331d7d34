package fit

import "math"

// What the model leaves over at the points is spread between them as a smooth
// function of the gate voltage: a Gaussian process whose size is found from the
// residuals themselves. A model that is right to the noise leaves nothing to spread;
// one that is wrong by millivolts, but smoothly, is put right at and between the
// points.
//
// Source: G. Matheron, Economic Geology 58 (1963) 1246–1266 (from memory); Matérn
// covariance of order 5/2, size by marginal likelihood: C. E. Rasmussen and C. K. I.
// Williams, Gaussian Processes for Machine Learning (2006), chapters 2 and 5 (from
// memory). Checked: TestSpreadingFollowsWhatIsSmooth, TestSpreadingIsHonest.
const (
	krigeSide = 4 // points on either side
	// krigeReach is over what distance what is left over changes, V (chosen on
	// self-made smooth curves).
	krigeReach = 0.16
	// krigeUsual is its usual size, V, and krigeRange the standard deviation of the
	// logarithm of that.
	krigeUsual = 0.5e-3
	krigeRange = 1.2
	// krigeShare is the usual size as a share of the current, where the curve is
	// flat: there it is the current that a model is wrong by (half of what a
	// handheld scatters by, a judgement).
	krigeShare = 0.5e-3
	// krigeLeast is the least share of the greatest likelihood that counts.
	krigeLeast = 1e-3
)

// krigeSizes are the sizes tried, V.
var krigeSizes = [...]float64{0.1e-3, 0.25e-3, 0.6e-3, 1.5e-3, 4e-3, 10e-3, 25e-3}

// kriged is one number for each of the points around a place.
type kriged [2 * krigeSide]float64

// spreading is what a model leaves over at the points around a place, to be spread.
type spreading struct {
	x, r, s kriged  // V: gate voltage, residual, its standard deviation
	n       int     // points
	usual   float64 // V, size to expect of what is left over
	w       kriged  // weight of each residual in the value
	k, l    [2 * krigeSide]kriged
}

// seen is the size of what is left over at the points beyond their noise, V.
func (p *spreading) seen() float64 {
	sum := 0.0
	for i := range p.n {
		sum += p.r[i]*p.r[i] - p.s[i]*p.s[i]
	}
	return math.Sqrt(math.Max(0, sum/math.Max(1, float64(p.n))))
}

// alike is the correlation of what is left over at a distance, V.
func alike(d float64) float64 {
	z := math.Sqrt(5) * math.Abs(d) / krigeReach
	return (1 + z + z*z/3) * math.Exp(-z)
}

// at gives what is left over at x, V, and its standard deviation beyond what the
// noise of the residuals makes, averaged over the sizes by their likelihood; the
// weights stand in w. Of no points nothing is left over.
func (p *spreading) at(x float64) (value, u float64) {
	var near kriged
	for i := range p.n {
		near[i] = alike(p.x[i] - x)
		for j := range i + 1 {
			p.k[i][j] = alike(p.x[i] - p.x[j])
		}
	}
	p.w = kriged{}
	var like [len(krigeSizes)]float64
	best := math.Inf(-1)
	for m, a := range krigeSizes {
		like[m] = p.likelihood(a)
		best = math.Max(best, like[m])
	}
	var sum, second, open float64
	for m, a := range krigeSizes {
		share := math.Exp(like[m] - best)
		if !(share >= krigeLeast) {
			continue
		}
		w, left := p.weights(a, &near)
		v := 0.0
		for i := range p.n {
			v += w[i] * p.r[i]
			p.w[i] += share * w[i]
		}
		sum += share
		value += share * v
		second += share * v * v
		open += share * left
	}
	if !(sum > 0) {
		return 0, 0
	}
	for i := range p.n {
		p.w[i] /= sum
	}
	value /= sum
	return value, math.Sqrt(open/sum + math.Max(0, second/sum-value*value))
}

// weights are those of the residuals when what is left over has size a, and the
// variance that remains, V².
func (p *spreading) weights(a float64, near *kriged) (w kriged, left float64) {
	p.likelihood(a) // leaves the factor in l
	for i := range p.n {
		w[i] = a * a * near[i]
	}
	p.solve(&w)
	left = a * a
	for i := range p.n {
		left -= w[i] * a * a * near[i]
	}
	return w, math.Max(0, left)
}

// likelihood is the logarithm of how likely the residuals are with size a, up to a
// constant; it leaves the Cholesky factor of their covariance in l.
func (p *spreading) likelihood(a float64) float64 {
	n := p.n
	logDet := 0.0
	for i := range n {
		for j := range i + 1 {
			v := a * a * p.k[i][j]
			if i == j {
				v += p.s[i]*p.s[i] + 1e-16
			}
			for m := range j {
				v -= p.l[i][m] * p.l[j][m]
			}
			if i == j {
				p.l[i][i] = math.Sqrt(v)
				logDet += math.Log(v)
			} else {
				p.l[i][j] = v / p.l[j][j]
			}
		}
	}
	var z kriged
	q := 0.0
	for i := range n {
		v := p.r[i]
		for m := range i {
			v -= p.l[i][m] * z[m]
		}
		z[i] = v / p.l[i][i]
		q += z[i] * z[i]
	}
	d := math.Log(a/p.usual) / krigeRange
	return -(q + logDet + d*d) / 2
}

// solve replaces b by the solution of l lᵀ x = b.
func (p *spreading) solve(b *kriged) {
	for i := range p.n {
		for m := range i {
			b[i] -= p.l[i][m] * b[m]
		}
		b[i] /= p.l[i][i]
	}
	for i := p.n - 1; i >= 0; i-- {
		for m := i + 1; m < p.n; m++ {
			b[i] -= p.l[m][i] * b[m]
		}
		b[i] /= p.l[i][i]
	}
}
