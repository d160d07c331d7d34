package acquire

import (
	"fmt"
	"math"
	"slices"

	"gatesill/store/record"
)

// The shares of a limit at which something happens.
const (
	warnShare = 0.795 // said: what reads as 80 %
	stopShare = 1.0   // stopped, or called by hand
	gateShare = 0.98  // of V_GS no step goes further; a voltage that is set does not run away as a current does
	stepShare = 0.9   // no step is made whose predicted end lies above: a sound step must not set off the stop by itself
)

// Level says how near a device is to its limits.
type Level int

// The levels.
const (
	Within Level = iota
	Warn         // 80 % of a limit is reached
	Over         // a limit is reached
)

// Share is how much of one limit is used.
type Share struct {
	Name  string  // "V_GS", "V_DS", "I_D", "P_D", "temperature", "load resistor"
	Unit  string  // SI unit of the next two
	Value float64 // magnitude, on the safe side; +Inf for an overload, NaN not known yet
	Limit float64 // > 0
}

// Of is the share as a fraction; NaN while the value is not known.
func (s Share) Of() float64 { return s.Value / s.Limit }

// Level says what the share asks for.
func (s Share) Level() Level {
	switch f := s.Of(); {
	case f >= stopShare*(1-1e-12): // a sum of decimals may be a hair below
		return Over
	case f >= warnShare:
		return Warn
	}
	return Within
}

// String gives the share in words: "P_D 4.00 W of 5.00 W, 80 %".
func (s Share) String() string {
	if math.IsInf(s.Value, 0) {
		return fmt.Sprintf("%s is beyond what the meter can show, limit %s", s.Name, show(s.Limit, s.Unit))
	}
	return fmt.Sprintf("%s %s of %s, %.0f %%", s.Name, show(s.Value, s.Unit), show(s.Limit, s.Unit), 100*s.Of())
}

// Watch is what a [Guard] sees.
type Watch struct {
	Vgs, Vds, ID, PD, Temp float64 // V, V, A, W, deg C; magnitudes on the safe side, +Inf overload, NaN not known
	Resistor               float64 // W, in the load resistor; NaN not known
	Shares                 []Share // of the limits that are known
	Level                  Level   // the worst of them
}

// Worst gives the share that is nearest to its limit, false when none is known.
func (w Watch) Worst() (Share, bool) {
	best, ok := Share{}, false
	for _, s := range w.Shares {
		if f := s.Of(); !math.IsNaN(f) && (!ok || f > best.Of()) {
			best, ok = s, true
		}
	}
	return best, ok
}

// Guard watches the limits of one device on every reading. It takes values that
// do not belong to one instant and combines them so that the truth lies below:
// the greatest of the last two of each. An overload is above every limit. What is
// not a number and what a meter said of another quantity (held, relative, wrong
// unit) changes nothing; whether readings are fresh is not decided here.
//
// V_DS comes from the drain meter, else it is V_DD less the load voltage, else
// V_DD less I_D R_L; the gate voltage where drain and gate are tied; the given
// V_DS where it is held. I_D is the greatest of what the current meter and the
// voltage across R_L say, so that a lost prefix does not hide a current.
type Guard struct {
	limits   Limits
	circuit  record.Condition
	bear     map[string]int // overloads in a row that do not count yet, by role
	last     map[string]*lastTwo
	overload map[string]int // in a row
}

// lastTwo holds the last two magnitudes of one role, the newest first.
type lastTwo struct {
	v [2]float64
	n int
}

func (l *lastTwo) push(x float64) {
	l.v[1], l.v[0] = l.v[0], x
	l.n = min(l.n+1, 2)
}

func (l *lastTwo) max() float64 {
	if l == nil || l.n == 0 {
		return math.NaN()
	}
	return slices.Max(l.v[:l.n])
}

func (l *lastTwo) min() float64 {
	if l == nil || l.n == 0 {
		return math.NaN()
	}
	return slices.Min(l.v[:l.n])
}

// NewGuard makes a guard for a device in that circuit. Limits that are 0 are not
// watched. overloads gives, by role, how many overloads in a row count as above
// every limit: 1 where it says nothing; 2 suits a meter that shows one overload
// whenever it changes its range.
func NewGuard(l Limits, c record.Condition, overloads map[string]int) *Guard {
	return &Guard{limits: l, circuit: c, bear: overloads, last: map[string]*lastTwo{}, overload: map[string]int{}}
}

// Add takes a reading.
func (g *Guard) Add(r record.Reading) {
	if r.Refused != "" {
		return
	}
	x, known := r.Value.Get()
	switch {
	case r.State == record.Overload || r.State == record.Underload:
		g.overload[r.Role]++
		if g.overload[r.Role] < max(g.bear[r.Role], 1) {
			return
		}
		x = math.Inf(1)
	case r.State != "" || !known:
		return
	default:
		g.overload[r.Role] = 0
	}
	if g.last[r.Role] == nil {
		g.last[r.Role] = new(lastTwo)
	}
	if r.Role != Temperature {
		x = math.Abs(x) // swapped leads must not hide anything
	}
	g.last[r.Role].push(x)
	// One number after an overload clears it: the meter is back in its range.
	if l := g.last[r.Role]; !math.IsInf(x, 1) && math.IsInf(l.v[1], 1) {
		l.n = 1
	}
}

