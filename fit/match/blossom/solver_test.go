package blossom

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// graphs draws graphs larger than brute force can take.
func graphs(t *rapid.T) (int, []Edge) {
	rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
	return drawn(rng, 60)
}

func TestProperties(t *testing.T) {
	ctx := context.Background()
	rapid.Check(t, func(t *rapid.T) {
		n, edges := graphs(t)
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "order"), 2))
		r, err := Largest(ctx, n, edges)
		if err != nil {
			t.Fatal(err)
		}
		if err := Verify(n, Along(edges), nil, r); err != nil {
			t.Fatal(err)
		}
		b, err := Bottleneck(ctx, n, edges)
		if err != nil {
			t.Fatal(err)
		}
		if err := VerifyBottleneck(n, Along(edges), r.LeftOut, b); err != nil {
			t.Fatal(err)
		}
		pairs := int64((n - r.LeftOut) / 2)

		// Other numbers for the vertices, another order of the edges, some twice.
		number := rng.Perm(n)
		other := make([]Edge, 0, len(edges))
		for _, e := range edges {
			other = append(other, Edge{number[e.V], number[e.U], e.Weight})
			if rng.IntN(8) == 0 {
				other = append(other, Edge{number[e.U], number[e.V], e.Weight + rng.Int64N(3)})
			}
		}
		rng.Shuffle(len(other), func(a, b int) { other[a], other[b] = other[b], other[a] })
		same := func(what string, edges []Edge, left int, total, worst int64) {
			q, err := Largest(ctx, n, edges)
			if err != nil || q.LeftOut != left || q.Total != total {
				t.Fatalf("%s: %v, %d left out, total %d; want %d, %d", what, err, q.LeftOut, q.Total, left, total)
			}
			c, err := Bottleneck(ctx, n, edges)
			if err != nil || c.LeftOut != left || c.Worst != worst {
				t.Fatalf("%s: %v, %d left out, worst %d; want %d, %d", what, err, c.LeftOut, c.Worst, left, worst)
			}
		}
		same("other numbers", other, r.LeftOut, r.Total, b.Worst)

		// All weights times a factor, and one more for each pair.
		moved := make([]Edge, len(edges))
		for i, e := range edges {
			moved[i] = Edge{e.U, e.V, 7*e.Weight + 13}
		}
		worst := 7*b.Worst + 13
		if pairs == 0 {
			worst = 0
		}
		same("scaled and moved", moved, r.LeftOut, 7*r.Total+13*pairs, worst)
	})
}

// TestRepair adds edges in several parts, as the driver for points does, and
// expects what a solver finds that had them all from the start.
func TestRepair(t *testing.T) {
	ctx := context.Background()
	repaired, opened := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		n, edges := graphs(t)
		want, err := Largest(ctx, n, edges)
		if err != nil {
			t.Fatal(err)
		}
		p := penalty(n, edges)
		s := newSolver(n, nil, constant(n, p))
		parts := 1 + rapid.IntRange(0, 5).Draw(t, "parts")
		for i := range parts {
			from := len(s.w2)
			s.addEdges(edges[len(edges)*i/parts : len(edges)*(i+1)/parts])
			if i == 0 {
				s.start()
			} else {
				before := len(s.spare)
				s.repair(from)
				repaired++
				opened += len(s.spare) - before
			}
			for e := range s.w2 {
				if s.slack(int32(e)) < 0 {
					t.Fatalf("edge %d has slack %d", e, s.slack(int32(e)))
				}
			}
			if err := s.solve(ctx, n); err != nil {
				t.Fatal(err)
			}
		}
		got := s.result(p)
		if got.LeftOut != want.LeftOut || got.Total != want.Total {
			t.Fatalf("%d left out, total %d; want %d, %d", got.LeftOut, got.Total, want.LeftOut, want.Total)
		}
		if err := Verify(n, Along(edges), nil, got); err != nil {
			t.Fatal(err)
		}
	})
	least := 100
	if testing.Short() {
		least = 20 // a fifth of the graphs is drawn
	}
	if repaired < least || opened < 30 {
		t.Errorf("%d repairs and %d blossoms opened by them only", repaired, opened)
	}
}

