package match

import (
	"math"
	"slices"
)

// column is a set that may be made, as one of many to choose from.
type column struct {
	items []int32
	cost  int64
}

// A lower bound for z sets of k devices comes from any prices v of the items. Every
// set S costs c(S) = Σ v + r(S) of its items, with r its reduced cost. The z sets
// of an answer have different first items, in whatever order the items are
// numbered; so their total is at least the sum of all prices, less the most that
// the items left over can be worth, plus the z smallest of the reduced costs that
// are the least for their first item (only those below 0 need be found). What
// prices are taken decides how good the bound is, not whether it holds.

// inPrice is how many units of a price make a nanovolt: finer than differences, so
// that what rounding takes off a bound is less than the nanovolt to which it is
// rounded up.
const inPrice = 1 << 10

// mostPriced is beyond all distances, and small enough for sums of prices.
const mostPriced = 4 * mostDistance

// inPrices makes whole prices.
func inPrices(v []float64) []int64 {
	whole := make([]int64, len(v))
	for i := range v {
		whole[i] = int64(math.Floor(v[i] * inPrice))
	}
	return whole
}

// roundUp gives a bound in prices as one in nanovolts, in which all totals are whole.
func roundUp(low int64) int64 {
	q := low / inPrice
	if low > q*inPrice {
		q++
	}
	return q
}

// bound gives that sum for whole prices, in nanovolts, with columns of negative reduced cost for
// which it is not yet right; ok is false when the time ended it.
func (g *groups) bound(v []int64, z int, over func() bool) (low int64, found []column, ok bool) {
	low = g.pricesLess(v, z)
	var least []int64
	s := &pricing{g: g, v: v, over: over}
	s.order()
	for at := range s.seq {
		r := s.from(at)
		if s.stopped {
			return 0, s.found, false
		}
		if r < 0 {
			least = append(least, r)
		}
	}
	slices.Sort(least)
	for _, r := range least[:min(z, len(least))] {
		low += r
	}
	return roundUp(low), s.found, true
}

// pricesLess is the sum of the prices less the most that the devices in no set can
// be worth, an item being taken in part where it has several.
func (g *groups) pricesLess(v []int64, z int) int64 {
	type one struct {
		v    float64 // by device
		size int
		all  int64
	}
	// Where each channel has its number in every set, each has its own left over.
	apart := g.needP >= 0 && !slices.ContainsFunc(g.size, func(s int) bool { return s > 1 })
	var sum int64
	parts := [2][]one{}
	left := [2]int{-z * g.k, 0}
	if apart {
		left = [2]int{-z * (g.k - g.needP), -z * g.needP}
	}
	for i := range g.n {
		sum += v[i]
		part := 0
		if apart {
			part = g.pch[i]
		}
		parts[part] = append(parts[part], one{float64(v[i]) / float64(g.size[i]), g.size[i], v[i]})
	}
	for part := range parts {
		devices := left[part]
		for _, o := range parts[part] {
			devices += o.size
		}
		slices.SortFunc(parts[part], func(a, b one) int {
			switch {
			case a.v > b.v:
				return -1
			case a.v < b.v:
				return 1
			}
			return 0
		})
		for _, o := range parts[part] {
			switch {
			case devices <= 0:
			case o.size <= devices:
				sum -= o.all
				devices -= o.size
			default:
				// Rounded away from 0, so that the bound is not too high.
				x := o.v * float64(devices)
				sum -= int64(x) + 1
				devices = 0
			}
		}
	}
	return sum
}

// pricing looks for sets that cost less than their prices, by branch and bound over
// all sets.
type pricing struct {
	g       *groups
	v       []int64
	over    func() bool
	seq     []int // items, the dearest price first
	found   []column
	stopped bool
	steps   int

	set   []int
	best  int64
	pick  []int
	extra []column
}

// order numbers the items so that those of high price come first: the sets of a
// first item then hold only cheaper ones, which ends most of them early.
func (s *pricing) order() {
	for i := range s.g.n {
		s.seq = append(s.seq, i)
	}
	slices.SortStableFunc(s.seq, func(a, b int) int { return compareInt(s.v[b], s.v[a]) })
}

type candidate struct {
	i int
	v int64
	d int64 // greatest distance to the items in the set, and inside it
}

