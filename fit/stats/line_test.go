package stats

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"pgregory.net/rapid"
)

// Certified values: NIST StRD, Linear Regression, Norris (level of difficulty: lower),
// 15 digits; reached on amd64 13.3 for the parameters and 13.8 for their errors.
func TestLineThroughNorris(t *testing.T) {
	b, err := os.ReadFile("../../testdata/published/strd/linear_norris.json")
	if err != nil {
		t.Fatal(err)
	}
	var d struct {
		Data     struct{ X, Y []float64 }
		Expected struct {
			P   []float64 `json:"parameters"`
			SD  []float64 `json:"standard_deviations"`
			RSD float64   `json:"residual_standard_deviation"`
		}
	}
	if err := json.Unmarshal(b, &d); err != nil {
		t.Fatal(err)
	}
	l := LineThrough(d.Data.X, d.Data.Y, 0.95)
	for what, c := range map[string][2]float64{
		"intercept": {l.Intercept, d.Expected.P[0]}, "slope": {l.Slope, d.Expected.P[1]},
		"error of the intercept": {l.InterceptSE, d.Expected.SD[0]}, "of the slope": {l.SlopeSE, d.Expected.SD[1]},
		"residual SD": {l.SD, d.Expected.RSD},
	} {
		got := digits(c[0], c[1])
		t.Logf("%s: %.1f digits", what, got)
		if got < 12 {
			t.Errorf("%s: %.17g, want %.17g: %.1f digits, want 12", what, c[0], c[1], got)
		}
	}
}

// eight are readings in the order taken; twice tied are some with ties in both.
var (
	eightX = []float64{1, 2, 3, 4, 5, 6, 7, 8}
	eightY = []float64{5.1, 4.7, 5.6, 5.9, 5.2, 6.3, 6.1, 6.8}
	tiedX  = []float64{1, 2, 2, 3, 4, 5, 5, 5, 6, 7}
	tiedY  = []float64{5.1, 4.7, 5.6, 5.6, 5.2, 6.3, 6.1, 6.1, 7, 5.6}
)

// scipy 1.10.1, scipy.stats.linregress(x, y), and for the interval
// scipy.stats.t.ppf(.975, 6), which has nine digits.
func TestLineThroughEight(t *testing.T) {
	l := LineThrough(eightX, eightY, 0.95)
	near(t, "slope", l.Slope, 0.24166666666666667, 1e-14)
	near(t, "intercept", l.Intercept, 4.625, 1e-13)
	near(t, "R²", l.RSquared, 0.85078854072582*0.85078854072582, 1e-13)
	near(t, "P", l.P, 0.0074034522867473624, 1e-13)
	near(t, "error", l.SlopeSE, 0.06093951377082308, 1e-14)
	near(t, "error of the intercept", l.InterceptSE, 0.30772946013490576, 1e-13)
	near(t, "low", l.Low, 0.0925530483612359, 1e-9)
	near(t, "high", l.High, 0.39078028497209744, 1e-9)
}

// scipy 1.10.1, scipy.stats.kendalltau(x, y), exact; with ties method='asymptotic',
// which makes no correction for continuity: undone here.
func TestKendall(t *testing.T) {
	k := KendallTau(eightX, eightY)
	near(t, "tau", k.Tau, 0.7142857142857142, 1e-14)
	near(t, "P", k.P, 0.014136904761904762, 1e-14)
	if !k.Exact {
		t.Error("eight without ties: not exact")
	}
	k = KendallTau(tiedX, tiedY)
	near(t, "tau with ties", k.Tau, 0.5853658536585366, 1e-14)
	s := 24.0 // pairs in order less those out of it, by hand from tau: 0.58537 × √(41×41)
	z := NormalQuantile(1-0.025875360577517412/2) * (s - 1) / s
	near(t, "P with ties", k.P, 2*NormalUpper(z), 1e-12)
	if k.Exact {
		t.Error("with ties: exact")
	}
}

// Counting all orders of few values gives the distribution that the exact P is from.
func TestInversions(t *testing.T) {
	for n := 2; n <= 6; n++ {
		count := make([]float64, n*(n-1)/2+1)
		total := 0.0
		var place func(left []int, out int)
		place = func(left []int, out int) {
			if len(left) == 0 {
				count[out]++
				total++
				return
			}
			for i := range left { // i values that are smaller come later
				rest := append(append([]int{}, left[:i]...), left[i+1:]...)
				place(rest, out+i)
			}
		}
		first := make([]int, n)
		place(first, 0)
		for d, p := range inversions(n) {
			near(t, "share", p, count[d]/total, 1e-15)
		}
	}
	all := 0.0
	for d, p := range inversions(150) {
		all += 2 * p
		if d == 150*149/4 && 150*149/2%2 == 0 {
			all -= p // the middle has no mirror image
		}
	}
	near(t, "all orders of 150", all, 1, 1e-12)
}

