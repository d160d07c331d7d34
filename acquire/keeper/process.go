package keeper

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"time"

	"gatesill/acquire/port"
)

// Main is the keeper's process. Its first line in is the [Config]; it ends after bye,
// after the end of its input, or when it could not start. It gives 0 when the off
// state was reached and confirmed, 1 when it was not, 2 when nothing was driven.
func Main(stdin io.Reader, stdout io.Writer) int {
	ignoreSignals()
	return serve(stdin, stdout, openPort, usual)
}

func openPort(address, settings string) (port.Conn, error) {
	s, err := port.ParseSettings(settings)
	if err != nil {
		return nil, err
	}
	return port.Open(address, s)
}

const (
	orderLimit = 8 * time.Second        // of one order; each of its queries has its own, shorter one
	flushLimit = 300 * time.Millisecond // the last answers go out, if anyone listens
)

type keeper struct {
	cfg   Config
	lim   limits
	log   *journal
	gate  *outlet
	drain *outlet // nil: cannot be switched
	alarm *alarm
	out   chan answer

	off      *OffReport // not nil: in the off state
	answered int        // the order that the way off answered
	driving  bool       // an output may be on
	set      float64    // gate voltage asked for
	read     float64    // and read back
	drainOn  bool
}

func serve(stdin io.Reader, stdout io.Writer, open opener, lim limits) int {
	out := make(chan answer, 64)
	sent := make(chan struct{})
	go func() {
		defer close(sent)
		e := json.NewEncoder(stdout)
		for a := range out {
			if e.Encode(a) != nil {
				for range out { // nobody listens any more
				}
			}
		}
	}()
	code := converse(stdin, out, open, lim)
	close(out)
	select {
	case <-sent:
	case <-time.After(flushLimit):
	}
	return code
}

// tell never waits: a measuring program that hangs does not read.
func (k *keeper) tell(a answer) {
	k.log.note("answer %d: error %q", a.ID, a.Error)
	select {
	case k.out <- a:
	default:
	}
}

func converse(stdin io.Reader, out chan answer, open opener, lim limits) (code int) {
	k := &keeper{lim: lim, out: out, set: math.NaN(), read: math.NaN()}
	in := bufio.NewScanner(stdin)
	in.Buffer(make([]byte, 4096), longestLine)
	refuse := func(err error) int {
		a := answer{Off: k.off}
		a.fail(err)
		k.tell(a)
		return 2
	}
	if !in.Scan() {
		return refuse(fmt.Errorf("%w: nothing was said", ErrConfig))
	}
	if err := parseStrict(in.Bytes(), &k.cfg); err != nil {
		return refuse(fmt.Errorf("%w: %w", ErrConfig, err))
	}
	if err := k.cfg.Check(); err != nil {
		return refuse(err)
	}
	var err error
	if k.log, err = openJournal(k.cfg.Log); err != nil {
		return refuse(err)
	}
	defer k.log.close()
	k.connect(open)

	k.alarm = newAlarm(k.cfg.beatLimit())
	orders := make(chan order, 64)
	go k.alarm.listen(in, orders)

	defer func() { // whatever is wrong here, the way off is tried once more
		if p := recover(); p != nil {
			k.log.note("fault of the keeper: %v", p)
			k.goOff(cause{reason: fmt.Sprintf("fault of the keeper: %v", p), at: time.Now()})
			code = 1
		}
	}()
	if err := k.start(); err != nil {
		c, raised := k.alarm.cause()
		if !raised {
			c = cause{reason: err.Error(), at: time.Now()}
		}
		if k.driving {
			r := k.goOff(c)
			k.off = &r
		}
		refuse(fmt.Errorf("%w: %w", ErrConfig, err))
		if k.off != nil && !k.off.Reached {
			return 1
		}
		return 2
	}
	k.tell(answer{V: finite(k.read)})
	k.alarm.watch()
	k.keep(orders)
	if !k.off.Reached {
		return 1
	}
	return 0
}

