package stats

import "math"

// VariablesPlan accepts a lot by the mean of a sample of N of it, when the limit
// is at least K standard deviations away: (mean - limit)/sd >= K. It takes
// measured values for normal, and needs far fewer parts than counting bad ones.
type VariablesPlan struct {
	N          int
	K          float64 // in standard deviations
	KLeast     float64 // with any factor from KLeast to KMost both risks are kept
	KMost      float64 // K is this one: the producer's risk is met, the consumer's is below
	KnownSigma bool    // the sd is known beforehand, not taken from the sample
}

// VariablesPlanFor is the smallest plan that refuses a lot with a share good of
// bad parts with a probability of at most producer, and accepts one with a share
// bad with a probability of at most consumer. N is 0 where there is none: good not
// below bad, a number not between 0 and 1, risks that add up to 1 or more, more
// than 1e6 parts.
//
// With known sigma n = ((z(producer)+z(consumer))/(z(good)-z(bad)))², exact for
// one limit; unknown by noncentral t, exact for one limit. Source: E. G.
// Schilling and D. V. Neubauer, Acceptance Sampling in Quality Control, ch. 10,
// from memory; A. Kiermeier, "Visualizing and assessing acceptance sampling
// plans" (J. Statistical Software 26(6), 2008). Checked: TestVariablesPlan.
func VariablesPlanFor(good, producer, bad, consumer float64, knownSigma bool) VariablesPlan {
	p := VariablesPlan{KnownSigma: knownSigma, K: math.NaN(), KLeast: math.NaN(), KMost: math.NaN()}
	if !inside(good) || !inside(bad) || !inside(producer) || !inside(consumer) || !(good < bad) || producer+consumer >= 1 {
		return p
	}
	least := 2
	if knownSigma {
		least = 1
	}
	p.N = leastInt(least, 1e6, func(n int) bool {
		return factorAt(n, good, producer, knownSigma) >= factorAt(n, bad, 1-consumer, knownSigma)
	})
	if p.N > 0 {
		p.KMost = factorAt(p.N, good, producer, knownSigma)
		p.KLeast = factorAt(p.N, bad, 1-consumer, knownSigma)
		p.K = p.KMost
	}
	return p
}

// VariablesPlanWith is the plan with n parts that refuses a lot with a share good
// of bad parts with the probability producer. K is NaN for n below 2, or below 1
// with known sigma.
func VariablesPlanWith(n int, good, producer float64, knownSigma bool) VariablesPlan {
	k := math.NaN()
	if inside(good) && inside(producer) && n >= 1 && (n >= 2 || knownSigma) {
		k = factorAt(n, good, producer, knownSigma)
	}
	return VariablesPlan{N: n, K: k, KLeast: k, KMost: k, KnownSigma: knownSigma}
}

// factorAt is the k with which n parts refuse a lot with the share p of bad ones
// with the probability refused.
func factorAt(n int, p, refused float64, knownSigma bool) float64 {
	root := math.Sqrt(float64(n))
	z := -NormalQuantile(p)
	if knownSigma {
		return z + NormalQuantile(refused)/root
	}
	return NoncentralTQuantile(refused, float64(n-1), z*root) / root
}

// Accepts is the probability that the plan accepts a lot of which the share p is
// beyond its one limit: with unknown sigma P(t'(N-1, z√N) >= K√N), exact for
// normal values. NaN for p outside 0 to 1 or a plan without parts. Checked:
// TestVariablesOC.
func (v VariablesPlan) Accepts(p float64) float64 {
	if !(p >= 0 && p <= 1) || v.N < 1 || math.IsNaN(v.K) || v.N < 2 && !v.KnownSigma {
		return math.NaN()
	}
	if p == 0 || p == 1 {
		return 1 - p
	}
	root := math.Sqrt(float64(v.N))
	z := -NormalQuantile(p)
	if v.KnownSigma {
		return NormalUpper((v.K - z) * root)
	}
	return NoncentralTUpper(v.K*root, float64(v.N-1), z*root)
}

// BadAccepted is the share of bad parts with which the plan accepts a lot with
// the probability given. NaN where it is not between 0 and 1.
func (v VariablesPlan) BadAccepted(probability float64) float64 {
	if !inside(probability) || math.IsNaN(v.Accepts(0.5)) {
		return math.NaN()
	}
	f := func(z float64) float64 { return v.Accepts(NormalUpper(z)) - probability }
	return NormalUpper(rootWithin(f, -8, 37))
}

// Judgement is what a variables plan says about one sample.
type Judgement struct {
	Accept     bool
	QLow       float64 // (mean - low)/sd; NaN without a lower limit
	QHigh      float64 // (high - mean)/sd; NaN without an upper limit
	BadLow     float64 // share of the lot estimated below the lower limit, 0 without one
	BadHigh    float64 // share estimated above the upper limit, 0 without one
	MostBad    float64 // the most that BadLow + BadHigh may be
	Computable bool    // false: fewer than 2 values (3 for two limits), no spread, or no limit
}

// Judge says whether a sample is accepted: with one limit by its distance, Q >=
// K; with two by the estimated share beyond both, which together must not exceed
// the share estimated at Q = K. For one limit the two rules are the same. The
// sample's own size is used. A limit that is NaN or infinite is none.
//
// The estimate is the unbiased one of least variance for normal values: with
// unknown sigma the beta distribution with parameters n/2-1 up to
// ½ - Q√n/2(n-1), with known sigma Φ(-Q√(n/(n-1))). Source: Lieberman and
// Resnikoff, "Sampling plans for inspection by variables" (J. Am. Stat. Assoc.
// 50, 1955), from memory; MIL-STD-414 (1957). Checked: TestJudgement.
func (v VariablesPlan) Judge(mean, sd float64, n int, low, high float64) Judgement {
	j := Judgement{QLow: math.NaN(), QHigh: math.NaN(), MostBad: math.NaN()}
	two := isFinite(low) && isFinite(high)
	if !(sd > 0) || !isFinite(mean) || math.IsNaN(v.K) || !isFinite(low) && !isFinite(high) || n < 2 || two && n < 3 && !v.KnownSigma {
		return j
	}
	j.Computable = true
	if isFinite(low) {
		j.QLow = (mean - low) / sd
		j.BadLow = v.estimate(j.QLow, n)
	}
	if isFinite(high) {
		j.QHigh = (high - mean) / sd
		j.BadHigh = v.estimate(j.QHigh, n)
	}
	j.MostBad = v.estimate(v.K, n)
	switch {
	case two:
		j.Accept = j.BadLow+j.BadHigh <= j.MostBad
	case isFinite(low):
		j.Accept = j.QLow >= v.K
	default:
		j.Accept = j.QHigh >= v.K
	}
	return j
}

// estimate is the share beyond a limit that lies q standard deviations away.
func (v VariablesPlan) estimate(q float64, n int) float64 {
	m := float64(n)
	if v.KnownSigma {
		return NormalUpper(q * math.Sqrt(m/(m-1)))
	}
	x := 0.5 - q*math.Sqrt(m)/(2*(m-1))
	switch {
	case n < 3:
		return math.NaN()
	case x <= 0:
		return 0
	case x >= 1:
		return 1
	}
	// The symmetric beta distribution is Student's t in other clothes.
	df := m - 2
	u := 1 - 2*x
	return TUpper(u*math.Sqrt(df/(1-u*u)), df)
}
