package blossom

import (
	"cmp"
	"math"
	"slices"
)

// tree halves points along their widest coordinate down to a few. It serves
// the search for neighbours and the search for pairs that duals find wanting.
type tree struct {
	at    [][]float64
	order []int32   // points; every cell is a range of it
	place []int32   // by point: where it stands in order
	flat  []float64 // coordinates of the points as they stand in order
	duals []int64   // by point
	cells []cell    // cell i has the halves of itself at i+1 and at far
	lows  []float64
	highs []float64 // by cell and coordinate: its box
}

type cell struct {
	from, to int32
	far      int32 // 0: not halved any more
	most     int64 // greatest dual of a point in it

	first, last int32 // where its points stand in the nest of blossoms
}

// cellSize gives how many points are not halved further: looking at a box costs
// as much as looking at several points, and tells little in many coordinates.
func cellSize(dims int) int { return max(8, 3*dims) }

func newTree(at [][]float64) *tree {
	t := &tree{at: at, order: make([]int32, len(at)), place: make([]int32, len(at))}
	for i := range t.order {
		t.order[i] = int32(i)
	}
	if len(at) > 0 {
		t.build(0, len(at))
	}
	for p, i := range t.order {
		t.place[i] = int32(p)
		t.flat = append(t.flat, at[i]...)
	}
	return t
}

func (t *tree) build(from, to int) {
	c := len(t.cells)
	t.cells = append(t.cells, cell{from: int32(from), to: int32(to)})
	part := t.order[from:to]
	widest, width := -1, 0.0
	for k := range t.at[part[0]] {
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, i := range part {
			lo, hi = min(lo, t.at[i][k]), max(hi, t.at[i][k])
		}
		t.lows, t.highs = append(t.lows, lo), append(t.highs, hi)
		if hi-lo > width {
			widest, width = k, hi-lo
		}
	}
	if to-from <= cellSize(len(t.at[0])) {
		return
	}
	if widest >= 0 { // else all are at one place
		slices.SortFunc(part, func(a, b int32) int { return cmp.Compare(t.at[a][widest], t.at[b][widest]) })
	}
	mid := (from + to) / 2
	t.build(from, mid)
	t.cells[c].far = int32(len(t.cells))
	t.build(mid, to)
}

// outOf says whether all points of a box are farther from x than most, by the norm.
func outOf(x, lows, highs []float64, most float64, norm Norm) bool {
	lows, highs = lows[:len(x)], highs[:len(x)]
	var sum float64
	if norm == Straight {
		most *= most
	}
	for k, v := range x {
		g := lows[k] - v
		if g <= 0 {
			if g = v - highs[k]; g <= 0 {
				continue
			}
		}
		switch norm {
		case Straight:
			sum += g * g
		case Sum:
			sum += g
		default:
			sum = g
		}
		if sum > most {
			return true
		}
	}
	return false
}

// beyond says whether y is farther from x than most, by the norm.
func beyond(x, y []float64, most float64, norm Norm) bool {
	y = y[:len(x)]
	var sum float64
	switch norm {
	case Straight:
		most *= most
		for k, v := range x {
			if sum += (v - y[k]) * (v - y[k]); sum > most {
				return true
			}
		}
	case Sum:
		for k, v := range x {
			if sum += math.Abs(v - y[k]); sum > most {
				return true
			}
		}
	default:
		for k, v := range x {
			if math.Abs(v-y[k]) > most {
				return true
			}
		}
	}
	return false
}

type neighbour struct {
	d float64
	i int32
}

// nearest appends to out the k points nearest to point p by the square of the
// straight distance between coordinates.
func (t *tree) nearest(p int32, k int, out []neighbour) []neighbour {
	x := t.at[p]
	var visit func(c int, d float64)
	square := func(c int) float64 {
		lows, highs := t.lows[c*len(x):][:len(x)], t.highs[c*len(x):][:len(x)]
		var d float64
		for i, v := range x {
			if g := lows[i] - v; g > 0 {
				d += g * g
			} else if g = v - highs[i]; g > 0 {
				d += g * g
			}
		}
		return d
	}
	visit = func(c int, d float64) {
		if len(out) == k && d >= out[k-1].d {
			return
		}
		e := &t.cells[c]
		if e.far != 0 {
			near, far := c+1, int(e.far)
			dn, df := square(near), square(far)
			if df < dn {
				near, far, dn, df = far, near, df, dn
			}
			visit(near, dn)
			visit(far, df)
			return
		}
		least := math.Inf(1)
		if len(out) == k {
			least = out[k-1].d
		}
		for s := e.from; s < e.to; s++ {
			q := t.order[s]
			if q == p {
				continue
			}
			var d float64
			y := t.flat[int(s)*len(x):][:len(x)]
			for i, v := range x {
				if d += (v - y[i]) * (v - y[i]); d >= least {
					break
				}
			}
			if d >= least {
				continue
			}
			if len(out) < k {
				out = append(out, neighbour{})
			}
			j := len(out) - 1
			for ; j > 0 && out[j-1].d > d; j-- {
				out[j] = out[j-1]
			}
			out[j] = neighbour{d, q}
			if len(out) == k {
				least = out[k-1].d
			}
		}
	}
	visit(0, 0)
	return out
}

// setDuals notes the greatest dual in every cell, and its range in the nest.
func (t *tree) setDuals(y []int64, in *nest) {
	t.duals = y
	for c := len(t.cells) - 1; c >= 0; c-- {
		e := &t.cells[c]
		if e.far != 0 {
			a, b := &t.cells[c+1], &t.cells[e.far]
			e.most, e.first, e.last = max(a.most, b.most), min(a.first, b.first), max(a.last, b.last)
			continue
		}
		e.most, e.first, e.last = math.MinInt64, math.MaxInt32, 0
		for _, q := range t.order[e.from:e.to] {
			e.most = max(e.most, y[q])
			e.first, e.last = min(e.first, in.pos[q]), max(e.last, in.pos[q])
		}
	}
}

// visitClose calls see for every point after p in order that is not farther
// than within and for which factor times the doubled distance may be less than
// the sum of the two duals without the blossoms around both. A distance is at
// least scale times the norm of the difference, less one for rounding.
func (t *tree) visitClose(p int32, in *nest, norm Norm, scale float64, within, factor int64, see func(q int32)) {
	x := t.at[p]
	dims := len(x)
	after := t.place[p] + 1
	pos := in.pos[p]
	// most gives how far apart two points may be in coordinates when their
	// duals leave room for a doubled distance; none at all if below 0.
	most := func(room int64) float64 {
		m := float64(within) + 1
		if factor != 0 {
			m = min(m, float64(room)/2+1)
		} else if room <= 0 {
			m = -1
		}
		return m / scale * (1 + 1e-9)
	}
	var visit func(c int)
	visit = func(c int) {
		e := &t.cells[c]
		if e.to <= after {
			return
		}
		if scale > 0 {
			m := most(t.duals[p] + e.most - in.between(min(pos, e.first), max(pos, e.last)))
			if m < 0 || outOf(x, t.lows[c*dims:], t.highs[c*dims:], m, norm) {
				return
			}
		}
		if e.far != 0 {
			visit(c + 1)
			visit(int(e.far))
			return
		}
		for i := max(e.from, after); i < e.to; i++ {
			q := t.order[i]
			if scale > 0 {
				if m := most(t.duals[p] + t.duals[q]); m < 0 || beyond(x, t.flat[int(i)*dims:][:dims], m, norm) {
					continue
				}
			}
			see(q)
		}
	}
	visit(0)
}
