package table

import (
	"math"
	"slices"

	"gatesill/store/record"
)

// pass is a run of points in which the gate goes one way: [lo, hi).
type pass struct {
	lo, hi int
	dir    record.Direction
}

// passes cuts the points of one device at the turning points of the gate
// voltage. A gate reading that jitters, a single reading that is far off, and a
// repeat that starts again from the first voltage in one jump do not make
// passes of their own; every point belongs to exactly one pass, the turning
// point to the pass that reached it.
//
// Inputs: vg in V, NaN where there was no number, not modified; sign -1 when a
// falling gate voltage turns the device on.
//
// Turning points are those of the running extreme: the gate has turned when it
// has come back by a tenth of its whole span, and by more than four times its
// jitter (from second differences, as in Allan-type estimators). Source: common
// practice, no source.
func passes(vg []float64, sign float64) []pass {
	n := len(vg)
	if n == 0 {
		return nil
	}
	if n == 1 {
		return []pass{{0, 1, record.Spot}}
	}
	if dir, ok := monotone(vg, sign); ok {
		return []pass{{0, n, dir}}
	}
	v := cleanGate(vg)
	if dir, ok := monotone(v, sign); ok {
		return []pass{{0, n, dir}}
	}
	span := slices.Max(v) - slices.Min(v)
	jitter := 0.0
	if n >= 12 {
		jitter = jitterOf(v)
	}
	if span < 10*jitter || span < 0.01*greatest(v) { // the gate was held
		return []pass{{0, n, direction(v, sign)}}
	}
	for _, share := range []float64{0.1, 0.2, 0.35, 0.5} {
		cuts := turns(v, max(share*span, 4*jitter))
		if believable(v, cuts, span) {
			return cutAt(v, cuts, sign)
		}
	}
	return []pass{{0, n, direction(v, sign)}}
}

// monotone reports whether the gate goes one way only, and which.
func monotone(v []float64, sign float64) (record.Direction, bool) {
	up, down := true, true
	for i := 1; i < len(v); i++ {
		d := v[i] - v[i-1]
		if d != d {
			return "", false
		}
		up = up && d >= 0
		down = down && d <= 0
		if !up && !down {
			return "", false
		}
	}
	if up == (sign > 0) || up && down {
		return record.Up, true
	}
	return record.Down, true
}

func direction(v []float64, sign float64) record.Direction {
	if sign*(v[len(v)-1]-v[0]) < 0 {
		return record.Down
	}
	return record.Up
}

// cleanGate fills missing readings with the one before, and replaces single
// readings that stand far off both neighbours.
func cleanGate(vg []float64) []float64 {
	v := slices.Clone(vg)
	last := math.NaN()
	for i := len(v) - 1; i >= 0; i-- { // those at the start take the first that follows
		if v[i] == v[i] {
			last = v[i]
		}
	}
	if last != last {
		return make([]float64, len(v))
	}
	for i, x := range v {
		if x != x {
			v[i] = last
		}
		last = v[i]
	}
	step := usualStep(v)
	for i := 1; i < len(v)-1 && len(v) >= 5; i++ {
		a, b := v[i]-v[i-1], v[i]-v[i+1]
		if a*b > 0 && min(math.Abs(a), math.Abs(b)) > 5*step && math.Abs(v[i+1]-v[i-1]) <= 3*step {
			v[i] = (v[i-1] + v[i+1]) / 2
		}
	}
	return v
}

// usualStep is the median of the steps that are not zero.
func usualStep(v []float64) float64 {
	var steps []float64
	for i := 1; i < len(v); i++ {
		if d := math.Abs(v[i] - v[i-1]); d > 0 {
			steps = append(steps, d)
		}
	}
	return median(steps)
}

// jitterOf estimates the scatter of a gate that moves in steps: second
// differences of independent readings have a standard deviation of √6 times
// theirs, and the median of a normal magnitude is 0.6745 of its deviation.
func jitterOf(v []float64) float64 {
	d := make([]float64, 0, len(v))
	for i := 2; i < len(v); i++ {
		d = append(d, math.Abs(v[i]-2*v[i-1]+v[i-2]))
	}
	return median(d) / 0.6745 / math.Sqrt(6)
}

func median(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	slices.Sort(x)
	return x[len(x)/2]
}

// turns gives the places of the extremes at which the gate turned by more
// than h.
func turns(v []float64, h float64) []int {
	var cuts []int
	dir, hi, lo := 0, 0, 0 // places of the extremes since the last turn
	for i, x := range v {
		if x >= v[hi] {
			hi = i
		}
		if x <= v[lo] {
			lo = i
		}
		switch {
		case dir >= 0 && v[hi]-x > h:
			if dir > 0 {
				cuts = append(cuts, hi)
			}
			dir, hi, lo = -1, i, i
		case dir <= 0 && x-v[lo] > h:
			if dir < 0 {
				cuts = append(cuts, lo)
			}
			dir, hi, lo = 1, i, i
		}
		if dir > 0 {
			lo = hi
		} else if dir < 0 {
			hi = lo
		}
	}
	return cuts
}

// cutAt makes passes of the extremes. A pass of one point is a jump: the point
// belongs to the pass that follows, at the end to the one before.
func cutAt(v []float64, cuts []int, sign float64) []pass {
	var list []pass
	lo, from := 0, 0 // from: the point that the pass sets out from
	for i, c := range cuts {
		if i > 0 && c == lo {
			from = c
			continue
		}
		list = append(list, pass{lo, c + 1, direction(v[from:c+1], sign)})
		lo, from = c+1, c
	}
	if len(v)-lo <= 1 && len(list) > 0 {
		list[len(list)-1].hi = len(v)
		return list
	}
	return append(list, pass{lo, len(v), direction(v[from:], sign)})
}

// believable reports whether the gate covered a good part of its span between
// turning points that are but a few readings apart.
func believable(v []float64, cuts []int, span float64) bool {
	last := 0
	for _, c := range append(slices.Clone(cuts), len(v)-1) {
		if c-last <= 3 && math.Abs(v[c]-v[last]) < span/2 {
			return false
		}
		last = c
	}
	return true
}
