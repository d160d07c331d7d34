package blossom

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// brute tries all matchings, and gives by number of vertices left out the least
// that joining the weights of the pairs comes to: never where there is no such
// matching, MinInt64 for no pairs.
func brute(n int, edges []Edge, join func(a, b int64) int64) []int64 {
	w := make([][]int64, n)
	for i := range w {
		w[i] = make([]int64, n)
		for j := range w[i] {
			w[i][j] = never
		}
	}
	for _, e := range edges {
		if e.Weight < w[e.U][e.V] {
			w[e.U][e.V], w[e.V][e.U] = e.Weight, e.Weight
		}
	}
	// best[set][left]: vertices of set are decided, the lowest undecided is next.
	size := 1 << n
	best := make([][]int64, size)
	for set := range best {
		best[set] = make([]int64, n+1)
		for k := range best[set] {
			best[set][k] = never
		}
	}
	best[0][0] = math.MinInt64
	for set := range size - 1 {
		v := 0
		for set>>v&1 == 1 {
			v++
		}
		for left, b := range best[set] {
			if b == never {
				continue
			}
			if left < n {
				to := set | 1<<v
				best[to][left+1] = min(best[to][left+1], b)
			}
			for u := v + 1; u < n; u++ {
				if set>>u&1 == 1 || w[v][u] == never {
					continue
				}
				c := w[v][u]
				if b != math.MinInt64 {
					c = join(b, c)
				}
				to := set | 1<<v | 1<<u
				best[to][left] = min(best[to][left], c)
			}
		}
	}
	return best[size-1]
}

func plus(a, b int64) int64 { return a + b }
func most(a, b int64) int64 { return max(a, b) }

// drawn makes a graph of at most n vertices: dense or sparse, weights with many
// ties or few, negative or not.
func drawn(rng *rand.Rand, most int) (int, []Edge) {
	n := 1 + rng.IntN(most)
	share := []float64{1, 0.7, 0.4, 0.2}[rng.IntN(4)]
	span := []int64{1, 3, 10, 100, 1_000_000}[rng.IntN(5)]
	var low int64
	if rng.IntN(3) == 0 {
		low = -span / 2
	}
	var edges []Edge
	for i := range n {
		for j := range i {
			if rng.Float64() < share {
				edges = append(edges, Edge{i, j, low + rng.Int64N(span+1)})
			}
		}
	}
	rng.Shuffle(len(edges), func(a, b int) { edges[a], edges[b] = edges[b], edges[a] })
	return n, edges
}

func TestAgainstAllMatchings(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 7))
	ctx := context.Background()
	perfect, odd := 0, 0
	for trial := range 6000 {
		size := 8
		if trial%20 == 0 {
			size = 14
		} else if trial%4 == 0 {
			size = 11
		}
		n, edges := drawn(rng, size)
		want := brute(n, edges, plus)
		fewest := 0
		for want[fewest] == never {
			fewest++
		}
		least := want[fewest]
		if least == math.MinInt64 {
			least = 0
		}
		r, err := Largest(ctx, n, edges)
		if err != nil {
			t.Fatal(err)
		}
		if r.LeftOut != fewest || r.Total != least {
			t.Fatalf("trial %d: %d left out, total %d; want %d, %d\n%d %v", trial, r.LeftOut, r.Total, fewest, least, n, edges)
		}
		if err := Verify(n, Along(edges), nil, r); err != nil {
			t.Fatalf("trial %d: %v\n%d %v", trial, err, n, edges)
		}
		p, err := Perfect(ctx, n, edges)
		if (err == nil) != (fewest == 0) {
			t.Fatalf("trial %d: perfect: %v, %d left out", trial, err, fewest)
		}
		if err == nil {
			perfect++
			if p.Total != least {
				t.Fatalf("trial %d: perfect: total %d, want %d", trial, p.Total, least)
			}
			if err := Verify(n, Along(edges), nil, p); err != nil {
				t.Fatalf("trial %d: perfect: %v", trial, err)
			}
		}
		odd += len(r.Blossoms)
	}
	if odd < 1000 {
		t.Errorf("%d blossoms only", odd)
	}
	if perfect < 1000 {
		t.Errorf("%d perfect matchings only", perfect)
	}
}

// TestLeaveOutAgainstAllMatchings: for brute force the costs go into the
// weights. With all vertices left out as the start, pairing u and v comes to
// w − c_u − c_v.
func TestLeaveOutAgainstAllMatchings(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 7))
	bound := 0
	for trial := range 4000 {
		n, edges := drawn(rng, 9)
		span := int64(1)
		for _, e := range edges {
			span = max(span, e.Weight)
		}
		cost := make([]int64, n)
		var all int64
		must := make([]bool, n)
		for v := range cost {
			cost[v] = rng.Int64N(2*span) - span/3
			if rng.IntN(6) == 0 {
				must[v] = true
				cost[v] = 1 << 40 // for brute force: more than all else together
			}
			all += cost[v]
		}
		moved := make([]Edge, len(edges))
		for i, e := range edges {
			moved[i] = Edge{e.U, e.V, e.Weight - cost[e.U] - cost[e.V]}
		}
		want := int64(math.MaxInt64)
		for _, w := range brute(n, moved, plus) {
			switch w {
			case never:
			case math.MinInt64:
				want = min(want, all)
			default:
				want = min(want, all+w)
			}
		}
		for v := range must {
			if must[v] {
				cost[v] = Never
			}
		}
		r, err := LeaveOut(context.Background(), n, edges, cost)
		if want > 1<<39 {
			if !errors.Is(err, ErrNoPerfect) {
				t.Fatalf("trial %d: %v although a vertex that must be in cannot", trial, err)
			}
			bound++
			continue
		}
		if err != nil {
			t.Fatalf("trial %d: %v", trial, err)
		}
		got := r.Total
		for v, m := range r.Mate {
			if m < 0 {
				got += cost[v]
			}
		}
		if got != want {
			t.Fatalf("trial %d: %d, want %d\n%d %v %v", trial, got, want, n, edges, cost)
		}
		if err := Verify(n, Along(edges), cost, r); err != nil {
			t.Fatalf("trial %d: %v", trial, err)
		}
	}
	if bound < 100 {
		t.Errorf("%d impossible graphs only", bound)
	}
}

func TestBottleneckAgainstAllMatchings(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 7))
	for trial := range 3000 {
		size := 8
		if trial%10 == 0 {
			size = 13
		}
		n, edges := drawn(rng, size)
		worst := brute(n, edges, most)
		fewest := 0
		for worst[fewest] == never {
			fewest++
		}
		r, err := Bottleneck(context.Background(), n, edges)
		if err != nil {
			t.Fatal(err)
		}
		want, total := worst[fewest], int64(0)
		if want == math.MinInt64 {
			want = 0
		} else {
			total = brute(n, upTo(edges, want), plus)[fewest]
		}
		if r.LeftOut != fewest || r.Worst != want || r.Total != total {
			t.Fatalf("trial %d: %d left out, worst %d, total %d; want %d, %d, %d\n%d %v", trial, r.LeftOut, r.Worst, r.Total, fewest, want, total, n, edges)
		}
		if err := VerifyBottleneck(n, Along(edges), fewest, r); err != nil {
			t.Fatalf("trial %d: %v\n%d %v", trial, err, n, edges)
		}
	}
}
