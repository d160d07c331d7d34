// Package lot says what the devices of one lot have in common and which stand
// apart: spread, flags, bins.
//
// It takes results of single devices and gives back numbers and sentences; it
// opens nothing, draws nothing, and decides nothing for the person. It says that
// a device stands apart from its lot, never that it is genuine or not, and where
// there are too few devices to judge one another it says that instead.
//
// [SpreadOf] looks in this order: devices with a fault of their own (open,
// shorted, leaking, ...), whether the lot is two populations, and only then
// single devices outside the limits of their lot: by gate voltage, by gain factor
// and transconductance at the idle current, and by the whole curve, where it is
// not what threshold and gain let expect (curve.go). Two populations are looked
// for by gate voltage and gains, not by the curve. The limits are set so that at
// most 2 % of lots without anything odd, of any size, get any flag for standing
// apart or are called two populations, all quantities together; that holds for
// values spread like a normal distribution (gains: they or their logarithms) and
// was found by simulation, see limits.go. Lots with heavier tails get more: with
// those of Student's t with 5 degrees of freedom in all that differs, 5 % of lots
// of 10, 15 % of lots of 20, 32 % of lots of 40 and 71 % of lots of 120 have a
// flagged device (by one quantity alone 6, 14, 25 and 58 %). Two populations are
// told by a test of its own, which fewer than 1 % of lots of one population pass,
// also where they are spread evenly over a range (sorted by their seller) or have
// such tails; lots of fewer than 8 are never parted.
//
// [SpecOf] holds a lot against the limits of its data sheet by the rule that is stored
// with it. It gives verdicts on devices and what follows for the parts that were not
// measured; what is to be done is the reader's to decide.
package lot

import (
	"fmt"

	"gatesill/fit"
)

// KeySpan is the gate span from the test current to the idle current, V: the
// drive strength of a device of which nothing else tells it (two spots). It is
// in Limits and Distance only, and only where no gain is known.
const KeySpan fit.Key = "gate_span_V"

// KeyCurve is the departure of the whole curve from what threshold and gain let
// expect, V of gate voltage at some current. It is in Limits and Distance only:
// the distance is that at the current where it is greatest, with its sign (more
// gate voltage than expected is positive); the limits are the widest at any of
// the currents.
const KeyCurve fit.Key = "curve_V"

// CurveKey names the departure at one current, A, for [Spread.Further] and
// [Known].
func CurveKey(current float64) fit.Key {
	return fit.Key(fmt.Sprintf("curve_at_%gA_V", current))
}

// Device is one device of the lot with the result of its fit.
type Device struct {
	Name     string
	Control  bool    // kept for checking the bench: in no statistic
	DateCode string  // written on it; "": not known
	Tube     string  // tube, tray or reel it came in; "": not known
	Unlike   string  // why its V_GS(th) cannot be held against the data sheet: not measured at its condition; "": it can
	Reached  float64 // V, greatest gate voltage that it was given, by magnitude and with the sign that turns it on; 0: not known
	Result   fit.Result
}

// Summary is the spread of one quantity over the devices that have it, in the
// unit of the quantity. NaN where n is too small for the number: SD and RobustSD
// need two values, Median and RobustSD more than half of the devices below the
// current.
type Summary struct {
	N        int // devices with a value
	Above    int // devices that never reach the current; counted as above every value in Median and RobustSD
	Mean     float64
	SD       float64
	Median   float64
	RobustSD float64 // 1.4826 × MAD, not below what step and u of the readings let it be
	Min, Max float64
	Step     float64 // step of the readings, given or found from the values; 0: none seen
}

// Limit is the range outside which a device is flagged for one quantity, in its
// unit. It is K robust spreads (of the logarithm, for gains) on both sides of the
// median, widened by half a step of the readings; without a K given it is
// narrowed to what the generalised ESD test lets pass, and for gains moved out on
// the side of low gain.
type Limit struct {
	K     float64 // multiples of the robust spread
	Basis string  // BasisLot or BasisHistory
	Low   float64
	High  float64
}

// What a [Limit] rests on.
const (
	BasisLot     = "this lot"
	BasisHistory = "part history"
)

// Reason is why a device is flagged: a code of fit.Codes and one sentence.
type Reason struct {
	Code string
	Text string
}

// Verdict is what the lot says of one device. Distance holds, by quantity, how
// many robust spreads it lies from the median (NaN when it has no value); gains
// on a logarithmic scale. In a lot with a small second population that is the
// median and spread of the greater one.
type Verdict struct {
	Name     string
	Flagged  bool
	Reasons  []Reason
	Distance map[fit.Key]float64
}

