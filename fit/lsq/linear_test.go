package lsq

import (
	"math"
	"testing"
)

// linear is a regression on an intercept, where there is one, and powers of one
// regressor or several regressors as they are.
func (d *strd) linear() Problem {
	y, xs := d.Data["y"], d.regressors()
	m, n := len(y), len(d.Expected.P)
	a := make([]float64, m*n)
	for i := range m {
		for j, k := range d.Expected.Indices {
			v := 0.0
			if len(xs) == 1 {
				v = math.Pow(xs[0][i], float64(k))
			} else if k == 0 {
				v = 1
			} else {
				v = xs[k-1][i]
			}
			a[j*m+i] = v
		}
	}
	return matrix(a, y, n)
}

// matrix is the linear problem A p = y, A column by column.
func matrix(a, y []float64, n int) Problem {
	m := len(y)
	return Problem{M: m, N: n, Eval: func(p, r, jac []float64) bool {
		for i, v := range y {
			sum := -v
			for j, b := range p {
				sum += a[j*m+i] * b
			}
			r[i] = sum
		}
		copy(jac, a)
		return true
	}}
}

// Certified values: NIST StRD, Linear Regression, 15 digits. All start at zero
// and are raw powers or raw regressors, without centring.
//
// The digits asked for are some below those reached (amd64), and never fewer
// than 6. Least sure are Filip, whose columns, ten powers of x between -3 and -9,
// have a condition number of 5e9 after scaling to one length (numpy 1.24.2), so
// that the rounding of x^10 alone moves the parameters in the eighth digit; and
// Wampler4 and Wampler5, whose noise is a hundred and ten thousand times that of
// Wampler3: with large residuals the square of the condition number counts.
// Wampler1 and Wampler2 have no residuals at all: there what is left must lie
// within rounding of the readings.
func TestNISTLinear(t *testing.T) {
	const most = 14.0
	want := map[string]float64{
		"norris": 10, "pontius": 10, "noint1": 10, "noint2": 10, "longley": 8, "filip": 6,
		"wampler1": 8, "wampler2": 8, "wampler3": 8, "wampler4": 8, "wampler5": 6,
	}
	var s Solver
	for name, digit := range want {
		d := loadStrd(t, "linear_"+name)
		f := s.Solve(d.linear(), make([]float64, len(d.Expected.P)), Options{})
		p := fewest(f.P, d.Expected.P, most)
		sd, rsd := most, most
		if d.Expected.RSD > 0 {
			sd = fewest(f.errors(true), d.Expected.SD, most)
			rsd = digits(math.Sqrt(f.Scale()), d.Expected.RSD, most)
		} else if left := math.Sqrt(f.SSR); f.Reason != ByExact || !(left <= 10*epsilon*math.Sqrt(dot(d.Data["y"], d.Data["y"]))) {
			t.Errorf("%s: %s with residuals of %.3g, want zero to rounding", name, f.Reason, left)
		}
		t.Logf("%-8s %-20s %3d calls; digits: parameters %4.1f, sd %4.1f, rsd %4.1f", name, f.Reason, f.Evals, p, sd, rsd)
		if !f.Reason.Converged() || p < digit || sd < digit || rsd < digit {
			t.Errorf("%s: %s, digits %.1f %.1f %.1f, want %g", name, f.Reason, p, sd, rsd, digit)
		}
	}
}
