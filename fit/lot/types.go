// Package lot says what the devices of one lot have in common and which stand
// apart: spread, flags, bins.
//
// It takes results of single devices and gives back numbers and sentences; it
// opens nothing, draws nothing, and decides nothing for the person.
package lot

import "gatesill/fit"

// Device is one device of the lot with the result of its fit.
type Device struct {
	Name    string
	Control bool // kept for checking the bench: in no statistic
	Result  fit.Result
}

// Summary is the spread of one quantity over the devices that have it. NaN
// where n is too small for the number.
type Summary struct {
	N        int // devices with a value
	Above    int // devices that never reach the current; counted as above every value in medians
	Mean     float64
	SD       float64
	Median   float64
	RobustSD float64 // 1.4826 × MAD, floored by resolution and by the readings' own u
	Min, Max float64
}

// Limit is the range outside which a device is flagged for one quantity.
type Limit struct {
	K     float64 // multiples of the robust spread
	Basis string  // "this lot" or "part history"
	Low   float64
	High  float64
}

// Reason is why a device is flagged: a code of fit.Codes and one sentence.
type Reason struct {
	Code string
	Text string
}

// Verdict is what the lot says of one device. Distance holds, by quantity, how
// many robust spreads it lies from the median (NaN when it has no value).
type Verdict struct {
	Name     string
	Flagged  bool
	Reasons  []Reason
	Distance map[fit.Key]float64
}

// Split is the parting of a lot in two populations at a gap of one quantity.
type Split struct {
	By         fit.Key
	At         float64 // middle of the gap
	Low, High  []string
	GapLow     float64 // greatest value of the lower group
	GapHigh    float64 // least value of the upper group
	Text       string
	SecondAlso fit.Key // another quantity that parts the lot in the same way, "" if none
}

// Spread is the whole answer for one lot.
type Spread struct {
	SortedBy    fit.Key
	Populations int // 1 or 2
	Split       *Split
	Summary     map[fit.Key]Summary
	Limits      map[fit.Key]Limit
	Devices     []Verdict // in the order given
	Estimator   string    // names the robust estimator, for the reader
	Warnings    []fit.Warning
}

// Known is the spread of the same part under like conditions, from earlier
// lots, used where a lot is too small to judge itself.
type Known struct {
	RobustSD map[fit.Key]float64
	Devices  int
	Lots     int
}

// SpreadOptions are the choices of [SpreadOf].
type SpreadOptions struct {
	SortedBy     fit.Key             // primary quantity
	K            float64             // limit in robust spreads; 0: the default of the lot's size
	Known        *Known              // nil: none
	Resolution   map[fit.Key]float64 // step of the readings; 0 or absent: found from the data
	LeakageLimit float64             // A, drain leakage that is too much; 0: default rule
	VgsthMin     float64             // V, data-sheet limits; NaN: none
	VgsthMax     float64
}

// Placed is a device in a bin.
type Placed struct {
	Name  string
	Value float64
	U     float64
	Maybe string // bin across the edge, "" when the device is more than 2u away from every edge
}

// Bin holds the devices with Low <= value < High (the last bin also value ==
// High).
type Bin struct {
	Name      string // A, B, ... Z, AA, ...
	Low, High float64
	Devices   []Placed // ascending by value
}

// Unsorted is a device in no bin, and why.
type Unsorted struct {
	Name string
	Why  string
}

// Sorting is a lot put in bins.
type Sorting struct {
	By            fit.Key
	SmallestWidth float64 // 4u, median u of the devices; NaN if no u is known
	Bins          []Bin   // ascending; empty bins included
	Unsorted      []Unsorted
	Warnings      []fit.Warning
}

// SortOptions: exactly one of Width, Edges, Bins is set.
type SortOptions struct {
	By    fit.Key
	Width float64   // unit of By
	Edges []float64 // ascending, two or more: values outside go to Unsorted
	Bins  int
}
