package acquire

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gatesill/store/record"
)

// simDevice is a device for tests: an interpolation between the exponential and the
// square law that holds on both sides of saturation (the EKV form), with one
// thermal time constant. All in the direction that turns on.
type simDevice struct {
	vt, beta, n float64 // V, A/V^2, 1
	leak        float64 // A
	kappa       float64 // V/K, fall of vt
	rth, tau    float64 // K/W, s
	shorted     bool
	warm        float64 // K
}

// at gives the drain current at u with vds across the device.
func (d *simDevice) at(u, vds float64) float64 {
	const ut = 0.02585
	vt := d.vt - d.kappa*d.warm
	is := 2 * d.n * d.beta * ut * ut
	f := func(x float64) float64 {
		x /= 2 * d.n * ut
		l := x
		if x < 30 {
			l = math.Log1p(math.Exp(x))
		}
		return l * l
	}
	return is*(f(u-vt)-f(u-vt-d.n*vds)) + d.leak
}

// handMeter is one meter: it samples at its cycle and speaks after its lag.
type handMeter struct {
	role    string
	digit   float64
	cycle   float64
	lag     float64
	noise   float64 // digits
	top     float64 // above: overload
	next    float64
	dead    bool // says nothing any more
	held    bool // says hold
	frozen  bool // repeats its last number without saying so
	last    float64
	factor  float64
	garbage bool
	pending []record.Reading
}

// sim is a bench in simulated time.
type sim struct {
	t        *testing.T
	fail     func(format string, a ...any)
	r        *Runner
	plan     Plan
	dev      *simDevice
	vdd, rl  float64
	circuit  record.Circuit
	meters   []*handMeter
	rng      *rand.Rand
	now      float64
	sign     float64
	u        float64 // gate, in the direction that turns on
	set      float64 // where the supply or the hand wants it
	rate     float64 // V/s of the hand
	supply   float64 // V, drain supply now
	drainOn  bool
	open     bool // the gate supply does not follow
	hand     bool
	stopTurn float64
	lookAt   float64

	solvedFor [5]float64
	id, vds   float64

	seen   View
	tickAt float64

	orders   []Order
	times    []float64
	readings []record.Reading
	said     []string
	taken    []Taken
	done     *Done
	off      []Off
	offAt    float64
	maxID    float64
	maxPD    float64
	each     func(s *sim)
}

func newSim(t *testing.T, p Plan, d *simDevice) *sim {
	t.Helper()
	s := &sim{t: t, fail: t.Fatalf, plan: p, dev: d, vdd: math.Abs(p.Circuit.VDD.Or(12)), rl: p.Circuit.RL.Or(5), circuit: p.Circuit.Circuit, sign: p.Sign(),
		rng: rand.New(rand.NewPCG(7, 11)), rate: 0.15, hand: p.Mode == ByHand || p.Mode == Free || p.Mode == AtSpot && !p.DrivesGate}
	cycles := map[string]float64{Gate: 0.30, Current: 0.25, Load: 0.35, Drain: 0.40, Supply: 0.5, Temperature: 1}
	digits := map[string]float64{Gate: 1e-3, Current: 1e-5, Load: 1e-3, Drain: 1e-2, Supply: 1e-2, Temperature: 0.1}
	for i, role := range p.Roles {
		s.meters = append(s.meters, &handMeter{role: role, digit: digits[role], cycle: cycles[role], lag: 0.1, noise: 0.3, top: math.Inf(1), next: 0.03 * float64(i+1), factor: 1})
	}
	s.u = s.sign * p.Off()
	s.set = s.u
	s.drainOn = !p.DrivesDrain
	return s
}

func (s *sim) start() *sim {
	s.t.Helper()
	r, err := NewRunner(s.plan)
	if err != nil {
		s.fail("runner: %v", err)
	}
	s.r = r
	return s
}

func (s *sim) meter(role string) *handMeter {
	for _, m := range s.meters {
		if m.role == role {
			return m
		}
	}
	s.fail("no %s meter", role)
	return nil
}

// solve gives drain current and voltage now.
func (s *sim) solve() (id, vds float64) {
	key := [5]float64{math.Round(s.u * 1e6), math.Round(s.supply * 1e5), math.Round(s.dev.warm * 1e4), s.dev.vt, 0}
	if s.dev.shorted {
		key[4] = 1
	}
	if key != s.solvedFor || s.circuit == record.Diode {
		s.solvedFor = key
		s.id, s.vds = s.solveNow()
	}
	return s.id, s.vds
}

