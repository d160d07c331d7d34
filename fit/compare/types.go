package compare

import "gatesill/fit"

// Member is one device of a lot as a comparison sees it.
type Member struct {
	Name     string // serial
	Result   fit.Result
	Control  bool      // kept to tie sittings together: in no statistic of its lot
	Aside    string    // why it takes no part: "open", "shorted", "wrong way round", "excluded"; "": it does
	Flagged  bool      // stands apart from its family: counted, never left out for that
	Sittings []Sitting // behind its values, one a sweep; nil: not known
}

// Sitting is what errors are common to: all that was measured in one session
// shares temperature and drift, all that was measured with one set of meters
// their gain.
type Sitting struct {
	Session string // "" not known: taken as a session of its own for each lot
	Meters  string // bench and meters in one text; "" not known: the same
}

// Lot is the devices of one lot with what a comparison has to know of it.
type Lot struct {
	Name        string
	PChannel    bool // more negative is 'above'
	Members     []Member
	Populations int     // 1 or 2, as [gatesill/fit/lot.SpreadOf] found
	Parted      string  // one sentence where there are two
	Idle        float64 // A, idle current wanted; NaN: none
	DateCode    string
	At          string  // time of its first reading, RFC 3339 or a bare date; "" not known
	Temp        float64 // °C, median of its sweeps; NaN: not known
}

// Pairing says whether devices are compared by serial.
type Pairing int

// The pairings. ByLikeness pairs where enough serials stand in both lots and their
// values go together far beyond chance: the same parts measured twice.
const (
	ByLikeness Pairing = iota
	BySerial
	Never
)

// When a margin was set.
const (
	Before = "before" // before the candidate's first reading
	After  = "after"
	None   = "none"
)

// Options are the choices of [Lots].
type Options struct {
	By            fit.Key // fit.KeyVgsIdle or fit.KeyVgsth
	Level         float64 // of the interval and the test, 0.95; 0: 0.95
	Margin        float64 // V, largest shift that does not matter; NaN: none
	MarginSet     string  // Before, After or None
	Pairing       Pairing
	Spots         bool    // no sweep of either lot is a curve: none are missed
	Repeatability float64 // V, standard deviation of measuring one device again, inserted anew; NaN: not known
	Tempco        float64 // V/K at the current compared at, taken off the shift where temperatures are known; NaN: none
	TempcoU       float64 // V/K, its standard uncertainty; 0 or NaN: [SlopeShare] of it
	Beta          float64 // A/V², gain factor for lots whose curves were not measured; NaN: none
	LimitLow      float64 // V, data-sheet limits of V_GS(th), whatever is compared; NaN: none
	LimitHigh     float64
	Judged        string // what a specification says of the rule ByLimits; "": LimitLow and LimitHigh decide
	SendBack      string // the user's stored rule: "", "outside-limits" or "outside-margin"
}

// Verdict is what a comparison comes to.
type Verdict string

// The verdicts.
const (
	InsideMargin  Verdict = "inside margin"
	OutsideMargin Verdict = "outside margin"
	Differs       Verdict = "differs"
	NoDifference  Verdict = "no difference seen"
	TooFew        Verdict = "too few to tell"
)

// Interval is a value with its confidence interval; NaN: could not be had.
type Interval struct {
	Value, Low, High float64
}

// Counts is what the devices of a lot are to a comparison.
type Counts struct {
	N         int // devices that take part: all but control ones and those aside
	WithValue int
	Above     int // never reach the current: above every value
	Flagged   int
	Aside     int // with a fault of their own, or excluded
	Without   int // with neither value nor knowing that they are above: not in any statistic
	Control   int
}

// Secondary is a test beside the primary one. PAdjusted is by Holm over all
// secondary tests of the comparison. What control parts and temperature take off is
// taken off here too; the error common to whole lots is in none of them.
type Secondary struct {
	Test      string
	Statistic float64
	Shift     Interval // V, that the test goes with, at the level of the comparison; NaN: none
	P         float64  // two-sided; NaN: could not be had
	PAdjusted float64
	Ratio     Interval // of variances, candidate over reference, that the test goes with; zero: none
}

// Common is the error that whole lots share through session and meters, as it
// enters the shift.
type Common struct {
	U        float64 // V, standard uncertainty, of what is known of it; NaN: nothing is, then it is not in the interval
	Basis    string  // in words: "same session", "sessions of one bench", "different meters", "control parts"
	Controls int     // control parts that tie the lots together
	Offset   float64 // V, taken off the shift because of them; 0: none
	OffsetU  float64 // V; NaN: none
}

