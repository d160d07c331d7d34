package job

import (
	"context"
	"fmt"
	"math"
	"strings"

	"gatesill/acquire"
	"gatesill/report/screen"
)

// speakWithin is how long after the start every meter must have spoken, s.
const speakWithin = 12.0

// waiting waits until every meter has said something.
type waiting struct {
	w     *sweeper
	since float64
	heard map[string]bool
	why   map[string]string // by role: what kept its line from speaking
	err   error
}

func (s *waiting) event(e acquire.Event) {
	for _, r := range e.Readings {
		s.heard[r.Role] = true
	}
	if e.Err != nil {
		s.why[e.Role] = e.Err.Error()
	}
}

func (s *waiting) tick(at float64) {
	if s.missing() == nil || at-s.since < speakWithin {
		return
	}
	var text []string
	for _, role := range s.missing() {
		t := role + " meter"
		if why := s.why[role]; why != "" {
			t += " (" + why + ")"
		}
		text = append(text, t)
	}
	s.err = &Failure{Code: ExitInstrument, Err: fmt.Errorf("nothing comes from: %s", strings.Join(text, ", ")),
		Hint: s.w.metersVerb() + " shows each line; is the meter on, and sending, or are two lines exchanged?"}
}

func (s *waiting) missing() (out []string) {
	for _, role := range s.w.roles {
		if !s.heard[role] {
			out = append(out, role)
		}
	}
	return out
}
func (s *waiting) key(rune)   {}
func (s *waiting) over() bool { return s.err != nil || s.missing() == nil }
func (s *waiting) show(float64) screen.Model {
	return screen.Model{Instruction: "waiting for " + strings.Join(s.missing(), ", "), Values: s.w.values(s.w.shown())}
}

// asking shows an instruction and waits until its condition holds and the operator
// agrees; without a keyboard nobody has to.
type asking struct {
	w       *sweeper
	title   string
	text    func(at float64) string // the instruction
	missing func(at float64) []string
	hears   func(e acquire.Event)
	other   map[rune]func() // further keys
	until   func() bool     // over as soon as this holds; nil: on a key
	ended   bool
	quit    bool // q: the session is over
}

func (s *asking) event(e acquire.Event) {
	if s.hears != nil {
		s.hears(e)
	}
}

func (s *asking) lacking(at float64) []string {
	if s.missing == nil {
		return nil
	}
	return s.missing(at)
}

func (s *asking) tick(at float64) {
	if s.until != nil {
		s.ended = s.ended || s.until()
	} else if s.w.keys == nil && len(s.lacking(at)) == 0 {
		s.ended = true
	}
}

func (s *asking) key(k rune) {
	if f, ok := s.other[k]; ok {
		f()
		s.ended = true
		return
	}
	if k == 'q' {
		s.quit, s.ended = true, true
		return
	}
	if k != ' ' && k != keyEnter || s.until != nil {
		return
	}
	if lack := s.lacking(s.w.elapsed()); len(lack) > 0 {
		s.w.say("not yet: %s", strings.Join(lack, "; "))
		s.w.beep(acquire.SoundAttention)
		return
	}
	s.ended = true
}
func (s *asking) over() bool { return s.ended }

// quits tells whether the session is to be ended.
func (s *asking) quits() bool { return s.quit }
func (s *asking) show(at float64) screen.Model {
	m := screen.Model{Title: s.title, Instruction: s.text(at), Values: s.w.values(s.w.shown())}
	if len(s.other) == 0 {
		m.Keys = "keys: space goes on, q ends the session"
		if s.until != nil {
			m.Keys = "keys: q ends the session"
		}
	}
	for _, t := range s.lacking(at) {
		m.Notices = append(m.Notices, screen.Notice{Text: "not seen yet: " + t})
	}
	return m
}

// typing takes one line of text, from the keyboard or a bar-code scanner.
type typing struct {
	w       *sweeper
	title   string
	prompt  string
	text    []rune
	ended   bool
	leave   bool // Escape
	allowed func(string) error
}

