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
// memory).
const (
	krigeSide  = 4    // points on either side
	krigeReach = 0.16 // V, over which what is left over changes (chosen on self-made smooth curves)
	krigeUsual = 0.5e-3
	krigeRange = 1.2 // standard deviation of its logarithm
)

// krigeSizes are the sizes tried, V.
var krigeSizes = [...]float64{0.1e-3, 0.25e-3, 0.6e-3, 1.5e-3, 4e-3, 10e-3, 25e-3}

// residuals around a place, to be spread.
type spreading struct {
	x, r, s [2 * krigeSide]float64 // V: gate voltage, residual, its standard deviation
	w       [2 * krigeSide]float64 // weight of each in the value
	n       int
	size    float64 // V, of what is left over
	k, l    [2 * krigeSide][2 * krigeSide]float64
}

// alike is the correlation of what is left over at a distance.
func alike(d float64) float64 {
	z := math.Sqrt(5) * math.Abs(d) / krigeReach
	return (1 + z + z*z/3) * math.Exp(-z)
}

// at gives what is left over at x, V, and its standard deviation beyond the noise
// of the residuals; the weights stand in w.
func (p *spreading) at(x float64) (value, u float64) {
	n := p.n
	var near [2 * krigeSide]float64
	for i := range n {
		near[i] = alike(p.x[i] - x)
		for j := range i + 1 {
			p.k[i][j] = alike(p.x[i] - p.x[j])
		}
	}
	var sum, mean, vari, second float64
	var weights [2 * krigeSide]float64
	best := math.Inf(-1)
	var like [len(krigeSizes)]float64
	for m, a := range krigeSizes {
		like[m] = p.likelihood(a)
		best = math.Max(best, like[m])
	}
	p.size = 0
	for m, a := range krigeSizes {
		share := math.Exp(like[m] - best)
		if share < 1e-3 || math.IsNaN(share) {
			continue
		}
		p.likelihood(a) // leaves the factor in l
		var w [2 * krigeSide]float64
		for i := range n {
			w[i] = a * a * near[i]
		}
		p.solve(&w)
		v, left := 0.0, a*a
		for i := range n {
			v += w[i] * p.r[i]
			left -= w[i] * a * a * near[i]
			weights[i] += share * w[i]
		}
		sum += share
		mean += share * v
		second += share * v * v
		vari += share * math.Max(0, left)
		p.size += share * a
	}
	if !(sum > 0) {
		return 0, 0
	}
	for i := range n {
		p.w[i] = weights[i] / sum
	}
	mean /= sum
	p.size /= sum
	return mean, math.Sqrt(vari/sum + math.Max(0, second/sum-mean*mean))
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
	var z [2 * krigeSide]float64
	q := 0.0
	for i := range n {
		v := p.r[i]
		for m := range i {
			v -= p.l[i][m] * z[m]
		}
		z[i] = v / p.l[i][i]
		q += z[i] * z[i]
	}
	d := math.Log(a/krigeUsual) / krigeRange
	return -(q + logDet + d*d) / 2
}

// solve replaces b by the solution of l lᵀ x = b.
func (p *spreading) solve(b *[2 * krigeSide]float64) {
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
