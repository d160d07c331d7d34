package fit

import "math"

// Model is the static transfer model of one device, one formula from weak
// inversion to triode:
//
//	s(x) = a ln(1 + exp(x/a)), a = 2 N U_T
//	I_D  = (Beta/2) [s(v)² - s(v - V_DS)²] (1 + Lambda V_DS) / (1 + Theta s(v)), v = V_GS - Vt
//
// In strong inversion it is the square law of Shichman and Hodges (IEEE J.
// Solid-State Circuits SC-3, 1968, 285-289; from memory), below the threshold
// the exponential of Enz, Krummenacher and Vittoz (Analog Integrated Circuits
// and Signal Processing 8, 1995, 83-114; from memory). n-channel signs.
//
// Checked: TestModelClosedForm against values of both laws worked by hand and
// confirmed by a circuit simulator.
type Model struct {
	Vt     float64 // V
	Beta   float64 // A/V²
	N      float64 // knee width, subthreshold slope factor
	Theta  float64 // 1/V
	Lambda float64 // 1/V
	Rs     float64 // ohm, in the source lead
}

// thermalVoltage is kT/q at 300 K, in V (CODATA 2018 k and q, both exact).
const thermalVoltage = 1.380649e-23 * 300 / 1.602176634e-19

// softplus is a ln(1 + exp(x/a)) without overflow.
func softplus(x, a float64) float64 {
	if x > 0 {
		return x + a*math.Log1p(math.Exp(-x/a))
	}
	return a * math.Log1p(math.Exp(x/a))
}

// Current gives I_D [A] at V_GS and V_DS [V] of the device itself, source
// resistance not included.
func (m Model) Current(vgs, vds float64) float64 {
	a := 2 * m.N * thermalVoltage
	s1, s2 := softplus(vgs-m.Vt, a), softplus(vgs-m.Vt-vds, a)
	return m.Beta / 2 * (s1*s1 - s2*s2) * (1 + m.Lambda*vds) / (1 + m.Theta*s1)
}

// Solve gives I_D [A] with V_top [V] behind a resistor R_L [ohm] in the drain
// lead and Rs in the source lead, gate at vg [V] against the far end of Rs. It
// is the one root of I = I_D(vg - I Rs, vtop - I (Rs + rl)), found by bisection
// to the last bit: f is strictly increasing in I.
func (m Model) Solve(vg, vtop, rl float64) float64 {
	lo, hi := 0.0, m.Current(vg, vtop)
	if r := m.Rs + rl; r > 0 {
		hi = min(hi, vtop/r)
	}
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			break
		}
		if mid < m.Current(vg-mid*m.Rs, vtop-mid*(m.Rs+rl)) {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo
}
