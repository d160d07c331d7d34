package acquire

import (
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// phase is where a sweep stands.
type phase int

const (
	phStart  phase = iota // gate to the off voltage
	phPower               // drain supply on
	phClimb               // upwards, point by point; of a spot: to its current
	phSoak                // of a spot: until it has settled
	phReturn              // back to a low-power point
	phEnd                 // gate and drain supply off, current gone
	phOver
)

const (
	nearOff   = 0.2  // V from the off voltage that count as off
	noCurrent = 1e-3 // A below which a device counts as carrying none
	badFrames = 3    // frames in a row that cannot be read until a line counts as bad
	leadIn    = 0.25 // s after a driven gate was sent on: what comes sooner was measured before
	coarse    = 0.05 // V, step until current shows, and greatest step after that
	approach  = 0.25 // V, greatest step on the way to where the sweep begins
	endTime   = 5.0  // s for the current to go at the end of a driven sweep
	offTime   = 10.0 // s for the gate to reach its off voltage at the beginning
	ohmic     = 0.8  // of the greatest current of the circuit: the device is fully on
	beyond    = 1.3  // times the idle current: far enough for a fit on both sides of it
)

// Runner leads one sweep over one device. It is told what happens on the lines
// ([Runner.Event]), that time passes ([Runner.Tick], several times a second) and
// which keys are pressed ([Runner.Key]), and answers with orders. It has no clock
// and no goroutine; one goroutine at a time may use it.
//
// It moves a driven gate only while every meter is fresh and every limit is kept.
// By hand it can only say what to do. Where supplies are driven, it ends every
// sweep, good or bad, with [Off].
type Runner struct {
	plan   Plan
	sign   float64
	ears   *ears
	guard  *Guard
	prefix *PrefixCheck
	pairs  Pairs
	out    []Order

	now       float64
	begun     bool
	replaying bool
	phase     phase
	phaseAt   float64 // s, when the phase began
	paused    string  // by hand: why nothing is taken
	lostLines map[string]bool
	verdict   PrefixVerdict
	level     Level
	warnings  []string
	beep      Sound
	said      string

	points  []Point
	targets []float64 // of the points: where the gate was told to go
	curve   []Point   // what the prediction rests on
	seen    bool      // current has shown
	leaky   bool      // was said
	drainOn bool
	back    bool // the return reading was taken

	target    float64 // V in the direction that turns on: where the gate was sent last
	goal      float64 // likewise: where the next point is wanted; NaN by hand: where current shows
	window    float64 // V around goal that is near enough
	setAt     float64 // s, when the gate was sent there
	arrivedAt float64 // s, since when it is there; NaN not yet
	ripe      bool    // the fixed wait is over
	regain    bool    // back up to the last point of a sweep taken up again
	passing   bool    // the goal is not to be waited for: on the way, or coarse
	wanted    bool    // the operator wants what stands now
	offered   *Point  // a plateau that was not near enough
	cued      bool    // that current shows was said
	slowAt    float64 // s, when to turn slower was said last

	complete bool
	why      string
	offAt    float64
	offGone  bool
	soak     soak
}

// NewRunner makes a runner for a plan. Errors wrap [ErrRefused].
func NewRunner(p Plan) (*Runner, error) {
	p.fill()
	if err := p.check(); err != nil {
		return nil, err
	}
	r := &Runner{plan: p, sign: p.Sign(), lostLines: map[string]bool{}, ears: newEars(p.Cycle, p.Silent),
		guard: NewGuard(p.Limits, p.Circuit, p.Overloads), prefix: NewPrefixCheck(p.Circuit)}
	for role, f := range p.Scale {
		r.prefix.SetScale(role, f)
	}
	r.reset()
	return r, nil
}

// reset puts the sweep to its beginning.
func (r *Runner) reset() {
	r.points, r.targets, r.curve = nil, nil, nil
	r.seen, r.back, r.wanted, r.offered = false, false, false, nil
	r.goal, r.arrivedAt = math.NaN(), math.NaN()
	r.target = r.sign * r.plan.Off()
	r.soak = soak{}
	r.enter(phStart)
	r.fresh()
}

func (r *Runner) enter(p phase) { r.phase, r.phaseAt = p, r.now }

// fresh begins to look for a plateau anew.
func (r *Runner) fresh() {
	r.pairs = r.plan.Pairs()
	r.offered = nil
}

func (r *Runner) give() []Order {
	out := r.out
	r.out = nil
	if r.replaying {
		return nil
	}
	return out
}

func (r *Runner) emit(o ...Order) { r.out = append(r.out, o...) }

func (r *Runner) say(format string, a ...any) {
	r.said = fmt.Sprintf(format, a...)
	r.emit(Say{r.said})
}

func (r *Runner) sound(s Sound) {
	r.beep = s
	r.emit(Beep{s})
}

// clock moves the time on and begins the sweep at the first call.
func (r *Runner) clock(at float64) {
	r.now = math.Max(r.now, at)
	if r.begun {
		return
	}
	r.begun, r.now, r.phaseAt = true, at, at
	r.ears.begin(r.plan.Roles, at)
	if r.plan.driven() {
		r.setGate(r.sign * r.plan.Off())
	} else {
		r.say("%s", r.instruction())
	}
}

// Event tells what happened on a line.
func (r *Runner) Event(e Event) []Order {
	r.clock(e.At)
	r.beep = SoundNone
	r.ripen()
	switch {
	case e.Lost:
		r.lost(e)
	case e.Opened:
		delete(r.lostLines, e.Line)
	case e.Err != nil && len(e.Readings) == 0:
		r.bad(e)
	}
	if len(e.Readings) > 0 {
		delete(r.lostLines, e.Line)
	}
	for _, rd := range e.Readings {
		rd = r.prefix.Apply(rd)
		r.turned(rd)
		r.ears.hear(rd)
		r.guard.Add(rd)
		if !r.plan.driven() || rd.At >= r.setAt+leadIn {
			r.pairs.Add(rd)
		}
	}
	if len(e.Readings) > 0 {
		r.watch()
		r.progress()
	}
	return r.give()
}

// turned begins to look for a plateau anew when a gate turned by hand is read
// elsewhere than before: what the other meters said while it moved must not be
// averaged into the plateau that follows.
func (r *Runner) turned(rd record.Reading) {
	if rd.Role != Gate || r.plan.driven() || r.phase != phReturn && !(r.phase == phClimb && r.plan.Mode == ByHand) {
		return
	}
	before := r.ears.of(Gate)
	if x, ok := rd.Value.Get(); ok && math.Abs(x-before.value) > math.Max(0.003, 3*rd.Digit.Or(0)) {
		r.fresh()
	}
}

// Tick tells that time passes.
func (r *Runner) Tick(at float64) []Order {
	r.clock(at)
	r.ripen()
	if r.phase != phOver {
		r.silence()
		r.progress()
		r.overdue()
	}
	return r.give()
}

// progress looks whether the sweep can go on.
func (r *Runner) progress() {
	points := r.pairs.Take()
	if r.phase == phOver {
		if r.plan.drives() && !r.offGone && r.gone(r.offAt+0.2) {
			r.offGone = true
			r.emit(Off{Reason: r.why, CurrentGone: true})
		}
		return
	}
	if r.paused != "" {
		if !r.all() {
			return
		}
		r.paused = ""
		r.fresh()
		r.arrivedAt, r.ripe = math.NaN(), false
		r.say("all meters are back: %s", r.instruction())
		return
	}
	if r.verdict.Refuse && r.phase < phEnd {
		return
	}
	switch r.phase {
	case phStart:
		if r.atOff() && r.all() && !math.IsNaN(r.ears.number(Gate, r.now)) {
			r.power()
		}
	case phPower:
		if r.drainSeen() {
			r.begin()
		}
	case phClimb:
		r.climb(points)
	case phSoak:
		r.soaking(points)
	case phReturn:
		r.returning(points)
	case phEnd:
		if r.atOff() && r.gone(r.phaseAt+0.2) {
			r.finish(Done{Why: r.why, Complete: r.complete})
		}
	}
}

// overdue ends what takes too long in a driven sweep.
func (r *Runner) overdue() {
	if !r.plan.drives() || r.replaying {
		return
	}
	waited := r.now - r.phaseAt
	switch {
	case r.phase == phEnd && waited > endTime:
		r.finish(Done{Why: r.why, Complete: r.complete})
	case !r.plan.driven():
	case r.phase == phStart && waited > offTime:
		text := fmt.Sprintf("the gate does not go to its off voltage: it is sent to %s, its meter says %s", show(r.plan.Off(), "V"), show(r.ears.of(Gate).value, "V"))
		if r.atOff() {
			text = "not every meter says a number"
		}
		r.stop("gate", text)
	case r.phase == phPower && waited > offTime:
		r.stop("drain", "the drain voltage does not come: is its supply on, and its limit set?")
	case r.phase == phClimb || r.phase == phReturn || r.phase == phSoak:
		arrive := 3.0
		if t := r.ears.period(Gate); 6*t > arrive {
			arrive = 6 * t
		}
		if math.IsNaN(r.arrivedAt) && r.now-r.setAt > arrive {
			r.stop("gate", fmt.Sprintf("the gate does not follow: it is sent to %s, its meter says %s", show(r.sign*r.target, "V"), show(r.ears.of(Gate).value, "V")))
		} else if r.now-r.setAt > r.plan.Patience+r.plan.Settle.Or(0) && r.phase != phSoak || r.phase == phSoak && waited > r.plan.Patience+r.plan.Settle.Or(0) {
			r.stop("settle", "it does not settle: oscillation looks like this; a ferrite bead or a resistor at the gate may help")
		}
	}
}

// atOff reports whether the gate is read near its off voltage.
func (r *Runner) atOff() bool {
	return math.Abs(r.ears.number(Gate, r.now)-r.plan.Off()) < nearOff
}

// power switches the drain supply on, or asks for it.
func (r *Runner) power() {
	r.enter(phPower)
	r.ears.mark()
	if r.plan.DrivesDrain && !r.drainOn {
		r.emit(SwitchDrain{On: true})
	}
	r.drainOn = true
	if r.drainSeen() && !r.plan.DrivesDrain {
		r.begin()
		return
	}
	if !r.plan.DrivesDrain {
		r.say("%s", r.instruction())
	}
}

// drainSeen reports whether the drain voltage is there, as far as a meter can tell.
func (r *Runner) drainSeen() bool {
	if r.plan.DrivesDrain {
		for _, role := range r.plan.Roles {
			if role != Temperature && r.ears.of(role).count < 2 {
				return false // what came before it was switched says nothing
			}
		}
	}
	role := Supply
	switch {
	case r.plan.has(Supply):
	case r.plan.has(Drain) && r.plan.Circuit.Circuit != record.Diode:
		role = Drain
	default:
		return true
	}
	want := math.Abs(r.plan.Circuit.VDD.Else(r.plan.Circuit.VDS).Or(2)) / 2
	if math.Abs(r.ears.number(role, r.now)) > want {
		return true
	}
	return role == Drain && r.plan.has(Current) && math.Abs(r.ears.number(Current, r.now)) > noCurrent // pulled down
}

// begin starts the way up.
func (r *Runner) begin() {
	r.enter(phClimb)
	if id := r.idNow(); id > noCurrent && !r.leaky && r.plan.Circuit.Circuit != record.Diode && r.plan.has(Current) {
		r.leaky = true
		r.warn(fmt.Sprintf("it draws %s with its gate at the off voltage: leaky, shorted, wrong way round, or not at zero", show(id, "A")))
	}
	if r.plan.Mode == AtSpot {
		r.bring()
		return
	}
	if n := len(r.points); n > 0 { // taken up again: up to where it was
		r.target, r.goal = r.targets[n-1], math.NaN()
		switch {
		case r.plan.driven():
			r.target = r.sign * r.plan.Off()
			r.regain = true
			r.head(r.targets[n-1])
		case r.plan.Mode == ByHand:
			r.next()
		default:
			r.say("%s", r.instruction())
		}
		return
	}
	from := r.sign * r.plan.From.Or(r.plan.Off())
	r.window = 0.025
	if !r.plan.From.IsKnown() {
		r.window = nearOff
	}
	r.head(from)
}

// warn keeps a warning for the view and says it.
func (r *Runner) warn(text string) {
	if !slices.Contains(r.warnings, text) {
		r.warnings = append(r.warnings, text)
		r.say("%s", text)
		r.sound(SoundAttention)
	}
}

// setGate sends a driven gate to u (V, in the direction that turns on).
func (r *Runner) setGate(u float64) {
	if m := r.plan.Limits.Vgs; m > 0 {
		u = math.Max(-m, math.Min(m, u))
	}
	r.target, r.setAt, r.arrivedAt, r.ripe = u, r.now, math.NaN(), false
	r.ears.mark()
	r.fresh()
	if r.phase != phOver {
		r.emit(SetGate{r.sign * u})
	}
}
