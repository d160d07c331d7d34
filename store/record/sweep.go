package record

import "math"

// Quantity names one measured column of a sweep, with its SI unit.
type Quantity string

// The quantities, in the order in which they are shown and stored.
const (
	VG   Quantity = "vg_v"   // gate to source
	ID   Quantity = "id_a"   // drain current
	VL   Quantity = "vl_v"   // across R_L
	VD   Quantity = "vd_v"   // drain to source
	VDD  Quantity = "vdd_v"  // supply
	IG   Quantity = "ig_a"   // gate current
	GM   Quantity = "gm_s"   // transconductance, as given in a spot list
	Temp Quantity = "temp_c" // temperature
	T    Quantity = "t_s"    // elapsed time

	PairBound Quantity = "pair_bound_v" // greatest error of the gate voltage from pairing meters that do not read at one instant
	Settled   Quantity = "settled"      // 1: a mean while all stood still, 0: interpolated between readings, 2: as 1, taken again at low power after the sweep
)

// TakenAgain in column [Settled] marks a point at low power that was taken again
// after the sweep, to see whether the device had warmed up or was harmed.
const TakenAgain = 2

// Quantities lists all quantities in their order.
var Quantities = []Quantity{VG, ID, VL, VD, VDD, IG, GM, Temp, T, PairBound, Settled}

// Unit gives the SI unit symbol of the quantity.
func (q Quantity) Unit() string {
	switch q {
	case VG, VL, VD, VDD, PairBound:
		return "V"
	case ID, IG:
		return "A"
	case GM:
		return "S"
	case Temp:
		return "degC"
	case T:
		return "s"
	}
	return ""
}

// Column is one measured quantity of a sweep, one entry a point.
type Column struct {
	Quantity Quantity
	Values   []float64 // SI unit of Quantity; NaN where there was no number
	// Text is the same column as a JSON array holding the decimals as they
	// were read (shifted to the SI unit by an exponent), null where there was
	// no number. It is what the store keeps. Empty: made from Values when
	// stored.
	Text []byte
}

// PointState says why a point has no number in a column.
type PointState string

// The point states. A number never stands beside them.
const (
	Overload  PointState = "overload"  // the meter said: above the range
	Underload PointState = "underload" // the meter said: below the range (minus overload)
	Missing   PointState = "missing"   // nothing was written there
)

// Mark is a point of one column that holds a state instead of a number.
type Mark struct {
	Index    int        `json:"i"` // point, from 0
	Quantity Quantity   `json:"q"`
	State    PointState `json:"s"`
	Raw      string     `json:"raw,omitempty"` // as it was written
}

// Lines is a run of source lines: points First.. come from lines Line.. of the
// source, one line a point (lines count from 1).
type Lines struct {
	Point int `json:"p"`
	Line  int `json:"l"`
	Count int `json:"n"`
}

// Condition is what a sweep was taken under.
type Condition struct {
	Circuit     Circuit `json:"circuit"`
	RL          Num     `json:"rl_ohm"`
	RLTol       Num     `json:"rl_tol"`      // fraction: 0.01 is 1 %
	RLRating    Num     `json:"rl_rating_w"` // W
	VDD         Num     `json:"vdd_v"`       // nominal or read once
	VDS         Num     `json:"vds_v"`
	Ammeter     string  `json:"ammeter"`     // "drain", "source", "none", "" not known
	Burden      Num     `json:"burden_ohm"`  // resistance of the ammeter
	GateReturn  string  `json:"gate_return"` // where the gate meter's return is: "source", "ground", ""
	Pulsed      string  `json:"pulsed"`      // "dc", "pulsed", "" not known
	PulseWidth  Num     `json:"pulse_width_s"`
	PulseDuty   Num     `json:"pulse_duty"` // fraction
	PulseDelay  Num     `json:"pulse_delay_s"`
	Dwell       Num     `json:"dwell_s"`
	Temp        Num     `json:"temp_c"`
	TempOf      string  `json:"temp_of"` // "ambient", "sink", "case", "" not known
	SpotCurrent Num     `json:"spot_current_a"`
}

// RangeAccuracy is the accuracy statement of one range of one meter:
// ±(Percent of the reading + Counts × Resolution).
type RangeAccuracy struct {
	Top        float64 `json:"top"`        // greatest reading of the range, SI unit
	Percent    float64 `json:"percent"`    // of the reading
	Counts     float64 `json:"counts"`     // counts of the last digit
	Resolution float64 `json:"resolution"` // one count, SI unit
	Noise      Num     `json:"noise"`      // standard deviation of repeated readings, SI unit
	Burden     Num     `json:"burden_ohm"` // of a current range
}

