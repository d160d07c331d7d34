package blossom

import (
	"context"
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
)

// heaviest gives the matching of greatest total weight in the way that the
// package comment names, and its total.
func heaviest(t *testing.T, n int, edges []Edge) (*Result, int64) {
	t.Helper()
	var k int64
	for _, e := range edges {
		k = max(k, e.Weight)
	}
	k += k % 2
	turned := make([]Edge, len(edges))
	for i, e := range edges {
		turned[i] = Edge{e.U, e.V, k - e.Weight}
	}
	cost := constant(n, k/2)
	r, err := LeaveOut(context.Background(), n, turned, cost)
	if err != nil {
		t.Fatal(err)
	}
	if err := Verify(n, Along(turned), cost, r); err != nil {
		t.Fatal(err)
	}
	return r, k*int64((n-r.LeftOut)/2) - r.Total
}

// heaviestOfMost gives the matching of greatest total weight among those with
// the greatest number of pairs, and its total.
func heaviestOfMost(t *testing.T, n int, edges []Edge) (*Result, int64) {
	t.Helper()
	turned := make([]Edge, len(edges))
	for i, e := range edges {
		turned[i] = Edge{e.U, e.V, -e.Weight}
	}
	r, err := Largest(context.Background(), n, turned)
	if err != nil {
		t.Fatal(err)
	}
	if err := Verify(n, Along(turned), nil, r); err != nil {
		t.Fatal(err)
	}
	return r, -r.Total
}

// line gives all pairs of points on a line, in thousandths.
func line(x ...float64) []Edge {
	var edges []Edge
	for i := range x {
		for j := range i {
			edges = append(edges, Edge{i, j, int64(math.Round(1000 * math.Abs(x[i]-x[j])))})
		}
	}
	return edges
}

// TestPublishedTiny: the path is a test case published with several routines for
// matchings, from memory; the values on a line were worked out by hand. Taking
// the nearest pair first would come to 3.85 for the first line.
func TestPublishedTiny(t *testing.T) {
	path := []Edge{{0, 1, 5}, {1, 2, 11}, {2, 3, 5}}
	if r, w := heaviest(t, 4, path); w != 11 || r.Mate[1] != 2 || r.LeftOut != 2 {
		t.Errorf("path: heaviest %d, mates %v; want 11 by the edge in the middle", w, r.Mate)
	}
	if _, w := heaviestOfMost(t, 4, path); w != 10 {
		t.Errorf("path: heaviest with all in pairs %d, want 10", w)
	}
	for _, c := range []struct {
		edges []Edge
		want  int64
	}{
		{line(0, 1, 1.9, 2.95), 2050},
		{line(1, 2, 4, 7), 4000},
	} {
		r, err := Perfect(context.Background(), 4, c.edges)
		if err != nil || r.Total != c.want {
			t.Errorf("total %v, %v; want %d", r, err, c.want)
		}
		b, err := Bottleneck(context.Background(), 4, c.edges)
		if err != nil || b.Total != c.want { // on a line the sorted pairs serve both aims
			t.Errorf("worst pair: %v, %v; want total %d", b, err, c.want)
		}
	}
}

