package match

import (
	"slices"
)

// restrict is the search among some of the items, numbered anew, for up to so many
// sets where that is not 0.
func (g *groups) restrict(items []int, fixed int) *groups {
	r := &groups{n: len(items), k: g.k, needP: g.needP, cap: g.cap, ban: g.ban, fixed: fixed, ctx: g.ctx, end: g.end, rng: g.rng}
	place := make([]int32, g.n)
	for i := range place {
		place[i] = -1
	}
	for x, i := range items {
		place[i] = int32(x)
		r.size, r.pch = append(r.size, g.size[i]), append(r.pch, g.pch[i])
	}
	r.dist = func(i, j int) int64 { return g.dist(items[i], items[j]) }
	r.near = make([][]int32, r.n)
	for x, i := range items {
		for _, j := range g.near[i] {
			if place[j] >= 0 {
				r.near[x] = append(r.near[x], place[j])
			}
		}
	}
	r.setOf = make([]int, r.n)
	r.clear()
	return r
}

// dive makes whole sets of shares one after the other: those used almost wholly and
// the one used most are taken, and for what is left prices and shares are found
// anew.
func (g *groups) dive(m *master, over func() bool) {
	items := make([]int, g.n)
	for i := range items {
		items[i] = i
	}
	at, z := m, m.z
	for z > 0 && !over() {
		cols, x := at.shares()
		if len(cols) == 0 {
			return
		}
		order := g.rng.Perm(len(cols))
		slices.SortStableFunc(order, func(a, b int) int {
			switch {
			case x[a] > x[b]+1e-9:
				return -1
			case x[a] < x[b]-1e-9:
				return 1
			}
			return 0
		})
		for n, c := range order {
			col := &at.cols[cols[c]]
			if n > 0 && x[c] < 0.85 {
				break
			}
			set := make([]int, len(col.items))
			free := true
			for k, i := range col.items {
				set[k] = items[i]
				free = free && g.setOf[items[i]] < 0
			}
			if free {
				g.add(set, col.cost)
				z--
			}
		}
		var rest []int
		place := map[int32]int32{} // number in at: number in what is left
		for x, i := range items {
			if g.setOf[i] < 0 {
				place[int32(x)] = int32(len(rest))
				rest = append(rest, i)
			}
		}
		if z <= 0 || len(rest) == 0 {
			return
		}
		sub := g.restrict(rest, z)
		next := newMaster(sub, z, at.big)
		next.upTo = at.upTo
		next.spare = next.spare || at.upTo
		add := next.adder()
		for c0, c := range at.cols {
			moved := column{cost: c.cost}
			for _, i := range c.items {
				if x, ok := place[i]; ok {
					moved.items = append(moved.items, x)
				}
			}
			if len(moved.items) == len(c.items) {
				add(moved)
				next.cost[len(next.cost)-1] = at.cost[c0]
			}
		}
		if at.upTo { // all columns are there
			next.solve(over)
		} else {
			next.generate(add, over, 4, func(int64, []float64) bool { return false })
		}
		items, at = rest, next
	}
}
