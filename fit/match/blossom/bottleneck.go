package blossom

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Bottleneck gives, of the matchings with the greatest number of pairs, one
// whose worst pair is as light as can be and, among those, the one of least
// total. Its Witness shows that lighter pairs alone do not suffice. When ctx
// ends first, the error is that of ctx and the result, which may be nil, is
// what has been matched so far, without proof.
func Bottleneck(ctx context.Context, n int, edges []Edge) (*Result, error) {
	if err := check(n, edges, nil); err != nil {
		return nil, err
	}
	all, err := reach(ctx, n, edges, math.MaxInt64, nil, n)
	if err != nil {
		return nil, err
	}
	fewest := all.result(0).LeftOut
	worst, witness, err := threshold(ctx, n, edges, all, fewest)
	if err != nil {
		return nil, err
	}
	r, err := Largest(ctx, n, upTo(edges, worst))
	if err == nil && witness != nil {
		r.Witness = witness.witness()
	}
	return r, err
}

func upTo(edges []Edge, most int64) []Edge {
	var part []Edge
	for _, e := range edges {
		if e.Weight <= most {
			part = append(part, e)
		}
	}
	return part
}

// reach pairs as many vertices as can be along the edges up to most, beginning
// with the pairs of from that are no heavier, and gives up with errTooMany once
// more than allowed must be left out. All weights are taken as 0 and the
// doubled cost of leaving a vertex out as 2.
func reach(ctx context.Context, n int, edges []Edge, most int64, from *solver, allowed int) (*solver, error) {
	part := upTo(edges, most)
	mate := constant(n, -1)
	if from != nil {
		for v, h := range from.match {
			if h != none {
				mate[v] = int(from.end[h^1])
			}
		}
	}
	s := newSolver(n, part, constant(n, int64(2)))
	for e, p := range part {
		s.w2[e] = 0
		if mate[p.U] == p.V && s.match[p.U] == none {
			s.match[p.U], s.match[p.V] = int32(2*e), int32(2*e+1)
		}
	}
	s.start()
	return s, s.solve(ctx, allowed)
}

// threshold gives the least weight up to which the edges leave out no more than
// fewest vertices, and the solver that failed on the edges below it. It starts
// from a solver that succeeded on all edges. Without any pair the solver is nil.
func threshold(ctx context.Context, n int, edges []Edge, best *solver, fewest int) (int64, *solver, error) {
	steps := make([]int64, 0, len(edges))
	light := constant(n, int64(math.MaxInt64))
	weight := make(map[[2]int]int64, len(edges))
	for _, e := range edges {
		steps = append(steps, e.Weight)
		light[e.U], light[e.V] = min(light[e.U], e.Weight), min(light[e.V], e.Weight)
		key := [2]int{min(e.U, e.V), max(e.U, e.V)}
		if w, ok := weight[key]; !ok || e.Weight < w {
			weight[key] = e.Weight
		}
	}
	slices.Sort(steps)
	steps = slices.Compact(steps)
	if fewest >= n-1 || len(steps) == 0 {
		return math.MinInt64, nil, nil
	}
	// worst gives the place of the heaviest pair of s among the steps.
	worst := func(s *solver) int {
		w := int64(math.MinInt64)
		for v, h := range s.match {
			if h != none {
				u := int(s.end[h^1])
				w = max(w, weight[[2]int{min(u, v), max(u, v)}])
			}
		}
		i, _ := slices.BinarySearch(steps, w)
		return i
	}
	// All but fewest vertices need an edge: below the step that gives it to
	// them it cannot be. That step is tried first, and if it suffices the one
	// before it. Place -1 stands for no edges at all.
	slices.Sort(light)
	low, high := -2, worst(best) // low fails, high suffices
	try, _ := slices.BinarySearch(steps, light[n-1-fewest])
	var failed *solver
	for first := true; high-low > 1; first = false {
		if try <= low || try >= high {
			try = (low + high) / 2
		}
		most := int64(math.MinInt64)
		if try >= 0 {
			most = steps[try]
		}
		s, err := reach(ctx, n, edges, most, best, fewest)
		switch {
		case err == nil:
			best, high = s, worst(s)
			if try = low; first {
				try = high - 1
			}
		case errors.Is(err, errTooMany):
			failed, low = s, try
		default:
			return 0, nil, err
		}
	}
	return steps[high], failed, nil
}

// witness writes down the duals of a solver that had to give up.
func (s *solver) witness() *Result {
	r := s.result(2)
	r.Mate, r.LeftOut = nil, 0
	return r
}

// Bottleneck gives, of the matchings that Match looks among without Cost, one
// whose worst pair is as close as can be and, among those, the one of least
// total; see VerifyBottleneck with c.Pairs(). It refuses Cost. When ctx ends
// first, the error is that of ctx and the result, which may be nil, is the last
// matching that was reached, without proof.
func (c *Cloud) Bottleneck(ctx context.Context) (*Result, error) {
	if c.Cost != nil {
		return nil, fmt.Errorf("%w: costs of leaving out and the worst pair have no common measure", ErrGraph)
	}
	t, edges, err := c.begin(ctx)
	if err != nil {
		return nil, err
	}
	n := len(c.At)
	fewest := n % 2
	if c.Within > 0 {
		r, err := c.match(ctx, t, edges, c.within())
		if err != nil {
			return r, err
		}
		fewest = r.LeftOut
		for v, m := range r.Mate { // the sparse edges may not allow as many pairs
			if m > v {
				edges = append(edges, Edge{v, m, c.Distance(v, m)})
			}
		}
	}
	for {
		all, err := reach(ctx, n, edges, math.MaxInt64, nil, fewest)
		if err != nil {
			return nil, err
		}
		worst, failed, err := threshold(ctx, n, edges, all, fewest)
		if err != nil {
			return nil, err
		}
		if failed == nil { // no pair
			return c.match(ctx, t, edges, c.within())
		}
		more, err := c.wanting(ctx, t, failed, worst-1, 0)
		if err != nil {
			return nil, err
		}
		if len(more) == 0 {
			r, err := c.match(ctx, t, upTo(edges, worst), worst)
			if err == nil {
				r.Witness = failed.witness()
			}
			return r, err
		}
		edges = append(edges, more...)
	}
}
