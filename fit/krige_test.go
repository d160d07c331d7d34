package fit

import (
	"math"
	"testing"
)

// spread lays residuals of a function of the gate voltage at even steps around 0.
func residualsOf(f func(x float64) float64, step, s float64) *spreading {
	p := &spreading{n: 2 * krigeSide, usual: krigeUsual}
	for k := range p.n {
		p.x[k] = (float64(k) - krigeSide + 0.5) * step
		p.r[k], p.s[k] = f(p.x[k]), s
	}
	return p
}

// What a model leaves over smoothly, well above the noise, is put right between the
// points to a small part of itself (self-made).
func TestSpreadingFollowsWhatIsSmooth(t *testing.T) {
	wave := func(x float64) float64 { return 5e-3 * math.Sin(x/0.15+0.4) }
	for _, step := range []float64{0.03, 0.06, 0.1} {
		p := residualsOf(wave, step, 10e-6)
		got, u := p.at(0)
		limit := 20e-6 + 0.3e-3*math.Pow(step/0.1, 2)
		if e := got - wave(0); !(math.Abs(e) <= limit) || !(math.Abs(e) <= 3*u+20e-6) {
			t.Errorf("%g V steps: %.5f V ± %.5f, want %.5f ± %.5f", step, got, u, wave(0), limit)
		}
		// At a point itself nothing is left open.
		if got, u := p.at(p.x[3]); math.Abs(got-p.r[3]) > 20e-6 || u > 20e-6 {
			t.Errorf("%g V steps: at a point %.6f V ± %.6f, want %.6f", step, got, u, p.r[3])
		}
	}
}

// An even shift of all points is taken on nearly whole: the weights come near to one
// together, the less so the smaller the shift is against the noise.
func TestSpreadingWeights(t *testing.T) {
	for _, c := range []struct{ shift, noise, least, most float64 }{
		{5e-3, 10e-6, 0.97, 1.03},
		{5e-3, 0.5e-3, 0.9, 1.05},
		{0.05e-3, 0.5e-3, 0, 0.9},
	} {
		p := residualsOf(func(float64) float64 { return c.shift }, 0.06, c.noise)
		got, _ := p.at(0)
		sum, made := 0.0, 0.0
		for k := range p.n {
			sum += p.w[k]
			made += p.w[k] * p.r[k]
		}
		if math.Abs(made-got) > 1e-12 {
			t.Errorf("shift %g V: the weights make %.8f V, the value is %.8f", c.shift, made, got)
		}
		if !(sum >= c.least && sum <= c.most) {
			t.Errorf("shift %g V in noise of %g V: weights sum to %.3f, want %.2f to %.2f", c.shift, c.noise, sum, c.least, c.most)
		}
	}
}

// Noise alone is not followed: the value stays well below it (self-made).
func TestSpreadingLeavesNoiseAlone(t *testing.T) {
	r := randomSource(41)
	const noise = 0.5e-3
	var values []float64
	for range 500 {
		p := residualsOf(func(float64) float64 { return noise * r.NormFloat64() }, 0.06, noise)
		v, _ := p.at(0)
		values = append(values, v)
	}
	if got := rms(values); !(got <= 0.5*noise) {
		t.Errorf("of noise of %g V there comes %.3g V rms, want at most half", noise, got)
	}
}

// The standard deviation is honest on functions as smooth as assumed: sums of waves of
// lengths around the reach, of sizes as unlike as assumed, with the noise of the
// points (self-made).
func TestSpreadingIsHonest(t *testing.T) {
	r := randomSource(42)
	for _, step := range []float64{0.06, 0.1} {
		var h honesty
		for range 2000 {
			size := krigeUsual * math.Exp(krigeRange*r.NormFloat64())
			var a, b, k [6]float64
			for m := range a {
				a[m], b[m], k[m] = r.NormFloat64(), r.NormFloat64(), math.Abs(r.NormFloat64())/krigeReach
			}
			f := func(x float64) float64 {
				y := 0.0
				for m := range a {
					y += a[m]*math.Sin(k[m]*x) + b[m]*math.Cos(k[m]*x)
				}
				return size * y / math.Sqrt(float64(len(a)))
			}
			const noise = 0.3e-3
			p := residualsOf(func(x float64) float64 { return f(x) + noise*r.NormFloat64() }, step, noise)
			v, gap := p.at(0)
			random := 0.0
			for m := range p.n {
				random += p.w[m] * p.w[m] * noise * noise
			}
			h.add(v-f(0), math.Sqrt(gap*gap+random))
		}
		if q := h.median(); !(q >= 0.3 && q <= 0.82) {
			t.Errorf("%g V steps: median of |e|/u %.2f", step, q)
		}
		if got := h.within(2); !(got >= 0.9) {
			t.Errorf("%g V steps: %.1f %% within 2u", step, 100*got)
		}
		t.Logf("%g V steps: median of |e|/u %.2f, within 2u %.1f %%", step, h.median(), 100*h.within(2))
	}
}
