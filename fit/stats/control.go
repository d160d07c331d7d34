package stats

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// ChartConstants are the factors of control charts for subgroups of N normal values;
// all without unit. The letters in brackets are those in general use.
type ChartConstants struct {
	N         int     // values in a subgroup
	MeanRange float64 // (d2) mean of the range, in standard deviations
	SDRange   float64 // (d3) standard deviation of the range, in standard deviations
	MeanSD    float64 // (c4) mean of the sample standard deviation, in standard deviations
	A2, A3    float64 // limits of the mean: that many mean ranges, or mean standard deviations
	B3, B4    float64 // limits of the standard deviation, in mean standard deviations
	D3, D4    float64 // limits of the range, in mean ranges
}

// ChartConstantsOf gives the factors for three standard deviations on either side;
// lower limits that come out below 0 are 0.
//
//	d2 = E w     d3² = E w² - d2²     c4 = √(2/(n-1)) Γ(n/2) / Γ((n-1)/2)
//	A2 = 3/(d2 √n)   A3 = 3/(c4 √n)   B3, B4 = 1 ∓ 3 √(1-c4²)/c4   D3, D4 = 1 ∓ 3 d3/d2
//
// with w the range of n standard normal values: E w = ∫ P(w > x) dx and E w² = 2 ∫ x
// P(w > x) dx. Inputs: n at least 2. Result: NaN below. Relative error below 1e-11.
// Source: Shewhart (1931), ASTM manual (from memory; the integrals are elementary).
// Checked: TestChartConstants against published tables, closed forms for n of 2 and
// 3, and another tool.
func ChartConstantsOf(n int) ChartConstants {
	c := ChartConstants{N: n, MeanRange: math.NaN(), SDRange: math.NaN(), MeanSD: math.NaN()}
	if n >= 2 {
		c.MeanRange, c.SDRange = rangeMoments(n)
		c.MeanSD = meanSD(float64(n))
	}
	root := math.Sqrt(float64(n))
	c.A2, c.A3 = 3/(c.MeanRange*root), 3/(c.MeanSD*root)
	spread := 3 * math.Sqrt((1-c.MeanSD)*(1+c.MeanSD)) / c.MeanSD
	c.B3, c.B4 = max(0, 1-spread), 1+spread
	spread = 3 * c.SDRange / c.MeanRange
	c.D3, c.D4 = max(0, 1-spread), 1+spread
	return c
}

// rangeMoments are mean and standard deviation of the range of n normal values.
func rangeMoments(n int) (mean, sd float64) {
	// Beyond this the range lies with a probability below n² exp(-36).
	far := 12 + 2*math.Sqrt(math.Log(float64(n)))
	const points = 100
	x, w := make([]float64, points), make([]float64, points)
	quad.Legendre{}.FixedLocations(x, w, 0, far)
	var first, second float64
	for i := range x {
		p := normalRange(x[i], n, true)
		first += w[i] * p
		second += w[i] * 2 * x[i] * p
	}
	return first, math.Sqrt(second - first*first)
}

// meanSD is c4.
func meanSD(n float64) float64 {
	a, _ := math.Lgamma(n / 2)
	b, _ := math.Lgamma((n - 1) / 2)
	if n > 1000 {
		// The difference of two large logarithms loses what the series has.
		m := n - 1
		return 1 - 1/(4*m) + 1/(32*m*m) + 5/(128*m*m*m)
	}
	return math.Sqrt(2/(n-1)) * math.Exp(a-b)
}

// ChartLimits are the lines of a control chart, in the unit of what is plotted.
type ChartLimits struct {
	Low, Center, High float64
}

// Outside gives the indices of the values beyond the limits; those on them and NaN
// are not.
func (l ChartLimits) Outside(x []float64) []int {
	var out []int
	for i, v := range x {
		if v < l.Low || v > l.High {
			out = append(out, i)
		}
	}
	return out
}

// Chart is what a control chart is drawn from.
type Chart struct {
	Points, Spreads []float64   // what is plotted: values or means; ranges or standard deviations
	Sigma           float64     // standard deviation within, unit of the values
	Level, Spread   ChartLimits // for Points; for Spreads
}

func noChart() Chart {
	none := ChartLimits{math.NaN(), math.NaN(), math.NaN()}
	return Chart{Sigma: math.NaN(), Level: none, Spread: none}
}

// IndividualsChart is the chart of single values in the order taken, with the moving
// range of two: Sigma = mean moving range / d2, limits at three Sigma. Scatter from
// one value to the next counts, a drift over many hardly does.
//
// Inputs: x in order, not modified. Result: all limits NaN for fewer than two values
// or one that is not finite; Spreads one shorter than Points. Checked:
// TestIndividualsFlow, TestIndividualsViscosity.
func IndividualsChart(x []float64) Chart {
	c := noChart()
	if len(x) < 2 || !finite(x) {
		return c
	}
	c.Points = append(c.Points, x...)
	for i := 1; i < len(x); i++ {
		c.Spreads = append(c.Spreads, math.Abs(x[i]-x[i-1]))
	}
	// The moving range of two has the closed forms d2 = 2/√π and d3 = √(2-4/π).
	k := ChartConstants{MeanRange: 2 / math.Sqrt(math.Pi), SDRange: math.Sqrt(2 - 4/math.Pi)}
	mr := Mean(c.Spreads)
	c.Sigma = mr / k.MeanRange
	m := Mean(x)
	c.Level = ChartLimits{m - 3*c.Sigma, m, m + 3*c.Sigma}
	c.Spread = ChartLimits{0, mr, mr * (1 + 3*k.SDRange/k.MeanRange)}
	return c
}

// RangeChart is the chart of means and ranges of subgroups (Xbar-R): Sigma = mean
// range / d2.
//
// Inputs: subgroups in order, all of one size of at least 2, not modified. Result: NaN
// limits where they are not, and where a value is not finite. Checked: TestPistonRings.
func RangeChart(subgroups [][]float64) Chart {
	return subgroupChart(subgroups, func(g []float64) float64 {
		lo, hi := g[0], g[0]
		for _, v := range g {
			lo, hi = min(lo, v), max(hi, v)
		}
		return hi - lo
	}, func(k ChartConstants) (mean, low, high float64) { return k.MeanRange, k.D3, k.D4 })
}

// SDChart is the chart of means and standard deviations of subgroups (Xbar-S): Sigma =
// mean standard deviation / c4. Inputs and result as [RangeChart]. Checked:
// TestPistonRings.
func SDChart(subgroups [][]float64) Chart {
	return subgroupChart(subgroups, SD, func(k ChartConstants) (mean, low, high float64) { return k.MeanSD, k.B3, k.B4 })
}

func subgroupChart(groups [][]float64, spread func([]float64) float64, factors func(ChartConstants) (mean, low, high float64)) Chart {
	c := noChart()
	if len(groups) == 0 || len(groups[0]) < 2 {
		return c
	}
	n := len(groups[0])
	for _, g := range groups {
		if len(g) != n || !finite(g) {
			return noChart()
		}
		c.Points, c.Spreads = append(c.Points, Mean(g)), append(c.Spreads, spread(g))
	}
	mean, low, high := factors(ChartConstantsOf(n))
	s, m := Mean(c.Spreads), Mean(c.Points)
	c.Sigma = s / mean
	half := 3 * c.Sigma / math.Sqrt(float64(n))
	c.Level = ChartLimits{m - half, m, m + half}
	c.Spread = ChartLimits{low * s, s, high * s}
	return c
}
