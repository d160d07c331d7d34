package fit

// Circuit is how the drain was fed.
type Circuit string

// The circuits; NoCircuit: not given, constant-current values only.
const (
	NoCircuit Circuit = ""
	Load      Circuit = "load"  // through RL from Vdd
	Diode     Circuit = "diode" // drain tied to gate
	Fixed     Circuit = "fixed" // Vds held
)

// Curve is the points of one sweep in measuring order (on which nothing here
// depends), with the device's own signs
// (columns of a p-channel part may hold magnitudes). Slices that are not nil
// have the same length. NaN is a missing reading, ±Inf a reading beyond the
// meter's range (overload).
type Curve struct {
	Vg  []float64 // V, gate to source
	Id  []float64 // A, drain current by an ammeter; nil: none
	Vl  []float64 // V, across R_L; nil: not read
	Vd  []float64 // V, drain to source; nil: not read
	Vdd []float64 // V, supply; nil: not read point by point
	Gm  []float64 // S, transconductance given with a spot; nil: none

	Returned bool // the last point is no part of the sweep: it was taken again at low power after it
	// VgBound is the greatest error of each gate voltage because gate and current were not
	// read at one instant, V; nil: none, NaN: not known, which counts as none.
	VgBound []float64
}

// Accuracy is what is known of one meter on one range:
// ±(Percent of the reading + Counts × Resolution). The zero value is a meter
// of which nothing is known. Percent and Counts both 0 with a Resolution: the
// step of the display is known and counts as random part, an accuracy statement
// is not and there is no absolute uncertainty.
type Accuracy struct {
	Top        float64 // greatest reading of the range, SI unit; +Inf: one range only
	Percent    float64 // of the reading, in percent: 0.5 is 0.5 %
	Counts     float64
	Resolution float64 // one count, SI unit
	Noise      float64 // standard deviation of repeated readings, SI unit; 0: not known
	Divisor    float64 // statement to standard uncertainty: √3 limit, 2 for k=2, 2.576 for 99 %; 0: √3
}

// Setup is what a curve was taken under and what is asked of it. Unknown
// numbers are NaN; currents asked for are magnitudes, and not looked for when
// they are not above zero. A Burden or RLTol of 0 is a known zero.
type Setup struct {
	Circuit   Circuit
	PChannel  bool
	Depletion bool
	OffV      float64 // V, off voltage of the part

	RL     float64 // ohm
	RLTol  float64 // fraction, limit of the statement
	Vdd    float64 // V, nominal
	Vds    float64 // V, held (Fixed)
	Burden float64 // ohm, of the ammeter

	TestCurrent float64 // A
	IdleCurrent float64 // A
	MaxID       float64 // A, limit of the part
	VgsthMax    float64 // V, greatest V_GS(th) of the data sheet; NaN or 0: not known

	Gate, Current, Load, Drain []Accuracy // by range, ascending by Top; nil: nothing known

	Lot *LotShape // what the curves of the lot have in common, for a device with too few points; nil: not known

	Spot        bool    // a curve of one or two points from a one-resistor jig
	Temperature float64 // deg C, of the part; NaN: not recorded
	Budget      bool    // keep the contributions to every uncertainty: [Quantity.Budget]
}
