package gauge

import (
	"math"

	"gatesill/fit"
)

// Measuring is one insertion of one device: it was put in, read or swept (up and
// down sweep without taking it out are one), and taken out.
type Measuring struct {
	Device   string
	Control  bool    // a part kept for checking the bench
	Value    float64 // V, gate voltage of the quantity looked at; NaN: it has none
	U        float64 // V, standard uncertainty of the reading within the session; NaN: not known
	Sitting  string  // one session at one bench; "" is a sitting as well
	Operator string  // "" not known
	Fixture  string  // "" not known
	Occasion string  // day or name of the sitting, by which months are told apart
	Place    int     // order in its sitting, from 1
	Rank     int     // order of the sittings and within them, over the whole lot, from 1
	Temp     float64 // °C; NaN: not known
}

// Estimate is a number with its 95 % interval.
type Estimate struct {
	Value float64 // NaN: could not be had
	Low   float64 // NaN: not known
	High  float64 // NaN: not known
	DF    float64 // degrees of freedom; +Inf: not limited; NaN: none
}

// Repeatability is the standard deviation of one and the same device that is put
// in again, within a sitting, with what it rests on.
type Repeatability struct {
	Estimate           // V
	Across     float64 // V, together with what operators and fixtures differ by
	Devices    int     // put in at least twice in one sitting
	Measurings int     // of these devices in those sittings
	Rounds     int     // most insertions of one device in one sitting
	Basis      string  // in words: "10 devices x 3", with the lot where it is another
}

// What a repeatability must rest on before anything else may use it: fewer
// devices, or degrees of freedom, are too few to tell (common practice, no source; at
// 10 degrees of freedom the upper limit of the 95 % interval is 1.75 times the
// estimate).
const (
	FewestDevices = 5
	FewestDF      = 10
)

// Enough reports whether the repeatability may be used for other values; one that
// was given is taken as it is.
func (r Repeatability) Enough() bool {
	return r.Value > 0 && (r.Devices >= FewestDevices && r.DF >= FewestDF || math.IsInf(r.DF, 1))
}

// Study is what measurings of one lot say of the bench.
type Study struct {
	Repeatability Repeatability
	Whole         Repeatability // with the devices of Odd in it
	Odd           []string      // devices that repeat far worse than the others, left out of Repeatability
	MoreDevices   int           // to be put in again before it is enough; 0: none
	MoreRepeats   int           // insertions wanted besides, of any device that has been in already
	Factors       []Factor
	AtOneTemp     bool     // values were brought to one temperature for the factors
	TempsApart    float64  // K, by how much temperatures differ that were not corrected for; NaN: not all are known
	Lot           Estimate // V, standard deviation of the devices among each other, without what the bench adds
	LotDevices    int
	Share         Estimate // repeatability as a share of the whole spread of single readings in the lot, 0 to 1
	SharedBy      float64  // the same with operators and fixtures in it; NaN: there is one only
	Categories    int      // groups of devices that the bench can tell apart; -1: could not be had
	Order         Order
	Warnings      []fit.Warning

	kept []Measuring // what all this rests on
}

// Counts is the smallest difference between two devices read once each that
// counts: 2·√2·sigma, in V; NaN where the repeatability is not known.
func (r Repeatability) Counts() float64 { return 2 * sqrt2 * r.Value }

// Counts95 is the same at exactly 95 %: 1.96·√2·sigma, in V.
func (r Repeatability) Counts95() float64 { return z95 * sqrt2 * r.Value }

// Width is the smallest honest width of a bin for devices read once each,
// 4·sigma, in V.
func (r Repeatability) Width() float64 { return 4 * r.Value }

// Factor is what values differ by beside repeatability: operator, fixture or
// sitting.
type Factor struct {
	Name   string   // "operator", "fixture", "session"
	SD     Estimate // V, between its levels; 0 where nothing is seen
	P      float64  // of no difference; NaN: could not be had
	Levels []Level
	With   string // another factor that changes together with it, from which it cannot be told apart; ""
}

// Level is one operator, fixture or sitting.
type Level struct {
	Name       string
	Measurings int
	Off        float64 // V, what it reads above the mean of the levels, devices alike
}

