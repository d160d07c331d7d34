package job

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/acquire"
	"gatesill/acquire/keeper"
	"gatesill/report"
	"gatesill/report/screen"
)

// measuring leads one runner.
type measuring struct {
	w       *sweeper
	r       *acquire.Runner
	device  string
	drives  bool
	done    *acquire.Done
	doneAt  float64
	held    string  // why nothing goes on, where nobody is there
	heldAt  float64 // since when
	asked   bool    // the operator ended it
	had     int     // points taken
	hadAt   float64 // since when there are so many
	nudged  float64 // when the simulated hand last turned a little
	offs    int     // off states still waited for
	safe    bool    // the off state was told
	trouble bool
	reason  *typing // a reason that is being typed
}

func (m *measuring) event(e acquire.Event) { m.obey(m.r.Event(e)) }
func (m *measuring) tick(at float64) {
	m.obey(m.r.Tick(at))
	if m.w.sim != nil && !m.drives {
		m.hand(at)
	}
	if m.w.keys == nil && m.done == nil {
		m.alone(at)
	}
}

// alone does what an operator would where there is none: a pause by hand is not
// waited out for ever, and with --yes a lost prefix is put right.
func (m *measuring) alone(at float64) {
	v := m.r.View(at)
	why := first(v.Paused, m.refusal(v))
	if n := len(v.Points); n != m.had || m.hadAt == 0 {
		m.had, m.hadAt = n, at
	}
	if at-m.hadAt > noPoint {
		m.held, m.trouble = fmt.Sprintf("no point for %.0f s: %s", at-m.hadAt, v.Instruction), true
		m.key('s')
		return
	}
	switch {
	case why == "":
		m.heldAt, m.held = 0, ""
	case m.held == "":
		m.heldAt, m.held = at, why
	case v.Fix != "" && m.w.env.Yes:
		m.key('p')
		m.held = ""
	case at-m.heldAt > alonePatience:
		m.held, m.trouble = why, true
		m.key('s')
	}
}

// refusal is why readings are refused that one key would put right.
func (m *measuring) refusal(v acquire.View) string {
	if v.Fix == "" {
		return ""
	}
	return first(v.Said, v.Fix)
}

// alonePatience is how long a pause lasts where nobody is there to end it, s.
const alonePatience = 8.0

// noPoint is how long nothing may be taken where nobody is there, s: longer than any
// spot settles.
const noPoint = 1200.0

func (m *measuring) over() bool {
	if m.done == nil {
		return false
	}
	return !m.drives || m.offs == 0 && m.safe || m.w.elapsed()-m.doneAt > offPatience
}

func (m *measuring) switchedOff(keeper.OffReport) {
	m.safe, m.offs = true, max(0, m.offs-1)
}

// obey carries the runner's orders out.
func (m *measuring) obey(orders []acquire.Order) {
	w := m.w
	for _, o := range orders {
		switch o := o.(type) {
		case acquire.SetGate:
			if w.drive != nil {
				w.drive.gate(o.V)
			}
		case acquire.SwitchDrain:
			if w.drive != nil {
				w.drive.drain(o.On)
			}
			w.lock.DrainOff(false, w.elapsed())
		case acquire.Off:
			if w.drive != nil {
				m.offs++
				w.drive.off(o.Reason, o.CurrentGone)
			} else {
				m.safe = true // the keeper has switched off by itself
			}
		case acquire.Say:
			if w.keys != nil || w.sim == nil || !strings.HasPrefix(o.Text, "turn to ") { // a simulated hand needs not be told
				w.say("%s: %s", m.device, o.Text)
			}
		case acquire.Beep:
			w.beep(o.Sound)
		case acquire.Taken:
			w.env.detail("  %s: %s", m.device, pointText(o.Point))
		case acquire.Undone:
			w.say("%s: %s taken back", m.device, count(o.N, "point"))
		case acquire.Rescaled:
			w.scale[o.Role] = o.Factor
			w.lock.SetScale(o.Role, o.Factor)
			_ = w.sitting.event(eventScale, "%s", scaleText(o.Role, o.Factor))
		case acquire.Noted:
			m.trouble = m.trouble || slices.Contains([]string{"lost", "silent", "prefix", "frames", "gate", "drain", "stuck"}, o.Kind)
			_ = w.sitting.event(o.Kind, "%s", o.Text)
		case acquire.Done:
			if m.held != "" { // nobody was there to stop it
				o.Why = m.held
			}
			m.done, m.doneAt = &o, w.elapsed()
			if !o.Complete && !o.Skipped && !m.asked && w.unfinished == nil {
				w.unfinished = fmt.Errorf("device %s: %s", m.device, o.Why)
			}
			if o.Complete || o.Skipped {
				m.trouble = false
			}
		}
	}
}

