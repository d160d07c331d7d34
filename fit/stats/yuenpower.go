package stats

import "math"

// YuenPower is about the chance that [YuenT] at level alpha, two-sided, finds a
// shift between two normal samples of n values each with standard deviation sd:
// that of Welch's test with as many values as are kept, and the standard error
// that trimming leaves of many normal values. NaN as for [WelchPower].
//
// On samples made by chance it is right within 0.015 from n = 4 upwards. Trimming
// at 0.2 costs what 1.145 times as many values do, and more with few; it is the
// price of a test that single values far off do not mislead. Checked:
// TestYuenPower.
func YuenPower(n int, shift, sd, trim, alpha float64) float64 {
	kept, scale := trimmedNormal(n, trim)
	return WelchPower(kept, kept, shift, scale*sd, scale*sd, alpha, true)
}

// YuenEquivalencePower is about the chance that [EquivalenceOf] by [YuenT] shows
// two normal samples of n values each with standard deviation sd to differ by
// between low and high, when they differ by shift. As [YuenPower].
func YuenEquivalencePower(n int, shift, low, high, sd, trim, alpha float64) float64 {
	kept, scale := trimmedNormal(n, trim)
	return WelchEquivalencePower(kept, kept, shift, low, high, scale*sd, scale*sd, alpha)
}

// trimmedNormal is how many of n values a trimmed mean keeps, and what their
// standard deviation would be, in that of all, if the trimmed mean of normal
// values were a mean of them.
func trimmedNormal(n int, trim float64) (kept int, scale float64) {
	if n < 1 || !(trim >= 0 && trim < 0.5) {
		return 0, math.NaN()
	}
	cut := int(trim*float64(n) + 1e-9) // as in TrimmedMean
	kept = n - 2*cut
	w := winsorizedNormal(float64(cut) / float64(n))
	return kept, w * math.Sqrt(float64(n)/float64(kept))
}

// YuenSize is the smallest number of values of each of two samples from which on
// [YuenPower] stays at least power; 0 as for [OneSampleSize]. Where another value
// is cut off the power falls a little, and it may have been reached before.
func YuenSize(shift, sd, trim, alpha, power float64) int {
	return steadySize(power, alpha, func(n int) float64 { return YuenPower(n, shift, sd, trim, alpha) })
}

// YuenEquivalenceSize is the smallest number of values of each of two samples from
// which on [YuenEquivalencePower] stays at least power; 0 as for
// [EquivalenceSize].
func YuenEquivalenceSize(shift, low, high, sd, trim, alpha, power float64) int {
	if !(low < shift && shift < high) {
		return 0
	}
	return steadySize(power, 0, func(n int) float64 {
		return YuenEquivalencePower(n, shift, low, high, sd, trim, alpha)
	})
}

// steadySize is the smallest n from which on chance(n), which rises but for small
// steps back, stays at least power.
func steadySize(power, alpha float64, chance func(n int) float64) int {
	n := smallestSize(power, alpha, chance)
	if n == 0 {
		return 0
	}
	// The steps back come once in 1/trim values, and are less than what as many
	// more values bring.
	for n > 2 && chance(n-1) >= power {
		n--
	}
	for last := n + 12; last > n; last-- {
		if !(chance(last-1) >= power) {
			return last
		}
	}
	return n
}
