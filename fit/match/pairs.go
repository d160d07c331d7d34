package match

import (
	"context"
	"fmt"

	"gatesill/fit/match/blossom"
)

// answer is sets of items with what is proved of them, in nanovolts.
type answer struct {
	sets   [][]int // of items
	kind   string
	total  int64 // bound of the total
	worst  int64 // bound of the worst, for the aim Worst
	most   int   // bound of the number of sets
	proof  string
	prices []float64 // by item, of a lower bound; nil: none were found
}

// couples are things of which two make a set: devices, or packages.
type couples struct {
	things   [][]int              // devices of each
	distance func(i, j int) int64 // beyond where the two must not be joined
	cloud    blossom.Cloud        // without Cost
	noun     string
}

// couples makes the things to be joined: the devices, those of one package only
// with each other, or where every item has half the size of a set, the items; nil
// where sets are no couples of anything.
func (p *problem) couples() *couples {
	c := &couples{noun: "pair"}
	half := p.opt.Size / 2
	switch {
	case p.opt.Size == 2:
		for d := range p.used {
			c.things = append(c.things, []int{d})
		}
	case p.opt.Size%2 == 0:
		for _, it := range p.items {
			if len(it.devices) != half {
				return nil
			}
			c.things = append(c.things, it.devices)
		}
		c.noun = "package pair"
	default:
		return nil
	}
	of := make([]int, len(p.used)) // by device: the package it is in, -1 alone
	pch := make([]int, len(c.things))
	for k, it := range p.items {
		for _, d := range it.devices {
			of[d] = -1
			if len(it.devices) > 1 {
				of[d] = k
			}
		}
	}
	restricted := p.complementary || p.limits()
	for t, ds := range c.things {
		for _, d := range ds {
			if p.members[p.used[d]].PChannel {
				pch[t]++
			}
			if of[d] >= 0 && half == 1 {
				restricted = true
			}
		}
	}
	together := p.metric()
	c.distance = func(i, j int) int64 {
		a, b := c.things[i], c.things[j]
		switch {
		case p.complementary && pch[i]+pch[j] != half:
			return beyond
		case half == 1 && of[a[0]] != of[b[0]]:
			return beyond
		case half == 1:
			return together(a[0], b[0])
		}
		return p.mismatch(append(append(make([]int, 0, 2*half), a...), b...))
	}
	if half == 1 && p.loose() && !p.complementary {
		c.distance = together
	}
	c.coordinates(p)
	c.cloud.Distance = c.distance
	if restricted {
		c.cloud.Within = p.reach()
	}
	return c
}

// mismatch is the greatest distance of two of the devices, beyond where two must
// not be in one set.
func (p *problem) mismatch(devices []int) int64 {
	var d int64
	for i, a := range devices {
		for _, b := range devices[:i] {
			d = max(d, p.together(a, b))
		}
	}
	return d
}

// reach is at least the distance of any two devices that may be in one set.
func (p *problem) reach() int64 {
	sum := int64(1)
	for c := range p.opt.By {
		var widest int64
		for k := p.from[c]; k < p.from[c+1]; k++ {
			lo, hi := p.scaled[0][k], p.scaled[0][k]
			for d := range p.scaled {
				lo, hi = min(lo, p.scaled[d][k]), max(hi, p.scaled[d][k])
			}
			widest = max(widest, hi-lo)
		}
		if c == 0 && p.limits() {
			widest = min(widest, p.limit[0])
		}
		sum += widest
	}
	return sum
}

