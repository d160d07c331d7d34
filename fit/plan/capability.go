package plan

import (
	"fmt"
	"math"

	"gatesill/fit/stats"
)

// FewestCapable is the smallest number of parts from which a capability is stated.
// With fewer, the lower bound lies so far below the index that the index says
// nothing: 1.33 found with 10 parts proves 0.78.
const FewestCapable = 25

// CapabilityRequest asks how many parts prove a Ppk.
type CapabilityRequest struct {
	Target     float64 // Ppk to be proven
	Expected   float64 // Ppk that is expected to be found; NaN: not known
	Confidence float64 // of the lower bound
	N          int     // parts measured; 0: how many is asked
	Lot        Lot
	Low, High  float64 // V, limits for the lot at hand; NaN: none
}

// Capability is the answer to a [CapabilityRequest]. The bounds are exact for one
// limit; with two they hold for the nearer one, which as a rule decides.
type Capability struct {
	CapabilityRequest
	Needed    int              // parts with which Expected proves Target; 0: not asked, or too many
	TooMany   bool             // more than are planned with would be needed
	Bound     float64          // what Expected, found with N parts, proves; NaN
	Rows      []MustShow       // what has to be found to prove Target, over numbers of parts or of N alone
	TooFew    bool             // N, or the lot at hand, is below [FewestCapable]
	Index     stats.Capability // of the lot at hand; NaN where declined
	Declined  string           // why the lot has none; ""
	BoundOf   float64          // lower bound of the lot at hand; NaN
	Proven    bool             // BoundOf reaches Target
	Normality Normality
}

// MustShow is the Ppk that N parts have to show so that the target is proven.
type MustShow struct {
	N   int
	Ppk float64
}

// ToBeCapable answers a [CapabilityRequest]. Errors: [Invalid]. Checked:
// TestCapability.
func ToBeCapable(r CapabilityRequest) (*Capability, error) {
	err := firstError(
		above("ppk", r.Target, "", "--ppk 1.33"), fraction("confidence", r.Confidence, "--confidence 95%"),
		atLeast("n", r.N, 2, "one part has no spread"), atMost("n", r.N),
	)
	if err == nil && !math.IsNaN(r.Expected) && r.Target >= r.Expected {
		err = &Invalid{"expect", fmt.Sprintf("a Ppk of %.6g found cannot prove %.6g: the bound lies below it", r.Expected, r.Target), "an expected Ppk above the one to be proven: --expect 1.67"}
	}
	if err == nil && r.Low >= r.High {
		err = &Invalid{"limit-low", fmt.Sprintf("%.6g V is not below the upper limit of %.6g V", r.Low, r.High), "--limit-low 2V --limit-high 4V"}
	}
	if err != nil {
		return nil, err
	}
	c := &Capability{CapabilityRequest: r, Bound: math.NaN(), BoundOf: math.NaN(), Normality: Normality{P: math.NaN()}}
	c.Index = stats.CapabilityOf(math.NaN(), math.NaN(), 0, math.NaN(), math.NaN())
	if !math.IsNaN(r.Expected) {
		n := stats.CpkSize(r.Expected, r.Target, r.Confidence)
		c.TooMany = n == 0 || n > mostParts
		if !c.TooMany {
			c.Needed = max(n, FewestCapable)
		}
		if r.N > 0 {
			c.Bound = stats.CpkBoundOneLimit(r.Expected, r.N, r.Confidence)
		}
	}
	sizes := []int{25, 30, 50, 100, 200, 500}
	if r.N > 0 {
		sizes = []int{r.N}
		c.TooFew = r.N < FewestCapable
	}
	for _, n := range sizes {
		c.Rows = append(c.Rows, MustShow{n, stats.CpkNeeded(r.Target, n, r.Confidence)})
	}
	if r.Lot.given() {
		c.TooFew = r.Lot.N < FewestCapable
		c.Index = stats.CapabilityOf(r.Lot.Mean, r.Lot.SD, r.Lot.N, r.Low, r.High)
		c.Normality = normalityOf(r.Lot.Values)
		switch c.Declined = r.Lot.unfit(c.Normality); {
		case c.Declined != "":
		case c.TooFew:
			c.Declined = fmt.Sprintf("%d devices have a value, and fewer than %d say too little", r.Lot.N, FewestCapable)
		case math.IsNaN(c.Index.Cpk):
			c.Declined = "its values do not differ"
		default:
			c.BoundOf = stats.CpkBoundOneLimit(c.Index.Cpk, r.Lot.N, r.Confidence)
			c.Proven = c.BoundOf >= r.Target
		}
		if c.Declined != "" {
			c.Index = stats.CapabilityOf(math.NaN(), math.NaN(), r.Lot.N, math.NaN(), math.NaN())
		}
	}
	return c, nil
}
