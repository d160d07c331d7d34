package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/meter"
	"gatesill/report"
	"gatesill/report/screen"
	"gatesill/store/record"
)

// typedBench reports whether every meter of the bench is read by a person, who types
// what it shows.
func typedBench(b *bench.Bench) (bool, error) {
	typed, live := 0, 0
	for _, l := range b.Lines {
		switch l.Path {
		case "":
		case bench.Keyboard:
			typed++
		default:
			live++
		}
	}
	if typed > 0 && live > 0 {
		return false, failed("give every meter a line of its own, or line = \""+bench.Keyboard+"\"", "bench file: meters that are typed and meters that are listened to do not go together")
	}
	return typed > 0, nil
}

// typist takes points as lines that somebody types: one line is one point.
type typist struct {
	w       *sweeper
	source  acquire.Source
	decoder meter.Decoder
	guard   *acquire.Guard
	device  string
	points  []acquire.Point
	line    typing
	ended   bool
	quit    bool
}

// typedWork leads a session in which the readings are typed. Nothing can be seen of
// the fixture between the points, and that is said.
func (w *sweeper) typedWork(ctx context.Context) error {
	if w.rq.Mode == acquire.Driven {
		return Usage("--by-hand, --free or --spot", "sweep: a driven sweep needs meters that can be listened to")
	}
	for _, t := range acquire.SetUp(w.limits, w.given) {
		w.say("%s", t)
	}
	steps := []acquire.Step{acquire.StepSetUp, acquire.StepInsert, acquire.StepPower, acquire.StepRemove, acquire.StepHand}
	if err := w.caution(ctx, steps...); err != nil {
		return err
	}
	w.say("readings are typed: whether the gate is off before a device is touched is seen by nobody but you")
	for i := 0; ; i++ {
		device, more, err := w.nextDevice(ctx, i)
		if err != nil || !more {
			return err
		}
		if err := w.typedDevice(ctx, device); err != nil {
			return err
		}
	}
}

// typedDevice takes the points of one device.
func (w *sweeper) typedDevice(ctx context.Context, device string) error {
	t, err := w.newTypist(device)
	if err != nil {
		return err
	}
	direction := record.Up
	if w.rq.Mode == acquire.AtSpot {
		direction = record.Spot
	}
	if err := w.begin(ctx, device, direction); err != nil {
		return err
	}
	id := w.sweep.ID
	if w.keys != nil {
		err = w.lead(ctx, t)
	} else {
		err = t.fromInput(ctx, w.rq.Input)
	}
	if err != nil {
		return err
	}
	if n := len(t.points); direction == record.Up && n > 1 && math.Abs(t.points[0].Vg) > math.Abs(t.points[n-1].Vg) {
		direction = record.Down
	}
	why := ""
	if len(t.points) == 0 {
		why = "no point was typed"
	}
	sw, err := w.finish(ctx, t.points, false, direction, why)
	if err != nil {
		return err
	}
	d := report.SweptDevice{Device: device, Sweep: id, Points: len(t.points), Settled: len(t.points), Complete: why == "", Why: first(why, "typed")}
	d.Result = w.result(device, &sw)
	w.doc.Devices = append(w.doc.Devices, d)
	w.tellResult(d)
	if t.quit {
		return errQuit
	}
	return nil
}

func (w *sweeper) newTypist(device string) (*typist, error) {
	sources := Sources(w.bench)
	if len(sources) != 1 {
		return nil, failed("", "bench file: typed meters share one line, %q", bench.Keyboard)
	}
	t := &typist{w: w, source: sources[0], device: device, guard: acquire.NewGuard(w.limits, w.given, nil)}
	f, ok := meter.Find(t.source.Speaks)
	if !ok || f.Name != "text" {
		return nil, failed("speaks = \"text\"", "bench file: what is typed is text, not %q", t.source.Speaks)
	}
	// A person leaves the unit away: it is that of the bench file, or of the role.
	o := t.source.Options
	if o.Unit == "" {
		var units []string
		for _, c := range t.source.Columns {
			for len(units) < max(c.Column, 1) {
				units = append(units, "")
			}
			units[max(c.Column, 1)-1] = c.Unit
		}
		o.Unit = strings.Join(units, ",")
	}
	var err error
	if t.decoder, err = f.New(o); err != nil {
		return nil, failed("gatesill help bench-file shows every key", "bench file: typed meters: %w", err)
	}
	t.line = typing{w: w, allowed: func(string) error { return nil }}
	return t, nil
}

// wanted names what a line holds: "gate [V], current [A]".
func (t *typist) wanted() string {
	columns := slices.Clone(t.source.Columns)
	slices.SortFunc(columns, func(a, b acquire.SourceColumn) int { return a.Column - b.Column })
	var out []string
	for _, c := range columns {
		unit := c.Unit
		if units := strings.Split(t.source.Options.Unit, ","); t.source.Options.Unit != "" && c.Column <= len(units) {
			unit = first(units[max(c.Column, 1)-1], unit)
		}
		out = append(out, c.Role+" ["+unit+"]")
	}
	return strings.Join(out, ", ")
}

