package lot

import (
	"math"
	"slices"
)

// parting is the best division of the sorted values of one quantity in two
// groups.
type parting struct {
	score float64 // evidence for two groups; -Inf where their shape speaks against it
	below float64 // greatest value of the lower group
	above float64 // least value of the upper group
}

// smallestGroup is how many devices make a population; fewer are odd ones.
const smallestGroup = 3

// partingOf looks for two groups in sorted values, read with that step and
// uncertainty u.
//
// The score is twice the logarithm of the classification likelihood ratio of two
// normal groups with one spread, of sizes a and b, against one group:
//
//	n ln(s²total/s²within) + 2 (a ln(a/n) + b ln(b/n))
//
// at its greatest over all divisions. Far single values at the ends are set aside
// first; else one wild reading would hide any division. The score alone takes
// every skewed lot for two, so the groups must also look like two: means three
// spreads apart, and between them a valley that holds at most a third ([valleyShare];
// in lots of 100 and more half) as many values as as wide a piece in the middle of
// the smaller group. Fewer than 8 values are never parted.
//
// Source: classification likelihood, Scott and Symons, "Clustering methods based
// on likelihood ratio criteria", Biometrics 27 (1971) 387-397 (from memory); the
// conditions of shape are our own judgement. The score has no distribution in closed
// form (the division is sought among all); its bar was found by simulation of normal
// lots, of lots spread evenly and of lots with heavy tails, and is the highest of the
// three: splittable.go. Checked: TestPartingBar, TestFalseAlarms, TestPartingPower.
func partingOf(sorted []float64, step, u float64) parting {
	none := parting{score: math.Inf(-1)}
	s := withoutFarEnds(sorted)
	if len(sorted) < fewest || len(s) < 2*smallestGroup {
		return none
	}
	score, apart := bestDivision(s, smallestGroup, step, u)
	if apart.at == 0 || apart.distance < 3*apart.spread {
		return none // at 0: numbers too great to be squared
	}
	p, ok := valley(s, apart.at, smallestGroup)
	if !ok {
		return none
	}
	p.score = score
	return p
}

// withoutFarEnds drops single values at the ends, up to a tenth of all, that lie
// farther out than half of the range of the rest.
func withoutFarEnds(s []float64) []float64 {
	for left := max(1, len(s)/10); left > 0 && len(s) > 4; left-- {
		n := len(s)
		low := (s[1] - s[0]) - (s[n-1]-s[1])/2
		high := (s[n-1] - s[n-2]) - (s[n-2]-s[0])/2
		switch {
		case low <= 0 && high <= 0:
			return s
		case low > high:
			s = s[1:]
		default:
			s = s[:n-1]
		}
	}
	return s
}

// division is one way to cut sorted values in two: below index at and from it on.
type division struct {
	at       int
	distance float64 // of the two means
	spread   float64 // within the groups
}

func bestDivision(s []float64, small int, step, u float64) (score float64, best division) {
	n := float64(len(s))
	mid := s[len(s)/2] // sums about a value in the middle keep their digits
	var sum, squares float64
	for _, v := range s {
		sum += v - mid
		squares += (v - mid) * (v - mid)
	}
	// Rounding to a step must not pass for tight groups, nor may groups nearer
	// than the readings can tell.
	rounding, noise := step*step/4, u*u
	total := math.Max((squares-sum*sum/n)/n+rounding, noise)
	score = math.Inf(-1)
	var low float64
	for i := 1; i <= len(s)-small; i++ {
		low += s[i-1] - mid
		if i < small {
			continue
		}
		a, b := float64(i), n-float64(i)
		high := sum - low
		within := math.Max(0, squares-low*low/a-high*high/b)
		sc := n*math.Log(total/math.Max(within/n+rounding, noise)) + 2*(a*math.Log(a/n)+b*math.Log(b/n))
		if sc > score {
			score = sc
			best = division{at: i, distance: high/b - low/a,
				spread: math.Sqrt(math.Max(within/(n-2)+rounding, noise))}
		}
	}
	return score, best
}

// valley puts the cut in the widest gap between the middles of the two groups
// and looks whether few enough values lie about it.
func valley(s []float64, at, small int) (p parting, ok bool) {
	low, high := middle(s[:at]), middle(s[at:])
	between := high - low
	from, _ := slices.BinarySearch(s, low+between/4)
	to, _ := slices.BinarySearch(s, high-between/4)
	cut := 0
	for i := max(from, 1); i <= min(to, len(s)-1); i++ {
		m := (s[i-1] + s[i]) / 2
		if m >= low+between/4 && m <= high-between/4 && (cut == 0 || s[i]-s[i-1] > s[cut]-s[cut-1]) {
			cut = i
		}
	}
	if cut < small || cut > len(s)-small {
		return p, false
	}
	p.below, p.above = s[cut-1], s[cut]
	smaller := low
	if len(s)-cut < cut {
		smaller = high
	}
	w := between / 3
	here := within(s, (p.below+p.above)/2, w)
	there := within(s, smaller, w)
	return p, float64(here) <= valleyShare(len(s))*float64(there)
}

