package invented

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store/record"
)

// Against are the choices of [Compared].
type Against struct {
	Margin float64 // V; 0: none
	After  bool    // the margin was set when readings were known
	Paired bool    // by the names of the devices
	TooFew bool    // nothing could be told
}

// Compared makes a comparison of two invented lots for laying out: plain means
// with intervals of two and 1.7 standard errors. No rule of a real comparison is
// in it but how the verdict follows from the intervals.
func Compared(reference, candidate report.Sheet, o Against) report.Compared {
	nan := math.NaN()
	by := candidate.SortedBy
	c := compare.Comparison{
		Reference: reference.Lot.Name, Candidate: candidate.Lot.Name, Quantity: by, Test: "invented test on means", Level: 0.95,
		Shift: nan, Low: nan, High: nan, DF: nan, P: nan, MarginLow: nan, MarginHigh: nan, Margin: nan, MarginSet: compare.None,
		NotExcluded: nan, Raw: nan, Spread: compare.Interval{Value: nan, Low: nan, High: nan}, Common: compare.Common{U: nan, OffsetU: nan},
		Centre: [2]float64{nan, nan}, SD: [2]float64{nan, nan}, Verdict: compare.TooFew,
	}
	if o.Margin > 0 {
		c.Margin, c.MarginSet = o.Margin, compare.Before
		if o.After {
			c.MarginSet = compare.After
		}
	}
	var se [2]float64
	for i, s := range []report.Sheet{reference, candidate} {
		x, counts := values(s, by)
		c.Counts[i] = counts
		if len(x) > 2 {
			c.Centre[i], c.SD[i] = moments(x)
			se[i] = c.SD[i] / math.Sqrt(float64(len(x)))
		}
	}
	c.Sentence = "Too few devices have a value to tell anything of the lots."
	c.MoreText = "No number can be given before a spread is known."
	if o.TooFew || math.IsNaN(c.Centre[0]+c.Centre[1]) {
		c.Warnings = []fit.Warning{{Code: fit.CodeNTooSmall, Text: "fewer than 3 devices of a lot have a value"}}
		return report.Compared{Reference: &reference, Comparison: c}
	}
	e := math.Hypot(se[0], se[1])
	c.Shift = c.Centre[1] - c.Centre[0]
	c.Low, c.High, c.DF = c.Shift-2*e, c.Shift+2*e, float64(c.Counts[0].WithValue+c.Counts[1].WithValue-2)
	c.P = math.Erfc(math.Abs(c.Shift) / e / math.Sqrt2)
	c.NotExcluded = math.Max(math.Abs(c.Low), math.Abs(c.High))
	c.Verdict = compare.NoDifference
	if c.Low > 0 || c.High < 0 {
		c.Verdict = compare.Differs
	}
	if o.Margin > 0 {
		c.MarginLow, c.MarginHigh, c.Verdict = c.Shift-1.7*e, c.Shift+1.7*e, compare.TooFew
		switch {
		case c.MarginLow > -o.Margin && c.MarginHigh < o.Margin:
			c.Verdict = compare.InsideMargin
		case c.MarginLow > o.Margin || c.MarginHigh < -o.Margin:
			c.Verdict = compare.OutsideMargin
		default:
			c.More = 120
		}
	}
	c.Sentence = fmt.Sprintf("%s: the gate bias of lot %s lies %.1f mV from that of lot %s.", c.Verdict, c.Candidate, 1e3*c.Shift, c.Reference)
	c.MoreText = "the number takes the spread of these two lots for that of the next"
	c.Spread, c.SpreadTest = compare.Interval{Value: c.SD[1] / c.SD[0], Low: 0.8 * c.SD[1] / c.SD[0], High: 1.25 * c.SD[1] / c.SD[0]}, "invented test on spreads"
	c.Secondary = []compare.Secondary{{Test: "invented test on ranks", Shift: compare.Interval{Value: 0.0121, Low: 0.0031, High: 0.0212}, Statistic: 412, P: c.P * 1.1, PAdjusted: math.Min(1, c.P*2.2)}, {Test: "invented test on whole distributions", Shift: compare.Interval{Value: math.NaN(), Low: math.NaN(), High: math.NaN()}, Statistic: 0.31, P: nan, PAdjusted: nan}}
	c.Common = compare.Common{U: 0.0013, Basis: "sessions of one bench", OffsetU: nan}
	c.Curves = band(reference, candidate)
	c.Gain = &compare.Gain{Key: fit.KeyBeta, Percent: compare.Interval{Value: 1.2, Low: -0.4, High: 2.8}, P: 0.14, N: [2]int{c.Counts[0].WithValue, c.Counts[1].WithValue}, Adjusted: true, Text: "at equal threshold no difference of the gain factor is seen: +1.2 %, 95 % interval -0.4 to +2.8 %"}
	c.Options = []compare.Option{
		{Name: "take it as it is", Text: fmt.Sprintf("with the old network the idle current moves from 250 mA to %.0f mA at the centre", 250*(1-c.Shift*2)), Rule: "covered by the margin"},
		{Name: "re-adjust", Text: fmt.Sprintf("the trimmers move by %.0f mV at the centre", 1e3*c.Shift)},
		{Name: "send back", Text: "no rule of yours is broken", Rule: "outside-margin: not met"},
	}
	if o.Paired {
		c.Paired = &compare.Paired{Pairs: min(c.Counts[0].WithValue, c.Counts[1].WithValue), Why: "34 serials stand in both lots and their values go together", OnlyRef: []string{"D39"}, OnlyNew: []string{"X1", "X2"}, SD: 0.0011, Own: compare.Interval{Value: c.Shift + 0.002, Low: c.Shift + 0.001, High: c.Shift + 0.003}}
		c.Raw = c.Shift + 0.002
		c.Common = compare.Common{U: 0.0004, Basis: "control parts", Controls: 2, Offset: -0.002, OffsetU: 0.0004}
	}
	c.Warnings = []fit.Warning{{Code: fit.CodeHeatingNotChecked, Text: "heating was not checked in either lot"}}
	return report.Compared{Reference: &reference, Comparison: c}
}

