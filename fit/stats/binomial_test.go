package stats

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// Values by summing exact fractions (Python 3.11 fractions.Fraction and math.comb
// over the exact value of each binary p, printed with mpmath 1.2.1).
func TestBinomialAgainstManyDigits(t *testing.T) {
	for _, c := range []struct {
		k, n                int
		p, at, lower, upper float64
	}{
		{0, 22, 0.1, 0.09847709021836111, 0.09847709021836111, 1.0},
		{3, 60, 0.3, 1.3684598192762915e-6, 1.5471902041189522e-6, 0.99999982126961516},
		{40, 60, 0.3, 4.0664567109973532e-9, 0.99999999894971765, 5.1167390651001074e-9},
		{5, 1000, 0.05, 1.7632202473863191e-16, 1.9449795094223926e-16, 0.99999999999999998},
		{120, 1000, 0.05, 1.6422668840193702e-18, 1.0, 2.6514781041942536e-18},
		{990, 1000, 0.95, 2.2735306477116359e-12, 0.99999999999947573, 2.7977985614855613e-12},
		{60, 5000, 0.001, 5.2141498691071341e-43, 1.0, 5.6734038887717089e-43},
	} {
		relative(t, "at", BinomialAt(c.k, c.n, c.p), c.at, 1e-12)
		relative(t, "lower", BinomialLower(c.k, c.n, c.p), c.lower, 1e-12)
		relative(t, "upper", BinomialUpper(c.k, c.n, c.p), c.upper, 1e-12)
	}
}

// Values as in TestBinomialAgainstManyDigits.
func TestHypergeometricAgainstManyDigits(t *testing.T) {
	for _, c := range []struct {
		k, n, bad, size  int
		at, lower, upper float64
	}{
		{0, 5, 20, 200, 0.58716601759444691, 0.58716601759444691, 1.0},
		{0, 22, 20, 200, 0.08570172032097991, 0.08570172032097991, 1.0},
		{3, 50, 10, 200, 0.25676137303157248, 0.78043478115316573, 0.47632659187840675},
		{10, 50, 10, 200, 4.5754203369316737e-7, 1.0, 4.5754203369316737e-7},
		{0, 500, 30, 5000, 0.041981658456789048, 0.041981658456789048, 1.0},
		{20, 500, 30, 5000, 7.6999788718363089e-14, 0.9999999999999959, 8.1096209890479227e-14},
		{7, 2000, 40, 100000, 1.2152960438612128e-5, 0.99999890152269485, 1.3251437743764601e-5},
		{45, 60, 50, 100, 3.4692902943439078e-10, 0.9999999999837707, 3.6315832619858005e-10},
	} {
		relative(t, "at", HypergeometricAt(c.k, c.n, c.bad, c.size), c.at, 1e-11)
		relative(t, "lower", HypergeometricLower(c.k, c.n, c.bad, c.size), c.lower, 1e-11)
		relative(t, "upper", HypergeometricUpper(c.k, c.n, c.bad, c.size), c.upper, 1e-11)
	}
}

// Both tails are made apart: they have to meet, and to fall and rise.
func TestCountsAddUp(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		size := rapid.IntRange(1, 3000).Draw(t, "size")
		bad := rapid.IntRange(0, size).Draw(t, "bad")
		n := rapid.IntRange(0, size).Draw(t, "n")
		k := rapid.IntRange(0, n).Draw(t, "k")
		p := rapid.Float64Range(0, 1).Draw(t, "p")
		for _, c := range []struct {
			what             string
			lower, at, upper float64
			before           float64
		}{
			{"binomial", BinomialLower(k, n, p), BinomialAt(k, n, p), BinomialUpper(k+1, n, p), BinomialLower(k-1, n, p)},
			{"hypergeometric", HypergeometricLower(k, n, bad, size), HypergeometricAt(k, n, bad, size), HypergeometricUpper(k+1, n, bad, size), HypergeometricLower(k-1, n, bad, size)},
		} {
			if !(math.Abs(c.lower+c.upper-1) < 1e-12) || !(math.Abs(c.lower-c.before-c.at) < 1e-12) {
				t.Fatalf("%s of %d in %d (p %v; %d bad of %d): lower %v, at %v, above %v, before %v", c.what, k, n, p, bad, size, c.lower, c.at, c.upper, c.before)
			}
		}
		// Drawn and bad may change places.
		if a, b := HypergeometricAt(k, n, bad, size), HypergeometricAt(k, bad, n, size); !(math.Abs(a-b) <= 1e-11*a) {
			t.Fatalf("drawn and bad changed: %v, %v", a, b)
		}
	})
}

func TestCountsThatFitNoLot(t *testing.T) {
	for what, x := range map[string]float64{
		"n below 0": BinomialLower(0, -1, 0.5), "p above 1": BinomialUpper(0, 3, 1.5), "p NaN": BinomialAt(0, 3, math.NaN()),
		"more bad than parts": HypergeometricLower(0, 3, 11, 10), "more drawn than parts": FindsBad(11, 1, 10),
	} {
		if !math.IsNaN(x) {
			t.Errorf("%s: %v, want NaN", what, x)
		}
	}
	if got := BinomialUpper(2, 5, 0); got != 0 {
		t.Errorf("p = 0: %v", got)
	}
	if got := BinomialUpper(5, 5, 1); got != 1 {
		t.Errorf("p = 1: %v", got)
	}
}
