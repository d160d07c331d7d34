package blossom

import (
	"context"
	"errors"
	"math/rand/v2"
	"slices"
	"testing"
)

func (r *Result) clone() *Result {
	c := *r
	c.Mate, c.Dual = slices.Clone(r.Mate), slices.Clone(r.Dual)
	c.Blossoms, c.Line = slices.Clone(r.Blossoms), slices.Clone(r.Line)
	return &c
}

// TestVerifyRefuses changes one thing of a good result at a time.
func TestVerifyRefuses(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 1))
	ctx := context.Background()
	n := 60
	c := cloud(rng, "uniform", "max", n, 2)
	good, err := c.Match(ctx)
	if err != nil {
		t.Fatal(err)
	}
	pairs := c.Pairs()
	if err := Verify(n, pairs, nil, good); err != nil {
		t.Fatal(err)
	}
	if len(good.Blossoms) < 3 {
		t.Fatalf("%d blossoms only", len(good.Blossoms))
	}
	refuse := func(name string, change func(r *Result)) {
		t.Helper()
		r := good.clone()
		change(r)
		if err := Verify(n, pairs, nil, r); !errors.Is(err, ErrProof) {
			t.Errorf("%s: %v", name, err)
		}
	}
	// swapped exchanges partners of two pairs and says the true total.
	swapped := func(r *Result, a, b int) {
		x, y := r.Mate[a], r.Mate[b]
		r.Mate[a], r.Mate[b], r.Mate[x], r.Mate[y] = b, a, y, x
		r.Total, r.Worst = 0, 0
		for v, m := range r.Mate {
			if m > v {
				r.Total += c.Distance(v, m)
				r.Worst = max(r.Worst, c.Distance(v, m))
			}
		}
	}
	for trial := range n {
		v := trial
		refuse("other pairs", func(r *Result) {
			b := rng.IntN(n)
			for b == v || b == r.Mate[v] {
				b = rng.IntN(n)
			}
			swapped(r, v, b)
			if r.Total == good.Total {
				r.Total++ // as good: make it wrong
			}
		})
		refuse("dual up", func(r *Result) { r.Dual[v]++ })
		refuse("dual down", func(r *Result) { r.Dual[v]-- })
		refuse("dual moved along a pair", func(r *Result) {
			r.Dual[v] += 1_000_000
			r.Dual[r.Mate[v]] -= 1_000_000
		})
		refuse("mate lost", func(r *Result) { r.Mate[v] = -1 })
		refuse("pair given up", func(r *Result) {
			m := r.Mate[v]
			r.Mate[v], r.Mate[m] = -1, -1
			r.LeftOut = 2
			r.Total -= c.Distance(v, m)
		})
		refuse("mate of another", func(r *Result) { r.Mate[v] = (r.Mate[v] + 1) % n })
		refuse("mate out of range", func(r *Result) { r.Mate[v] = n })
	}
	for b := range good.Blossoms {
		refuse("blossom dual up", func(r *Result) { r.Blossoms[b].Dual += 2 })
		refuse("blossom dual down", func(r *Result) { r.Blossoms[b].Dual -= 2 })
		refuse("blossom dual below 0", func(r *Result) { r.Blossoms[b].Dual = -2 })
		refuse("blossom even", func(r *Result) { r.Blossoms[b].To-- })
		refuse("blossom smaller", func(r *Result) { r.Blossoms[b].To = r.Blossoms[b].From + 1 })
		refuse("blossom moved", func(r *Result) { r.Blossoms[b].From++; r.Blossoms[b].To++ })
		refuse("blossom turned round", func(r *Result) { r.Blossoms[b].From, r.Blossoms[b].To = r.Blossoms[b].To, r.Blossoms[b].From })
		refuse("blossom twice", func(r *Result) { r.Blossoms = append(r.Blossoms, r.Blossoms[b]) })
		refuse("blossom gone", func(r *Result) { r.Blossoms = slices.Delete(r.Blossoms, b, b+1) })
		refuse("blossom out of range", func(r *Result) { r.Blossoms[b].From = -1; r.Blossoms[b].To-- })
		refuse("blossom dual beyond", func(r *Result) { r.Blossoms[b].Dual = 1 << 62 })
	}
	refuse("total", func(r *Result) { r.Total-- })
	refuse("worst pair", func(r *Result) { r.Worst++ })
	refuse("left out", func(r *Result) { r.LeftOut = 2 })
	refuse("duals short", func(r *Result) { r.Dual = r.Dual[1:] })
	refuse("line short", func(r *Result) { r.Line = r.Line[1:] })
	refuse("vertex twice in line", func(r *Result) { r.Line[0] = r.Line[1] })
	refuse("vertex out of line", func(r *Result) { r.Line[0] = n })
	refuse("mates short", func(r *Result) { r.Mate = r.Mate[1:] })
	refuse("dual beyond", func(r *Result) { r.Dual[0] = -1 << 62 })

	// A pair that the solver was not told of, better than what it found.
	v := slices.IndexFunc(good.Mate, func(m int) bool { return m >= 0 && c.Distance(m, good.Mate[m]) > 1000 })
	u := (v + 1) % n
	if u == good.Mate[v] {
		u = (v + 2) % n
	}
	more := func(yield func(i, j int, w int64) bool) {
		pairs(yield)
		yield(v, u, -1_000_000_000)
	}
	if err := Verify(n, more, nil, good); !errors.Is(err, ErrProof) {
		t.Errorf("with a lighter pair: %v", err)
	}
}

