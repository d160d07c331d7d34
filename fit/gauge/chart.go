package gauge

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gatesill/fit/stats"
)

const (
	// enoughPoints is how many points limits must rest on (common practice, no source).
	enoughPoints = 20
	// fewestPoints is from how many on there are limits at all.
	fewestPoints = 4
)

// ChartsOf makes the control chart of each control part, in order of their first
// measuring: individual values and moving ranges.
//
// A point is the mean of a sitting where there are three sittings or more, else one
// insertion. Limits: mean ± 3 MR/1.128 for values, 3.267 MR for moving ranges, MR
// the mean moving range. They are provisional on fewer than 20 points. Trend: the
// median of the slopes of all pairs with p by rank correlation, from eight points
// on. tempco, V/K: values are brought to the temperature of the first point,
// value - tempco·(T - T first), where all temperatures are known; NaN: as they are.
//
// Source: Shewhart's chart for individual values, ISO 7870-2 (from memory).
// Checked: TestChartByHand.
func ChartsOf(ms []Measuring, tempco float64) []Chart {
	ms = withValue(ms)
	slices.SortStableFunc(ms, func(a, b Measuring) int { return cmp.Compare(a.Rank, b.Rank) })
	byDevice := map[string][]Measuring{}
	var names []string
	for _, m := range ms {
		if !m.Control {
			continue
		}
		if _, ok := byDevice[m.Device]; !ok {
			names = append(names, m.Device)
		}
		byDevice[m.Device] = append(byDevice[m.Device], m)
	}
	var out []Chart
	for _, n := range names {
		if c, ok := chartOf(byDevice[n], tempco); ok {
			out = append(out, c)
		}
	}
	return out
}

func chartOf(ms []Measuring, tempco float64) (Chart, bool) {
	c := Chart{Device: ms[0].Device, By: "insertion", Trend: noEstimate(), TrendP: math.NaN(),
		Centre: math.NaN(), Low: math.NaN(), High: math.NaN(), RangeHigh: math.NaN()}
	if len(ms) < 2 {
		return c, false
	}
	c.Corrected = !math.IsNaN(tempco) && !slices.ContainsFunc(ms, func(m Measuring) bool { return math.IsNaN(m.Temp) })
	sittings := map[string]bool{}
	for _, m := range ms {
		sittings[m.Sitting] = true
	}
	if len(sittings) > 2 {
		c.By = "session"
	}
	last, n := "", 0.0
	for i, m := range ms {
		v := m.Value
		if c.Corrected {
			v -= tempco * (m.Temp - ms[0].Temp)
		}
		if i > 0 && c.By == "session" && m.Sitting == last {
			p := &c.Points[len(c.Points)-1]
			n++
			p.Value += (v - p.Value) / n
			continue
		}
		last, n = m.Sitting, 1
		c.Points = append(c.Points, ChartPoint{Label: m.Occasion, Value: v, Range: math.NaN()})
	}
	c.limits()
	c.say()
	return c, true
}

// limits works out mean, limits and trend.
func (c *Chart) limits() {
	n := len(c.Points)
	values, x := make([]float64, n), make([]float64, n)
	for i := range c.Points {
		values[i], x[i] = c.Points[i].Value, float64(i)
	}
	chart := stats.IndividualsChart(values)
	for i, r := range chart.Spreads {
		c.Points[i+1].Range = r
	}
	c.Provisional = n < enoughPoints
	c.Centre = stats.Mean(values)
	if n < fewestPoints {
		return
	}
	c.Low, c.High, c.RangeHigh = chart.Level.Low, chart.Level.High, chart.Spread.High
	for _, i := range chart.Level.Outside(chart.Points) {
		c.Points[i].Outside = true
	}
	for _, i := range chart.Spread.Outside(chart.Spreads) {
		c.Points[i+1].Outside = true
	}
	if n >= fewestInOrder {
		c.Trend, c.TrendP = medianSlope(x, values)
	}
}

// Outside are the places of the points outside the limits, from 1.
func (c *Chart) Outside() []int {
	var out []int
	for i, p := range c.Points {
		if p.Outside {
			out = append(out, i+1)
		}
	}
	return out
}

// Trends reports whether there is a trend at 1 %.
func (c *Chart) Trends() bool { return c.TrendP < 0.01 }

func (c *Chart) say() {
	n := len(c.Points)
	if n < fewestPoints {
		c.Texts = append(c.Texts, fmt.Sprintf("%s only: limits need %d, better %d", count(n, "point"), fewestPoints, enoughPoints))
		return
	}
	if out := c.Outside(); len(out) > 0 {
		what := "points"
		if len(out) == 1 {
			what = "point"
		}
		c.Texts = append(c.Texts, fmt.Sprintf("%s %s outside the limits: the bench, or the part, changed there", what, places(out)))
	} else {
		c.Texts = append(c.Texts, "no point outside the limits")
	}
	if c.Trends() {
		c.Texts = append(c.Texts, fmt.Sprintf("a trend of %s per point (p %s)", signed(c.Trend.Value), pWords(c.TrendP)))
	}
	if c.Provisional {
		c.Texts = append(c.Texts, fmt.Sprintf("the limits are provisional: %s, %d are wanted", count(n, "point"), enoughPoints))
	}
}

func places(list []int) string {
	text := ""
	for i, p := range list {
		switch {
		case i == 8:
			return text + fmt.Sprintf(" and %d more", len(list)-i)
		case i > 0:
			text += ", "
		}
		text += fmt.Sprint(p)
	}
	return text
}
