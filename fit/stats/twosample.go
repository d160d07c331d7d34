package stats

import "math"

// Summary is what the t tests need to know of a sample.
type Summary struct {
	N        int
	Mean, SD float64 // in the unit of the values; SD with divisor n-1
}

// SummaryOf is the [Summary] of x, NaN where [MeanSD] is.
func SummaryOf(x []float64) Summary {
	m, sd := MeanSD(x)
	return Summary{N: len(x), Mean: m, SD: sd}
}

// TTest is an estimate with the t test of it against a value named before, and
// its interval. All numbers are NaN where there are too few values, no spread at
// all, or values that are no finite numbers.
type TTest struct {
	Estimate  float64 // a mean, or that of the first sample minus that of the second; unit of the values
	SE        float64 // its standard error
	DF        float64 // degrees of freedom
	Statistic float64 // (Estimate - value of the hypothesis) / SE
	P         float64 // two-sided
	Low, High float64 // interval at Level
	Level     float64 // confidence, 0..1
	Effect    float64 // (Estimate - value of the hypothesis) / standard deviation: Cohen's d
	Hedges    float64 // Effect times Γ(f/2)/(√(f/2) Γ((f-1)/2)), f its degrees of freedom: less biased
}

// tTest fills in all that follows from estimate, standard error and degrees of
// freedom; sd and its degrees of freedom are those of the effect size.
func tTest(estimate, null, se, df, level, sd, sdDF float64) TTest {
	nan := math.NaN()
	if !(se > 0) || math.IsInf(se, 0) || !(df > 0) || math.IsNaN(estimate-null) || math.IsInf(estimate-null, 0) || !(level > 0 && level < 1) {
		return TTest{nan, nan, nan, nan, nan, nan, nan, level, nan, nan}
	}
	r := TTest{Estimate: estimate, SE: se, DF: df, Level: level}
	r.Statistic = (estimate - null) / se
	r.P = 2 * TUpper(math.Abs(r.Statistic), df)
	half := UpperT((1-level)/2, df) * se
	r.Low, r.High = estimate-half, estimate+half
	r.Effect = (estimate - null) / sd
	r.Hedges = r.Effect * smallSample(sdDF)
	return r
}

// smallSample is Γ(f/2) / (√(f/2) Γ((f-1)/2)); NaN for f <= 1.
func smallSample(f float64) float64 {
	if !(f > 1) {
		return math.NaN()
	}
	if math.IsInf(f, 1) {
		return 1
	}
	// By way of chiScale, whose large parts have cancelled.
	a, b := f/2, (f-1)/2
	return math.Exp(b*math.Log1p(0.5/b)-0.5) * chiScale(b) / chiScale(a)
}

// OneSampleT tests the mean of x against null.
//
// Inputs: x, any order, not modified; level of the interval. Effect is measured in
// standard deviations of x. Checked: TestMeanInterval.
func OneSampleT(x []float64, null, level float64) TTest {
	return OneSampleTOf(SummaryOf(x), null, level)
}

// OneSampleTOf is [OneSampleT] of a sample of which only the summary is known.
func OneSampleTOf(s Summary, null, level float64) TTest {
	n := float64(s.N)
	return tTest(s.Mean, null, s.SD/math.Sqrt(n), n-1, level, s.SD, n-1)
}

// PairedT tests the mean of the differences x[i]-y[i] against 0, for values taken
// twice of the same things. Effect is measured in standard deviations of the
// differences. All NaN for slices of different lengths. Checked: TestPairedT.
func PairedT(x, y []float64, level float64) TTest {
	return OneSampleT(pairDifferences(x, y), 0, level)
}

// pairDifferences is x-y, nil for slices of different lengths.
func pairDifferences(x, y []float64) []float64 {
	if len(x) != len(y) {
		return nil
	}
	d := make([]float64, len(x))
	for i := range d {
		d[i] = x[i] - y[i]
	}
	return d
}

// PooledT tests the difference of the means of x and y against 0, taking both to
// have one standard deviation. With unequal ones and unequal sizes its level is
// wrong: [WelchT] is not much weaker.
//
// Inputs: any order, not modified. Effect is measured in pooled standard
// deviations. Checked: TestTwoMeans.
func PooledT(x, y []float64, level float64) TTest {
	return PooledTOf(SummaryOf(x), SummaryOf(y), level)
}

// PooledTOf is [PooledT] of samples of which only the summaries are known.
func PooledTOf(x, y Summary, level float64) TTest {
	sd, df := pooledSD(x, y)
	se := sd * math.Sqrt(1/float64(x.N)+1/float64(y.N))
	return tTest(x.Mean-y.Mean, 0, se, df, level, sd, df)
}

// pooledSD is the standard deviation of two samples about their own means, with
// its degrees of freedom.
func pooledSD(x, y Summary) (sd, df float64) {
	df = float64(x.N + y.N - 2)
	squares := float64(x.N-1)*x.SD*x.SD + float64(y.N-1)*y.SD*y.SD
	return math.Sqrt(squares / df), df
}

// WelchT tests the difference of the means of x and y against 0, each with its
// own standard deviation, with degrees of freedom after Satterthwaite.
//
// Inputs: any order, not modified. Effect is measured in pooled standard
// deviations, as in [PooledT], so that the two can be compared. Source: Welch,
// "The generalization of 'Student's' problem when several different population
// variances are involved", Biometrika 34 (1947) 28-35. Checked: TestTwoMeans.
func WelchT(x, y []float64, level float64) TTest {
	return WelchTOf(SummaryOf(x), SummaryOf(y), level)
}

// WelchTOf is [WelchT] of samples of which only the summaries are known.
func WelchTOf(x, y Summary, level float64) TTest {
	sd, sdDF := pooledSD(x, y)
	se, df := satterthwaite(x.SD*x.SD/float64(x.N), float64(x.N-1), y.SD*y.SD/float64(y.N), float64(y.N-1))
	return tTest(x.Mean-y.Mean, 0, se, df, level, sd, sdDF)
}

// satterthwaite is the standard error of the sum of two independent values with
// variances v and w, known with f and g degrees of freedom, and its own degrees
// of freedom. NaN unless both are at least 1.
func satterthwaite(v, f, w, g float64) (se, df float64) {
	if !(f >= 1) || !(g >= 1) {
		return math.NaN(), math.NaN()
	}
	// Shares of the variance, so that squares of small numbers do not vanish.
	a, b := v/(v+w), w/(v+w)
	return math.Sqrt(v + w), 1 / (a*a/f + b*b/g)
}
