package fit

import "math"

// known reports whether a says anything at all.
func (a Accuracy) known() bool { return a != Accuracy{} }

// stated reports whether a holds an accuracy statement and not only a
// resolution or a noise.
func (a Accuracy) stated() bool { return a.Percent > 0 || a.Counts > 0 }

// absolute is the standard uncertainty of a reading x against the SI unit:
// ±(Percent of |x| + Counts × Resolution) over Divisor; NaN without a
// statement. A Divisor that is not given is √3, the statement read as a limit.
// The quantisation of the display is taken to be within Counts.
//
// Source: JCGM 100:2008, 4.3.7 (rectangular limits) and 4.3.3 (stated k).
// Checked: TestAccuracyArithmetic.
func (a Accuracy) absolute(x float64) float64 {
	if !a.stated() {
		return math.NaN()
	}
	d := a.Divisor
	if !(d > 0) {
		d = math.Sqrt(3)
	}
	return (a.Percent/100*math.Abs(x) + a.Counts*a.Resolution) / d
}

// rangeFor picks the lowest range that holds x, the highest when none does;
// the zero Accuracy when nothing is known. A meter is taken to have stood on
// the range that an autoranging one would choose.
func rangeFor(ranges []Accuracy, x float64) Accuracy {
	for _, a := range ranges {
		if math.Abs(x) <= a.Top || a.Top == 0 {
			return a
		}
	}
	if n := len(ranges); n > 0 {
		return ranges[n-1]
	}
	return Accuracy{}
}

// maxDigits is the number of significant digits beyond which a number is taken
// to be computed rather than displayed; a bench meter of eight and a half
// digits is not to be expected here.
const maxDigits = 8

// decimals is the number of decimal places that write x exactly (negative for
// trailing zeros before the point: 1200 has -2), and false when x has more than
// maxDigits significant digits, is zero or not finite.
func decimals(x float64) (int, bool) {
	x = math.Abs(x)
	if x == 0 || math.IsInf(x, 0) || math.IsNaN(x) {
		return 0, false
	}
	// First decimal exponent of the leading digit, then more places until the
	// number is whole.
	_, e := math.Frexp(x)
	lead := int(math.Floor(float64(e-1) * math.Log10(2))) // this or one less than the true one
	if lead >= -40 && lead < 40 && x >= pow10(lead+1)*(1-1e-12) {
		lead++
	}
	for digits := range maxDigits {
		d := digits - lead
		y := x * pow10(d)
		if r := math.Floor(y + 0.5); r > 0 && math.Abs(y-r) < 1e-10*y+1e-9 {
			return d, true
		}
	}
	return 0, false
}

// powersOfTen holds 10^(i-40).
var powersOfTen = func() (p [81]float64) {
	for i := range p {
		p[i] = math.Pow(10, float64(i-40))
	}
	return
}()

func pow10(n int) float64 {
	if n < -40 || n > 40 {
		return math.Pow(10, float64(n))
	}
	return powersOfTen[n+40]
}

// quantaSpan is how many neighbours on either side are looked at for the step
// of the display: seven readings share a trailing zero by chance once in 10^7.
const quantaSpan = 3

// quanta finds the step of the display at every reading: the power of ten of
// which it and its neighbours are whole multiples, 0 where they look computed
// rather than read, or where all readings are the same. Trailing zeros of single readings do not mislead it, a
// change of range does for three readings only.
//
// Inputs: x readings in sorted order (not modified), place[i] scratch of the
// same length. Result: q[i] in the unit of x.
func quanta(x, q []float64, place []int8) {
	const none, free = -128, 127 // no digits to judge by; more than maxDigits
	for i, v := range x {
		d, ok := decimals(v)
		switch {
		case ok:
			place[i] = int8(max(-40, min(d, 40)))
		case v == 0 || math.IsNaN(v) || math.IsInf(v, 0):
			place[i] = none
		default:
			place[i] = free
		}
	}
	for i := range x {
		m, moves := int8(none), len(x) <= quantaSpan
		for j := max(0, i-quantaSpan); j <= min(len(x)-1, i+quantaSpan); j++ {
			m = max(m, place[j])
			moves = moves || x[j] != x[i]
		}
		switch {
		case m == free:
			q[i] = 0
		case m == none || !moves:
			q[i] = math.NaN() // one reading over and over shows no step: see below
		default:
			q[i] = pow10(-int(m))
		}
	}
	// The step of the nearest readings that show one.
	for i, step := 0, 0.0; i < len(q); i++ {
		if !math.IsNaN(q[i]) {
			step = q[i]
			continue
		}
		j := i
		for j < len(q) && math.IsNaN(q[j]) {
			j++
		}
		behind := step
		if j < len(q) {
			behind = q[j]
		}
		for k := i; k < j; k++ {
			if k-i < j-k && i > 0 {
				q[k] = step
			} else {
				q[k] = behind
			}
		}
		i = j - 1
	}
}

// Resolution finds the step of the display behind a set of readings of one
// range: the greatest of 1, 2 or 5 × 10^k of which all are whole multiples;
// 0 when there is none within eight digits, or fewer than two different
// readings. A grid of set values looks just the same: the caller must know
// that the readings are measured.
//
// Source: common practice, no source. Checked: TestResolution.
func Resolution(x []float64) float64 {
	places, different := -128, false
	first := math.NaN()
	for _, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			continue
		}
		if math.IsNaN(first) {
			first = v
		}
		different = different || v != first
		if v == 0 {
			continue
		}
		d, ok := decimals(v)
		if !ok {
			return 0
		}
		places = max(places, d)
	}
	if !different || places == -128 {
		return 0
	}
	unit := pow10(-places)
	for _, m := range [...]float64{5, 2} {
		if allMultiples(x, m*unit) {
			return m * unit
		}
	}
	return unit
}

func allMultiples(x []float64, q float64) bool {
	for _, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			continue
		}
		if n := v / q; math.Abs(n-math.Round(n)) > 1e-6*math.Max(1, math.Abs(n)) {
			return false
		}
	}
	return true
}

// random is the standard deviation of one reading of a display with step q and
// the stated noise (0: not known): a rectangle of one step, and the noise.
func random(q, noise float64) float64 {
	if !(noise > 0) {
		return q / math.Sqrt(12)
	}
	return math.Sqrt(q*q/12 + noise*noise)
}