func (s *sim) solveNow() (id, vds float64) {
	if s.supply <= 0.01 {
		return 0, 0
	}
	if s.dev.shorted {
		return s.supply / s.rl, 0
	}
	if s.circuit == record.Diode {
		// gate and drain tied: u follows
		lo, hi := 0.0, s.supply
		for range 20 { // to some 15 uV, far below what a meter shows
			m := (lo + hi) / 2
			if s.dev.at(m, m) < (s.supply-m)/s.rl {
				lo = m
			} else {
				hi = m
			}
		}
		s.u = lo
		return s.dev.at(lo, lo), lo
	}
	if s.circuit == record.Fixed {
		return s.dev.at(s.u, s.supply), s.supply
	}
	lo, hi := 0.0, s.supply
	for range 20 { // to some 15 uV, far below what a meter shows
		m := (lo + hi) / 2
		if s.dev.at(s.u, m) < (s.supply-m)/s.rl {
			lo = m
		} else {
			hi = m
		}
	}
	return s.dev.at(s.u, lo), lo
}

const simStep = 0.02

// run lets the bench run until the sweep is over and its orders are carried out, at
// most for so many simulated seconds.
func (s *sim) run(seconds float64) *sim {
	s.t.Helper()
	for end := s.now + seconds; s.now < end; {
		s.step()
		if s.done != nil && (!s.plan.drives() || s.now > s.offAt+4) {
			return s
		}
	}
	return s
}

func (s *sim) step() {
	s.now += simStep
	want := 0.0
	if s.drainOn {
		want = s.vdd
	}
	s.supply += (want - s.supply) * simStep / 0.05
	if s.hand {
		s.turn()
	} else if !s.open {
		s.u += (s.set - s.u) * simStep / 0.04
	}
	id, vds := s.solve()
	p := id * vds
	if s.dev.tau > 0 {
		s.dev.warm += (p*s.dev.rth - s.dev.warm) * simStep / s.dev.tau
	}
	s.maxID, s.maxPD = math.Max(s.maxID, id), math.Max(s.maxPD, p)
	values := map[string]float64{Gate: s.sign * s.u, Current: s.sign * id, Load: s.sign * id * s.rl, Drain: s.sign * vds, Supply: s.sign * s.supply, Temperature: 25 + s.dev.warm}
	for _, m := range s.meters {
		s.sample(m, values[m.role])
	}
	if s.now >= s.tickAt {
		s.tickAt = s.now + 0.1
		s.do(s.r.Tick(s.now))
	}
	if s.each != nil {
		s.each(s)
	}
}

func (s *sim) sample(m *handMeter, x float64) {
	if s.now >= m.next {
		m.next += m.cycle
		if !m.frozen || m.last == 0 {
			m.last = math.Round(x/m.digit+m.noise*s.rng.NormFloat64()*0.5) * m.digit
		}
		rd := record.Reading{Role: m.role, Meter: m.role + "-meter", At: m.next - m.cycle + m.lag, Value: record.Known(m.last * m.factor), Unit: unitOf(m.role), Digit: record.Known(m.digit * m.factor)}
		rd.Raw = fmt.Appendf(nil, "%s %.6f", m.role, m.last)
		if math.Abs(m.last) > m.top {
			rd.Value, rd.State = record.Num{}, record.Overload
		}
		if m.held {
			rd.Refused = "held"
		}
		if !m.dead {
			m.pending = append(m.pending, rd)
		}
	}
	for len(m.pending) > 0 && m.pending[0].At <= s.now {
		rd := m.pending[0]
		m.pending = m.pending[1:]
		e := Event{At: rd.At, Line: m.role, Meter: rd.Meter, Role: rd.Role, Readings: []record.Reading{rd}}
		if m.garbage {
			e.Readings, e.Err = nil, fmt.Errorf("bad frame")
		} else {
			s.readings = append(s.readings, rd)
		}
		s.do(s.r.Event(e))
	}
}

// turn is the hand at the knob: it does what the view says.
func (s *sim) turn() {
	if s.now < s.stopTurn {
		return
	}
	if s.now >= s.lookAt { // no eye looks more often
		s.lookAt = s.now + 0.1
		s.seen = s.r.View(s.now)
	}
	v := s.seen
	switch {
	case strings.HasPrefix(v.Instruction, "stand still"), strings.HasPrefix(v.Instruction, "wait"):
		s.set = s.u
	case strings.HasPrefix(v.Instruction, "bring the current back"):
		d := 0.003
		if v.ID > s.plan.At.Float() {
			d = -d
		}
		s.set = s.u + d
		s.seen.Instruction = "" // one move a look
	case strings.Contains(v.Instruction, "off voltage"), strings.HasPrefix(v.Instruction, "stop"), strings.HasPrefix(v.Instruction, "turn the gate back"):
		s.set = s.sign * s.plan.Off()
	case !math.IsNaN(v.Target):
		if want := s.sign * v.Target; math.Abs(want-s.set) > 0.004 && math.Abs(s.u-want) > 0.003 {
			s.set = want + 0.001*s.rng.NormFloat64() // no hand is exact
		}
	case strings.HasPrefix(v.Instruction, "turn back"):
		s.set = s.u - 0.02
	case strings.HasPrefix(v.Instruction, "turn the gate slowly"):
		s.set = s.u + 0.02
	}
	rate := s.rate
	if math.IsNaN(v.Target) {
		rate = math.Min(rate, 0.03) // slowly
	}
	d := s.set - s.u
	s.u += math.Max(-rate*simStep, math.Min(rate*simStep, d))
}

