package acquire

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// ErrRefused is wrapped when a sweep is not begun: something without which it
// would be unsafe, or could not be led, is missing.
var ErrRefused = errors.New("sweep refused")

// Mode is how the gate voltage is moved.
type Mode string

// The modes.
const (
	ByHand Mode = "by hand" // in steps: the next gate voltage is said, and taken once settled
	Free   Mode = "free"    // the knob is followed: plateaus as they come, interpolated points on the move
	Driven Mode = "driven"  // a supply sets the gate voltage
	AtSpot Mode = "spot"    // V_GS at one current; by hand, or driven where the gate is
)

// Predictor makes, from the points so far, a function that gives the drain
// current (A, sign of the part) at a gate voltage (V, sign of the part), and false
// where it cannot.
type Predictor func(points []Point) func(vg float64) (id float64, ok bool)

// Pairs brings readings together into points. [Pairer] does.
type Pairs interface {
	Add(record.Reading)
	Take() []Point // points that have come since the last call
}

// Plan is what a sweep shall be. Voltages carry the sign of the part (a p-channel
// part has negative ones), currents and limits are magnitudes. What is unknown
// takes the default in brackets.
type Plan struct {
	Mode  Mode
	From  record.Num // V [the off voltage]
	To    record.Num // V [where the idle current is passed by 30 %, or the limits are near]
	Step  record.Num // V, magnitude [50 mV until current shows, then finer as the curve demands]
	Idle  record.Num // A, idle current of the lot
	Least record.Num // A, smallest current of interest [a thousandth of the idle current]

	At       record.Num // A, of a spot; [where the circuit sets it]
	AtWithin float64    // fraction of At that is near enough [0.02, driven 0.005]
	Settle   record.Num // s, the same wait for every part before a point [until it has settled]
	Patience float64    // s, of a driven sweep with a point that does not settle [60; spot 900]
	MinStep  float64    // V, smallest step [2 mV, by hand 5 mV]
	Window   float64    // V around the voltage told, by hand, at most half a step [half a step]

	Channel    record.Channel // [n]
	PartMode   record.Mode    // [enhancement]
	OffVoltage record.Num     // V [0 for enhancement; a depletion part must have one]
	Limits     Limits
	Overloads  map[string]int   // as of [NewGuard]
	Circuit    record.Condition // circuit, R_L, its rating, V_DD, V_DS
	Points     int              // in the upper part of a sweep whose steps are chosen here [12]

	DrivesGate  bool // a supply sets the gate voltage
	DrivesDrain bool // a supply switches the drain voltage
	NoReturn    bool // leave out the return reading

	Roles  []string           // of the meters at hand
	Cycle  map[string]float64 // s between readings, by role [learned]
	Silent map[string]float64 // s without a reading until a meter counts as silent [max(3.5 cycles, 1 s)]
	Scale  map[string]float64 // factor on the readings of a role whose meter says the wrong prefix [1]

	Predict Predictor    // [from the last points, on the safe side]
	Pairs   func() Pairs // a fresh one at each call
}

// Sign is +1 where the current rises with the gate voltage, -1 for p-channel.
func (p *Plan) Sign() float64 {
	if p.Channel == record.PChannel {
		return -1
	}
	return 1
}

// Off is the gate voltage at which the device is off, V.
func (p *Plan) Off() float64 { return p.OffVoltage.Or(0) }

// drives reports whether the keeper is part of the sweep.
func (p *Plan) drives() bool { return p.DrivesGate || p.DrivesDrain }

// driven reports whether the program moves the gate.
func (p *Plan) driven() bool { return p.Mode == Driven || p.Mode == AtSpot && p.DrivesGate }

// has reports whether a meter has that role.
func (p *Plan) has(role string) bool { return slices.Contains(p.Roles, role) }

// saysCurrent reports whether the drain current can be known.
func (p *Plan) saysCurrent() bool {
	rl := p.Circuit.RL.Float() > 0
	vdd := p.has(Supply) || p.Circuit.VDD.IsKnown()
	return p.has(Current) || p.has(Load) && rl ||
		rl && vdd && (p.has(Drain) && p.Circuit.Circuit == record.Load || p.Circuit.Circuit == record.Diode)
}

// saysDrain reports whether V_DS can be known.
func (p *Plan) saysDrain() bool {
	return p.has(Drain) || p.has(Supply) || p.Circuit.VDD.IsKnown() ||
		p.Circuit.Circuit == record.Diode || p.Circuit.Circuit == record.Fixed && p.Circuit.VDS.IsKnown()
}

