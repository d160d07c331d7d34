// Package rehearsal is a bench that does not exist: simulated devices that warm up,
// meters with their ranges, counts, noise and timing, and SCPI supplies that log
// what they saw, in a process of its own, on real pseudo-terminals. Faults come on
// order. Everything it says is invented, and marked so.
//
// [Bench] is the simulation alone, in a time that its caller counts. [Main] runs it
// in real time on pseudo-terminals, and [Start] starts that process and gives it
// orders.
//
// It needs pseudo-terminals and says so where there are none (Windows). It never
// stands in for an outside check of the fits.
package rehearsal

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"strings"
)

// ErrConfig is wrapped by every error about a configuration or an order that cannot
// be followed.
var ErrConfig = errors.New("rehearsal")

// ErrNoTerminals says that this system has no pseudo-terminals to rehearse on.
var ErrNoTerminals = errors.New("a rehearsal needs pseudo-terminals, which this system does not have (Linux and macOS do)")

// Device is one simulated transistor.
type Device struct {
	Name   string  `json:"name"`
	Vt     float64 `json:"vt_v"` // at 25 deg C
	Beta   float64 `json:"beta"` // A/V^2, at 25 deg C
	N      float64 `json:"n"`
	Theta  float64 `json:"theta"`  // 1/V
	Lambda float64 `json:"lambda"` // 1/V
	Leak   float64 `json:"leak_a"` // A, drain to source
	State  string  `json:"state"`  // "", "open", "shorted"
	Kappa  float64 `json:"kappa"`  // V/K, fall of the threshold
	Alpha  float64 `json:"alpha"`  // beta goes with (T/T0)^-alpha
	Rth    float64 `json:"rth"`    // K/W to ambient; 0 it does not warm up
	Tau    float64 `json:"tau_s"`  // s
}

// Meter is one simulated meter, or one column of what a line says.
type Meter struct {
	Role        string    `json:"role"`
	Line        string    `json:"line"`   // name of its line; "" one of its own, "line-ROLE". Meters with the same name are columns of one line, in their order, and the first of them gives its timing
	Speaks      string    `json:"speaks"` // a format of package meter
	Settings    string    `json:"settings"`
	Counts      float64   `json:"counts"` // 6000: tops at 6000 counts
	Tops        []float64 `json:"tops"`   // ranges, SI unit, ascending
	Auto        bool      `json:"auto"`   // else it stays in its greatest range
	Noise       float64   `json:"noise"`  // counts, standard deviation
	Cycle       float64   `json:"cycle_s"`
	Integration float64   `json:"integration_s"`
	Processing  float64   `json:"processing_s"`
	Lag         float64   `json:"lag_s"`   // unknown to the program
	LagU        float64   `json:"lag_u_s"` // what the bench file says of it
	Paced       bool      `json:"paced"`   // bytes come at the baud rate, not at once
	Gain        float64   `json:"gain"`    // 0 is 1
	Offset      float64   `json:"offset"`
	Percent     float64   `json:"percent"`    // accuracy statement, of the reading
	Plus        float64   `json:"plus"`       // accuracy statement, counts
	Burden      float64   `json:"burden_ohm"` // of a current meter, in the drain lead
	Counting    bool      `json:"counting"`   // shows 0, 1, 2 ... counts, one more each conversion, instead of what it measures
}

// Config is a whole bench.
type Config struct {
	Circuit  string   `json:"circuit"` // load, diode (the knob turns the feed of the load resistor), fixed
	RL       float64  `json:"rl_ohm"`
	VDD      float64  `json:"vdd_v"` // of a drain supply that is not in Supplies, and what the bench file says
	Devices  []Device `json:"devices"`
	Meters   []Meter  `json:"meters"`
	Supplies []string `json:"supplies"` // "gate", "drain": SCPI, on lines of their own, "supply-gate" and "supply-drain"
	Seed     uint64   `json:"seed"`
	Speed    float64  `json:"speed"`     // simulated seconds per second of hand and heat, 0 is 1; times of meters, supplies and lines do not change
	Folder   string   `json:"folder"`    // where the lines appear under their names, and the supplies' logs
	Tremor   float64  `json:"tremor"`    // of the hand at the knob, share of its rate
	Bleed    float64  `json:"bleed_ohm"` // gate to source; 0: none, so that the gate keeps its charge when its supply's output opens
	Settle   float64  `json:"settle_s"`  // time constant of the supplies' outputs, 0 is 5 ms
	Decay    float64  `json:"decay_s"`   // time constant of the supplies' outputs when they fall, 0 as Settle
	Latency  float64  `json:"latency_s"` // from the end of a command to its effect, 0 is 2 ms
	MaxVgs   float64  `json:"max_vgs_v"` // limits of the bench file, 0 not said
	MaxVds   float64  `json:"max_vds_v"`
	MaxID    float64  `json:"max_id_a"`
	MaxPD    float64  `json:"max_pd_w"`
	Rating   float64  `json:"rl_rating_w"` // of the load resistor, 0 not said
}

