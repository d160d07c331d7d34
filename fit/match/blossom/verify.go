package blossom

import (
	"cmp"
	"errors"
	"fmt"
	"math/big"
	"slices"
)

// ErrProof says that a result is not what it claims to be, or not shown to be.
var ErrProof = errors.New("matching not proved")

// Pairs calls yield for every two vertices i and j that may be paired, with
// their weight, and stops when yield says false. A pair may come more than once.
type Pairs func(yield func(i, j int, weight int64) bool)

// Along gives the pairs that edges join.
func Along(edges []Edge) Pairs {
	return func(yield func(i, j int, weight int64) bool) {
		for _, e := range edges {
			if !yield(e.U, e.V, e.Weight) {
				return
			}
		}
	}
}

// All gives all pairs of n points with their distance.
func All(n int, distance func(i, j int) int64) Pairs {
	return func(yield func(i, j int, weight int64) bool) {
		for i := range n {
			for j := i + 1; j < n; j++ {
				if !yield(i, j, distance(i, j)) {
					return
				}
			}
		}
	}
}

// UpTo gives those of the pairs that are no heavier than most.
func (p Pairs) UpTo(most int64) Pairs {
	return func(yield func(i, j int, weight int64) bool) {
		p(func(i, j int, w int64) bool { return w > most || yield(i, j, w) })
	}
}

// Verify proves r, or says what is wrong with it; it shares nothing with the
// solver but the numbers in r. The proof is weak duality of linear programming:
// for odd sets B with duals z >= 0 and vertex duals y, all doubled, such that
//
//	y_i + y_j − Σ z_B over the sets with both i and j <= 2 weight(i, j)
//
// for every pair, and y_v <= 2 cost_v where v may be left out, no matching has
// a doubled cost below Σ y − Σ z_B (|B| − 1)/2, and r has exactly that.
//
// With costs, r is proved to have the least sum of weights and costs. Without
// (nil), it is proved to have as many pairs as can be and the least total among
// those: either no more than n mod 2 vertices are left out, or r.Penalty is so
// high that one pair more would have paid. Errors wrap ErrProof.
//
// For a result of Bottleneck see VerifyBottleneck.
func Verify(n int, pairs Pairs, cost []int64, r *Result) error {
	if err := mates(n, r); err != nil {
		return err
	}
	d, err := dualsOf(n, r)
	if err != nil {
		return err
	}
	at := make([]int64, n) // weight of the pair that a vertex is in
	found := make([]bool, n)
	var lo, hi int64
	err = d.feasible(pairs, func(i, j int, w int64) {
		lo, hi = min(lo, w), max(hi, w)
		if r.Mate[i] == j && (!found[i] || w < at[i]) {
			at[i], at[j], found[i], found[j] = w, w, true, true
		}
	})
	if err != nil {
		return err
	}

	var total, worst int64
	paid := new(big.Int) // doubled
	any := false
	for v, m := range r.Mate {
		switch {
		case m < 0 && cost == nil:
			paid.Add(paid, big.NewInt(r.Penalty))
		case m < 0 && cost[v] == Never:
			return fmt.Errorf("%w: vertex %d must not be left out", ErrProof, v)
		case m < 0:
			paid.Add(paid, big.NewInt(2*cost[v]))
		case !found[v]:
			return fmt.Errorf("%w: vertices %d and %d may not be paired", ErrProof, v, m)
		case m > v:
			total += at[v]
			paid.Add(paid, big.NewInt(2*at[v]))
			if !any || at[v] > worst {
				worst, any = at[v], true
			}
			if s := d.slack(v, m, at[v]); s != 0 {
				return fmt.Errorf("%w: pair of %d and %d is not tight: slack %d", ErrProof, v, m, s)
			}
		}
	}
	if total != r.Total || worst != r.Worst {
		return fmt.Errorf("%w: total %d and worst pair %d, but %d and %d are claimed", ErrProof, total, worst, r.Total, r.Worst)
	}
	for v, y := range r.Dual {
		limit := r.Penalty
		switch {
		case cost == nil && r.LeftOut == 0:
			continue
		case cost != nil && cost[v] == Never:
			continue
		case cost != nil:
			limit = 2 * cost[v]
		}
		if y > limit {
			return fmt.Errorf("%w: vertex %d: dual %d is above %d", ErrProof, v, y, limit)
		}
	}
	if cost == nil && r.LeftOut > n%2 && r.Penalty < penaltyFor(n, lo, hi) {
		return fmt.Errorf("%w: penalty %d does not show that no more pairs can be had, %d would", ErrProof, r.Penalty, penaltyFor(n, lo, hi))
	}
	if err := d.full(r.Mate); err != nil {
		return err
	}
	if bound := d.objective(); bound.Cmp(paid) != 0 {
		return fmt.Errorf("%w: doubled total %v, doubled bound %v", ErrProof, paid, bound)
	}
	return nil
}

