package stats

import "math"

// MeanDifference compares the means of two of several groups, I < J.
type MeanDifference struct {
	I, J      int     // index of the groups
	Diff      float64 // mean of J less mean of I, unit of the values
	SE        float64 // its standard error, from the scatter pooled over all groups
	Low, High float64 // interval of the difference
	P         float64 // two-sided
}

// Tukey compares the means of all pairs of groups at once: with probability level all
// its intervals hold together, and P is already adjusted for all pairs. The scatter
// is taken to be normal and the same in all groups. Where their sizes differ the
// level is at least that (Kramer's form).
//
// Inputs: groups as for [AnovaOneWay]; level between 0 and 1 (0.95). Result: every
// pair I < J in order; NaN for a pair with an empty group, and for all where the
// pooled standard deviation cannot be had. Takes about a millisecond a pair.
//
// Source: Tukey (1953), Kramer, "Extension of multiple range tests to group means with
// unequal numbers of replications", Biometrics 12 (1956) 307-310 (from memory).
// Checked: TestTukeyHandbook, TestTukeyUnequal, TestTukeyOfTwo.
func Tukey(groups [][]float64, level float64) []MeanDifference {
	a := AnovaOneWay(groups)
	q := math.NaN()
	if a.Within.DF >= 1 {
		q = StudentizedRangeQuantile(level, a.Groups, a.Within.DF)
	}
	return differences(groups, a, q/math.Sqrt2, func(t float64) float64 {
		return StudentizedRangeUpper(math.Sqrt2*math.Abs(t), a.Groups, a.Within.DF)
	})
}

// PairwiseT compares the means of all pairs of groups by t tests with the standard
// deviation pooled over all of them. Nothing is adjusted for their number: give the P
// to [Holm] or another.
//
// Inputs, result: as [Tukey], each interval by itself at that level. Checked:
// TestPairwiseT.
func PairwiseT(groups [][]float64, level float64) []MeanDifference {
	a := AnovaOneWay(groups)
	t := math.NaN()
	if level > 0 && level < 1 {
		t = UpperT((1-level)/2, a.Within.DF)
	}
	return differences(groups, a, t, func(t float64) float64 {
		return 2 * TUpper(math.Abs(t), a.Within.DF)
	})
}

// differences are all pairs; half is half the length of an interval in standard
// errors, p gives the probability of a t.
func differences(groups [][]float64, a OneWay, half float64, p func(t float64) float64) []MeanDifference {
	var out []MeanDifference
	for i := range groups {
		for j := i + 1; j < len(groups); j++ {
			d := MeanDifference{I: i, J: j, Diff: math.NaN(), SE: math.NaN(), Low: math.NaN(), High: math.NaN(), P: math.NaN()}
			if len(groups[i]) > 0 && len(groups[j]) > 0 {
				near := Mean(groups[i])
				left, _ := about(groups[i], near)
				right, _ := about(groups[j], near)
				d.Diff = right - left
				d.SE = a.SD * math.Sqrt(1/float64(len(groups[i]))+1/float64(len(groups[j])))
				d.Low, d.High = d.Diff-half*d.SE, d.Diff+half*d.SE
				d.P = p(d.Diff / d.SE)
			}
			out = append(out, d)
		}
	}
	return out
}
