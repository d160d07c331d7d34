package blossom

import (
	"context"
	"math"
)

// never is the time of an event that does not come, and the limit of a vertex
// that may not be left out.
const never = math.MaxInt64

const none = -1

type label int8

const (
	outside label = iota // not in the tree: its duals rest
	outer                // at even distance from the root: its duals rise
	inner                // at odd distance: its duals fall
)

// solver holds a matching, duals that are feasible for its edges at all times
// between two searches, and the blossoms that go with them.
//
// An edge e has the two directed halves 2e and 2e+1; end[h] is the vertex that
// half h leaves, end[h^1] the one it enters. Nodes are the vertices 0..n-1 and,
// from n on, blossoms; a node without parent is outermost. Weights, duals and
// limits are doubled: every vertex of one search tree then has a dual of the
// same parity, so that the half of a slack between two outer vertices is whole.
//
// Duals of what is in the tree are brought up to date lazily: a vertex in an
// outer node that was up to date at time since has y + now − since, one in an
// inner node y − (now − since); the dual of the node moves twice as fast.
type solver struct {
	n     int
	end   []int32 // by half
	w2    []int64 // by edge: the doubled weight
	first []int32 // by vertex, n+1: where its halves begin in halves
	halfs []int32 // halves grouped by the vertex that they leave

	y     []int64 // by vertex
	limit []int64 // by vertex: doubled cost of leaving it out; never: not allowed
	match []int32 // by vertex: the matched half that leaves it, or none
	top   []int32 // by vertex: its outermost node

	parent, base []int32   // by node
	kids, links  [][]int32 // by node: the cycle, kid 0 with the base; halves from kid i to kid i+1
	leaves       [][]int32 // by node: the vertices in it
	z            []int64   // by node, used for blossoms only
	since        []int64   // by outermost node: when duals in it were up to date
	label        []label   // by node, meaningful for outermost ones
	entry        []int32   // by node: the half by which an inner node was reached
	best         []int64   // by node: time of the earliest event that reaches it, while outside
	stamp        []int32   // by node: marks of the search for a common ancestor
	spare        []int32   // blossom numbers to use again
	one          []int32   // 0..n-1, the leaves of single vertices

	now, bound int64 // bound: the time at which this search ends at the latest
	events     heap
	touched    []int32 // nodes that carried a label in this search
	reached    []int32 // nodes whose best was set
	stamps     int32
	fresh      []int32 // vertices that became outer and are to be scanned
	up, down   []int32

	leftOut  int // free vertices at their limit
	searches int
}

func newSolver(n int, edges []Edge, limit []int64) *solver {
	s := &solver{
		n: n, limit: limit,
		y: make([]int64, n), match: make([]int32, n), top: make([]int32, n), one: make([]int32, n),
	}
	for v := range n {
		s.match[v], s.top[v], s.one[v] = none, int32(v), int32(v)
	}
	for v := range n {
		s.addNode()
		s.base[v] = int32(v)
		s.leaves[v] = s.one[v : v+1 : v+1]
	}
	s.addEdges(edges)
	return s
}

func (s *solver) addNode() int32 {
	b := int32(len(s.parent))
	s.parent = append(s.parent, none)
	s.base = append(s.base, none)
	s.kids = append(s.kids, nil)
	s.links = append(s.links, nil)
	s.leaves = append(s.leaves, nil)
	s.z = append(s.z, 0)
	s.since = append(s.since, 0)
	s.label = append(s.label, outside)
	s.entry = append(s.entry, none)
	s.best = append(s.best, never)
	s.stamp = append(s.stamp, 0)
	return b
}

// addEdges appends edges and groups the halves by vertex anew. It leaves the
// duals as they are: repair makes them feasible again.
func (s *solver) addEdges(edges []Edge) {
	for _, e := range edges {
		s.end = append(s.end, int32(e.U), int32(e.V))
		s.w2 = append(s.w2, 2*e.Weight)
	}
	s.first = make([]int32, s.n+1)
	for _, v := range s.end {
		s.first[v+1]++
	}
	for v := range s.n {
		s.first[v+1] += s.first[v]
	}
	s.halfs = make([]int32, len(s.end))
	next := append([]int32(nil), s.first[:s.n]...)
	for h, v := range s.end {
		s.halfs[next[v]] = int32(h)
		next[v]++
	}
}

