package bench

// file mirrors the TOML keys. Numbers may be written bare (SI base unit) or as
// text with a unit.
type file struct {
	Name    string       `toml:"name"`
	Circuit circuitKeys  `toml:"circuit"`
	Limits  limitKeys    `toml:"limits"`
	Meter   []meterKeys  `toml:"meter"`
	Supply  []supplyKeys `toml:"supply"`
}

type circuitKeys struct {
	Kind       string `toml:"kind"`
	RL         any    `toml:"rl"`
	RLTol      any    `toml:"rl_tol"`
	RLRating   any    `toml:"rl_rating"`
	VDD        any    `toml:"vdd"`
	VDS        any    `toml:"vds"`
	Ammeter    string `toml:"ammeter"`
	GateReturn string `toml:"gate_return"`
	Current    string `toml:"current"`
	PulseWidth any    `toml:"pulse_width"`
	PulseDuty  any    `toml:"pulse_duty"`
	PulseDelay any    `toml:"pulse_delay"`
	Dwell      any    `toml:"dwell"`
	Bleed      any    `toml:"bleed"`
}

type limitKeys struct {
	Vgs  any `toml:"vgs"`
	Vds  any `toml:"vds"`
	ID   any `toml:"id"`
	PD   any `toml:"pd"`
	Temp any `toml:"temp"`
}

type meterKeys struct {
	Role        string      `toml:"role"`
	Name        string      `toml:"name"`
	Serial      string      `toml:"serial"`
	Line        string      `toml:"line"`
	Speaks      string      `toml:"speaks"`
	Settings    string      `toml:"settings"`
	Column      *int        `toml:"column"`
	Unit        string      `toml:"unit"`
	Separator   string      `toml:"separator"`
	Decimal     string      `toml:"decimal"`
	Ask         string      `toml:"ask"`
	Setup       []string    `toml:"setup"`
	Every       any         `toml:"every"`
	Integration any         `toml:"integration"`
	Processing  any         `toml:"processing"`
	Lag         any         `toml:"lag"`
	LagU        any         `toml:"lag_u"`
	Isolated    *bool       `toml:"isolated"`
	Calibrated  any         `toml:"calibrated"`
	Due         any         `toml:"due"`
	Coverage    string      `toml:"coverage"`
	Range       []rangeKeys `toml:"range"`
}

type rangeKeys struct {
	Top        any `toml:"top"`
	Percent    any `toml:"percent"`
	Counts     any `toml:"counts"`
	Resolution any `toml:"resolution"`
	Noise      any `toml:"noise"`
	Burden     any `toml:"burden"`
}

type supplyKeys struct {
	Drives       string            `toml:"drives"`
	Name         string            `toml:"name"`
	Line         string            `toml:"line"`
	Settings     string            `toml:"settings"`
	Output       *int              `toml:"output"`
	CurrentLimit any               `toml:"current_limit"`
	Voltage      any               `toml:"voltage"`
	Isolated     *bool             `toml:"isolated"`
	Swapped      bool              `toml:"swapped"`
	Commands     map[string]string `toml:"commands"`
	Calibrated   any               `toml:"calibrated"`
	Due          any               `toml:"due"`
}
