package acquire

import (
	"slices"

	"gatesill/store/record"
)

// Step is a moment of the work at which cautions are shown.
type Step string

// The steps, in their order.
const (
	StepSetUp  Step = "set-up"  // before anything is connected
	StepInsert Step = "insert"  // before a part goes into the fixture
	StepPower  Step = "power"   // before the drain supply is switched on
	StepHand   Step = "by hand" // a sweep by hand begins
	StepDrive  Step = "driven"  // a driven sweep begins
	StepSpot   Step = "spot"    // a part is kept at its current
	StepRemove Step = "remove"  // before a part is touched or taken out
)

// caution is one line of the table. A line without modes or channels holds for all.
type caution struct {
	step    Step
	mode    record.Mode    // "" any
	channel record.Channel // "" any
	text    string
}

// cautions is the whole table, in the order in which lines are shown.
var cautions = []caution{
	{StepSetUp, "", "", "This program warns; it protects nothing. A fuse, the supply's current limit and a resistor in series with the drain do."},
	{StepSetUp, "", "", "Set the current limit of the drain supply first, then its voltage."},
	{StepSetUp, "", "", "Fit 10 kΩ to 100 kΩ from gate to source, so that the gate is never open when a lead falls off."},
	{StepSetUp, "", "", "A meter whose input is tied to the computer's ground shorts the supply when it sits across a resistor in the positive lead, or in the drain lead. Use an isolated one there."},
	{StepSetUp, "", "", "Above 60 V DC, and on charged capacitors after switching off, a touch can hurt: cover the leads, one hand, let them discharge and measure that they have."},
	{StepSetUp, "", "", "No RF while a DC bias is measured: drive off, output on a dummy load. A transmitter is for licensed hands; keep clear of its field."},
	{StepSetUp, "", "", "Follow the electrical code and the rules of the place you work at; leave mains wiring to those who are licensed for it."},

	{StepInsert, "", "", "A charge from your hand can pierce the gate: wrist strap, mat, and the part in its conductive pack until now."},
	{StepInsert, "", "", "Some RF power packages contain beryllium oxide: whole it is harmless, its dust is not. Do not file, sand, break or open one; tighten its flange no more than its sheet says."},
	{StepInsert, record.Enhancement, "", "Drain supply off and gate at 0 V before the part goes in."},
	{StepInsert, record.Depletion, "", "Drain supply off, and off before the gate is: at 0 V this part conducts."},
	{StepInsert, "", record.PChannel, "p-channel: source to the positive side; gate and drain go negative against it."},

	{StepPower, record.Enhancement, "", "Gate at 0 V before the drain supply is switched on; then raise it slowly."},
	{StepPower, record.Depletion, "", "Gate at its off voltage, and seen there, before the drain supply is switched on: this part is on at 0 V."},
	{StepPower, record.Enhancement, record.PChannel, "Turning on means a gate voltage that goes more negative."},
	{StepPower, record.Depletion, record.PChannel, "Its off voltage is positive against the source; turning on means going down from there."},
	{StepPower, record.Depletion, record.NChannel, "Its off voltage is negative against the source; turning on means going up from there."},
	{StepPower, "", "", "Screw the part to a heat sink before it carries power; steady current at high V_DS can kill below the limit that holds for switching: use the DC line of its safe area."},

	{StepHand, "", "", "By hand the program can only call stop, and a handheld meter sees a limit 0.3 s to 0.8 s late: turn slowly, and set limits at half of what hurts."},
	{StepHand, "", "", "When stop is called, turn the gate back first and read afterwards."},
	{StepHand, "", "", "A current that jumps when a hand comes near is oscillation: turn back, put a ferrite bead or a resistor at the gate."},

	{StepDrive, "", "", "Loss of mains at the computer, a pulled supply lead, a hung computer, or the end of the guarding process itself are not covered: only the supply's own watchdog or an interlock is."},
	{StepDrive, "", "", "A supply that cannot sink current lowers the gate only as fast as its output capacitor empties."},
	{StepDrive, "", "", "Limits are seen 0.05 s to 0.8 s late, depending on the meters: set them at half of what hurts."},
	{StepDrive, record.Depletion, "", "With its gate supply gone this part is on: the drain supply must switch off by itself then."},

	{StepSpot, "", "", "The part and its resistor get hot and stay hot: mind your fingers, keep air moving."},

	{StepRemove, record.Enhancement, "", "Gate to 0 V, drain supply off, both seen on the meters; then touch. An open gate keeps its charge, and the part stays on."},
	{StepRemove, record.Depletion, "", "Drain supply off first, seen on its meter, with the gate held at its off voltage; then the gate, then touch. At 0 V, or open, this part is on."},
	{StepRemove, "", "", "Part, heat sink and load resistor may be hot: wait, or use pliers."},
	{StepRemove, "", "", "A meter left on its 10 A jack is a short across the next voltage it is put to: move the lead back."},
	{StepRemove, "", "", "A broken ceramic RF package goes into a sealed bag as special waste, never into the bin."},
}

// Cautions gives what is to be kept in mind at a step, worded for the part. Unknown
// modes and channels count as enhancement and n-channel.
func Cautions(step Step, mode record.Mode, channel record.Channel) []string {
	if mode != record.Depletion {
		mode = record.Enhancement
	}
	if channel != record.PChannel {
		channel = record.NChannel
	}
	var out []string
	for _, c := range cautions {
		if c.step == step && (c.mode == "" || c.mode == mode) && (c.channel == "" || c.channel == channel) {
			out = append(out, c.text)
		}
	}
	return out
}

// Steps gives the steps of a sweep that have cautions, in order.
func Steps(mode Mode, drives bool) []Step {
	all := []Step{StepSetUp, StepInsert, StepPower, StepHand, StepDrive, StepSpot, StepRemove}
	return slices.DeleteFunc(all, func(s Step) bool {
		return s == StepHand && (mode == Driven || mode == AtSpot && drives) || s == StepDrive && !drives || s == StepSpot && mode != AtSpot
	})
}
