package fit

import (
	"math"
	"math/rand/v2"
)

// Self-made data: curves of our own equations read by simulated meters. They
// test the arithmetic and the honesty of the uncertainties, not physics; the
// equations are the square law (Shichman and Hodges 1968), the interpolation of
// Enz, Krummenacher and Vittoz (1995), and the kinked foot of the level-3 model
// (Vladimirescu and Liu, UCB/ERL M80/7, 1980; from memory).

type law int

const (
	squareLaw law = iota
	smoothLaw
	kinkedLaw
)

type simDevice struct {
	law                law
	vt, beta, n, theta float64
	lambda, rs, leak   float64
}

// current is the drain current at the terminals of the bare channel.
func (d simDevice) current(vgs, vds float64) float64 {
	ut := thermalVoltage
	if vds <= 0 {
		return 0
	}
	strong := func(v float64) float64 {
		if v <= 0 {
			return 0
		}
		x := math.Min(v, vds)
		return d.beta * (v*x - x*x/2) / (1 + d.theta*v) * (1 + d.lambda*vds)
	}
	switch d.law {
	case squareLaw:
		return strong(vgs - d.vt)
	case kinkedLaw:
		von := d.vt + d.n*ut
		if vgs < von {
			return strong(von-d.vt) * math.Exp((vgs-von)/(d.n*ut))
		}
		return strong(vgs - d.vt)
	}
	a := 2 * d.n * ut
	soft := func(x float64) float64 {
		if x > 40*a {
			return x
		}
		return a * math.Log1p(math.Exp(x/a))
	}
	s1, s2 := soft(vgs-d.vt), soft(vgs-d.vt-vds)
	return d.beta / 2 * (s1*s1 - s2*s2) * (1 + d.lambda*vds) / (1 + d.theta*s1)
}

// bench is how the device is fed.
type simBench struct {
	circuit      Circuit
	rl, vdd, vds float64
}

// at solves the circuit for the drain current at gate voltage vg by bisection.
func (d simDevice) at(b simBench, vg float64) float64 {
	top, r := b.vds, 0.0
	switch b.circuit {
	case Load:
		top, r = b.vdd, b.rl
	case Diode:
		top = vg
	}
	if top <= 0 {
		return 0
	}
	f := func(i float64) float64 { return d.current(vg-i*d.rs, top-i*(r+d.rs)) }
	lo, hi := 0.0, d.current(vg, top)
	if r+d.rs == 0 {
		return hi + d.leak
	}
	hi = math.Min(hi, top/(r+d.rs))
	for range 60 {
		m := (lo + hi) / 2
		if f(m) > m {
			lo = m
		} else {
			hi = m
		}
	}
	return (lo+hi)/2 + d.leak
}

// gateFor solves for the gate voltage of a current.
func (d simDevice) gateFor(b simBench, i float64) float64 {
	lo, hi := d.vt-3, d.vt+20
	for range 100 {
		m := (lo + hi) / 2
		if d.at(b, m) < i {
			lo = m
		} else {
			hi = m
		}
	}
	return (lo + hi) / 2
}

// simMeter is a meter with ranges of so many counts, noise as a share of the
// reading and in counts.
type simMeter struct {
	tops         []float64
	counts       float64
	share, digit float64
	volts        float64 // V, further noise
	gain         float64 // relative error
}

func (m simMeter) read(r *rand.Rand, x float64) float64 {
	if m.counts == 0 {
		return x
	}
	top := m.tops[len(m.tops)-1]
	for _, t := range m.tops {
		if math.Abs(x) <= t {
			top = t
			break
		}
	}
	q := top / m.counts
	y := x*(1+m.gain) + r.NormFloat64()*math.Hypot(m.share*x, math.Hypot(m.digit*q, m.volts))
	// Written as a display would: a decimal number, not a multiple in binary.
	n := math.Round(y / q)
	places := math.Round(-math.Log10(q) + 0.499)
	return math.Round(n*q*math.Pow(10, places)) / math.Pow(10, places)
}

type simMeters struct{ gate, current, load simMeter }

// handheld is two or three 6,000-count meters: 0.1 % and half a count of noise,
// the gate with 1 mV steps and 0.5 mV noise (our own choice of a plausible
// bench).
func handheld() simMeters {
	return simMeters{
		gate:    simMeter{tops: []float64{6}, counts: 6000, volts: 0.5e-3},
		current: simMeter{tops: []float64{6e-3, 60e-3, 600e-3, 6}, counts: 6000, share: 1e-3, digit: 0.5},
		load:    simMeter{tops: []float64{0.6, 6, 60}, counts: 6000, share: 1e-3, digit: 0.5},
	}
}

// fineMeters have 20,000 counts.
func fineMeters() simMeters {
	return simMeters{
		gate:    simMeter{tops: []float64{2, 20}, counts: 20000, volts: 0.2e-3},
		current: simMeter{tops: []float64{2e-3, 20e-3, 200e-3, 2, 20}, counts: 20000, share: 3e-4, digit: 0.5},
		load:    simMeter{tops: []float64{0.2, 2, 20, 200}, counts: 20000, share: 3e-4, digit: 0.5},
	}
}

func exact() simMeters { return simMeters{} }

// sweep reads the device at from…to in steps, each up to jitter off. The load
// circuit is read at the resistor, the others by an ammeter.
func (d simDevice) sweep(r *rand.Rand, b simBench, m simMeters, from, to, step, jitter float64) Curve {
	var c Curve
	for k := 0; ; k++ {
		v := from + float64(k)*step
		if v > to+1e-9 {
			return c
		}
		v += jitter * (2*r.Float64() - 1)
		i := d.at(b, v)
		c.Vg = append(c.Vg, m.gate.read(r, v))
		if b.circuit == Load {
			c.Vl = append(c.Vl, m.load.read(r, i*b.rl))
		} else {
			c.Id = append(c.Id, m.current.read(r, i))
		}
	}
}

// setup is what is known of the bench.
func (b simBench) setup() Setup {
	s := unknownSetup()
	s.Circuit, s.OffV, s.Burden = b.circuit, 0, 0
	switch b.circuit {
	case Load:
		s.RL, s.RLTol, s.Vdd = b.rl, 0.01, b.vdd
	case Fixed:
		s.Vds = b.vds
	}
	return s
}

func randomSource(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 2)) }
