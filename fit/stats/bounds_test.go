package stats

import (
	"math"
	"math/rand/v2"
	"testing"
)

// scipy 1.10.1: conf(k) = 2 √n quad(x -> norm.pdf(√n x) chi2.sf((n-1) r(x)²/k², n-1), 0, 9/√n)
// with r by brentq(norm.cdf(x+r) - norm.cdf(x-r) - share), and k by brentq.
func TestToleranceFactorCovers(t *testing.T) {
	for _, c := range []struct {
		n           int
		share, conf float64
		want        float64
	}{
		{2, 0.95, 0.95, 36.51921}, {5, 0.95, 0.95, 5.07687}, {10, 0.95, 0.95, 3.39343},
		{20, 0.95, 0.95, 2.76035}, {30, 0.95, 0.95, 2.55489}, {100, 0.95, 0.95, 2.23388}, {10, 0.90, 0.95, 2.85631},
	} {
		if got := ToleranceFactorTwoSided(c.n, c.share, c.conf); math.Abs(got-c.want) > 2e-5 {
			t.Errorf("n=%d, %v with %v: %.5f, want %v", c.n, c.share, c.conf, got, c.want)
		}
	}
	// Many values: the two-sided quantile itself.
	if got, want := ToleranceFactorTwoSided(2_000_000, 0.95, 0.5), NormalQuantile(0.975); math.Abs(got-want) > 1e-3 {
		t.Errorf("two million values: %v, want %v", got, want)
	}
	// By simulation: the share of samples whose band covers enough. 8,000 samples
	// have a standard error of 0.24 %.
	rng := rand.New(rand.NewPCG(5, 95))
	k, good, runs := ToleranceFactorTwoSided(12, 0.95, 0.95), 0, 8000
	for range runs {
		x := make([]float64, 12)
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		m, s := MeanSD(x)
		if 1-NormalUpper(m+k*s)-NormalUpper(k*s-m) >= 0.95 {
			good++
		}
	}
	if got := float64(good) / float64(runs); math.Abs(got-0.95) > 0.0097 {
		t.Errorf("bands of 12 values cover 95 %% in %.4f of the cases", got)
	}
	for _, bad := range []float64{ToleranceFactorTwoSided(1, 0.95, 0.95), ToleranceFactorTwoSided(9, 1, 0.95), ToleranceFactorTwoSided(9, 0.9, math.NaN())} {
		if !math.IsNaN(bad) {
			t.Errorf("factor %v, want none", bad)
		}
	}
}

// None of n by hand: 1 - 0.05^(1/n); otherwise the limit is the share with which k
// or fewer are as improbable as 5 %, summed term by term.
func TestBadBoundByHand(t *testing.T) {
	for _, c := range []struct{ k, n int }{{0, 30}, {1, 30}, {8, 30}, {3, 200}} {
		p := BadBound(c.k, c.n, 0.95)
		term, sum := math.Pow(1-p, float64(c.n)), 0.0
		for i := 0; i <= c.k; i++ {
			sum += term
			term *= float64(c.n-i) / float64(i+1) * p / (1 - p)
		}
		if math.Abs(sum-0.05) > 1e-9 {
			t.Errorf("%d of %d: up to %v, with which %v remain", c.k, c.n, p, sum)
		}
	}
	if got, want := BadBound(0, 30, 0.95), 1-math.Pow(0.05, 1.0/30); math.Abs(got-want) > 1e-9 {
		t.Errorf("none of 30: %v, want %v", got, want)
	}
	if got := BadBound(30, 30, 0.95); got != 1 {
		t.Errorf("all of 30: %v", got)
	}
	for _, bad := range []float64{BadBound(-1, 3, 0.95), BadBound(4, 3, 0.95), BadBound(0, 0, 0.95), BadBound(1, 3, 1)} {
		if !math.IsNaN(bad) {
			t.Errorf("%v, want none", bad)
		}
	}
}

// scipy 1.10.1: brentq(d -> nct.sf(3√n c, n-1, d) - 0.05) / (3√n). The limit lies above
// the true value in 5 % of samples (8,000 of them: standard error 0.24 %).
func TestCpkBoundCovers(t *testing.T) {
	for _, c := range []struct {
		c    float64
		n    int
		want float64
	}{{1.33, 10, 0.77731}, {5.12, 30, 3.99617}, {3.80, 30, 2.96304}} {
		if got := CpkBoundOneLimit(c.c, c.n, 0.95); math.Abs(got-c.want) > 2e-5 {
			t.Errorf("%v from %d: %.5f, want %v", c.c, c.n, got, c.want)
		}
	}
	rng := rand.New(rand.NewPCG(5, 133))
	const n, runs = 30, 8000
	critical := 0.0 // the greatest value found whose limit is still 1: by bisection
	for lo, hi := 1.0, 3.0; hi-lo > 1e-6; {
		critical = (lo + hi) / 2
		if CpkBoundOneLimit(critical, n, 0.95) > 1 {
			hi = critical
		} else {
			lo = critical
		}
	}
	over := 0
	x := make([]float64, n)
	for range runs {
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		if m, s := MeanSD(x); (3-m)/(3*s) > critical {
			over++
		}
	}
	if got := float64(over) / runs; math.Abs(got-0.05) > 0.0097 {
		t.Errorf("limit above the true value of 1 in %.4f of the samples", got)
	}
}
