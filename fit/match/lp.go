package match

import "math"

// master is the linear programme behind the prices: of the columns known so far,
// shares x >= 0 of least total cost with every item used at most once and z sets
// in all. It is solved by the primal simplex method with the inverse of the basis
// kept whole (Dantzig, Linear Programming and Extensions, 1963; from memory). The
// right-hand sides are stirred a little against standing still; prices that come of
// it serve as well as any.
type master struct {
	g    *groups
	z    int
	rows int // one an item, and one for the number of sets
	cols []column
	cost []float64

	// The basis: by row, a column of cols, or when negative the unit column of row
	// -1-b (an item left over, or for the last row a set that is missing).
	basis []int
	inv   []float64 // rows × rows
	x     []float64 // by row
	pi    []float64 // by row: dual
	inB   []bool    // by column
	unitB []bool    // by row
	big   float64   // cost of a missing set, and of an item that must not be left over
	spare bool      // items may be left over
	upTo  bool      // z is the greatest number of sets, not the number
}

func newMaster(g *groups, z int, big float64) *master {
	devices := 0
	for _, s := range g.size {
		devices += s
	}
	m := &master{g: g, z: z, rows: g.n + 1, big: big, spare: devices > z*g.k}
	m.inv = make([]float64, m.rows*m.rows)
	m.unitB = make([]bool, m.rows)
	for r := range m.rows {
		m.inv[r*m.rows+r] = 1
		m.basis = append(m.basis, -1-r)
		m.unitB[r] = true
		b := 1 + 1e-6*float64(r%97+1)/97
		if r == g.n {
			b = float64(z)
		}
		m.x = append(m.x, b)
	}
	m.pi = make([]float64, m.rows)
	return m
}

func (m *master) add(c column) {
	m.cols = append(m.cols, c)
	m.cost = append(m.cost, float64(c.cost))
	m.inB = append(m.inB, false)
}

// unitCost is the cost of the unit column of a row.
func (m *master) unitCost(r int) float64 {
	if r == m.g.n && !m.upTo || !m.spare {
		return m.big
	}
	return 0
}

func (m *master) costOf(b int) float64 {
	if b < 0 {
		return m.unitCost(-1 - b)
	}
	return m.cost[b]
}

func (m *master) duals() {
	clear(m.pi)
	for r, b := range m.basis {
		c := m.costOf(b)
		if c == 0 {
			continue
		}
		row := m.inv[r*m.rows : (r+1)*m.rows]
		for k, a := range row {
			m.pi[k] += c * a
		}
	}
}

func (m *master) reduced(c int) float64 {
	r := m.cost[c] - m.pi[m.g.n]
	for _, i := range m.cols[c].items {
		r -= m.pi[i]
	}
	return r
}

// solve pivots until no column has a reduced cost below 0 or stop says so.
func (m *master) solve(stop func() bool) {
	m.duals()
	eps := 1e-7 * (1 + m.big*1e-6)
	for steps := 0; ; steps++ {
		if steps&15 == 0 && stop() {
			return
		}
		enter, least, unit := -1, -eps, false
		for c := range m.cols {
			if !m.inB[c] {
				if r := m.reduced(c); r < least {
					enter, least = c, r
				}
			}
		}
		units := m.g.n
		if m.upTo {
			units++
		}
		for r := range units {
			if !m.unitB[r] {
				if d := m.unitCost(r) - m.pi[r]; d < least {
					enter, least, unit = r, d, true
				}
			}
		}
		if enter < 0 || !m.pivot(enter, unit) {
			return
		}
		if steps%50 == 49 {
			m.duals()
		}
	}
}

// pivot takes a column into the basis; false: the step is not to be had.
func (m *master) pivot(enter int, unit bool) bool {
	n := m.rows
	w := make([]float64, n) // column in the basis
	addRow := func(k int) {
		for r := range n {
			w[r] += m.inv[r*n+k]
		}
	}
	var rc float64
	if unit {
		addRow(enter)
		rc = m.unitCost(enter) - m.pi[enter]
	} else {
		for _, i := range m.cols[enter].items {
			addRow(int(i))
		}
		addRow(m.g.n)
		rc = m.reduced(enter)
	}
	out, step := -1, math.Inf(1)
	for r := range n {
		if w[r] > 1e-9 {
			if t := m.x[r] / w[r]; t < step-1e-12 || t < step+1e-12 && out >= 0 && w[r] > w[out] {
				out, step = r, math.Max(t, 0)
			}
		}
	}
	if out < 0 {
		return false
	}
	piv := w[out]
	top := m.inv[out*n : (out+1)*n]
	for k := range top {
		top[k] /= piv
	}
	for r := range n {
		if r == out || w[r] == 0 {
			continue
		}
		f := w[r]
		row := m.inv[r*n : (r+1)*n]
		for k, a := range top {
			if a != 0 {
				row[k] -= f * a
			}
		}
		m.x[r] -= f * step
	}
	m.x[out] = step
	for k, a := range top {
		m.pi[k] += rc * a
	}
	if b := m.basis[out]; b < 0 {
		m.unitB[-1-b] = false
	} else {
		m.inB[b] = false
	}
	if unit {
		m.basis[out], m.unitB[enter] = -1-enter, true
	} else {
		m.basis[out], m.inB[enter] = enter, true
	}
	return true
}

// prices are the duals by item, with its share of that of the number of sets.
func (m *master) prices() []float64 {
	v := make([]float64, m.g.n)
	for i := range v {
		v[i] = m.pi[i] + m.pi[m.g.n]*float64(m.g.size[i])/float64(m.g.k)
	}
	return v
}

// shares gives the columns in the basis with their shares.
func (m *master) shares() (cols []int, x []float64) {
	for r, b := range m.basis {
		if b >= 0 && m.x[r] > 1e-6 {
			cols, x = append(cols, b), append(x, m.x[r])
		}
	}
	return cols, x
}

// value is the cost of the shares.
func (m *master) value() float64 {
	var s float64
	for r, b := range m.basis {
		s += m.costOf(b) * m.x[r]
	}
	return s
}
