package svg

import (
	"math"
	"strconv"

	"gatesill/report"
)

// Axis is how currents are laid out.
type Axis int

// The current axes. On the logarithmic one, currents that are not above zero
// are left out; on the square-root one they keep their sign.
const (
	Linear Axis = iota
	SquareRoot
	Logarithmic
)

// String names the axis for people.
func (a Axis) String() string {
	switch a {
	case SquareRoot:
		return "square-root"
	case Logarithmic:
		return "logarithmic"
	}
	return "linear"
}

// scale takes values to places along one axis.
type scale struct {
	kind   Axis
	lo, hi float64 // ends in values
	a, b   float64 // place = a + b*shape(value)
}

func newScale(kind Axis, lo, hi, from, to float64) scale {
	s := scale{kind: kind, lo: lo, hi: hi}
	l, h := s.shape(lo), s.shape(hi)
	s.b = (to - from) / (h - l)
	s.a = from - s.b*l
	return s
}

// shape is the value as it is laid out, before scaling.
func (s *scale) shape(x float64) float64 {
	switch s.kind {
	case SquareRoot:
		if x < 0 {
			return -math.Sqrt(-x)
		}
		return math.Sqrt(x)
	case Logarithmic:
		return math.Log10(x)
	}
	return x
}

// at gives the place of a value; NaN where it has none.
func (s *scale) at(x float64) float64 {
	if s.kind == Logarithmic && !(x > 0) {
		return math.NaN()
	}
	return s.a + s.b*s.shape(x)
}

// tick is one labelled value of an axis.
type tick struct {
	value float64
	label string
	minor bool // a line without a label
}

// niceStep is the least of 1, 2, 5 times a power of ten that is not below x.
func niceStep(x float64) float64 {
	if !(x > 0) || math.IsInf(x, 0) {
		return 1
	}
	p := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{1, 2, 5, 10} {
		if m*p >= x*(1-1e-9) {
			return m * p
		}
	}
	return 10 * p
}

// tiny is less than any voltage or current that a bench can tell from none;
// below it, powers of ten run out of float64.
const tiny = 1e-30

// widen gives a range that has some width.
func widen(lo, hi float64) (float64, float64) {
	if !(lo <= hi) {
		return 0, 1
	}
	if size := math.Max(math.Abs(lo), math.Abs(hi)); hi-lo <= max(size*1e-9, tiny) {
		pad := size * 0.1
		if pad < tiny {
			pad = 0.5
		}
		return lo - pad, hi + pad
	}
	return lo, hi
}

// ticks gives the values to label between lo and hi, about px pixels apart, in
// the prefix given.
func (s *scale) ticks(px float64, unit report.Scale) []tick {
	switch s.kind {
	case Logarithmic:
		return s.logTicks()
	case SquareRoot:
		return s.rootTicks(px, unit)
	}
	length := math.Abs(s.at(s.hi) - s.at(s.lo))
	step := niceStep((s.hi - s.lo) / math.Max(1, length/px))
	var list []tick
	first := math.Ceil(s.lo/step - 1e-9)
	for k := 0; k < 200; k++ {
		v := (first + float64(k)) * step
		if v > s.hi+step*1e-9 {
			break
		}
		if first+float64(k) == 0 {
			v = 0
		}
		list = append(list, tick{value: v, label: tickLabel(unit.Of(v), unit.Of(step))})
	}
	return list
}

// tickLabel writes v with the decimals that step needs.
func tickLabel(v, step float64) string {
	if v == 0 {
		return "0"
	}
	d := 0
	if step > 0 && step < 1 {
		d = min(12, int(math.Ceil(-math.Log10(step)-1e-9)))
	}
	text := strconv.FormatFloat(v, 'f', d, 64)
	if len(text) > 12 {
		return strconv.FormatFloat(v, 'g', 6, 64)
	}
	return text
}

// rootTicks goes up the 1-2-5 ladder and takes what is far enough from the last.
func (s *scale) rootTicks(px float64, unit report.Scale) []tick {
	list := []tick{}
	if s.lo <= 0 {
		list = append(list, tick{value: 0, label: "0"})
	}
	if s.hi <= tiny || !drawable(s.hi) {
		return list
	}
	top := s.at(s.hi)
	for e := math.Floor(math.Log10(s.hi)) - 4; e <= math.Ceil(math.Log10(s.hi)); e++ {
		for _, m := range []float64{1, 2, 5} {
			v := m * math.Pow(10, e)
			if v > s.hi*(1+1e-9) || v < s.lo {
				continue
			}
			if n := len(list); n > 0 && math.Abs(s.at(v)-s.at(list[n-1].value)) < px*0.6 {
				continue
			}
			list = append(list, tick{value: v, label: strconv.FormatFloat(unit.Of(v), 'g', 6, 64)})
		}
	}
	// The ladder leaves wide steps at the top: fill them with even ones.
	for n := len(list); n > 1 && math.Abs(top-s.at(list[n-1].value)) > px*1.6; n = len(list) {
		step := list[n-1].value - list[n-2].value
		v := list[n-1].value + step
		if v > s.hi*(1+1e-9) || step <= 0 || len(list) > 40 {
			break
		}
		list = append(list, tick{value: v, label: strconv.FormatFloat(unit.Of(v), 'g', 6, 64)})
	}
	return list
}

// logTicks labels the decades, each with its own prefix, and 2 and 5 between
// them where the range is short.
func (s *scale) logTicks() []tick {
	var list []tick
	lo, hi := math.Log10(s.lo), math.Log10(s.hi)
	every := max(1, int(math.Ceil((hi-lo)/12)))
	for e := int(math.Floor(lo)); e <= int(math.Ceil(hi)); e++ {
		for m := 1; m <= 9; m++ {
			v := float64(m) * math.Pow(10, float64(e))
			if v < s.lo*(1-1e-9) || v > s.hi*(1+1e-9) {
				continue
			}
			labelled := m == 1 && e%every == 0 || hi-lo < 2.2 && (m == 2 || m == 5)
			switch {
			case labelled:
				list = append(list, tick{value: v, label: report.FormatGiven(v, "A")})
			case hi-lo < 7:
				list = append(list, tick{value: v, minor: true})
			}
		}
	}
	return list
}
