package stats

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestToleranceFactors(t *testing.T) {
	p := load(t, "ehb_tolerance_normal")
	var d struct {
		N                    int
		Coverage, Confidence float64
	}
	for k, into := range map[string]any{"n": &d.N, "coverage": &d.Coverage, "confidence": &d.Confidence} {
		decode(t, p.Data[k], into)
	}
	one := ToleranceFactor(d.N, d.Coverage, d.Confidence)
	near(t, "one-sided, n = 43", one, number(t, p.Expected.of("k1_exact")), number(t, p.Tolerance["k1_exact"]))
	relative(t, "one-sided, n = 43", one, number(t, p.Recomputed["k1_exact"]), 1e-9)
	six := ToleranceFactor(6, d.Coverage, d.Confidence)
	near(t, "one-sided, n = 6", six, number(t, p.Expected.of("k1_exact_n6")), number(t, p.Tolerance["k1_exact_n6"]))
	relative(t, "one-sided, n = 6", six, number(t, p.Recomputed["k1_exact_n6"]), 1e-9)
	// The published two-sided figure is Howe's approximation, 0.25 % below.
	two := ToleranceFactorTwoSided(d.N, d.Coverage, d.Confidence)
	relative(t, "two-sided, n = 43", two, number(t, p.Recomputed["k2_exact"]), 1e-9)
	near(t, "chi-square behind it", ChiSquareQuantile(1-d.Confidence, float64(d.N-1)), number(t, p.Expected.of("chi2_01_42")), number(t, p.Tolerance["chi2_01_42"]))
	df := float64(d.N - 1)
	howe := math.Sqrt(df * (1 + 1/float64(d.N)) * math.Pow(NormalQuantile((1+d.Coverage)/2), 2) / ChiSquareQuantile(1-d.Confidence, df))
	near(t, "Howe's approximation", howe, number(t, p.Expected.of("k2_howe")), number(t, p.Tolerance["k2_howe"]))
	near(t, "two-sided beside Howe's", two/howe, 1, 0.005)
}

func TestToleranceGrid(t *testing.T) {
	p := load(t, "tolerance_k_grid")
	var grid []struct {
		N                    int
		Coverage, Confidence float64
		One                  float64  `json:"k1_exact"`
		Two                  float64  `json:"k2_exact"`
		Published            *float64 `json:"k1_published"`
	}
	decode(t, p.Expected.of("grid"), &grid)
	published := 0
	for _, g := range grid {
		one := ToleranceFactor(g.N, g.Coverage, g.Confidence)
		relative(t, "one-sided", one, g.One, 1e-9)
		relative(t, "two-sided", ToleranceFactorTwoSided(g.N, g.Coverage, g.Confidence), g.Two, 1e-9)
		if g.Published != nil {
			published++
			near(t, "one-sided as printed", one, *g.Published, number(t, p.Tolerance["abs_vs_published"]))
		}
	}
	if published < 15 {
		t.Errorf("%d printed factors compared, there should be 19", published)
	}
	q := load(t, "tolerance_iso16269_two_sided")
	var points []struct {
		N                    int
		Coverage, Confidence float64
		Published            float64 `json:"k_published"`
		Exact                float64 `json:"k_exact"`
	}
	decode(t, q.Expected.of("points"), &points)
	for _, g := range points {
		two := ToleranceFactorTwoSided(g.N, g.Coverage, g.Confidence)
		near(t, "two-sided as printed", two, g.Published, number(t, q.Tolerance["abs_vs_published"]))
		relative(t, "two-sided", two, g.Exact, 1e-9)
		// The table rounds up.
		near(t, "rounded up", math.Ceil(two*1e4)/1e4, g.Published, 1e-9)
	}
	if len(points) < 50 {
		t.Errorf("%d points of the table, there should be 60", len(points))
	}
}

