package gauge

import (
	"cmp"
	"math"
	"slices"
)

// TimelineOf is what one device read, sitting by sitting in their order. Raw is the
// change since the first, Corrected that less tempco·(T - T first), NaN without a
// coefficient (tempco, V/K, NaN: none) or without both temperatures.
//
// Inputs: measurings in any order, not modified; those without a value are left out.
// Checked: TestTimeline.
func TimelineOf(ms []Measuring, device string, tempco float64) []Moment {
	ms = slices.DeleteFunc(withValue(ms), func(m Measuring) bool { return m.Device != device })
	slices.SortStableFunc(ms, func(a, b Measuring) int { return cmp.Compare(a.Rank, b.Rank) })
	var out []Moment
	for _, m := range ms {
		if n := len(out); n == 0 || out[n-1].Sitting != m.Sitting {
			out = append(out, Moment{Sitting: m.Sitting})
		}
		t := &out[len(out)-1]
		t.N++
		t.Value += (m.Value - t.Value) / float64(t.N)
		t.Temp += (m.Temp - t.Temp) / float64(t.N)
	}
	for i := range out {
		out[i].Raw = out[i].Value - out[0].Value
		out[i].Corrected = math.NaN()
		if i > 0 {
			out[i].Corrected = out[i].Raw - tempco*(out[i].Temp-out[0].Temp)
		} else if !math.IsNaN(tempco) && !math.IsNaN(out[0].Temp) {
			out[0].Corrected = 0
		}
	}
	return out
}
