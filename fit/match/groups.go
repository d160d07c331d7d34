package match

import (
	"context"
	"math/rand/v2"
	"slices"
	"time"
)

// groups is the search for sets of more than two items, or of items of unlike
// size, where no exact method is quick: sorted runs or greedy sets to begin with,
// then a few neighbouring sets at a time are taken apart and put together again in
// the best of all ways, until that changes nothing any more.
type groups struct {
	n, k  int
	size  []int // devices of each item
	pch   []int // p-channel devices of each item
	needP int   // p-channel devices of a set; -1: any number
	cap   int64 // greatest mismatch of a set
	ban   bool  // limits refuse sets, so that their number is what counts first
	fixed int   // for Best: how many sets at most; else 0

	dist func(i, j int) int64
	d    []int64   // n × n, nil where that is too much
	near [][]int32 // by item: the nearest that it may be with, nearest first
	rng  *rand.Rand
	ctx  context.Context
	end  time.Time

	sets  [][]int
	setOf []int // by item; -1: left over
	total int64
	memo  []entry
}

const (
	keepMatrix  = 2500 // items up to which distances are kept
	nearest     = 48   // neighbours kept of an item
	togetherMax = 13   // items that are put together anew at once
	setWorth    = int64(1) << 44
)

func (p *problem) newGroups(ctx context.Context, end time.Time) *groups {
	g := &groups{ctx: ctx, n: len(p.items), k: p.opt.Size, needP: -1, cap: beyond - 1, ban: p.limits(), end: end,
		rng: rand.New(rand.NewPCG(uint64(len(p.used)), uint64(p.opt.Size)))}
	if p.complementary {
		g.needP = g.k / 2
	}
	if p.opt.Aim == Best {
		g.fixed = p.opt.Sets
	}
	for _, it := range p.items {
		g.size, g.pch = append(g.size, len(it.devices)), append(g.pch, it.p)
	}
	slow := func(i, j int) int64 {
		a, b := p.items[i].devices, p.items[j].devices
		if len(a) == 1 && len(b) == 1 {
			return p.together(a[0], b[0])
		}
		if i == j {
			return p.mismatch(a)
		}
		return p.mismatch(append(append(make([]int, 0, len(a)+len(b)), a...), b...))
	}
	g.dist = slow
	if g.n <= keepMatrix {
		g.d = make([]int64, g.n*g.n)
		for i := range g.n {
			for j := range i + 1 {
				x := slow(i, j)
				g.d[i*g.n+j], g.d[j*g.n+i] = x, x
			}
		}
		g.dist = func(i, j int) int64 { return g.d[i*g.n+j] }
	}
	g.neighbours(p)
	g.setOf = make([]int, g.n)
	g.clear()
	return g
}

func (g *groups) clear() {
	g.sets, g.total = nil, 0
	for i := range g.setOf {
		g.setOf[i] = -1
	}
}

// neighbours finds the nearest of every item; among very many only those near by
// the first criterion are looked at.
func (g *groups) neighbours(p *problem) {
	order := make([]int, g.n)
	for i := range order {
		order[i] = i
	}
	first := func(i int) int64 { return p.scaled[p.items[i].devices[0]][0] }
	slices.SortStableFunc(order, func(a, b int) int { return compareInt(first(a), first(b)) })
	window := g.n
	if g.d == nil {
		window = 600
	}
	g.near = make([][]int32, g.n)
	type far struct {
		d int64
		j int32
	}
	var all []far
	for at, i := range order {
		all = all[:0]
		for _, j := range order[max(0, at-window):min(g.n, at+window+1)] {
			if d := g.dist(i, j); j != i && d < beyond {
				all = append(all, far{d, int32(j)})
			}
		}
		slices.SortFunc(all, func(a, b far) int {
			if c := compareInt(a.d, b.d); c != 0 {
				return c
			}
			return int(a.j - b.j)
		})
		for _, f := range all[:min(nearest, len(all))] {
			g.near[i] = append(g.near[i], f.j)
		}
	}
}

