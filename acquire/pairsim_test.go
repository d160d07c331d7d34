package acquire

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gatesill/store/record"
)

// A bench that was invented for these tests: a transistor with the interpolation of
// Enz, Krummenacher and Vittoz (from memory) from weak to strong inversion, 12 V, 5 ohm,
// and meters that read at instants of their own. What the tests measure on it are the errors of
// bringing readings together, against the truth that the simulator knows; it stands in for no
// real meter.

const (
	simVth  = 3.0    // V
	simUt   = 0.0349 // V, n kT/q
	simSpec = 3.6e-3 // A
	simVdd  = 12.0   // V
	simRl   = 5.0    // ohm
	simKnot = 2e-3   // s, of the path of the gate
)

// simID is the drain current at a gate voltage, A.
func simID(vg float64) float64 {
	l := math.Log1p(math.Exp((vg - simVth) / (2 * simUt)))
	return simSpec * l * l
}

// simVG is the gate voltage at which that current flows, V.
func simVG(id float64) float64 {
	return simVth + 2*simUt*math.Log(math.Expm1(math.Sqrt(id/simSpec)))
}

// simSlope is dV_G/dI_D there, V/A.
func simSlope(id float64) float64 { return (simVG(id*1.0001) - simVG(id*0.9999)) / (0.0002 * id) }

// path is a gate voltage over time, one knot each simKnot.
type path []float64

func (p path) at(t float64) float64 {
	x := t / simKnot
	i := int(x)
	switch {
	case x <= 0:
		return p[0]
	case i+1 >= len(p):
		return p[len(p)-1]
	}
	return p[i] + (p[i+1]-p[i])*(x-float64(i))
}

func (p path) end() float64 { return float64(len(p)-1) * simKnot }

// hand moves by a hand that turns at mean rate r, V/s, with a tremor of ±45 % of the
// rate at a frequency drawn from 0.2 to 3 Hz.
type hand struct{ r, f, phase float64 }

func newHand(g *rand.Rand, r float64) hand {
	return hand{r, 0.2 * math.Pow(15, g.Float64()), 2 * math.Pi * g.Float64()}
}

func (h hand) rate(t float64) float64 { return h.r * (1 + 0.45*math.Sin(2*math.Pi*h.f*t+h.phase)) }

// ramp turns from one gate voltage to another without a rest; it stands 2 s before
// and after.
func ramp(g *rand.Rand, r, from, to float64) path {
	h := newHand(g, r)
	p := path{}
	for t := 0.0; t < 2; t += simKnot {
		p = append(p, from)
	}
	sign := 1.0
	if to < from {
		sign = -1
	}
	for v, t := from, 0.0; sign*(to-v) > 0; t += simKnot {
		v += sign * h.rate(t) * simKnot
		p = append(p, v)
	}
	for t, v := 0.0, p[len(p)-1]; t < 2; t += simKnot {
		p = append(p, v)
	}
	return p
}

// stairs turns in steps of 50 mV at rate r and dwells 3 s ±20 % on each.
func stairs(g *rand.Rand, r, from, to float64) path {
	p, v := path{}, from
	for {
		dwell := 3 * (1 + 0.2*(2*g.Float64()-1))
		for t := 0.0; t < dwell; t += simKnot {
			p = append(p, v)
		}
		if v >= to-1e-9 {
			return p
		}
		h, goal := newHand(g, r), v+0.05
		for t := 0.0; v < goal; t += simKnot {
			v = math.Min(goal, v+h.rate(t)*simKnot)
			p = append(p, v)
		}
	}
}

// pairMeter is a meter of the invented bench.
type pairMeter struct {
	role   string
	meter  string
	timing Timing
	cycle  float64
	lag    float64   // s, that the program does not know, within LagU
	digits []float64 // one count by range, ascending
	counts float64   // of the display
	noise  float64   // counts, standard deviation
}

func (m pairMeter) quantity(vg float64) float64 {
	switch id := simID(vg); m.role {
	case Current:
		return id
	case Load:
		return id * simRl
	case Drain:
		return simVdd - id*simRl
	case Supply:
		return simVdd
	case Temperature:
		return 25
	}
	return vg
}

