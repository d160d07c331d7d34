package stats

import "math"

// meanSquare is one term of a sum of mean squares with constant factors: of the mean
// square MS with DF degrees of freedom, taken Factor times (below 0: subtracted).
type meanSquare struct {
	Factor, MS, DF float64
}

// sumOfMeanSquares is the value of the sum.
func sumOfMeanSquares(terms []meanSquare) float64 {
	s := 0.0
	for _, t := range terms {
		s += t.Factor * t.MS
	}
	return s
}

// mlsInterval is the interval of a sum of expected mean squares by the modified large
// sample method: as a normal interval, but with the half lengths to both sides chosen
// so that it is exact where one mean square has many more degrees of freedom than the
// others, or where only one counts. For a single mean square it is the interval by
// chi-square; for a difference of two it ends at 0 just where the F test does.
//
// Source: Graybill and Wang, "Confidence intervals on nonnegative linear combinations
// of variances", Journal of the American Statistical Association 75 (1980) 869-873;
// Ting, Burdick, Graybill, Jeyaratnam and Lu, "Confidence intervals on linear
// combinations of variance components that are unrestricted in sign", Journal of
// Statistical Computation and Simulation 35 (1990) 135-143 (both from memory). Checked:
// TestIntervalOfOneAndTwo, TestGaugeIntervalsHold.
func mlsInterval(terms []meanSquare, level float64) (low, high float64) {
	if !(level > 0 && level < 1) {
		return math.NaN(), math.NaN()
	}
	// The upper end is the lower one of the sum with its signs turned.
	turned := make([]meanSquare, len(terms))
	for i, t := range terms {
		turned[i] = t
		turned[i].Factor = -t.Factor
	}
	return mlsLower(terms, (1-level)/2), -mlsLower(turned, (1-level)/2)
}

// mlsLower is the lower end; the value lies below it with probability alpha.
func mlsLower(terms []meanSquare, alpha float64) float64 {
	// Of a mean square that adds, the part that may be missing; of one that takes
	// away, the part by which it may be too small.
	part := func(t meanSquare) float64 {
		if t.Factor > 0 {
			return 1 - t.DF/ChiSquareQuantile(1-alpha, t.DF)
		}
		return t.DF/ChiSquareQuantile(alpha, t.DF) - 1
	}
	var plus, minus []meanSquare
	for _, t := range terms {
		if t.Factor > 0 && t.MS != 0 {
			plus = append(plus, t)
		} else if t.Factor < 0 && t.MS != 0 {
			minus = append(minus, t)
		} else if math.IsNaN(t.Factor * t.MS) {
			return math.NaN()
		}
	}
	v := 0.0
	for _, t := range append(append([]meanSquare{}, plus...), minus...) {
		a := part(t) * t.Factor * t.MS
		v += a * a
	}
	for i, p := range plus {
		g := part(p)
		for _, m := range minus {
			h := part(m)
			f := FQuantile(1-alpha, p.DF, m.DF)
			cross := ((f-1)*(f-1) - g*g*f*f - h*h) / f
			v += cross * p.Factor * p.MS * -m.Factor * m.MS
		}
		for _, o := range plus[i+1:] {
			if len(minus) == 0 { // the terms between two that add belong to sums of both signs
				continue
			}
			d := p.DF + o.DF
			both := 1 - d/ChiSquareQuantile(1-alpha, d)
			k := part(o)
			cross := (both*both*d*d/(p.DF*o.DF) - g*g*p.DF/o.DF - k*k*o.DF/p.DF) / float64(len(plus)-1)
			v += cross * p.Factor * p.MS * o.Factor * o.MS
		}
	}
	return sumOfMeanSquares(terms) - math.Sqrt(math.Max(0, v))
}
