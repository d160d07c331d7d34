package fit

import (
	"math"

	"gatesill/fit/stats"
)

// Difference is the uncertainty of the difference of the quantity between two such
// devices that were read in one session on the same meters and ranges: of each what is
// drawn anew with every reading, and its own temperature. Gains, offsets, the load
// resistor and what the model may be wrong by are common to both and fall out, as long
// as the difference is small beside the values.
//
// Source: JCGM 100:2008 5.2.2, fully correlated inputs (from memory). Checked:
// TestDifferenceOfTwo.
func (b *Budget) Difference() Total {
	var parts []stats.Part
	for _, c := range b.Lines {
		if c.Input.In(Within) || c.Input == InTemperature {
			for range 2 {
				parts = append(parts, stats.Part{U: math.Abs(c.Share()), Nu: c.Nu, Box: c.Shape == rectangular})
			}
		}
	}
	t := Total{U: stats.RootSumSquare(parts), Nu: stats.EffectiveNu(parts), K: stats.Coverage(parts, coverLevel)}
	t.Expanded = t.K * t.U
	return t
}
