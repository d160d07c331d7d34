package bias

import (
	"errors"
	"fmt"
	"math"

	"gatesill/fit"
)

// The ways in which devices on one gate line cannot be solved for.
var (
	ErrBeyond  = errors.New("the curve ends before the current")
	ErrRunaway = errors.New("no stable operating point")
	ErrLine    = errors.New("devices on one line cannot be solved for")
)

// LineOptions are the conditions of devices on one gate line.
type LineOptions struct {
	Total  float64 // A, wanted of all together
	Source float64 // ohm, resistor in each source; 0: none
	VDS    float64 // V, magnitude, from drain to the far end of the source resistor; NaN: not given, no dissipation
	Rth    float64 // K/W, from each device to the common heat sink; NaN: not given
	Sink   float64 // °C of the heat sink when hot; NaN: Temp
	Temp   float64 // °C at which the devices were measured
	Tempco float64 // V/K, change of the gate voltage at constant current; NaN: not known, nothing hot is said
}

// hot reports whether the hot state can be told.
func (o *LineOptions) hot() bool {
	return isNumber(o.VDS) && isNumber(o.Rth) && isNumber(o.Tempco)
}

// On is what a device on a line does in one state.
type On struct {
	I     float64   // A, as solved for
	Told  fit.Drawn // A, the same as far as anything tells: less than the end of a curve is only that
	Power float64   // W, in the device; NaN: V_DS not given
	Temp  float64   // °C, of the device; NaN: not told
}

// State is a whole line in one state.
type State struct {
	Gate    float64 // V, common
	Total   float64 // A
	Devices []On    // in the order of the line
	Err     error   // why there is none; nil: there is
}

// Ratio of the greatest to the least current; +Inf where one draws nothing.
func (s *State) Ratio() float64 {
	lo, hi := math.Inf(1), 0.0
	for _, d := range s.Devices {
		lo, hi = math.Min(lo, d.I), math.Max(hi, d.I)
	}
	return hi / lo
}

// Worst is the index of the device with the greatest current.
func (s *State) Worst() int {
	at := 0
	for i, d := range s.Devices {
		if d.I > s.Devices[at].I {
			at = i
		}
	}
	return at
}

// Line is devices with their gates on one line.
type Line struct {
	LineOptions
	Names []string
	Gates []fit.Quantity // V, of each alone at the idle current
	By    []string       // on what each rests
	Cold  State          // at the temperature measured, gate set for the total
	Kept  State          // warmed up, the gate left where it was set cold; no devices where nothing hot is told
	Hot   State          // warmed up, gate set again for the total
	Bare  *State         // cold without the source resistors, where there are some
}

// Member is one device of a line.
type Member struct {
	Name   string
	Result *fit.Result
}

// LineOf solves devices on one gate line for their common gate voltage and their
// currents:
//
//	I_k = f_k(V - I_k R_S - s (T_k - T_0)),  Σ I_k = total,  T_k = sink + I_k (V_DS - I_k R_S) R_th
//
// where f_k is the device's own curve (see [fit.Result.Drain]) and s the coefficient of
// the gate voltage. Cold, T_k = T_0. For a given V each device stands alone; its current
// is the least that solves its equation, to which it comes when it is switched on. The
// sum rises with V, which is found by halving. A state without a solution has Err:
// [ErrRunaway] where heating outruns the resistors (the sum jumps over the total, or a device finds no solution up
// to ten times the total), [ErrBeyond] where a device would carry more than its curve
// tells. Curves are taken at the V_DS at which they were measured.
//
// Errors: [ErrLine] where devices are missing or their currents are not told. Checked:
// TestParalleledAgainstSimulator, TestLineSolves, TestLineExtremes, TestRunaway.
func LineOf(members []Member, idle, beta float64, pchannel bool, o LineOptions) (*Line, error) {
	l := &Line{LineOptions: o}
	if len(members) < 2 {
		return nil, fmt.Errorf("%w: %d devices, two or more are needed", ErrLine, len(members))
	}
	if !(o.Total > 0) || o.Source < 0 {
		return nil, fmt.Errorf("%w: total of %g A, source resistor of %g Ω", ErrLine, o.Total, o.Source)
	}
	var ds []fit.Drain
	for _, m := range members {
		d := m.Result.Drain(idle, beta, pchannel)
		if d.By == "" {
			return nil, fmt.Errorf("%w: neither curve nor gain tells the current of device %s", ErrLine, m.Name)
		}
		ds = append(ds, d)
		l.Names, l.By, l.Gates = append(l.Names, m.Name), append(l.By, d.By), append(l.Gates, m.Result.VgsIdle)
	}
	s := solver{ds: ds, o: o, sign: 1}
	if pchannel {
		s.sign = -1
	}
	l.Cold = s.set(false)
	if o.Source > 0 {
		bare := s
		bare.o.Source = 0
		b := bare.set(false)
		l.Bare = &b
	}
	if o.hot() {
		if l.Kept = (State{Err: l.Cold.Err}); l.Cold.Err == nil {
			l.Kept = s.state(l.Cold.Gate, true)
		}
		l.Hot = s.set(true)
	}
	return l, nil
}

