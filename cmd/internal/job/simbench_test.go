package job

import (
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/port"
	"gatesill/acquire/rehearsal"
	"gatesill/store/record"
)

// simBench is a simulated bench in simulated time, and the program's own way from its
// bytes to points: the handlers of acquire.Listen, the sweeper's plan, the runner.
type simBench struct {
	t     *testing.T
	b     *rehearsal.Bench
	w     *sweeper
	lines map[string]*simLine
	order []string // of the lines, so that a run repeats
	start time.Time
	now   float64 // s
	queue []rehearsal.Sent
	heard []acquire.Event // not yet handed on

	aim     float64                          // V, of the hand; NaN none
	turning float64                          // V/s
	rate    func(h acquire.Hand) (v float64) // V/s of the hand
}

// simLine is the far end of a line for its handler.
type simLine struct {
	b       *rehearsal.Bench
	name    string
	at      time.Duration // a byte
	handler port.Handler
}

func (l *simLine) Read([]byte) (int, error)    { return 0, nil }
func (l *simLine) Write(p []byte) (int, error) { l.b.Hear(l.name, p); return len(p), nil }
func (l *simLine) Discard() error              { return nil }
func (l *simLine) DiscardOutput() error        { return nil }
func (l *simLine) Close() error                { return nil }
func (l *simLine) ByteTime() time.Duration     { return l.at }
func (l *simLine) Address() string             { return l.name }

// simTick is how often the program's loop tells that time passes.
var simTick = tickEvery.Seconds()

// newSimBench builds the bench and the sweeper that works at it, for a part with those
// test and idle currents.
func newSimBench(t *testing.T, c rehearsal.Config, mode acquire.Mode, test, idle float64) *simBench {
	t.Helper()
	b, err := rehearsal.NewBench(c)
	require.NoError(t, err)
	text, err := b.Describe(func(line string) string { return "/simulated/" + line })
	require.NoError(t, err)
	file, err := bench.Parse([]byte(text))
	require.NoError(t, err)
	part := record.NewPart("GX-30")
	part.TestCurrent, part.IdleCurrent = record.Known(test), record.Known(idle)
	given := merge(record.Condition{Temp: record.Known(25), TempOf: "ambient"}, file.Given)
	w := &sweeper{
		sitting: &sitting{env: &Env{Out: io.Discard, Err: io.Discard, Quiet: true}, bench: file, given: given, part: part, lot: record.Lot{Name: "simulated"}, meters: shownRanges{}},
		rq:      SweepRequest{Mode: mode}, last: map[string]heardLast{}, scale: map[string]float64{}, swap: map[string]string{},
	}
	require.NoError(t, w.prepare())
	s := &simBench{t: t, b: b, w: w, lines: map[string]*simLine{}, start: time.Unix(0, 0), aim: math.NaN(),
		rate: func(h acquire.Hand) float64 { return h.Rate }}
	for _, src := range Sources(file) {
		src.Setup = nil // a conversation that waits in real time
		settings, err := port.ParseSettings(src.Settings)
		require.NoError(t, err)
		h, err := acquire.Handler(src, s.start, func(e acquire.Event) { s.heard = append(s.heard, e) })
		require.NoError(t, err)
		name := src.Address[len("/simulated/"):]
		l := &simLine{b: b, name: name, handler: h}
		if c.Meters[0].Paced {
			l.at = settings.ByteTime()
		}
		s.lines[name] = l
		s.order = append(s.order, name)
		require.NoError(t, h.Opened(l, s.start))
	}
	return s
}

func (s *simBench) clock(at float64) time.Time {
	return s.start.Add(time.Duration(at * float64(time.Second)))
}

// run lets time pass until over says so, at most for so many seconds; each gets the
// events, tick is called as the program's loop would be.
func (s *simBench) run(seconds float64, each func(acquire.Event), tick func(at float64), over func() bool) bool {
	s.t.Helper()
	for end := s.now + seconds; s.now < end; {
		if over() {
			return true
		}
		next := (math.Floor(s.now/simTick+1e-9) + 1) * simTick
		ticks := true
		at := math.Min(s.b.Next(), s.arrival())
		if at < next && at > s.now {
			next, ticks = at, false
		}
		s.now = next
		for _, sent := range s.b.Step(s.now) {
			sent.At += float64(len(sent.Bytes)) * sent.ByteTime.Seconds() // the last byte is there
			s.queue = append(s.queue, sent)
		}
		slices.SortStableFunc(s.queue, func(a, b rehearsal.Sent) int {
			switch {
			case a.At < b.At:
				return -1
			case a.At > b.At:
				return 1
			}
			return 0
		})
		n := 0
		for ; n < len(s.queue) && s.queue[n].At <= s.now; n++ {
			sent := s.queue[n]
			if l := s.lines[sent.Line]; l != nil {
				require.NoError(s.t, l.handler.Bytes(l, sent.Bytes, s.clock(sent.At)))
			}
		}
		s.queue = s.queue[:copy(s.queue, s.queue[n:])]
		if ticks {
			for _, name := range s.order {
				l := s.lines[name]
				require.NoError(s.t, l.handler.Idle(l, s.clock(s.now)))
			}
		}
		heard := s.heard
		s.heard = nil
		for _, e := range heard {
			require.NoError(s.t, e.Err, "%+v", e)
			s.w.resolve(e)
			for _, r := range e.Readings {
				s.w.meters.note(r)
			}
			each(e)
		}
		if ticks {
			tick(s.now)
		}
	}
	return over()
}

