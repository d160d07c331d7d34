package rehearsal

import (
	"math"

	"gatesill/fit"
)

// ambient is the temperature of everything that does not warm up, deg C.
const ambient = 25.0

// kelvin is 0 deg C in K.
const kelvin = 273.15

// world is what there is to measure: a gate voltage, a device in a circuit, heat.
// Hand and heat run speed times as fast as the lines.
type world struct {
	c           *Config
	speed       float64
	knob        turn
	gate, drain *output // nil: no such supply on a line
	burden      float64 // ohm, of the current meter
	dev         *Device // nil: nothing inserted
	dT          float64 // K, above ambient
	power       float64 // W, when last looked
}

// turn is the way of a knob from one voltage to another: at a rate that a hand
// keeps only roughly, for it trembles with two frequencies.
type turn struct {
	from, to float64 // V
	rate     float64 // V/s, mean; 0: it is there at once
	since    float64 // s
	tremor   float64 // share of the rate, below 1
	freq     [2]float64
	phase    [2]float64
}

// at is the voltage at t, in closed form, so that it does not hang on the steps in
// which time is counted.
func (p *turn) at(t float64) float64 {
	if p.rate <= 0 {
		return p.to
	}
	d := t - p.since
	s := d
	for i, w := range p.freq {
		if w > 0 {
			s += p.tremor / 2 * (math.Cos(p.phase[i]) - math.Cos(w*d+p.phase[i])) / w
		}
	}
	if s <= 0 {
		return p.from
	}
	if v := p.rate * s; v < math.Abs(p.to-p.from) {
		return p.from + math.Copysign(v, p.to-p.from)
	}
	return p.to
}

// relax is a first-order lag from x towards goal during h.
func relax(x, goal, h, tau float64) float64 {
	if tau <= 0 {
		return goal
	}
	return goal + (x-goal)*math.Exp(-h/tau)
}

// at is what is so at line time t, with heat as it stands.
func (w *world) at(t float64) Truth {
	s := Truth{At: t, Vdd: w.c.VDD, Tj: ambient + w.dT}
	if w.gate != nil {
		s.Vg = w.gate.at(t)
	} else {
		s.Vg = w.knob.at(t * w.speed)
	}
	most := math.Inf(1)
	if w.drain != nil {
		s.Vdd = w.drain.at(t)
		most = w.drain.limit
	}
	if w.c.Circuit == "diode" {
		s.Vdd = s.Vg // the knob feeds the load resistor
	}
	s.Vd = s.Vdd
	if w.dev == nil {
		s.Tj = ambient
		return s
	}
	s.Device = w.dev.Name
	w.solve(&s)
	if s.Id > most { // the supply lowers its voltage until its limit flows
		low, high := 0.0, s.Vdd
		for range 60 {
			s.Vdd = (low + high) / 2
			if w.solve(&s); s.Id > most {
				high = s.Vdd
			} else {
				low = s.Vdd
			}
		}
	}
	return s
}

// shortOhm is what a shorted device still has between drain and source.
const shortOhm = 0.05

// solve finds the current of the device behind its feed.
func (w *world) solve(s *Truth) {
	series := w.burden
	if w.c.Circuit != "fixed" {
		series += w.c.RL
	}
	d := w.dev
	m := fit.Model{Vt: d.Vt - d.Kappa*w.dT, Beta: d.Beta, N: d.N, Theta: d.Theta, Lambda: d.Lambda}
	if w.dT != 0 && d.Alpha != 0 {
		m.Beta *= math.Pow(1+w.dT/(ambient+kelvin), -d.Alpha)
	}
	switch {
	case d.State == "open":
		s.Id = 0
	case d.State == "shorted":
		s.Id = s.Vdd / (series + shortOhm)
	case w.c.Circuit == "load" && d.Leak == 0:
		s.Id = m.Solve(s.Vg, s.Vdd, series)
	default:
		// The current rises with the device's voltage, what the feed gives falls.
		through := func(vds float64) float64 {
			vg := s.Vg
			if w.c.Circuit == "diode" {
				vg = vds
			}
			return m.Current(vg, vds) + d.Leak*math.Tanh(vds/0.5)
		}
		if series == 0 {
			s.Id = through(s.Vdd)
			break
		}
		low, high := 0.0, s.Vdd
		for range 60 {
			mid := (low + high) / 2
			if through(mid)*series > s.Vdd-mid {
				high = mid
			} else {
				low = mid
			}
		}
		s.Id = (s.Vdd - (low+high)/2) / series
	}
	s.Vd = s.Vdd - s.Id*series
	if w.c.Circuit != "fixed" {
		s.Vl = s.Id * w.c.RL
	}
	if w.c.Circuit == "diode" {
		s.Vg = s.Vd
	}
}

// pass lets h seconds of the lines go by from t and gives what is so in their
// middle: tau dT' = P Rth - dT, exact for a power that stands still.
func (w *world) pass(t, h float64) Truth {
	d := w.dev
	if d == nil || d.Rth <= 0 {
		return w.at(t + h/2)
	}
	start := w.dT
	w.dT = relax(start, w.power*d.Rth, h/2*w.speed, d.Tau)
	s := w.at(t + h/2)
	w.power = s.Id * s.Vd
	w.dT = relax(start, w.power*d.Rth, h*w.speed, d.Tau)
	return s
}

// longest is the longest stretch of line time that pass may be given.
func (w *world) longest() float64 {
	const usual, least = 0.01, 2e-4 // s
	if w.dev == nil || w.dev.Rth <= 0 {
		return usual
	}
	return min(usual, max(least, w.dev.Tau/20/w.speed))
}

// insert puts a device, cold, into the fixture; nil takes it out.
func (w *world) insert(d *Device) { w.dev, w.dT, w.power = d, 0, 0 }

// of is what a meter of that role has at its inputs.
func (s *Truth) of(role string) float64 {
	switch role {
	case "gate":
		return s.Vg
	case "current":
		return s.Id
	case "load":
		return s.Vl
	case "drain":
		return s.Vd
	case "supply":
		return s.Vdd
	}
	return s.Tj
}
