package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/rehearsal"
	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/screen"
	"gatesill/store"
	"gatesill/store/record"
)

// SweepRequest is what the sweep verb was asked to do.
type SweepRequest struct {
	Lot     string
	Devices []string
	Bench   string // bench file
	Mode    acquire.Mode

	From, To, Step, At record.Num // V, V, V, A
	Settle             record.Num // s; unknown: until it stands still

	Rehearsal  bool
	Simulated  *rehearsal.Config // the simulated bench; nil: the standard one for the mode
	Faults     []Fault           // that the simulated bench shall have
	Given      record.Condition
	FindLag    bool   // by how much the meters lag behind the gate's, with the first device
	SkipChecks string // why the bench is not checked first; "": it is

	Operator, Fixture, Session string

	Input    lineReader                                           // stdin, where it is no terminal: typed readings
	Keyboard func() (keys <-chan rune, restore func(), err error) // nil, or no keys: no terminal
	Size     func() (width, height int)
	Raw      io.Writer // the terminal while the keyboard is in use
}

// sweeper leads a session: checks, then one device after the other.
type sweeper struct {
	*sitting
	rq      SweepRequest
	roles   []string
	limits  acquire.Limits
	events  chan acquire.Event
	keys    <-chan rune
	picture *screen.Live
	last    map[string]heardLast

	restoreKeys func()
	restored    bool
	sim         *rehearsed
	faults      faultPlan
	drive       *driver // of the device in the fixture; nil: none
	lock        *acquire.Interlock
	typed       bool                      // the readings are typed by a person
	lagged      map[string]acquire.Timing // of meters whose lag was found
	scale       map[string]float64
	swap        map[string]string // roles of the bench file whose lines are exchanged
	file        *bench.Bench      // as it was read, with nothing exchanged
	lines       []string          // what was said, newest first
	beeps       int
	trouble     error // with a meter or a supply, that ended a device
	unfinished  error // what else ended a sweep before its end
	doc         report.SweepDoc
}

// errQuit ends the session at the operator's wish.
var errQuit = errors.New("session ended by the operator")

// Sweep measures devices of a lot with the meters of a bench.
func Sweep(ctx context.Context, env *Env, rq SweepRequest) (err error) {
	w := &sweeper{rq: rq, events: make(chan acquire.Event, 4096), last: map[string]heardLast{}, scale: map[string]float64{}, swap: map[string]string{}}
	b, err := w.findBench(ctx, env)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, w.sim.close()) }()
	if err := w.storeApart(env); err != nil {
		return err
	}
	given := merge(rq.Given, b.Given)
	if w.sitting, err = env.openSitting(ctx, sittingRequest{
		Lot: rq.Lot, Bench: b, Given: given, Operator: rq.Operator, Fixture: rq.Fixture, Session: rq.Session, Ambient: ambient(given),
	}); err != nil {
		return err
	}
	defer func() {
		if cerr := w.sitting.close(); err == nil {
			err = cerr
		}
	}()
	if err := w.prepare(); err != nil {
		return err
	}
	if err := w.terminal(); err != nil {
		return err
	}
	defer w.restore() // also after a fault of the program; it has been done by then otherwise
	if err := w.goOn(w.tellCut(w.rq.Devices)); err != nil {
		return err
	}
	if w.typed {
		err = w.typedWork(ctx)
	} else {
		err = w.listening(ctx, Sources(b))
	}
	restored := w.restore()
	if errors.Is(err, errQuit) {
		err = nil
	}
	if errors.Is(err, context.Canceled) && !w.typed {
		env.talk("interrupted: what was read is kept; the same command goes on at the device that was not finished")
	}
	if terr := w.conclude(); err == nil {
		err = terr
	}
	return errors.Join(err, restored)
}

// listening does the work while the lines of the bench are listened to.
func (w *sweeper) listening(ctx context.Context, sources []acquire.Source) error {
	inner, stop := context.WithCancelCause(ctx)
	heard := make(chan struct{})
	go func() {
		defer close(heard)
		err := acquire.Listen(inner, sources, w.started, func(e acquire.Event) {
			select {
			case w.events <- e:
			case <-inner.Done():
			}
		})
		if err != nil && inner.Err() == nil { // a source that cannot be used
			stop(&Failure{Code: ExitInstrument, Err: err, Hint: "gatesill help bench-file shows every key"})
		}
	}()
	err := w.work(inner)
	if cause := context.Cause(inner); cause != nil && ctx.Err() == nil {
		err = cause
	}
	stop(nil)
	<-heard
	return err
}

