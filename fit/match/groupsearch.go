package match

import (
	"context"
	"fmt"
	"math"
	"slices"
	"time"
)

const usualLimit = 30 * time.Second

// matchGroups looks for sets where only a search can, and for a bound of how good
// they are; with exact, few items are divided in every way instead.
func (p *problem) matchGroups(ctx context.Context, exact bool) *answer {
	limit := p.opt.TimeLimit
	if limit <= 0 {
		limit = usualLimit
	}
	begin := time.Now()
	share := func(f float64) time.Time { return begin.Add(time.Duration(f * float64(limit))) }
	g := p.newGroups(ctx, share(1))
	brief := func() func() bool { return g.by(time.Now().Add(limit / 10)) }
	g.begin(p)
	g.improve(20, g.by(share(0.25)))
	a := &answer{kind: LowerBound}
	if p.opt.Aim == Worst {
		g.tighten(share(0.35))
	}
	if exact && g.few() {
		g.exactFor(p.opt.Aim, a)
		return a
	}
	var numbered string
	var all []column
	switch {
	case g.ban:
		all = g.all(mostColumns, g.by(share(0.3)))
	default:
		all = g.all(fewColumns, g.by(share(0.3)))
	}
	a.most, numbered = g.number(all, p.mostGroups(g), brief())
	low := p.simpleBound(g)
	if g.total > low.total && len(g.sets) > 0 {
		if g.n <= wholeMax {
			g.priced(a, &low, len(g.sets), share(0.7), share(0.85))
		} else {
			g.cellPrices(a, &low, len(g.sets), p.cells(g), g.by(share(0.7)))
			g.improve(60, g.by(share(0.97)))
		}
	}
	if all != nil && g.total > low.total {
		if text, ok := g.settle(all, brief()); ok {
			low = simple{g.total, text}
		}
	}
	a.sets, _ = g.keep()
	a.total = low.total
	a.proof = low.proof
	if numbered != "" {
		a.proof = numbered + "; " + a.proof
	}
	a.worst = p.worstBound(g)
	if a.total == g.total && len(g.sets) == a.most && (p.opt.Aim != Worst || a.worst == g.worst()) {
		a.kind = Optimal
		a.proof += "; the answer reaches it"
	}
	return a
}

// begin makes sets to start from: runs in order of the first criterion, or greedy
// ones where those are better.
func (g *groups) begin(p *problem) {
	g.greedy(g.n > 400)
	sets, total := g.keep()
	if g.needP >= 0 || len(p.items) != len(p.used) {
		return
	}
	x, order := p.sortedFirst()
	var r runs
	if g.fixed > 0 {
		r = bestRuns(x, g.k, g.fixed, p.firstLimit())
	} else {
		r = mostRuns(x, g.k, p.firstLimit())
	}
	g.clear()
	for _, s := range r.starts {
		set := slices.Clone(order[s : s+g.k])
		if c := g.cost(set); c < beyond {
			g.add(set, c)
		}
	}
	g.greedy(g.n > 400)
	if !g.better(len(sets), total) {
		return
	}
	g.take(sets)
}

// sortedFirst gives the first coordinate in ascending order, and the devices.
func (p *problem) sortedFirst() ([]int64, []int) {
	order := make([]int, len(p.used))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return compareInt(p.scaled[a][0], p.scaled[b][0]) })
	x := make([]int64, len(order))
	for i, d := range order {
		x[i] = p.scaled[d][0]
	}
	return x, order
}

func (p *problem) firstLimit() int64 {
	if p.limits() {
		return p.limit[0]
	}
	return noLimit
}

// tighten lowers the worst mismatch as long as as many sets can be found.
func (g *groups) tighten(end time.Time) {
	over := g.by(end)
	for len(g.sets) > 0 && !over() {
		sets, _ := g.keep()
		was := g.worst()
		if was == 0 {
			return
		}
		g.cap = was - 1
		g.take(sets)
		g.greedy(false)
		g.improve(20, over)
		if len(g.sets) < len(sets) {
			g.cap = was
			g.take(sets)
			return
		}
	}
}

// simple is a lower bound and what it rests on.
type simple struct {
	total int64
	proof string
}

