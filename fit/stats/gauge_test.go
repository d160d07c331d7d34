package stats

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// byPart turns y[operator][repeat][part], as it is printed, into y[part][operator][repeat].
func byPart(y [][][]float64) [][][]float64 {
	out := make([][][]float64, len(y[0][0]))
	for i := range out {
		out[i] = make([][]float64, len(y))
		for j := range y {
			for _, repeat := range y[j] {
				out[i][j] = append(out[i][j], repeat[i])
			}
		}
	}
	return out
}

// gaugeFigures names the numbers of a study as the data sets do.
func gaugeFigures(g Gauge) map[string]float64 {
	m := map[string]float64{
		"ss_part": g.Part.SS, "ss_operator": g.Operator.SS, "ss_interaction": g.Interaction.SS,
		"ss_repeatability": g.Within.SS, "ss_total": g.Total.SS,
		"ms_part": g.Part.MS, "ms_operator": g.Operator.MS, "ms_interaction": g.Interaction.MS, "ms_repeatability": g.Within.MS,
		"F_interaction": g.Interaction.F, "p_interaction": g.Interaction.P, "F_part": g.Part.F, "F_operator": g.Operator.F,
		"var_part": g.PartToPart.Variance, "var_operator": g.OperatorAlone.Variance, "var_interaction": g.InteractionPart.Variance,
		"var_repeatability": g.Repeatability.Variance, "var_gauge": g.GaugeTotal.Variance, "var_grr": g.GaugeTotal.Variance,
		"var_reproducibility": g.Reproducibility.Variance, "var_total": g.All.Variance,
		"ndc": g.Categories,
	}
	for k, c := range map[string]Component{
		"EV": g.Repeatability, "AV": g.OperatorAlone, "INT": g.InteractionPart, "GRR": g.GaugeTotal, "PV": g.PartToPart, "TV": g.All,
	} {
		m[k], m["pct_"+k], m["contrib_"+k] = c.SD, c.PercentSD, c.PercentVariance
	}
	return m
}

