package compare

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// fewestGains is the least number of devices a lot whose gains are compared.
const fewestGains = 4

// gain compares the drive strength of the lots at equal threshold, by analysis of
// covariance with one slope b of ln gain on the threshold within the lots:
//
//	percent = 100 (exp(Δ ln gain - b Δ threshold) - 1)
//	se² = s² (1/n_1 + 1/n_2 + Δ threshold²/Σ(x - x̄)²) + u²,  n_1 + n_2 - 3 degrees of freedom
//
// u is what session and meters do to the gain of one lot and not of the other. The
// gain factor is taken where enough devices of both lots have it by one method, else
// the transconductance at the idle current; the threshold is V_GS(th), which in
// itself holds little of the gain, else the quantity that is compared. Every device
// with both numbers takes part; least squares, so that a far-out gain widens the
// interval. Nil where fewer than 4 devices a lot have a gain.
//
// Source: Fisher's analysis of covariance, any textbook (from memory). Checked:
// TestGainAtEqualThreshold.
func (c *comparing) gain() *Gain {
	for _, k := range []fit.Key{fit.KeyBeta, fit.KeyGmIdle} {
		a, b := c.gainsOf(k)
		if len(a) < fewestGains || len(b) < fewestGains {
			continue
		}
		g := &Gain{Key: k, N: [2]int{len(a), len(b)}}
		e, adjusted, beyond := covariance(a, b)
		if !e.ok() {
			continue
		}
		s := sharedOf(c.gainSharing(c.ref, a, k), c.gainSharing(c.cand, b, k))
		e.with(s.u, math.Inf(1))
		low, high := e.interval(c.opt.Level)
		g.Percent, g.P, g.Adjusted = Interval{percent(e.shift), percent(low), percent(high)}, e.p(), adjusted
		g.Text = c.gainWords(g, low > 0 || high < 0, beyond, s.missing)
		return g
	}
	return nil
}

func percent(ln float64) float64 { return 100 * math.Expm1(ln) }

// gained is a device with a gain.
type gained struct {
	m  *Member
	x  float64 // threshold, V; NaN: none
	ln float64 // of the gain
}

// gainsOf gives the devices of both lots that have the gain; a gain factor only by
// the method that most of them share.
func (c *comparing) gainsOf(k fit.Key) (ref, cand []gained) {
	by := c.opt.By
	if c.has(c.ref, fit.KeyVgsth) && c.has(c.cand, fit.KeyVgsth) {
		by = fit.KeyVgsth
	}
	method := ""
	if k == fit.KeyBeta {
		n := map[string][2]int{}
		for side, v := range []*values{c.ref, c.cand} {
			for _, m := range v.of {
				if m.Result.Beta.Ok() {
					q := n[m.Result.Method]
					q[side]++
					n[m.Result.Method] = q
				}
			}
		}
		most := 0
		for name, q := range n {
			if m := min(q[0], q[1]); m > most || m == most && m > 0 && name < method {
				method, most = name, m
			}
		}
		if most == 0 {
			return nil, nil
		}
	}
	collect := func(v *values) (out []gained) {
		for _, m := range v.of {
			x, _, _ := lot.Read(&m.Result, by)
			g, _, _ := lot.Read(&m.Result, k)
			if g = math.Abs(g); !(g > 0) || method != "" && m.Result.Method != method {
				continue
			}
			out = append(out, gained{m, x, math.Log(g)})
		}
		return out
	}
	return collect(c.ref), collect(c.cand)
}

// has reports whether four fifths of the devices have the quantity.
func (c *comparing) has(v *values, k fit.Key) bool {
	n := 0
	for _, m := range v.of {
		if x, _, _ := lot.Read(&m.Result, k); !math.IsNaN(x) {
			n++
		}
	}
	return float64(n) >= (1-mostCarriedOn)*float64(len(v.of))
}

// gainSharing is what session and meters do to the logarithm of a gain.
func (c *comparing) gainSharing(v *values, g []gained, k fit.Key) sharing {
	of := make([]*Member, len(g))
	for i := range g {
		of[i] = g[i].m
	}
	return sharingOf(v.lot, of, k, func(x float64) float64 { return 1 / math.Abs(x) })
}

// covariance is the difference of ln gain at equal threshold; without thresholds
// that differ, that of the means. beyond: no device of one lot has a threshold among
// those of the other.
func covariance(ref, cand []gained) (e estimate, adjusted, beyond bool) {
	a, b := groupOf(ref), groupOf(cand)
	n1, n2 := float64(len(ref)), float64(len(cand))
	e.shift = b.meanLn - a.meanLn
	squares, df := a.ll+b.ll, n1+n2-2
	factor := 1/n1 + 1/n2
	if xx := a.xx + b.xx; xx > 0 && df > 1 { // false where a threshold is missing
		slope := (a.xl + b.xl) / xx
		d := b.meanX - a.meanX
		e.shift -= slope * d
		squares -= slope * (a.xl + b.xl)
		factor += d * d / xx
		df--
		adjusted = true
		beyond = a.high < b.low || b.high < a.low
	}
	e.with(math.Sqrt(math.Max(0, squares)/df*factor), df)
	return e, adjusted, beyond
}

// group is the sums of one lot about its means.
type group struct {
	meanX, meanLn, xx, xl, ll, low, high float64
}

func groupOf(g []gained) group {
	x, ln := make([]float64, len(g)), make([]float64, len(g))
	for i := range g {
		x[i], ln[i] = g[i].x, g[i].ln
	}
	s := group{meanX: stats.Mean(x), meanLn: stats.Mean(ln), low: math.Inf(1), high: math.Inf(-1)}
	for i := range g {
		dx, dl := x[i]-s.meanX, ln[i]-s.meanLn
		s.xx += dx * dx
		s.xl += dx * dl
		s.ll += dl * dl
		s.low, s.high = min(s.low, x[i]), max(s.high, x[i])
	}
	return s
}

// tenths writes percent with a sign and one decimal; 0 has neither.
func tenths(x float64) string {
	if text := fmt.Sprintf("%+.1f", x); text != "-0.0" && text != "+0.0" {
		return text
	}
	return "0"
}

// gainWords says what was found.
func (c *comparing) gainWords(g *Gain, differs, beyond, missing bool) string {
	name := lot.NameOf(g.Key)
	at := "at equal threshold"
	if !g.Adjusted {
		at = "without regard to the threshold"
	}
	numbers := fmt.Sprintf("%s %%, %s interval %s to %s %%", tenths(g.Percent.Value), levelWords(c.opt.Level), tenths(g.Percent.Low), tenths(g.Percent.High))
	text := fmt.Sprintf("%s the %s of lot %s differs from that of lot %s: %s, %s", at, name, c.cand.lot.Name, c.ref.lot.Name, numbers, pWords(g.P))
	if !differs {
		text = fmt.Sprintf("%s no difference of the %s is seen: %s", at, name, numbers)
	}
	if beyond {
		text += "; the thresholds of the lots do not overlap, so that this rests on the slope within them"
	}
	if missing {
		text += "; what different meters do to it is not known and not in the interval"
	}
	return text
}
