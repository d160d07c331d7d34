package stats

import "math"

// LabelAgreement is the probability that labels agree with a parting in two groups
// at least as well as they do, if the groups had nothing to do with the labels:
// the share of all ways to draw the lower group from the labelled items whose
// Σ a²/k, over the labels with a of their k items in it, is not less than that seen.
//
// Inputs: low[i] and high[i] count the items of label i in the two groups, not
// below 0, not modified. Result: NaN with fewer than two labels, with an empty
// group, or with counts that are none. The ways are counted out as long as that
// takes less than a second, each summand in 64ths, rounded so that the probability
// is rather too great; else it is that of the chi-square test of independence,
// labels whose expected counts are below 5 taken as one, and NaN where that leaves
// one label.
//
// Source: conditional test of a table with given margins, R. A. Fisher,
// Statistical Methods for Research Workers, with Pearson's statistic, which is
// Σ a²/k but for what the margins fix (from memory). Checked: TestLabelAgreement.
func LabelAgreement(low, high []int) float64 {
	if len(low) != len(high) {
		return math.NaN()
	}
	nl, n, labels := 0, 0, 0
	for i := range low {
		if low[i] < 0 || high[i] < 0 {
			return math.NaN()
		}
		nl, n = nl+low[i], n+low[i]+high[i]
		if low[i]+high[i] > 0 {
			labels++
		}
	}
	if labels < 2 || nl == 0 || nl == n {
		return math.NaN()
	}
	if 2*nl > n { // the statistic is the same for both groups
		low, high, nl = high, low, n-nl
	}
	if work := float64(nl) * float64(nl) * labelGrid * float64(n); work > 2e8 {
		return independence(low, high, nl, n)
	}
	return countedOut(low, high, nl)
}

// labelGrid is how many steps a summand is counted in.
const labelGrid = 64

// countedOut is the exact probability of [LabelAgreement].
func countedOut(low, high []int, nl int) float64 {
	const slack = 1e-9
	seen := 0
	// ways[a][s]: share of the ways in which a of the items so far are in the lower
	// group, with the sum s; every row only as long as its greatest sum.
	ways := make([][]float64, nl+1)
	ways[0] = []float64{1}
	for i := range low {
		k := low[i] + high[i]
		if k == 0 {
			continue
		}
		part := func(a int) float64 { return labelGrid * float64(a) * float64(a) / float64(k) }
		seen += int(part(low[i]) + slack)
		var all float64
		for a := nl; a >= 0; a-- {
			var row []float64
			choose := 1.0 // k over b
			for b := 0; b <= min(a, k); b++ {
				up := int(math.Ceil(part(b) - slack))
				if from := ways[a-b]; len(from) > 0 {
					if more := len(from) + up - len(row); more > 0 {
						row = append(row, make([]float64, more)...)
					}
					for s, w := range from {
						row[s+up] += w * choose
					}
				}
				choose *= float64(k-b) / float64(b+1)
			}
			ways[a] = row
			for _, w := range row {
				all += w
			}
		}
		for _, row := range ways { // numbers of ways soon pass the range of numbers
			for s := range row {
				row[s] /= all
			}
		}
	}
	var all, as float64
	for s, w := range ways[nl] {
		all += w
		if s >= seen {
			as += w
		}
	}
	return as / all
}

// independence is the chi-square test of a table of two columns.
func independence(low, high []int, nl, n int) float64 {
	share := float64(nl) / float64(n)
	var chi float64
	var rareLow, rareHigh float64
	df := -1.0
	add := func(l, h float64) {
		e, f := (l+h)*share, (l+h)*(1-share)
		chi += (l-e)*(l-e)/e + (h-f)*(h-f)/f
		df++
	}
	for i := range low {
		l, h := float64(low[i]), float64(high[i])
		if (l+h)*min(share, 1-share) < 5 {
			rareLow, rareHigh = rareLow+l, rareHigh+h
			continue
		}
		add(l, h)
	}
	if (rareLow+rareHigh)*min(share, 1-share) >= 5 {
		add(rareLow, rareHigh)
	}
	if df < 1 {
		return math.NaN()
	}
	return ChiSquareUpper(chi, df)
}
