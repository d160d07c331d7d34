package match

import "math/bits"

// rematch gives the best sets of a few items: as many as there may be, then the
// least total, by a dynamic programme over which items are still there.
func (g *groups) rematch(items []int, may int) ([][]int, int64) {
	m := len(items)
	type column struct {
		mask uint32
		cost int64
	}
	cols := make([][]column, m) // by the first item
	var grow func(first, from int, mask uint32, size, pch int, worst int64)
	grow = func(first, from int, mask uint32, size, pch int, worst int64) {
		if size == g.k {
			if g.needP < 0 || pch == g.needP {
				cols[first] = append(cols[first], column{mask, worst})
			}
			return
		}
		for x := from; x < m; x++ {
			j := items[x]
			if size+g.size[j] > g.k {
				continue
			}
			w := worst
			if g.size[j] > 1 {
				w = max(w, g.dist(j, j))
			}
			for y := first; y < x && w <= g.cap; y++ {
				if mask>>y&1 == 1 {
					w = max(w, g.dist(items[y], j))
				}
			}
			if w <= g.cap {
				grow(first, x+1, mask|1<<x, size+g.size[j], pch+g.pch[j], w)
			}
		}
	}
	for x, i := range items {
		var w int64
		if g.size[i] > 1 {
			w = g.dist(i, i)
		}
		if w <= g.cap {
			grow(x, x+1, 1<<x, g.size[i], g.pch[i], w)
		}
	}
	// How many sets may still be made matters only where their number is given.
	wide := 1
	if g.fixed > 0 {
		may = min(may, m)
		wide = may + 1
	}
	if len(g.memo) < wide<<m {
		g.memo = make([]entry, wide<<m)
	}
	memo := g.memo[:wide<<m]
	clear(memo)
	var best func(mask uint32, left int) int64
	best = func(mask uint32, left int) int64 {
		if mask == 0 || g.fixed > 0 && left == 0 {
			return 0
		}
		e := &memo[int(mask)*wide+(left%wide+wide)%wide]
		if e.done {
			return e.value
		}
		low := bits.TrailingZeros32(mask)
		value, pick := best(mask&^(1<<low), left), int32(-1)
		for c := range cols[low] {
			col := &cols[low][c]
			if col.mask&^mask != 0 {
				continue
			}
			if v := best(mask&^col.mask, left-1) + col.cost - setWorth; v < value {
				value, pick = v, int32(c)
			}
		}
		*e = entry{value, pick, true}
		return value
	}
	if g.fixed == 0 {
		may = 0
	}
	mask := uint32(1)<<m - 1
	value := best(mask, may)
	var sets [][]int
	for left := may; mask != 0 && (g.fixed == 0 || left > 0); {
		low := bits.TrailingZeros32(mask)
		e := memo[int(mask)*wide+(left%wide+wide)%wide]
		if e.col < 0 {
			mask &^= 1 << low
			continue
		}
		col := cols[low][e.col]
		var set []int
		for x := range m {
			if col.mask>>x&1 == 1 {
				set = append(set, items[x])
			}
		}
		sets = append(sets, set)
		mask &^= col.mask
		left--
	}
	return sets, value
}

// entry is what is known of one remainder of a few items.
type entry struct {
	value int64
	col   int32 // set of its first item that is best; -1: leave that item over
	done  bool
}