func compareInt(a, b int64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// cost is the mismatch of a set of items, beyond where it is none.
func (g *groups) cost(set []int) int64 {
	var d int64
	size, pch := 0, 0
	for i, a := range set {
		size, pch = size+g.size[a], pch+g.pch[a]
		for _, b := range set[:i+1] {
			if a != b || g.size[a] > 1 {
				d = max(d, g.dist(a, b))
			}
		}
	}
	if size != g.k || g.needP >= 0 && pch != g.needP || d > g.cap {
		return beyond
	}
	return d
}

// add takes a set into the answer.
func (g *groups) add(set []int, cost int64) {
	for _, i := range set {
		g.setOf[i] = len(g.sets)
	}
	g.sets = append(g.sets, set)
	g.total += cost
}

// remove takes sets out of the answer.
func (g *groups) remove(which []int) {
	slices.Sort(which)
	for x := len(which) - 1; x >= 0; x-- {
		s := which[x]
		g.total -= g.cost(g.sets[s])
		for _, i := range g.sets[s] {
			g.setOf[i] = -1
		}
		last := len(g.sets) - 1
		if s != last {
			g.sets[s] = g.sets[last]
			for _, i := range g.sets[s] {
				g.setOf[i] = s
			}
		}
		g.sets = g.sets[:last]
	}
}

// most is how many sets there can be at all by numbers alone.
func (g *groups) most() int {
	devices, pch := 0, 0
	for i := range g.n {
		devices, pch = devices+g.size[i], pch+g.pch[i]
	}
	m := devices / g.k
	if g.needP >= 0 {
		m = min(pch, devices-pch) / g.needP
	}
	if g.fixed > 0 {
		m = min(m, g.fixed)
	}
	return m
}

// greedy makes sets of what is left, beginning each time with the set that is
// found the cheapest around any item; with rough, around random items.
func (g *groups) greedy(rough bool) {
	for g.fixed == 0 || len(g.sets) < g.fixed {
		var best []int
		cost := beyond
		tries := g.rng.Perm(g.n)
		looked := 0
		for _, i := range tries {
			if g.setOf[i] >= 0 {
				continue
			}
			if set, c := g.around(i); c < cost {
				best, cost = set, c
			}
			looked++
			if cost < beyond && (rough && looked >= 8 || g.late()) {
				break
			}
		}
		if best == nil {
			return
		}
		g.add(best, cost)
	}
}

// around makes a set with item i of those left over, each time adding the one that
// costs least.
func (g *groups) around(i int) ([]int, int64) {
	set, size, pch := []int{i}, g.size[i], g.pch[i]
	var worst int64
	if size > 1 {
		worst = g.dist(i, i)
	}
	far := make(map[int]int64)
	consider := func(j int) {
		if g.setOf[j] < 0 && j != i {
			far[j] = g.dist(i, j)
		}
	}
	free := 0
	for _, j := range g.near[i] {
		if g.setOf[j] < 0 {
			free++
		}
		consider(int(j))
	}
	if free < g.k { // the near ones are taken: look at all
		for j := range g.n {
			consider(j)
		}
	}
	for size < g.k {
		pick, least := -1, beyond
		for j, d := range far {
			if size+g.size[j] > g.k || g.needP >= 0 && (pch+g.pch[j] > g.needP || size+g.size[j]-pch-g.pch[j] > g.k-g.needP) {
				continue
			}
			if g.size[j] > 1 {
				d = max(d, g.dist(j, j))
			}
			if d < least || d == least && j < pick {
				pick, least = j, d
			}
		}
		if pick < 0 {
			return nil, beyond
		}
		set, size, pch = append(set, pick), size+g.size[pick], pch+g.pch[pick]
		worst = max(worst, least)
		delete(far, pick)
		for j := range far {
			far[j] = max(far[j], g.dist(pick, j))
		}
	}
	if worst > g.cap {
		return nil, beyond
	}
	return set, worst
}

// late reports whether the time is up.
func (g *groups) late() bool { return g.by(g.end)() }

// by gives a test of whether a time has come, or the caller has given up.
func (g *groups) by(end time.Time) func() bool {
	return func() bool { return g.ctx.Err() != nil || !time.Now().Before(end) }
}

// better compares numbers of sets and totals.
func (g *groups) better(sets int, total int64) bool {
	return len(g.sets) < sets || len(g.sets) == sets && total < g.total
}

// keep copies the answer.
func (g *groups) keep() (sets [][]int, total int64) {
	for _, s := range g.sets {
		sets = append(sets, slices.Clone(s))
	}
	return sets, g.total
}

// take puts a kept answer back.
func (g *groups) take(sets [][]int) {
	g.clear()
	for _, s := range sets {
		if c := g.cost(s); c < beyond {
			g.add(slices.Clone(s), c)
		}
	}
}

// improve takes neighbouring sets apart and puts them together in the best way,
// until that has changed nothing in so many tries as there are sets times patience.
func (g *groups) improve(patience int, over func() bool) {
	q := max(2, togetherMax/g.k)
	if g.k > 8 {
		g.swaps(over)
		return
	}
	for idle := 0; idle < patience*max(1, len(g.sets)); idle++ {
		if over() {
			return
		}
		if g.n == 0 {
			return
		}
		items, which := g.pickSome(q)
		before := int64(0)
		for _, s := range which {
			before += g.cost(g.sets[s]) - setWorth
		}
		may := togetherMax
		if g.fixed > 0 {
			may = len(which) + g.fixed - len(g.sets)
		}
		sets, value := g.rematch(items, may)
		if value >= before {
			continue
		}
		g.remove(which)
		for _, s := range sets {
			g.add(s, g.cost(s))
		}
		idle = -1
	}
}

// pickSome takes an item and the sets and left-over items around it.
func (g *groups) pickSome(q int) (items, which []int) {
	seed := g.rng.IntN(g.n)
	seen := map[int]bool{}
	size, spare := 0, 0
	take := func(i int) {
		s := g.setOf[i]
		switch {
		case s < 0 && !seen[-1-i] && spare < togetherMax-q*g.k+g.k && size < togetherMax:
			seen[-1-i] = true
			items, size, spare = append(items, i), size+1, spare+1
		case s >= 0 && !seen[s] && len(which) < q && (size+len(g.sets[s]) <= togetherMax || len(which) < 2 && size+len(g.sets[s]) <= 16):
			seen[s] = true
			which, items, size = append(which, s), append(items, g.sets[s]...), size+len(g.sets[s])
		}
	}
	take(seed)
	for _, j := range g.near[seed] {
		if g.rng.IntN(4) > 0 {
			take(int(j))
		}
		if len(which) == q || size >= togetherMax {
			break
		}
	}
	if len(which) < 2 && len(g.sets) > 1 || g.rng.IntN(16) == 0 {
		take(g.rng.IntN(g.n))
	}
	return items, which
}

// swaps exchanges single items between sets, and with those left over, as long as
// that lowers the total.
func (g *groups) swaps(over func() bool) {
	for changed := true; changed; {
		changed = false
		for i := range g.n {
			if over() {
				return
			}
			for _, j32 := range g.near[i] {
				j := int(j32)
				a, b := g.setOf[i], g.setOf[j]
				if a < 0 || a == b || g.size[i] != g.size[j] {
					continue
				}
				old := g.cost(g.sets[a])
				x := swapped(g.sets[a], i, j)
				now := g.cost(x)
				var y []int
				if b >= 0 {
					old += g.cost(g.sets[b])
					y = swapped(g.sets[b], j, i)
					now = min(beyond, now) + min(beyond, g.cost(y))
				}
				if now >= old {
					continue
				}
				g.sets[a], g.setOf[i], g.setOf[j] = x, b, a
				if b >= 0 {
					g.sets[b] = y
				}
				g.total += now - old
				changed = true
			}
		}
	}
}

func swapped(set []int, out, in int) []int {
	s := slices.Clone(set)
	s[slices.Index(s, out)] = in
	return s
}

// worst is the greatest mismatch of a set.
func (g *groups) worst() int64 {
	var w int64
	for _, s := range g.sets {
		w = max(w, g.cost(s))
	}
	return w
}
