package match

import (
	"fmt"
	"math"
	"slices"
)

const (
	mostColumns = 200_000 // sets within the tolerances that are written down in full
	fewColumns  = 50_000  // the same where no tolerance refuses any
	fine        = 1 << 20 // prices of the proof of a number are whole multiples of 1/fine
	setValue    = 1e6     // of a set in the linear programme; its mismatch counts up to a thousandth of it
	mismatch    = 1e-3
)

// number looks for as many sets as possible where the tolerances allow few enough
// to write all of them down. The linear programme of shares of sets gives an upper
// bound of their number, by prices of the items of which every set has at least 1;
// where it is above what is found, two items are taken that shares have together
// in part, and the cases that they are in one set and that they are not are looked
// at apart, and so on (Ryan and Foster, An integer programming approach to
// scheduling, 1981; from memory). It gives the bound, or most, with what it rests
// on.
func (g *groups) number(cols []column, most int, over func() bool) (int, string) {
	if cols == nil || !g.ban || len(g.sets) >= most || g.fixed > 0 && len(g.sets) >= g.fixed {
		return most, ""
	}
	var dearest int64 = 1
	for _, c := range cols {
		dearest = max(dearest, c.cost)
	}
	m := newMaster(g, most, 0)
	m.spare, m.upTo = true, true
	for _, c := range cols {
		m.add(c)
		m.cost[len(m.cost)-1] = -setValue * (1 - mismatch*float64(c.cost)/float64(dearest))
	}
	m.solve(over)
	root := min(most, m.ceiling())
	if len(g.sets) < root {
		g.round(m, math.MinInt64, root, over)
	}
	g.exchange(cols, root, over)
	t := &tree{g: g, over: over, best: len(g.sets)}
	t.search(m)
	if t.sets != nil {
		g.take(t.sets)
		g.improve(20, over)
	}
	switch {
	case !t.ended && len(g.sets) < root:
		return len(g.sets), fmt.Sprintf("there are not more sets than %d: in each of %s that leave nothing out, prices of the devices sum up to less than %d and are worth 1 in every one of the %d sets within the tolerances that are still allowed",
			len(g.sets), plural(t.cases, "case"), len(g.sets)+1, len(cols))
	case root < most || len(g.sets) == root:
		return root, fmt.Sprintf("there are not more sets than %d, because prices of the devices that sum up to less than %d are worth 1 in each of the %d sets within the tolerances", root, root+1, len(cols))
	}
	return most, ""
}

// ceiling is the greatest number of sets that the duals do not rule out. They are
// rounded to whole multiples of 1/fine, and the price of a set as such is raised
// until every allowed column is worth 1 at least, so that no rounding enters.
func (m *master) ceiling() int {
	price := make([]int64, m.g.n)
	var sum int64
	for i := range price {
		price[i] = int64(math.Ceil(fine * math.Max(0, -m.pi[i]/setValue/(1-mismatch))))
		sum += price[i]
	}
	set := int64(math.Ceil(fine * math.Max(0, -m.pi[m.g.n]/setValue/(1-mismatch))))
	var short int64
	for c := range m.cols {
		if m.refused(c) {
			continue
		}
		w := set
		for _, i := range m.cols[c].items {
			w += price[i]
		}
		short = max(short, fine-w)
	}
	return int((sum + (set+short)*int64(m.z)) / fine)
}

// tree is the search by cases, for the greatest number of sets or, with sum, for
// the least total of as many as the linear programme has.
type tree struct {
	g     *groups
	over  func() bool
	sum   bool
	best  int
	least int64   // with sum: the least total known
	sets  [][]int // the best found; nil: none beyond what was known
	cases int
	ended bool // before everything was looked at
}

const mostCases = 100_000

func (t *tree) search(m *master) {
	if t.over() || t.cases > mostCases {
		t.ended = true
		return
	}
	t.cases++
	m.solve(t.over)
	if t.sum && m.floor() >= t.least || !t.sum && m.ceiling() <= t.best {
		return
	}
	cols, x := m.shares()
	i, j := m.parted(cols, x)
	if i < 0 {
		t.whole(m, cols, x)
		return
	}
	for _, together := range []bool{true, false} {
		c := m
		if together {
			c = m.clone()
		}
		for k := range c.cols {
			a, b := slices.Contains(c.cols[k].items, i), slices.Contains(c.cols[k].items, j)
			if together && a != b || !together && a && b {
				c.refuse(k)
			}
		}
		c.duals()
		t.search(c)
	}
}

// whole takes shares that are whole sets.
func (t *tree) whole(m *master, cols []int, x []float64) {
	var sets [][]int
	var total int64
	used := make([]bool, t.g.n)
	for k, c := range cols {
		free := x[k] > 0.5 && !m.refused(c)
		var set []int
		for _, a := range m.cols[c].items {
			free = free && !used[a]
			set = append(set, int(a))
		}
		if free {
			for _, a := range set {
				used[a] = true
			}
			sets = append(sets, set)
			total += m.cols[c].cost
		}
	}
	switch {
	case !t.sum && len(sets) > t.best:
		t.best, t.sets = len(sets), sets
	case t.sum && len(sets) == m.z && total < t.least:
		t.least, t.sets = total, sets
		if m.floor() < total { // by rounding only, but it leaves the case open
			t.ended = true
		}
	case t.sum && m.value() >= m.big: // this case has not as many sets
		t.ended = true
	default:
		t.ended = true // whole, yet not what the duals promise
	}
}