func pointText(p acquire.Point) string {
	kind := "interpolated"
	if p.Settled {
		kind = "settled"
	}
	text := "point at " + report.FormatPlain(p.Vg, math.NaN(), "V")
	if !math.IsNaN(p.Id) {
		text += ", " + report.FormatPlain(p.Id, math.NaN(), "A")
	}
	if !math.IsNaN(p.Vl) {
		text += ", V_L " + report.FormatPlain(p.Vl, math.NaN(), "V")
	}
	return text + ", " + kind
}

// key does what a key asks for.
func (m *measuring) key(k rune) {
	at := m.w.elapsed()
	if m.reason != nil {
		m.reason.key(k)
		if m.reason.over() {
			if text := strings.TrimSpace(string(m.reason.text)); !m.reason.leave && text != "" {
				m.obey(m.r.Key(acquire.Key{Name: acquire.KeySkip, Reason: text}, at))
			}
			m.reason = nil
		}
		return
	}
	names := map[rune]acquire.KeyName{
		' ': acquire.KeyAccept, keyEnter: acquire.KeyAccept, 'f': acquire.KeyFinish, 's': acquire.KeyStop, 'q': acquire.KeyStop,
		'r': acquire.KeyRepeat, 'u': acquire.KeyUndo, 'p': acquire.KeyFix, keyEscape: acquire.KeyStop,
	}
	if k == 'k' {
		m.reason = &typing{w: m.w, prompt: "why is " + m.device + " skipped (Enter; Escape goes back):", allowed: func(string) error { return nil }}
		return
	}
	if name, ok := names[k]; ok {
		m.asked = m.asked || name == acquire.KeyStop && m.held == ""
		m.obey(m.r.Key(acquire.Key{Name: name}, at))
	}
}

// keysNow names the keys that do something in this kind of sweep; that for a lost
// prefix is told where there is one.
func (m *measuring) keysNow() string {
	switch m.w.rq.Mode {
	case acquire.Driven:
		return "keys: f finish, u last point back, r repeat, k skip, s or q stop"
	case acquire.AtSpot:
		return "keys: space take, r repeat, k skip, s or q stop"
	}
	return "keys: space take, f finish, u last point back, r repeat, k skip, s or q stop"
}

func (m *measuring) show(at float64) screen.Model {
	v := m.r.View(at)
	s := screen.Model{
		Title: "  device " + m.device, Status: count(len(v.Points), "point"), Instruction: v.Instruction, Values: m.w.values(v.Latest),
		Power: screen.Power{Watts: v.PD, Limit: m.w.limits.PD},
	}
	if !math.IsNaN(v.Waiting) {
		s.Waiting, s.Wait = v.Waiting, m.w.rq.Settle.Or(0)
	}
	s.Keys = m.keysNow()
	if m.reason != nil {
		s.Instruction, s.Keys = m.reason.show(at).Instruction, ""
	}
	for _, t := range v.Warnings {
		s.Notices = append(s.Notices, screen.Notice{Stop: v.Level == acquire.Over, Text: t})
	}
	if v.Fix != "" {
		s.Notices = append(s.Notices, screen.Notice{Text: "p: " + v.Fix})
	}
	if v.Paused != "" {
		s.Notices = append(s.Notices, screen.Notice{Stop: true, Text: v.Paused})
	}
	for _, p := range v.Points {
		if xy, ok := plotted(p, m.w.given.RL.Float()); ok {
			xy.Open = !p.Settled
			s.Plot.Points = append(s.Plot.Points, xy)
		}
	}
	return s
}

// plotted is where a point stands in the plot: its drain current is the measured one,
// else that through the load resistor of rl ohms. Not ok: it has neither.
func plotted(p acquire.Point, rl float64) (at screen.XY, ok bool) {
	i := p.Id
	if math.IsNaN(i) {
		i = p.Vl / rl
	}
	return screen.XY{X: p.Vg, Y: i}, !math.IsNaN(i)
}