// findBench reads the bench file, or starts the simulated bench.
func (w *sweeper) findBench(ctx context.Context, env *Env) (*bench.Bench, error) {
	rq := &w.rq
	if !rq.Rehearsal {
		b, err := readBench(rq.Bench)
		if err != nil {
			return nil, err
		}
		for _, text := range lapsed(b, time.Now().UTC().Format(time.DateOnly)) {
			env.warn("%s [%s]", report.Clean(text), fit.CodeOverdue)
		}
		for _, text := range b.Cautions() {
			env.warn("%s", report.Clean(text))
		}
		return b, nil
	}
	c := rq.Simulated
	if c == nil {
		kind := rehearsal.Handheld
		if rq.Mode == acquire.Driven {
			kind = rehearsal.Quick
		}
		standard, err := rehearsal.Standard(kind)
		if err != nil {
			return nil, err
		}
		c = &standard
	}
	if err := checkFaults(rq.Faults, *c); err != nil {
		return nil, err
	}
	w.faults.left = slices.Clone(rq.Faults)
	var names []string
	for _, d := range c.Devices {
		names = append(names, d.Name)
	}
	if len(rq.Devices) == 0 {
		rq.Devices = names
	}
	// Whatever the devices are called, the simulated ones sit in the fixture in turn.
	simulated := *c
	simulated.Devices = nil
	for i, name := range rq.Devices {
		if len(c.Devices) == 0 {
			break
		}
		d := c.Devices[i%len(c.Devices)]
		if k := slices.Index(names, name); k >= 0 {
			d = c.Devices[k]
		}
		d.Name = name
		simulated.Devices = append(simulated.Devices, d)
	}
	var err error
	// Those that an earlier session left unfinished may be measured besides.
	for _, d := range c.Devices {
		if !slices.Contains(rq.Devices, d.Name) {
			simulated.Devices = append(simulated.Devices, d)
		}
	}
	if w.sim, err = rehearse(ctx, simulated); err != nil {
		return nil, err
	}
	env.talk("rehearsal: everything on this bench is simulated; nothing it says was measured")
	return w.sim.bench, nil
}

// storeApart keeps what a rehearsal invents out of the store in which a person's
// own lots are, unless a store was named.
func (w *sweeper) storeApart(env *Env) error {
	if !w.rq.Rehearsal || env.Store != "" {
		return nil
	}
	path, err := env.path()
	if err != nil {
		return err
	}
	env.Store = filepath.Join(filepath.Dir(path), "rehearsal.db")
	env.talk("kept apart from your own lots, in %s; see it with gatesill --store %s spread %s", report.Clean(env.Store), report.Clean(Quote(env.Store)), report.Clean(Quote(w.rq.Lot)))
	return nil
}

// ambient is the temperature of the room, where it was given.
func ambient(c record.Condition) record.Num {
	if c.TempOf == "ambient" || c.TempOf == "" {
		return c.Temp
	}
	return record.Num{}
}

