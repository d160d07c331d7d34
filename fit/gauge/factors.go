package gauge

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"gatesill/fit/stats"
)

// factors says what operators, fixtures and sittings add to the repeatability.
//
// Model: y = device + sitting + (device and sitting together) + insertion. The
// devices are taken out as they are (fixed), the sittings are drawn at random.
// Variances by fitting constants: the sum of squares of the sittings beside the
// devices, that of the two together, and that within, each set equal to what it is
// on average; for equal numbers that is the analysis of variance. Tested against the
// two together where those stand out (p < 0.25, common practice), else against both
// pooled. Interval: Tukey's and Williams's for one component.
//
// Operators (and fixtures) are compared on the devices that more than one of them
// measured, and on no other: what one of them alone read, a control part at several
// dates for instance, says nothing of the other. With one sitting each they are the
// sittings; with several, one-way analysis of variance of what the sittings read off
// the mean. Sittings are compared through devices they share; those that share none
// with the rest are left out, and so is a factor with fewer than two levels.
//
// Source: Henderson's method 3 (Biometrics 9 (1953) 226-252) and the interval of
// Tukey and Williams (from memory). Checked: TestFactorsByHand, TestFactorsSimulated,
// TestFactorsOfSharedDevices.
func factors(ms []Measuring, cells []cell) []Factor {
	sit := sittingsOf(ms)
	link := linkedCells(cells)
	names := levelsOf(link)
	if len(names) < 2 {
		return nil
	}
	session := bySitting(link, names)
	var out []Factor
	var compared [][]string // sittings behind each
	for _, f := range []struct {
		name string
		of   func(sitting) string
	}{{"operator", func(s sitting) string { return s.operator }}, {"fixture", func(s sitting) string { return s.fixture }}} {
		own := linkedCells(byMore(cells, func(sitting string) string { return f.of(sit[sitting]) }))
		among := levelsOf(own)
		group := map[string]string{}
		levels := map[string]bool{}
		for _, n := range among {
			group[n] = f.of(sit[n])
			levels[group[n]] = true
		}
		if len(levels) < 2 {
			continue
		}
		fitted := bySitting(own, among)
		factor := fitted.factor
		if len(levels) < len(among) {
			factor = grouped(fitted, group)
		} else {
			for i := range factor.Levels {
				factor.Levels[i].Name = group[factor.Levels[i].Name]
			}
		}
		factor.Name = f.name
		out = append(out, factor)
		compared = append(compared, among)
	}
	if len(out) == 2 && slices.Equal(compared[0], compared[1]) && sameGroups(compared[0], sit) {
		out[0].With, out[1].With = out[1].Name, out[0].Name
	}
	if len(out) == 0 || !slices.ContainsFunc(out, func(f Factor) bool { return len(f.Levels) == len(names) }) {
		session.factor.Name = "session"
		out = append(out, session.factor)
	}
	return out
}

// byMore keeps the cells of devices that more than one level measured, and of these
// the cells of which the level is known.
func byMore(cells []cell, of func(sitting string) string) []cell {
	levels := map[string]map[string]bool{} // by device
	for _, c := range cells {
		if l := of(c.sitting); l != "" {
			if levels[c.device] == nil {
				levels[c.device] = map[string]bool{}
			}
			levels[c.device][l] = true
		}
	}
	return slices.DeleteFunc(slices.Clone(cells), func(c cell) bool { return of(c.sitting) == "" || len(levels[c.device]) < 2 })
}

// sitting is who measured where.
type sitting struct{ operator, fixture string }

func sittingsOf(ms []Measuring) map[string]sitting {
	out := map[string]sitting{}
	for _, m := range ms {
		out[m.Sitting] = sitting{m.Operator, m.Fixture}
	}
	return out
}

// sameGroups reports whether operators and fixtures part the sittings alike.
func sameGroups(names []string, sit map[string]sitting) bool {
	to, from := map[string]string{}, map[string]string{}
	for _, n := range names {
		s := sit[n]
		if f, ok := to[s.operator]; ok && f != s.fixture {
			return false
		}
		if o, ok := from[s.fixture]; ok && o != s.operator {
			return false
		}
		to[s.operator], from[s.fixture] = s.fixture, s.operator
	}
	return true
}

