package lot

import (
	"math"
	"math/rand/v2"

	"gatesill/fit"
)

// Self-made curves: the interpolation of Enz, Krummenacher and Vittoz (1995) with
// mobility degradation and a series resistance, solved for the gate voltage. They
// test the arithmetic of judging, not physics.
type simDie struct {
	vt, beta, theta float64 // V, A/V², 1/V
	n, rs           float64 // slope factor, ohm in the source lead
	top             float64 // A, current at which it saturates for good; 0: never
	hump            float64 // V, how far below its threshold a parasite of a hundredth of the gain turns on
	knee, knock     float64 // A, V: between a third and three times that current the gate voltage is that much higher
}

// gate is the gate voltage at which the die carries a current.
func (d *simDie) gate(i float64) float64 {
	channel := i
	if d.top > 0 {
		channel = i / math.Max(1e-6, 1-i/d.top)
	}
	v := d.gateOf(channel)
	if d.hump > 0 {
		// The two share the current: bisection on the gate voltage.
		p := simDie{vt: d.vt - d.hump, beta: d.beta / 100, theta: d.theta, n: d.n}
		lo, hi := v-d.hump-0.5, v
		for range 60 {
			m := (lo + hi) / 2
			if d.currentOf(m)+p.currentOf(m) > channel {
				hi = m
			} else {
				lo = m
			}
		}
		v = (lo + hi) / 2
	}
	if d.knock != 0 {
		far := math.Abs(math.Log(i/d.knee)) / math.Log(3)
		v += d.knock * math.Max(0, 1-far)
	}
	return v + i*d.rs
}

const simUT = 0.02585 // V, kT/q at 27 °C

func (d *simDie) gateOf(i float64) float64 {
	h, a := i/d.beta, 2*d.n*simUT
	x := h*d.theta + math.Sqrt(h*d.theta*h*d.theta+2*h)
	if x > 40*a {
		return d.vt + x
	}
	return d.vt + a*math.Log(math.Expm1(x/a))
}

func (d *simDie) currentOf(v float64) float64 {
	a := 2 * d.n * simUT
	x := v - d.vt
	if x < 40*a {
		x = a * math.Log1p(math.Exp(x/a))
	}
	return d.beta / 2 * x * x / (1 + d.theta*x)
}

// simFamily is how the dies of a lot differ and how they are read.
type simFamily struct {
	vt, gain, theta, slope float64 // standard deviations: V, of the logarithm, relative, relative
	from, to               float64 // A, levels read
	noise, low             float64 // V, of a level; further V at the lowest level, falling with the root of the current
	idle                   float64 // A, 0: 0.25
	silent                 bool    // the u of levels is not known
	z                      func(*rand.Rand) float64
}

// usual is a lot as a careful bench would see it.
var usual = simFamily{vt: 0.05, gain: 0.05, theta: 0.03, slope: 0.02, from: 1e-3, to: 1, noise: 5e-4, low: 1e-3}

// wide is the same from far below threshold on.
var wide = func() simFamily { f := usual; f.from = 1e-4; return f }()

// white leaves nothing in the curves but independent errors of unknown size: all
// departures that can be free of one another are, which the limits are made for.
var white = func() simFamily { f := usual; f.theta, f.slope, f.low, f.silent = 0, 0, 0, true; return f }()

// poor is a bench with errors of some millivolts.
var poor = func() simFamily { f := usual; f.noise, f.low = 3e-3, 5e-3; return f }()

// heavy has the tails of Student's t with 5 degrees of freedom in all that differs.
var heavy = func() simFamily { f := usual; f.z = t5; return f }()

func (f *simFamily) die(rng *rand.Rand) simDie {
	z := f.z
	if z == nil {
		z = normal
	}
	return simDie{vt: 3 + f.vt*z(rng), beta: 2 * math.Exp(f.gain*z(rng)), theta: 0.1 * (1 + f.theta*z(rng)),
		n: 1.4 * (1 + f.slope*z(rng)), rs: 0.03}
}

// read measures a die: levels, gate voltage at 1 mA and at the idle current, gain
// factor of the channel and transconductance at the idle current.
func (f *simFamily) read(rng *rand.Rand, name string, d *simDie) Device {
	idle := f.idle
	if idle == 0 {
		idle = 0.25
	}
	out := Device{Name: name, Result: fit.NewResult()}
	r := &out.Result
	r.State = fit.Measured
	set := func(q *fit.Quantity, v, u float64) { *q = fit.Quantity{Value: v + u*rng.NormFloat64(), U: u, N: 20} }
	set(&r.Vgsth, d.gate(1e-3), 5e-4)
	set(&r.VgsIdle, d.gate(idle), 5e-4)
	const step = 1.02
	gm := idle * (step - 1/step) / (d.gate(idle*step) - d.gate(idle/step))
	set(&r.GmIdle, gm, 0.005*gm)
	set(&r.Beta, d.beta, 0.005*d.beta)
	for _, i := range fit.LevelCurrents { // a die that saturates has no levels beyond
		if i < f.from*0.999 || i > f.to*1.001 || d.top > 0 && i > 0.9*d.top {
			continue
		}
		u := math.Hypot(f.noise, f.low*math.Sqrt(f.from/i))
		l := fit.Level{I: i, Vg: d.gate(i) + u*rng.NormFloat64(), U: u}
		if f.silent {
			l.U = math.NaN()
		}
		r.Levels = append(r.Levels, l)
	}
	return out
}

func (f *simFamily) lot(rng *rand.Rand, n int, spoil func(i int, d *simDie)) []Device {
	devs := make([]Device, n)
	for i := range devs {
		d := f.die(rng)
		if spoil != nil {
			spoil(i, &d)
		}
		devs[i] = f.read(rng, deviceName(i), &d)
	}
	return devs
}
