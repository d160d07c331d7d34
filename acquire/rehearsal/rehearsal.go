// Package rehearsal is a bench that does not exist: simulated devices that warm up,
// meters with their ranges, counts, noise and timing, and SCPI supplies that log
// what they saw, in a process of its own, on real pseudo-terminals. Faults come on
// order. Everything it says is invented, and marked so.
//
// It needs pseudo-terminals and says so where there are none (Windows). It never
// stands in for an outside check of the fits.
package rehearsal

// Device is one simulated transistor.
type Device struct {
	Name   string  `json:"name"`
	Vt     float64 `json:"vt_v"`
	Beta   float64 `json:"beta"` // A/V^2
	N      float64 `json:"n"`
	Theta  float64 `json:"theta"`  // 1/V
	Lambda float64 `json:"lambda"` // 1/V
	Leak   float64 `json:"leak_a"` // A, drain to source
	State  string  `json:"state"`  // "", "open", "shorted"
	Kappa  float64 `json:"kappa"`  // V/K, fall of the threshold
	Alpha  float64 `json:"alpha"`  // beta goes with (T/T0)^-alpha
	Rth    float64 `json:"rth"`    // K/W to ambient
	Tau    float64 `json:"tau_s"`  // s
}

// Meter is one simulated meter.
type Meter struct {
	Role        string    `json:"role"`
	Speaks      string    `json:"speaks"` // a format of package meter
	Settings    string    `json:"settings"`
	Counts      float64   `json:"counts"` // 6000: tops at 6000 counts
	Tops        []float64 `json:"tops"`   // ranges, SI unit, ascending
	Auto        bool      `json:"auto"`
	Noise       float64   `json:"noise"` // counts, standard deviation
	Cycle       float64   `json:"cycle_s"`
	Integration float64   `json:"integration_s"`
	Processing  float64   `json:"processing_s"`
	Lag         float64   `json:"lag_s"` // unknown to the program
	Paced       bool      `json:"paced"` // bytes come at the baud rate, not at once
	Gain        float64   `json:"gain"`  // 0 is 1
	Offset      float64   `json:"offset"`
}

// Config is a whole bench.
type Config struct {
	Circuit  string   `json:"circuit"` // load, diode, fixed
	RL       float64  `json:"rl_ohm"`
	VDD      float64  `json:"vdd_v"`
	Devices  []Device `json:"devices"`
	Meters   []Meter  `json:"meters"`
	Supplies []string `json:"supplies"` // "gate", "drain": SCPI, on lines of their own
	Seed     uint64   `json:"seed"`
	Speed    float64  `json:"speed"`  // simulated seconds per second, 0 is 1; the lines' own times do not change
	Folder   string   `json:"folder"` // where the lines appear under their names, and the supplies' logs
	Tremor   float64  `json:"tremor"` // of the hand at the knob, share of its rate
}
