// Package keeper looks after driven supplies from a second process. It alone holds
// their lines; whatever becomes of the measuring program (a limit reached, an
// interrupt, a panic, a kill, a hang), it brings the device to its off state:
// first the drain supply is switched off, if it can be, then the gate is set to its off voltage,
// both read back, the gate's output opened only when that is safe.
//
// It takes no part in measuring and knows no curve. It cannot help against loss
// of the computer's power, a lead pulled on the supply's side, a hung kernel, or
// its own kill: only the supply's own watchdog or a hardware interlock covers
// those.
//
// [Start] is the side of the measuring program, [Main] the process itself. Between
// them go lines of JSON over two pipes; the end of the first pipe is the last order
// that a dying program gives.
package keeper

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"time"
)

// Supply is one supply output and how it is spoken to.
type Supply struct {
	Drives   string  `json:"drives"` // "gate" or "drain"
	Name     string  `json:"name"`
	Address  string  `json:"address"`  // as of port.Open
	Settings string  `json:"settings"` // as of port.ParseSettings
	Output   int     `json:"output"`   // number of its output, 0: it has one
	Limit    float64 `json:"limit_a"`  // current limit to be set, A; 0: leave it
	Voltage  float64 `json:"voltage"`  // V: of the drain supply when it is on; not used for the gate
	Negative bool    `json:"negative"` // leads are swapped: a gate voltage of -3 V is a setting of 3 V
	// Commands holds templates that differ from SCPI's, by the names of [Names], with
	// {v} or %g for the value. An empty one is not available. A supply with a template of its own for set, on or
	// off is taken to speak a language of its own: nothing of SCPI is sent to it.
	Commands map[string]string `json:"commands"`
}

// Config is all that the keeper is told before it opens a line.
type Config struct {
	Gate  Supply  `json:"gate"`
	Drain *Supply `json:"drain"` // nil: cannot be switched

	OffVoltage float64 `json:"off_v"`   // gate voltage of the off state, with its sign
	MaxVgs     float64 `json:"max_vgs"` // V, magnitude that is never set; > 0
	Bleed      bool    `json:"bleed"`   // a bleed resistor from gate to source is fitted: the gate's output may be opened
	Depletion  bool    `json:"depletion"`

	BeatLimit time.Duration `json:"beat_limit"` // off state when no heartbeat came for so long; 0: 0.5 s
	Log       string        `json:"log"`        // file to which every command and reply is appended; "" none
}

// OffReport is how the way to the off state went.
type OffReport struct {
	Reason   string        `json:"reason"`
	Took     time.Duration `json:"took"`      // from cause to the last command taken
	Drain    string        `json:"drain"`     // "off", "cannot be switched", or what went wrong
	Gate     float64       `json:"gate_v"`    // read back; NaN travels as null: not read
	GateHeld bool          `json:"gate_held"` // output still on, at the off voltage
	Errors   []string      `json:"errors"`    // of the lines and of the error queues
	Reached  bool          `json:"reached"`   // the off state was confirmed by what the supplies answered
}

// The errors of the keeper. ErrOff is met after it went to the off state.
var (
	ErrConfig   = errors.New("keeper: not started")
	ErrOff      = errors.New("keeper: in the off state")
	ErrTooHigh  = errors.New("keeper: voltage refused")
	ErrRefused  = errors.New("keeper: refused by the supply")
	ErrReadBack = errors.New("keeper: supply reads back something else")
	ErrLine     = errors.New("keeper: line to the supply failed")
	ErrGone     = errors.New("keeper: process does not answer")
)

// The drain supply's two good ends.
const (
	drainOff   = "off"
	drainFixed = "cannot be switched"
)

type offReport OffReport // without methods, so that it can be written plainly

type offWire struct {
	offReport
	Gate *float64 `json:"gate_v"`
}

// MarshalJSON writes a gate voltage that was not read as null.
func (r OffReport) MarshalJSON() ([]byte, error) {
	w := offWire{offReport: offReport(r)}
	if !math.IsNaN(r.Gate) && !math.IsInf(r.Gate, 0) {
		w.Gate = &r.Gate
	}
	return json.Marshal(w)
}

