package blossom

// repair makes the duals feasible again after edges were added, those from edge
// number from on, and keeps what it can of the matching: around an edge with
// negative slack one end leaves its blossoms and its pair, and its dual is
// lowered. Freed vertices wait for the next solve.
func (s *solver) repair(from int) {
	for e := from; e < len(s.w2); e++ {
		if s.slack(int32(e)) >= 0 {
			continue
		}
		u, v := s.end[2*e], s.end[2*e+1]
		if s.costly(u) > s.costly(v) {
			u = v
		}
		s.loosen(u)
		if k := s.slack(int32(e)); k < 0 {
			s.part(u)
			s.y[u] += k
		}
	}
}

// costly ranks a vertex by how much has to be undone to lower its dual.
func (s *solver) costly(v int32) int {
	switch {
	case s.top[v] != v:
		return 2
	case s.match[v] != none:
		return 1
	}
	return 0
}

// loosen opens all blossoms around v. The dual of each goes to the vertices in
// it, which keeps every edge inside as it was; the edge by which the blossom's
// base was matched is tight no more.
func (s *solver) loosen(v int32) {
	for s.top[v] != v {
		b := s.top[v]
		if s.z[b] > 0 {
			for _, u := range s.leaves[b] {
				s.y[u] -= s.z[b] / 2
			}
			s.part(s.base[b])
		}
		s.release(b)
	}
}

// part undoes the pair of v, if it has one.
func (s *solver) part(v int32) {
	if h := s.match[v]; h != none {
		s.match[v], s.match[s.end[h^1]] = none, none
	}
}

// slack gives the slack of edge e between two searches, wherever its ends are.
func (s *solver) slack(e int32) int64 {
	u, v := s.end[2*e], s.end[2*e+1]
	return s.w2[e] - s.y[u] - s.y[v] + s.around(u, v)
}

// around gives the sum of the duals of the blossoms with both u and v.
func (s *solver) around(u, v int32) int64 {
	if s.top[u] != s.top[v] {
		return 0
	}
	s.stamps++
	for b := s.parent[u]; b != none; b = s.parent[b] {
		s.stamp[b] = s.stamps
	}
	var sum int64
	for b := s.parent[v]; b != none; b = s.parent[b] {
		if s.stamp[b] == s.stamps {
			sum += s.z[b]
		}
	}
	return sum
}