// linkedCells keeps the cells of those sittings that are linked to one another by
// devices they share: the largest such group by measurings; only devices in two
// sittings or more, for the others say nothing of sittings.
func linkedCells(cells []cell) []cell {
	sittings := map[string][]string{} // by device
	for _, c := range cells {
		sittings[c.device] = append(sittings[c.device], c.sitting)
	}
	parent := map[string]string{}
	var root func(string) string
	root = func(s string) string {
		if p, ok := parent[s]; ok && p != s {
			return root(p)
		}
		return s
	}
	var shared []cell
	weight := map[string]int{}
	for _, c := range cells {
		if list := sittings[c.device]; len(list) > 1 {
			shared = append(shared, c)
			if a, b := root(list[0]), root(c.sitting); a != b {
				parent[b] = a
			}
		}
	}
	best, most := "", 0
	for _, c := range shared {
		r := root(c.sitting)
		weight[r] += len(c.values)
		if weight[r] > most {
			best, most = r, weight[r]
		}
	}
	return slices.DeleteFunc(shared, func(c cell) bool { return root(c.sitting) != best })
}

func levelsOf(cells []cell) []string {
	var names []string
	for _, c := range cells {
		if !slices.Contains(names, c.sitting) {
			names = append(names, c.sitting)
		}
	}
	return names
}

// sessionFit is what the fit of devices and sittings comes to.
type sessionFit struct {
	factor  Factor
	effects []float64 // V, by sitting, mean 0

}

// bySitting fits devices and sittings.
func bySitting(cells []cell, names []string) sessionFit {
	q := len(names)
	at := map[string]int{}
	for i, n := range names {
		at[n] = i
	}
	type device struct {
		n    float64
		sum  float64
		byAt []float64 // measurings in each sitting
	}
	devices := map[string]*device{}
	total := 0.0
	for _, c := range cells {
		d := devices[c.device]
		if d == nil {
			d = &device{byAt: make([]float64, q)}
			devices[c.device] = d
		}
		n := float64(len(c.values))
		d.n, d.byAt[at[c.sitting]] = d.n+n, d.byAt[at[c.sitting]]+n
		total += n
		d.sum += n * stats.Mean(c.values)
	}
	// W'W and W'y, W the sittings' columns less their means over each device.
	ww := mat.NewSymDense(q, nil)
	wy := make([]float64, q)
	withinDevice, within, dfWithin := 0.0, 0.0, 0.0
	counts := make([]int, q)
	traceCells := 0.0 // of the cells' columns, devices taken out
	for _, c := range cells {
		d := devices[c.device]
		n, mean := float64(len(c.values)), stats.Mean(c.values)
		i := at[c.sitting]
		off := mean - d.sum/d.n
		wy[i] += n * off
		withinDevice += c.squares() + n*off*off
		within, dfWithin = within+c.squares(), dfWithin+n-1
		counts[i] += len(c.values)
		traceCells += n - n*n/d.n
		for j := range q {
			x := -n * d.byAt[j] / d.n
			if i == j {
				x += n
			}
			if j >= i {
				ww.SetSym(i, j, ww.At(i, j)+x)
			}
		}
	}
	fit := sessionFit{factor: Factor{SD: noEstimate(), P: math.NaN()}, effects: make([]float64, q)}
	inverse, ok := grounded(ww)
	if !ok {
		return fit
	}
	reduction := 0.0
	for i := range q {
		for j := range q {
			fit.effects[i] += inverse.At(i, j) * wy[j]
		}
	}
	for i := range q {
		reduction += fit.effects[i] * wy[i]
	}
	// What the sittings' sum of squares holds of the cells' own variance.
	traceSittings, traceBoth := mat.Trace(ww), 0.0
	for _, c := range cells {
		d := devices[c.device]
		a := make([]float64, q)
		for j := range q {
			a[j] = -float64(len(c.values)) * d.byAt[j] / d.n
		}
		a[at[c.sitting]] += float64(len(c.values))
		traceBoth += mat.Inner(mat.NewVecDense(q, a), inverse, mat.NewVecDense(q, a))
	}
	both := math.Max(0, withinDevice-reduction-within)
	dfBoth := float64(len(cells)-len(devices)) - float64(q-1)
	k := component{
		ms: reduction / float64(q-1), df: float64(q - 1), k: traceSittings / float64(q-1), kBoth: traceBoth / float64(q-1),
		within: within, dfWithin: dfWithin, both: both, dfBoth: dfBoth, kOfBoth: (traceCells - traceBoth) / math.Max(1, dfBoth),
	}
	fit.factor.SD, fit.factor.P = k.estimate()
	mean := stats.Mean(fit.effects)
	for i, n := range names {
		fit.effects[i] -= mean
		fit.factor.Levels = append(fit.factor.Levels, Level{Name: n, Measurings: counts[i], Off: fit.effects[i]})
	}
	return fit
}