func (s *solver) of(v int32) []int32 { return s.halfs[s.first[v]:s.first[v+1]] }

// start sets duals that are feasible, as large as one pass over the vertices
// makes them, and matches along tight edges what is free at both ends.
func (s *solver) start() {
	for v := range int32(s.n) {
		s.y[v] = s.limit[v]
		for _, h := range s.of(v) {
			s.y[v] = min(s.y[v], s.w2[h>>1]/2)
		}
		if s.y[v] == never { // no edge and no way to be left out
			s.y[v] = 0
		}
	}
	for v := range int32(s.n) {
		if s.match[v] != none {
			continue
		}
		least := int64(never)
		if s.limit[v] != never {
			least = s.limit[v] - s.y[v]
		}
		take := int32(none)
		for _, h := range s.of(v) {
			u := s.end[h^1]
			slack := s.w2[h>>1] - s.y[v] - s.y[u]
			if slack < least || slack == least && s.match[u] == none {
				least, take = slack, none
				if s.match[u] == none {
					take = h
				}
			}
		}
		if least != never {
			s.y[v] += least
		}
		if take != none {
			s.match[v], s.match[s.end[take^1]] = take, take^1
		}
	}
}

// solve grows a tree from every vertex that is neither matched nor given up.
// It stops with errTooMany once more than allowed vertices had to be given up.
func (s *solver) solve(ctx context.Context, allowed int) error {
	s.leftOut = 0
	for v := range s.n {
		if s.match[v] == none && s.y[v] >= s.limit[v] {
			s.leftOut++
		}
	}
	for r := range int32(s.n) {
		if s.match[r] != none || s.y[r] >= s.limit[r] {
			continue
		}
		if err := s.search(ctx, r); err != nil {
			return err
		}
		if s.leftOut > allowed {
			return errTooMany
		}
	}
	if s.leftOut > allowed {
		return errTooMany
	}
	return nil
}

// search grows one alternating tree from the free vertex r and raises its
// duals until r can be matched or a vertex can be left out at its limit.
func (s *solver) search(ctx context.Context, r int32) error {
	s.searches++
	s.now, s.bound = 0, never
	s.events.clear()
	s.becomeOuter(s.top[r])
	s.scanFresh()
	defer s.rest()
	for count := 0; ; count++ {
		if count&1023 == 0 {
			if err := ctx.Err(); err != nil {
				return err
			}
		}
		e, ok := s.events.pop()
		if !ok {
			return errTooMany
		}
		s.now = e.time
		switch e.kind {
		case leave:
			s.augment(e.what, none)
			s.leftOut++
			return nil
		case open:
			if b := e.what; s.parent[b] == none && s.label[b] == inner && s.kids[b] != nil && s.zNow(b) == 0 {
				s.expand(b)
			}
		case meet:
			if s.meet(e.what) {
				return nil
			}
		}
		s.scanFresh()
	}
}

// meet handles half h, which leaves an outer vertex, when it may have become
// tight; it says whether the search has ended with a longer matching.
func (s *solver) meet(h int32) bool {
	u, v := s.end[h], s.end[h^1]
	a, b := s.top[u], s.top[v]
	if a == b || s.label[b] == inner || s.w2[h>>1] != s.yNow(u)+s.yNow(v) {
		return false // overtaken by other events
	}
	if s.label[b] == outer {
		s.shrink(h, s.ancestor(a, b))
		return false
	}
	m := s.match[s.base[b]]
	if m == none {
		s.augment(u, h)
		s.makeBase(b, v)
		s.match[v] = h ^ 1
		if s.y[v] == s.limit[v] {
			s.leftOut--
		}
		return true
	}
	s.becomeInner(b, h)
	s.becomeOuter(s.top[s.end[m^1]])
	return false
}