// Instrument is one meter as it stood on the bench for a sweep.
type Instrument struct {
	Role       string          `json:"role"` // "gate", "current", "load", "drain", "supply", "temperature"
	Name       string          `json:"name"`
	Serial     string          `json:"serial"`
	Coverage   string          `json:"coverage"` // what the statement is: "limit" (rectangular), "k=2", "99 %"
	Ranges     []RangeAccuracy `json:"ranges"`   // ascending by Top
	Isolated   *bool           `json:"isolated"`
	Calibrated string          `json:"calibrated"` // date, YYYY-MM-DD
	Due        string          `json:"due"`        // date, YYYY-MM-DD
}

// Range returns the accuracy statement of the smallest range that holds x, the
// greatest when none does, and false when there is none at all.
func (m Instrument) Range(x float64) (RangeAccuracy, bool) {
	for _, r := range m.Ranges {
		if math.Abs(x) <= r.Top {
			return r, true
		}
	}
	if n := len(m.Ranges); n > 0 {
		return m.Ranges[n-1], true
	}
	return RangeAccuracy{}, false
}

// Session is one sitting at one bench.
type Session struct {
	ID        string // UUIDv7
	Name      string // as the person calls it, "" allowed
	Bench     string
	BenchID   string // of the bench file's text as it was used, "" not kept
	Operator  string
	Fixture   string
	Ambient   Num // deg C
	StartedAt string
	Note      string
}

// Source is the file a sweep was read from.
type Source struct {
	ID         string // UUIDv7
	LotID      string
	Name       string // file name as given, without its folder
	Hash       string // SHA-256 of the bytes, hex
	Size       int64  // bytes
	Layout     string // "long", "wide", "per-device", "spot", "meter-logs"
	Dialect    string // JSON: what was recognised
	ImportedAt string
}

// Sweep is one pass of the gate voltage over one device.
type Sweep struct {
	ID          string // UUIDv7
	LotID       string
	DeviceID    string
	SessionID   string
	SourceID    string
	Position    int // measuring order in its session or file, from 1
	Direction   Direction
	MeasuredAt  string // stamp, or a bare date as it was given; "" not known
	Condition   Condition
	Instruments []Instrument
	Columns     []Column // every column has the same length
	Marks       []Mark   // ascending by Index
	Lines       []Lines  // ascending by Point
	DataHash    string   // of [Sweep.Hash]
	Points      int      // number of points; filled by queries, also where Columns are left out
	Excluded    bool
	Why         string
}

// Len is the number of points.
func (s *Sweep) Len() int {
	if len(s.Columns) == 0 {
		return 0
	}
	return len(s.Columns[0].Values)
}

// Column returns the column of that quantity, or nil when there is none.
func (s *Sweep) Column(q Quantity) *Column {
	for i := range s.Columns {
		if s.Columns[i].Quantity == q {
			return &s.Columns[i]
		}
	}
	return nil
}

// Values returns the numbers of that quantity (length [Sweep.Len], NaN where
// there was none), or nil when the sweep has no such column. The slice is the
// sweep's own.
func (s *Sweep) Values(q Quantity) []float64 {
	if c := s.Column(q); c != nil {
		return c.Values
	}
	return nil
}

// Line returns the source line of point i, 0 when it is not known.
func (s *Sweep) Line(i int) int {
	for _, r := range s.Lines {
		if i >= r.Point && i < r.Point+r.Count {
			return r.Line + i - r.Point
		}
	}
	return 0
}

// Reading is what one meter said once, live.
type Reading struct {
	SweepID string
	Role    string // as of [Instrument]
	Meter   string
	At      float64 // s, elapsed in the session: when the first byte of the frame came
	Value   Num     // SI unit
	Unit    string
	State   PointState // "" when Value is a number
	Raw     []byte     // the frame as it arrived
	Digit   Num        // one count of the display, SI unit
	Refused string     // why it cannot stand for the quantity (held, relative, wrong unit ...), "" when it can
}

// Event is what happened in a session besides readings: a line lost, a zero
// taken, a limit reached, the off state seen.
type Event struct {
	SessionID string
	SweepID   string  // "" when it was not in a sweep
	At        float64 // s, elapsed in the session
	Kind      string  // one word: "lost", "zero", "limit", "off", "note" ...
	Text      string  // for people; JSON where Kind says so
}

// Value is one estimated quantity with its three standard uncertainties
// (k = 1), unknown where it is not known.
type Value struct {
	Value     Num `json:"value"`
	U         Num `json:"u"`          // within a session
	UBetween  Num `json:"u_between"`  // between sessions
	UAbsolute Num `json:"u_absolute"` // absolute
	N         int `json:"n"`          // points it rests on
}

// Remark is a warning kept with an estimate.
type Remark struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Estimate is what a fit said of one sweep. DataHash, Method, Settings and Version
// together name it: a second estimate of that name is not kept, for it would say
// the same.
type Estimate struct {
	SweepID  string
	DataHash string // of the sweep it was made from
	Method   string
	Settings string // canonical JSON of all that the result depends on besides the data
	Version  string // of the program
	State    string
	Values   map[string]Value // by key with unit: "vgsth_V"
	Remarks  []Remark
	MadeAt   string
}