// simpleBound needs no search: the best sets by the first criterion alone, which
// no further criterion can make cheaper; or that each device is at least as far
// from the worst of its set as from its (k-1)th nearest.
func (p *problem) simpleBound(g *groups) simple {
	z := len(g.sets)
	b := simple{0, "no difference is below 0"}
	if g.needP < 0 && z > 0 {
		x, _ := p.sortedFirst()
		if r := bestRuns(x, g.k, z, noLimit); len(r.starts) == z && r.total > b.total {
			b = simple{r.total, fmt.Sprintf("the best %s by %s alone, found exactly, have this total, and no further criterion takes anything off it", plural(z, "set"), p.nameOf(p.opt.By[0].Key))}
		}
	}
	if e := p.kth(g); e != nil {
		v := make([]int64, g.n)
		for i := range v {
			v[i] = e[i] * int64(g.size[i]) / int64(g.k)
		}
		if t := g.pricesLess(v, z); t > b.total {
			b = simple{t, fmt.Sprintf("in a set every device has another at least as far off as its %s nearest; looked up for each of the %d", ordinal(g.k-1), len(p.used))}
		}
	}
	return b
}

func ordinal(n int) string {
	switch n {
	case 1:
		return "first"
	case 2:
		return "second"
	case 3:
		return "third"
	}
	return fmt.Sprintf("%dth", n)
}

// kth gives for every item the distance within which the nearest others make up a
// whole set with it, as the mismatch of any set with it is at least that; beyond
// where there are not enough.
func (p *problem) kth(g *groups) []int64 {
	type other struct {
		d    int64
		size int
	}
	e := make([]int64, g.n)
	var all []other
	for i := range g.n {
		all = all[:0]
		for j := range g.n {
			if j != i {
				if d := g.dist(i, j); d < beyond {
					all = append(all, other{d, g.size[j]})
				}
			}
		}
		slices.SortFunc(all, func(a, b other) int { return compareInt(a.d, b.d) })
		size := g.size[i]
		if size > 1 {
			e[i] = g.dist(i, i)
		}
		for _, o := range all {
			if size >= g.k {
				break
			}
			size += o.size
			e[i] = max(e[i], o.d)
		}
		if size < g.k {
			e[i] = 0 // in no set at all: nothing is known of it
		}
	}
	return e
}

// worstBound is what the worst mismatch of as many sets is at least: all but the
// devices left over are in sets, and of those the one whose neighbours are farthest.
func (p *problem) worstBound(g *groups) int64 {
	z := len(g.sets)
	if p.opt.Aim != Worst || z == 0 {
		return 0
	}
	var low int64
	if g.needP < 0 && p.loose() {
		x, _ := p.sortedFirst()
		if z == len(x)/g.k {
			low = worstRuns(x, g.k).worst
		}
	}
	e := p.kth(g)
	left := 0
	for i := range e {
		left += g.size[i]
	}
	left -= z * g.k
	slices.SortFunc(e, func(a, b int64) int { return compareInt(b, a) })
	if left < len(e) { // as many items at most are left over
		low = max(low, e[left])
	}
	return low
}

// mostGroups is how many sets there can be at most.
func (p *problem) mostGroups(g *groups) int {
	most := g.most()
	if p.limits() && g.needP < 0 {
		x, _ := p.sortedFirst()
		most = min(most, countRuns(x, g.k, p.limit[0]))
	}
	if !p.limits() {
		return most
	}
	// Items that find no set at all take no part in any.
	devices := 0
	for i := range g.n {
		size := g.size[i]
		for j := range g.n {
			if j != i && g.dist(i, j) < beyond {
				size += g.size[j]
			}
		}
		if size >= g.k {
			devices += g.size[i]
		}
	}
	return min(most, devices/g.k)
}

// priced finds good prices by generating columns: the linear programme of the
// columns known gives prices, an exact search over all sets gives the bound that
// they prove and the sets that they overlook, and so on until there are none. Of
// the shares in which sets are then used, whole sets are made.
func (g *groups) priced(a *answer, low *simple, z int, pricesEnd, end time.Time) {
	m := newMaster(g, z, 4*float64(g.total+g.worst()+nano/1000))
	add := m.adder()
	for _, s := range g.sets {
		add(column{toInt32(s), g.cost(s)})
	}
	g.nearColumns(add, 60)
	over := g.by(pricesEnd)
	best := low.total
	m.generate(add, over, 0, func(t int64, prices []float64) bool {
		if t > best {
			best = t
			*low = simple{t, fmt.Sprintf("prices of the %d items were held against every possible set by an exact search; what they leave unpaid is taken off", g.n)}
			a.prices = prices
		}
		return best >= g.total
	})
	if best < g.total {
		g.round(m, best, z, g.by(end))
	}
}