// prepare settles what the session needs before a line is opened.
func (w *sweeper) prepare() error {
	maps.Copy(w.scale, w.past.scale)
	maps.Copy(w.swap, w.past.swap)
	w.file, w.bench = w.bench, exchangedBench(w.bench, w.swap)
	for i, m := range w.bench.Meters {
		if w.bench.Lines[i].Path != "" {
			w.roles = append(w.roles, m.Role)
		}
	}
	l := w.bench.Limits
	least := func(part, bench record.Num) float64 {
		x, y := part.Or(math.Inf(1)), bench.Or(math.Inf(1))
		if m := math.Min(math.Abs(x), math.Abs(y)); !math.IsInf(m, 1) {
			return m
		}
		return 0
	}
	w.limits = acquire.Limits{
		Vgs: least(w.part.MaxVgs, l.Vgs), Vds: least(w.part.MaxVds, l.Vds), ID: least(w.part.MaxID, l.ID),
		PD: least(w.part.MaxPD, l.PD), Temp: l.Temp.Or(0),
	}
	var err error
	if w.typed, err = typedBench(w.bench); err != nil {
		return err
	}
	if w.sim != nil && w.rq.Simulated == nil && w.part.Channel == record.PChannel {
		return failed("leave --channel p out of the lot of a rehearsal", "lot %s is of a p-channel part; the simulated bench holds n-channel parts only", report.Clean(w.lot.Name))
	}
	plan := w.plan()
	if _, err := acquire.NewRunner(plan); err != nil && !w.typed {
		return &Failure{Code: ExitFailed, Err: err, Hint: w.planHint(plan, err)}
	}
	w.lock = acquire.NewInterlock(plan)
	if !w.typed && w.lock.Blind() {
		return failed("a current meter, a load meter with the value of the load resistor, or a meter at the drain supply (role \"supply\") shows it",
			"sweep refused: with the meters of this bench it is never seen that a part may be touched")
	}
	return nil
}

// goOn puts the devices whose sweeps were cut short first. Where they are among
// those named, it is the same command that is given again, and what its session
// has measured of the others is not measured a second time.
func (w *sweeper) goOn(again []string) error {
	named := w.rq.Devices
	if len(again) == 0 || w.keys == nil && w.sim == nil {
		return nil // without a keyboard, lines and fixture belong to the devices named
	}
	var done []string
	if slices.ContainsFunc(named, func(d string) bool { return slices.Contains(again, d) }) {
		err := w.db.View(context.Background(), func(tx *store.Tx) error {
			ds, err := tx.Devices(w.lot.ID)
			if err != nil {
				return err
			}
			sweeps, err := tx.Sweeps(w.lot.ID, false)
			for _, d := range ds {
				if slices.ContainsFunc(sweeps, func(s record.Sweep) bool {
					return s.DeviceID == d.ID && slices.Contains(w.cutIn, s.SessionID) && !s.Excluded && s.Why == ""
				}) && slices.Contains(named, d.Name) && !slices.Contains(again, d.Name) {
					done = append(done, d.Name)
				}
			}
			return err
		})
		if err != nil {
			return storeFailure(err)
		}
	}
	if len(done) > 0 {
		w.env.talk("measured before the cut, and left out now: %s", report.Clean(strings.Join(done, ", ")))
	}
	w.rq.Devices = slices.Clone(again)
	for _, d := range named {
		if !slices.Contains(again, d) && !slices.Contains(done, d) {
			w.rq.Devices = append(w.rq.Devices, d)
		}
	}
	return nil
}

// planHint says what helps against the refusal of a plan.
func (w *sweeper) planHint(p acquire.Plan, err error) string {
	switch {
	case strings.Contains(err.Error(), "limit"):
		return "limits stand in [limits] of the bench file, or with the part: gatesill lot edit " + Quote(w.lot.Name) + " --max-vgs 10 --max-id 1 --max-pd 5"
	case p.Mode == acquire.Driven && !p.DrivesGate:
		return "a [[supply]] with drives = \"gate\" in the bench file (gatesill help bench-file), or --by-hand"
	case p.Mode == acquire.AtSpot && !p.At.IsKnown():
		return "--at 10mA"
	}
	return "gatesill help sweep"
}

// plan is the plan of a sweep with what is known now.
func (w *sweeper) plan() acquire.Plan {
	rq := &w.rq
	overloads := map[string]int{}
	for _, m := range w.bench.Meters {
		if len(m.Ranges) > 1 { // it may show one when it changes its range
			overloads[m.Role] = 2
		}
	}
	gate := slices.ContainsFunc(w.bench.Supplies, func(s bench.Supply) bool { return s.Drives == "gate" })
	drain := slices.ContainsFunc(w.bench.Supplies, func(s bench.Supply) bool { return s.Drives == "drain" })
	driven := rq.Mode == acquire.Driven || rq.Mode == acquire.AtSpot && gate
	at := rq.At
	if !at.IsKnown() && w.given.Circuit != record.Diode {
		at = w.part.TestCurrent
	}
	p := acquire.Plan{
		Mode: rq.Mode, From: rq.From, To: rq.To, Step: rq.Step, Idle: w.part.IdleCurrent, Settle: rq.Settle,
		Channel: w.part.Channel, PartMode: w.part.Mode, OffVoltage: record.Known(offVoltage(w.part)), Limits: w.limits, Overloads: overloads, Circuit: w.given,
		DrivesGate: driven && gate, DrivesDrain: driven && drain, Roles: w.roles, Scale: w.scale,
		Pairs: func() acquire.Pairs { return acquire.NewPairer(w.pairing()) },
	}
	if rq.Mode == acquire.AtSpot {
		p.At = at
	}
	return p
}