// TestNest: the sums of duals around two vertices by ranges and by climbing.
func TestNest(t *testing.T) {
	deep := 0
	rapid.Check(t, func(t *rapid.T) {
		n, edges := graphs(t)
		s := newSolver(n, edges, constant(n, penalty(n, edges)))
		s.start()
		if err := s.solve(context.Background(), n); err != nil {
			t.Fatal(err)
		}
		in := s.nest()
		for u := range int32(n) {
			for v := range u {
				if got, want := in.around(u, v), s.around(u, v); got != want {
					t.Fatalf("around %d and %d: %d, want %d", u, v, got, want)
				} else if want > 0 {
					deep++
				}
			}
		}
	})
	if deep < 1000 {
		t.Errorf("%d pairs inside blossoms only", deep)
	}
}

func TestRefusals(t *testing.T) {
	ctx := context.Background()
	for name, err := range map[string]error{
		"vertex":     second(Perfect(ctx, 2, []Edge{{0, 2, 1}})),
		"loop":       second(Largest(ctx, 2, []Edge{{1, 1, 1}})),
		"weight":     second(Bottleneck(ctx, 2, []Edge{{0, 1, math.MaxInt64 / 2}})),
		"low weight": second(Largest(ctx, 2, []Edge{{0, 1, math.MinInt64}})),
		"costs":      second(LeaveOut(ctx, 2, nil, []int64{1})),
		"cost":       second(LeaveOut(ctx, 1, nil, []int64{math.MinInt64})),
		"number":     second(Largest(ctx, -1, nil)),
		"not finite": second((&Cloud{At: [][]float64{{0}, {math.NaN()}}}).Match(ctx)),
		"ragged":     second((&Cloud{At: [][]float64{{0}, {1, 2}}}).Match(ctx)),
		"distance":   second((&Cloud{At: [][]float64{{0}, {1}}, Distance: func(int, int) int64 { return -1 }}).Match(ctx)),
		"few costs":  second((&Cloud{At: [][]float64{{0}, {1}}, Cost: []int64{1}, Distance: func(int, int) int64 { return 1 }}).Match(ctx)),
	} {
		if !errors.Is(err, ErrGraph) {
			t.Errorf("%s: %v", name, err)
		}
	}
	for name, err := range map[string]error{
		"odd":      second(Perfect(ctx, 3, []Edge{{0, 1, 1}, {1, 2, 1}})),
		"star":     second(Perfect(ctx, 4, []Edge{{0, 1, 1}, {0, 2, 1}, {0, 3, 1}})),
		"no edges": second(Perfect(ctx, 2, nil)),
		"must":     second(LeaveOut(ctx, 3, []Edge{{0, 1, 1}, {0, 2, 1}}, []int64{1, Never, Never})),
	} {
		if !errors.Is(err, ErrNoPerfect) {
			t.Errorf("%s: %v", name, err)
		}
	}
	// The greatest weights that are taken still come out exact.
	big := greatest(4)
	edges := []Edge{{0, 1, big}, {1, 2, -big}, {2, 3, big}, {0, 3, big - 1}, {0, 2, -big}, {1, 3, big}}
	r, err := Perfect(ctx, 4, edges)
	if err != nil || r.Total != -1 && r.Total != 0 {
		t.Fatalf("%v, %v", r, err)
	}
	if err := Verify(4, Along(edges), nil, r); err != nil {
		t.Error(err)
	}
}

func second(_ *Result, err error) error { return err }

// TestInterrupted: a time limit ends every aim with the error of the context,
// and what there is of a matching is one.
func TestInterrupted(t *testing.T) {
	c := cloud(rand.New(rand.NewPCG(8, 1)), "clusters", "L2", 3000, 2)
	for name, f := range map[string]func(context.Context) (*Result, error){"total": c.Match, "worst": c.Bottleneck} {
		for _, limit := range []time.Duration{0, 5 * time.Millisecond, 15 * time.Millisecond} {
			ctx, cancel := context.WithTimeout(context.Background(), limit)
			r, err := f(ctx)
			cancel()
			if err == nil {
				t.Logf("%s: done within %v", name, limit)
				continue
			}
			if !errors.Is(err, context.DeadlineExceeded) {
				t.Errorf("%s, %v: %v", name, limit, err)
			}
			if r != nil {
				if err := mates(3000, r); err != nil {
					t.Errorf("%s, %v: %v", name, limit, err)
				}
			}
		}
	}
}
