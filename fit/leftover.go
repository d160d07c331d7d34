package fit

import "math"

// sign is what a reading shows of being a leftover: of the range before, or of the
// reading before, as meters show them just after a change of range.
type sign uint8

const (
	noSign      sign = iota
	afterChange      // one of the two readings after a change of range
	repetition       // the same, to the last digit, as one of the two before
	endOfRange       // the end of a range, just after a change of it
)

// signOf looks for the signs of a leftover in the reading behind the current of p,
// in the order in which the readings were taken.
func (w *work) signOf(p *point) sign {
	ranges, column := w.s.Current, w.c.Id
	if p.load {
		ranges, column = w.s.Load, w.c.Vl
		if w.byDrain {
			ranges, column = w.s.Drain, w.c.Vd
		}
	}
	k := p.k
	x := at(column, k)
	if k == 0 || !finiteNumber(x) {
		return noSign
	}
	s := noSign
	for j := k - 1; j >= max(0, k-2); j-- {
		if x == column[j] {
			return repetition
		}
		if changed(ranges, column[j], column[j+1]) {
			s = afterChange
		}
	}
	if s == afterChange && isEndOfRange(ranges, x, column[k-1]) {
		return endOfRange
	}
	return s
}

// leftover reports whether the reading behind the current of p is one of the meter
// rather than of the part.
func (w *work) leftover(p *point) bool { return w.signOf(p) >= repetition }

// changed reports whether a meter was on different ranges for two readings: by
// its statement, else by the last digits, which a zero at the end may hide.
func changed(ranges []Accuracy, x, y float64) bool {
	if math.IsInf(x, 0) || math.IsInf(y, 0) {
		return true
	}
	if len(ranges) > 1 {
		return rangeFor(ranges, x).Top != rangeFor(ranges, y).Top
	}
	a, ok := decimals(x)
	b, ok2 := decimals(y)
	return ok && ok2 && a != b
}

// isEndOfRange reports whether x is the end of a range: by the statement, else
// because it is one digit alone where the reading before it has three more.
func isEndOfRange(ranges []Accuracy, x, before float64) bool {
	if len(ranges) > 1 {
		for _, a := range ranges {
			if math.Abs(math.Abs(x)-a.Top) <= 2*a.Resolution {
				return true
			}
		}
		return false
	}
	a, ok := decimals(x)
	b, ok2 := decimals(before)
	return ok && ok2 && b-a >= 3 && math.Abs(x)*pow10(a) < 9.5
}
