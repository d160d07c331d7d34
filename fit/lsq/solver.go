package lsq

// Solver is the workspace of fits, kept from one to the next. The zero value is
// ready. It must not be used by two goroutines at once.
type Solver struct {
	p, next   []float64 // parameters: present, tried
	d, norm   []float64 // column norms of the Jacobian: greatest so far, present
	gn, step  []float64 // undamped step and damped one, per free parameter
	qtr       []float64 // Qᵀr, per free parameter
	z, diag   []float64 // solution and diagonal of the damped triangle
	rhs, u    []float64 // right-hand side over R and under it; scratch
	r         []float64 // R, column by column
	top, low  []float64 // the damped stack: over and under; top also takes R⁻¹
	res, jac  []float64 // residuals, M, and Jacobian, M*N: used up by factor
	free, sel []int     // parameters not held at a bound; of these (as indices into free) those not stopped within a step
	hit       []bool    // per free parameter: stopped at a bound within the step
	ws        []float64 // what the above are cut from
}

// room makes the workspace fit m residuals and n parameters.
func (s *Solver) room(m, n int) {
	need := 11*n + 3*n*n + m + m*n
	if cap(s.ws) < need {
		s.ws = make([]float64, need+need/2)
	}
	w := s.ws[:cap(s.ws)]
	cut := func(k int) []float64 {
		c := w[:k:k]
		w = w[k:]
		return c
	}
	for _, v := range [...]*[]float64{&s.p, &s.next, &s.d, &s.norm, &s.gn, &s.step, &s.qtr, &s.z, &s.diag, &s.rhs, &s.u} {
		*v = cut(n)
	}
	for _, v := range [...]*[]float64{&s.r, &s.top, &s.low} {
		*v = cut(n * n)
	}
	s.res, s.jac = cut(m), cut(m*n)
	if cap(s.free) < n {
		s.free, s.sel, s.hit = make([]int, 0, n), make([]int, 0, n), make([]bool, n)
	}
	s.hit = s.hit[:cap(s.hit)]
}
