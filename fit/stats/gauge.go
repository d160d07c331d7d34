package stats

import (
	"errors"
	"fmt"
	"math"
)

// ErrGaugeStudy is wrapped by errors about readings from which no gauge study can be
// made.
var ErrGaugeStudy = errors.New("no gauge study")

// Component is one part of the variation in a gauge study.
type Component struct {
	// Variance, in the unit of the readings squared, is never below 0, and that of a
	// component made of others is their sum. Estimate is what the mean squares give:
	// below 0, and then Negative, where the component is lost in the scatter.
	Variance, Estimate float64
	Negative           bool
	SD                 float64 // root of Variance
	Low, High          float64 // interval of SD, by the modified large sample method unless said otherwise
	// Shares of the total, in percent. Those of the variance add up to 100, those of
	// the standard deviation do not.
	PercentVariance, PercentSD float64
}

// EffectTest is a line of the table of a gauge study with its test.
type EffectTest struct {
	Squares
	F, P float64 // against Within for the interaction; for the others against it, or Error where Pooled
}

// Gauge is the outcome of a repeatability study; numbers that the form of the study
// does not have are NaN.
type Gauge struct {
	Parts, Operators, N int  // operators (or fixtures): 0 in the one-factor form; N readings in all
	Pooled              bool // the interaction was counted as scatter
	// Lines of the table. Error is what repeatability is taken from: Within, pooled
	// with Interaction where Pooled.
	Part, Operator, Interaction EffectTest
	Within, Error, Total        Squares

	Repeatability   Component // interval by chi-square, exact
	OperatorAlone   Component // between operators, over all parts
	InteractionPart Component // operators differing more on some parts than on others; 0 where Pooled
	Reproducibility Component // OperatorAlone and InteractionPart together
	GaugeTotal      Component // repeatability and reproducibility together
	PartToPart      Component
	All             Component // the total that the percentages are of
	// Categories of parts that can be told apart: 1.41 times SD of PartToPart over SD
	// of GaugeTotal, cut to a whole number; +Inf without gauge variation.
	Categories float64
}

// categoryFactor is √2 as it is in general use for the number of categories (common
// practice; AIAG, "Measurement Systems Analysis", 4th ed. 2010).
const categoryFactor = 1.41

// GaugeCrossed is the study in which every operator (or fixture) reads every part
// several times: y[part][operator][repeat]. Parts and operators are both taken as
// drawn from many, effects and scatter as normal.
//
// The interaction is counted as scatter where its test gives a P above poolAbove:
// 0.25 is usual, 0 always does (a model without interaction), 1 never. With one
// reading each it has to be. Mean squares give the components:
//
//	repeatability  MSe                     interaction  (MSpo - MSe)/repeats
//	operator       (MSo - MSpo)/(parts repeats)
//	part           (MSp - MSpo)/(operators repeats)
//
// with MSe in place of MSpo when pooled; each that comes out below 0 counts as 0 and
// is marked Negative. P and F of part and operator are against the same mean square.
//
// Inputs: y, not modified, two parts and two operators or more, equal numbers of
// repeats; level of the intervals between 0 and 1 (0.95). They end at 0 where they
// would go below. Errors: [ErrGaugeStudy] for any other shape and values that are not
// finite. Source: AIAG, "Measurement Systems Analysis", 4th ed. 2010, III-B;
// Montgomery, "Introduction to Statistical Quality Control", ch. 8; intervals:
// Burdick, Borror and Montgomery, "Design and Analysis of Gauge R&R Studies", 2005
// (from memory). Checked: TestGaugePublished, TestGaugeIntervalsHold,
// TestGaugeProperties.
func GaugeCrossed(y [][][]float64, poolAbove, level float64) (Gauge, error) {
	parts, operators, repeats, err := crossedShape(y)
	if err != nil {
		return Gauge{}, err
	}
	p, o, r := float64(parts), float64(operators), float64(repeats)
	g := Gauge{Parts: parts, Operators: operators, N: parts * operators * repeats}
	c := crossedSums(y)
	g.Part.Squares = squares(o*r*c.part, p-1)
	g.Operator.Squares = squares(p*r*c.operator, o-1)
	g.Interaction.Squares = squares(r*c.cell, (p-1)*(o-1))
	g.Within = squares(c.within, p*o*(r-1))
	g.Total = squares(g.Part.SS+g.Operator.SS+g.Interaction.SS+g.Within.SS, p*o*r-1)
	g.Interaction.F, g.Interaction.P = fTest(g.Interaction.Squares, g.Within)
	g.Pooled = repeats == 1 || g.Interaction.P > poolAbove || math.IsNaN(g.Interaction.P)

	g.Error = g.Within
	against := g.Interaction.Squares
	if g.Pooled {
		g.Error = squares(g.Within.SS+g.Interaction.SS, g.Within.DF+g.Interaction.DF)
		against = g.Error
	}
	g.Part.F, g.Part.P = fTest(g.Part.Squares, against)
	g.Operator.F, g.Operator.P = fTest(g.Operator.Squares, against)

	// Factors of part, operator, interaction and error mean squares in each component.
	sum := func(part, operator, interaction, scatter float64) Component {
		terms := []meanSquare{{part, g.Part.MS, g.Part.DF}, {operator, g.Operator.MS, g.Operator.DF}}
		if g.Pooled {
			terms = append(terms, meanSquare{interaction + scatter, g.Error.MS, g.Error.DF})
		} else {
			terms = append(terms, meanSquare{interaction, against.MS, against.DF}, meanSquare{scatter, g.Error.MS, g.Error.DF})
		}
		return component(terms, level)
	}
	g.Repeatability = sum(0, 0, 0, 1)
	g.OperatorAlone = sum(0, 1/(p*r), -1/(p*r), 0)
	g.PartToPart = sum(1/(o*r), 0, -1/(o*r), 0)
	if g.Pooled {
		g.InteractionPart = Component{Low: math.NaN(), High: math.NaN()}
		g.Reproducibility = g.OperatorAlone
		g.GaugeTotal = sum(0, 1/(p*r), -1/(p*r), 1)
		g.All = sum(1/(o*r), 1/(p*r), -1/(o*r)-1/(p*r), 1)
	} else {
		g.InteractionPart = sum(0, 0, 1/r, -1/r)
		g.Reproducibility = sum(0, 1/(p*r), 1/r-1/(p*r), -1/r)
		g.GaugeTotal = sum(0, 1/(p*r), 1/r-1/(p*r), 1-1/r)
		g.All = sum(1/(o*r), 1/(p*r), 1/r-1/(o*r)-1/(p*r), 1-1/r)
	}
	g.Reproducibility.of(g.OperatorAlone, g.InteractionPart)
	g.GaugeTotal.of(g.Repeatability, g.Reproducibility)
	g.share()
	return g, nil
}