func (s *typing) event(acquire.Event) {}
func (s *typing) tick(float64)        {}
func (s *typing) over() bool          { return s.ended }
func (s *typing) key(k rune) {
	switch {
	case k == keyEscape:
		s.leave, s.ended = true, true
	case k == keyEnter || k == '\n' || k == '\t':
		if err := s.allowed(strings.TrimSpace(string(s.text))); err != nil {
			s.w.say("%v", err)
			return
		}
		s.ended = true
	case k == 127 || k == 8:
		s.text = s.text[:max(0, len(s.text)-1)]
	case k >= ' ':
		s.text = append(s.text, k)
	}
}
func (s *typing) show(float64) screen.Model {
	return screen.Model{Title: s.title, Instruction: s.prompt + " " + string(s.text) + "_", Values: s.w.values(s.w.shown())}
}

// check takes zeros and makes the start check, with nothing inserted.
func (w *sweeper) check(ctx context.Context) error {
	if w.rq.SkipChecks != "" {
		w.say("the bench is not checked: %s", w.rq.SkipChecks)
		return w.sitting.event("unchecked", "%s", w.rq.SkipChecks)
	}
	if err := w.checkDrive(ctx); err != nil {
		return err
	}
	defer w.undrive()
	off := offVoltage(w.part)
	if w.sim != nil {
		if err := w.sim.insert(""); err != nil {
			return err
		}
	}
	w.hand(0)
	if w.drive == nil {
		off = 0
	}
	if err := w.lead(ctx, &asking{w: w, title: "  checks", text: func(float64) string {
		return "take every device out, gate to 0 V, drain supply off; then press space"
	}, missing: func(at float64) []string { return w.gateNear(off, at) }}); err != nil {
		return err
	}
	if err := w.zeros(ctx); err != nil {
		return err
	}
	return w.startCheck(ctx, off)
}

// checkDrive starts the keeper for the checks where the gate is driven.
func (w *sweeper) checkDrive(ctx context.Context) error {
	if !w.plan().DrivesGate {
		return nil
	}
	return w.startDrive(ctx)
}

// startDrive starts a keeper, with the gate at the off voltage.
func (w *sweeper) startDrive(ctx context.Context) error {
	c, err := keeperConfig(w.bench, w.part, w.limits, w.supplyLog())
	if err != nil {
		return err
	}
	w.drive, err = newDriver(ctx, c)
	return err
}

// gateNear says what is missing for the gate to be seen at v.
func (w *sweeper) gateNear(v, at float64) []string {
	s, ok := w.shown()[acquire.Gate]
	switch {
	case !ok || math.IsNaN(s.Value):
		return []string{"a reading of the gate meter"}
	case s.Unit == "V" && math.Abs(s.Value-v) > 0.25:
		return []string{fmt.Sprintf("the gate at %g V", v)}
	}
	return nil
}

// zeros takes the offsets of the meters.
func (w *sweeper) zeros(ctx context.Context) error {
	tops := map[string]float64{}
	for _, m := range w.bench.Meters {
		if len(m.Ranges) > 0 {
			tops[m.Role] = m.Ranges[0].Top
		}
	}
	z := acquire.NewZeros(w.roles, 5, tops)
	begun := w.elapsed()
	if err := w.lead(ctx, &asking{w: w, title: "  checks", text: func(float64) string { return z.Instruction() },
		hears: z.Event, until: func() bool { return len(z.Missing()) == 0 || w.elapsed()-begun > speakWithin }}); err != nil {
		return err
	}
	for _, text := range z.Missing() {
		w.say("zero not taken: %s", text)
	}
	for _, o := range z.Result() {
		if o.Text != "" {
			w.say("zero: %s", o.Text)
		}
		if err := w.sitting.event("zero", "%s: offset %g, noise %g, n = %d", o.Role, o.Offset, o.Noise, o.N); err != nil {
			return err
		}
	}
	return nil
}