// grounded is the inverse of a matrix whose rows add up to 0, as if its last
// effect were 0.
func grounded(a *mat.SymDense) (*mat.SymDense, bool) {
	q, _ := a.Dims()
	part := mat.NewSymDense(q-1, nil)
	for i := range q - 1 {
		for j := i; j < q-1; j++ {
			part.SetSym(i, j, a.At(i, j))
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(part) {
		return nil, false
	}
	var inv mat.SymDense
	if err := chol.InverseTo(&inv); err != nil {
		return nil, false
	}
	full := mat.NewSymDense(q, nil)
	for i := range q - 1 {
		for j := i; j < q-1; j++ {
			full.SetSym(i, j, inv.At(i, j))
		}
	}
	return full, true
}

// component is one variance with those that its mean square is tested against.
type component struct {
	ms, df, k, kBoth float64 // mean square; k, kBoth: how many times it holds the component and that of the two together
	within, dfWithin float64 // sum of squares of the insertions
	both, dfBoth     float64 // sum of squares of device and sitting together
	kOfBoth          float64
}

// against is the mean square tested against, and its degrees of freedom.
func (c *component) against() (variance, df float64) {
	switch {
	case c.dfBoth > 0 && c.dfWithin > 0:
		both, within := c.both/c.dfBoth, c.within/c.dfWithin
		if stats.FUpper(both/within, c.dfBoth, c.dfWithin) < 0.25 {
			// On the scale of the sittings' mean square, which may hold it more often.
			return within + math.Max(0, both-within)/c.kOfBoth*c.kBoth, c.dfBoth
		}
		return (c.both + c.within) / (c.dfBoth + c.dfWithin), c.dfBoth + c.dfWithin
	case c.dfBoth > 0:
		return c.both / c.dfBoth, c.dfBoth
	case c.dfWithin > 0:
		return c.within / c.dfWithin, c.dfWithin
	}
	return math.NaN(), 0
}

// estimate is the standard deviation of the component with its interval, and the
// probability of so large a mean square without it.
func (c *component) estimate() (Estimate, float64) {
	e, df := c.against()
	if !(df > 0) || !(e > 0) || !(c.k > 0) {
		return noEstimate(), math.NaN()
	}
	return tukeyWilliams(c.ms, c.df, e, df, c.k), stats.FUpper(c.ms/e, c.df, df)
}

// tukeyWilliams is a standard deviation from two mean squares with E(ms) = e + k sd²,
// and its interval.
func tukeyWilliams(ms, df, e, dfe, k float64) Estimate {
	root := func(x float64) float64 { return math.Sqrt(math.Max(0, x)) }
	const a = (1 - level) / 2
	return Estimate{
		Value: root((ms - e) / k), DF: df,
		Low:  root(df * (ms - e*stats.FQuantile(1-a, df, dfe)) / (k * stats.ChiSquareQuantile(1-a, df))),
		High: root(df * (ms - e*stats.FQuantile(a, df, dfe)) / (k * stats.ChiSquareQuantile(a, df))),
	}
}

// grouped is a factor whose levels have several sittings each, from what the
// sittings read off the mean: one-way analysis of variance between the levels.
func grouped(s sessionFit, group map[string]string) Factor {
	f := Factor{SD: noEstimate(), P: math.NaN()}
	byLevel := map[string][]float64{}
	measurings := map[string]int{}
	var names []string
	for i, l := range s.factor.Levels {
		g := group[l.Name]
		if _, ok := byLevel[g]; !ok {
			names = append(names, g)
		}
		byLevel[g] = append(byLevel[g], s.effects[i])
		measurings[g] += l.Measurings
	}
	var n, squares, within float64
	mean := stats.Mean(s.effects)
	between := 0.0
	for _, g := range names {
		x := byLevel[g]
		m := float64(len(x))
		n, squares = n+m, squares+m*m
		c := cell{values: x}
		within += c.squares()
		off := stats.Mean(x) - mean
		between += m * off * off
		f.Levels = append(f.Levels, Level{Name: g, Measurings: measurings[g], Off: off})
	}
	df, dfw := float64(len(names)-1), n-float64(len(names))
	if dfw > 0 && within > 0 {
		ms, e := between/df, within/dfw
		f.SD = tukeyWilliams(ms, df, e, dfw, (n-squares/n)/df)
		f.P = stats.FUpper(ms/e, df, dfw)
	}
	return f
}
