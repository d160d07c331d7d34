package match

import (
	"math"
	"slices"
	"sort"
)

// In one quantity a set's mismatch is its greatest value less its least, and sets
// of neighbours in ascending order are best, whatever the aim. For take two sets
// of k whose values interleave, y1 <= ... <= y2k together. Give the lower k to one
// and the upper k to the other. If one old set held both y1 and y2k, its spread is
// at least the sum of the two new ones. If not, the one with y1 reaches at least
// up to yk, because it has k members, and the other begins at y(k+1) at most, so
// each new spread is at most one of the old. Neither the sum nor the worst grows,
// and what was within a tolerance still is. And where a device that is left over
// lies between members of a set it may take the place of the outermost. After
// finitely many such steps every set is a run of neighbours.

// runs is a choice of runs of k neighbours.
type runs struct {
	starts []int // ascending
	total  int64
	worst  int64
}

// mostRuns gives as many runs of k as fit into the ascending x with no spread
// above most, and among those the ones of least total: a dynamic programme over
// the first i values, in O(n).
func mostRuns(x []int64, k int, most int64) runs {
	n := len(x)
	count, total := make([]int, n+1), make([]int64, n+1)
	taken := make([]bool, n+1)
	for i := 1; i <= n; i++ {
		count[i], total[i] = count[i-1], total[i-1]
		if i < k {
			continue
		}
		d := x[i-1] - x[i-k]
		if d > most {
			continue
		}
		c, t := count[i-k]+1, total[i-k]+d
		if c > count[i] || c == count[i] && t < total[i] {
			count[i], total[i], taken[i] = c, t, true
		}
	}
	return pick(x, k, func(i int, _ int) bool { return taken[i] }, 0)
}

// pick follows the choices back from the end; of tells, for the first i values
// and with left runs still to be taken, whether the last k of them are a run.
func pick(x []int64, k int, of func(i, left int) bool, left int) runs {
	var r runs
	for i := len(x); i >= k; {
		if !of(i, left) {
			i--
			continue
		}
		d := x[i-1] - x[i-k]
		r.total += d
		r.worst = max(r.worst, d)
		i -= k
		left--
		r.starts = append(r.starts, i)
	}
	slices.Reverse(r.starts)
	return r
}

// worstRuns gives as many runs as there are values for, with the least worst
// spread and among those the least total: a search over the spreads that occur.
func worstRuns(x []int64, k int) runs {
	m := len(x) / k
	var spreads []int64
	for i := k; i <= len(x); i++ {
		spreads = append(spreads, x[i-1]-x[i-k])
	}
	slices.Sort(spreads)
	spreads = slices.Compact(spreads)
	at := sort.Search(len(spreads), func(s int) bool { return countRuns(x, k, spreads[s]) >= m })
	if at == len(spreads) {
		return runs{}
	}
	return mostRuns(x, k, spreads[at])
}

// countRuns gives the greatest number of runs with no spread above most: taking
// each as soon as it ends is best.
func countRuns(x []int64, k int, most int64) int {
	n := 0
	for i := k; i <= len(x); {
		if x[i-1]-x[i-k] <= most {
			n++
			i += k
		} else {
			i++
		}
	}
	return n
}

// bestRuns gives exactly m runs of least total with no spread above most, in
// O(n·m); fewer where m are not to be had.
func bestRuns(x []int64, k, m int, most int64) runs {
	if can := countRuns(x, k, most); m >= can {
		return mostRuns(x, k, most)
	}
	n := len(x)
	before, now := make([]int64, n+1), make([]int64, n+1)
	taken := make([][]bool, m+1)
	const never = math.MaxInt64 / 2
	for j := 1; j <= m; j++ {
		taken[j] = make([]bool, n+1)
		for i := range min(k, n+1) {
			now[i] = never
		}
		for i := k; i <= n; i++ {
			now[i] = never
			if i > k {
				now[i] = now[i-1]
			}
			if d := x[i-1] - x[i-k]; d <= most && before[i-k] != never && before[i-k]+d < now[i] {
				now[i], taken[j][i] = before[i-k]+d, true
			}
		}
		before, now = now, before
	}
	return pick(x, k, func(i, left int) bool { return left > 0 && taken[left][i] }, m)
}