// TestPublishedBlossoms has the graphs by which routines for general matchings
// are commonly tested, from memory: vertices from 1, greatest total weight, and
// the mates that give it. Each makes a blossom serve in another way. That the
// totals are the greatest is checked against all matchings as well.
func TestPublishedBlossoms(t *testing.T) {
	for _, c := range []struct {
		name  string
		edges []Edge
		mates []int
	}{
		{"outer, augmented through", []Edge{{1, 2, 8}, {1, 3, 9}, {2, 3, 10}, {3, 4, 7}}, []int{2, 1, 4, 3}},
		{"outer, augmented through, longer", []Edge{{1, 2, 8}, {1, 3, 9}, {2, 3, 10}, {3, 4, 7}, {1, 6, 5}, {4, 5, 6}}, []int{6, 3, 2, 5, 4, 1}},
		{"outer, then inner", []Edge{{1, 2, 9}, {1, 3, 8}, {2, 3, 10}, {1, 4, 5}, {4, 5, 4}, {1, 6, 3}}, []int{6, 3, 2, 5, 4, 1}},
		{"outer, then inner, at the far side", []Edge{{1, 2, 9}, {1, 3, 8}, {2, 3, 10}, {1, 4, 5}, {4, 5, 3}, {3, 6, 4}}, []int{2, 1, 6, 5, 4, 3}},
		{"nested, augmented through", []Edge{{1, 2, 9}, {1, 3, 9}, {2, 3, 10}, {2, 4, 8}, {3, 5, 8}, {4, 5, 10}, {5, 6, 6}}, []int{3, 4, 1, 2, 6, 5}},
		{"made outer, nested again", []Edge{{1, 2, 10}, {1, 7, 10}, {2, 3, 12}, {3, 4, 20}, {3, 5, 20}, {4, 5, 25}, {5, 6, 10}, {6, 7, 10}, {7, 8, 8}}, []int{2, 1, 4, 3, 6, 5, 8, 7}},
		{"nested, opened one in the other", []Edge{{1, 2, 8}, {1, 3, 8}, {2, 3, 10}, {2, 4, 12}, {3, 5, 12}, {4, 5, 14}, {4, 6, 12}, {5, 7, 12}, {6, 7, 14}, {7, 8, 12}}, []int{2, 1, 5, 6, 3, 4, 8, 7}},
		{"outer, then inner, opened", []Edge{{1, 2, 23}, {1, 5, 22}, {1, 6, 15}, {2, 3, 25}, {3, 4, 22}, {4, 5, 25}, {4, 8, 14}, {5, 7, 13}}, []int{6, 3, 2, 8, 7, 1, 5, 4}},
		{"nested, inner, opened", []Edge{{1, 2, 19}, {1, 3, 20}, {1, 8, 8}, {2, 3, 25}, {2, 4, 18}, {3, 5, 18}, {4, 5, 13}, {4, 7, 7}, {5, 6, 7}}, []int{8, 3, 2, 7, 6, 5, 4, 1}},
		{"opened with two ways out", []Edge{{1, 2, 45}, {1, 5, 45}, {2, 3, 50}, {3, 4, 45}, {4, 5, 50}, {1, 6, 30}, {3, 9, 35}, {4, 8, 35}, {5, 7, 26}, {9, 10, 5}}, []int{6, 3, 2, 8, 7, 1, 5, 4, 10, 9}},
		{"the same, other way", []Edge{{1, 2, 45}, {1, 5, 45}, {2, 3, 50}, {3, 4, 45}, {4, 5, 50}, {1, 6, 30}, {3, 9, 35}, {4, 8, 26}, {5, 7, 40}, {9, 10, 5}}, []int{6, 3, 2, 8, 7, 1, 5, 4, 10, 9}},
		{"least slack on the way out", []Edge{{1, 2, 45}, {1, 5, 45}, {2, 3, 50}, {3, 4, 45}, {4, 5, 50}, {1, 6, 30}, {3, 9, 35}, {4, 8, 28}, {5, 7, 26}, {9, 10, 5}}, []int{6, 3, 2, 8, 7, 1, 5, 4, 10, 9}},
		{"nested, opened, inner inside", []Edge{{1, 2, 45}, {1, 7, 45}, {2, 3, 50}, {3, 4, 45}, {4, 5, 95}, {4, 6, 94}, {5, 6, 94}, {6, 7, 50}, {1, 8, 30}, {3, 11, 35}, {5, 9, 36}, {7, 10, 26}, {11, 12, 5}}, []int{8, 3, 2, 6, 9, 4, 10, 1, 5, 7, 12, 11}},
		{"nested, relabelled and opened", []Edge{{1, 2, 40}, {1, 3, 40}, {2, 3, 60}, {2, 4, 55}, {3, 5, 55}, {4, 5, 50}, {1, 8, 15}, {5, 7, 30}, {7, 6, 10}, {8, 10, 10}, {4, 9, 30}}, []int{2, 1, 5, 9, 3, 7, 6, 10, 4, 8}},
	} {
		n := len(c.mates)
		weight := make(map[[2]int]int64)
		var edges, lost []Edge
		for _, e := range c.edges {
			weight[[2]int{e.U, e.V}], weight[[2]int{e.V, e.U}] = e.Weight, e.Weight
			edges = append(edges, Edge{e.U - 1, e.V - 1, e.Weight})
			lost = append(lost, Edge{e.U - 1, e.V - 1, -e.Weight})
		}
		var want, all int64
		for v, m := range c.mates {
			if m > v+1 {
				want += weight[[2]int{v + 1, m}]
			}
		}
		for _, w := range brute(n, lost, plus) {
			if w != never && w != math.MinInt64 {
				all = max(all, -w)
			}
		}
		r, got := heaviest(t, n, edges)
		if got != want || got != all {
			t.Errorf("%s: total %d with mates %v, published %d, of all matchings %d", c.name, got, r.Mate, want, all)
		}
	}
}

// drawnAs draws the graph of a row of testdata/totals.csv, see totals.py there.
func drawnAs(seed uint64, n int, share, span uint64) []Edge {
	number := func() uint64 {
		seed = seed*6364136223846793005 + 1442695040888963407
		return seed >> 33
	}
	var edges []Edge
	for i := range n {
		for j := range i {
			if number()%1000 < share {
				edges = append(edges, Edge{i, j, int64(number() % span)})
			}
		}
	}
	return edges
}

// TestAgainstNetworkx: totals of graphs of 101 to 200 vertices by networkx,
// whose version and command stand in testdata/totals.csv.
func TestAgainstNetworkx(t *testing.T) {
	f, err := os.Open("testdata/totals.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	in := csv.NewReader(f)
	in.Comment = '#'
	rows, err := in.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) < 9 {
		t.Fatalf("%d rows only", len(rows))
	}
	for _, row := range rows[1:] {
		var x [8]int64
		for i := range x {
			if x[i], err = strconv.ParseInt(row[i], 10, 64); err != nil {
				t.Fatal(err)
			}
		}
		n := int(x[1])
		edges := drawnAs(uint64(x[0]), n, uint64(x[2]), uint64(x[3]))
		if _, w := heaviest(t, n, edges); w != x[4] {
			t.Errorf("graph %d: heaviest %d, want %d", x[0], w, x[4])
		}
		if r, w := heaviestOfMost(t, n, edges); w != x[6] || int64(n-r.LeftOut) != 2*x[5] {
			t.Errorf("graph %d: heaviest of most pairs %d with %d left out, want %d with %d pairs", x[0], w, r.LeftOut, x[6], x[5])
		}
		r, err := Largest(context.Background(), n, edges)
		if err != nil {
			t.Fatal(err)
		}
		if r.Total != x[7] || int64(n-r.LeftOut) != 2*x[5] {
			t.Errorf("graph %d: lightest of most pairs %d with %d left out, want %d with %d pairs", x[0], r.Total, r.LeftOut, x[7], x[5])
		}
		if err := Verify(n, Along(edges), nil, r); err != nil {
			t.Errorf("graph %d: %v", x[0], err)
		}
	}
}