// handhelds are three handhelds: cycles 300, 400 and 250 ms, 100 ms integration, 50 ms
// processing, unknown lag within ±30 ms each, up to 16 ms of batching, current and load
// voltage in automatic ranges.
func handhelds(g *rand.Rand) []pairMeter {
	make := func(role string, cycle float64, counts float64, digits ...float64) pairMeter {
		return pairMeter{role: role, meter: role + " handheld", timing: Timing{Integration: 0.1, Processing: 0.05, LagU: 0.03, Jitter: 0.016},
			cycle: cycle, lag: within(g, 0.03), digits: digits, counts: counts, noise: 0.2}
	}
	return []pairMeter{make(Gate, 0.3, 4000, 1e-3), make(Current, 0.4, 4000, 1e-6, 1e-5, 1e-4), make(Load, 0.25, 4000, 1e-4, 1e-3)}
}

// within draws from ±x, every other time one of the ends.
func within(g *rand.Rand, x float64) float64 {
	if g.IntN(2) == 0 {
		return math.Copysign(x, g.Float64()-0.5)
	}
	return x * (2*g.Float64() - 1)
}

// fast makes a meter one of 20 ms integration and 22 ms cycle, unknown lag ±2 ms.
func fast(g *rand.Rand, m pairMeter) pairMeter {
	m.meter = m.role + " fast"
	m.timing = Timing{Integration: 0.02, Processing: 0.002, LagU: 0.002}
	m.cycle, m.lag, m.noise = 0.022, within(g, 0.002), 0.3
	return m
}

func slowGate(g *rand.Rand) []pairMeter {
	m := handhelds(g)[:2]
	m[0].cycle = 0.4
	m[1] = fast(g, m[1])
	return m
}

func threeFast(g *rand.Rand) []pairMeter {
	m := handhelds(g)
	for i := range m {
		m[i] = fast(g, m[i])
	}
	m[0].digits, m[0].counts, m[2].digits = []float64{1e-4}, 60000, []float64{1e-4}
	return m
}

// simulation is what a bench said, and when it measured that.
type simulation struct {
	readings []record.Reading
	truth    map[string][][2]float64 // arrival, rising, and instant by role
	pairing  Pairing
	path     path
	meters   map[string]pairMeter
}

// simulate lets the meters read along the path.
func simulate(g *rand.Rand, p path, meters []pairMeter) *simulation {
	s := &simulation{truth: map[string][][2]float64{}, pairing: Pairing{Timing: map[string]Timing{}, Free: true}, path: p, meters: map[string]pairMeter{}}
	for _, m := range meters {
		s.pairing.Timing[m.role] = m.timing
		s.meters[m.role] = m
		s.run(g, m)
	}
	slices.SortStableFunc(s.readings, func(a, b record.Reading) int { return cmp.Compare(a.At, b.At) })
	return s
}

func (s *simulation) run(g *rand.Rand, m pairMeter) {
	scale, lost, lastAt := 0, 0, -1.0
	for t := m.cycle * g.Float64(); t < s.path.end(); t += m.cycle * (1 + 0.004*(2*g.Float64()-1)) {
		x := 0.0
		for k := range 5 {
			x += m.quantity(s.path.at(t+(float64(k)-2)/5*m.timing.Integration)) / 5
		}
		if lost > 0 {
			lost--
			continue
		}
		at := t + m.timing.Integration/2 + m.timing.Processing + m.timing.Lag + m.lag + m.timing.Jitter*g.Float64()
		at = math.Max(at, lastAt)
		lastAt = at
		digit := m.digits[scale]
		r := record.Reading{Role: m.role, Meter: m.meter, At: at, Unit: "V", Digit: record.Known(digit)}
		n := math.Round(x/digit + m.noise*g.NormFloat64())
		switch {
		case n > m.counts && scale+1 < len(m.digits):
			scale, lost = scale+1, 2
			r.State = record.Overload
		case n > m.counts:
			r.State = record.Overload
		default:
			if scale > 0 && n < 0.09*m.counts {
				scale, lost = scale-1, 2
			}
			r.Value = record.Known(rounded(n*digit, digit))
		}
		r.Raw = fmt.Appendf(nil, "%s %s", r.Value, r.State)
		s.truth[m.role] = append(s.truth[m.role], [2]float64{at, t})
		s.readings = append(s.readings, r)
	}
}

// readAt is the true instant of the conversion of the pace that gave the point, for
// interpolated points.
func (s *simulation) readAt(p Point) float64 {
	t := s.pairing.Timing[Current]
	want := p.At + t.Processing + t.Integration/2 + t.Lag + t.Jitter/2
	truth := s.truth[Current]
	i, _ := slices.BinarySearchFunc(truth, want-1e-9, func(x [2]float64, at float64) int { return cmp.Compare(x[0], at) })
	if i == len(truth) || truth[i][0] > want+1e-9 {
		return math.NaN()
	}
	return truth[i][1]
}