// refuse keeps a column out of use.
func (m *master) refuse(c int) { m.cost[c] = m.refusal() }

func (m *master) refused(c int) bool { return m.cost[c] >= m.refusal() }

// refusal is the cost of a column that is not allowed: in the search for the number,
// where sets cost less than nothing, anything above it.
func (m *master) refusal() float64 {
	if m.upTo {
		return 1
	}
	return 2 * m.big
}

// floor is the total that the duals prove for the columns allowed, in whole
// numbers: see bound. It looks at all columns and so needs all of them to be there.
func (m *master) floor() int64 {
	whole := inPrices(m.prices())
	var least int64
	for c := range m.cols {
		if m.refused(c) {
			continue
		}
		r := m.cols[c].cost * inPrice
		for _, i := range m.cols[c].items {
			r -= whole[i]
		}
		least = min(least, r)
	}
	return roundUp(m.g.pricesLess(whole, m.z) + int64(m.z)*least)
}

// settle looks for the least total of as many sets as there are, where all that
// may be made are written down, and reports whether it was shown that there is none
// smaller.
func (g *groups) settle(cols []column, over func() bool) (string, bool) {
	m := newMaster(g, len(g.sets), 4*float64(g.total+g.worst()+nano/1000))
	for _, c := range cols {
		m.add(c)
	}
	t := &tree{g: g, over: over, sum: true, least: g.total}
	t.search(m)
	if t.sets != nil {
		g.take(t.sets)
	}
	return fmt.Sprintf("in each of %s that leave nothing out, prices of the devices show that no %d of the %d sets that can be made have a smaller total", plural(t.cases, "case"), len(g.sets), len(cols)), !t.ended
}

// parted gives two items that shares have together neither wholly nor not at all;
// -1: there are none.
func (m *master) parted(cols []int, x []float64) (i, j int32) {
	sum := map[[2]int32]float64{}
	alone := make([]float64, m.g.n) // by item: share of all sets with it
	for k, c := range cols {
		items := m.cols[c].items
		for _, a := range items {
			alone[a] += x[k]
		}
		for a := range items {
			for b := range a {
				sum[[2]int32{min(items[a], items[b]), max(items[a], items[b])}] += x[k]
			}
		}
	}
	i, j = -1, -1
	far := 0.49 // from a half
	for key, s := range sum {
		if math.Max(alone[key[0]], alone[key[1]]) < s+1e-5 {
			continue // no set parts them: the case that they are together is this one
		}
		// In steps, so that the choice does not hang on the order of the map.
		d := math.Round(math.Abs(s-0.5)*1e6) / 1e6
		if d < far || d == far && i >= 0 && (key[0] < i || key[0] == i && key[1] < j) {
			far, i, j = d, key[0], key[1]
		}
	}
	return i, j
}

func (m *master) clone() *master {
	c := *m
	c.basis, c.inv, c.x, c.pi = slices.Clone(m.basis), slices.Clone(m.inv), slices.Clone(m.x), slices.Clone(m.pi)
	c.cost, c.inB, c.unitB = slices.Clone(m.cost), slices.Clone(m.inB), slices.Clone(m.unitB)
	return &c
}

// exchange looks for more sets by plain moves, many of them: a set that is in the
// way of none is taken, one that is in the way of a single other takes its place,
// unless it left a short while ago.
func (g *groups) exchange(cols []column, most int, over func() bool) {
	if len(cols) == 0 || len(g.sets) >= most {
		return
	}
	const steps, rest = 2_000_000, 40
	in := make([]int, g.n) // by item: number of its column, -1 none
	for i := range in {
		in[i] = -1
	}
	left := make([]int, len(cols)) // step at which a column left
	sets := 0
	place := func(c, by int) {
		for _, i := range cols[c].items {
			in[i] = by
		}
	}
	index := map[string]int{}
	for c := range cols {
		items := slices.Clone(cols[c].items)
		slices.Sort(items)
		index[string(bytesOf(items))] = c
		left[c] = -rest
	}
	for _, s := range g.sets {
		items := toInt32(s)
		slices.Sort(items)
		if c, ok := index[string(bytesOf(items))]; ok {
			place(c, c)
			sets++
		}
	}
	best, keep := len(g.sets), []int(nil)
	for step := range steps {
		if step&0x3ff == 0 && over() || best >= most {
			break
		}
		c := g.rng.IntN(len(cols))
		other, ways := -1, 0
		for _, i := range cols[c].items {
			if o := in[i]; o >= 0 && o != other {
				other = o
				ways++
			}
		}
		if ways > 1 || other == c || step-left[c] < rest*len(cols)/10 && ways > 0 {
			continue
		}
		if ways == 1 {
			place(other, -1)
			left[other] = step
			sets--
		}
		place(c, c)
		if sets++; sets > best {
			best = sets
			keep = slices.Clone(in)
		}
	}
	if keep == nil {
		return
	}
	g.clear()
	for i, c := range keep {
		if c >= 0 && int(cols[c].items[0]) == i {
			set := make([]int, 0, g.k)
			for _, j := range cols[c].items {
				set = append(set, int(j))
			}
			g.add(set, cols[c].cost)
		}
	}
	g.improve(20, over)
}