// take takes one typed line.
func (t *typist) take(text string) error {
	switch text = strings.TrimSpace(text); text {
	case "":
		t.ended = true
		return nil
	case "u":
		return t.undo()
	case "q":
		t.ended, t.quit = true, true
		return nil
	}
	line := []byte(text + "\n")
	skip, n, got, err := t.decoder.Scan(line, true)
	if err != nil {
		return err
	}
	if n == 0 || skip != 0 {
		return fmt.Errorf("%q cannot be read: want %s", text, t.wanted())
	}
	readings, err := t.readings(got, text)
	if err != nil {
		return err
	}
	e := acquire.Event{At: readings[0].At, Line: t.source.Address, Readings: readings}
	t.w.resolve(e)
	if err := t.w.hear(e); err != nil {
		return err
	}
	for _, r := range readings {
		t.guard.Add(r)
	}
	t.points = append(t.points, acquire.Joint(readings)...)
	t.w.beep(acquire.SoundAccept)
	if s, ok := t.guard.Look().Worst(); ok && s.Level() > acquire.Within {
		if s.Level() == acquire.Over {
			t.w.beep(acquire.SoundStop)
			t.w.say("stop, turn the gate back: %s", s)
			return t.w.sitting.event("limit", "%s", s)
		}
		t.w.say("%s", s)
	}
	return nil
}

// readings are those of one line, one for each column that is wanted.
func (t *typist) readings(got []meter.Reading, text string) ([]record.Reading, error) {
	at := t.w.elapsed()
	var out []record.Reading
	for _, c := range t.source.Columns {
		k := slices.IndexFunc(got, func(r meter.Reading) bool { return r.Column == max(c.Column, 1) })
		if k < 0 {
			return nil, fmt.Errorf("%q has no column %d: want %s", text, max(c.Column, 1), t.wanted())
		}
		m := got[k]
		if why := m.Refusal(c.Unit); why != "" {
			return nil, fmt.Errorf("%q, %s: %s", text, c.Role, why)
		}
		r := record.Reading{Role: c.Role, Meter: c.Meter, At: at, Unit: c.Unit, State: m.State, Raw: []byte(text)}
		if m.State == "" {
			r.Value = record.Known(m.Value)
		}
		if m.Digit > 0 {
			r.Digit = record.Known(m.Digit)
		}
		out = append(out, r)
	}
	return out, nil
}

// undo takes the last point back; what was typed stays in the record.
func (t *typist) undo() error {
	n := len(t.points)
	if n == 0 {
		return errors.New("no point to take back")
	}
	t.points = t.points[:n-1]
	t.w.say("the last point does not count")
	return t.w.sitting.event("undone", "point %d of %s", n, t.device)
}

// fromInput takes the lines of stdin where it is no terminal: an empty line, or the
// end, ends the device.
func (t *typist) fromInput(ctx context.Context, in lineReader) error {
	for !t.ended {
		text, err := in.ReadString('\n')
		if err != nil && !errors.Is(err, io.EOF) {
			return failed("", "stdin: %w", err)
		}
		end := err != nil
		if !end || strings.TrimSpace(text) != "" {
			if err := t.take(text); err != nil {
				return failed("one line a point: "+t.wanted(), "device %s, point %d: %w", report.Clean(t.device), len(t.points)+1, err)
			}
		}
		if end {
			return ctx.Err()
		}
	}
	return ctx.Err()
}

// lineReader gives lines of text.
type lineReader interface {
	ReadString(delim byte) (string, error)
}

func (t *typist) event(acquire.Event) {}
func (t *typist) tick(float64)        {}
func (t *typist) over() bool          { return t.ended }
func (t *typist) key(k rune) {
	t.line.key(k)
	if !t.line.over() {
		return
	}
	if t.line.leave {
		t.ended = true
		return
	}
	if err := t.take(string(t.line.text)); err != nil {
		t.w.say("not taken: %v", err)
		t.w.beep(acquire.SoundAttention)
	}
	t.line.text, t.line.ended = nil, false
}

func (t *typist) show(float64) screen.Model {
	m := screen.Model{
		Title: "  device " + t.device, Status: count(len(t.points), "point"),
		Instruction: fmt.Sprintf("type %s and Enter (u takes back, Enter alone ends this device, q the session): %s_", t.wanted(), string(t.line.text)),
		Power:       screen.Power{Watts: t.guard.Look().PD, Limit: t.w.limits.PD},
	}
	if s, ok := t.guard.Look().Worst(); ok && s.Level() > acquire.Within {
		m.Notices = append(m.Notices, screen.Notice{Stop: s.Level() == acquire.Over, Text: s.String()})
	}
	for _, p := range t.points {
		if xy, ok := plotted(p, t.w.given.RL.Float()); ok {
			m.Plot.Points = append(m.Plot.Points, xy)
		}
	}
	return m
}
