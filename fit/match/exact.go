package match

import "fmt"

const (
	exactItems = 20      // items that are divided in every way
	exactTable = 1 << 21 // remainders that are kept
)

// few reports whether the items can be divided in every way in little time.
func (g *groups) few() bool { return g.n <= exactItems && (g.fixed+1)<<g.n <= exactTable }

// exact divides few items in every way, by the dynamic programme of rematch over
// all that may remain.
func (g *groups) exact() {
	items := make([]int, g.n)
	for i := range items {
		items[i] = i
	}
	may := g.n
	if g.fixed > 0 {
		may = g.fixed
	}
	sets, _ := g.rematch(items, may)
	g.clear()
	for _, s := range sets {
		g.add(s, g.cost(s))
	}
}

// exactFor is the best answer for an aim, proved by having looked at all. For the
// least worst mismatch the sets are made again of those that are better than the
// worst, until there are no longer as many.
func (g *groups) exactFor(aim Aim, a *answer) {
	a.kind, a.proof = Optimal, fmt.Sprintf("every way to divide the %d items was weighed", g.n)
	if aim == Worst {
		found, _ := g.keep() // good ones, with which to begin
		loose := g.cap
		g.cap = beyond - 1
		g.exact()
		most := len(g.sets)
		if len(found) == most && loose < g.worst() {
			g.cap = loose
			g.take(found)
		}
		for most > 0 {
			sets, _ := g.keep()
			worst := g.worst()
			g.cap = worst - 1
			if worst > 0 {
				g.exact()
			}
			if worst == 0 || len(g.sets) < most {
				g.cap = worst
				g.take(sets)
				break
			}
		}
		a.worst = g.worst()
	}
	g.exact()
	a.sets, a.total = g.keep()
	a.most = len(a.sets)
}
