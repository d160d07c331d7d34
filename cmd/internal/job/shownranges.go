package job

import (
	"maps"
	"math"
	"slices"

	"gatesill/store/record"
)

// shownRanges is what the meters showed so far: by role and step of the display
// the greatest reading.
type shownRanges map[string]map[float64]float64

func (m shownRanges) note(r record.Reading) {
	digit, ok := r.Digit.Get()
	x, number := r.Value.Get()
	if !ok || !number || digit <= 0 || r.Refused != "" {
		return
	}
	if m[r.Role] == nil {
		m[r.Role] = map[float64]float64{}
	}
	m[r.Role][digit] = math.Max(m[r.Role][digit], math.Abs(x))
}

// complete gives meters without ranges what they were seen to show, without an
// accuracy statement; and adds the meters of which nothing else is known. The list
// is not modified.
func (m shownRanges) complete(meters []record.Instrument) []record.Instrument {
	out := slices.Clone(meters)
	for _, role := range slices.Sorted(maps.Keys(m)) {
		i := slices.IndexFunc(out, func(x record.Instrument) bool { return x.Role == role })
		if i < 0 {
			i = len(out)
			out = append(out, record.Instrument{Role: role, Coverage: "limit"})
		}
		if len(out[i].Ranges) == 0 {
			out[i].Ranges = m.ranges(role)
		}
	}
	return out
}

// ranges lists them ascending, as ranges of an instrument of which only the step
// of the display is known.
func (m shownRanges) ranges(role string) []record.RangeAccuracy {
	var digits []float64
	for d := range m[role] {
		digits = append(digits, d)
	}
	slices.Sort(digits)
	var out []record.RangeAccuracy
	for i, d := range digits {
		top := m[role][d]
		if i == len(digits)-1 {
			top = math.MaxFloat64
		}
		if n := len(out); n > 0 && top <= out[n-1].Top {
			continue
		}
		out = append(out, record.RangeAccuracy{Top: top, Resolution: d})
	}
	return out
}