// GaugeOneFactor is the study without operators: readings[part] holds the repeats of
// one part, of any number; empty ones take no part. Part and error mean squares give
// repeatability MSe and part (MSp - MSe)/n0 with n0 = (N - Σn²/N)/(parts-1), which is
// the number of repeats where all have the same.
//
// With different numbers the interval of the part component is taken from the
// scatter of the plain means of the parts and the harmonic mean of the numbers: close
// to its level, but the estimate need not lie in its middle.
//
// Errors: [ErrGaugeStudy] for fewer than two parts, none with two readings, and values
// that are not finite. Source: Searle, Casella and McCulloch, "Variance Components",
// 1992; intervals: Thomas and Hultquist, "Interval estimation for the unbalanced case
// of the one-way random effects model", Annals of Statistics 6 (1978) 582-587 (both
// from memory). Checked: TestGaugeOneFactor, TestGaugeIntervalsHold.
func GaugeOneFactor(readings [][]float64, level float64) (Gauge, error) {
	nan := math.NaN()
	a := AnovaOneWay(readings)
	for i, r := range readings {
		if !finite(r) {
			return Gauge{}, fmt.Errorf("part %d: a reading is not finite: %w", i+1, ErrGaugeStudy)
		}
	}
	switch {
	case a.Groups < 2:
		return Gauge{}, fmt.Errorf("%d parts with readings, need 2: %w", a.Groups, ErrGaugeStudy)
	case a.Within.DF < 1:
		return Gauge{}, fmt.Errorf("no part was read twice: %w", ErrGaugeStudy)
	}
	none := Component{nan, nan, false, nan, nan, nan, nan, nan}
	noTest := EffectTest{Squares{nan, nan, nan}, nan, nan}
	g := Gauge{
		Parts: a.Groups, N: a.N, Operator: noTest, Interaction: noTest,
		Part: EffectTest{a.Between, a.F, a.P}, Within: a.Within, Error: a.Within,
		Total:         squares(a.Between.SS+a.Within.SS, float64(a.N-1)),
		OperatorAlone: none, InteractionPart: none, Reproducibility: none,
	}
	k, n := float64(a.Groups), float64(a.N)
	var square, inverse float64
	var means []float64
	balanced := true
	for _, r := range readings {
		if m := float64(len(r)); m > 0 {
			square += m * m
			inverse += 1 / m
			means = append(means, Mean(r))
			balanced = balanced && m == n/k
		}
	}
	n0 := (n - square/n) / (k - 1)
	scatter := meanSquare{1, a.Within.MS, a.Within.DF}
	g.Repeatability = component([]meanSquare{scatter}, level)
	g.GaugeTotal = g.Repeatability
	parts := func(ms, n0, scatter float64) []meanSquare {
		return []meanSquare{{1 / n0, ms, k - 1}, {scatter - 1/n0, a.Within.MS, a.Within.DF}}
	}
	g.PartToPart = component(parts(a.Between.MS, n0, 0), level)
	g.All = component(parts(a.Between.MS, n0, 1), level)
	if !balanced {
		nh := k / inverse
		sd := SD(means)
		g.PartToPart.interval(parts(nh*sd*sd, nh, 0), level)
		g.All.interval(parts(nh*sd*sd, nh, 1), level)
	}
	g.share()
	return g, nil
}