// from gives the least reduced cost below 0 of the sets whose first item is the one
// at that place; 0: none is below.
func (s *pricing) from(at int) int64 {
	g := s.g
	i := s.seq[at]
	var d int64
	if g.size[i] > 1 {
		d = g.dist(i, i)
	}
	if d > g.cap {
		return 0
	}
	d *= inPrice
	most := min(g.cap, mostPriced-1) * inPrice
	// No set has more further items than k less the size of this one, and no item
	// after this one a higher price.
	rest := int64(g.k - g.size[i])
	var cands []candidate
	for _, j := range s.seq[at+1:] {
		e := max(d, s.far(i, j))
		if g.size[j] > 1 {
			e = max(e, s.far(j, j))
		}
		if e > most || e >= s.v[i]+s.v[j]+(rest-int64(g.size[j]))*max(0, s.v[s.seq[at+1]]) {
			continue
		}
		cands = append(cands, candidate{j, s.v[j], e})
	}
	s.best, s.pick = 0, nil
	s.set = append(s.set[:0], i)
	s.extend(cands, d, s.v[i], g.size[i], g.pch[i])
	if s.best < 0 {
		s.found = append(s.found, column{toInt32(s.pick), (s.best + s.worth(s.pick)) / inPrice})
		s.found = append(s.found, s.extra...)
	}
	s.extra = s.extra[:0]
	return s.best
}

func (s *pricing) worth(set []int) int64 {
	var w int64
	for _, i := range set {
		w += s.v[i]
	}
	return w
}

// far is the distance of two items in the unit of the prices; what is beyond every
// limit stays so.
func (s *pricing) far(i, j int) int64 { return min(s.g.dist(i, j), mostPriced) * inPrice }

func toInt32(set []int) []int32 {
	out := make([]int32, len(set))
	for x, i := range set {
		out[x] = int32(i)
	}
	return out
}

// extend tries the candidates, which are in order of falling price, as further
// items of the set, whose mismatch so far is d and whose prices are worth w.
func (s *pricing) extend(cands []candidate, d, w int64, size, pch int) {
	g := s.g
	if s.stopped {
		return
	}
	if s.steps++; s.steps&0xfff == 0 && s.over() {
		s.stopped = true
		return
	}
	open := g.k - size
	if len(s.set) == cap(s.set) {
		s.set = slices.Grow(s.set, g.k)
	}
	for x := range cands {
		c := &cands[x]
		if g.size[c.i] > open || g.needP >= 0 && pch+g.pch[c.i] > g.needP {
			continue
		}
		// Candidates from here on are worth no more than this one each.
		if d-w-int64(open)*max(0, c.v) >= s.best {
			return
		}
		e := max(d, c.d)
		left := open - g.size[c.i]
		if left == 0 {
			if r := e - w - c.v; r < s.best && (g.needP < 0 || pch+g.pch[c.i] == g.needP) {
				if s.pick != nil && len(s.extra) < 4 {
					s.extra = append(s.extra, column{toInt32(s.pick), (s.best + s.worth(s.pick)) / inPrice})
				}
				s.best = r
				s.pick = append(append(s.pick[:0:0], s.set...), c.i)
			}
			continue
		}
		next := int64(0)
		if x+1 < len(cands) {
			next = max(0, cands[x+1].v)
		}
		if e-w-c.v-int64(left)*next >= s.best {
			continue
		}
		var further []candidate
		for _, f := range cands[x+1:] {
			fd := max(f.d, s.far(c.i, f.i))
			if fd > min(g.cap, mostPriced-1)*inPrice || max(fd, e)-w-c.v-f.v-int64(left-g.size[f.i])*next >= s.best {
				continue
			}
			further = append(further, candidate{f.i, f.v, fd})
		}
		if len(further) == 0 {
			continue
		}
		s.set = append(s.set, c.i)
		s.extend(further, e, w+c.v, size+g.size[c.i], pch+g.pch[c.i])
		s.set = s.set[:len(s.set)-1]
	}
}

// all gives every set that may be made, nil where there are more than most.
func (g *groups) all(most int, over func() bool) []column {
	cols := []column{}
	set := make([]int, 0, g.k)
	steps := 0
	var grow func(cands []candidate, d int64, size, pch int) bool
	grow = func(cands []candidate, d int64, size, pch int) bool {
		if steps++; steps&0xfff == 0 && over() {
			return false
		}
		for x, c := range cands {
			if size+g.size[c.i] > g.k || g.needP >= 0 && pch+g.pch[c.i] > g.needP {
				continue
			}
			e := max(d, c.d)
			set = append(set, c.i)
			if size+g.size[c.i] == g.k {
				if g.needP < 0 || pch+g.pch[c.i] == g.needP {
					cols = append(cols, column{toInt32(set), e})
				}
			} else {
				var further []candidate
				for _, f := range cands[x+1:] {
					if fd := max(f.d, g.dist(c.i, f.i)); fd <= g.cap {
						further = append(further, candidate{f.i, 0, fd})
					}
				}
				if !grow(further, e, size+g.size[c.i], pch+g.pch[c.i]) {
					return false
				}
			}
			set = set[:len(set)-1]
			if len(cols) > most {
				return false
			}
		}
		return true
	}
	var cands []candidate
	for i := range g.n {
		var d int64
		if g.size[i] > 1 {
			d = g.dist(i, i)
		}
		if d <= g.cap {
			cands = append(cands, candidate{i, 0, d})
		}
	}
	if !grow(cands, 0, 0, 0) {
		return nil
	}
	return cols
}
