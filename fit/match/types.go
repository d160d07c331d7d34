// Package match puts devices together that carry the same current on one gate
// line: pairs, fours, sets of any size, of one lot or of several.
//
// It takes results of single devices and gives back sets, what is left over and
// why, how far from the best possible answer that is, and what the difference in
// a set means in milliamperes. It opens nothing and keeps nothing.
//
// It refuses to guess: a device without a value, out of order, flagged for a
// fault of its own, kept out or already in a locked set is given out to nobody,
// and is listed with the reason; an imbalance is claimed only where more than one
// reading of each device is known; and the word optimal is used only of an answer
// for which a proof was carried out, any other stands beside a lower bound that
// was.
//
// Differences are whole numbers of nanovolts, made from gate voltages rounded to
// the microvolt; gains enter by their logarithm. So sums, comparisons and proofs
// are exact.
package match

import (
	"errors"
	"time"

	"gatesill/fit"
)

// Errors that callers may ask for.
var (
	ErrTooFew    = errors.New("too few devices for one set")
	ErrSize      = errors.New("unusable set size")
	ErrCriteria  = errors.New("unusable criteria")
	ErrWeights   = errors.New("unusable weights")
	ErrTolerance = errors.New("unusable tolerance")
	ErrCurrents  = errors.New("no currents to compare curves at")
	ErrNoDevice  = errors.New("no such device")
	ErrAim       = errors.New("unknown aim")
)

// KeyCurve as a criterion is the greatest difference of gate voltage between two
// devices at any current of [fit.LevelCurrents] in [Options.From] to [Options.To].
const KeyCurve fit.Key = "curve_V"

// Member is a device that is offered.
type Member struct {
	Name     string
	Lot      string
	Package  string // devices of one lot with the same package are never parted; "": it stands alone
	Side     string // of the package
	DateCode string
	PChannel bool
	Locked   string  // name of the set that it was given to; "": free
	Out      string  // why it is kept out (flagged, control, excluded, not settled, ...); "": it is not
	Step     float64 // V, display step of the gate voltage; 0 or NaN: not known
	Result   fit.Result
}

// Criterion is a quantity in which the devices of a set are to be alike.
type Criterion struct {
	Key    fit.Key // a gate voltage, a gain, or KeyCurve; gain: by ratio
	Within float64 // greatest difference in a set: V, or for gains a share (0.05: the greatest at most 5 % above the least); 0 or NaN: none
	Weight float64 // 0: only a limit. That of the first counts as 1 where it is 0; those of the others are taken relative to it
}

// Aim is what makes one answer better than another.
type Aim string

// The aims. With Most and Best no set is beyond a tolerance; with Total and Worst
// every device goes into a set that can, and sets beyond a tolerance are marked.
const (
	Most  Aim = "most"  // as many sets as possible within the tolerances, among those the least total mismatch
	Total Aim = "total" // as many sets as there are devices for, the least total mismatch
	Worst Aim = "worst" // as many sets as there are devices for, the least worst mismatch, among those the least total
	Best  Aim = "best"  // exactly Options.Sets sets, the least total mismatch
)

// Options are the choices of [Match]. Criteria carry their own tolerances and weights,
// so that there cannot be too many or too few of these.
type Options struct {
	Size int         // devices in a set; 0: 2
	By   []Criterion // the first is a gate voltage or KeyCurve and gives distances their unit; nil: KeyVgsIdle without tolerance
	Aim  Aim         // "": Best where Sets is given, else Most where the first criterion has a tolerance, else Total
	Sets int         // for Best: how many

	At          float64 // A, idle current of one device; 0 or NaN: not known, nothing is said of currents
	TestCurrent float64 // A, at which Result.Vgsth was taken; 0 or NaN: not known
	From, To    float64 // A, for KeyCurve; 0: from the least, to the greatest that three quarters of the devices have

	SourceResistor float64 // ohm, one for each device
	Vds            float64 // V, for the dissipation; 0 or NaN: not known

	// TimeLimit ends the search for sets of three and more in several quantities;
	// 0: 30 s. The bound is given even when it ends it.
	TimeLimit  time.Duration
	NoTradeOff bool // leave the trade-off table out
}

// Matching is the whole answer.
type Matching struct {
	Size          int
	At            float64 // A; NaN: not known
	Aim           Aim
	By            []Criterion
	Currents      []float64 // A, at which curves were compared; nil: they were not
	Complementary bool      // every set has as many n-channel as p-channel devices, compared by magnitude
	Step          float64   // V, smallest display step of the devices that took part; 0: not known
	Coarsest      float64   // V, greatest one

	Sets     []Set      // the best first
	LeftOver []LeftOver // devices in no set, in the order given
	Offered  int        // devices that took part
	Total    float64    // V, sum of the sets' Distance
	Worst    float64    // V, greatest Distance of a set; NaN: no set
	Bound    Bound
	TradeOff []TradeOff
	Text     string // one or two sentences
	Warnings []fit.Warning
}

