package stats

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// The chances of the trimmed test against samples made by chance, seed 5: 4000
// pairs of samples (40 000 with GATESILL_LONG, n from 4 to 60: off by at most
// 0.015, at n = 5).
func TestYuenPower(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 2))
	const trim = 0.2
	runs, sizes := 4000, []int{5, 10, 26}
	if os.Getenv("GATESILL_LONG") != "" {
		runs, sizes = 40_000, []int{4, 5, 6, 7, 8, 9, 10, 13, 20, 30, 60}
	}
	for _, n := range sizes {
		shift := 2.8 * math.Sqrt(2/float64(n))
		x, y := make([]float64, n), make([]float64, n)
		found, shown := 0, 0
		for range runs {
			for i := range x {
				x[i], y[i] = shift+rng.NormFloat64(), rng.NormFloat64()
			}
			r := YuenT(x, y, trim, 0.95)
			if r.P < 0.05 {
				found++
			}
			// Without a shift, within a margin as great as it.
			if math.Abs(r.Estimate-shift)+UpperT(0.05, r.DF)*r.SE < shift {
				shown++
			}
		}
		allowed := 0.015 + 3*math.Sqrt(0.25/float64(runs))
		near(t, "finds", float64(found)/float64(runs), YuenPower(n, shift, 1, trim, 0.05), allowed)
		near(t, "shows sameness", float64(shown)/float64(runs), YuenEquivalencePower(n, 0, -shift, shift, 1, trim, 0.05), allowed)
	}
}

// What trimming normal values costs in the long run: the variance of the 20 %
// trimmed mean is 1.1447 times that of the mean (by quadrature of its influence
// function with SciPy 1.10.1: 2*(quad(lambda x: x*x*norm.pdf(x), 0, a)[0] +
// 0.2*a*a)/0.36 with a = norm.ppf(0.8)).
func TestYuenCost(t *testing.T) {
	kept, scale := trimmedNormal(1000, 0.2)
	near(t, "variance", scale*scale*1000/float64(kept), 1.144685351961651, 1e-12)
	// So in a large sample it needs 1.145 times as many.
	shift := 0.1
	trimmed, plain := YuenSize(shift, 1, 0.2, 0.05, 0.8), welchSize(shift, 0.05, 0.8)
	near(t, "sizes", float64(trimmed)/float64(plain), 1.1447, 0.003)
}

// welchSize is the size for Welch's test, by counting up from the pooled one.
func welchSize(effect, alpha, power float64) int {
	n := TwoSampleSize(effect, alpha, power, true) - 3
	for WelchPower(n, n, effect, 1, 1, alpha, true) < power {
		n++
	}
	return n
}

// A margin of 50 mV at a standard deviation of 80 mV, no true shift, two one-sided
// tests at 5 %: 0.3 % of the time with 6 of either lot, 24 % with 20, 55 % with 30
// in simulations (rounded, made apart from this
// computation, which gives 0.35, 23.73 and 54.52 %).
func TestSameAtLargeSpread(t *testing.T) {
	for _, c := range []struct {
		n                   int
		simulated, rounding float64
	}{{6, 0.003, 0.0005}, {20, 0.24, 0.005}, {30, 0.55, 0.005}} {
		near(t, "shown", EquivalencePower(c.n, c.n, 0, -0.05, 0.05, 0.08, 0.05), c.simulated, c.rounding)
	}
}

func TestYuenSizes(t *testing.T) {
	for _, power := range []float64{0.8} {
		n := YuenSize(0.08, 0.08, 0.2, 0.05, power)
		if YuenPower(n-1, 0.08, 0.08, 0.2, 0.05) >= power {
			t.Errorf("power %v: %d would do", power, n-1)
		}
		m := YuenEquivalenceSize(0, -0.05, 0.05, 0.08, 0.2, 0.05, power)
		if YuenEquivalencePower(m-1, 0, -0.05, 0.05, 0.08, 0.2, 0.05) >= power {
			t.Errorf("sameness with %v: %d would do", power, m-1)
		}
		for k := 0; k < 15; k += 2 {
			if YuenPower(n+k, 0.08, 0.08, 0.2, 0.05) < power || YuenEquivalencePower(m+k, 0, -0.05, 0.05, 0.08, 0.2, 0.05) < power {
				t.Errorf("power %v is lost at %d or %d", power, n+k, m+k)
			}
		}
	}
	for _, n := range []int{YuenSize(0, 1, 0.2, 0.05, 0.8), YuenSize(1, -1, 0.2, 0.05, 0.8), YuenEquivalenceSize(2, -1, 1, 1, 0.2, 0.05, 0.8)} {
		if n != 0 {
			t.Errorf("size %d of what cannot be", n)
		}
	}
}
