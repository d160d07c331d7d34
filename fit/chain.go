package fit

import "math"

// What it costs to leave a point out, and to keep three points that one curve
// cannot hold. A spike is in the way of itself and of its neighbours, the corner
// of a load line of itself only: one breach is cheaper than a point, two are not.
// All are judgements, tried on TestFalseAlarms and TestGlitchedRangeChanges.
const (
	// mostInARow bounds the points that are left out one after another: two
	// leftovers of three changes of range.
	mostInARow = 6
	// costOfPoint is that of leaving out a point without any further sign of a
	// fault; costAfterChange that of one just after a change of range;
	// costOfRepetition that of one that repeats, to the last digit, one of the two
	// readings before it; costOfEndOfRange that of one that stands at the end of a range.
	costOfPoint      = 1.0
	costAfterChange  = 0.7
	costOfRepetition = 0.55
	costOfEndOfRange = 0.4
	// costOfBreach is that of a point outside the bracket of its neighbours,
	// costOfWide that of one outside by more than a factor of two, costOfFall that
	// of a current that falls; costOfBend that of a point above the straight chord
	// where the load resistor or a small drain voltage may bend the curve over;
	// costOfMisfit the most for one within its bracket but off all chords.
	costOfBreach = 0.9
	costOfWide   = 2.0
	costOfFall   = 2.0
	costOfBend   = 0.5
	costOfMisfit = 0.2
)

// candidate is one value that a point may have.
type candidate struct {
	point
	j     int // index of its point
	cost  float64
	other bool // the reading of the other meter
}

// chain finds the largest set of points that one transfer curve can hold: every
// point of it lies in the bracket that the kept points on both sides leave it.
// Where two meters disagree either reading may be the one that is kept. It is the
// cheapest path through the points by dynamic programming, each step over at most
// mostInARow points left out; that finds two bad neighbours, which hide one
// another from any search for the worst single point.
type chain struct {
	w     *work
	c     []candidate
	first []int     // first candidate of every point, and one past the last
	cost  []float64 // of reaching candidate y from x: [y*width + y-x]
	back  []int8    // distance from x to the one before it; 0: x is the first
	width int
}

func (w *work) newChain() *chain {
	n := len(w.pts)
	h := &chain{w: w, c: make([]candidate, 0, n), first: make([]int, n+1)}
	for j := range w.pts {
		h.first[j] = len(h.c)
		h.c = append(h.c, candidate{point: w.pts[j], j: j})
		if p := &w.pts[j]; p.disputed {
			o := *p
			w.use(&o, !p.load)
			w.shape(&o)
			h.c = append(h.c, candidate{point: o, j: j, other: true})
		}
	}
	h.first[n] = len(h.c)
	return h
}

// best is the cheapest set: the candidate kept for every point, -1 for none.
func (h *chain) best() []int {
	n := len(h.first) - 1
	h.width = 2*(mostInARow+1) + 2
	h.cost = make([]float64, len(h.c)*h.width)
	h.back = make([]int8, len(h.c)*h.width)
	for k := range h.cost {
		h.cost[k] = math.Inf(1)
	}
	costs := [...]float64{costOfPoint, costAfterChange, costOfRepetition, costOfEndOfRange}
	for y := range h.c {
		c := &h.c[y]
		c.cost = costs[h.w.signOf(&c.point)]
	}
	before := make([]float64, n+1) // cost of leaving out all points before j
	for j := range n {
		least := math.Inf(1)
		for _, c := range h.c[h.first[j]:h.first[j+1]] {
			least = math.Min(least, c.cost)
		}
		before[j+1] = before[j] + least
	}
	end, endCost, endBack := -1, math.Inf(1), 0
	for j := range n {
		for y := h.first[j]; y < h.first[j+1]; y++ {
			// The first of all: slot 0.
			if j <= mostInARow {
				h.cost[y*h.width] = before[j]
			}
			for i := max(0, j-1-mostInARow); i < j; i++ {
				for x := h.first[i]; x < h.first[i+1]; x++ {
					h.step(x, y, before[j]-before[i+1])
				}
			}
			if j+1+mostInARow < n {
				continue
			}
			for d := range h.width {
				if c := h.cost[y*h.width+d] + before[n] - before[j+1]; c < endCost {
					end, endCost, endBack = y, c, d
				}
			}
		}
	}
	kept := make([]int, n)
	for j := range kept {
		kept[j] = -1
	}
	for y, d := end, endBack; y >= 0; {
		kept[h.c[y].j] = y
		if d == 0 {
			break
		}
		x := y - d
		d = int(h.back[y*h.width+d])
		y = x
	}
	return kept
}

// keep is what it costs to use a reading that bears the signs of a leftover where
// there is another: little, for it only decides where both would do.
func (c *candidate) keep() float64 {
	if !c.disputed {
		return 0
	}
	return 0.1 * (costOfPoint - c.cost)
}

// step reaches y from x, skipping points of that cost.
func (h *chain) step(x, y int, skipped float64) {
	fall := 0.0
	if h.w.contradicts(&h.c[x].point, &h.c[y].point) {
		fall = costOfFall
	}
	best, from := math.Inf(1), 0
	for d := range h.width {
		c := h.cost[x*h.width+d]
		if math.IsInf(c, 1) {
			continue
		}
		if d > 0 && c < best {
			w := x - d
			var before *point
			if b := int(h.back[x*h.width+d]); b > 0 {
				before = &h.c[w-b].point
			}
			c += h.breach(before, &h.c[w].point, &h.c[x].point, &h.c[y].point)
		}
		if c < best {
			best, from = c, d
		}
	}
	k := y*h.width + y - x
	h.cost[k], h.back[k] = best+skipped+fall+h.c[y].keep(), int8(from)
}

// breach is what it costs that b lies outside what a before and c after it leave
// it; p, which may be nil, is the point before a.
func (h *chain) breach(p, a, b, c *point) float64 {
	e := h.w.breachOf(p, a, b, c)
	switch {
	case e == 0 && b.i < h.w.tiny:
		return 0
	case e == 0 && p != nil && dips(p, a, b, c, h.w.limit):
		return costOfBreach
	case e == 0:
		return costOfMisfit * math.Min(1, fromChords(a, b, c)/h.w.limit)
	case e > 0 && !h.w.inSaturation(c):
		return costOfBend
	case math.Abs(e) > math.Ln2:
		return costOfWide
	}
	return costOfBreach
}