// connect makes the outlets; two of one instrument share its line.
func (k *keeper) connect(open opener) {
	outletOf := func(s Supply, l *line) *outlet {
		cmd, _ := commandsOf(s) // Check has looked at the error
		if l == nil || l.address != s.Address {
			l = &line{address: s.Address, settings: s.Settings, open: open, log: k.log}
		}
		return &outlet{Supply: s, cmd: cmd, line: l, lim: k.lim}
	}
	k.gate = outletOf(k.cfg.Gate, nil)
	if k.cfg.Drain != nil {
		k.drain = outletOf(*k.cfg.Drain, k.gate.line)
	}
}

// run holds a conversation that an alarm breaks off.
func (k *keeper) run(o *outlet, f func(*talk) (float64, error)) (float64, error) {
	v, err := o.line.do(orderLimit, k.alarm.raised, f)
	if errors.Is(err, errStopped) {
		o.line.setLeftover(true)
	}
	return v, err
}

// start brings both outputs from whatever the last user left to known set-points: the
// gate on at its off voltage, the drain off.
func (k *keeper) start() error {
	both := []*outlet{k.gate}
	if k.drain != nil {
		both = []*outlet{k.drain, k.gate} // the drain is switched off first
	}
	for _, o := range both {
		if _, err := k.run(o, o.identify); err != nil {
			return err
		}
	}
	k.driving = true
	for _, o := range both {
		f := o.shut
		if o == k.gate {
			f = k.lead
		}
		if _, err := k.run(o, f); err != nil {
			return err
		}
	}
	for _, o := range both {
		v := k.cfg.OffVoltage
		if o == k.drain {
			v = k.drain.Voltage
		}
		if _, err := k.run(o, func(t *talk) (float64, error) { return o.prepare(t, v) }); err != nil {
			return err
		}
	}
	v, err := k.run(k.gate, func(t *talk) (float64, error) { return k.gate.raise(t, k.cfg.OffVoltage) })
	k.set, k.read = k.cfg.OffVoltage, v
	return err
}

// lead shuts the gate's output. One that was left on is led to the off voltage first,
// as an opened gate keeps its charge. A supply that cannot will say so once more when
// it is prepared.
func (k *keeper) lead(t *talk) (float64, error) {
	setting, err := k.gate.setting(k.cfg.OffVoltage)
	if err != nil {
		return 0, fmt.Errorf("%w: %s: %w", ErrConfig, k.gate, err)
	}
	off, can, err := k.gate.isOff(t, k.lim.reply)
	if err != nil {
		return 0, err
	}
	if !off || !can {
		if err := k.gate.order(t, "set", setting); err != nil && !errors.Is(err, ErrRefused) {
			return 0, err
		}
	}
	return k.gate.shut(t)
}

// keep follows orders until bye or the end of the input. It returns in the off state.
func (k *keeper) keep(orders <-chan order) {
	poll := time.NewTimer(k.lim.poll)
	defer poll.Stop()
	for {
		raised := k.alarm.raised
		if k.off != nil {
			raised = nil
		}
		select {
		case <-raised:
			k.leave()
		case o, open := <-orders:
			if !open {
				if k.off == nil { // the end of the input has raised the alarm
					k.leave()
				}
				return
			}
			if k.follow(o) {
				return
			}
		case <-poll.C:
			k.poll()
		}
		poll.Reset(k.lim.poll)
	}
}

// follow does one order, an alarm before it, and tells whether it was the last.
func (k *keeper) follow(o order) (last bool) {
	if _, raised := k.alarm.cause(); raised && k.off == nil {
		k.leave()
	}
	if o.ID != k.answered { // an order to go off is also the alarm, and was answered as that
		k.obey(o)
	}
	return o.Do == doBye
}