// startCheck turns the gate and looks which meter moves.
func (w *sweeper) startCheck(ctx context.Context, off float64) error {
	for first := true; ; first = false {
		if !first { // the gate comes back from the turn before
			begun := w.elapsed()
			if err := w.lead(ctx, &asking{w: w, title: "  checks", text: func(float64) string { return "leave the gate at its off voltage" },
				until: func() bool {
					at := w.elapsed()
					return at-begun > 1 && len(w.gateNear(off, at)) == 0 || at-begun > speakWithin
				}}); err != nil {
				return err
			}
		}
		c := acquire.NewStartCheck(w.roles, w.part.Channel, w.given.Circuit)
		sign := w.part.Sign()
		turned := false
		begun := w.elapsed()
		if err := w.lead(ctx, &asking{w: w, title: "  checks", text: func(float64) string { return c.Instruction() },
			hears: func(e acquire.Event) { c.Event(e) },
			until: func() bool {
				// The state before is known once the instruction asks for the turn.
				if !turned && w.elapsed()-begun > 0.3 && strings.Contains(c.Instruction(), "turn the gate") {
					turned = true
					w.hand(sign)
					if w.drive != nil {
						w.drive.gate(off + sign*math.Min(1, w.limits.Vgs/2))
					}
				}
				return c.Result().Done || w.keys == nil && w.elapsed()-begun > 2*speakWithin
			}}); err != nil {
			return err
		}
		w.hand(0)
		if w.drive != nil {
			w.drive.gate(off)
		}
		r := c.Result()
		if !r.Done {
			return &Failure{Code: ExitInstrument, Err: fmt.Errorf("start check: no meter moved when the gate was turned"), Hint: "is the gate supply connected, and the gate meter on DC volts?"}
		}
		w.say("start check: %s", r.Text)
		if err := w.sitting.event("start-check", "%s", r.Text); err != nil {
			return err
		}
		if r.OK {
			return nil
		}
		again, err := w.settleStart(ctx, r)
		if err != nil || !again {
			return err
		}
	}
}

// settleStart settles a start check that found something wrong; again wants it
// repeated.
func (w *sweeper) settleStart(ctx context.Context, r acquire.StartResult) (again bool, err error) {
	swapped := r.Exchange != [2]string{}
	exchanged := func() {
		a, b := r.Exchange[0], r.Exchange[1]
		exchange(w.swap, a, b)
		w.bench = exchangedBench(w.file, w.swap)
		w.say("the lines of the %s and the %s meter count as exchanged in this session; put the bench file right", a, b)
		_ = w.sitting.event(eventExchange, "%s", exchangeText(a, b))
	}
	if w.keys == nil {
		if swapped && w.env.Yes {
			exchanged()
			return true, nil
		}
		hint := "put the leads right and begin again"
		if swapped {
			hint = "exchange their lines in the bench file, or take the exchange with --yes"
		}
		return false, &Failure{Code: ExitInstrument, Err: fmt.Errorf("start check: %s", r.Text), Hint: hint}
	}
	w.beep(acquire.SoundStop)
	text := r.Text + ": r checks again, i goes on in spite of it, q ends"
	choice := rune(0)
	pick := func(k rune) func() { return func() { choice = k } }
	keys := map[rune]func(){'r': pick('r'), 'i': pick('i'), 'q': pick('q')}
	if swapped {
		text = r.Text + ": e exchanges them, r checks again, q ends"
		keys['e'] = pick('e')
		delete(keys, 'i') // nothing good can come of it
	}
	if err := w.lead(ctx, &asking{w: w, title: "  checks", text: func(float64) string { return text }, other: keys, until: func() bool { return false }}); err != nil {
		return false, err
	}
	switch choice {
	case 'q':
		return false, errQuit
	case 'e':
		exchanged()
	case 'i':
		return false, w.sitting.event("unchecked", "%s", r.Text)
	}
	return true, nil
}