// TestVerifyRefusesFewPairs: a matching that is good at its price of leaving
// out, but has not as many pairs as can be.
func TestVerifyRefusesFewPairs(t *testing.T) {
	path := []Edge{{0, 1, 50}, {1, 2, 11}, {2, 3, 50}}
	cost := constant(4, int64(10))
	r, err := LeaveOut(context.Background(), 4, path, cost)
	if err != nil {
		t.Fatal(err)
	}
	if err := Verify(4, Along(path), cost, r); err != nil || r.LeftOut != 2 {
		t.Fatalf("%v, %d left out", err, r.LeftOut)
	}
	r.Penalty = 20
	if err := Verify(4, Along(path), nil, r); !errors.Is(err, ErrProof) {
		t.Errorf("two left out of four that can all be paired: %v", err)
	}
	cost[0] = Never
	if err := Verify(4, Along(path), cost, r); !errors.Is(err, ErrProof) {
		t.Errorf("vertex left out that must not be: %v", err)
	}
	cost[0] = 9
	if err := Verify(4, Along(path), cost, r); !errors.Is(err, ErrProof) {
		t.Errorf("dual above the cost: %v", err)
	}
}

func TestVerifyBottleneckRefuses(t *testing.T) {
	rng := rand.New(rand.NewPCG(10, 1))
	ctx := context.Background()
	n := 50
	var c *Cloud
	var good, least *Result
	for try := 0; try == 0 || least.Worst == good.Worst; try++ {
		if try == 100 {
			t.Fatal("both aims have the same worst pair: nothing to tell apart")
		}
		c = cloud(rng, "uniform", "L2", n, 2)
		var err error
		if good, err = c.Bottleneck(ctx); err != nil {
			t.Fatal(err)
		}
		if least, err = c.Match(ctx); err != nil {
			t.Fatal(err)
		}
	}
	if err := VerifyBottleneck(n, c.Pairs(), 0, good); err != nil {
		t.Fatal(err)
	}
	least.Witness = good.Witness
	if err := VerifyBottleneck(n, c.Pairs(), 0, least); !errors.Is(err, ErrProof) {
		t.Errorf("least total: %v", err)
	}
	for v := range n {
		r := good.clone()
		r.Witness = good.Witness.clone()
		r.Witness.Dual[v] += 2
		if err := VerifyBottleneck(n, c.Pairs(), 0, r); !errors.Is(err, ErrProof) {
			t.Errorf("witness with dual %d up: %v", v, err)
		}
	}
	r := good.clone()
	r.Witness = &Result{Dual: make([]int64, n), Line: good.Line, Penalty: 2}
	if err := VerifyBottleneck(n, c.Pairs(), 0, r); !errors.Is(err, ErrProof) {
		t.Errorf("empty witness: %v", err)
	}
	r.Witness = &Result{Dual: constant(n, int64(-4)), Line: good.Line, Penalty: -2}
	if err := VerifyBottleneck(n, c.Pairs(), 0, r); !errors.Is(err, ErrProof) {
		t.Errorf("witness at a price below 0: %v", err)
	}
	r.Witness = nil
	if err := VerifyBottleneck(n, c.Pairs(), 0, r); !errors.Is(err, ErrProof) {
		t.Errorf("no witness: %v", err)
	}
}