// BandPoint is the shift of the gate voltage at one current with the simultaneous
// band.
type BandPoint struct {
	I                    float64 // A, one of fit.LevelCurrents, magnitude
	Shift, Low, High     float64 // V, candidate - reference
	Reference, Candidate int     // devices with a gate voltage there
}

// Band is the difference of whole curves: gate-voltage shift against current. All
// its points hold together with probability Level.
type Band struct {
	Points   []BandPoint // ascending by current
	Level    float64
	Critical float64 // multiple of the standard error used
	Differs  bool    // somewhere the band leaves 0 out
	Changes  bool    // the shift changes from the lowest current to the highest
	Text     string  // one sentence
}

// Gain is the difference of drive strength at equal threshold.
type Gain struct {
	Key      fit.Key // KeyBeta or KeyGmIdle
	Percent  Interval
	P        float64
	N        [2]int // reference, candidate
	Adjusted bool   // by the common slope of gain on threshold within the lots
	Text     string
}

// Option is one way to go on, with what follows.
type Option struct {
	Name string // "take as it is", "re-adjust", "change a bias resistor", "sort", "send back"
	Text string // what follows, in numbers
	Rule string // which stored rule it meets or is not covered by; "" none stored
}

// Paired is what a comparison by serial rests on.
type Paired struct {
	Pairs   int
	Why     string   // one sentence
	OnlyRef []string // serials without a partner
	OnlyNew []string
	SD      float64  // V, of the differences
	Own     Interval // V, the shift as the pairs alone say: nothing taken off, without the common error
}

// Comparison is the whole answer for two lots. Shift is candidate - reference.
type Comparison struct {
	Reference, Candidate string
	Quantity             fit.Key
	Test                 string // behind the interval, in words
	Shift, Low, High     float64
	Level                float64
	DF                   float64
	P                    float64
	MarginLow            float64 // the 90 % interval that the margin is held against; NaN without margin
	MarginHigh           float64
	Margin               float64 // V; NaN: none
	MarginSet            string
	Verdict              Verdict
	Sentence             string  // the verdict in one sentence, with its numbers
	Beside               string  // where primary and secondary tests or curves differ: which counts; "": they do not
	NotExcluded          float64 // V, largest shift that the interval does not exclude
	More                 int     // devices a lot that would tell; 0: no number given
	MoreText             string  // what that number assumes, or why there is none
	Raw                  float64 // V, shift before control parts or temperature were taken off; NaN: nothing was
	ForTemp              float64 // V, taken off the shift because the lots were not equally warm; 0: nothing was
	TempU                float64 // V, standard uncertainty of what was taken off for the temperature, in the interval; 0: nothing was
	Spread               Interval
	SpreadTest           string
	Secondary            []Secondary
	Counts               [2]Counts  // reference, candidate
	Centre               [2]float64 // V, trimmed means
	SD                   [2]float64 // V, of the values
	Common               Common
	Paired               *Paired // nil: not by serial
	Curves               *Band   // nil: no common currents
	Gain                 *Gain   // nil: no gains on both sides
	Options              []Option
	Warnings             []fit.Warning
}

// No reports whether the verdict is a 'no' to 'is it like the reference':
// differs, or outside the margin.
func (c *Comparison) No() bool { return c.Verdict == Differs || c.Verdict == OutsideMargin }

// TrendLot is one lot in the run of lots.
type TrendLot struct {
	Name, At, DateCode string
	N                  int
	Centre             float64 // V, trimmed mean; NaN: too few values
	U                  float64 // V, its standard error
	SD                 float64 // V
	Outside            bool    // outside the control limits
}

// PairOfLots is one of all comparisons among several lots.
type PairOfLots struct {
	A, B         string
	Shift        float64 // V, B - A
	Low, High    float64 // simultaneous by Bonferroni
	P, PAdjusted float64 // Yuen; by Holm
}

// Trend is several lots in the order of time.
type Trend struct {
	By          fit.Key
	Lots        []TrendLot // ascending by At; lots without a time last, by name
	Untimed     bool       // some lot has no time: the order is not known
	Centre      float64    // V, mean of the centres of the lots with a time; NaN: none
	Low, High   float64    // V, control limits by the moving range of the centres; NaN below three lots
	Provisional bool       // fewer than 20 lots that the limits rest on
	Pairs       []PairOfLots
	Text        []string
}
