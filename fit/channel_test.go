package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The derivatives against differences of the model itself, in every circuit, at
// random parameters; the kink's corner is passed over, where there are none.
func TestChannelDerivatives(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 3))
	feeds := []feed{{}, {tied: true}, {drain: 10}, {drain: 1000}, {source: 0.1}, {source: 0.2, drain: 5}, {tied: true, source: 0.3, drain: 2}}
	checked := 0
	for range 4000 {
		p := [parCount]float64{1 + 4*r.Float64(), math.Log(0.1 + 5*r.Float64()), math.Log(0.3 + 3*r.Float64()), 0.4*r.Float64() - 0.05, 0.05 * r.Float64(), 0.1 * r.Float64()}
		foot := Foot(r.IntN(3))
		f := feeds[r.IntN(len(feeds))]
		vg := p[parVt] - 0.5 + 4*r.Float64()
		vtop := []float64{0.1, 12, 28}[r.IntN(3)]
		top := func(vg float64) float64 {
			if f.tied {
				return vg
			}
			return vtop
		}
		at := func(p [parCount]float64, vg float64) float64 {
			c := channelOf(&p, foot)
			return c.solve(f, vg, top(vg)+p[parTop], math.NaN())
		}
		c := channelOf(&p, foot)
		i := at(p, vg)
		z := (vg - i*f.source - p[parVt]) / c.a
		vds := top(vg) + p[parTop] - i*(f.source+f.drain)
		s, _, _ := c.kinked(z * c.a)
		if i < 1e-9 || math.Abs(z-0.5) < 0.01 || math.Abs(s-vds) < 1e-3 {
			continue
		}
		checked++
		var dp [parCount]float64
		_, slope := c.along(f, vg, top(vg)+p[parTop], math.NaN(), &dp)
		const h = 1e-5
		same := func(name string, got, want, scale float64) {
			t.Helper()
			// The current is solved to a relative 1e-11 and more than h times that is lost
			// in the difference.
			if math.Abs(got-want) > 2e-5*math.Max(math.Abs(want), scale)+1e-11*i/h {
				t.Fatalf("%s: %g, by differences %g (p %v, feed %+v, vg %g)", name, got, want, p, f, vg)
			}
		}
		same("slope", slope, (at(p, vg+h)-at(p, vg-h))/(2*h), 0.1*i)
		for k := range p {
			lo, hi := p, p
			lo[k] -= h
			hi[k] += h
			same("parameter "+string(rune('0'+k)), dp[k], (at(hi, vg)-at(lo, vg))/(2*h), 0.1*i)
		}
	}
	if checked < 2000 {
		t.Errorf("only %d places checked", checked)
	}
}

// The circuit is solved to a relative 1e-10, whatever the guess.
func TestChannelSolve(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 3))
	for range 2000 {
		p := [parCount]float64{3, math.Log(0.01 + 50*r.Float64()), math.Log(0.05 + 3*r.Float64()), 0.3 * r.Float64(), 0.05 * r.Float64(), 0}
		c := channelOf(&p, Foot(r.IntN(3)))
		f := feed{source: math.Max(0, r.Float64()-0.5), drain: math.Pow(10, 4*r.Float64()-1)}
		vg, vtop := 2+6*r.Float64(), 0.1+30*r.Float64()
		i := c.solve(f, vg, vtop, vtop*r.Float64()/f.drain)
		var e ends
		vds := vtop - i*(f.source+f.drain)
		c.source(&e, vg-i*f.source)
		c.drain(&e, vds)
		id, gm, gds := c.current(&e, vds)
		if miss := (i - id) / (1 + f.source*gm + (f.source+f.drain)*gds); math.Abs(miss) > 1e-10*i+1e-18 {
			t.Fatalf("off by %g of %g A at %v %+v vg %g vtop %g", miss, i, p, f, vg, vtop)
		}
	}
}

// The knees against the functions of the standard library.
func TestKnees(t *testing.T) {
	check := func(name string, z, got, want, tol float64) {
		t.Helper()
		if !(math.Abs(got-want) <= tol*want) {
			t.Fatalf("%s at %g: %.17g, want %.17g, off by %.1e", name, z, got, want, got/want-1)
		}
	}
	for j := range 200_001 {
		z := far * (float64(j)/100_000 - 1)
		e := math.Exp(z)
		y, s := smoothKnee().at(z)
		check("ln(1+exp(z))", z, y, math.Log1p(e), 5e-15)
		check("its slope", z, s, 1/(1+math.Exp(-z)), 2e-12)
		y, s = sharpKnee().at(z)
		check("asinh(exp(z)/2)", z, y, math.Asinh(e/2), 5e-15)
		check("its slope", z, s, e/math.Sqrt(4+e*e), 2e-12)
	}
}