// Split is the parting of a lot in two populations at a gap of one quantity. It is
// told where Score exceeds Bar, by a test whose basis is [SplitBasis].
type Split struct {
	By         fit.Key
	At         float64  // middle of the gap
	Low, High  []string // names, in the order given
	GapLow     float64  // greatest value of the lower group
	GapHigh    float64  // least value of the upper group
	Score      float64  // evidence for two groups: twice the logarithm of a ratio of likelihoods
	Bar        float64  // what Score must exceed, for this number of devices and of quantities looked at
	Text       string
	SecondAlso fit.Key  // another quantity that parts the lot in the same way, "" if none
	Origins    []Origin // date codes and tubes of the two groups, where at least two of either are known
}

// SplitBasis says what the bar of a [Split] rests on.
const SplitBasis = "fewer than 1 % of lots of one population have as much, all quantities looked at together: by simulation 0.4 % of normal lots, 0.8 % of lots spread evenly over a range or with the tails of Student's t with 5 degrees of freedom"

// Spread is the whole answer for one lot.
type Spread struct {
	SortedBy    fit.Key
	Populations int // 1 or 2
	Split       *Split
	Summary     map[fit.Key]Summary
	Further     map[fit.Key]Summary // of quantities that only a lot has: [KeySpan], and what [CurveKey] names, at each of Currents
	Currents    []float64           // A, at which the curves were compared; nil: they were not
	Limits      map[fit.Key]Limit
	Devices     []Verdict // in the order given
	Estimator   string    // names the robust estimator, for the reader
	Warnings    []fit.Warning
}

// Known is the spread of the same part under like conditions, from earlier
// lots, used where a lot is too small to judge itself.
type Known struct {
	RobustSD map[fit.Key]float64 // unit of the quantity
	Devices  int                 // fewer than 8: not used
	Of       map[fit.Key]int     // devices with a value, where not all have the quantity; absent: Devices
	Lots     int
}

// SpreadOptions are the choices of [SpreadOf].
type SpreadOptions struct {
	SortedBy     fit.Key             // primary quantity; "": gate bias at the idle current where there is one, else V_GS(th)
	K            float64             // limit in robust spreads; 0 or NaN: the default of the lot's size
	Known        *Known              // nil: none
	Currents     []float64           // A, at which the curves are compared, of [fit.LevelCurrents] and ascending; nil: those of [Currents]
	Resolution   map[fit.Key]float64 // step of the readings; 0 or absent: found from the data
	LeakageLimit float64             // A, drain leakage that is too much; 0 or NaN: default rule, see physical.go
	TestCurrent  float64             // A, for the default rule of leakage; 0 or NaN: not known
	PChannel     bool                // more negative is 'above', limits of the data sheet by magnitude
	VgsthMin     float64             // V, data-sheet limits; NaN, or both 0: none
	VgsthMax     float64
}

// Placed is a device in a bin.
type Placed struct {
	Name  string
	Value float64 // in the unit of the quantity
	U     float64 // standard uncertainty within the session; NaN: not known
	Maybe string  // bin across the nearest edge, [OutsideEdges] beyond the outermost; "" when every edge is more than 2u away, or u is not known
}

// OutsideEdges is what Maybe says of a device that may lie outside the edges
// given.
const OutsideEdges = "outside"

// Bin holds the devices with Low <= value < High; the last bin of a lot sorted by
// edges or by number also those with value == High. Numbers that differ by less
// than a billionth of the width of a bin count as the same, so that 2.80 lies in
// the bin from 2.80 V even where the computer holds it as a little less.
type Bin struct {
	Name      string // A, B, ... Z, AA, ...
	Low, High float64
	Devices   []Placed // ascending by value, then in the order given
}

// Unsorted is a device in no bin, and why.
type Unsorted struct {
	Name string
	Why  string
}

// Sorting is a lot put in bins.
type Sorting struct {
	By            fit.Key
	SmallestWidth float64    // 4u, median u of the devices; NaN if no u is known
	Bins          []Bin      // ascending; empty bins included
	Unsorted      []Unsorted // in the order given
	Warnings      []fit.Warning
}

// SortOptions say how a lot is put in bins; exactly one of Width, Edges, Bins is
// set.
//
// With a width the edges are whole multiples of it (50 mV: 2.80 V, 2.85 V, ...),
// so that lots sorted with the same width have the same bins. With a number the
// range from the least to the greatest device is cut in bins of one width, not in
// groups of one size: those would part devices that are nearly the same.
type SortOptions struct {
	By    fit.Key
	Width float64   // unit of By
	Edges []float64 // ascending, two or more: values outside go to Unsorted
	Bins  int
}
