package acquire

import (
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// StartResult is what turning the gate showed.
type StartResult struct {
	Done     bool
	OK       bool
	Moved    string    // role whose meter moved; "" none yet
	Expected string    // role that should have moved: gate
	Exchange [2]string // roles to be exchanged; empty when that would not help
	Text     string    // for people
}

// StartCheck finds meters whose roles are swapped, before anything is stored.
// Nothing is inserted; the operator turns the gate from its off voltage by about
// 1 V. With no drain current only the gate meter may move (and the drain meter
// where the circuit ties drain to gate).
type StartCheck struct {
	roles   []string
	sign    float64
	circuit record.Circuit
	base    map[string][]float64
	last    map[string][2]float64 // newest first
	digit   map[string]float64
	count   map[string]int // numbers since something moved
	unit    map[string]string
	result  StartResult
	moving  bool
}

// The bounds of the start check.
const (
	baseReadings = 3   // of each role before anything is judged
	startMove    = 0.3 // V, a change that is no noise
	startQuiet   = 2   // numbers of every other meter that a verdict waits for
)

// NewStartCheck makes a check of the roles listed; temperature takes no part.
func NewStartCheck(roles []string, channel record.Channel, circuit record.Circuit) *StartCheck {
	c := &StartCheck{sign: 1, circuit: circuit, base: map[string][]float64{}, last: map[string][2]float64{},
		digit: map[string]float64{}, count: map[string]int{}, unit: map[string]string{}}
	if channel == record.PChannel {
		c.sign = -1
	}
	for _, r := range roles {
		if r != Temperature {
			c.roles = append(c.roles, r)
		}
	}
	c.result.Expected = Gate
	return c
}

// Instruction says what the operator does now.
func (c *StartCheck) Instruction() string {
	switch {
	case c.result.Done:
		return c.result.Text
	case !c.ready():
		return "nothing inserted, gate at 0 V: leave the knob alone until every meter has spoken"
	case c.moving:
		return "leave the knob where it is"
	}
	return fmt.Sprintf("nothing inserted: turn the gate from 0 V to about %s and leave it there", show(c.sign, "V"))
}

// ready reports whether the state before the turn is known of every meter.
func (c *StartCheck) ready() bool {
	for _, r := range c.roles {
		if len(c.base[r]) < baseReadings {
			return false
		}
	}
	return len(c.roles) > 0
}

// Event takes what happened on a line and gives the result so far. A reading that
// was refused for its unit counts here: it is what a swapped meter says.
func (c *StartCheck) Event(e Event) StartResult {
	for _, r := range e.Readings {
		x, ok := number(r)
		if !ok || !slices.Contains(c.roles, r.Role) || c.result.Done {
			continue
		}
		c.unit[r.Role] = r.Unit
		if d, ok := r.Digit.Get(); ok {
			c.digit[r.Role] = d
		}
		if !c.ready() {
			b := append(c.base[r.Role], x)
			if len(b) > baseReadings { // the others are still awaited
				b = b[1:]
			}
			c.base[r.Role] = b
			continue
		}
		l := c.last[r.Role]
		c.last[r.Role] = [2]float64{x, l[0]}
		if c.count[r.Role]++; c.count[r.Role] == 1 {
			c.last[r.Role] = [2]float64{x, c.middle(r.Role)}
		}
		c.judge()
	}
	return c.result
}

// Result gives the result so far.
func (c *StartCheck) Result() StartResult { return c.result }

func (c *StartCheck) middle(role string) float64 {
	b := slices.Clone(c.base[role])
	slices.Sort(b)
	return b[len(b)/2]
}

// change is by how much a meter has moved, by both of its last two numbers.
func (c *StartCheck) change(role string) float64 {
	l, m := c.last[role], c.middle(role)
	if c.count[role] == 0 {
		return 0
	}
	a, b := l[0]-m, l[1]-m
	if a*b <= 0 { // a single glitch
		return 0
	}
	if math.Abs(b) < math.Abs(a) {
		return b
	}
	return a
}

// moved reports whether a meter moved by more than noise. A meter that says amperes
// where nothing is inserted moves only if it is not what it seems.
func (c *StartCheck) moved(role string) bool {
	least := startMove
	if c.unit[role] == "A" {
		least = math.Max(10*c.digit[role], 1e-3)
	}
	return math.Abs(c.change(role)) > least
}

func (c *StartCheck) judge() {
	var moved []string
	for _, r := range c.roles {
		if c.moved(r) {
			moved = append(moved, r)
		}
	}
	if len(moved) == 0 {
		return
	}
	if !c.moving {
		// Something moves: now every other meter gets the time to move as well.
		c.moving = true
		for _, r := range c.roles {
			c.count[r] = min(c.count[r], 1)
		}
		return
	}
	for _, r := range c.roles {
		if c.count[r] < 1+startQuiet {
			return
		}
	}
	c.verdict(moved)
}

func (c *StartCheck) verdict(moved []string) {
	res := StartResult{Done: true, Expected: Gate, Moved: moved[0]}
	tied := c.circuit == record.Diode && len(moved) == 2 && slices.Contains(moved, Gate) && slices.Contains(moved, Drain)
	switch {
	case len(moved) == 1 && moved[0] == Gate || tied:
		res.OK, res.Moved = true, Gate
		res.Text = "the gate meter moved and no other: every meter is in its place, as far as this shows"
		if v := c.change(Gate); v*c.sign < 0 {
			res.OK = false
			res.Text = fmt.Sprintf("the gate meter went to %s, the wrong way for this part: its leads or the supply's are swapped", show(v, "V"))
		}
	case slices.Contains(moved, Gate):
		res.Text = fmt.Sprintf("more than the gate meter moved: %s; is a part still inserted, or are leads joined?", list(moved))
	case len(moved) == 1:
		res.Exchange = [2]string{Gate, moved[0]}
		res.Text = fmt.Sprintf("the %s meter moved where the gate meter should have: their lines are swapped; exchange gate and %s? nothing was stored", moved[0], moved[0])
	default:
		res.Text = fmt.Sprintf("%s moved, the gate meter did not: check where each lead sits", list(moved))
	}
	if res.Moved != Gate && slices.Contains(moved, Gate) {
		res.Moved = Gate
	}
	c.result = res
}
