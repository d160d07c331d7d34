package stats

import "math"

// rootWithin is where f, which rises from below 0 at lo to above 0 at hi or falls,
// crosses 0, to a few units in the last place: false position after Anderson and
// Björck ("A new high order method of regula falsi type", BIT 13, 1973), halving
// where it does not gain.
func rootWithin(f func(float64) float64, lo, hi float64) float64 {
	flo, fhi := f(lo), f(hi)
	if flo == 0 {
		return lo
	}
	if fhi == 0 {
		return hi
	}
	side, width := 0, math.Abs(hi-lo)
	for k := range 200 {
		if math.Abs(hi-lo) <= 4e-16*math.Max(math.Abs(lo), math.Abs(hi)) {
			break
		}
		x := hi - fhi*(hi-lo)/(fhi-flo)
		if k%4 == 3 {
			if math.Abs(hi-lo) > width/4 || !(x > math.Min(lo, hi) && x < math.Max(lo, hi)) {
				x = lo + (hi-lo)/2
			}
			width = math.Abs(hi - lo)
		}
		if x == lo || x == hi || math.IsNaN(x) || math.IsInf(x, 0) {
			x = lo + (hi-lo)/2
		}
		fx := f(x)
		if fx == 0 || math.IsNaN(fx) {
			return x
		}
		if (fx > 0) == (fhi > 0) {
			if side == 1 {
				flo *= shrink(fx, fhi)
			}
			hi, fhi, side = x, fx, 1
		} else {
			if side == -1 {
				fhi *= shrink(fx, flo)
			}
			lo, flo, side = x, fx, -1
		}
	}
	if math.Abs(flo) < math.Abs(fhi) {
		return lo
	}
	return hi
}

// shrink is the factor for the value at the end that has stayed.
func shrink(now, before float64) float64 {
	if m := 1 - now/before; m > 0 {
		return m
	}
	return 0.5
}