// do carries orders out and checks what must hold of every sequence of them.
func (s *sim) do(orders []Order) {
	s.t.Helper()
	for _, o := range orders {
		s.orders, s.times = append(s.orders, o), append(s.times, s.now)
		switch o := o.(type) {
		case SetGate:
			if s.done != nil || len(s.off) > 0 {
				s.fail("%.2f s: gate set to %g V after the end", s.now, o.V)
			}
			if m := s.plan.Limits.Vgs; m > 0 && math.Abs(o.V) > m {
				s.fail("%.2f s: gate set to %g V, limit %g V", s.now, o.V, m)
			}
			if !s.plan.DrivesGate {
				s.fail("gate set by hand")
			}
			s.checkStep(s.sign * o.V)
			s.set = s.sign * o.V
		case SwitchDrain:
			if s.done != nil {
				s.fail("drain switched after the end")
			}
			if !s.plan.DrivesDrain {
				s.fail("drain switched without a supply")
			}
			s.drainOn = o.On
		case Say:
			s.said = append(s.said, o.Text)
		case Taken:
			s.taken = append(s.taken, o)
		case Undone:
			s.taken = s.taken[:len(s.taken)-o.N]
		case Done:
			if s.done != nil {
				s.fail("done twice: %+v, %+v", *s.done, o)
			}
			s.done = &o
			s.offAt = s.now
		case Off:
			if !s.plan.drives() {
				s.fail("off without supplies")
			}
			if s.done == nil {
				s.fail("off before done")
			}
			s.off = append(s.off, o)
			s.drainOn = s.drainOn && !s.plan.DrivesDrain
			s.set = s.sign * s.plan.Off()
		}
	}
	if s.done == nil || !s.plan.drives() {
		return
	}
	for i := len(s.orders) - 1; i >= 0; i-- { // what is said to keys afterwards is no order to a supply
		switch o := s.orders[i].(type) {
		case Say:
			continue
		case Off:
		default:
			s.fail("%.2f s: after the end the last order is %T", s.now, o)
		}
		return
	}
}

// checkStep checks that a step up was not predicted to go near a limit, all of its
// way.
func (s *sim) checkStep(u float64) {
	s.t.Helper()
	r := s.r
	here := r.sign * r.ears.of(Gate).value
	if u <= s.set || math.IsNaN(here) {
		return
	}
	predict := r.predict()
	for k := 1; k <= 10; k++ {
		at := here + (u-s.set)*float64(k)/10
		for _, share := range r.guard.expected(math.Abs(at), predict(at)) {
			most := stepShare
			if share.Name == "V_GS" {
				most = gateShare
			}
			if !(share.Of() <= most+1e-9) {
				s.fail("%.2f s: step from %.3f to %.3f V is predicted to reach %v", s.now, s.set, u, share)
			}
		}
	}
}

func (s *sim) key(k KeyName) { s.do(s.r.Key(Key{Name: k}, s.now)) }

// heard reports whether something with that text was said.
func (s *sim) heard(text string) bool {
	return strings.Contains(strings.Join(s.said, "\n"), text)
}

func (s *sim) log() {
	s.t.Helper()
	for i, o := range s.orders {
		s.t.Logf("%7.2f %T %+v", s.times[i], o, o)
	}
}

// testPlan is a sweep of an n-channel part on the bench of scenario 2: 12 V, 5 W.
func testPlan(m Mode) Plan {
	roles := []string{Gate, Current, Drain}
	timing := map[string]Timing{}
	for _, r := range []string{Gate, Current, Drain, Load, Supply} {
		timing[r] = Timing{Integration: 0, Processing: 0.1, LagU: 0.03}
	}
	p := Plan{Mode: m, Channel: record.NChannel, PartMode: record.Enhancement, Idle: record.Known(0.25),
		Limits:  Limits{Vgs: 10, Vds: 30, ID: 1, PD: 5},
		Circuit: record.Condition{Circuit: record.Load, RL: record.Known(5), VDD: record.Known(12), RLRating: record.Known(50)},
		Roles:   roles}
	p.Pairs = func() Pairs {
		sel := map[string]Timing{}
		for _, r := range p.Roles {
			sel[r] = timing[r]
		}
		return NewPairer(Pairing{Timing: sel, Free: m == Free})
	}
	if m == Driven {
		p.DrivesGate, p.DrivesDrain = true, true
	}
	return p
}

// voltageFor gives where the cold device draws that current in this circuit.
func (s *sim) voltageFor(id float64) float64 {
	lo, hi := -20.0, 20.0
	for range 80 {
		m := (lo + hi) / 2
		if s.dev.at(m, s.vdd-id*s.rl) < id {
			lo = m
		} else {
			hi = m
		}
	}
	return lo
}

func testDevice() *simDevice { return &simDevice{vt: 3.0, beta: 1.9, n: 1.4, leak: 1e-6} }