// UnmarshalJSON is the reverse of MarshalJSON.
func (r *OffReport) UnmarshalJSON(b []byte) error {
	var w offWire
	if err := json.Unmarshal(b, &w); err != nil {
		return err
	}
	*r = OffReport(w.offReport)
	r.Gate = math.NaN()
	if w.Gate != nil {
		r.Gate = *w.Gate
	}
	return nil
}

func (c *Config) beatLimit() time.Duration {
	if c.BeatLimit == 0 {
		return 500 * time.Millisecond
	}
	return c.BeatLimit
}

// Check says what forbids driving with this configuration, before a line is opened.
func (c *Config) Check() error {
	bad := func(format string, a ...any) error {
		return fmt.Errorf("%w: "+format, append([]any{ErrConfig}, a...)...)
	}
	if !(c.MaxVgs > 0) || math.IsInf(c.MaxVgs, 0) {
		return bad("the largest gate voltage is not given")
	}
	if !(math.Abs(c.OffVoltage) <= c.MaxVgs) {
		return bad("off voltage %g V is beyond the largest gate voltage %g V", c.OffVoltage, c.MaxVgs)
	}
	if c.BeatLimit < 0 {
		return bad("heartbeat limit %v is negative", c.BeatLimit)
	}
	if c.Depletion && c.Drain == nil {
		return bad("a depletion part conducts with its gate at 0 V; it is driven only with a drain supply that can be switched")
	}
	if err := c.Gate.check("gate"); err != nil {
		return err
	}
	if _, err := c.Gate.setting(c.OffVoltage); err != nil {
		return bad("gate supply %s: off voltage: %v", c.Gate.Name, err)
	}
	if c.Drain == nil {
		return nil
	}
	if err := c.Drain.check("drain"); err != nil {
		return err
	}
	if c.Drain.Voltage == 0 {
		return bad("drain supply %s has no voltage", c.Drain.Name)
	}
	if _, err := c.Drain.setting(c.Drain.Voltage); err != nil {
		return bad("drain supply %s: %v", c.Drain.Name, err)
	}
	if c.Gate.Address == c.Drain.Address {
		g, _ := commandsOf(c.Gate)
		d, _ := commandsOf(*c.Drain)
		if c.Gate.Output == c.Drain.Output && g["set"] == d["set"] {
			return bad("gate and drain are the same output of %s", c.Gate.Address)
		}
		if c.Gate.Settings != c.Drain.Settings {
			return bad("the line %s has two settings, %q and %q", c.Gate.Address, c.Gate.Settings, c.Drain.Settings)
		}
	}
	return nil
}

func (s *Supply) check(drives string) error {
	if s.Drives != drives {
		return fmt.Errorf("%w: supply %s drives %q, not the %s", ErrConfig, s.Name, s.Drives, drives)
	}
	if s.Address == "" {
		return fmt.Errorf("%w: %s supply %s has no line", ErrConfig, drives, s.Name)
	}
	if !(s.Limit >= 0) || math.IsInf(s.Limit, 0) || math.IsNaN(s.Voltage) || math.IsInf(s.Voltage, 0) || s.Output < 0 {
		return fmt.Errorf("%w: %s supply %s: current limit, voltage or output number is not usable", ErrConfig, drives, s.Name)
	}
	_, err := commandsOf(*s)
	return err
}

// setting is the number that is sent for a voltage between the device's leads.
func (s *Supply) setting(v float64) (float64, error) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return 0, fmt.Errorf("%v V is no voltage", v)
	}
	if !s.Negative {
		return v, nil
	}
	if v > 0 {
		return 0, fmt.Errorf("%g V cannot be had with swapped leads", v)
	}
	return 0 - v, nil // 0 - 0 is 0, -0 would be sent as "-0"
}

// voltage is the reverse of setting.
func (s *Supply) voltage(setting float64) float64 {
	if s.Negative {
		return 0 - setting
	}
	return setting
}
