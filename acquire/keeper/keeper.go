// Package keeper guards driven supplies in a process of its own. It alone holds
// their lines; whatever becomes of the measuring program (a limit reached, an
// interrupt, a panic, a kill, a hang), it brings the device to its off state:
// drain supply off first where it can be switched, gate held at the off voltage,
// both read back, the gate's output opened only when that is safe.
//
// It takes no part in measuring and knows no curve. It cannot help against loss
// of the computer's power, a lead pulled on the supply's side, a hung kernel, or
// its own kill: only the supply's own watchdog or a hardware interlock covers
// those.
package keeper

import "time"

// Supply is one supply output and how it is spoken to.
type Supply struct {
	Drives   string            `json:"drives"` // "gate" or "drain"
	Name     string            `json:"name"`
	Address  string            `json:"address"`  // as of port.Open
	Settings string            `json:"settings"` // as of port.ParseSettings
	Output   int               `json:"output"`   // number of its output, 0: it has one
	Limit    float64           `json:"limit_a"`  // current limit to be set, A; 0: leave it
	Voltage  float64           `json:"voltage"`  // V: of the drain supply when it is on; not used for the gate
	Negative bool              `json:"negative"` // leads are swapped: a gate voltage of -3 V is a setting of 3 V
	Commands map[string]string `json:"commands"` // templates that differ from SCPI's, by name: set, limit, on, off, read, identify, errors
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
}
