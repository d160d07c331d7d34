package stats

import (
	"math"
	"slices"
)

// Midranks are the ranks of x from 1, those of equal values replaced by their
// mean, and the sizes of the groups of equal values in ascending order of value
// (1 for a value that is alone). Infinite values rank beyond all others and tie
// with each other. x is not modified; nil for an x that holds a NaN.
func Midranks(x []float64) (ranks []float64, groups []int) {
	return midranks(x, 0)
}

// midranks takes neighbours in order that are no more than slack apart for equal.
func midranks(x []float64, slack float64) (ranks []float64, groups []int) {
	order := make([]int, len(x))
	for i, v := range x {
		if math.IsNaN(v) {
			return nil, nil
		}
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int {
		switch {
		case x[a] < x[b]:
			return -1
		case x[a] > x[b]:
			return 1
		}
		return 0
	})
	ranks = make([]float64, len(x))
	for i := 0; i < len(order); {
		k := i + 1
		for k < len(order) && (x[order[k]] == x[order[k-1]] || x[order[k]]-x[order[k-1]] <= slack) {
			k++
		}
		for _, at := range order[i:k] {
			ranks[at] = float64(i+k+1) / 2
		}
		groups = append(groups, k-i)
		i = k
	}
	return ranks, groups
}

// tieCubes is Σ(g³-g) of the group sizes.
func tieCubes(groups []int) float64 {
	sum := 0.0
	for _, g := range groups {
		f := float64(g)
		sum += f*f*f - f
	}
	return sum
}
