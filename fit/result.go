package fit

import (
	"encoding/json"
	"math"
)

// Quantity is an estimated number with its three standard uncertainties
// (k = 1), each of which holds the one before it. NaN in Value: it could not be had;
// NaN in an uncertainty: not known, because an accuracy statement that enters it is
// missing. UBetween and UAbsolute need those of the gate meter and of the meter of
// the current, as far as the quantity follows them; UAbsolute the tolerance of R_L as
// well, where the current is read across it. A temperature that was not recorded is no
// reason: room temperature is assumed.
// N is the number of points it rests on.
type Quantity struct {
	Value     float64 // SI unit of the field it stands in
	U         float64 // within a session on the same meter and range: the random part only
	UBetween  float64 // between sessions on one bench: counts of the statements, drift of R_L, temperature as well
	UAbsolute float64 // against the SI unit: meter gain, R_L tolerance, burden included
	N         int
	Budget    *Budget // how the three come about; nil unless [Setup.Budget] asks for it
}

// None is the quantity that could not be had.
func None() Quantity {
	return Quantity{Value: math.NaN(), U: math.NaN(), UBetween: math.NaN(), UAbsolute: math.NaN()}
}

// Ok reports whether the quantity has a value.
func (q Quantity) Ok() bool { return !math.IsNaN(q.Value) }

// MarshalJSON writes {"value","u","u_between","u_absolute","n"} with null where
// there is no finite number.
func (q Quantity) MarshalJSON() ([]byte, error) {
	return json.Marshal(struct {
		Value     *float64 `json:"value"`
		U         *float64 `json:"u"`
		UBetween  *float64 `json:"u_between"`
		UAbsolute *float64 `json:"u_absolute"`
		N         int      `json:"n"`
	}{finite(q.Value), finite(q.U), finite(q.UBetween), finite(q.UAbsolute), q.N})
}

func finite(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// State is what became of a device in a fit.
type State string

// The states. Above: the device never reaches the test current (or idle
// current) within the sweep. Declined: there are readings but no number that
// may be believed. Excluded is set by the lot, never by a fit.
const (
	Measured      State = "measured"
	Above         State = "above"
	Open          State = "open"
	Shorted       State = "shorted"
	WrongWayRound State = "wrong-way-round"
	Declined      State = "declined"
	Excluded      State = "excluded"
)

// Warning is something a reader must know about a number; Code is one of
// [Codes].
type Warning struct {
	Code string `json:"code"`
	Text string `json:"text"` // one sentence
}

// LeftOut is a point that a fit did not use.
type LeftOut struct {
	Index int    // of the curve's slices
	Code  string // one of [Codes]
	Text  string
}

// Result is what a fit says of one sweep, or of one device over its sweeps.
// Voltages and currents carry the device's own signs: a p-channel part has
// negative ones.
type Result struct {
	State State
	Why   string // one sentence when State is not Measured

	Vgsth   Quantity // V, gate voltage at the test current (constant current)
	VgsIdle Quantity // V, gate voltage at the idle current
	Vt      Quantity // V, extrapolated threshold by Method
	Beta    Quantity // A/V², gain factor
	Theta   Quantity // 1/V, mobility degradation
	GmMax   Quantity // S, the greatest seen
	GmIdle  Quantity // S, at the idle current
	Idss    Quantity // A, drain leakage: I_D at the off voltage

	Method    string               // behind Vt: "sqrt", "linear", "ratio" or "curve"; "current" when there is no Vt
	VtBy      map[string]Threshold // every extrapolated threshold that is valid in the region covered, by method
	GmRising  bool                 // GmMax lies at the end of the sweep: a longer one would give more
	Own       OwnShape             // what the points near the currents asked for tell of the shape
	Shape     Shape                // of the curve, beside its thresholds
	ReadTest  ReadOn               // ranges on which the readings behind Vgsth were taken
	ReadIdle  ReadOn               // the same of VgsIdle
	Returned  bool                 // a reading taken again after the sweep was compared with it: heating was looked for
	Crossings int                  // upward crossings of the test current
	Levels    []Level              // the curve itself: gate voltages at the currents of [LevelCurrents] inside the sweep, ascending by current
	Top       Level                // its highest point; I 0: there is no curve
	LeftOut   []LeftOut            // ascending by Index
	Warnings  []Warning
}

// Level is the gate voltage at which a device carries one current.
type Level struct {
	I  float64 // A, magnitude, one of [LevelCurrents], but for the highest point of a curve
	Vg float64 // V, with the device's own sign
	U  float64 // V, standard uncertainty within the session; NaN: not known
}

// LevelCurrents are the currents, A, at which curves of different devices and
// lots are compared: 1, 2 and 5 in every decade from 100 µA to 100 A.
var LevelCurrents = []float64{
	1e-4, 2e-4, 5e-4, 1e-3, 2e-3, 5e-3, 1e-2, 2e-2, 5e-2, 0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 50, 100,
}

// Threshold is one extrapolated threshold with the gain factor from the same line.
type Threshold struct {
	Vt    Quantity // V
	Beta  Quantity // A/V²
	Theta Quantity // 1/V; None where the method has none
	From  int      // first point used, index of the cleaned curve
	To    int      // one past the last
}

// NewResult is a result with nothing in it yet: every quantity [None].
func NewResult() Result {
	n := None()
	return Result{Vgsth: n, VgsIdle: n, Vt: n, Beta: n, Theta: n, GmMax: n, GmIdle: n, Idss: n, Shape: NoShape()}
}

// Key names one quantity of a Result with its unit, as scripts see it.
type Key string

// The keys, in the order in which they are shown.
const (
	KeyVgsth   Key = "vgsth_V"
	KeyVgsIdle Key = "vgs_idle_V"
	KeyVt      Key = "vt_V"
	KeyBeta    Key = "beta_A_per_V2"
	KeyTheta   Key = "theta_per_V"
	KeyGmMax   Key = "gm_max_S"
	KeyGmIdle  Key = "gm_idle_S"
	KeyIdss    Key = "idss_A"
)

// Keys lists all keys in their order.
var Keys = []Key{KeyVgsth, KeyVgsIdle, KeyVt, KeyBeta, KeyTheta, KeyGmMax, KeyGmIdle, KeyIdss}

// At returns a pointer to the quantity of that key, nil for an unknown key.
func (r *Result) At(k Key) *Quantity {
	switch k {
	case KeyVgsth:
		return &r.Vgsth
	case KeyVgsIdle:
		return &r.VgsIdle
	case KeyVt:
		return &r.Vt
	case KeyBeta:
		return &r.Beta
	case KeyTheta:
		return &r.Theta
	case KeyGmMax:
		return &r.GmMax
	case KeyGmIdle:
		return &r.GmIdle
	case KeyIdss:
		return &r.Idss
	}
	return nil
}

// Has reports whether a warning with that code is present.
func (r *Result) Has(code string) bool {
	for _, w := range r.Warnings {
		if w.Code == code {
			return true
		}
	}
	return false
}
