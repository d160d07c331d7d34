package compare

import (
	"fmt"
	"math"
	"strings"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// beside works out what stands beside the shift: spreads and the secondary tests.
// Nothing is left out for them: where a device never reaches the current, only tests
// by ranks have a number.
func (c *comparing) beside() {
	if c.pairs != nil {
		c.besidePairs()
	} else {
		c.besideLots()
	}
	p := make([]float64, len(c.out.Secondary))
	for i, s := range c.out.Secondary {
		p[i] = s.P
	}
	for i, a := range stats.Holm(p) {
		c.out.Secondary[i].PAdjusted = a
	}
	if c.ref.counts.Above+c.cand.counts.Above > 0 {
		c.warn(fit.CodeAboveRange, neverReach(c.ref.counts.Above+c.cand.counts.Above)+
			": that counts as above every value, and tests that need the values themselves have no number")
	}
}

// besideWords says which counts where the verdict without a margin and what stands
// beside it differ; "" where they do not. A verdict on a margin asks something else.
func (c *comparing) besideWords() string {
	o := &c.out
	alpha := 1 - o.Level
	var apart, had []string
	for i, s := range o.Secondary {
		if i >= 2 || math.IsNaN(s.PAdjusted) { // the first two ask for a shift
			continue
		}
		name, _, _ := strings.Cut(s.Test, ":")
		had = append(had, name)
		if s.PAdjusted <= alpha {
			apart = append(apart, fmt.Sprintf("the test of %s (adjusted %s)", name, pWords(s.PAdjusted)))
		}
	}
	const counts = "; the verdict is that of the primary test alone, which was chosen beforehand: the rest is a reason to measure more"
	switch {
	case o.Verdict == NoDifference:
		if o.Curves != nil && o.Curves.Differs && o.ForTemp == 0 { // the band is without what was taken off for that
			apart = append(apart, "the band of the curves")
		}
		if len(apart) > 0 {
			return strings.Join(apart, " and ") + " would say that the lots differ" + counts
		}
	case o.Verdict == Differs && len(had) > 0 && len(apart) == 0:
		return "beside it no test of " + strings.Join(had, " or ") + " sees a difference" + counts
	}
	return ""
}

// besideLots compares lots of different devices.
func (c *comparing) besideLots() {
	ref, cand := c.ref.x, less(c.cand.x, c.takenOff())
	s := stats.SpreadRatioOf(cand, ref, c.opt.Level)
	c.out.Spread = Interval{s.Ratio, s.Low, s.High}
	c.out.SpreadTest = "mean distances from the median, Bonett and Seier"
	w := stats.WelchT(cand, ref, c.opt.Level)
	rank := stats.MannWhitney(cand, ref)
	ks := stats.KolmogorovSmirnov(cand, ref)
	bf := stats.BrownForsythe(finiteOnly(cand), finiteOnly(ref))
	f := stats.VarianceRatio(finiteOnly(cand), finiteOnly(ref), c.opt.Level)
	c.out.Secondary = []Secondary{
		{Test: "means: Welch's t", Statistic: w.Statistic, P: w.P, Shift: Interval{w.Estimate, w.Low, w.High}},
		{Test: exactly("ranks: Mann-Whitney, shift of Hodges and Lehmann", rank.Exact), Statistic: rank.Statistic, P: rank.P,
			Shift: reached(stats.HodgesLehmann(cand, ref, c.opt.Level))},
		{Test: exactly("distributions: Kolmogorov-Smirnov", ks.Exact), Statistic: ks.Statistic, P: ks.P, Shift: none()},
		{Test: "spreads: Brown-Forsythe", Statistic: bf.Statistic, P: bf.P, Shift: none()},
		{Test: "variances: F, for normal values", Statistic: f.Statistic, P: f.P, Shift: none(), Ratio: Interval{f.Estimate, f.Low, f.High}},
	}
	if math.IsNaN(s.Ratio) {
		c.out.SpreadTest = "none: it needs 4 devices a lot, all with a value, that do not all read the same"
	}
}

func none() Interval { return Interval{math.NaN(), math.NaN(), math.NaN()} }

// reached is the shift of a rank test; without ends where there are too few values
// for the level.
func reached(s stats.Shift) Interval {
	i := Interval{s.Estimate, s.Low, s.High}
	if math.IsInf(s.Low, 0) || math.IsInf(s.High, 0) {
		i.Low, i.High = math.NaN(), math.NaN()
	}
	if math.IsInf(s.Estimate, 0) {
		i.Value = math.NaN()
	}
	return i
}

// less is x with d taken off every value.
func less(x []float64, d float64) []float64 {
	if d == 0 {
		return x
	}
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = v - d
	}
	return out
}

