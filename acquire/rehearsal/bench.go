package rehearsal

import (
	"cmp"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"slices"
	"strings"

	"gatesill/acquire/port"
)

// Bench is the simulation, in a time of the lines that its caller counts in seconds
// from 0. It is not safe for use by several goroutines.
type Bench struct {
	c      Config
	now    float64
	world  world
	list   []*instrument          // in the order of the configuration, supplies last
	wire   map[string]string      // line of an instrument -> line that it is plugged into
	unplug map[string]float64     // line -> until when it is unplugged
	swaps  []swap                 // that come back by themselves
	rng    *rand.Rand             // of the hand
	logs   map[string]io.Writer   // by what the supply drives
	stamp  func(at float64) int64 // for the logs
}

type swap struct {
	a, b  string
	until float64
}

// maxAmps and maxVolts are what the simulated supplies can do.
var (
	maxAmps  = map[string]float64{"gate": 1, "drain": 5}
	maxVolts = map[string]float64{"gate": 30, "drain": 60}
)

// NewBench builds a bench. Errors wrap [ErrConfig].
func NewBench(c Config) (*Bench, error) {
	if err := c.check(); err != nil {
		return nil, err
	}
	b := &Bench{
		c: c, wire: map[string]string{}, unplug: map[string]float64{}, logs: map[string]io.Writer{},
		rng:   rand.New(rand.NewPCG(c.Seed, 1)),
		stamp: func(at float64) int64 { return int64(at * 1e9) },
	}
	b.world = world{c: &b.c, speed: cmp.Or(c.Speed, 1)}
	for k, m := range c.Meters {
		// Every channel draws its noise from a source of its own, so that a longer
		// look at one meter does not change what another one shows.
		ch := newChannel(m, rand.New(rand.NewPCG(c.Seed, 100+uint64(k))))
		if m.Role == "current" {
			b.world.burden = m.Burden
		}
		if i := b.at(m.lineName()); i != nil {
			i.channels = append(i.channels, ch)
			continue
		}
		if err := b.meter(ch, k); err != nil {
			return nil, err
		}
	}
	for _, i := range b.list {
		if err := i.format.check(i.channels); err != nil {
			return nil, err
		}
	}
	for k, drives := range c.Supplies {
		b.supply(drives, k)
	}
	for _, i := range b.list {
		b.wire[i.line] = i.line
	}
	return b, nil
}

func (b *Bench) meter(ch *channel, k int) error {
	f, err := framesOf(ch.Meter)
	if err != nil {
		return err
	}
	i := &instrument{line: ch.lineName(), channels: []*channel{ch}, format: f, rng: rand.New(rand.NewPCG(b.c.Seed, 200+uint64(k)))}
	if ch.Paced {
		s, err := port.ParseSettings(cmp.Or(ch.Settings, f.settings))
		if err != nil {
			return fmt.Errorf("%w: meter %s: %w", ErrConfig, ch.Role, err)
		}
		i.byteTime = s.ByteTime()
	}
	_, cycle := ch.conversion()
	i.start = cycle * i.rng.Float64() // meters are not in step
	if f.scpi {
		i.start = math.Inf(1)
		i.console = &console{name: "simulated " + ch.Role + " meter", latency: b.latency(), do: i.do}
	}
	b.list = append(b.list, i)
	return nil
}

func (b *Bench) latency() float64 { return cmp.Or(b.c.Latency, 0.002) }

func (b *Bench) supply(drives string, k int) {
	rise := cmp.Or(b.c.Settle, 0.005)
	s := &supply{
		output: &output{rise: rise, fall: cmp.Or(b.c.Decay, rise), holds: drives == "gate" && b.c.Bleed == 0},
		drives: drives, world: &b.world, most: maxVolts[drives], mostAmps: maxAmps[drives],
		rng: rand.New(rand.NewPCG(b.c.Seed, 300+uint64(k))),
	}
	s.stamp = func(at float64) int64 { return b.stamp(at) }
	s.reset(0)
	s.console = console{name: "simulated " + drives + " supply", latency: b.latency(), do: s.do, heard: s.heard}
	if drives == "gate" {
		b.world.gate = s.output
	} else {
		b.world.drain = s.output
	}
	b.list = append(b.list, &instrument{line: "supply-" + drives, supply: s, console: &s.console, start: math.Inf(1), rng: rand.New(rand.NewPCG(b.c.Seed, 400+uint64(k)))})
}

// Log sends the log of the supply that drives gate or drain to w, one [Heard] a
// line; stamp turns a time of the lines into Unix nanoseconds.
func (b *Bench) Log(drives string, w io.Writer, stamp func(at float64) int64) {
	b.stamp = stamp
	if i := b.at("supply-" + drives); i != nil {
		i.supply.log = w
	}
}