// generate adds columns that the prices overlook until there are none, or rounds
// have been made where that is not 0, or a bound that they prove is enough. The
// prices tried lie halfway to the best so far, which keeps them from swinging
// (Wentges, Weighted Dantzig-Wolfe decomposition for linear mixed-integer
// programming, International Transactions in Operational Research 4, 1997; from
// memory).
func (m *master) generate(add func(column), over func() bool, rounds int, enough func(bound int64, prices []float64) bool) {
	var center []float64
	best := int64(math.MinInt64)
	for round := 1; !over(); round++ {
		m.solve(over)
		v := m.prices()
		trial, own := v, true
		if center != nil && round%4 != 0 {
			own = false
			trial = make([]float64, len(v))
			for i := range v {
				trial[i] = 0.5*v[i] + 0.5*center[i]
			}
		}
		t, found, ok := m.g.bound(inPrices(trial), m.z, over)
		if ok && t > best {
			best, center = t, trial
		}
		if ok && enough(t, trial) || rounds > 0 && round >= rounds {
			return
		}
		before := len(m.cols)
		for _, c := range found {
			add(c)
		}
		if ok && (float64(best) >= m.value()*(1-1e-5) || len(m.cols) == before && own) {
			return
		}
	}
}

// adder gives a function that adds columns which are not there yet.
func (m *master) adder() func(column) {
	seen := map[string]bool{}
	return func(c column) {
		c.items = slices.Clone(c.items)
		slices.Sort(c.items)
		if key := string(bytesOf(c.items)); !seen[key] {
			seen[key] = true
			m.add(c)
		}
	}
}

func bytesOf(items []int32) []byte {
	b := make([]byte, 0, 4*len(items))
	for _, i := range items {
		b = append(b, byte(i), byte(i>>8), byte(i>>16), byte(i>>24))
	}
	return b
}

// nearColumns adds sets of every item with its nearest, about so many each.
func (g *groups) nearColumns(add func(column), each int) {
	for i := range g.n {
		near := g.near[i]
		// How many neighbours make about so many sets.
		width, ways := g.k-1, 1
		for width < len(near) && ways < each {
			width++
			ways = ways * width / max(1, width-(g.k-1))
		}
		n := 0
		set := []int{i}
		var grow func(from, size int)
		grow = func(from, size int) {
			if size >= g.k || n >= 2*each {
				if size == g.k {
					if c := g.cost(set); c < beyond {
						add(column{toInt32(set), c})
					}
					n++
				}
				return
			}
			for x := from; x < min(width, len(near)); x++ {
				set = append(set, int(near[x]))
				grow(x+1, size+g.size[near[x]])
				set = set[:len(set)-1]
			}
		}
		grow(0, g.size[i])
	}
}

// round makes whole sets of the shares of the linear programme, in several ways,
// and keeps the best answer; it ends with most sets of total low.
func (g *groups) round(m *master, low int64, most int, over func() bool) {
	cols, x := m.shares()
	bestSets, bestTotal := g.keep()
	start := slices.Clone(bestSets)
	for try := 0; try < 24 && !over() && (len(bestSets) < most || bestTotal > low && low > math.MinInt64); try++ {
		switch {
		case try%4 == 3: // from the best so far, patiently
			g.take(bestSets)
			g.improve(60, over)
		case try%4 == 2 || m.upTo && try%2 == 0:
			g.clear()
			g.dive(m, over)
			g.greedy(false)
			g.improve(40, over)
		default:
			g.clear()
			order := g.rng.Perm(len(cols))
			weight := make([]float64, len(cols))
			for c := range cols {
				weight[c] = x[c] * (1 + 0.3*float64(min(try, 3))*(g.rng.Float64()-0.5))
			}
			slices.SortStableFunc(order, func(a, b int) int {
				switch {
				case weight[a] > weight[b]:
					return -1
				case weight[a] < weight[b]:
					return 1
				}
				return 0
			})
			for _, c := range order {
				col := &m.cols[cols[c]]
				free := g.fixed == 0 || len(g.sets) < g.fixed
				for _, i := range col.items {
					free = free && g.setOf[i] < 0
				}
				if free && col.cost <= g.cap {
					set := make([]int, len(col.items))
					for k, i := range col.items {
						set[k] = int(i)
					}
					g.add(set, col.cost)
				}
			}
			g.greedy(false)
			g.improve(20, over)
		}
		if !g.better(len(bestSets), bestTotal) {
			bestSets, bestTotal = g.keep()
		}
	}
	g.take(bestSets)
	if g.better(len(start), math.MaxInt64) && len(g.sets) < len(start) {
		g.take(start)
	}
}
