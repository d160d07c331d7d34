package compare

import (
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// partOf are the devices of a lot that take part.
func partOf(l *Lot) []*Member {
	var out []*Member
	for i := range l.Members {
		if takesPart(&l.Members[i]) {
			out = append(out, &l.Members[i])
		}
	}
	return out
}

// levels are the gate voltages of devices at [fit.LevelCurrents].
type levels struct {
	vg  [][]float64 // by current, by device; NaN: none
	has int         // devices with any
}

func levelsOf(devs []*Member) levels {
	l := levels{vg: make([][]float64, len(fit.LevelCurrents))}
	for k := range l.vg {
		l.vg[k] = make([]float64, len(devs))
		for i := range devs {
			l.vg[k][i] = math.NaN()
		}
	}
	for i, m := range devs {
		for _, v := range m.Result.Levels {
			if k, ok := slices.BinarySearch(fit.LevelCurrents, v.I); ok && !math.IsInf(v.Vg, 0) {
				l.vg[k][i] = v.Vg
			}
		}
		if slices.ContainsFunc(l.vg, func(v []float64) bool { return !math.IsNaN(v[i]) }) {
			l.has++
		}
	}
	return l
}

// enough are the currents at which enough devices have a gate voltage.
func (l *levels) enough() []int {
	var at []int
	for k := range l.vg {
		if n := count(l.vg[k]); n >= fewest && float64(n) >= (1-mostCarriedOn)*float64(l.has) {
			at = append(at, k)
		}
	}
	return at
}

func (l *levels) counts(at []int) []int {
	n := make([]int, len(at))
	for i, k := range at {
		n[i] = count(l.vg[k])
	}
	return n
}

func count(v []float64) int {
	n := 0
	for _, x := range v {
		if !math.IsNaN(x) {
			n++
		}
	}
	return n
}

// common are the numbers in both ascending lists.
func common(a, b []int) []int {
	var out []int
	for _, k := range a {
		if slices.Contains(b, k) {
			out = append(out, k)
		}
	}
	return out
}

// at gives the gate voltages at the currents named, gaps filled from the nearest
// current that the device has, along the median of those that have both. A device
// that has none of them stays NaN throughout.
func (l *levels) at(at []int) [][]float64 {
	out := make([][]float64, len(at))
	for i, k := range at {
		out[i] = slices.Clone(l.vg[k])
	}
	step := map[[2]int]float64{}
	for d := range l.vg[0] {
		whole := true
		for i, k := range at {
			best := k
			if math.IsNaN(l.vg[k][d]) {
				best = l.nearest(d, k, at)
			}
			if best != k && best >= 0 {
				way := [2]int{best, k}
				if _, known := step[way]; !known {
					step[way] = l.apart(best, k)
				}
				out[i][d] = l.vg[best][d] + step[way]
			}
			whole = whole && !math.IsNaN(out[i][d])
		}
		for i := range out {
			if !whole {
				out[i][d] = math.NaN()
			}
		}
	}
	return out
}

// nearest is the current nearest to k, of those named, at which device d has a gate
// voltage; -1: none.
func (l *levels) nearest(d, k int, at []int) int {
	best := -1
	for _, from := range at {
		if !math.IsNaN(l.vg[from][d]) && (best < 0 || abs(from-k) < abs(best-k)) {
			best = from
		}
	}
	return best
}

// apart is the median distance from current a to current b of the devices that have
// both; NaN where none has.
func (l *levels) apart(a, b int) float64 {
	var d []float64
	for i := range l.vg[a] {
		if x := l.vg[b][i] - l.vg[a][i]; !math.IsNaN(x) {
			d = append(d, x)
		}
	}
	return stats.Median(d)
}

func abs(n int) int { return max(n, -n) }

// summary is the trimmed means of several quantities of the same devices with the
// covariances of these means.
type summary struct {
	means []stats.Trimmed
	cov   [][]float64
}

// summaries takes x[quantity][device]; devices without a value are in none.
//
//	cov(mean_i, mean_j) = Σ (w_i - w̄_i)(w_j - w̄_j) / (h(h-1))
//
// with w the values winsorised quantity by quantity.
func summaries(x [][]float64) summary {
	k := len(x)
	s := summary{cov: make([][]float64, k)}
	w := make([][]float64, k)
	for i := range x {
		v := slices.DeleteFunc(slices.Clone(x[i]), math.IsNaN)
		s.means = append(s.means, trimmedMean(v, 0))
		w[i] = winsorise(v)
		m := stats.Mean(w[i])
		for d := range w[i] {
			w[i][d] -= m
		}
	}
	for i := range x {
		s.cov[i] = make([]float64, k)
		for j := range x {
			h := float64(len(w[i]) - 2*cut(len(w[i])))
			for d := range w[i] {
				s.cov[i][j] += w[i][d] * w[j][d] / (h * (h - 1))
			}
		}
	}
	return s
}

// winsorise moves the values that are trimmed to the nearest ones kept.
func winsorise(x []float64) []float64 {
	s := stats.Sorted(x)
	g := cut(len(x))
	lo, hi := s[g], s[len(s)-1-g]
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = min(max(v, lo), hi)
	}
	return out
}
