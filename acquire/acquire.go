// Package acquire takes readings as they come in from the lines of a bench, brings
// meters that do not read at one instant together into points with a known error,
// leads a sweep step by step, and watches its limits.
//
// It stores nothing: readings go to the sink that its caller gives. It decides
// nothing about a device; it computes no threshold.
package acquire

import (
	"math"

	"gatesill/store/record"
)

// The roles of meters on a bench.
const (
	Gate        = "gate"
	Current     = "current"
	Load        = "load"
	Drain       = "drain"
	Supply      = "supply"
	Temperature = "temperature"
)

// Event is something that happened on a line, in the order of its happening.
type Event struct {
	At       float64          // s, elapsed in the session
	Line     string           // address of the line
	Meter    string           // name of the meter on it
	Role     string           // of the meter; of the first, when it has several
	Readings []record.Reading // of one frame: one each column; empty when something else happened
	Opened   bool             // the line is open (again)
	Lost     bool             // the line failed; Err says why
	Err      error            // of a frame that cannot be read, or of a line that was lost
}

// Timing is what is known of when a meter measures what it says.
type Timing struct {
	Integration float64 // s
	Processing  float64 // s, from the end of integration to the first byte
	Lag         float64 // s, further delay found by calibration
	LagU        float64 // s, greatest error of all the above together; NaN: not known, taken for one cycle of the meter
	Jitter      float64 // s, greatest spread of arrival (batching of the adapter)
}

// Instant gives when the conversion behind a reading was at its middle.
func (t Timing) Instant(at float64) float64 {
	return at - t.Processing - t.Integration/2 - t.Lag
}

// Point is readings of several meters that belong to one instant.
type Point struct {
	At      float64                     // s, elapsed in the session
	Vg      float64                     // V; NaN where the role is not read, in every column
	Id      float64                     // A
	Vl      float64                     // V
	Vd      float64                     // V
	Vdd     float64                     // V
	Temp    float64                     // deg C
	Marks   []record.Mark               // columns without a number and why; Index is not set
	Settled bool                        // a mean while all stood still; else interpolated
	Bound   float64                     // V, greatest error of Vg from pairing; 0 for columns of one line
	N       int                         // conversions of the gate meter in it
	Digits  map[record.Quantity]float64 // one count of the display, by column; nil not known
}

// NewPoint is a point without numbers.
func NewPoint(at float64) Point {
	nan := math.NaN()
	return Point{At: at, Vg: nan, Id: nan, Vl: nan, Vd: nan, Vdd: nan, Temp: nan}
}

// Limits are magnitudes that must not be exceeded; 0 is not known.
type Limits struct {
	Vgs, Vds, ID, PD, Temp float64 // V, V, A, W, deg C
}
