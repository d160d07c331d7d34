package stats

import "math"

// Equivalence is what two one-sided tests say of a difference that is to lie
// between two limits.
type Equivalence struct {
	Low, High                 float64 // the limits, in the unit of the estimate
	StatisticLow, PLow        float64 // against a difference at or below Low, one-sided
	StatisticHigh, PHigh      float64 // against a difference at or above High, one-sided
	P                         float64 // the larger of the two: below alpha, the difference lies within
	DF                        float64 // degrees of freedom of both
	IntervalLow, IntervalHigh float64 // interval at confidence 1-2 alpha: within the limits exactly when P < alpha
	Alpha                     float64 // the level of either test
}

// EquivalenceOf tests whether the estimate of t lies between low and high, by two
// one-sided t tests at level alpha each. t is the outcome of any test here: pooled,
// Welch, from summaries, trimmed means, pairs; its own hypothesis and level do not
// matter. A P that is not small says only that it was not shown.
//
// Result: NaN unless low < high, alpha is between 0 and 0.5, and t has a standard
// error. Source: Schuirmann, "A comparison of the two one-sided tests procedure and
// the power approach for assessing the equivalence of average bioavailability",
// Journal of Pharmacokinetics and Biopharmaceutics 15 (1987) 657-680. Checked:
// TestEquivalence.
func EquivalenceOf(t TTest, low, high, alpha float64) Equivalence {
	nan := math.NaN()
	r := Equivalence{low, high, nan, nan, nan, nan, nan, nan, nan, nan, alpha}
	if !(low < high) || !(alpha > 0 && alpha < 0.5) || !(t.SE > 0) || !(t.DF > 0) {
		return r
	}
	r.DF = t.DF
	r.StatisticLow, r.StatisticHigh = (t.Estimate-low)/t.SE, (t.Estimate-high)/t.SE
	r.PLow, r.PHigh = TUpper(r.StatisticLow, t.DF), TUpper(-r.StatisticHigh, t.DF)
	r.P = math.Max(r.PLow, r.PHigh)
	half := UpperT(alpha, t.DF) * t.SE
	r.IntervalLow, r.IntervalHigh = t.Estimate-half, t.Estimate+half
	return r
}