// leave goes to the off state for the cause that raised the alarm, and says so.
func (k *keeper) leave() {
	c, _ := k.alarm.cause()
	k.alarm.unwatch()
	r := k.goOff(c)
	k.off = &r
	k.answered = c.order
	k.tell(answer{ID: c.order, V: finite(k.read), Off: k.off})
}

func finite(v float64) *float64 {
	if math.IsNaN(v) {
		return nil
	}
	return &v
}

// obey does one order and answers it.
func (k *keeper) obey(o order) {
	if o.Do != doStatus {
		defer k.alarm.heard(-1)
	}
	a := answer{ID: o.ID}
	var err error
	switch {
	case o.Do == doStatus:
	case k.off == nil && o.Do == doGate:
		err = k.setGate(o.V)
	case k.off == nil && o.Do == doDrain:
		err = k.setDrain(o.On)
	case o.Do == doOff || o.Do == doBye:
		k.offAgain(o)
	default:
		err = fmt.Errorf("%w (%s)", ErrOff, k.off.Reason)
	}
	if errors.Is(err, errStopped) {
		err = fmt.Errorf("%w: %w", ErrOff, err)
	}
	a.fail(err)
	a.V, a.Drain, a.Off = finite(k.read), k.drainOn, k.off
	k.tell(a)
}

func (k *keeper) setGate(v float64) error {
	if !(math.Abs(v) <= k.cfg.MaxVgs) {
		return fmt.Errorf("%w: %g V, and at most %g V is allowed", ErrTooHigh, v, k.cfg.MaxVgs)
	}
	setting, err := k.gate.setting(v)
	if err != nil {
		return fmt.Errorf("%w: %w", ErrTooHigh, err)
	}
	if sent, err := k.gate.cmd.sent("set", setting); err != nil || math.Abs(sent) > k.cfg.MaxVgs+1e-6 {
		return fmt.Errorf("%w: %g V would be sent as %g V, and at most %g V is allowed", ErrTooHigh, setting, sent, k.cfg.MaxVgs)
	}
	before := k.set
	k.set = v
	got, err := k.run(k.gate, func(t *talk) (float64, error) { return k.gate.move(t, v) })
	if errors.Is(err, ErrRefused) {
		k.set = before // which the next poll proves
	} else {
		k.read = got
	}
	k.judge(err)
	return err
}

func (k *keeper) setDrain(on bool) error {
	if k.drain == nil {
		return fmt.Errorf("%w: the drain supply %s", ErrRefused, drainFixed)
	}
	if on && !near(k.read, k.cfg.OffVoltage) {
		return fmt.Errorf("%w: the drain is switched on only with the gate at its off voltage, %g V", ErrRefused, k.cfg.OffVoltage)
	}
	_, err := k.run(k.drain, func(t *talk) (float64, error) {
		if !on {
			return k.drain.shut(t)
		}
		k.drainOn = true // from here on it may be
		return k.drain.raise(t, k.drain.Voltage)
	})
	if err == nil {
		k.drainOn = on
	}
	k.judge(err)
	return err
}

// judge raises the alarm for an order that leaves it open what the output does. After
// a command that the supply refused it does what it did: the measuring program decides.
func (k *keeper) judge(err error) {
	if err == nil || errors.Is(err, errStopped) || errors.Is(err, ErrRefused) {
		return
	}
	k.alarm.raise(cause{reason: err.Error(), at: time.Now(), order: unasked})
}

// poll sees whether the supplies are still there and the gate where it was set.
func (k *keeper) poll() {
	if k.off != nil {
		return
	}
	v, err := k.run(k.gate, func(t *talk) (float64, error) { return k.gate.settle(t, k.set, k.lim.settle/2) })
	if err == nil || errors.Is(err, ErrReadBack) {
		k.read = v
	}
	if err == nil && k.drain != nil {
		_, err = k.run(k.drain, func(t *talk) (float64, error) { return k.drain.read(t, k.lim.reply) })
	}
	k.judge(err)
}
