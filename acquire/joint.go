package acquire

import "gatesill/store/record"

// Joint makes points of readings that were written down together, as by a person
// who waits until all displays stand still and types one line: readings with one
// time are one point, which counts as settled and has nothing to be paired. Readings
// that were refused are left out.
func Joint(readings []record.Reading) []Point {
	var out []Point
	for i := range readings {
		r := &readings[i]
		if r.Refused != "" {
			continue
		}
		if n := len(out); n == 0 || out[n-1].At != r.At {
			p := NewPoint(r.At)
			p.Settled, p.N = true, 1
			out = append(out, p)
		}
		p := &out[len(out)-1]
		if x, ok := r.Value.Get(); ok {
			p.set(r.Role, x, r.Digit.Or(0))
		} else {
			p.mark(r.Role, r.State, string(r.Raw))
		}
	}
	return out
}
