// Package blossom finds matchings of least total weight in general graphs, and
// proves them: every answer carries duals from which Verify shows, without the
// solver, that no other matching is better.
//
// Aims: Perfect (every vertex in a pair), Largest (as many pairs as possible
// and, among those, the least total), LeaveOut (a vertex may stay alone at a
// cost of its own), Bottleneck (the worst pair as good as possible, then the
// least total). Cloud does the same for points with a distance, where every two
// points may be paired, without ever writing down all pairs.
//
// What the four cannot do themselves is a matter of the weights given to them:
// the matching of greatest total weight is LeaveOut with weights K − w and the
// cost K/2 for each vertex, K even and at least the greatest w; an odd number
// of vertices is Largest, which leaves one out, the one that saves most.
//
// It refuses weights that are not whole numbers: rounding would make the proof
// an opinion. Weights may be negative. It knows nothing of what the vertices
// are.
//
// Method: the primal-dual method with blossoms (Edmonds, Paths, trees, and
// flowers, Canadian Journal of Mathematics 17, 1965), one tree at a time with
// duals updated late and events in a heap; a complete graph is solved on a
// sparse part of it to which the edges that the duals find wanting are added
// (Applegate and Cook, Solving large-scale matching problems, in: Network Flows
// and Matching, DIMACS Series 12, 1993). Both from memory.
package blossom

import (
	"context"
	"errors"
	"fmt"
	"math"
)

// ErrNoPerfect says that the edges allow no matching that covers every vertex.
var ErrNoPerfect = errors.New("no perfect matching")

// ErrGraph says that vertices, edges, weights or costs are not usable.
var ErrGraph = errors.New("unusable graph")

// errTooMany ends a solve that has to give up more vertices than it may.
var errTooMany = errors.New("too many vertices left out")

// Never is the cost of leaving out a vertex that must not be left out.
const Never = math.MaxInt64

// Edge joins vertices U and V, numbered from 0, at a weight. Of several edges
// between the same two the lightest counts.
type Edge struct {
	U, V   int
	Weight int64
}

// Blossom is an odd set of vertices, those from place From up to, but without,
// place To of a result's Line, with its doubled dual, which is positive.
type Blossom struct {
	From, To int
	Dual     int64
}

// Result is a matching with its proof.
type Result struct {
	Mate    []int // by vertex: its partner, -1 when left out
	LeftOut int   // number of vertices without partner
	Total   int64 // sum of the weights of the pairs; costs of vertices left out do not enter
	Worst   int64 // greatest weight of a pair; 0 when there is no pair

	Dual     []int64   // by vertex: the doubled dual
	Blossoms []Blossom // the odd sets with positive dual; any two are one in the other or apart
	Line     []int     // all vertices, in an order in which every blossom is a range
	Penalty  int64     // doubled cost at which leaving out any vertex was weighed; 0 when costs were given

	// Witness proves for Bottleneck that the pairs lighter than Worst do not
	// suffice; nil for the other aims. Its weights are 0, its Penalty is 2, and
	// its Mate is nil.
	Witness *Result

	Work Work
}

// Work counts what a result took.
type Work struct {
	Searches int // trees grown
	Rounds   int // times that all pairs were priced, 0 for a graph given by its edges
	Edges    int // edges of the graph that was solved in the end
}

// Perfect gives the matching of least total weight that covers all of the
// vertices 0..n-1, or ErrNoPerfect. When ctx ends first, the result is what has
// been matched so far, without proof, and the error is that of ctx.
func Perfect(ctx context.Context, n int, edges []Edge) (*Result, error) {
	if err := check(n, edges, nil); err != nil {
		return nil, err
	}
	if n%2 == 1 {
		return nil, fmt.Errorf("%w: %d vertices are an odd number", ErrNoPerfect, n)
	}
	p := penalty(n, edges)
	s := newSolver(n, edges, constant(n, p))
	s.start()
	err := s.solve(ctx, 0)
	if errors.Is(err, errTooMany) {
		return nil, fmt.Errorf("%w of %d vertices along %d edges", ErrNoPerfect, n, len(edges))
	}
	return s.result(p), err
}

// Largest gives, of the matchings with the greatest number of pairs, the one of
// least total weight. When ctx ends first, the result is what has been matched
// so far, without proof, and the error is that of ctx.
func Largest(ctx context.Context, n int, edges []Edge) (*Result, error) {
	if err := check(n, edges, nil); err != nil {
		return nil, err
	}
	p := penalty(n, edges)
	s := newSolver(n, edges, constant(n, p))
	s.start()
	err := s.solve(ctx, n)
	return s.result(p), err
}

