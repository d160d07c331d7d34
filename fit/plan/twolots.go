package plan

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

// trim is the part that the comparison of two lots leaves out of the mean at
// either end.
const trim = 0.2

// fewest is the smallest number of devices of a lot that are compared.
const fewest = 3

// ShiftRequest asks how many parts of either lot show a shift between them.
type ShiftRequest struct {
	Shift      float64 // V, true shift to be seen; NaN with N: not assumed
	SD         float64 // V, between devices of one lot
	Risk       float64 // of not seeing it
	Confidence float64 // of the interval that has to leave 0 out
	N          int     // devices of either lot; 0: how many is asked
	Lot        Lot     // where SD is from
}

// Shift is the answer to a [ShiftRequest]. Numbers are devices of either lot.
type Shift struct {
	ShiftRequest
	Needed     int     // by the trimmed means that lots are compared by; 0: none asked, or too many
	NeededT    int     // by plain means (Welch's test)
	Power      float64 // chance that N see Shift; NaN
	PowerT     float64 // by plain means
	Smallest   []Reach // smallest shifts that N see
	SDHigh     float64 // V, 90 % upper bound of SD where it is from a lot; NaN
	NeededHigh int     // Needed if that were the standard deviation
	TooMany    bool    // more than are planned with would be needed
}

// Reach is what is seen with a chance.
type Reach struct {
	Chance float64
	V      float64 // NaN: nothing that is up to 1000 standard deviations
}

// ToSee answers a [ShiftRequest] for two normal lots of one spread, by Yuen's test
// on 20 % trimmed means, which is what lots are compared by, and by Welch's on
// plain means. Errors: [Invalid]. Checked: TestShift.
func ToSee(r ShiftRequest) (*Shift, error) {
	err := firstError(
		above("sd", r.SD, "V", "--sd 80mV, the standard deviation between devices, or --from LOT"),
		fraction("risk", r.Risk, "--risk 20%"), fraction("confidence", r.Confidence, "--confidence 95%"),
		atLeast("n", r.N, fewest, "two lots are not compared with fewer than 3 of either"), atMost("n", r.N),
	)
	if err == nil && (r.N == 0 || !math.IsNaN(r.Shift)) {
		err = above("shift", r.Shift, "V", "--shift 50mV, the shift that must not be missed")
	}
	if err == nil && 1-r.Risk <= 1-r.Confidence {
		err = &Invalid{"risk", fmt.Sprintf("%s is no better than a guess", percent(r.Risk)), "--risk 20%"}
	}
	if err != nil {
		return nil, err
	}
	s := &Shift{ShiftRequest: r, Power: math.NaN(), PowerT: math.NaN(), SDHigh: math.NaN()}
	alpha, power := 1-r.Confidence, 1-r.Risk
	need := func(sd float64) int {
		return atFewest(stats.YuenSize(r.Shift, sd, trim, alpha, power))
	}
	if !math.IsNaN(r.Shift) {
		s.Needed = need(r.SD)
		s.NeededT = atFewest(welchSize(r.Shift, r.SD, alpha, power))
		s.TooMany = s.Needed == 0
		if s.SDHigh = sdHigh(r.Lot); s.SDHigh > 0 {
			s.NeededHigh = need(s.SDHigh)
		}
	}
	if r.N > 0 {
		if !math.IsNaN(r.Shift) {
			s.Power = stats.YuenPower(r.N, r.Shift, r.SD, trim, alpha)
			s.PowerT = stats.WelchPower(r.N, r.N, r.Shift, r.SD, r.SD, alpha, true)
		}
		for _, chance := range []float64{0.8, 0.9} {
			s.Smallest = append(s.Smallest, Reach{chance, r.SD * reach(chance, func(x float64) float64 {
				return stats.YuenPower(r.N, x, 1, trim, alpha)
			})})
		}
	}
	return s, nil
}

// SameRequest asks how many parts of either lot show that two lots are alike
// within a margin.
type SameRequest struct {
	Margin float64 // V
	SD     float64 // V, between devices of one lot
	Shift  float64 // V, true shift assumed; 0 as a rule
	Risk   float64 // of not showing it
	N      int     // devices of either lot; 0: how many is asked
	Lot    Lot     // where SD is from
}

// Same is the answer to a [SameRequest]. Numbers are devices of either lot.
type Same struct {
	SameRequest
	Level      float64 // of the interval that has to lie within the margin: 0.90
	Needed     int     // by the trimmed means that lots are compared by; 0: too many
	NeededT    int     // by plain means (Welch's test)
	Few        int     // a number that people start with, or N
	Chance     float64 // that Few show it
	ChanceT    float64 // by plain means
	Hopeless   bool    // Chance is below 1 in 10
	Smallest   []Reach // smallest margins that N show; none without N
	SDHigh     float64 // V, 90 % upper bound of SD where it is from a lot; NaN
	NeededHigh int     // Needed if that were the standard deviation
	TooMany    bool    // more than are planned with would be needed
}