// VerifyBottleneck proves that r leaves out as few vertices as the pairs allow,
// that with pairs lighter than r.Worst alone more would be left out, and that
// its total is the least with pairs up to r.Worst. The first is shown only for
// results that leave out no more than n mod 2 vertices; for others hand in what
// Verify has shown of a result of Largest as fewest, its LeftOut.
func VerifyBottleneck(n int, pairs Pairs, fewest int, r *Result) error {
	if r.LeftOut > n%2 && r.LeftOut != fewest {
		return fmt.Errorf("%w: %d vertices left out, %d can be", ErrProof, r.LeftOut, fewest)
	}
	if err := Verify(n, pairs.UpTo(r.Worst), nil, r); err != nil {
		return err
	}
	if r.LeftOut == n {
		return nil // no pair at all
	}
	if r.Witness == nil {
		return fmt.Errorf("%w: no witness against lighter pairs", ErrProof)
	}
	w := r.Witness
	if w.Penalty <= 0 {
		return fmt.Errorf("%w: witness against lighter pairs: penalty %d", ErrProof, w.Penalty)
	}
	d, err := dualsOf(n, w)
	if err != nil {
		return err
	}
	err = d.feasible(func(yield func(i, j int, weight int64) bool) {
		pairs(func(i, j int, weight int64) bool { return weight >= r.Worst || yield(i, j, 0) })
	}, func(int, int, int64) {})
	if err != nil {
		return fmt.Errorf("witness against lighter pairs: %w", err)
	}
	for v, y := range w.Dual {
		if y > w.Penalty {
			return fmt.Errorf("%w: witness against lighter pairs: vertex %d: dual %d is above %d", ErrProof, v, y, w.Penalty)
		}
	}
	have := new(big.Int).Mul(big.NewInt(w.Penalty), big.NewInt(int64(r.LeftOut)))
	if d.objective().Cmp(have) <= 0 {
		return fmt.Errorf("%w: witness against lighter pairs: bound %v, need more than %v", ErrProof, d.objective(), have)
	}
	return nil
}

// mates checks that Mate is a matching of n vertices.
func mates(n int, r *Result) error {
	if len(r.Mate) != n {
		return fmt.Errorf("%w: %d mates of %d vertices", ErrProof, len(r.Mate), n)
	}
	left := 0
	for v, m := range r.Mate {
		switch {
		case m == -1:
			left++
		case m < 0 || m >= n || m == v || r.Mate[m] != v:
			return fmt.Errorf("%w: vertex %d: mate %d has another mate", ErrProof, v, m)
		}
	}
	if left != r.LeftOut {
		return fmt.Errorf("%w: %d vertices left out, but %d are claimed", ErrProof, left, r.LeftOut)
	}
	return nil
}

// duals are those of a result, with the odd sets, each inside the next one of
// those it meets, as a forest.
type duals struct {
	y      []int64
	line   []int
	place  []int // by vertex: where it stands in line
	sets   []Blossom
	inside []int   // by vertex: the smallest set with it, -1 without
	above  []int   // by set: the next greater set around it, -1 without
	order  []int   // sets, none before the one above it
	seen   int     // the vertex that shared is for
	holds  []int   // by set: the last vertex for which shared was summed up that it holds
	shared []int64 // by set: sum of the duals of the sets that hold it and vertex seen
}

// tooGreat is beyond every dual, so that sums of a few cannot overflow.
const tooGreat = 1 << 60