// LeaveOut gives the matching for which the weights of the pairs and the costs
// of the vertices without partner together are least. A cost of Never keeps its
// vertex in; if that cannot be for all such vertices the error is ErrNoPerfect.
// When ctx ends first, the result is what has been matched so far, without
// proof, and the error is that of ctx.
func LeaveOut(ctx context.Context, n int, edges []Edge, cost []int64) (*Result, error) {
	if err := check(n, edges, cost); err != nil {
		return nil, err
	}
	if len(cost) != n {
		return nil, fmt.Errorf("%w: %d costs for %d vertices", ErrGraph, len(cost), n)
	}
	s := newSolver(n, edges, doubled(cost))
	s.start()
	err := s.solve(ctx, n)
	if errors.Is(err, errTooMany) {
		return nil, fmt.Errorf("%w of the vertices that must not be left out, %d in all", ErrNoPerfect, n)
	}
	return s.result(0), err
}

func doubled(cost []int64) []int64 {
	limit := make([]int64, len(cost))
	for v, c := range cost {
		limit[v] = c
		if c != Never {
			limit[v] = 2 * c
		}
	}
	return limit
}

func constant[T any](n int, p T) []T {
	a := make([]T, n)
	for i := range a {
		a[i] = p
	}
	return a
}

// penalty gives the doubled cost of leaving a vertex out that the solver takes.
// It is several times the least that does, so that a single vertex that has to
// be given up shows already that no perfect matching exists: with the other
// free vertices at the duals of start, at least the least weight each, the
// bound is then above the total of any perfect matching.
func penalty(n int, edges []Edge) int64 {
	var lo, hi int64
	for _, e := range edges {
		lo, hi = min(lo, e.Weight), max(hi, e.Weight)
	}
	return 8 * penaltyFor(n, lo, hi)
}

// penaltyFor gives a doubled cost of leaving a vertex out that no saving of
// weight can make good, lo and hi being the least and the greatest weight: two
// vertices more left out cost more than the dearest matching is dearer than the
// cheapest.
func penaltyFor(n int, lo, hi int64) int64 {
	return int64(n/2)*(max(hi, 0)-min(lo, 0)) + 1
}

// greatest gives the greatest size of a weight or cost among n vertices for
// which no dual, slack or time of an event leaves the range of int64.
func greatest(n int) int64 { return math.MaxInt64 / (64 * (int64(n) + 2)) }

func check(n int, edges []Edge, cost []int64) error {
	if n < 0 || n > math.MaxInt32/4 || len(edges) > math.MaxInt32/2 {
		return fmt.Errorf("%w: %d vertices and %d edges", ErrGraph, n, len(edges))
	}
	most := greatest(n)
	for i, e := range edges {
		switch {
		case e.U < 0 || e.V < 0 || e.U >= n || e.V >= n || e.U == e.V:
			return fmt.Errorf("%w: edge %d joins vertices %d and %d of %d", ErrGraph, i, e.U, e.V, n)
		case e.Weight > most || e.Weight < -most:
			return fmt.Errorf("%w: edge %d: weight %d is beyond %d, the most with %d vertices", ErrGraph, i, e.Weight, most, n)
		}
	}
	for v, c := range cost {
		if c != Never && (c > most || c < -most) {
			return fmt.Errorf("%w: vertex %d: cost %d is beyond %d, the most with %d vertices", ErrGraph, v, c, most, n)
		}
	}
	return nil
}

// result writes down the matching and its duals.
func (s *solver) result(penalty int64) *Result {
	r := &Result{
		Mate: make([]int, s.n), Dual: append([]int64(nil), s.y...), Penalty: penalty,
		Work: Work{Searches: s.searches, Edges: len(s.w2)},
	}
	pairs := 0
	for v := range s.n {
		h := s.match[v]
		if h == none {
			r.Mate[v] = -1
			r.LeftOut++
			continue
		}
		r.Mate[v] = int(s.end[h^1])
		if r.Mate[v] > v {
			w := s.w2[h>>1] / 2
			r.Total += w
			if pairs == 0 || w > r.Worst {
				r.Worst = w
			}
			pairs++
		}
	}
	in := s.nest()
	r.Blossoms, r.Line = in.sets, make([]int, s.n)
	for i, v := range in.line {
		r.Line[i] = int(v)
	}
	return r
}
