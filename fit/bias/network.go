package bias

import (
	"errors"
	"fmt"
	"math"
)

// Where the trimmer of a [Network] is.
const (
	NoTrimmer = ""
	AtGate    = "gate"   // a potentiometer between top and bottom, its wiper on the gate
	InBottom  = "bottom" // a variable resistor in series with bottom
)

// The ways in which a network can be described wrongly.
var (
	ErrNetwork   = errors.New("not a bias network")
	ErrTolerance = errors.New("not a tolerance")
)

// Network is what gives the gate its voltage:
//
//	supply --[ top ]--+-- gate         supply --[ top ]--[ trimmer ]--[ bottom ]-- 0 V
//	                  |                                       |
//	              [ bottom ]                                 gate
//	                  |
//	                 0 V               trimmer AtGate
//
// and InBottom the first with a trimmer as a variable resistor between bottom and 0 V.
// Nothing flows into the gate. A negative supply gives negative gate voltages.
type Network struct {
	Supply    float64 // V, with its sign
	SupplyTol float64 // relative, 0.04 is ± 4 %
	Top       float64 // ohm; NaN: not given
	Bottom    float64 // ohm; NaN: not given
	Trimmer   float64 // ohm; 0: none
	In        string  // NoTrimmer, AtGate or InBottom
	Tol       float64 // relative, of top and bottom
	TrimTol   float64 // relative, of the trimmer
}

// Check says what is wrong with the network, wrapping [ErrNetwork] or [ErrTolerance].
func (n *Network) Check() error {
	if !(math.Abs(n.Supply) > 0) || math.IsInf(n.Supply, 0) {
		return fmt.Errorf("supply of %g V: %w", n.Supply, ErrNetwork)
	}
	for _, r := range []struct {
		name string
		ohm  float64
	}{{"top", n.Top}, {"bottom", n.Bottom}} {
		if !math.IsNaN(r.ohm) && (!(r.ohm > 0) || math.IsInf(r.ohm, 0)) {
			return fmt.Errorf("%s resistor of %g ohm, must be above 0: %w", r.name, r.ohm, ErrNetwork)
		}
	}
	if !(n.Trimmer >= 0) || math.IsInf(n.Trimmer, 0) {
		return fmt.Errorf("trimmer of %g ohm, must be above 0: %w", n.Trimmer, ErrNetwork)
	}
	if (n.Trimmer > 0) != (n.In != NoTrimmer) {
		return fmt.Errorf("trimmer of %g ohm in %q: %w", n.Trimmer, n.In, ErrNetwork)
	}
	for _, t := range []struct {
		name string
		x    float64
	}{{"supply", n.SupplyTol}, {"resistor", n.Tol}, {"trimmer", n.TrimTol}} {
		if !(t.x >= 0 && t.x < 1) {
			return fmt.Errorf("%s tolerance of %g %%: %w", t.name, 100*t.x, ErrTolerance)
		}
	}
	return nil
}

// Complete reports whether both resistors are there.
func (n *Network) Complete() bool { return n.Top > 0 && n.Bottom > 0 }

// At is the gate voltage with the trimmer at x, from 0 (least gate voltage by magnitude) to 1:
//
//	supply · bottom/(top + bottom)                               without a trimmer
//	supply · (bottom + x·trimmer)/(top + trimmer + bottom)       at the gate
//	supply · (bottom + x·trimmer)/(top + bottom + x·trimmer)     in bottom
//
// NaN where a resistor is missing. Checked: TestNetwork.
func (n *Network) At(x float64) float64 { return n.at(x, 0, 0, 0, 0) }

// at is At with everything off by so much, relative.
func (n *Network) at(x, supply, top, bottom, trimmer float64) float64 {
	t, b, p := n.Top*(1+top), n.Bottom*(1+bottom), n.Trimmer*(1+trimmer)
	low := b + x*p
	all := t + low
	if n.In == AtGate {
		all = t + b + p
	}
	return n.Supply * (1 + supply) * low / all
}

