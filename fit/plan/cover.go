package plan

import (
	"math"

	"gatesill/fit/stats"
)

// CoverRequest asks for limits that hold a share of a lot.
type CoverRequest struct {
	Share      float64 // of the lot that the limits have to hold
	Confidence float64
	N          int // parts measured; 0: how many is asked
	Lot        Lot // the values at hand
}

// Cover is the answer to a [CoverRequest].
type Cover struct {
	CoverRequest
	FreeOne, FreeBoth int        // parts whose least (or greatest), and whose least and greatest value do, whatever the distribution; 0: more than 1e9
	Factors           []Factors  // over numbers of parts, or of N alone
	BlocksOne         int        // which value from the end does with N parts; 0: none
	BlocksBoth        int        // how many values may be left out at both ends together, and one more; below 2: none
	ShareOne          float64    // share that the least (or greatest) of N bounds; NaN
	ShareBoth         float64    // share between least and greatest of N; NaN
	Intervals         []Interval // of the lot at hand; without those that cannot be had
	Declined          string     // why it has none for normal values; ""
	Normality         Normality  // of the lot at hand
}

// Factors are the factors k of mean ± k sd for normal values.
type Factors struct {
	N         int
	One, Both float64 // one limit, two limits
}

// Interval is one tolerance interval of the lot at hand, V.
type Interval struct {
	stats.ToleranceInterval
	Free bool // between two of its values, whatever the distribution
}

// Normality is how well values agree with being normal.
type Normality struct {
	P      float64 // of the Anderson-Darling test; NaN: too few values
	Doubts bool    // P below 0.01: what rests on normal values should not be trusted
}

func normalityOf(x []float64) Normality {
	n := Normality{P: math.NaN()}
	if len(x) >= 8 {
		n.P = stats.AndersonDarling(x).P
	}
	n.Doubts = n.P < 0.01
	return n
}

// tableSizes are the numbers of parts of a table.
var tableSizes = []int{5, 10, 20, 30, 50, 100, 200}

// ToCover answers a [CoverRequest]. Errors: [Invalid]. Checked: TestCover.
func ToCover(r CoverRequest) (*Cover, error) {
	if err := firstError(
		fraction("share", r.Share, "--share 95%"), fraction("confidence", r.Confidence, "--confidence 95%"),
		atLeast("n", r.N, 2, "one part has no spread"), atMost("n", r.N),
	); err != nil {
		return nil, err
	}
	c := &Cover{CoverRequest: r, ShareOne: math.NaN(), ShareBoth: math.NaN(), Normality: Normality{P: math.NaN()}}
	c.FreeOne = stats.FreeSize(stats.LowerOnly, r.Share, r.Confidence)
	c.FreeBoth = stats.FreeSize(stats.Both, r.Share, r.Confidence)
	sizes := tableSizes
	if r.N > 0 {
		sizes = []int{r.N}
		blocks := stats.FreeBlocks(r.N, r.Share, r.Confidence)
		c.BlocksOne, c.BlocksBoth = blocks, blocks
		c.ShareOne, c.ShareBoth = stats.FreeShare(r.N, 1, r.Confidence), stats.FreeShare(r.N, 2, r.Confidence)
	}
	for _, n := range sizes {
		c.Factors = append(c.Factors, Factors{n, stats.ToleranceFactor(n, r.Share, r.Confidence), stats.ToleranceFactorTwoSided(n, r.Share, r.Confidence)})
	}
	if x := r.Lot.Values; len(x) >= 2 {
		c.Normality = normalityOf(x)
		if c.Declined = r.Lot.unfit(c.Normality); c.Declined == "" {
			c.Intervals = append(c.Intervals, Interval{stats.NormalTolerance(x, stats.Both, r.Share, r.Confidence), false})
		}
		if iv := stats.FreeTolerance(x, stats.Both, r.Share, r.Confidence); !math.IsNaN(iv.Low) {
			c.Intervals = append(c.Intervals, Interval{iv, true})
		}
	}
	return c, nil
}