func dualsOf(n int, r *Result) (*duals, error) {
	if len(r.Dual) != n {
		return nil, fmt.Errorf("%w: %d duals of %d vertices", ErrProof, len(r.Dual), n)
	}
	for v, y := range r.Dual {
		if y > tooGreat || y < -tooGreat {
			return nil, fmt.Errorf("%w: vertex %d: dual %d", ErrProof, v, y)
		}
	}
	d := &duals{y: r.Dual, line: r.Line, sets: r.Blossoms, seen: -1}
	d.place, d.inside, d.above = constant(n, -1), constant(n, -1), constant(len(d.sets), -1)
	d.order, d.shared, d.holds = make([]int, len(d.sets)), make([]int64, len(d.sets)), constant(len(d.sets), -1)
	if len(d.line) != n {
		return nil, fmt.Errorf("%w: %d of %d vertices lined up", ErrProof, len(d.line), n)
	}
	for i, v := range d.line {
		if v < 0 || v >= n || d.place[v] != -1 {
			return nil, fmt.Errorf("%w: line: vertex %d of %d, or twice", ErrProof, v, n)
		}
		d.place[v] = i
	}
	for b, set := range d.sets {
		d.order[b] = b
		if set.From < 0 || set.To > n || set.To <= set.From || (set.To-set.From)%2 == 0 || set.Dual < 0 || set.Dual > tooGreat {
			return nil, fmt.Errorf("%w: blossom %d: from %d to %d of %d, dual %d", ErrProof, b, set.From, set.To, n, set.Dual)
		}
	}
	slices.SortFunc(d.order, func(a, b int) int {
		x, y := d.sets[a], d.sets[b]
		return cmp.Or(x.From-y.From, y.To-x.To, a-b)
	})
	deep := make([]int64, len(d.sets)) // sum of the duals of a set and those around it
	around := -1                       // the set before, or one around it
	for _, b := range d.order {
		set := d.sets[b]
		for around >= 0 && d.sets[around].To <= set.From {
			around = d.above[around]
		}
		deep[b] = set.Dual
		if around >= 0 {
			if set.To > d.sets[around].To {
				return nil, fmt.Errorf("%w: blossoms %d and %d cross", ErrProof, around, b)
			}
			deep[b] += deep[around]
		}
		if deep[b] > 2*tooGreat {
			return nil, fmt.Errorf("%w: blossom %d: duals from there outwards sum up to %d", ErrProof, b, deep[b])
		}
		d.above[b], around = around, b
		for _, v := range d.line[set.From:set.To] {
			d.inside[v] = b
		}
	}
	return d, nil
}

// slack gives 2 w − y_i − y_j + Σ z of the sets with both.
func (d *duals) slack(i, j int, w int64) int64 {
	if d.seen != i {
		d.see(i)
	}
	s := 2*w - d.y[i] - d.y[j]
	if b := d.inside[j]; b >= 0 {
		s += d.shared[b]
	}
	return s
}

// see sums up, for every set, the duals of the sets that hold it and vertex i.
func (d *duals) see(i int) {
	d.seen = i
	for b := d.inside[i]; b >= 0; b = d.above[b] {
		d.holds[b] = i
	}
	for _, b := range d.order {
		d.shared[b] = 0
		if a := d.above[b]; a >= 0 {
			d.shared[b] = d.shared[a]
		}
		if d.holds[b] == i {
			d.shared[b] += d.sets[b].Dual
		}
	}
}

// feasible checks the slack of every pair and shows the pair to see.
func (d *duals) feasible(pairs Pairs, see func(i, j int, w int64)) error {
	var err error
	n := len(d.y)
	pairs(func(i, j int, w int64) bool {
		if i < 0 || j < 0 || i >= n || j >= n || i == j || w > tooGreat || w < -tooGreat {
			err = fmt.Errorf("%w: pair of %d and %d, weight %d, of %d vertices", ErrProof, i, j, w, n)
			return false
		}
		see(i, j, w)
		if 2*w >= d.y[i]+d.y[j] {
			return true
		}
		if s := d.slack(i, j, w); s < 0 {
			err = fmt.Errorf("%w: pair of %d and %d, weight %d: slack %d", ErrProof, i, j, w, s)
			return false
		}
		return true
	})
	return err
}

// full checks that of each odd set with a dual all vertices but one are paired
// among themselves.
func (d *duals) full(mate []int) error {
	for b, set := range d.sets {
		single := 0
		for _, v := range d.line[set.From:set.To] {
			if m := mate[v]; m < 0 || d.place[m] < set.From || d.place[m] >= set.To {
				single++
			}
		}
		if single != 1 && set.Dual > 0 {
			return fmt.Errorf("%w: blossom %d: %d of %d vertices are not paired inside", ErrProof, b, single, set.To-set.From)
		}
	}
	return nil
}

// objective gives Σ y − Σ z (|B| − 1)/2.
func (d *duals) objective() *big.Int {
	sum, x := new(big.Int), new(big.Int)
	for _, y := range d.y {
		sum.Add(sum, x.SetInt64(y))
	}
	for _, set := range d.sets {
		x.SetInt64(set.Dual)
		sum.Sub(sum, x.Mul(x, big.NewInt(int64(set.To-set.From-1)/2)))
	}
	return sum
}