func (w *sweeper) pairing() acquire.Pairing {
	p := pairingOf(w.bench, w.rq.Mode)
	for role, t := range w.lagged {
		p.Timing[role] = t
	}
	return p
}

// drivenWindow is how long all must have stood still for a settled point where a
// supply sets the gate, s: there is no hand that trembles, and the pairing asks for
// enough conversions of every meter besides.
const drivenWindow = 0.15

// terminal takes keyboard and screen, where there are any.
func (w *sweeper) terminal() error {
	var keys <-chan rune
	restore := func() {}
	if w.rq.Keyboard != nil && !w.env.Yes {
		var err error
		if keys, restore, err = w.rq.Keyboard(); err != nil {
			return failed("", "keyboard: %w", err)
		}
	}
	w.keys = keys
	if keys == nil {
		w.picture = screen.NewLive(io.Discard, nil, false) // what is said goes to stderr line by line
		w.restoreKeys = restore
		if w.typed && len(w.rq.Devices) == 0 {
			return Usage("gatesill sweep LOT DEVICE...", "sweep: stdin is no terminal: name the devices whose readings come in on it")
		}
		if !w.typed && w.sim == nil && (w.rq.SkipChecks == "" || len(w.rq.Devices) != 1) {
			return Usage("--rehearsal needs nobody; so does one DEVICE that sits in the fixture already, with --skip-checks REASON",
				"sweep: stdin is no terminal, and somebody must change the devices")
		}
		return nil
	}
	w.restoreKeys = restore
	w.picture = screen.NewLive(w.rq.Raw, w.rq.Size, w.env.Color)
	return nil
}

// restore gives the terminal back and says once more what was said last.
func (w *sweeper) restore() error {
	if w.restored {
		return nil
	}
	w.restored = true
	err := w.picture.Close()
	w.restoreKeys()
	if w.keys != nil {
		for i := min(len(w.lines), 5) - 1; i >= 0; i-- {
			w.env.talk("%s", report.Clean(w.lines[i]))
		}
	}
	return err
}

// conclude shows what the session brought.
func (w *sweeper) conclude() error {
	w.doc.Lot, w.doc.Session = w.lot.Name, w.sitting.session.ID
	var err error
	if w.env.JSON {
		err = report.SweepJSON(w.env.Out, w.doc)
	} else if len(w.doc.Devices) > 0 {
		err = report.SweepTable(w.env.Out, w.doc, w.env.style())
	}
	if err == nil && w.trouble != nil {
		return &Failure{Code: ExitInstrument, Err: w.trouble, Hint: w.metersVerb() + " shows what each meter says"}
	}
	if err == nil && w.unfinished != nil {
		return &Failure{Code: ExitFailed, Err: w.unfinished, Hint: "what was taken is kept and set aside; gatesill device show DEVICE --lot " + Quote(w.lot.Name) + " says why"}
	}
	return err
}

// metersVerb is the command that shows the meters of this bench.
func (w *sweeper) metersVerb() string {
	if w.sim != nil {
		return "gatesill meters --rehearsal"
	}
	return "gatesill meters --bench " + Quote(w.rq.Bench)
}

// say tells the operator something, on the screen or as a line.
func (w *sweeper) say(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	if len(w.lines) > 0 && w.lines[0] == text {
		return
	}
	w.lines = append([]string{text}, w.lines[:min(len(w.lines), 50)]...)
	if w.keys == nil {
		w.env.talk("  %s", report.Clean(text))
	}
}

// supplyLog is where the keeper writes what it did, beside the store.
func (w *sweeper) supplyLog() string {
	return strings.TrimSuffix(w.db.Path(), filepath.Ext(w.db.Path())) + ".supplies.log"
}