// values gives the values of a lot that take part, and what its devices are.
func values(s report.Sheet, by fit.Key) ([]float64, compare.Counts) {
	var x []float64
	var n compare.Counts
	for _, d := range s.Devices {
		q := d.Result.At(by)
		switch st := d.State(); {
		case d.Role == record.Control:
			n.Control++
			continue
		case st == fit.Excluded, st == fit.Open, st == fit.Shorted, st == fit.WrongWayRound:
			n.Aside++
			continue
		case st == fit.Above:
			n.Above++
		case q.Ok():
			x = append(x, q.Value)
			n.WithValue++
		default:
			n.Without++
		}
		n.N++
	}
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			n.Flagged++
		}
	}
	return x, n
}

func moments(x []float64) (mean, sd float64) {
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		sd += (v - mean) * (v - mean) / float64(len(x)-1)
	}
	return mean, math.Sqrt(sd)
}

// band is the difference of the mean curves with two and a half standard errors.
func band(reference, candidate report.Sheet) *compare.Band {
	b := &compare.Band{Level: 0.95, Critical: 2.5, Text: "the shift is the same at every current within the band"}
	for _, i := range fit.LevelCurrents {
		var x [2][]float64
		for k, s := range []report.Sheet{reference, candidate} {
			for _, d := range s.Devices {
				for _, l := range d.Result.Levels {
					if l.I == i {
						x[k] = append(x[k], l.Vg)
					}
				}
			}
		}
		if len(x[0]) < 3 || len(x[1]) < 3 {
			continue
		}
		m0, s0 := moments(x[0])
		m1, s1 := moments(x[1])
		e := 2.5 * math.Sqrt(s0*s0/float64(len(x[0]))+s1*s1/float64(len(x[1])))
		b.Points = append(b.Points, compare.BandPoint{I: i, Shift: m1 - m0, Low: m1 - m0 - e, High: m1 - m0 + e, Reference: len(x[0]), Candidate: len(x[1])})
		b.Differs = b.Differs || m1-m0 > e || m0-m1 > e
	}
	if len(b.Points) == 0 {
		return nil
	}
	return b
}

// Trend is an invented run of n lots, the last one outside its limits.
func Trend(n int) *compare.Trend {
	t := &compare.Trend{By: fit.KeyVgsIdle, Centre: 3.41, Low: 3.37, High: 3.45, Provisional: n < 20, Text: []string{"fewer than 20 lots: the limits are provisional"}}
	for i := range n {
		t.Lots = append(t.Lots, compare.TrendLot{Name: fmt.Sprint(2600 + i), At: fmt.Sprintf("2026-%02d-04", 1+i%12), N: 20 + i, Centre: 3.41 + 0.012*math.Sin(float64(i)*2.3), U: 0.006, SD: 0.06})
	}
	if n > 1 {
		t.Lots[n-1].Centre, t.Lots[n-1].Outside = 3.47, true
		t.Pairs = []compare.PairOfLots{{A: t.Lots[0].Name, B: t.Lots[n-1].Name, Shift: 0.05, Low: 0.02, High: 0.08, P: 0.0004, PAdjusted: 0.002}}
	}
	return t
}
