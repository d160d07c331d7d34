package blossom

import "math/bits"

// nest lines up the vertices so that every blossom is a range. It answers what
// the blossoms around two vertices, or around a vertex and the points of a
// cell, weigh together: between neighbours stands the sum of the duals of the
// blossoms with both, and the sum for two others is the least in between.
type nest struct {
	line  []int32
	pos   []int32 // by vertex: its place in the line
	sets  []Blossom
	least [][]int64 // at [k][i]: least of 2^k places from i on
}

func (s *solver) nest() *nest {
	t := &nest{line: make([]int32, 0, s.n), pos: make([]int32, s.n)}
	base := make([]int64, 0, s.n) // at i: what is around the vertices at i and i+1
	// lay lines up the vertices of b, which is in blossoms that weigh sum together.
	var lay func(b int32, sum int64)
	lay = func(b int32, sum int64) {
		from := len(t.line)
		if s.kids[b] == nil {
			t.pos[b] = int32(from)
			t.line, base = append(t.line, b), append(base, 0)
		}
		for _, k := range s.kids[b] {
			lay(k, sum+s.z[b])
		}
		base[len(base)-1] = sum // until it is known what comes next, and where
		if s.kids[b] != nil && s.z[b] > 0 {
			t.sets = append(t.sets, Blossom{from, len(t.line), s.z[b]})
		}
	}
	for v := range int32(s.n) {
		if b := s.top[v]; s.base[b] == v {
			lay(b, 0)
		}
	}
	t.least = append(t.least, base)
	for w := 1; 2*w < s.n; w *= 2 {
		last := t.least[len(t.least)-1]
		next := make([]int64, len(last)-w)
		for i := range next {
			next[i] = min(last[i], last[i+w])
		}
		t.least = append(t.least, next)
	}
	return t
}

// between gives the least sum for two neighbours from place a to place b, which
// is after a.
func (t *nest) between(a, b int32) int64 {
	k := bits.Len32(uint32(b-a)) - 1
	row := t.least[k]
	return min(row[a], row[b-1<<k])
}

// around gives the sum of the duals of the blossoms with both u and v.
func (t *nest) around(u, v int32) int64 {
	a, b := t.pos[u], t.pos[v]
	return t.between(min(a, b), max(a, b))
}