func TestFreeTolerance(t *testing.T) {
	p := load(t, "tolerance_nonparametric")
	for key, c := range map[string]struct {
		sides      Sides
		share, con float64
	}{
		"n59": {LowerOnly, 0.95, 0.95}, "n93": {Both, 0.95, 0.95}, "n46": {Both, 0.9, 0.95}, "n299": {UpperOnly, 0.99, 0.95}, "n473": {Both, 0.99, 0.95},
	} {
		near(t, key, float64(FreeSize(c.sides, c.share, c.con)), number(t, p.Expected.of(key)), 0)
	}
	con := FreeConfidence(46, 2, 0.9)
	near(t, "confidence of 46", con, number(t, p.Expected.of("conf_n46")), number(t, p.Tolerance["conf_n46"]))
	relative(t, "confidence of 46", con, number(t, p.Recomputed["conf_n46"]), 1e-9)
	for key, sides := range map[string]Sides{"n_one_sided": LowerOnly, "n_two_sided": Both} {
		var sizes map[string]float64
		decode(t, p.Recomputed[key], &sizes)
		for _, share := range []string{"0.9", "0.95", "0.99"} {
			for _, confidence := range []string{"0.9", "0.95", "0.99"} {
				s, c := number(t, []byte(share)), number(t, []byte(confidence))
				near(t, key+" "+share+"/"+confidence, float64(FreeSize(sides, s, c)), sizes[share+"/"+confidence], 0)
			}
		}
	}
	var ranks []struct {
		N, Rank              int
		Coverage, Confidence float64
	}
	decode(t, p.Data["order_stat_table"], &ranks)
	for _, r := range ranks {
		near(t, "rank", float64(FreeBlocks(r.N, r.Coverage, r.Confidence)), float64(r.Rank), 0)
	}
	if len(ranks) < 9 {
		t.Errorf("%d ranks", len(ranks))
	}
	// What a size covers is the inverse of what a share takes.
	for _, n := range []int{3, 22, 59, 400} {
		for m := 1; m <= 3; m++ {
			relative(t, "confidence of the share", FreeConfidence(n, m, FreeShare(n, m, 0.9)), 0.9, 1e-9)
		}
	}
}

func TestToleranceInterval(t *testing.T) {
	x := make([]float64, 93)
	for i := range x {
		x[i] = float64(i*37%93) + 1 // 1 to 93 in another order
	}
	free := FreeTolerance(x, Both, 0.95, 0.95)
	if free.Low != 1 || free.High != 93 || !(free.Confidence >= 0.95 && free.Confidence < 0.951) {
		t.Errorf("93 values: %+v", free)
	}
	// Six blocks may go: two values at each end. With five, the lower end gives one more.
	if free := FreeTolerance(x, Both, 0.9, 0.9); free.Low != 3 || free.High != 91 {
		t.Errorf("0.9 of 93 values at 0.9: %+v", free)
	}
	if free := FreeTolerance(x, Both, 0.9, 0.95); free.Low != 3 || free.High != 92 {
		t.Errorf("0.9 of 93 values at 0.95: %+v", free)
	}
	if low := FreeTolerance(x, LowerOnly, 0.95, 0.95); low.Low != 2 || !math.IsInf(low.High, 1) {
		t.Errorf("lower only: %+v", low)
	}
	if free := FreeTolerance(x[:92], Both, 0.95, 0.95); !math.IsNaN(free.Low) {
		t.Errorf("92 values are too few: %+v", free)
	}
	normal := NormalTolerance(x, UpperOnly, 0.95, 0.95)
	mean, sd := MeanSD(x)
	relative(t, "upper end", normal.High, mean+ToleranceFactor(93, 0.95, 0.95)*sd, 1e-14)
	if !math.IsInf(normal.Low, -1) || x[0] != 1 || x[1] != 38 {
		t.Errorf("upper only: %+v; first values %v", normal, x[:2])
	}
	for _, bad := range []ToleranceInterval{NormalTolerance([]float64{1}, Both, 0.9, 0.9), NormalTolerance(x, Both, 1, 0.9), FreeTolerance(nil, Both, 0.9, 0.9)} {
		if !math.IsNaN(bad.Low) || !math.IsNaN(bad.High) {
			t.Errorf("no interval: %+v", bad)
		}
	}
}

// Of 4000 normal samples the intervals cover what they promise as often as they
// promise, within three standard errors. Seed 7.
func TestToleranceCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 7))
	const runs, share = 4000, 0.9
	kept := map[string]int{}
	x := make([]float64, 12)
	two, one := ToleranceFactorTwoSided(len(x), share, 0.8), ToleranceFactor(len(x), share, 0.8)
	for range runs {
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		mean, sd := MeanSD(x)
		if NormalUpper(mean-two*sd)-NormalUpper(mean+two*sd) >= share {
			kept["two-sided"]++
		}
		if NormalUpper(mean-one*sd) >= share {
			kept["one-sided"]++
		}
		if iv := FreeTolerance(x, UpperOnly, share, 0.7); 1-NormalUpper(iv.High) >= share {
			kept["free"]++
		}
	}
	free := FreeConfidence(12, 1, share)
	for name, want := range map[string]float64{"two-sided": 0.8, "one-sided": 0.8, "free": free} {
		near(t, name, float64(kept[name])/runs, want, 3*math.Sqrt(want*(1-want)/runs))
	}
}