// crossedShape checks a crossed study and gives its numbers.
func crossedShape(y [][][]float64) (parts, operators, repeats int, err error) {
	if len(y) < 2 || len(y[0]) < 2 || len(y[0][0]) < 1 {
		return 0, 0, 0, fmt.Errorf("need 2 parts, 2 operators and a reading of each: %w", ErrGaugeStudy)
	}
	parts, operators, repeats = len(y), len(y[0]), len(y[0][0])
	for i, p := range y {
		if len(p) != operators {
			return 0, 0, 0, fmt.Errorf("part %d: read by %d operators, part 1 by %d: %w", i+1, len(p), operators, ErrGaugeStudy)
		}
		for j, cell := range p {
			if len(cell) != repeats {
				return 0, 0, 0, fmt.Errorf("part %d, operator %d: %d readings, part 1 has %d of operator 1: %w", i+1, j+1, len(cell), repeats, ErrGaugeStudy)
			}
			if !finite(cell) {
				return 0, 0, 0, fmt.Errorf("part %d, operator %d: a reading is not finite: %w", i+1, j+1, ErrGaugeStudy)
			}
		}
	}
	return parts, operators, repeats, nil
}

// crossed are sums of squares of the means of parts, of operators, of cells about
// both, and of readings about their cell.
type crossed struct{ part, operator, cell, within float64 }

func crossedSums(y [][][]float64) crossed {
	var c crossed
	parts, operators := len(y), len(y[0])
	// Differences to a value amid all are small and mostly exact.
	var all []float64
	for _, p := range y {
		for _, cell := range p {
			all = append(all, cell...)
		}
	}
	mid := Mean(all)
	cell := make([][]float64, parts)
	for i, p := range y {
		cell[i] = make([]float64, operators)
		for j, readings := range p {
			var ss float64
			cell[i][j], ss = about(readings, mid)
			c.within += ss
		}
	}
	byPart, byOperator := make([]float64, parts), make([]float64, operators)
	for i := range cell {
		byPart[i] = Mean(cell[i])
		for j, v := range cell[i] {
			byOperator[j] += v / float64(parts)
		}
	}
	grand := Mean(byPart)
	_, c.part = about(byPart, grand)
	_, c.operator = about(byOperator, grand)
	for i := range cell {
		for j, v := range cell[i] {
			d := v - byPart[i] - byOperator[j] + grand
			c.cell += d * d
		}
	}
	return c
}

// fTest is the test of one mean square against another.
func fTest(s, against Squares) (f, p float64) {
	f = s.MS / against.MS
	return f, FUpper(f, s.DF, against.DF)
}

// component is the component with that sum of mean squares, and its interval.
func component(terms []meanSquare, level float64) Component {
	e := sumOfMeanSquares(terms)
	c := Component{Estimate: e, Negative: e < 0, Variance: math.Max(0, e)}
	c.SD = math.Sqrt(c.Variance)
	c.interval(terms, level)
	return c
}

func (c *Component) interval(terms []meanSquare, level float64) {
	lo, hi := mlsInterval(terms, level)
	c.Low, c.High = math.Sqrt(math.Max(0, lo)), math.Sqrt(math.Max(0, hi))
}

// of makes c the sum of components of which each is at least 0, so that the parts that
// are reported add up.
func (c *Component) of(a, b Component) {
	c.Variance = a.Variance + b.Variance
	c.SD = math.Sqrt(c.Variance)
}

// share fills in the total, the shares of it and the categories.
func (g *Gauge) share() {
	g.All.of(g.GaugeTotal, g.PartToPart)
	for _, c := range []*Component{&g.Repeatability, &g.OperatorAlone, &g.InteractionPart, &g.Reproducibility, &g.GaugeTotal, &g.PartToPart, &g.All} {
		c.PercentVariance = 100 * c.Variance / g.All.Variance
		c.PercentSD = 100 * c.SD / g.All.SD
	}
	g.Categories = math.Trunc(categoryFactor * g.PartToPart.SD / g.GaugeTotal.SD)
}