// check says why the sweep is not begun, wrapping [ErrRefused].
func (p *Plan) check() error {
	no := func(format string, a ...any) error {
		return fmt.Errorf("%w: %s", ErrRefused, fmt.Sprintf(format, a...))
	}
	s := p.Sign()
	switch p.Mode {
	case ByHand, Free, Driven, AtSpot:
	default:
		return no("mode %q is none of by hand, free, driven, spot", p.Mode)
	}
	if p.Channel != "" && p.Channel != record.NChannel && p.Channel != record.PChannel {
		return no("channel %q is neither n nor p", p.Channel)
	}
	if p.Pairs == nil {
		return no("nothing brings the readings together into points")
	}
	if !p.has(Gate) {
		return no("no meter reads the gate voltage")
	}
	if !p.saysCurrent() && p.Mode != AtSpot {
		return no("no meter tells the drain current: one in the drain lead, or one across the load resistor with its value")
	}
	if p.PartMode == record.Depletion && !p.OffVoltage.IsKnown() {
		return no("the off voltage of this depletion part is not known; 0 V does not turn it off")
	}
	for _, l := range []struct {
		name string
		x    float64
	}{{"V_GS", p.Limits.Vgs}, {"V_DS", p.Limits.Vds}, {"I_D", p.Limits.ID}, {"P_D", p.Limits.PD}, {"temperature", p.Limits.Temp}} {
		if l.x < 0 || math.IsNaN(l.x) || math.IsInf(l.x, 0) {
			return no("limit of %s is %g, must be above 0", l.name, l.x)
		}
	}
	if p.Mode == Driven && !p.DrivesGate {
		return no("no supply sets the gate voltage")
	}
	if p.driven() {
		var missing []string
		for _, l := range []struct {
			name string
			x    float64
		}{{"V_GS", p.Limits.Vgs}, {"I_D", p.Limits.ID}, {"P_D", p.Limits.PD}} {
			if l.x == 0 {
				missing = append(missing, l.name)
			}
		}
		if len(missing) > 0 {
			return no("a driven sweep needs limits; missing: %s", list(missing))
		}
		if !p.saysCurrent() {
			return no("a driven sweep must see the drain current")
		}
		if !p.saysDrain() {
			return no("a driven sweep must know V_DS: a drain meter, or the supply voltage")
		}
		if p.PartMode == record.Depletion && !p.DrivesDrain {
			return no("a depletion part is not driven without a drain supply that can be switched off")
		}
	}
	off := p.Off()
	from, to := p.From.Or(off), p.To.Or(off+s*1000)
	if p.Mode != AtSpot && s*(to-from) <= 0 {
		return no("the sweep goes up from %s to %s, which turns this %s-channel part off", show(from, "V"), show(to, "V"), p.channel())
	}
	for _, v := range []struct {
		name string
		x    record.Num
	}{{"begin", p.From}, {"end", p.To}, {"off voltage", p.OffVoltage}} {
		if x, ok := v.x.Get(); ok && p.Limits.Vgs > 0 && math.Abs(x) > p.Limits.Vgs {
			return no("%s of %s is beyond the greatest V_GS of %s", v.name, show(x, "V"), show(p.Limits.Vgs, "V"))
		}
	}
	if x, ok := p.Step.Get(); ok && x <= 0 {
		return no("step of %g V, must be above 0", x)
	}
	if x, ok := p.Settle.Get(); ok && x < 0 {
		return no("wait of %g s before a point", x)
	}
	if p.Mode == AtSpot {
		at, ok := p.At.Get()
		switch {
		case ok && at <= 0:
			return no("spot current of %g A, must be above 0", at)
		case !ok && (p.driven() || p.Circuit.Circuit != record.Diode):
			return no("at which current the gate voltage is wanted is not said")
		case ok && p.Limits.ID > 0 && at > stepShare*p.Limits.ID:
			return no("spot current %s is too near the limit of %s, or above it", show(at, "A"), show(p.Limits.ID, "A"))
		case !p.saysCurrent() && p.Circuit.Circuit != record.Diode:
			return no("no meter tells the drain current")
		}
	}
	return nil
}

// fill puts the defaults in.
func (p *Plan) fill() {
	if p.Channel == "" {
		p.Channel = record.NChannel
	}
	if p.PartMode == "" {
		p.PartMode = record.Enhancement
	}
	if p.AtWithin <= 0 {
		p.AtWithin = 0.02
		if p.driven() {
			p.AtWithin = 0.005
		}
	}
	if p.Patience <= 0 {
		p.Patience = 60
		if p.Mode == AtSpot {
			p.Patience = 900 // parts at an ampere creep for minutes
		}
	}
	if p.MinStep <= 0 {
		p.MinStep = 0.002
		if !p.driven() {
			p.MinStep = 0.005 // no hand turns finer
		}
	}
	if p.Points <= 0 {
		p.Points = 12
	}
}

func (p *Plan) channel() string {
	if p.Channel == record.PChannel {
		return "p"
	}
	return "n"
}

// list joins words: "a, b and c".
func list(words []string) string {
	switch n := len(words); n {
	case 0:
		return ""
	case 1:
		return words[0]
	default:
		out := words[0]
		for _, w := range words[1 : n-1] {
			out += ", " + w
		}
		return out + " and " + words[n-1]
	}
}
