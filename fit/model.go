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
// and Signal Processing 8, 1995, 83-114; from memory). Two more feet stand in for
// s(x) where knees are sharper, see [Foot]. n-channel signs.
//
// Checked: TestModelClosedForm against values of both laws worked by hand and
// confirmed by a circuit simulator.
type Model struct {
	Vt     float64 // V
	Beta   float64 // A/V²
	N      float64 // knee width, subthreshold slope factor
	Theta  float64 // 1/V
	Lambda float64 // 1/V
	Foot   Foot    // shape of the knee; the zero value is the smooth one
	Rs     float64 // ohm, in the source lead
}

// Foot is how the channel goes over from its exponential foot into strong
// inversion, by the slope ds/dx that goes with s/a.
type Foot uint8

// The feet. Kinked: a square law from x = a/2 on, as in the level-3 model
// (Vladimirescu and Liu, UCB/ERL M80/7, 1980; from memory). Sharp lies between, an
// interpolation of our own.
const (
	SmoothFoot Foot = iota // slope 1 - exp(-s/a): s = a ln(1 + exp(x/a))
	SharpFoot              // slope tanh(s/a): s = a asinh(exp(x/a)/2)
	KinkedFoot             // slope s/a up to 1/2, then 1: s = (a/2) exp(x/a - 1/2), then x
)

// thermalVoltage is kT/q at 300 K, in V (CODATA 2018 k and q, both exact).
const thermalVoltage = 1.380649e-23 * 300 / 1.602176634e-19

// Current gives I_D [A] at V_GS and V_DS [V] of the device itself, source
// resistance not included.
func (m Model) Current(vgs, vds float64) float64 {
	c := m.channel()
	return c.solve(feed{}, vgs, vds, 0)
}

// Solve gives I_D [A] with V_top [V] behind a resistor R_L [ohm] in the drain
// lead and Rs in the source lead, gate at vg [V] against the far end of Rs.
func (m Model) Solve(vg, vtop, rl float64) float64 {
	c := m.channel()
	return c.solve(feed{source: m.Rs, drain: rl}, vg, vtop, math.NaN())
}

func (m Model) channel() channel {
	return channelOf(&[parCount]float64{m.Vt, math.Log(m.Beta), math.Log(m.N), m.Theta, m.Lambda, 0}, m.Foot)
}