// finiteOnly is x, or nothing where a value is infinite: a test of what is left
// would be one of fewer devices than there are.
func finiteOnly(x []float64) []float64 {
	for _, v := range x {
		if math.IsInf(v, 0) {
			return nil
		}
	}
	return x
}

func exactly(name string, exact bool) string {
	if exact {
		return name + ", exact"
	}
	return name
}

// besidePairs compares devices by serial.
func (c *comparing) besidePairs() {
	p := c.pairs
	c.out.Spread = pairedRatio(p.x, p.y, c.opt.Level)
	c.out.SpreadTest = "pairs, Pitman and Morgan: for normal values"
	if math.IsNaN(c.out.Spread.Value) {
		c.out.SpreadTest = "none: it needs 4 pairs with values that do not all read the same"
	}
	d := less(p.d, c.takenOff())
	t := stats.OneSampleT(finiteOnly(d), 0, c.opt.Level)
	rank := stats.SignedRank(d, nil)
	c.out.Secondary = []Secondary{
		{Test: "differences: t of pairs", Statistic: t.Statistic, P: t.P, Shift: Interval{t.Estimate, t.Low, t.High}},
		{Test: exactly("differences: signed ranks, Wilcoxon", rank.Exact), Statistic: rank.Statistic, P: rank.P,
			Shift: reached(stats.PairedShift(d, nil, c.opt.Level))},
		{Test: "spreads: Pitman-Morgan", Statistic: pitmanMorgan(p.x, p.y), P: pitmanMorganP(p.x, p.y), Shift: none()},
	}
}

// pitmanMorgan is the correlation of sums and differences of pairs: 0 where both
// have one spread. NaN with fewer than 4 pairs, with infinite values, and without
// scatter.
func pitmanMorgan(x, y []float64) float64 {
	if len(x) < 4 || finiteOnly(x) == nil || finiteOnly(y) == nil {
		return math.NaN()
	}
	if !(stats.SD(x) > 0) || !(stats.SD(y) > 0) {
		return math.NaN()
	}
	sum, diff := make([]float64, len(x)), make([]float64, len(x))
	for i := range x {
		sum[i], diff[i] = y[i]+x[i], y[i]-x[i]
	}
	return correlation(sum, diff)
}

func pitmanMorganP(x, y []float64) float64 { return correlationP(pitmanMorgan(x, y), len(x)) }

// pairedRatio is the ratio of standard deviations of y and x, taken of the same
// devices, with its interval: all ratios that the test of Pitman and Morgan does not
// reject.
//
//	ratio² = F (K ± √(K²-1)),  F = s_y²/s_x²,  K = 1 + 2(1-r²) t²/(n-2)
//
// Source: Pitman, "A note on normal correlation", Biometrika 31 (1939) 9-12 (from
// memory). Checked: TestPairedRatio.
func pairedRatio(x, y []float64, level float64) Interval {
	nan := math.NaN()
	if math.IsNaN(pitmanMorgan(x, y)) {
		return Interval{nan, nan, nan}
	}
	f := stats.SD(y) / stats.SD(x)
	r, df := correlation(x, y), float64(len(x)-2)
	t := stats.UpperT((1-level)/2, df)
	k := 1 + 2*(1-r*r)*t*t/df
	w := math.Sqrt(k*k - 1)
	return Interval{f, f * math.Sqrt(k-w), f * math.Sqrt(k+w)}
}