// usual is the number of devices that people start with.
const usual = 6

// hopeless is the chance below which it is said that so few cannot show it.
const hopeless = 0.1

// sameAlpha is the level of either of the two one-sided tests.
const sameAlpha = 0.05

// ToShowSame answers a [SameRequest] for two normal lots of one spread, by two
// one-sided tests of Yuen's and of Welch's kind at 5 % each. Errors: [Invalid].
// Checked: TestSame.
func ToShowSame(r SameRequest) (*Same, error) {
	if math.IsNaN(r.Shift) {
		r.Shift = 0
	}
	err := firstError(
		above("margin", r.Margin, "V", "--margin 50mV, the largest shift that does not matter"),
		above("sd", r.SD, "V", "--sd 80mV, the standard deviation between devices, or --from LOT"),
		fraction("risk", r.Risk, "--risk 20%"),
		atLeast("n", r.N, fewest, "two lots are not compared with fewer than 3 of either"), atMost("n", r.N),
	)
	if err == nil && !(math.Abs(r.Shift) < r.Margin) {
		err = &Invalid{"shift", fmt.Sprintf("a true shift of %s is not within the margin of %s", volts(r.Shift), volts(r.Margin)), "a smaller --shift, a larger --margin, or no --shift"}
	}
	if err != nil {
		return nil, err
	}
	s := &Same{SameRequest: r, Level: 1 - 2*sameAlpha, Few: usual, SDHigh: sdHigh(r.Lot)}
	power := 1 - r.Risk
	need := func(sd float64) int {
		return atFewest(stats.YuenEquivalenceSize(r.Shift, -r.Margin, r.Margin, sd, trim, sameAlpha, power))
	}
	s.Needed = need(r.SD)
	s.NeededT = atFewest(stats.WelchEquivalenceSize(r.Shift, -r.Margin, r.Margin, r.SD, r.SD, sameAlpha, power))
	s.TooMany = s.Needed == 0
	if s.SDHigh > 0 {
		s.NeededHigh = need(s.SDHigh)
	}
	if r.N > 0 {
		s.Few = r.N
		for _, chance := range []float64{0.8, 0.9} {
			s.Smallest = append(s.Smallest, Reach{chance, math.Abs(r.Shift) + r.SD*reach(chance, func(x float64) float64 {
				m := x + math.Abs(r.Shift)/r.SD
				return stats.YuenEquivalencePower(r.N, math.Abs(r.Shift)/r.SD, -m, m, 1, trim, sameAlpha)
			})})
		}
	}
	s.Chance = stats.YuenEquivalencePower(s.Few, r.Shift, -r.Margin, r.Margin, r.SD, trim, sameAlpha)
	s.ChanceT = stats.WelchEquivalencePower(s.Few, s.Few, r.Shift, -r.Margin, r.Margin, r.SD, r.SD, sameAlpha)
	s.Hopeless = s.Chance < hopeless
	return s, nil
}

// volts writes a voltage as it would be given.
func volts(x float64) string {
	if math.Abs(x) < 1 {
		return fmt.Sprintf("%.6g mV", 1e3*x)
	}
	return fmt.Sprintf("%.6g V", x)
}

// atFewest is a size that is also enough to be compared at all; 0: too large.
func atFewest(n int) int {
	if n == 0 || n > mostParts {
		return 0
	}
	return max(n, fewest)
}

// welchSize is the smallest number of values of either lot with which Welch's test
// has the power.
func welchSize(shift, sd, alpha, power float64) int {
	n := stats.TwoSampleSize(shift/sd, alpha, power, true)
	for k := 0; n > 0 && k < 20; k++ {
		if stats.WelchPower(n, n, shift, sd, sd, alpha, true) >= power {
			break
		}
		n++
	}
	return n
}

// sdHigh is the upper bound of the standard deviation of a normal lot, at 90 %.
func sdHigh(l Lot) float64 {
	if l.N < 2 || !(l.SD > 0) {
		return math.NaN()
	}
	df := float64(l.N - 1)
	return l.SD * math.Sqrt(df/stats.ChiSquareQuantile(0.1, df))
}

// reach is the least x at which chance, which rises with it, is reached, to a part
// in 1000.
func reach(chance float64, of func(x float64) float64) float64 {
	lo, hi := 0.0, 1.0
	for !(of(hi) >= chance) {
		lo, hi = hi, 2*hi
		if hi > 1000 {
			return math.NaN()
		}
	}
	for hi-lo > 1e-3*hi {
		if mid := (lo + hi) / 2; of(mid) >= chance {
			hi = mid
		} else {
			lo = mid
		}
	}
	return hi
}