// Order says whether the order of the measurings was random.
type Order struct {
	Known   bool // there were two rounds or more of three devices or more
	Random  bool
	Text    string // one sentence
	Sitting string // the first that was not random
}

// Drift is the change of readings along a sitting.
type Drift struct {
	Sitting    string
	Measurings int
	Devices    int
	Again      bool     // by devices put in again; otherwise by the values in their order
	PerPlace   Estimate // V per place in the order
	Over       float64  // V, over the whole sitting
	Rest       float64  // V, repeatability with the drift taken out; NaN unless Again
	P          float64  // of no drift
	PAdjusted  float64  // corrected for the number of sittings
	Tried      int      // sittings that it is corrected for
	Text       string   // one sentence
	First      *Again   // nil: the first device was not put in again at the end
}

// Again is the first device of a sitting put in again at its end.
type Again struct {
	Device string
	Place  int     // in the order, of the last time
	Change float64 // V, last less first
	Limit  float64 // V, 2·√2·u; NaN: u is not known
	Known  bool    // u holds the repeatability; without it Limit is of the reading alone
	Beyond bool    // the limit, and Known
}

// Chart is the control chart of one control part: individual values and moving
// ranges.
type Chart struct {
	Device      string
	Points      []ChartPoint
	By          string   // "session" or "insertion": what a point is
	Corrected   bool     // values are brought to the temperature of the first by the coefficient given
	Centre      float64  // V, mean; NaN with fewer than two points
	Low, High   float64  // V, limits of single values: centre ± 3 MR/1.128
	RangeHigh   float64  // V, upper limit of the moving range: 3.267 MR
	Provisional bool     // fewer than 20 points
	Trend       Estimate // V per point
	TrendP      float64
	Texts       []string // sentences
}

// ChartPoint is one value of a control part.
type ChartPoint struct {
	Label   string  // of the sitting
	Value   float64 // V
	Range   float64 // V, to the one before; NaN for the first
	Outside bool    // value or range is outside its limits
}

// History is what became of devices between two occasions.
type History struct {
	From, To   Occasion
	Days       float64 // between the two; NaN: not both are dates
	Changes    []Change
	Raw        Estimate // V, median change of all devices with its interval
	Corrected  Estimate // V, the same after the temperature; Value NaN: no coefficient or no temperatures
	Tempco     float64  // V/K; NaN: none given
	FromDiffs  float64  // V, repeatability from the differences, robust; NaN with fewer than four devices
	Sigma      float64  // V, repeatability that the limits rest on; NaN: none
	SigmaDF    float64
	SigmaBasis string
	LimitOne   float64  // V, for one device alone: 2·√2·sigma, less for means of several insertions
	Limit      float64  // V, corrected for the number of devices; NaN: too few
	LeftOut    []string // who, or which fixture, measured at one of the two only and is left out here
	Apart      []Apart  // what is not alike of the two, with none in common
	Texts      []string
}

// Apart is that the operators, or the fixtures, of two occasions are all different.
type Apart struct {
	Name     string // "operator", "fixture"
	From, To []string
}

// Occasion is one date (or sitting) of a history.
type Occasion struct {
	Name    string
	TempLow float64 // °C; NaN: not known
	TempTop float64
}

// Change is what became of one device.
type Change struct {
	Device      string
	Control     bool    // a part kept for checking the bench
	First, Last float64 // V, mean of its insertions
	Raw         float64 // V, last less first
	Corrected   float64 // V, less what the temperature explains; NaN: not known
	Own         float64 // V, less what all devices moved by
	Changed     bool    // beyond the limit: changed, or mixed up
}

// Finding is all that the bench's study comes to.
type Finding struct {
	Study    Study
	Drifts   []Drift
	Charts   []Chart
	History  []History
	Warnings []fit.Warning
}

// Moment is what one device read in one sitting.
type Moment struct {
	Sitting   string
	N         int     // insertions
	Value     float64 // V, mean of them
	Temp      float64 // °C; NaN: not known
	Raw       float64 // V, less the first
	Corrected float64 // V, the same less what the temperature explains; NaN: not known
}