// coordinates places the things so that no distance is below that of the places:
// the middle of their devices. The distance of two single devices is the sum of
// the differences of single numbers; of curves it is at least the greatest.
func (c *couples) coordinates(p *problem) {
	c.cloud.Scale, c.cloud.Norm = 1, blossom.Sum
	var keep []int
	for q := range p.opt.By {
		if p.from[q+1]-p.from[q] > 1 {
			c.cloud.Norm = blossom.Greatest
		}
		if q == 0 || p.opt.By[q].Weight > 0 {
			for k := p.from[q]; k < p.from[q+1]; k++ {
				keep = append(keep, k)
			}
		}
	}
	for _, ds := range c.things {
		at := make([]float64, len(keep))
		for _, d := range ds {
			for x, k := range keep {
				at[x] += float64(p.scaled[d][k]) / float64(len(ds))
			}
		}
		c.cloud.At = append(c.cloud.At, at)
	}
}

// matchPairs joins couples for the aim of the problem, with proof.
func (p *problem) matchPairs(ctx context.Context, c *couples) (*answer, error) {
	n := len(c.things)
	switch p.opt.Aim {
	case Worst:
		return c.worst(ctx)
	case Best:
		if p.opt.Sets < n/2 {
			return c.best(ctx, p.opt.Sets)
		}
	}
	r, err := c.cloud.Match(ctx)
	if err != nil {
		return c.unproved(r, err)
	}
	if err := blossom.Verify(n, c.cloud.Pairs(), nil, r); err != nil {
		return nil, fmt.Errorf("the proof of %d %ss does not hold: %w", (n-r.LeftOut)/2, c.noun, err)
	}
	return c.proved(r.Mate, r.Total), nil
}

func (c *couples) sets(mate []int) [][]int {
	var sets [][]int
	for i, j := range mate {
		if j > i {
			sets = append(sets, []int{i, j})
		}
	}
	return sets
}

func (c *couples) proved(mate []int, total int64) *answer {
	a := &answer{sets: c.sets(mate), kind: Optimal, total: total}
	a.most = len(a.sets)
	n := len(c.things)
	a.proof = fmt.Sprintf("prices of the %d were held against each of %s: none costs less than its two prices allow, and the prices add up to the total found, so no choice has more sets, or as many at a smaller total",
		n, plural(n*(n-1)/2, c.noun))
	return a
}

// unproved is what a search that was ended has found so far.
func (c *couples) unproved(r *blossom.Result, err error) (*answer, error) {
	if r == nil {
		return nil, err
	}
	return &answer{sets: c.sets(r.Mate), kind: LowerBound, most: len(c.things) / 2,
		proof: "the search was ended before it was done; no difference is below 0"}, nil
}

func (c *couples) worst(ctx context.Context) (*answer, error) {
	n := len(c.things)
	r, err := c.cloud.Bottleneck(ctx)
	if err != nil {
		return c.unproved(r, err)
	}
	fewest := n % 2
	if r.LeftOut > fewest {
		all, err := c.cloud.Match(ctx)
		if err != nil {
			return c.unproved(r, err)
		}
		if err := blossom.Verify(n, c.cloud.Pairs(), nil, all); err != nil {
			return nil, fmt.Errorf("the proof that %d are left over does not hold: %w", all.LeftOut, err)
		}
		fewest = all.LeftOut
	}
	if err := blossom.VerifyBottleneck(n, c.cloud.Pairs(), fewest, r); err != nil {
		return nil, fmt.Errorf("the proof of the worst %s does not hold: %w", c.noun, err)
	}
	a := c.proved(r.Mate, r.Total)
	a.worst = r.Worst
	a.proof = fmt.Sprintf("of all %s those closer than the worst of the answer alone leave more over, which prices show; with those up to it, %s",
		plural(n*(n-1)/2, c.noun), a.proof)
	return a, nil
}