// valleyShare is how full the valley between two groups may be: a third of the
// middle of the smaller one; with more values, where counts are surer, up to half.
func valleyShare(n int) float64 {
	const third = 1.0 / 3 * (1 + 1e-9)
	return third + min(max(float64(n-40)/60, 0), 1)*(0.5-third)
}

func middle(s []float64) float64 { return s[(len(s)-1)/2]/2 + s[len(s)/2]/2 }

// within counts the values of s in a piece of width w about x.
func within(s []float64, x, w float64) int {
	from, _ := slices.BinarySearch(s, x-w/2)
	to, _ := slices.BinarySearch(s, x+w/2)
	return to - from
}

// twoGroups is a lot parted in two by one of its quantities.
type twoGroups struct {
	col    *column
	parts  parting
	bar    float64 // that the score passed
	lower  []bool  // by device
	upper  []bool
	nl, nu int
	also   *column // another quantity that parts it in the same way; nil: none
}

// minority gives the group that is small enough to be the odd one, at most a
// quarter of the devices, and the other; nil where neither is.
func (g *twoGroups) minority() (odd, others []bool) {
	n := g.nl + g.nu
	switch {
	case 4*g.nl <= n:
		return g.lower, g.upper
	case 4*g.nu <= n:
		return g.upper, g.lower
	}
	return nil, nil
}

// findGroups parts the lot by the first column if that tells two populations,
// else by the column that does so most clearly. nil: one population.
func findGroups(cols []*column) *twoGroups {
	var best *twoGroups
	var lead float64
	var all []*twoGroups
	for i, c := range cols {
		if len(c.sorted) < fewest {
			continue
		}
		p := partingOf(c.sorted, c.step, c.usual)
		bar := splitCritical(len(c.sorted), len(cols))
		over := p.score - bar
		if !(over > 0) {
			continue
		}
		g := newGroups(c, p)
		g.bar = bar
		all = append(all, g)
		if best == nil || best.col != cols[0] && over > lead {
			best, lead = g, over
		}
		if i == 0 {
			best = g
		}
	}
	if best == nil {
		return nil
	}
	for _, g := range all {
		if g != best && sameDivision(best, g) &&
			(best.also == nil || isGain(best.also.key) == isGain(best.col.key)) {
			best.also = g.col
		}
	}
	return best
}

func newGroups(c *column, p parting) *twoGroups {
	g := &twoGroups{col: c, parts: p, lower: make([]bool, len(c.x)), upper: make([]bool, len(c.x))}
	for i, x := range c.x {
		switch {
		case x <= p.below:
			g.lower[i] = true
			g.nl++
		case x >= p.above:
			g.upper[i] = true
			g.nu++
		}
	}
	return g
}

// sameDivision reports whether two quantities put at least 95 % of the devices
// that both have in the same groups.
func sameDivision(a, b *twoGroups) bool {
	var same, crossed int
	for i := range a.lower {
		if a.lower[i] && b.lower[i] || a.upper[i] && b.upper[i] {
			same++
		}
		if a.lower[i] && b.upper[i] || a.upper[i] && b.lower[i] {
			crossed++
		}
	}
	return max(same, crossed) > 0 && 20*min(same, crossed) <= same+crossed
}

// split is the division in the unit of its quantity.
func (g *twoGroups) split(devs []Device) *Split {
	c := g.col
	s := &Split{By: c.key, GapLow: c.raw(g.parts.below), GapHigh: c.raw(g.parts.above), Score: g.parts.score, Bar: g.bar}
	low, high := g.lower, g.upper
	if s.GapLow > s.GapHigh {
		s.GapLow, s.GapHigh = s.GapHigh, s.GapLow
		low, high = high, low
	}
	s.At = s.GapLow/2 + s.GapHigh/2
	for i := range devs {
		if low[i] {
			s.Low = append(s.Low, devs[i].Name)
		}
		if high[i] {
			s.High = append(s.High, devs[i].Name)
		}
	}
	if g.also != nil {
		s.SecondAlso = g.also.key
	}
	s.Text = g.sentence()
	s.Origins = originsOf(devs, low, high)
	return s
}
