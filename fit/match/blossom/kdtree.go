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
	order []int32 // points; every cell is a range of it
	place []int32 // by point: where it stands in order
	cells []cell  // cell i has the halves of itself at i+1 and at far
	lows  []float64
	highs []float64 // by cell and coordinate: its box
}

type cell struct {
	from, to int32
	far      int32 // 0: not halved any more
	most     int64 // greatest dual of a point in it

	first, last int32 // where its points stand in the nest of blossoms
}

const cellSize = 8

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
	if to-from <= cellSize {
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

// beyond says whether all points in the box of cell c are farther from x than
// most, by the norm.
func (t *tree) beyond(c int, x []float64, most float64, norm Norm) bool {
	lows, highs := t.lows[c*len(x):][:len(x)], t.highs[c*len(x):][:len(x)]
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
		for _, q := range t.order[e.from:e.to] {
			if q == p {
				continue
			}
			var d float64
			for i, v := range t.at[q] {
				d += (v - x[i]) * (v - x[i])
			}
			if len(out) == k && d >= out[k-1].d {
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
		}
	}
	visit(0, 0)
	return out
}

// setDuals notes the greatest dual in every cell, and its range in the nest.
func (t *tree) setDuals(y []int64, in *nest) {
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
func (t *tree) visitClose(p int32, y int64, in *nest, norm Norm, scale float64, within, factor int64, see func(q int32)) {
	x := t.at[p]
	after := t.place[p] + 1
	pos := in.pos[p]
	var visit func(c int)
	visit = func(c int) {
		e := &t.cells[c]
		if e.to <= after {
			return
		}
		room := y + e.most - in.between(min(pos, e.first), max(pos, e.last))
		if factor == 0 && room <= 0 {
			return
		}
		if scale > 0 {
			most := float64(within) + 1
			if factor != 0 {
				most = min(most, float64(room)/2+1)
			}
			if most <= 0 {
				return
			}
			if t.beyond(c, x, most/scale*(1+1e-9), norm) {
				return
			}
		}
		if e.far != 0 {
			visit(c + 1)
			visit(int(e.far))
			return
		}
		for i := max(e.from, after); i < e.to; i++ {
			see(t.order[i])
		}
	}
	visit(0)
}