// best gives exactly m couples of least total, fewer only where there are no m.
//
// The least total f(m) is convex in m, so that m couples are found by a price s
// for leaving two things alone: at s - 1/2 the best choice has fewer than m or just
// m couples, at s + 1/2 at least m, and both are best at s. What they differ in falls
// into paths and rings, each of which can be exchanged alone without loss, and
// every path changes the number by one. The proof is the one at price s.
func (c *couples) best(ctx context.Context, m int) (*answer, error) {
	n := len(c.things)
	at := func(cost int64) (*blossom.Result, *blossom.Cloud, error) {
		q := c.cloud
		q.Scale = 4 * c.cloud.Scale
		q.Within = 4 * c.cloud.Within
		q.Distance = func(i, j int) int64 {
			if d := c.distance(i, j); d != beyond {
				return 4 * d
			}
			return beyond
		}
		q.Cost = make([]int64, n)
		for i := range q.Cost {
			q.Cost[i] = cost
		}
		r, err := q.Match(ctx)
		return r, &q, err
	}
	var failed error
	enough := func(s int64) bool {
		r, _, err := at(2*s + 1)
		if err != nil {
			failed = err
			return true
		}
		return (n-r.LeftOut)/2 >= m
	}
	high := int64(1 << 10)
	all, err := c.cloud.Match(ctx)
	if err != nil {
		return c.unproved(all, err)
	}
	if (n-all.LeftOut)/2 <= m {
		if err := blossom.Verify(n, c.cloud.Pairs(), nil, all); err != nil {
			return nil, fmt.Errorf("the proof of %d %ss does not hold: %w", (n-all.LeftOut)/2, c.noun, err)
		}
		return c.proved(all.Mate, all.Total), nil
	}
	low := int64(-1) // not enough at low, enough at high
	for !enough(high) {
		low, high = high, 8*high
	}
	for high-low > 1 && failed == nil {
		if mid := low + (high-low)/2; enough(mid) {
			high = mid
		} else {
			low = mid
		}
	}
	if failed != nil {
		return nil, failed
	}
	s := high
	lower, _, err := at(2*s - 1)
	if err != nil {
		return nil, err
	}
	upper, _, err := at(2*s + 1)
	if err != nil {
		return nil, err
	}
	mate := exchange(lower.Mate, upper.Mate, m-(n-lower.LeftOut)/2)
	var total int64
	for i, j := range mate {
		if j > i {
			total += c.distance(i, j)
		}
	}
	r, q, err := at(2 * s)
	if err != nil {
		return nil, err
	}
	if err := blossom.Verify(n, q.Pairs(), q.Cost, r); err != nil {
		return nil, fmt.Errorf("the proof of the best %d %ss does not hold: %w", m, c.noun, err)
	}
	// 4 f(m) + 2 s (n - 2 m) cannot be below what is proved at price s.
	a := c.proved(mate, total)
	if bound := (r.Total + 2*s*int64(r.LeftOut) - 2*s*int64(n-2*m) + 3) / 4; bound != total {
		a.kind, a.total = LowerBound, bound
	}
	a.most = (n - all.LeftOut) / 2
	a.proof = fmt.Sprintf("at a price of %s for leaving two alone, %s; a choice of %d %ss below the total found would break them", volts(float64(s)/nano), a.proof, m, c.noun)
	return a, nil
}

// exchange takes over from b into a the paths by which b has one couple more,
// as many as asked.
func exchange(a, b []int, more int) []int {
	mate := append([]int(nil), a...)
	seen := make([]bool, len(a))
	for start := range a {
		// A path by which b gains begins and ends at things that a leaves alone.
		if more == 0 {
			break
		}
		if seen[start] || a[start] >= 0 || b[start] < 0 {
			continue
		}
		path := []int{start}
		for v, inB := start, true; ; inB = !inB {
			w := a[v]
			if inB {
				w = b[v]
			}
			if w < 0 {
				break
			}
			path = append(path, w)
			v = w
		}
		for _, v := range path {
			seen[v] = true
		}
		if len(path)%2 == 1 {
			continue // ends with a couple of a: as many as before
		}
		for i := 0; i < len(path); i += 2 {
			mate[path[i]], mate[path[i+1]] = path[i+1], path[i]
		}
		more--
	}
	return mate
}