// Set is devices that belong together.
type Set struct {
	Number   int // from 1
	Devices  []Placed
	Spread   float64   // V, greatest less least of the first criterion (KeyCurve: the greatest difference at any current)
	Spreads  []float64 // by criterion: V, or the share by which the greatest gain exceeds the least
	Distance float64   // V, mismatch of the set: Spread, with the weighted differences of further criteria that have a weight; greatest of any two
	Within   bool      // no criterion is beyond its tolerance
	Alike    bool      // no two devices differ by more than 2·√2·u in any criterion; false where u is not known
	Limit    float64   // V, the 2·√2·u of the set, with the greatest u in it; NaN: not known
	Inside   []Inside  // the packages in it
	Sharing  Sharing
	Repair   Repair
	Text     string // one sentence
}

// Placed is a device in its set.
type Placed struct {
	Member  int // index in the members given
	Name    string
	Lot     string
	Package string
	Side    string
	Values  []float64 // by criterion, as measured: V, S, A/V²; KeyCurve: gate voltage at the idle current, NaN where it is not known
	U       float64   // V, of the first criterion; NaN: not known
}

// Inside is the difference between the sides of one package, which no choice of
// sets can change.
type Inside struct {
	Package string
	Lot     string
	Spread  float64 // V, of the first criterion
	Sharing Sharing // of the two sides alone
}

// Sharing is how the devices of a set share the current on one gate line.
type Sharing struct {
	Gate      float64   // V, common gate voltage at which the mean current is the idle current, by magnitude; NaN: not known
	Currents  []float64 // A, by device of the set; nil: not known
	Imbalance float64   // A, greatest less least current; NaN: not claimed
	Share     float64   // Imbalance over the idle current; NaN: not claimed
	Hottest   int       // index in the set of the device that carries most; -1: not known
	Power     float64   // W, its dissipation at Options.Vds; NaN: not known
	Basis     string    // what the currents rest on, or why they are not claimed
}

// Repair is what would make a set share equally that does not.
type Repair struct {
	Trim      []float64 // V, by device: what its gate needs above the least of the set, by magnitude, so that all carry the idle current
	Resistors []float64 // ohm, by device: source resistor in place of the trim; nil: no idle current known
	Text      string    // one sentence; "": nothing to repair
}

// LeftOver is a device in no set.
type LeftOver struct {
	Member int // index in the members given
	Name   string
	Lot    string
	Out    bool   // it did not take part
	Locked string // set that it is in; "": none
	Why    string // one clause
}

// Kinds of a [Bound].
const (
	Optimal    = "optimal"
	LowerBound = "lower bound"
)

// Bound is how good the answer can be at most.
type Bound struct {
	Kind  string  // Optimal or LowerBound
	Total float64 // V, no answer with as many sets has a smaller total; for Worst: none whose worst is no greater
	Worst float64 // V, for Worst: no answer with as many sets has a smaller greatest distance; NaN for other aims
	Sets  int     // no answer has more sets
	Gap   float64 // Matching.Total over Total, less 1; 0 when both are 0, NaN when only the bound is
	Proof string  // what was checked, over how much
}

// TradeOff is how many sets a tolerance of the first criterion gives, those of
// the further ones as they are.
type TradeOff struct {
	Within float64 // V
	Sets   int
	Total  float64 // V
	Mean   float64 // V, of the sets' distances; NaN: no set
	Left   int     // devices that took part and are in no set
	Exact  bool    // false: there may be more sets than found
	// Imbalance is the difference of currents that two devices apart by Within
	// have, A, with the median transconductance of the lot and Options.SourceResistor; NaN: not known.
	Imbalance float64
}

// Partner is a device of the stock beside the one that a partner is sought for.
type Partner struct {
	Member   int // index in the members given
	Name     string
	Lot      string
	DateCode string
	Spreads  []float64 // by criterion, as in [Set]; NaN where one of the two has no value
	Distance float64   // V; NaN where it cannot be had
	Within   bool
	Alike    bool
	Sharing  Sharing // of the two on one gate line
	Refused  string  // why it cannot be given; "": it can
}

// More is what buying more devices of the lot would give.
type More struct {
	Devices int     // bought
	Now     int     // sets without them
	Sets    float64 // mean number of further sets
	Low     float64 // further sets that nine of ten draws reach
	High    float64 // further sets that one of ten draws reaches
	Runs    int
	Exact   bool   // the sets of each draw are the most there can be
	Text    string // one sentence
	Method  string // how it was found
}
