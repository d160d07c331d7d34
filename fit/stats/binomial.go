package stats

import "math"

// BinomialAt is the probability of exactly k of n when each is a hit with
// probability p; NaN for n below 0 or p outside 0 to 1, 0 for k that cannot be.
//
// Relative error below 1e-10, also where the probability is very small: the
// large terms of the factorials cancel before anything is computed. Source:
// C. Loader, "Fast and accurate computation of binomial probabilities" (2000).
// Checked: TestBinomialAgainstManyDigits.
func BinomialAt(k, n int, p float64) float64 {
	switch {
	case n < 0 || !(p >= 0 && p <= 1):
		return math.NaN()
	case k < 0 || k > n:
		return 0
	case p == 0:
		return indicator(k == 0)
	case p == 1:
		return indicator(k == n)
	}
	return loader(float64(k), float64(n), p)
}

// BinomialLower is the probability of at most k of n when each is a hit with
// probability p, good to small ones. See [BinomialAt].
func BinomialLower(k, n int, p float64) float64 {
	switch {
	case n < 0 || !(p >= 0 && p <= 1):
		return math.NaN()
	case k < 0:
		return 0
	case k >= n || p == 0:
		return 1
	case p == 1:
		return 0
	case float64(k) > float64(n)*p:
		return 1 - BinomialUpper(k+1, n, p)
	}
	odds := (1 - p) / p
	return tailSum(BinomialAt(k, n, p), k, func(i int) float64 {
		return float64(i) / float64(n-i+1) * odds
	})
}

// BinomialUpper is the probability of at least k of n when each is a hit with
// probability p, good to small ones. See [BinomialAt].
func BinomialUpper(k, n int, p float64) float64 {
	switch {
	case n < 0 || !(p >= 0 && p <= 1):
		return math.NaN()
	case k > n || p == 0 && k > 0:
		return 0
	case float64(k) <= float64(n)*p:
		return 1 - BinomialLower(k-1, n, p)
	}
	// The misses of the mirrored count, summed here: handing 1-p on would lose the
	// digits of a small p.
	odds := p / (1 - p)
	return tailSum(BinomialAt(k, n, p), n-k, func(i int) float64 {
		return float64(i) / float64(n-i+1) * odds
	})
}

// HypergeometricAt is the probability of exactly k bad ones among n drawn
// without putting back from a lot of size of which bad are bad; NaN for numbers
// that fit no lot, 0 for k that cannot be. Accuracy and source as [BinomialAt]:
// the probability is a product of three binomial ones. Checked:
// TestHypergeometricAgainstManyDigits.
func HypergeometricAt(k, n, bad, size int) float64 {
	switch {
	case !lotFits(n, bad, size):
		return math.NaN()
	case k < max(0, n-(size-bad)) || k > min(n, bad):
		return 0
	case n == 0 || n == size || bad == 0 || bad == size:
		return 1
	}
	// The share drawn; any share would do, this one makes the three large.
	p := float64(n) / float64(size)
	return loader(float64(k), float64(bad), p) *
		loader(float64(n-k), float64(size-bad), p) /
		loader(float64(n), float64(size), p)
}

// HypergeometricLower is the probability of at most k bad ones among n drawn
// without putting back from a lot of size of which bad are bad, good to small
// ones. See [HypergeometricAt].
func HypergeometricLower(k, n, bad, size int) float64 {
	switch {
	case !lotFits(n, bad, size):
		return math.NaN()
	case k < max(0, n-(size-bad)):
		return 0
	case k >= min(n, bad):
		return 1
	case float64(k) > float64(n)*float64(bad)/float64(size):
		return 1 - HypergeometricUpper(k+1, n, bad, size)
	}
	return tailSum(HypergeometricAt(k, n, bad, size), k, func(i int) float64 {
		return float64(i) / float64(bad-i+1) * (float64(size-bad-n+i) / float64(n-i+1))
	})
}

// HypergeometricUpper is the probability of at least k bad ones among n drawn
// without putting back from a lot of size of which bad are bad, good to small
// ones. See [HypergeometricAt].
func HypergeometricUpper(k, n, bad, size int) float64 {
	switch {
	case !lotFits(n, bad, size):
		return math.NaN()
	case k > min(n, bad):
		return 0
	case float64(k) <= float64(n)*float64(bad)/float64(size):
		return 1 - HypergeometricLower(k-1, n, bad, size)
	}
	// k bad ones among the drawn are size-bad-n+k good ones among the others:
	// the same sum, downwards from the most there can be.
	top := min(n, bad)
	sum, term := 0.0, HypergeometricAt(k, n, bad, size)
	for i := k; i <= top; i++ {
		sum += term
		if term <= sum*1e-17 {
			break
		}
		term *= float64(bad-i) / float64(i+1) * (float64(n-i) / float64(size-bad-n+i+1))
	}
	return sum
}

func lotFits(n, bad, size int) bool {
	return n >= 0 && bad >= 0 && n <= size && bad <= size
}

func indicator(yes bool) float64 {
	if yes {
		return 1
	}
	return 0
}

// tailSum adds first and what lies behind it, down to the count 0: ratio(i) takes
// the term of i to that of i-1.
func tailSum(first float64, from int, ratio func(i int) float64) float64 {
	sum, term := first, first
	for i := from; i > 0; i-- {
		term *= ratio(i)
		sum += term
		if term <= sum*1e-17 {
			break
		}
	}
	return sum
}

// loader is the binomial probability for 0 <= k <= n and 0 < p < 1.
func loader(k, n, p float64) float64 {
	switch k {
	case 0:
		return math.Exp(n * math.Log1p(-p))
	case n:
		return math.Exp(n * math.Log(p))
	}
	s := stirlingRest(n) - stirlingRest(k) - stirlingRest(n-k) - deviance(k, n*p) - deviance(n-k, n*(1-p))
	return math.Exp(s) * math.Sqrt(n/(2*math.Pi*k*(n-k)))
}

// stirlingRest is ln n! less Stirling's n ln n - n + ln(2πn)/2.
func stirlingRest(n float64) float64 {
	if n < 16 {
		g, _ := math.Lgamma(n + 1)
		return g - (n+0.5)*math.Log(n) + n - math.Log(2*math.Pi)/2
	}
	r := 1 / (n * n)
	return (1./12 - r*(1./360-r*(1./1260-r*(1./1680-r/1188)))) / n
}

// deviance is x ln(x/m) + m - x, with its digits also where x is near m.
func deviance(x, m float64) float64 {
	d := x - m
	if math.Abs(d) >= 0.1*(x+m) {
		return x*math.Log(x/m) + m - x
	}
	v := d / (x + m)
	s := d * v
	e := 2 * x * v
	for j := 3.0; ; j += 2 {
		e *= v * v
		next := s + e/j
		if next == s {
			return s
		}
		s = next
	}
}