// solver works with gate voltages turned so that more means more current.
type solver struct {
	ds   []fit.Drain
	o    LineOptions
	sign float64
}

// current is what one device draws at a gate voltage, and whether it has a stable one.
func (s *solver) current(k int, v float64, hot bool) (float64, bool) {
	f := func(i float64) float64 {
		gate := v - i*s.o.Source
		if hot {
			gate -= s.sign * s.o.Tempco * (s.temp(i) - s.o.Temp)
		}
		return s.ds[k].Continued(s.sign * gate)
	}
	top := f(0)
	if !hot {
		if s.o.Source == 0 {
			return top, true
		}
		return halve(0, top, func(i float64) bool { return f(i) > i }), true // f falls: one solution
	}
	// The least solution: steps upwards, fine at first, then halved.
	most := 10 * math.Max(s.o.Total, top)
	last := 0.0
	for step := 1; step <= 600; step++ {
		i := most * math.Pow(float64(step)/600, 2)
		if f(i) <= i {
			return halve(last, i, func(i float64) bool { return f(i) > i }), true
		}
		last = i
	}
	return most, false
}

// temp is the temperature of a device that carries i.
func (s *solver) temp(i float64) float64 {
	sink := s.o.Sink
	if !isNumber(sink) {
		sink = s.o.Temp
	}
	return sink + s.o.Rth*s.power(i)
}

func (s *solver) power(i float64) float64 { return i * math.Max(0, s.o.VDS-i*s.o.Source) }

// halve finds where below ends between lo, where it holds, and hi.
func halve(lo, hi float64, below func(float64) bool) float64 {
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid == lo || mid == hi {
			break
		}
		if below(mid) {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi
}

// total is the sum of the currents at a gate voltage, turned.
func (s *solver) total(v float64, hot bool) (sum float64, stable bool) {
	stable = true
	for k := range s.ds {
		i, ok := s.current(k, v, hot)
		sum, stable = sum+i, stable && ok
	}
	return sum, stable
}

// set finds the gate voltage for the total.
func (s *solver) set(hot bool) State {
	lo, hi := s.bracket(hot)
	if math.IsNaN(lo) {
		return State{Gate: math.NaN(), Err: ErrBeyond}
	}
	v := halve(lo, hi, func(v float64) bool { sum, _ := s.total(v, hot); return sum < s.o.Total })
	sum, stable := s.total(v, hot)
	if !stable || math.Abs(sum-s.o.Total) > 1e-4*s.o.Total {
		return State{Gate: math.NaN(), Err: ErrRunaway} // the sum jumps over the total
	}
	return s.state(s.sign*v, hot)
}

// bracket gives gate voltages, turned, with less and more than the total; NaN: none.
func (s *solver) bracket(hot bool) (lo, hi float64) {
	lo = math.Inf(1)
	for _, d := range s.ds {
		if off, _ := d.Ends(); isNumber(off) {
			lo = math.Min(lo, s.sign*off)
		}
	}
	if !isNumber(lo) {
		lo = 0
	}
	for step := 0.5; ; step *= 2 {
		if sum, _ := s.total(lo, hot); sum < s.o.Total {
			break
		} else if step > 1e3 {
			return math.NaN(), math.NaN()
		}
		lo -= step
	}
	hi = lo
	for step := 0.5; ; step *= 2 {
		hi += step
		if sum, _ := s.total(hi, hot); sum >= s.o.Total {
			return lo, hi
		} else if step > 1e3 {
			return math.NaN(), math.NaN()
		}
	}
}

// state is the line at a gate voltage.
func (s *solver) state(gate float64, hot bool) State {
	out := State{Gate: gate}
	for k := range s.ds {
		i, ok := s.current(k, s.sign*gate, hot)
		if !ok {
			return State{Gate: gate, Err: fmt.Errorf("device %d: %w", k+1, ErrRunaway)}
		}
		d := On{I: i, Power: s.power(i), Temp: s.o.Temp}
		inner := gate - s.sign*i*s.o.Source
		if hot {
			d.Temp = s.temp(i)
			inner -= s.o.Tempco * (d.Temp - s.o.Temp)
		}
		switch d.Told = s.ds[k].At(inner); {
		case d.Told.Beyond > 0:
			return State{Gate: gate, Err: fmt.Errorf("device %d: %w", k+1, ErrBeyond)}
		case d.Told.Beyond == 0:
			d.Told.I = i
		}
		out.Devices, out.Total = append(out.Devices, d), out.Total+i
	}
	return out
}