// scipy 1.10.1, scipy.stats.theilslopes(y, x): slope and intercept; the intercept there
// is the median of y less slope times the median of x.
func TestMedianSlope(t *testing.T) {
	r := MedianSlope(eightX, eightY, 0.95)
	near(t, "slope", r.Slope, 0.24142857142857146, 1e-14)
	near(t, "tau", r.Tau, 0.7142857142857142, 1e-14)
	// By the table of Kendall's S for n = 8 (from memory: P(S >= 18) = 0.0156, P(S >= 16)
	// = 0.0305): the sixth slope from either end.
	if r.Level < 0.95 || r.Level > 0.975 {
		t.Errorf("level %v, want one between 0.95 and 0.975", r.Level)
	}
	near(t, "level", r.Level, 1-2*0.0156, 2e-4)
	r = MedianSlope(tiedX, tiedY, 0.95)
	near(t, "slope with ties", r.Slope, 0.25, 1e-14)
	if !math.IsNaN(r.Level) || !(r.Low < r.Slope && r.Slope < r.High) {
		t.Errorf("with ties: %+v", r)
	}
	// Three points cannot bound a slope at 95 %.
	if r = MedianSlope([]float64{1, 2, 3}, []float64{1, 2, 4}, 0.95); !math.IsInf(r.Low, -1) || !math.IsInf(r.High, 1) || r.Slope != 1.5 {
		t.Errorf("three points: %+v", r)
	}
	// A wild point in seven moves it little.
	wild := append([]float64{}, eightY...)
	wild[6] = 1e9
	if w := MedianSlope(eightX, wild, 0.95); !(math.Abs(w.Slope-0.2414) < 0.15) {
		t.Errorf("with one wild value: slope %v", w.Slope)
	}
}

// The interval holds the slope as often as it says, whatever the scatter looks like:
// here that of Cauchy, 4000 times (seed 7, 9), within four standard deviations.
func TestMedianSlopeCovers(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 9))
	const runs = 4000
	for _, n := range []int{6, 13} {
		held, level := 0, 0.0
		x, y := make([]float64, n), make([]float64, n)
		for range runs {
			for i := range x {
				x[i] = float64(i)
				y[i] = 0.3*x[i] + rng.NormFloat64()/rng.NormFloat64()
			}
			r := MedianSlope(x, y, 0.9)
			level = r.Level
			if r.Low < 0.3 && 0.3 < r.High {
				held++
			}
		}
		t.Logf("%d points: level %.4f, held %.4f", n, level, float64(held)/runs)
		near(t, "share that holds", float64(held)/runs, level, 4*math.Sqrt(level*(1-level)/runs))
	}
}

func TestLineTooFew(t *testing.T) {
	nan := math.NaN()
	for _, c := range [][2][]float64{{nil, nil}, {{1}, {1}}, {{1, 1}, {1, 2}}, {{1, 2}, {1}}, {{1, nan, 3}, {1, 2, 3}}} {
		if l := LineThrough(c[0], c[1], 0.95); !math.IsNaN(l.Slope) || !math.IsNaN(l.P) {
			t.Errorf("line through %v: %+v, want NaN", c, l)
		}
		if r := MedianSlope(c[0], c[1], 0.95); !math.IsNaN(r.Slope) || !math.IsNaN(r.P) || !math.IsNaN(r.Low) {
			t.Errorf("median slope of %v: %+v, want NaN", c, r)
		}
		if k := KendallTau(c[0], c[1]); !math.IsNaN(k.Tau) || !math.IsNaN(k.P) {
			t.Errorf("tau of %v: %+v, want NaN", c, k)
		}
	}
	if l := LineThrough([]float64{1, 2}, []float64{3, 5}, 0.95); l.Slope != 2 || !math.IsNaN(l.SlopeSE) || !math.IsNaN(l.P) {
		t.Errorf("two points: %+v, want slope 2 and no errors", l)
	}
	if l := LineThrough([]float64{1, 2, 3}, []float64{3, 5, 7}, 0.95); l.P != 0 || l.Slope != 2 {
		t.Errorf("on a line: %+v, want P 0", l)
	}
}

// A line added to y adds to both slopes and changes neither error nor interval length.
func TestSlopeProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(4, 20).Draw(t, "n")
		x, y, z := make([]float64, n), make([]float64, n), make([]float64, n)
		add := rapid.Float64Range(-10, 10).Draw(t, "slope")
		for i := range x {
			x[i] = float64(i)
			y[i] = rapid.Float64Range(-1, 1).Draw(t, "y")
			z[i] = y[i] + add*x[i] + 3
		}
		a, b := LineThrough(x, y, 0.95), LineThrough(x, z, 0.95)
		r, s := MedianSlope(x, y, 0.95), MedianSlope(x, z, 0.95)
		for what, d := range map[string]float64{
			"slope": b.Slope - a.Slope - add, "median slope": s.Slope - r.Slope - add,
			"error": b.SlopeSE - a.SlopeSE, "low": b.Low - a.Low - add,
		} {
			if !(math.Abs(d) <= 1e-11) {
				t.Fatalf("%s off by %g", what, d)
			}
		}
	})
}