// forget drops what a role said so far.
func (g *Guard) forget(role string) {
	delete(g.last, role)
	delete(g.overload, role)
}

// supply gives the greatest V_DD, magnitude; NaN not known.
func (g *Guard) supply() float64 {
	if v := g.last[Supply].max(); !math.IsNaN(v) {
		return v
	}
	return math.Abs(g.circuit.VDD.Float())
}

// current gives the greatest drain current, magnitude; NaN not known.
func (g *Guard) current() float64 {
	id := g.last[Current].max()
	rl := g.circuit.RL.Float()
	if l := g.last[Load]; l != nil && rl > 0 {
		id = greater(id, l.max()/rl)
	}
	// A supply that is only known by its name plate would make a current of its error.
	if d, s := g.last[Drain], g.last[Supply]; d != nil && s != nil && rl > 0 && g.circuit.Circuit == record.Load {
		if drop := s.min() - d.max() - 0.01*s.min(); drop > 0 { // less what two meters may differ by
			id = greater(id, drop/rl)
		}
	} else if d != nil && rl > 0 && math.IsNaN(id) && g.circuit.Circuit == record.Load {
		id = math.Max(0, g.supply()-d.min()) / rl
	}
	if vg := g.last[Gate]; math.IsNaN(id) && g.circuit.Circuit == record.Diode && vg != nil && rl > 0 {
		id = math.Max(0, g.supply()-vg.min()) / rl
	}
	return id
}

// drain gives the greatest V_DS, magnitude; NaN not known.
func (g *Guard) drain() float64 {
	if d := g.last[Drain]; d != nil {
		return d.max()
	}
	vdd := g.supply()
	if l := g.last[Load]; l != nil && !math.IsNaN(vdd) {
		if drop := l.min(); !math.IsInf(drop, 1) {
			return math.Max(0, vdd-drop)
		}
		return vdd
	}
	switch g.circuit.Circuit {
	case record.Diode:
		return g.last[Gate].max()
	case record.Fixed:
		return math.Abs(g.circuit.VDS.Else(g.circuit.VDD).Float())
	case record.Load:
		rl, id := g.circuit.RL.Float(), g.last[Current].min()
		if rl > 0 && !math.IsNaN(id) && !math.IsInf(id, 1) {
			return math.Max(0, vdd-id*rl)
		}
	}
	return vdd
}

// Look gives what the guard sees now.
func (g *Guard) Look() Watch {
	w := Watch{Vgs: g.last[Gate].max(), Vds: g.drain(), ID: g.current(), Temp: g.last[Temperature].max()}
	w.PD = g.power(w.Vds, w.ID)
	w.Resistor = math.NaN()
	if rl := g.circuit.RL.Float(); rl > 0 && g.circuit.Circuit != record.Fixed {
		w.Resistor = product(w.ID, w.ID) * rl
	}
	for _, s := range []Share{
		{"V_GS", "V", w.Vgs, g.limits.Vgs}, {"V_DS", "V", w.Vds, g.limits.Vds}, {"I_D", "A", w.ID, g.limits.ID},
		{"P_D", "W", w.PD, g.limits.PD}, {"temperature", "degC", w.Temp, g.limits.Temp},
		{"load resistor", "W", w.Resistor, g.circuit.RLRating.Or(0)},
	} {
		if s.Limit > 0 {
			w.Shares = append(w.Shares, s)
			w.Level = max(w.Level, s.Level())
		}
	}
	return w
}

// power gives the greatest power in the device. Two meters that do not read at one
// instant are multiplied at their worst. On a load line of a known supply without a
// drain meter each meter tells the power by itself, so that a gate that was just
// turned back does not pass for a device with all current and all voltage at once.
func (g *Guard) power(vds, id float64) float64 {
	worst := product(vds, id)
	vdd, rl := g.supply(), g.circuit.RL.Float()
	if g.circuit.Circuit != record.Load || g.last[Drain] != nil || !(vdd > 0) || !(rl > 0) || math.IsInf(worst, 1) {
		return worst
	}
	pd := math.NaN()
	each := func(role string, drop func(x float64) float64) {
		l := g.last[role]
		for k := 0; l != nil && k < l.n; k++ {
			vl := drop(l.v[k])
			pd = greater(pd, vl/rl*math.Max(0, vdd-vl))
		}
	}
	each(Load, func(x float64) float64 { return x })
	each(Current, func(x float64) float64 { return x * rl })
	return pd
}