// Truth is what is so at one instant, whatever the meters say.
type Truth struct {
	At     float64 `json:"at_s"`   // time of the lines
	Device string  `json:"device"` // "" none inserted
	Vg     float64 `json:"vg_v"`
	Id     float64 `json:"id_a"`
	Vl     float64 `json:"vl_v"`
	Vd     float64 `json:"vd_v"` // at the device
	Vdd    float64 `json:"vdd_v"`
	Tj     float64 `json:"tj_c"` // ambient when none is inserted
}

// units of what the roles read.
var units = map[string]string{"gate": "V", "current": "A", "load": "V", "drain": "V", "supply": "V", "temperature": "degC"}

// lineName is the name of the meter's line.
func (m Meter) lineName() string { return cmp.Or(m.Line, "line-"+m.Role) }

// conversion is how long it measures and how often, s.
func (m Meter) conversion() (integration, cycle float64) {
	const least = 1e-5 // an instant, for arithmetic
	integration = max(m.Integration, least)
	return integration, max(m.Cycle, integration)
}

// check says what in a configuration cannot be built.
func (c *Config) check() error {
	bad := func(format string, args ...any) error {
		return fmt.Errorf("%w: %s", ErrConfig, fmt.Sprintf(format, args...))
	}
	switch c.Circuit {
	case "load":
		if !(c.RL > 0) {
			return bad("circuit load without a load resistor: rl_ohm is %g", c.RL)
		}
	case "diode", "fixed":
	default:
		return bad("circuit %q, must be load, diode or fixed", c.Circuit)
	}
	numbers := []float64{c.RL, c.VDD, c.Speed, c.Tremor, c.Bleed, c.Settle, c.Decay, c.Latency, c.MaxVgs, c.MaxVds, c.MaxID, c.MaxPD, c.Rating}
	for _, x := range numbers {
		if !(x >= 0) || math.IsInf(x, 0) {
			return bad("a number of the bench is %g, must be 0 or more", x)
		}
	}
	names := map[string]bool{}
	for _, d := range c.Devices {
		if d.Name == "" || names[d.Name] {
			return bad("device name %q is empty or taken", d.Name)
		}
		names[d.Name] = true
		if d.State != "" && d.State != "open" && d.State != "shorted" {
			return bad("device %s: state %q, must be empty, open or shorted", d.Name, d.State)
		}
		if d.State == "" && (!(d.Beta > 0) || !(d.N > 0)) {
			return bad("device %s: beta %g and n %g must be above 0", d.Name, d.Beta, d.N)
		}
	}
	roles := map[string]bool{}
	for _, m := range c.Meters {
		if units[m.Role] == "" || roles[m.Role] {
			return bad("meter role %q is unknown or taken", m.Role)
		}
		roles[m.Role] = true
		if strings.ContainsAny(m.Line, "/\\\x00") || m.Line == "." || m.Line == ".." {
			return bad("meter %s: line name %q", m.Role, m.Line)
		}
		if len(m.Tops) == 0 || !(m.Counts >= 1) {
			return bad("meter %s: needs ranges (tops) and counts", m.Role)
		}
		for i, top := range m.Tops {
			if !(top > 0) || i > 0 && top <= m.Tops[i-1] {
				return bad("meter %s: ranges must be above 0 and ascend", m.Role)
			}
		}
		for _, x := range []float64{m.Cycle, m.Integration, m.Processing, m.Lag + m.Processing, m.Noise, m.Burden} {
			if !(x >= 0) || math.IsInf(x, 0) {
				return bad("meter %s: a time, noise or burden is %g, must be 0 or more", m.Role, x)
			}
		}
	}
	supplies := map[string]bool{}
	for _, s := range c.Supplies {
		if s != "gate" && s != "drain" || supplies[s] {
			return bad("supply %q, must be gate or drain, each once", s)
		}
		supplies[s] = true
	}
	return nil
}

func (c *Config) device(name string) (*Device, error) {
	for i := range c.Devices {
		if c.Devices[i].Name == name {
			return &c.Devices[i], nil
		}
	}
	return nil, fmt.Errorf("%w: no device %q", ErrConfig, name)
}
