package blossom

import "slices"

// ancestor gives the last common outer node on the ways of outer nodes a and b
// to the root of the tree.
func (s *solver) ancestor(a, b int32) int32 {
	s.stamps++
	for {
		if a != none {
			if s.stamp[a] == s.stamps {
				return a
			}
			s.stamp[a] = s.stamps
			a = s.above(a)
		}
		a, b = b, a
	}
}

// above gives the outer node two steps nearer to the root, or none at the root.
func (s *solver) above(a int32) int32 {
	m := s.match[s.base[a]]
	if m == none {
		return none
	}
	return s.top[s.end[s.entry[s.top[s.end[m^1]]]]]
}

// shrink joins the odd cycle that tight half h closes in the tree, and whose
// node nearest to the root is head, into a new outer blossom.
func (s *solver) shrink(h, head int32) {
	var b int32
	if k := len(s.spare); k > 0 {
		b, s.spare = s.spare[k-1], s.spare[:k-1]
	} else {
		b = s.addNode()
	}
	// From the end of h up to the head, then from its start.
	kids, links := s.climb(s.up[:0], s.down[:0], s.top[s.end[h^1]], head)
	n := len(kids)
	kids, links = s.climb(kids, links, s.top[s.end[h]], head)
	s.up, s.down = kids, links
	cycle := make([]int32, 0, len(kids)+1)
	halves := make([]int32, 0, len(kids)+1)
	cycle = append(cycle, head)
	for i := len(kids) - 1; i >= n; i-- {
		cycle = append(cycle, kids[i])
		halves = append(halves, links[i]^1)
	}
	halves = append(halves, h)
	cycle = append(cycle, kids[:n]...)
	halves = append(halves, links[:n]...)

	s.kids[b], s.links[b] = cycle, halves
	s.base[b], s.parent[b] = s.base[head], none
	s.z[b], s.since[b], s.label[b] = 0, s.now, outer
	s.best[b] = never
	s.touched = append(s.touched, b)
	leaves := s.leaves[b][:0]
	for _, k := range cycle {
		leaves = append(leaves, s.leaves[k]...)
		if s.label[k] == inner {
			s.fresh = append(s.fresh, s.leaves[k]...)
		}
		s.settle(k)
		s.parent[k], s.label[k] = b, outside
	}
	for _, v := range leaves {
		s.top[v] = b
	}
	s.leaves[b] = leaves
}

// climb appends the nodes from outer node a up to, but without, head, and for
// each the half that leads from it to the next.
func (s *solver) climb(kids, links []int32, a, head int32) ([]int32, []int32) {
	for a != head {
		m := s.match[s.base[a]]
		t := s.top[s.end[m^1]]
		f := s.entry[t]
		kids = append(kids, a, t)
		links = append(links, m, f^1)
		a = s.top[s.end[f]]
	}
	return kids, links
}

// expand opens inner blossom b, whose dual has fallen to 0: the part of its
// cycle between the vertex reached from the tree and the base stays in the
// tree, the rest leaves it.
func (s *solver) expand(b int32) {
	s.settle(b)
	kids, links, enter := s.kids[b], s.links[b], s.entry[b]
	i := s.kidWith(b, s.end[enter^1])
	s.release(b)
	for _, k := range kids {
		s.best[k] = never
	}
	step := -1
	if i%2 == 1 {
		step = 1
	}
	n := len(kids)
	s.becomeInner(kids[i], enter)
	for i != 0 {
		mid, far := (i+step+n)%n, (i+2*step+n)%n
		half := links[mid]
		if step < 0 {
			half = links[far] ^ 1
		}
		s.becomeOuter(kids[mid])
		s.becomeInner(kids[far], half)
		i = far
	}
	for _, k := range kids {
		if s.label[k] != outside {
			continue
		}
		for _, v := range s.leaves[k] {
			for _, h := range s.of(v) {
				if u := s.end[h^1]; s.label[s.top[u]] == outer {
					s.mayReach(k, h^1, s.now+s.w2[h>>1]-s.yNow(u)-s.y[v])
				}
			}
		}
	}
}

// kidWith gives the place of vertex v in the cycle of blossom b.
func (s *solver) kidWith(b, v int32) int {
	k := v
	for s.parent[k] != b {
		k = s.parent[k]
	}
	return slices.Index(s.kids[b], k)
}

// augment matches outer vertex v by half h, or leaves it out if h is none, and
// changes matched for unmatched edges on its way to the root.
func (s *solver) augment(v, h int32) {
	for {
		b := s.top[v]
		m := s.match[s.base[b]]
		s.makeBase(b, v)
		s.match[v] = h
		if m == none {
			return
		}
		t := s.top[s.end[m^1]]
		f := s.entry[t]
		x := s.end[f^1]
		s.makeBase(t, x)
		s.match[x] = f ^ 1
		v, h = s.end[f], f
	}
}

// makeBase matches the vertices of node b among themselves so that v remains.
func (s *solver) makeBase(b, v int32) {
	if s.base[b] == v {
		return
	}
	i := s.kidWith(b, v)
	kids, links := s.kids[b], s.links[b]
	s.makeBase(kids[i], v)
	from, to := 0, i // pairs on the even side of the cycle
	if i%2 == 1 {
		from, to = i+1, len(kids)
	}
	for j := from; j < to; j += 2 {
		h := links[j]
		u, w := s.end[h], s.end[h^1]
		s.makeBase(kids[j], u)
		s.makeBase(kids[(j+1)%len(kids)], w)
		s.match[u], s.match[w] = h, h^1
	}
	rotate(kids, i)
	rotate(links, i)
	s.base[b] = v
}

// rotate brings element i to the front, keeping the cycle.
func rotate(a []int32, i int) {
	slices.Reverse(a[:i])
	slices.Reverse(a[i:])
	slices.Reverse(a)
}
