package compare

import (
	"fmt"
	"math"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// What makes [ByLikeness] pair devices by serial: chance alone gives such lots with
// a probability below likeP, and lots numbered from 1 each have correlations of
// about 0.
const (
	fewestPairs = 4
	likeR       = 0.9
	likeP       = 1e-3
)

// pairs are the devices of one serial in both lots.
type pairs struct {
	ref, cand []*Member
	x, y      []float64 // values, ±Inf where above; reference, candidate
	d         []float64 // candidate - reference
	endless   int       // of d that are infinite
	r         float64   // correlation of the finite ones
	out       *Paired
}

// pairing settles whether devices are compared by serial; nil: they are not.
func (c *comparing) pairing() *pairs {
	if c.opt.Pairing == Never {
		return nil
	}
	p := c.pairUp()
	if c.opt.Pairing == BySerial {
		p.out.Why = fmt.Sprintf("asked for: %s in both lots", stand(p.out.Pairs, "serial stands", "serials stand"))
	} else {
		n := p.out.Pairs - p.endless
		smaller := min(len(c.ref.x), len(c.cand.x))
		if n < fewestPairs || 2*p.out.Pairs < smaller || !(p.r >= likeR) || !(correlationP(p.r, n) < likeP) {
			return nil
		}
		p.out.Why = fmt.Sprintf("%d serials stand in both lots and their values go together (r = %.3f): the same parts, measured twice", p.out.Pairs, p.r)
	}
	c.out.Paired = p.out
	return p
}

// SameDevices reports whether two lots hold the same devices, measured twice, as far
// as serials and values tell by one quantity: as [ByLikeness] pairs them.
func SameDevices(a, b Lot, by fit.Key) bool {
	c := comparing{opt: Options{By: by}, ref: valuesOf(&a, by), cand: valuesOf(&b, by)}
	return c.pairing() != nil
}

// pairUp finds the serials of both lots. Names that stand twice in a lot, and
// devices that reach the current in neither, are in no pair.
func (c *comparing) pairUp() *pairs {
	nan := math.NaN()
	p := &pairs{r: nan, out: &Paired{SD: nan, Own: Interval{nan, nan, nan}}}
	ref, cand := byName(c.ref), byName(c.cand)
	var x, y, d []float64
	for i, m := range c.ref.of {
		j, both := cand[m.Name]
		if !both {
			p.out.OnlyRef = append(p.out.OnlyRef, m.Name)
			continue
		}
		if ref[m.Name] < 0 || j < 0 || math.IsNaN(c.cand.x[j]-c.ref.x[i]) {
			continue
		}
		p.ref, p.cand = append(p.ref, m), append(p.cand, c.cand.of[j])
		p.x, p.y = append(p.x, c.ref.x[i]), append(p.y, c.cand.x[j])
		p.d = append(p.d, c.cand.x[j]-c.ref.x[i])
		if far := math.IsInf(c.cand.x[j]-c.ref.x[i], 0); far {
			p.endless++
			continue
		}
		x, y, d = append(x, c.ref.x[i]), append(y, c.cand.x[j]), append(d, c.cand.x[j]-c.ref.x[i])
	}
	for _, m := range c.cand.of {
		if _, both := ref[m.Name]; !both {
			p.out.OnlyNew = append(p.out.OnlyNew, m.Name)
		}
	}
	p.out.Pairs = len(p.d)
	p.out.SD = stats.SD(d)
	p.r = correlation(x, y)
	return p
}

// byName is where each name stands; -1: it stands twice.
func byName(v *values) map[string]int {
	at := make(map[string]int, len(v.of))
	for i, m := range v.of {
		if _, twice := at[m.Name]; twice {
			i = -1
		}
		at[m.Name] = i
	}
	return at
}

// correlation is Pearson's r, NaN for fewer than 3 pairs or no scatter.
func correlation(x, y []float64) float64 {
	if len(x) < 3 {
		return math.NaN()
	}
	mx, sx := stats.MeanSD(x)
	my, sy := stats.MeanSD(y)
	sum := 0.0
	for i := range x {
		sum += (x[i] - mx) / sx * ((y[i] - my) / sy)
	}
	return max(-1, min(1, sum/float64(len(x)-1)))
}

// correlationP is the two-sided probability of so large an r by chance.
func correlationP(r float64, n int) float64 {
	df := float64(n - 2)
	if math.Abs(r) == 1 {
		return 0
	}
	return 2 * stats.TUpper(math.Abs(r)*math.Sqrt(df/(1-r*r)), df)
}
