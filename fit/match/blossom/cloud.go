package blossom

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Norm is a way to measure the difference of two points.
type Norm int

const (
	Greatest Norm = iota // the greatest difference of a coordinate; no other norm here is below it
	Straight             // the root of the sum of the squares
	Sum                  // the sum of the differences
)

// Cloud is a set of points of which any two may be paired at their distance.
type Cloud struct {
	// At has the coordinates of each point, equally many and finite. They serve
	// to find near points and to skip far ones, nothing else.
	At [][]float64

	// Distance gives the weight of a pair: whole, not negative, the same both
	// ways. It need not keep the triangle inequality.
	Distance func(i, j int) int64

	// Scale promises that Distance is at least Scale times the Norm of the
	// difference of the coordinates, or at most one less, for rounding. With 0
	// nothing is promised, and every pair is looked at in each round.
	Scale float64
	Norm  Norm

	// Within, if positive, is the greatest distance of a pair.
	Within int64

	// Cost, if not nil, has the cost of leaving each point alone; Never is
	// allowed. Without, as many pairs are made as there can be.
	Cost []int64
}

// perVertex is how many edges a round adds for each point at most.
const perVertex = 4

// nearby gives how many neighbours of each point are in the first graph: more
// in more quantities, where fewer of all points are far.
func nearby(dims int) int { return 6 + 2*dims }

// Match gives the matching of least total distance: with all points in pairs
// but the one of an odd number, or, with Within, as many as can be; or, with
// Cost, that of least distance and cost together. It is proved for all pairs,
// see Verify with c.Pairs(). When ctx ends first, the error is that of ctx and
// the result, which may be nil, is the last matching that was reached, without
// proof.
func (c *Cloud) Match(ctx context.Context) (*Result, error) {
	t, edges, err := c.begin(ctx)
	if err != nil {
		return nil, err
	}
	return c.match(ctx, t, edges, c.within())
}

// Pairs gives all pairs that may be made.
func (c *Cloud) Pairs() Pairs { return All(len(c.At), c.Distance).UpTo(c.within()) }

func (c *Cloud) within() int64 {
	if c.Within > 0 {
		return c.Within
	}
	return math.MaxInt64
}

func (c *Cloud) begin(ctx context.Context) (*tree, []Edge, error) {
	n := len(c.At)
	for i, x := range c.At {
		if len(x) != len(c.At[0]) {
			return nil, nil, fmt.Errorf("%w: point %d has %d coordinates, point 0 has %d", ErrGraph, i, len(x), len(c.At[0]))
		}
		for k, v := range x {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, nil, fmt.Errorf("%w: point %d: coordinate %d is %v", ErrGraph, i, k, v)
			}
		}
	}
	if c.Cost != nil && len(c.Cost) != n {
		return nil, nil, fmt.Errorf("%w: %d costs for %d points", ErrGraph, len(c.Cost), n)
	}
	t := newTree(c.At)
	if n == 0 {
		return t, nil, nil
	}
	edges, err := c.sparse(ctx, t, nearby(len(c.At[0])))
	if err != nil {
		return nil, nil, err
	}
	return t, edges, c.check(edges)
}

// check refuses distances that are negative or too great.
func (c *Cloud) check(edges []Edge) error {
	for _, e := range edges {
		if e.Weight < 0 {
			return fmt.Errorf("%w: points %d and %d: distance %d", ErrGraph, e.U, e.V, e.Weight)
		}
	}
	return check(len(c.At), edges, c.Cost)
}

// sparse gives the edges from every point to its k nearest and along the order
// of the tree, which is a way through all points by short steps: with it
// alone, all points can be paired.
func (c *Cloud) sparse(ctx context.Context, t *tree, k int) ([]Edge, error) {
	var keys []uint64
	add := func(a, b int32) {
		keys = append(keys, uint64(min(a, b))<<32|uint64(max(a, b)))
	}
	var near []neighbour
	for p := range int32(len(c.At)) {
		if p&255 == 0 && ctx.Err() != nil {
			return nil, ctx.Err()
		}
		near = t.nearest(p, k, near[:0])
		for _, q := range near {
			add(p, q.i)
		}
	}
	for i := 1; i < len(t.order); i++ {
		add(t.order[i-1], t.order[i])
	}
	slices.Sort(keys)
	keys = slices.Compact(keys)
	edges := make([]Edge, 0, len(keys))
	for _, key := range keys {
		u, v := int(key>>32), int(key&math.MaxUint32)
		if w := c.Distance(u, v); w <= c.within() {
			edges = append(edges, Edge{u, v, w})
		}
	}
	return edges, nil
}

// match solves on edges and adds the pairs up to within that the duals find
// wanting until there are none.
func (c *Cloud) match(ctx context.Context, t *tree, edges []Edge, within int64) (*Result, error) {
	n := len(c.At)
	var limit []int64
	var p int64
	switch {
	case c.Cost != nil:
		limit = doubled(c.Cost)
	case within != math.MaxInt64:
		p = 8 * penaltyFor(n, 0, within)
		limit = constant(n, p)
	default: // the way through all points leaves at most one out
		p = penalty(n, edges)
		limit = constant(n, p)
	}
	s := newSolver(n, edges, limit)
	s.start()
	var last *Result
	for round := 1; ; round++ {
		err := s.solve(ctx, n)
		if errors.Is(err, errTooMany) {
			return nil, fmt.Errorf("%w of the points that must not be left out, %d in all", ErrNoPerfect, n)
		}
		if err != nil {
			if last == nil {
				last = s.result(p)
			}
			return last, err
		}
		last = s.result(p)
		last.Work.Rounds = round
		more, err := c.wanting(ctx, t, s, within, 1)
		if err != nil || len(more) == 0 {
			return last, err
		}
		from := len(s.w2)
		s.addEdges(more)
		s.repair(from)
	}
}

// wanting gives pairs up to within with negative slack, the worst few of each
// point; none if and only if the duals are feasible for all pairs up to within.
// The weight of a pair is factor times its distance, factor being 1 or 0.
func (c *Cloud) wanting(ctx context.Context, t *tree, s *solver, within, factor int64) ([]Edge, error) {
	var more []Edge
	var worst [perVertex]Edge
	var slack [perVertex]int64
	in := s.nest()
	t.setDuals(s.y, in)
	for p := range int32(s.n) {
		if p&255 == 0 && ctx.Err() != nil {
			return nil, ctx.Err()
		}
		n := 0
		t.visitClose(p, in, c.Norm, c.Scale, within, factor, func(q int32) {
			w := c.Distance(int(p), int(q))
			k := 2*w*factor - s.y[p] - s.y[q]
			if k >= 0 || w > within {
				return
			}
			k += in.around(p, q)
			if k >= 0 || n == perVertex && k >= slack[n-1] {
				return
			}
			n = min(n+1, perVertex)
			i := n - 1
			for ; i > 0 && slack[i-1] > k; i-- {
				worst[i], slack[i] = worst[i-1], slack[i-1]
			}
			worst[i], slack[i] = Edge{int(p), int(q), w}, k
		})
		more = append(more, worst[:n]...)
	}
	return more, c.check(more)
}