// expected gives the shares that a drain current id (A, magnitude) at a gate
// voltage vg (V, magnitude) would take, on the way there and on the way back: with
// the whole of V_DD across the device, as the last two values of each meter will
// have it when the gate is turned back.
func (g *Guard) expected(vg, id float64) []Share {
	vds := g.open()
	if g.circuit.Circuit == record.Diode {
		vds = greater(g.last[Gate].max(), vg)
	}
	shares := append(make([]Share, 0, 4), Share{"V_GS", "V", vg, g.limits.Vgs}, Share{"I_D", "A", id, g.limits.ID},
		Share{"P_D", "W", math.Min(product(vds, id), g.mostPower()), g.limits.PD})
	if rl := g.circuit.RL.Float(); rl > 0 && g.circuit.Circuit != record.Fixed {
		shares = append(shares, Share{"load resistor", "W", id * id * rl, g.circuit.RLRating.Or(0)})
	}
	return slices.DeleteFunc(shares, func(s Share) bool { return s.Limit <= 0 })
}

// open gives the greatest V_DS that the circuit can put across the device, V.
func (g *Guard) open() float64 {
	vds := g.drain()
	if g.circuit.Circuit == record.Load {
		vds = greater(vds, g.supply())
	}
	return vds
}

// most gives the greatest drain current the circuit lets through (A), +Inf when
// nothing bounds it.
func (g *Guard) most() float64 {
	vdd, rl := g.supply(), g.circuit.RL.Float()
	if g.circuit.Circuit == record.Fixed || !(rl > 0) || math.IsNaN(vdd) {
		return math.Inf(1)
	}
	return 1.05 * vdd / rl // R_L may be low by its tolerance
}

// mostPower gives the greatest power that the circuit can put into the device, W;
// +Inf when nothing bounds it.
func (g *Guard) mostPower() float64 {
	vdd, rl := g.supply(), g.circuit.RL.Float()
	if g.circuit.Circuit != record.Load || !(rl > 0) || math.IsNaN(vdd) {
		return math.Inf(1)
	}
	return 1.05 * vdd * vdd / (4 * rl) // R_L may be low by its tolerance
}

// greater gives the greater of two numbers, the known one when one is NaN.
func greater(a, b float64) float64 {
	if math.IsNaN(a) || b > a {
		return b
	}
	return a
}

// product multiplies magnitudes; an overload stays one, also times 0.
func product(a, b float64) float64 {
	if math.IsInf(a, 1) || math.IsInf(b, 1) {
		return math.Inf(1)
	}
	return a * b
}

// SetUp says, before anything is switched on, what the circuit can do to the
// device and to its load resistor at worst, and what is not watched.
func SetUp(l Limits, c record.Condition) []string {
	var out []string
	vdd, rl := math.Abs(c.VDD.Float()), c.RL.Float()
	switch {
	case c.Circuit != record.Fixed && rl > 0 && vdd > 0:
		p := vdd * vdd / (4 * rl)
		text := fmt.Sprintf("the most this device can see is V_DD²/4R_L = %s, at %s", show(p, "W"), show(vdd/(2*rl), "A"))
		if c.Circuit == record.Diode {
			text = fmt.Sprintf("the most this device can see is %s, were its gate voltage half of V_DD", show(p, "W"))
		}
		if l.PD > 0 {
			if p <= l.PD {
				text += fmt.Sprintf("; its limit is %s", show(l.PD, "W"))
			} else {
				text += fmt.Sprintf(": above its limit of %s, which nothing but the current limit of the supply guards in hardware", show(l.PD, "W"))
			}
		}
		out = append(out, text)
		full := vdd * vdd / rl
		text = fmt.Sprintf("fully on, or shorted, it puts V_DD²/R_L = %s into the load resistor", show(full, "W"))
		switch rating, ok := c.RLRating.Get(); {
		case !ok:
			text += "; the resistor's rating is not known"
		case full > rating:
			text += fmt.Sprintf(": above its rating of %s", show(rating, "W"))
		default:
			text += fmt.Sprintf("; it is rated %s", show(rating, "W"))
		}
		out = append(out, text)
	default:
		out = append(out, "no load resistor bounds the power in this device: only the current limit of the supply does")
	}
	for _, m := range []struct {
		name  string
		limit float64
	}{{"V_GS", l.Vgs}, {"V_DS", l.Vds}, {"I_D", l.ID}, {"P_D", l.PD}} {
		if m.limit <= 0 {
			out = append(out, m.name+" is not watched: no limit is known")
		}
	}
	return out
}

// show writes a magnitude with unit and prefix, three or four digits, as it is
// spoken at the bench: 3.150 V, 333 mA, 4.00 W.
func show(x float64, unit string) string {
	a := math.Abs(x)
	switch {
	case math.IsNaN(x):
		return "n/a"
	case math.IsInf(x, 0):
		return "overload"
	case unit == "degC":
		return fmt.Sprintf("%.1f °C", x)
	case unit == "V" && a >= 0.1 && a < 10:
		return fmt.Sprintf("%.3f V", x)
	case a == 0:
		return "0 " + unit
	}
	for _, p := range []struct {
		f float64
		s string
	}{{1, ""}, {1e-3, "m"}, {1e-6, "µ"}, {1e-9, "n"}} {
		if y := a / p.f; y >= 0.9995 || p.f == 1e-9 {
			digits := 2
			if y >= 99.95 {
				digits = 0
			} else if y >= 9.995 {
				digits = 1
			}
			return fmt.Sprintf("%.*f %s%s", digits, x/p.f, p.s, unit)
		}
	}
	return ""
}
