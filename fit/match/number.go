package match

import (
	"fmt"
	"math"
)

const (
	mostColumns = 200_000 // sets that are written down in full
	fine        = 1 << 20 // prices of the proof of a number are whole multiples of 1/fine
)

// number looks for as many sets as possible where the tolerances allow few enough
// to write all of them down: the linear programme of shares of sets gives both an
// upper bound of their number, by prices of the items of which every set has at
// least 1, and shares to make whole sets of. It gives the bound, or most, with what
// it rests on.
func (g *groups) number(most int, over func() bool) (int, string) {
	if !g.ban || len(g.sets) >= most || g.fixed > 0 && len(g.sets) >= g.fixed {
		return most, ""
	}
	cols := g.all(mostColumns, over)
	if cols == nil {
		return most, ""
	}
	var dearest int64 = 1
	for _, c := range cols {
		dearest = max(dearest, c.cost)
	}
	m := newMaster(g, most, 0)
	m.spare, m.upTo = true, true
	const worth = 1e6 // of a set; its mismatch counts up to a thousandth of it
	for _, c := range cols {
		m.add(c)
		m.cost[len(m.cost)-1] = -worth + 1e-3*worth*float64(c.cost)/float64(dearest)
	}
	m.solve(over)
	// Raised to what is checked: every set is worth 1 by the prices of its items and
	// that of a set as such.
	price := make([]int64, g.n)
	var sum int64
	for i := range price {
		price[i] = int64(math.Ceil(fine * math.Max(0, -m.pi[i]/worth/(1-1e-3))))
		sum += price[i]
	}
	set := int64(math.Ceil(fine * math.Max(0, -m.pi[g.n]/worth/(1-1e-3))))
	short := int64(0)
	for _, c := range cols {
		w := set
		for _, i := range c.items {
			w += price[i]
		}
		short = max(short, fine-w)
	}
	set += short
	bound := int((sum + set*int64(most)) / fine)
	text := ""
	if bound < most {
		most = bound
		text = fmt.Sprintf("there are not more sets than %d, because prices of the devices that sum up to less than %d are worth 1 in each of the %d sets within the tolerances", bound, bound+1, len(cols))
	}
	if len(g.sets) < most {
		g.round(m, math.MinInt64, most, over)
	}
	return most, text
}