// arrival is when the next bytes are there, s.
func (s *simBench) arrival() float64 {
	if len(s.queue) == 0 {
		return math.Inf(1)
	}
	return s.queue[0].At
}

// idle lets time pass with nobody at the bench.
func (s *simBench) idle(seconds float64) {
	s.run(seconds, func(acquire.Event) {}, func(float64) {}, func() bool { return false })
}

// command gives a supply an order, as the keeper would after its checks.
func (s *simBench) command(drives, format string, args ...any) {
	s.b.Hear("supply-"+drives, fmt.Appendf(nil, format+"\n", args...))
}

// turn lets the hand do what it is asked for.
func (s *simBench) turn(h acquire.Hand) {
	rate := s.rate(h)
	if math.IsNaN(h.To) {
		if math.IsNaN(s.aim) {
			return
		}
		s.aim = math.NaN()
		require.NoError(s.t, s.b.Knob(s.b.Truth().Vg, 0))
		return
	}
	if h.To == s.aim && h.Rate == s.turning {
		return
	}
	s.aim, s.turning = h.To, h.Rate
	require.NoError(s.t, s.b.Knob(h.To, rate))
}

// sweep measures a device as the sweep verb would, and gives its sealed sweep.
func (s *simBench) sweep(device string, pairing func(*acquire.Pairing)) (record.Sweep, acquire.Done) {
	s.t.Helper()
	plan := s.w.plan()
	plan.Pairs = func() acquire.Pairs {
		p := s.w.pairing()
		if pairing != nil {
			pairing(&p)
		}
		return acquire.NewPairer(p)
	}
	if plan.DrivesGate {
		s.command("drain", "OUTP OFF")
		s.command("drain", "VOLT %g", s.w.given.VDD.Float())
		s.command("gate", "VOLT 0;OUTP ON")
	} else {
		s.aim = math.NaN()
		require.NoError(s.t, s.b.Knob(0, 0))
	}
	s.b.Remove()
	s.idle(2)
	require.NoError(s.t, s.b.Insert(device))
	r, err := acquire.NewRunner(plan)
	require.NoError(s.t, err)
	var done *acquire.Done
	obey := func(orders []acquire.Order) {
		for _, o := range orders {
			switch o := o.(type) {
			case acquire.SetGate:
				s.command("gate", "VOLT %.4f", o.V)
			case acquire.SwitchDrain:
				state := "OFF"
				if o.On {
					state = "ON"
				}
				s.command("drain", "OUTP %s", state)
			case acquire.Off:
				s.command("drain", "OUTP OFF")
				s.command("gate", "VOLT 0")
			case acquire.Done:
				done = &o
			}
		}
	}
	ok := s.run(1200, func(e acquire.Event) { obey(r.Event(e)) }, func(at float64) {
		obey(r.Tick(at))
		if !plan.DrivesGate {
			s.turn(r.Hand())
		}
	}, func() bool { return done != nil })
	require.True(s.t, ok, "device %s: not over; %s", device, r.View(s.now).Instruction)
	points, returned := r.Points(), r.View(s.now).Returned
	sw := record.Sweep{Direction: record.Up, Condition: s.w.given, Instruments: s.w.instruments()}
	fillSweep(&sw, points, returned)
	return sw, *done
}

// drawnDevices are n devices with the spread of an ordinary lot; warm lets them heat
// themselves up.
func drawnDevices(seed uint64, n int, warm bool) []rehearsal.Device {
	g := rand.New(rand.NewPCG(seed, 77))
	var out []rehearsal.Device
	for i := range n {
		d := rehearsal.Device{
			Name: fmt.Sprintf("T%d", i+1), Vt: 2.92 + 0.055*g.NormFloat64(), Beta: 3.4 * (1 + 0.04*g.NormFloat64()),
			N: 1.6 * (1 + 0.03*g.NormFloat64()), Theta: 0.12 * (1 + 0.15*g.NormFloat64()), Lambda: 0.008,
		}
		if warm {
			d.Kappa, d.Alpha, d.Rth, d.Tau = 4e-3, 1.8, 2, 20
		}
		out = append(out, d)
	}
	return out
}
