package fit

import (
	"cmp"
	"math"
	"slices"

	"gatesill/fit/stats"
)

// Input is what a contribution to an uncertainty comes from.
type Input uint8

// The inputs. Which of the three sums one enters is fixed, see [Input.In].
const (
	InScatter       Input = iota // of the readings about the curve
	InGateScatter                // of the gate reading
	InGateStep                   // step of the gate display
	InCurrentNoise               // noise and counts of the current
	InReading                    // what the curve may be between the points
	InPairing                    // of gate and current that were not read at one instant
	InSweeps                     // what several sweeps differ by, or share beside their own scatter
	InRepeat                     // what a device reads differently by when it is put in again
	InGateOffset                 // counts of the gate meter's statement
	InCurrentOffset              // counts of the statement of the meter of the current
	InResistorDrift              // R_L from one session to the next
	InTemperature                // of the part
	InGateGain                   // what the gate meter's statement leaves beside its counts
	InCurrentGain                // the same of the meter of the current
	InResistor                   // tolerance of R_L
	InTwoCurrents                // two currents that contradict their statements
	InBurden                     // ammeter, where the drain voltage is small
	InModel                      // what the equation of the curve may be wrong by
	inputCount
)

// Sum is one of the three standard uncertainties of a [Quantity].
type Sum uint8

// The sums: each holds all that the one before it holds.
const (
	Within Sum = iota
	Between
	Absolute
)

// In reports whether the input enters that sum. Within a session: what is drawn
// anew with every reading or every reading-off. Between sessions on one bench:
// besides, the counts of the statements (offsets), the drift of R_L and the
// temperature; the gains of the same meters stay as they are. Absolute: everything.
func (in Input) In(s Sum) bool {
	switch {
	case in <= InRepeat:
		return true
	case in <= InTemperature:
		return s >= Between
	}
	return s == Absolute
}

// part is one contribution while it is worked out.
type part struct {
	u float64 // standard uncertainty of the input; NaN: not known
	c float64 // what the quantity changes by per unit of the input
}

// budget holds the contributions to the uncertainty of one quantity, by input; the
// zero value has none. Three sums over it are the uncertainties of the quantity,
// and nothing else is: [work.quantity].
type budget [inputCount]part

// add sets a contribution: an input with standard uncertainty u that the quantity
// follows with c. What the quantity does not follow (c = 0) contributes nothing,
// known or not.
func (b *budget) add(in Input, u, c float64) {
	if c != 0 && u != 0 {
		b[in] = part{u, c}
	}
}

// sum is the root of the sum of the squares that enter s; NaN where one is not known.
func (b *budget) sum(s Sum) float64 {
	total := 0.0
	for in := range b {
		if Input(in).In(s) {
			x := b[in].u * b[in].c
			total += x * x
		}
	}
	return math.Sqrt(total)
}

// raise makes the sum within a session at least floor, V, by the step of the display.
func (b *budget) raise(floor float64) {
	u := b.sum(Within)
	if !(floor > u) {
		return
	}
	p := &b[InGateStep]
	step := rss(p.u*p.c, math.Sqrt(floor*floor-u*u))
	if !(p.u > 0) {
		p.u = floor
	}
	p.c = step / p.u
}

// quantity makes the quantity of a value, with its own sign, from its contributions.
// nu is the degrees of freedom of what was estimated from scatter, for the table.
func (w *work) quantity(value float64, b *budget, n int, nu float64) Quantity {
	q := Quantity{Value: value, U: b.sum(Within), UBetween: b.sum(Between), UAbsolute: b.sum(Absolute), N: n}
	if w.s.Budget {
		q.Budget = b.table(w, nu)
	}
	return q
}

// gateVoltage is the quantity of a gate voltage v, with the sign of an n-channel part.
func (w *work) gateVoltage(v float64, b *budget, n int, nu float64) Quantity {
	if w.sign < 0 {
		for in := range b {
			b[in].c = -b[in].c
		}
	}
	return w.quantity(w.sign*v, b, n, nu)
}

// Budget is how the three uncertainties of a quantity come about.
type Budget struct {
	Lines []Contribution // by input, in the order of the inputs
}

// Contribution is one line of a budget.
type Contribution struct {
	Input Input
	Name  string  // of the input, in words
	U     float64 // standard uncertainty of the input in Unit; NaN: not known
	Unit  string  // of the input: "V", "A", "%", "K"; "": that of the quantity
	C     float64 // sensitivity coefficient, unit of the quantity per Unit
	Type  string  // "A" from the scatter of readings, "B" otherwise
	Shape string  // distribution: "normal" or "rectangular"
	Nu    float64 // degrees of freedom; +Inf: not limited
	Basis string  // what U rests on where that is no statement: an assumption; ""
}

