package lsq

import "math"

// dot is Σ a_i b_i, in four sums for speed.
func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s0, s1, s2, s3 float64
	i := 0
	for ; i+4 <= len(a); i += 4 {
		s0 += a[i] * b[i]
		s1 += a[i+1] * b[i+1]
		s2 += a[i+2] * b[i+2]
		s3 += a[i+3] * b[i+3]
	}
	for ; i < len(a); i++ {
		s0 += a[i] * b[i]
	}
	return (s0 + s1) + (s2 + s3)
}

// add adds c a to b.
func add(c float64, a, b []float64) {
	b = b[:len(a)]
	for i, v := range a {
		b[i] += c * v
	}
}

// dependent is the sine of the angle to the others below which a column of the
// Jacobian is taken to lie in their space: what rounding alone makes of zero.
func dependent(m, n int) float64 { return 10 * epsilon * float64(max(m, n)) }

// mirror gives the Householder reflection that turns a column of length h with first
// entry x on to the first axis: what becomes of that entry, the first entry of the
// reflection's vector (the others are the column's own), and the factor of it.
func mirror(x, h float64) (onto, first, factor float64) {
	factor = -1 / (h * (h + math.Abs(x)))
	if x > 0 {
		return -h, x + h, factor
	}
	return h, x - h, factor
}

// factor takes the free columns of the Jacobian apart, J = QR, by Householder
// reflections, and turns the residuals along. Both are used up. It leaves R in
// s.r (nf by nf, column by column) and Qᵀr in s.qtr, in the order of s.free, in
// which it moves columns that depend on those before them to the end: there R has
// zeros on its diagonal, and Qᵀr is zero too.
func (s *Solver) factor(m int) {
	nf := len(s.free)
	s.qtr = s.qtr[:nf]
	clear(s.qtr)
	least := dependent(m, nf)
	rank := 0
	for range nf {
		k, j := rank, s.free[rank]
		v := s.jac[j*m+k : (j+1)*m]
		h := math.Sqrt(dot(v, v))
		if h <= least*s.norm[j] {
			copy(s.free[k:], s.free[k+1:])
			s.free[nf-1] = j
			continue
		}
		rank++
		var b float64
		s.diag[k], v[0], b = mirror(v[0], h)
		for _, i := range s.free[k+1:] {
			c := s.jac[i*m+k : (i+1)*m]
			add(b*dot(v, c), v, c)
		}
		c := s.res[k:m]
		add(b*dot(v, c), v, c)
		s.qtr[k] = c[0]
	}
	for k, j := range s.free {
		rk := s.r[k*nf : (k+1)*nf]
		clear(rk)
		copy(rk[:min(k, rank)], s.jac[j*m:])
		if k < rank {
			rk[k] = s.diag[k]
		}
	}
}

// undamped writes the Gauss-Newton step of the free parameters, the solution of
// R δ = -Qᵀr, into s.gn. False where R is singular.
func (s *Solver) undamped() bool {
	nf := len(s.free)
	for k := nf - 1; k >= 0; k-- {
		sum := -s.qtr[k]
		for i := k + 1; i < nf; i++ {
			sum -= s.r[i*nf+k] * s.gn[i]
		}
		d := s.r[k*nf+k]
		if d == 0 {
			return false
		}
		s.gn[k] = sum / d
	}
	return true
}

// damped minimises ‖rhs - R δ‖² + μ ‖D δ‖² over the columns s.sel of R
// (ascending), by reflections of [R; √μ D] that know where its zeros are. rhs
// has nf entries and is used up; the solution goes to s.z, one entry per column
// of s.sel. False where the stack is singular.
func (s *Solver) damped(mu float64, rhs []float64) bool {
	nf, n := len(s.free), len(s.sel)
	root := math.Sqrt(mu)
	low, u := s.low[:n*n], s.u[:n]
	clear(low)
	clear(u)
	for c, k := range s.sel {
		copy(s.top[c*nf:(c+1)*nf], s.r[k*nf:k*nf+k+1])
		low[c*n+c] = root * s.scale(s.free[k])
	}
	for c, k := range s.sel {
		t, b := s.top[c*nf+c:c*nf+k+1], low[c*n:c*n+c+1]
		sum := 0.0
		for _, v := range t {
			sum += v * v
		}
		for _, v := range b {
			sum += v * v
		}
		h := math.Sqrt(sum)
		if h == 0 {
			return false
		}
		var f float64
		s.diag[c], t[0], f = mirror(t[0], h)
		for e := c + 1; e < n; e++ {
			reflect(f, t, b, s.top[e*nf+c:e*nf+k+1], low[e*n:e*n+c+1])
		}
		reflect(f, t, b, rhs[c:k+1], u[:c+1])
	}
	for c := n - 1; c >= 0; c-- {
		sum := rhs[c]
		for e := c + 1; e < n; e++ {
			sum -= s.top[e*nf+c] * s.z[e]
		}
		s.z[c] = sum / s.diag[c]
	}
	return true
}

// reflect applies the reflection with the parts t and b to another column.
func reflect(f float64, t, b, ct, cb []float64) {
	ct, cb = ct[:len(t)], cb[:len(b)]
	g := 0.0
	for i, v := range t {
		g += v * ct[i]
	}
	for i, v := range b {
		g += v * cb[i]
	}
	g *= f
	for i, v := range t {
		ct[i] += g * v
	}
	for i, v := range b {
		cb[i] += g * v
	}
}

// invert writes R⁻¹ into s.top (upper triangle, column by column). False where R
// is singular.
func (s *Solver) invert() bool {
	nf := len(s.free)
	for c := range nf {
		col := s.top[c*nf : (c+1)*nf]
		clear(col)
		for k := c; k >= 0; k-- {
			sum := 0.0
			if k == c {
				sum = 1
			}
			for i := k + 1; i <= c; i++ {
				sum -= s.r[i*nf+k] * col[i]
			}
			if s.r[k*nf+k] == 0 {
				return false
			}
			col[k] = sum / s.r[k*nf+k]
		}
	}
	return true
}