// Setting is where the trimmer has to be for gate voltage v, 0 to 1 within its
// travel, outside it where it does not reach. NaN without a trimmer, or where no
// resistor gives v.
func (n *Network) Setting(v float64) float64 {
	if !(n.Trimmer > 0) || !n.Complete() {
		return math.NaN()
	}
	share := v / n.Supply
	if !(share > 0 && share < 1) {
		return math.NaN()
	}
	if n.In == AtGate {
		return (share*(n.Top+n.Trimmer+n.Bottom) - n.Bottom) / n.Trimmer
	}
	return (n.Top*share/(1-share) - n.Bottom) / n.Trimmer
}

// Range is from where to where a voltage lies, V, Low below High by value.
type Range struct{ Low, High float64 }

// noRange is where nothing is known.
var noRange = Range{math.NaN(), math.NaN()}

// Holds reports whether v lies in the range, its ends included.
func (r Range) Holds(v float64) bool { return v >= r.Low-slack && v <= r.High+slack }

// slack, V, keeps an end inside in spite of rounding.
const slack = 1e-9

// between is the range with these ends, in either order.
func between(a, b float64) Range { return Range{math.Min(a, b), math.Max(a, b)} }

// Reach is the range of gate voltages that the trimmer reaches, a point without one,
// with everything at its nominal value.
func (n *Network) Reach() Range { return between(n.At(0), n.At(1)) }

// Tolerated is the range in which the gate voltage lies at a setting of the trimmer,
// with supply and resistors anywhere in their tolerances (worst case: the extremes
// lie at corners, because the gate voltage is monotone in each).
func (n *Network) Tolerated(x float64) Range {
	r := Range{math.Inf(1), math.Inf(-1)}
	n.corners(func(supply, top, bottom, trimmer float64) {
		v := n.at(x, supply, top, bottom, trimmer)
		r.Low, r.High = math.Min(r.Low, v), math.Max(r.High, v)
	})
	return r
}

// Sure is the range that every board reaches whatever its supply and resistors
// within their tolerances: the worst case of either end. Low is above High where there is no such.
func (n *Network) Sure() Range {
	r := Range{math.Inf(-1), math.Inf(1)}
	n.corners(func(supply, top, bottom, trimmer float64) {
		e := between(n.at(0, supply, top, bottom, trimmer), n.at(1, supply, top, bottom, trimmer))
		r.Low, r.High = math.Max(r.Low, e.Low), math.Min(r.High, e.High)
	})
	return r
}

func (n *Network) corners(f func(supply, top, bottom, trimmer float64)) {
	for k := range 16 {
		sign := func(bit int) float64 { return float64(k>>bit&1)*2 - 1 }
		f(sign(0)*n.SupplyTol, sign(1)*n.Tol, sign(2)*n.Tol, sign(3)*n.TrimTol)
	}
}

// Part is by how much one tolerance moves the gate voltage.
type Part struct {
	Name  string  // "supply", "top", "bottom", "trimmer"
	Volts float64 // V, half of the move between its two ends, everything else nominal
}

// Parts are the moves by each tolerance at a setting of the trimmer; those of 0 are left out.
func (n *Network) Parts(x float64) []Part {
	var out []Part
	add := func(name string, plus, minus float64) {
		if d := math.Abs(plus-minus) / 2; d > 1e-12 {
			out = append(out, Part{name, d})
		}
	}
	add("supply", n.at(x, n.SupplyTol, 0, 0, 0), n.at(x, -n.SupplyTol, 0, 0, 0))
	add("top", n.at(x, 0, n.Tol, 0, 0), n.at(x, 0, -n.Tol, 0, 0))
	add("bottom", n.at(x, 0, 0, n.Tol, 0), n.at(x, 0, 0, -n.Tol, 0))
	add("trimmer", n.at(x, 0, 0, 0, n.TrimTol), n.at(x, 0, 0, 0, -n.TrimTol))
	return out
}

// RootSumSquare joins the moves as independent errors, V: √Σ move². It is what half a
// board's error hardly ever exceeds, not what it cannot.
func RootSumSquare(parts []Part) float64 {
	s := 0.0
	for _, p := range parts {
		s += p.Volts * p.Volts
	}
	return math.Sqrt(s)
}

// variance of the gate voltage, V², each tolerance taken as a rectangle: move²/3 (JCGM
// 100:2008, 4.3.7, from memory).
func variance(parts []Part) float64 {
	r := RootSumSquare(parts)
	return r * r / 3
}