// at is the instrument that was built on a line.
func (b *Bench) at(line string) *instrument {
	for _, i := range b.list {
		if i.line == line {
			return i
		}
	}
	return nil
}

// Lines are the names of the lines, meters first.
func (b *Bench) Lines() []string {
	var out []string
	for _, i := range b.list {
		out = append(out, i.line)
	}
	return out
}

// Next is when something is next to be sent or becomes due, s; +Inf when nothing is
// until something is heard.
func (b *Bench) Next() float64 {
	t := math.Inf(1)
	for _, i := range b.list {
		if len(i.out) > 0 {
			t = min(t, i.out[0].At)
		}
		t = min(t, i.next(b.now))
	}
	return t
}

// Step goes on to time t and gives what the instruments have sent until then, in the
// order of its sending. A time that has passed changes nothing.
func (b *Bench) Step(t float64) []Sent {
	for b.now < t {
		b.segment(t)
	}
	var sent []Sent
	for _, i := range b.list {
		n := 0
		for n < len(i.out) && i.out[n].At <= t {
			n++
		}
		for _, s := range i.out[:n] {
			if s.Line = b.plugged(i.line, s.At); s.At >= b.unplug[s.Line] {
				sent = append(sent, s)
			}
		}
		i.out = i.out[:copy(i.out, i.out[n:])]
	}
	slices.SortStableFunc(sent, func(a, b Sent) int { return cmp.Compare(a.At, b.At) })
	return sent
}

// segment goes on towards t, at most to the next instant at which something begins
// or ends.
func (b *Bench) segment(t float64) {
	end := min(t, b.now+b.world.longest())
	active := false
	for _, i := range b.list {
		if n := i.next(b.now); n > b.now {
			end = min(end, n)
		}
		active = active || i.active(b.now)
	}
	h := end - b.now
	if active || b.world.dev != nil {
		mid := b.world.pass(b.now, h)
		for _, i := range b.list {
			if i.active(b.now) {
				for _, c := range i.channels {
					c.sum += mid.of(c.Role) * h
				}
			}
		}
	}
	b.now = end
	for _, i := range b.list {
		i.work(end)
	}
}

// Hear gives an instrument the bytes that came in on a line by now.
func (b *Bench) Hear(line string, bytes []byte) {
	for _, i := range b.list {
		if b.plugged(i.line, b.now) == line && b.now >= b.unplug[line] {
			i.hear(bytes, b.now)
		}
	}
}

// plugged is the line that an instrument is plugged into.
func (b *Bench) plugged(line string, t float64) string {
	for k := 0; k < len(b.swaps); k++ {
		if s := b.swaps[k]; t >= s.until {
			b.exchange(s.a, s.b)
			b.swaps = slices.Delete(b.swaps, k, k+1)
			k--
		}
	}
	return b.wire[line]
}

func (b *Bench) exchange(x, y string) { b.wire[x], b.wire[y] = b.wire[y], b.wire[x] }

// Insert puts a device of the configuration, cold, into the fixture.
func (b *Bench) Insert(name string) error {
	d, err := b.c.device(name)
	if err != nil {
		return err
	}
	b.world.insert(d)
	return nil
}

// Remove takes the device out.
func (b *Bench) Remove() { b.world.insert(nil) }

// Knob turns the gate knob to v at a mean rate in V/s; 0 is at once.
func (b *Bench) Knob(v, rate float64) error {
	if b.world.gate != nil {
		return fmt.Errorf("%w: the gate is driven by its supply, there is no knob", ErrConfig)
	}
	if math.IsNaN(v) || math.IsInf(v, 0) || !(rate >= 0) || math.IsInf(rate, 0) {
		return fmt.Errorf("%w: knob to %g V at %g V/s", ErrConfig, v, rate)
	}
	w := &b.world
	t := b.now * w.speed
	w.knob = turn{from: w.knob.at(t), to: v, rate: rate, since: t, tremor: min(b.c.Tremor, 0.95)}
	for k, hertz := range [2]float64{0.7, 2.5} { // slow inattention and a quick hand; invented
		w.knob.freq[k] = 2 * math.Pi * hertz * (0.7 + 0.6*b.rng.Float64())
		w.knob.phase[k] = 2 * math.Pi * b.rng.Float64()
	}
	return nil
}

// Truth is what is so now.
func (b *Bench) Truth() Truth { return b.world.at(b.now) }

// find gives the instrument and the channel that a fault names, by role or line.
func (b *Bench) find(name string) (*instrument, *channel, error) {
	for _, i := range b.list {
		if i.line == name {
			if i.supply != nil {
				return i, nil, nil
			}
			return i, i.channels[0], nil
		}
		for _, c := range i.channels {
			if c.Role == name {
				return i, c, nil
			}
		}
	}
	return nil, nil, fmt.Errorf("%w: nothing called %q; there are %s", ErrConfig, name, strings.Join(b.Lines(), ", "))
}