// Two published studies: one whose interaction is pooled, one where it is kept.
func TestGaugePublished(t *testing.T) {
	for name, pooled := range map[string]bool{"grr_anova_aiag": true, "grr_anova_thermal_impedance": false} {
		p := load(t, name)
		var y [][][]float64
		decode(t, p.Data["y"], &y)
		g, err := GaugeCrossed(byPart(y), 0.25, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		if g.Pooled != pooled {
			t.Errorf("%s: pooled %v, want %v", name, g.Pooled, pooled)
		}
		got := gaugeFigures(g)
		agree(t, p, got, 1e-9)
		if !pooled {
			continue
		}
		// The same readings with the interaction kept, whose component is negative.
		var without map[string]float64
		full := map[string]any{}
		decode(t, p.Recomputed["without_pooling"], &full)
		without = map[string]float64{}
		for k, v := range full {
			if x, ok := v.(float64); ok {
				without[k] = x
			}
		}
		g, err = GaugeCrossed(byPart(y), 1, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		got = gaugeFigures(g)
		got["F_part_vs_interaction"], got["F_operator_vs_interaction"] = g.Part.F, g.Operator.F
		compared := 0
		for k, want := range without {
			if v, ok := got[k]; ok {
				near(t, "kept: "+k, v, want, 1e-9*math.Max(1, math.Abs(want)))
				compared++
			}
		}
		if compared < 15 || !g.InteractionPart.Negative || g.InteractionPart.Variance != 0 || !(g.InteractionPart.Estimate < 0) {
			t.Errorf("kept: compared %d figures, interaction %+v", compared, g.InteractionPart)
		}
	}
}

// For one mean square the interval is that by chi-square, exactly; for a difference of
// two it ends at 0 where the F test is at its limit; both scale with the unit.
func TestIntervalOfOneAndTwo(t *testing.T) {
	for _, df := range []float64{2, 9, 60} {
		lo, hi := mlsInterval([]meanSquare{{2, 5, df}}, 0.9)
		nearPart(t, "low", lo, 10*df/ChiSquareQuantile(0.95, df), 1e-13)
		nearPart(t, "high", hi, 10*df/ChiSquareQuantile(0.05, df), 1e-13)
		for _, other := range []float64{3, 18, 100} {
			f := FQuantile(0.95, df, other)
			lo, hi := mlsInterval([]meanSquare{{0.1, 7 * f, df}, {-0.1, 7, other}}, 0.9)
			near(t, "low end at the limit of F", lo, 0, 1e-9)
			if !(hi > 0.7*f-0.7) {
				t.Errorf("high end %v below the estimate", hi)
			}
			f = FQuantile(0.05, df, other)
			_, hi = mlsInterval([]meanSquare{{0.1, 7 * f, df}, {-0.1, 7, other}}, 0.9)
			near(t, "high end at the limit of F", hi, 0, 1e-9)
		}
	}
	for _, level := range []float64{0, 1, math.NaN()} {
		if lo, hi := mlsInterval([]meanSquare{{1, 1, 5}}, level); !math.IsNaN(lo) || !math.IsNaN(hi) {
			t.Errorf("level %v: %v to %v, want NaN", level, lo, hi)
		}
	}
}

// How often the intervals hold the standard deviations that the readings were made
// with: 95 %, less what a few hundred runs leave open. No published interval was at
// hand. Measured with 20 000 runs (GATESILL_LONG=1): 0.942 (ragged, small parts) to
// 0.973 (reproducibility from three operators).
func TestGaugeIntervalsHold(t *testing.T) {
	runs, room := 300, 0.045
	if os.Getenv("GATESILL_LONG") != "" {
		runs, room = 20_000, 0.012
	}
	rng := rand.New(rand.NewPCG(11, 12))
	type truth struct {
		what                         string
		part, operator, both, repeat float64
	}
	check := func(what string, held map[string]int) {
		t.Helper()
		for name, n := range held {
			share := float64(n) / float64(runs)
			t.Logf("%s, %s: %.3f", what, name, share)
			if share < 0.95-room {
				t.Errorf("%s: interval of %s holds in %.3f of the runs, want 0.95", what, name, share)
			}
		}
	}
	within := func(c Component, variance float64) int {
		if sd := math.Sqrt(variance); c.Low <= sd && sd <= c.High {
			return 1
		}
		return 0
	}
	for _, c := range []truth{
		{"large parts", 5, 0.5, 0.4, 1}, {"small parts", 0.5, 1, 1, 1}, {"no interaction", 2, 1, 0, 1},
	} {
		held := map[string]int{}
		for range runs {
			operator := [3]float64{}
			for j := range operator {
				operator[j] = c.operator * rng.NormFloat64()
			}
			y := make([][][]float64, 8)
			for i := range y {
				part := c.part * rng.NormFloat64()
				y[i] = make([][]float64, 3)
				for j := range y[i] {
					cell := part + operator[j] + c.both*rng.NormFloat64()
					y[i][j] = []float64{cell + c.repeat*rng.NormFloat64(), cell + c.repeat*rng.NormFloat64()}
				}
			}
			// Pooling by what the data say is no part of the level: model given.
			pool := 1.0
			if c.both == 0 {
				pool = 0
			}
			g, err := GaugeCrossed(y, pool, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			e, o, b, p := c.repeat*c.repeat, c.operator*c.operator, c.both*c.both, c.part*c.part
			held["repeatability"] += within(g.Repeatability, e)
			held["operator"] += within(g.OperatorAlone, o)
			held["reproducibility"] += within(g.Reproducibility, o+b)
			held["gauge"] += within(g.GaugeTotal, e+o+b)
			held["part"] += within(g.PartToPart, p)
			held["total"] += within(g.All, e+o+b+p)
			if c.both > 0 {
				held["interaction"] += within(g.InteractionPart, b)
			}
		}
		check(c.what, held)
	}
	for _, c := range []truth{{what: "ragged, large parts", part: 4}, {what: "ragged, small parts", part: 0.5}} {
		held := map[string]int{}
		for range runs {
			var y [][]float64
			for _, n := range []int{2, 5, 1, 3, 9, 2, 2, 4} {
				p := c.part * rng.NormFloat64()
				var r []float64
				for range n {
					r = append(r, p+rng.NormFloat64())
				}
				y = append(y, r)
			}
			g, err := GaugeOneFactor(y, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			held["repeatability"] += within(g.Repeatability, 1)
			held["part"] += within(g.PartToPart, c.part*c.part)
			held["total"] += within(g.All, 1+c.part*c.part)
		}
		check(c.what, held)
	}
}

// Ragged readings worked by hand: parts {1, 3}, {6}, {8, 9, 10}; means 2, 6, 9, all
// 37/6. Between: 2 (25/6)² + (1/6)² + 3 (17/6)² = 353/6; within 2 + 0 + 2 = 4 with 3
// degrees of freedom; n0 = (6 - 14/6)/2 = 11/6.
func TestGaugeOneFactor(t *testing.T) {
	g, err := GaugeOneFactor([][]float64{{1, 3}, nil, {6}, {8, 9, 10}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	part := (353.0/12 - 4.0/3) / (11.0 / 6)
	near(t, "repeatability", g.Repeatability.Variance, 4.0/3, 1e-14)
	near(t, "part", g.PartToPart.Variance, part, 1e-13)
	near(t, "total", g.All.Variance, part+4.0/3, 1e-13)
	near(t, "F", g.Part.F, 353.0/12/(4.0/3), 1e-12)
	near(t, "categories", g.Categories, math.Trunc(1.41*math.Sqrt(part/(4.0/3))), 0)
	near(t, "low", g.Repeatability.Low, math.Sqrt(4/ChiSquareQuantile(0.975, 3)), 1e-12)
	if g.Parts != 3 || g.N != 6 || g.Operators != 0 || !math.IsNaN(g.Reproducibility.SD) {
		t.Errorf("%d parts, %d readings, %d operators, reproducibility %v", g.Parts, g.N, g.Operators, g.Reproducibility.SD)
	}
	if !(g.PartToPart.Low < g.PartToPart.SD && g.PartToPart.SD < g.PartToPart.High) {
		t.Errorf("part %v not within %v to %v", g.PartToPart.SD, g.PartToPart.Low, g.PartToPart.High)
	}
}

func TestGaugeRefuses(t *testing.T) {
	nan := math.NaN()
	for words, y := range map[string][][][]float64{
		"need 2 parts":                   {{{1}, {2}}},
		"part 2: read by 1 operators":    {{{1}, {2}}, {{1}}},
		"part 2, operator 1: 2 readings": {{{1}, {2}}, {{1, 2}, {3}}},
		"part 1, operator 2: a reading":  {{{1}, {nan}}, {{1}, {3}}},
	} {
		if _, err := GaugeCrossed(y, 0.25, 0.95); !errors.Is(err, ErrGaugeStudy) || !strings.HasPrefix(err.Error(), words) {
			t.Errorf("%v: error %v, want %q", y, err, words)
		}
	}
	for words, y := range map[string][][]float64{
		"1 parts": {{1, 2}}, "no part was read twice": {{1}, {2}}, "part 2: a reading": {{1, 2}, {nan}},
	} {
		if _, err := GaugeOneFactor(y, 0.95); !errors.Is(err, ErrGaugeStudy) || !strings.HasPrefix(err.Error(), words) {
			t.Errorf("%v: error %v, want %q", y, err, words)
		}
	}
	// One reading each: the interaction is all the scatter there is.
	g, err := GaugeCrossed([][][]float64{{{1}, {2}}, {{4}, {5.5}}, {{7}, {7.5}}}, 1, 0.95)
	if err != nil || !g.Pooled || g.Error.DF != 2 || !(g.Repeatability.Variance > 0) || !math.IsNaN(g.Interaction.F) {
		t.Errorf("one reading each: %+v, %v", g, err)
	}
}

// The sums of squares add up whatever the readings, components scale with the square
// of the unit, and one operator's readings taken as one factor have the same scatter.
func TestGaugeProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		parts, operators, repeats := rapid.IntRange(2, 5).Draw(t, "parts"), rapid.IntRange(2, 4).Draw(t, "operators"), rapid.IntRange(2, 3).Draw(t, "repeats")
		var y, scaled [][][]float64
		var cells [][]float64
		var all []float64
		for i := range parts {
			y, scaled = append(y, nil), append(scaled, nil)
			for range operators {
				cell := rapid.SliceOfN(rapid.Float64Range(-3, 3), repeats, repeats).Draw(t, "cell")
				var other []float64
				for _, v := range cell {
					other = append(other, 50-1000*v)
				}
				y[i], scaled[i] = append(y[i], cell), append(scaled[i], other)
				cells, all = append(cells, cell), append(all, cell...)
			}
		}
		g, err := GaugeCrossed(y, 0.25, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		if !(g.Within.MS > 1e-3) {
			t.Skip("no scatter")
		}
		h, err := GaugeCrossed(scaled, 0.25, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		same := func(what string, got, want float64) {
			if !(math.Abs(got-want) <= 1e-9*(1+math.Abs(want))) {
				t.Fatalf("%s: %.15g, want %.15g", what, got, want)
			}
		}
		sd := SD(all)
		same("total", g.Total.SS, sd*sd*float64(len(all)-1))
		same("within", g.Within.SS, AnovaOneWay(cells).Within.SS)
		same("components", g.All.Variance, g.Repeatability.Variance+g.OperatorAlone.Variance+g.InteractionPart.Variance+g.PartToPart.Variance)
		if math.Abs(g.Interaction.P-0.25) > 1e-6 {
			same("gauge in another unit", h.GaugeTotal.SD/1000, g.GaugeTotal.SD)
			same("part in another unit", h.PartToPart.High/1000, g.PartToPart.High)
		}
		if !g.Pooled {
			same("shares", g.GaugeTotal.PercentVariance+g.PartToPart.PercentVariance, 100)
		}
	})
}
