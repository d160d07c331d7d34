package match

import (
	"fmt"
	"math"
	"slices"
)

const (
	wholeMax = 500 // items up to which prices are found for all at once
	cellSize = 120 // items of a cell, at most
)

// cells parts the items at the middle of the coordinate in which they lie widest
// apart, until no part has more than cellSize.
func (p *problem) cells(g *groups) [][]int {
	place := func(i, k int) int64 { return p.scaled[p.items[i].devices[0]][k] }
	var out [][]int
	var part func(items []int)
	part = func(items []int) {
		if len(items) <= cellSize {
			out = append(out, items)
			return
		}
		wide, by := int64(-1), 0
		for k := range p.scaled[0] {
			lo, hi := int64(math.MaxInt64), int64(math.MinInt64)
			for _, i := range items {
				lo, hi = min(lo, place(i, k)), max(hi, place(i, k))
			}
			if hi-lo > wide {
				wide, by = hi-lo, k
			}
		}
		slices.SortStableFunc(items, func(a, b int) int { return compareInt(place(a, by), place(b, by)) })
		half := len(items) / 2
		if half > g.k {
			half -= half % g.k // so that the lower part may be used up by sets
		}
		part(items[:half])
		part(items[half:])
	}
	all := make([]int, g.n)
	for i := range all {
		all[i] = i
	}
	part(all)
	return out
}

// cellPrices finds prices for one cell after the other, as if there were no other
// items, and takes them together: what sets across the borders leave unpaid the
// exact search over all sets shows, and their items then pay less, until that
// raises the bound no more.
func (g *groups) cellPrices(a *answer, low *simple, z int, cells [][]int, over func() bool) {
	v := make([]float64, g.n)
	for _, cell := range cells {
		sub := g.restrict(cell, 0)
		sub.greedy(true)
		sub.improve(3, over)
		if over() {
			return
		}
		if len(sub.sets) == 0 {
			continue
		}
		// As many of the sets as the whole answer has for its number of items.
		want := min(len(sub.sets), int(math.Round(float64(z)*float64(len(cell))/float64(g.n))))
		m := newMaster(sub, max(1, want), 4*float64(sub.total+sub.worst()+nano/1000))
		add := m.adder()
		for _, s := range sub.sets {
			add(column{toInt32(s), sub.cost(s)})
		}
		sub.nearColumns(add, 40)
		best := m.prices()
		top := int64(math.MinInt64)
		m.generate(add, over, 12, func(t int64, prices []float64) bool {
			if t > top {
				top, best = t, prices
			}
			return false
		})
		for x, i := range cell {
			v[i] = best[x]
		}
	}
	whole := inPrices(v)
	for worse := 0; worse < 3; {
		t, found, ok := g.bound(whole, z, over)
		if !ok {
			return
		}
		worse++
		if t > low.total {
			*low = simple{t, fmt.Sprintf("prices of the %d items, found in %d parts, were held against every possible set by an exact search; what they leave unpaid is taken off", g.n, len(cells))}
			a.prices = v
			worse = 0
		}
		if len(found) == 0 || t >= g.total {
			return
		}
		for _, c := range found {
			unpaid := -c.cost * inPrice
			for _, i := range c.items {
				unpaid += whole[i]
			}
			if unpaid > 0 {
				for _, i := range c.items {
					whole[i] -= (unpaid + int64(len(c.items)) - 1) / int64(len(c.items))
				}
			}
		}
	}
}