// Share is what the line contributes to the standard uncertainty of the quantity, in
// its unit.
func (c Contribution) Share() float64 { return math.Abs(c.C * c.U) }

// Largest gives the lines with the largest contribution first; those that are not
// known come before all others.
func (b *Budget) Largest() []Contribution {
	out := slices.Clone(b.Lines)
	slices.SortStableFunc(out, func(x, y Contribution) int {
		a, b := x.Share(), y.Share()
		if math.IsNaN(a) != math.IsNaN(b) {
			if math.IsNaN(a) {
				return -1
			}
			return 1
		}
		return cmp.Compare(b, a)
	})
	return out
}

// Total is one of the three uncertainties with its interval.
type Total struct {
	U        float64 // standard uncertainty
	Nu       float64 // effective degrees of freedom; +Inf: not limited
	K        float64 // coverage factor for 95 %
	Expanded float64 // K U
}

// coverLevel is the level of the expanded uncertainty.
const coverLevel = 0.95

// Total gives one of the three sums: U is the root of the sum of the squares of the
// lines that enter it, ν_eff by Welch and Satterthwaite, k by Student's t, or by the
// rectangle where one outweighs all else. NaN where a line is not known.
//
// Source: JCGM 100:2008 5.1.2, G.4.1 eq. (G.2b) (from memory), see fit/stats.
// Checked: TestBudgetAddsUp.
func (b *Budget) Total(s Sum) Total {
	var parts []stats.Part
	for _, c := range b.Lines {
		if c.Input.In(s) {
			parts = append(parts, stats.Part{U: c.Share(), Nu: c.Nu, Box: c.Shape == rectangular})
		}
	}
	t := Total{U: stats.RootSumSquare(parts), Nu: stats.EffectiveNu(parts), K: stats.Coverage(parts, coverLevel)}
	t.Expanded = t.K * t.U
	return t
}

const (
	rectangular = "rectangular"
	normal      = "normal"
)

// inputInfos says of every input its unit and how it is known.
var inputInfos = [inputCount]struct{ name, unit, kind, shape string }{
	InScatter:       {"scatter of the readings", "", "A", normal},
	InGateScatter:   {"gate meter scatter", "V", "A", normal},
	InGateStep:      {"gate display step", "V", "B", rectangular},
	InCurrentNoise:  {"current noise and counts", "%", "B", rectangular},
	InReading:       {"curve between the points", "V", "B", normal},
	InPairing:       {"pairing of the meters", "V", "B", normal},
	InSweeps:        {"difference of the sweeps", "", "A", normal},
	InRepeat:        {"device put in again", "", "A", normal},
	InGateOffset:    {"gate meter offset", "V", "B", rectangular},
	InCurrentOffset: {"offset", "A", "B", rectangular},
	InResistorDrift: {"R_L drift", "%", "B", rectangular},
	InTemperature:   {"temperature", "K", "B", rectangular},
	InGateGain:      {"gate meter gain", "%", "B", rectangular},
	InCurrentGain:   {"gain", "%", "B", rectangular},
	InResistor:      {"R_L tolerance", "%", "B", rectangular},
	InTwoCurrents:   {"two currents disagree", "%", "B", rectangular},
	InBurden:        {"ammeter burden", "%", "B", rectangular},
	InModel:         {"model of the curve", "", "B", normal},
}

// table writes the contributions out.
func (b *budget) table(w *work, nu float64) *Budget {
	t := &Budget{}
	for in, p := range b {
		if p.u == 0 || p.c == 0 {
			continue
		}
		info := inputInfos[in]
		c := Contribution{Input: Input(in), Name: info.name, U: p.u, Unit: info.unit, C: p.c, Type: info.kind, Shape: info.shape, Nu: math.Inf(1)}
		if info.unit == "%" { // inside a share, and what the quantity changes by per whole
			c.U, c.C = 100*p.u, p.c/100
		}
		switch Input(in) {
		case InScatter, InGateScatter:
			c.Nu = math.Max(1, nu)
		case InCurrentOffset, InCurrentGain:
			c.Name = w.currentMeter() + " " + info.name
		case InResistorDrift:
			c.Basis = "assumed"
		case InTemperature:
			if c.Basis = "room temperature assumed"; finiteNumber(w.s.Temperature) {
				c.Basis, c.Shape = "1 K assumed", normal
			}
		case InBurden:
			c.Basis = "assumed"
		}
		t.Lines = append(t.Lines, c)
	}
	return t
}

// currentMeter names the meter whose scale the currents have.
func (w *work) currentMeter() string {
	switch {
	case !w.onScaleOfLoad():
		return "ammeter"
	case w.byDrain:
		return "drain meter"
	}
	return "load meter"
}
