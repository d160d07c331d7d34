package bias

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sort"
	"strings"
)

// ErrSeries is returned for a series of preferred values that does not exist.
var ErrSeries = errors.New("no such series of preferred values")

// Series is one of the series of preferred numbers for resistors.
type Series string

// The series.
const (
	E12  Series = "E12"
	E24  Series = "E24"
	E48  Series = "E48"
	E96  Series = "E96"
	E192 Series = "E192"
)

// AllSeries lists the series, coarsest first.
var AllSeries = []Series{E12, E24, E48, E96, E192}

// SeriesNamed finds a series by its name, in either case; wraps [ErrSeries].
func SeriesNamed(name string) (Series, error) {
	s := Series(strings.ToUpper(strings.TrimSpace(name)))
	if !slices.Contains(AllSeries, s) {
		return "", fmt.Errorf("%q: %w", name, ErrSeries)
	}
	return s, nil
}

// e24 are the values of E24, which no formula gives: 2.7 to 4.7 and 8.2 are not the
// rounded powers of the 24th root of ten. Every other one is of E12.
var e24 = []int{10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91}

// Decade gives the values of one decade, ascending: from 10 up to 91 for E12 and
// E24, from 100 up to 988 for the finer ones; nil for an unknown series.
//
// E48, E96 and E192 are 100·10^(k/n), k from 0 to n-1, rounded to three digits; the one exception
// is 920 in E192, where rounding gives 919.
//
// Source: IEC 60063:2015, "Preferred number series for resistors and capacitors" (from
// memory). Checked: TestSeriesTables, against published lists of the values.
func (s Series) Decade() []int {
	switch s {
	case E12:
		var out []int
		for i := 0; i < len(e24); i += 2 {
			out = append(out, e24[i])
		}
		return out
	case E24:
		return slices.Clone(e24)
	}
	n := map[Series]int{E48: 48, E96: 96, E192: 192}[s]
	var out []int
	for k := range n {
		v := int(math.Round(100 * math.Pow(10, float64(k)/float64(n))))
		if v == 919 {
			v = 920
		}
		out = append(out, v)
	}
	return out
}

// Around gives the count values of the series on either side of r, ohm, ascending; r
// itself counts to those below. nil where r is not a number above 0.
func (s Series) Around(r float64, count int) []float64 {
	if !(r > 0) || math.IsInf(r, 0) || count < 1 {
		return nil
	}
	decade := decades[s]
	n := len(decade)
	if n == 0 {
		return nil
	}
	exp := math.Floor(math.Log10(r))
	value := func(i int) float64 { // the i-th from the beginning of that decade, below 0 in those before
		k := (i%n + n) % n
		return of(decade[k], exp+float64((i-k)/n))
	}
	// The first above r, which may lie just outside the decade, for a logarithm is rounded.
	above := sort.Search(n+1, func(i int) bool { return value(i) > r*(1+1e-9) })
	out := make([]float64, 0, 2*count)
	for i := above - count; i < above+count; i++ {
		out = append(out, value(i))
	}
	return out
}

// decades holds the values of every series.
var decades = func() map[Series][]int {
	m := map[Series][]int{}
	for _, s := range AllSeries {
		m[s] = s.Decade()
	}
	return m
}()

// of is digits, 10 to 91 or 100 to 988, in the decade from 10^exp ohm, divided where
// the power is negative, so that no noise of 0.1 is left.
func of(digits int, exp float64) float64 {
	if exp--; digits >= 100 {
		exp--
	}
	if exp < 0 {
		return float64(digits) / math.Pow(10, -exp)
	}
	return float64(digits) * math.Pow(10, exp)
}