// risen gives by how much the duals of vertices in outermost node b have grown
// since they were up to date.
func (s *solver) risen(b int32) int64 {
	switch s.label[b] {
	case outer:
		return s.now - s.since[b]
	case inner:
		return s.since[b] - s.now
	}
	return 0
}

func (s *solver) yNow(v int32) int64 { return s.y[v] + s.risen(s.top[v]) }

func (s *solver) zNow(b int32) int64 { return s.z[b] + 2*s.risen(b) }

// settle brings the duals of outermost node b and of its vertices up to date.
func (s *solver) settle(b int32) {
	if d := s.risen(b); d != 0 {
		for _, v := range s.leaves[b] {
			s.y[v] += d
		}
		s.z[b] += 2 * d
	}
	s.since[b] = s.now
}

// becomeOuter labels outermost node b, whose duals are up to date.
func (s *solver) becomeOuter(b int32) {
	s.label[b], s.since[b] = outer, s.now
	s.touched = append(s.touched, b)
	s.fresh = append(s.fresh, s.leaves[b]...)
}

// becomeInner labels outermost node b, reached by half h; its duals are up to date.
func (s *solver) becomeInner(b, h int32) {
	s.label[b], s.since[b], s.entry[b] = inner, s.now, h
	s.touched = append(s.touched, b)
	if s.kids[b] != nil {
		if t := s.now + s.z[b]/2; t < s.bound {
			s.events.push(event{t, open, b})
		}
	}
}

// scanFresh looks at all edges of the vertices that became outer.
func (s *solver) scanFresh() {
	for _, v := range s.fresh {
		s.scan(v)
	}
	s.fresh = s.fresh[:0]
}

func (s *solver) scan(v int32) {
	y := s.yNow(v)
	if s.limit[v] != never {
		if t := s.now + s.limit[v] - y; t < s.bound {
			s.bound = t
			s.events.push(event{t, leave, v})
		}
	}
	home := s.top[v]
	for _, h := range s.of(v) {
		u := s.end[h^1]
		b := s.top[u]
		if b == home {
			continue
		}
		switch s.label[b] {
		case outer:
			slack := s.w2[h>>1] - y - s.y[u] - s.now + s.since[b]
			if t := s.now + slack/2; t < s.bound {
				s.events.push(event{t, meet, h})
			}
		case outside:
			s.mayReach(b, h, s.now+s.w2[h>>1]-y-s.y[u])
		}
	}
}

// mayReach notes that half h reaches outside node b at time t. Only the
// earliest matters: when b opens again its edges are looked at anew.
func (s *solver) mayReach(b, h int32, t int64) {
	if t >= s.bound || t >= s.best[b] {
		return
	}
	if s.best[b] == never {
		s.reached = append(s.reached, b)
	}
	s.best[b] = t
	if s.match[s.base[b]] == none {
		s.bound = t // the search ends here, if not before
	}
	s.events.push(event{t, meet, h})
}

// rest takes the labels off at the end of a search, brings all duals up to
// date and opens blossoms that are no longer needed.
func (s *solver) rest() {
	for _, b := range s.touched {
		if s.parent[b] != none || s.label[b] == outside {
			continue
		}
		s.settle(b)
		s.label[b] = outside
		s.dissolve(b)
	}
	for _, b := range s.reached {
		s.best[b] = never
	}
	s.touched, s.reached, s.fresh = s.touched[:0], s.reached[:0], s.fresh[:0]
}

// dissolve opens outermost node b and what is in it while the dual is 0.
func (s *solver) dissolve(b int32) {
	if s.kids[b] == nil || s.z[b] != 0 {
		return
	}
	kids := s.kids[b]
	s.release(b)
	for _, k := range kids {
		s.dissolve(k)
	}
}

// release makes the kids of outermost blossom b outermost and forgets b.
func (s *solver) release(b int32) {
	for _, k := range s.kids[b] {
		s.parent[k], s.label[k] = none, outside
		for _, v := range s.leaves[k] {
			s.top[v] = k
		}
	}
	s.kids[b], s.links[b], s.leaves[b] = nil, nil, s.leaves[b][:0]
	s.label[b], s.z[b] = outside, 0
	s.spare = append(s.spare, b)
}
