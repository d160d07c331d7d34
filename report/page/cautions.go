package page

import (
	"html/template"

	"gatesill/report"
	"gatesill/store/record"
)

// cautions are the cautions for whoever goes on to handle or fit the devices,
// worded for the mode of the part. They follow common practice at the bench; no
// standard is quoted.
func cautions(p record.Part) []template.HTML {
	off := "its off voltage"
	if v, ok := p.OffVoltage.Get(); ok {
		off += " of " + report.FormatGiven(v, "V")
	} else if p.Mode != record.Depletion {
		off += " (0 V for this part)"
	}
	list := []string{}
	if p.Mode == record.Depletion {
		list = append(list, "This part conducts with no gate voltage. Bring the gate to "+off+" before the drain supply goes on, and switch the drain supply off before the gate voltage is taken away.")
	} else {
		list = append(list, "Bring the gate to "+off+" before the drain supply goes on and again before the device is touched or taken out. A gate keeps its charge.")
	}
	list = append(list,
		"Never leave a gate open: a resistor of some 10 kΩ to 100 kΩ from gate to source keeps a stray charge from turning the device on.",
		"Set the current limit of the supply first and put a resistor in the drain lead; then raise the gate slowly from its off voltage.",
		"Keep to the limits of the part for voltage, current, power and temperature. In linear operation a device can fail below the curve drawn for switching: use the dc curve of its safe operating area.",
		"Heat sink, load resistor and flange may be hot enough to burn. Clamp the device and start the fan before power; wait before touching.",
		"Static charge kills gates: wrist strap, conductive mat, and devices in conductive packing until they are used.",
		"Some RF packages hold beryllium oxide. Whole, they are safe. Do not break, file, sand, grind, crush or open them, do not overtighten them, and dispose of them as hazardous waste.",
		"Supplies above about 60 V dc and charged capacitors can injure or kill: switch off, discharge, measure, and do not work alone.",
		"With RF: work into a dummy load with the enclosure closed, read no dc bias while drive is on, and keep to your licence and the exposure limits.",
		"A device that oscillates looks like one that drifts. If a reading jumps when a hand comes near, stop and add a gate resistor or a bead close to the gate.",
		"A meter lead left in the current jack is a short circuit to the next voltage reading. A meter that is not isolated must not be put across a resistor at the supply side.",
		"The program warns and records; only a fuse or the supply's own limit protects.",
		"Numbers like these are no proof that a part is genuine or that it is not.",
		"The rules for electrical work where you are, and what licensed practice demands, come before anything said here.",
	)
	out := make([]template.HTML, len(list))
	for i, t := range list {
		out[i] = rich(t)
	}
	return out
}
