package bias

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// The ways in which no plan can be made.
var (
	ErrIdle   = errors.New("no idle current")
	ErrNone   = errors.New("no device has a gate voltage at the idle current")
	ErrSupply = errors.New("supply cannot give the gate voltage")
)

// level is the confidence of every statement on the parts that were not measured.
const level = 0.95

// Lot is the devices of one lot.
type Lot struct {
	Name        string
	PChannel    bool
	Populations int          // that it was found to be
	Devices     []lot.Device // in the order shown; fitted at the idle current
}

// Options are the choices of [Of].
type Options struct {
	Idle    float64  // A, magnitude
	Network *Network // nil: none
	Reach   *Range   // V, of a trimmer known in volts only; nil: not given
	IdleTol float64  // relative, by which the current of a device may be off; 0: not given
	Beta    float64  // A/V², gain of devices without one of their own; NaN: none
	Series  []Series // of the values proposed, in this order; nil: E24 and E96
	Turns   float64  // of the trimmer from end to end; 0: not said
	Tempco  Tempco   // of the gate voltage at the idle current
	Temp    float64  // °C, at which the lot was measured; NaN: not known, 25 °C is taken
}

// Unit is one device.
type Unit struct {
	Name    string
	Gate    fit.Quantity // V, at the idle current; None where Why says it
	Why     string       // why there is no gate voltage; "": there is
	Counts  bool         // in the statistics of the lot: no fault of its own, not excluded, no control part
	Above   bool         // never reaches the idle current
	Covered bool         // the network gives its gate voltage, or with IdleTol a current near enough
	Setting float64      // of the trimmer, 0 to 1; NaN: none, or the trimmer does not reach
	At      fit.Drawn    // at the gate voltage of the network as it is
	drain   fit.Drain
	result  *fit.Result
}

// Spread is what the devices of a lot draw at one gate voltage.
type Spread struct {
	Gate    float64   // V
	Known   int       // devices whose current something tells
	Unknown int       // and the others that have a gate voltage
	Least   fit.Drawn // A
	Median  fit.Drawn
	Most    fit.Drawn
	By      []string // on what they rest, most frequent first
}

// Covered is how many devices a network serves.
type Covered struct {
	Count, Of int
	Upper     float64  // one-sided upper confidence limit of the share of parts outside (Clopper and Pearson); NaN: no device
	Outside   []string // names
}

// Plan is the bias of one lot. Quantities that could not be had are NaN.
type Plan struct {
	Options
	Lot     string
	Units   []Unit
	N       int     // devices that count and have a gate voltage
	Above   int     // devices that count and never reach the idle current
	Centre  float64 // V
	By      string  // "mean" or "median"
	SD      float64 // V
	Band    lot.ToleranceBand
	Thermal Thermal

	// Of the network as it is; nil without one.
	Now *Now

	Choices []Choice
	Trim    *Trim // re-centred trimmer; nil: no network with one wanted
	Bins    []BinChoice

	pchannel bool
}

// Now is what the network gives as it is.
type Now struct {
	Middle     float64 // V, nominal, the trimmer in the middle
	Reach      Range   // V, nominal
	Tolerated  Range   // V, Middle with everything in its tolerance, worst case
	RSS        float64 // V, root-sum-square of the tolerances at Middle
	Parts      []Part  // by each tolerance
	Sure       Range   // V, reached by every board; Low above High: none
	Trimmed    bool    // there is a trimmer
	Given      bool    // Reach was given in volts: no tolerances are known
	Covered    Covered
	CoveredBy  string  // what covered means, in words
	Always     Covered // by every board, worst case; of a trimmer
	Idle       Spread  // at Middle
	Worst      Spread  // Least at the off end of Tolerated, Most at its on end
	CentreLow  fit.Drawn
	CentreHigh fit.Drawn // of a device at the centre, at the ends of Tolerated
	Share      float64   // of the variance of gate voltage against need that the tolerances make; NaN: not known
	Dominant   string    // "supply" or "resistors" where Share is above a half; else ""
}

// Of lays out the bias of a lot.
//
// Inputs: the devices fitted at the idle current, not modified. The centre is the mean where
// the tolerance interval is that of a normal lot, else the median. Errors: [ErrIdle],
// [ErrNone], those of [Network.Check], [ErrSupply].
//
// Source: tolerance interval [lot.Tolerance]; share outside [stats.BadBound]. Checked:
// TestScenarioLots.
func Of(l Lot, o Options) (*Plan, error) {
	p := &Plan{Options: o, Lot: l.Name, pchannel: l.PChannel}
	if !(o.Idle > 0) {
		return nil, ErrIdle
	}
	if len(p.Series) == 0 {
		p.Series = []Series{E24, E96}
	}
	if o.Network != nil {
		if err := o.Network.Check(); err != nil {
			return nil, err
		}
	}
	var x []float64
	without := 0
	for i := range l.Devices {
		u := unitOf(&l.Devices[i], o, l.PChannel)
		switch {
		case !u.Counts:
		case u.Gate.Ok():
			x = append(x, u.Gate.Value)
		default:
			without++
			if u.Above {
				p.Above++
			}
		}
		p.Units = append(p.Units, u)
	}
	p.N = len(x)
	if p.N == 0 {
		return nil, fmt.Errorf("lot %q: %w", l.Name, ErrNone)
	}
	p.Band = lot.Tolerance(x, without, l.Populations)
	_, p.SD = stats.MeanSD(x)
	p.Centre, p.By = centreOf(x, p.Above, l.PChannel), "median"
	if p.Band.Kind == lot.BandNormal && p.Above == 0 {
		p.Centre, _ = stats.MeanSD(x)
		p.By = "mean"
	}
	p.Thermal = thermalOf(p)
	if err := p.supplies(); err != nil {
		return nil, err
	}
	p.now()
	p.choose()
	return p, nil
}

// unitOf reads one device.
func unitOf(d *lot.Device, o Options, pchannel bool) Unit {
	u := Unit{Name: d.Name, Gate: fit.None(), Setting: math.NaN(), result: &d.Result, At: fit.Drawn{I: math.NaN()}}
	u.Counts = !d.Control && (d.Result.State == fit.Measured || d.Result.State == fit.Above)
	v, _, above := lot.Read(&d.Result, fit.KeyVgsIdle)
	switch {
	case d.Control:
		u.Why = "control part"
	case !u.Counts:
		u.Why = cmp.Or(d.Result.Why, string(d.Result.State))
	case above:
		u.Above, u.Why = true, cmp.Or(d.Result.Why, "it never reaches the idle current")
	case math.IsNaN(v):
		u.Why = "no gate voltage at the idle current"
	}
	if u.Why == "" || d.Control && !math.IsNaN(v) {
		u.Gate = d.Result.VgsIdle
		u.drain = d.Result.Drain(o.Idle, o.Beta, pchannel)
	}
	return u
}

// centreOf is the median, devices that never reach the current above every value.
func centreOf(x []float64, above int, pchannel bool) float64 {
	end := math.Inf(1)
	if pchannel {
		end = math.Inf(-1)
	}
	all := slices.Clone(x)
	for range above {
		all = append(all, end)
	}
	return stats.Median(all)
}

// supplies refuses a supply that cannot give the lot's gate voltages.
func (p *Plan) supplies() error {
	n := p.Network
	if n == nil {
		return nil
	}
	for _, u := range p.counted() {
		v := u.Gate.Value
		if v*n.Supply <= 0 {
			return fmt.Errorf("%w: device %s needs %s, and a divider of %s gives none of that sign", ErrSupply, u.Name, volts(v), supplyWords(n.Supply))
		}
	}
	if !isNumber(p.Centre) || math.Abs(p.Centre) >= math.Abs(n.Supply) {
		return fmt.Errorf("%w: the lot's centre is %s, the supply %s", ErrSupply, volts(p.Centre), supplyWords(n.Supply))
	}
	return nil
}

// counted are the devices that count and have a gate voltage.
func (p *Plan) counted() []*Unit {
	var out []*Unit
	for i := range p.Units {
		if u := &p.Units[i]; u.Counts && u.Gate.Ok() {
			out = append(out, u)
		}
	}
	return out
}

// spreadAt is what these devices draw at a gate voltage.
func spreadAt(units []*Unit, gate float64) Spread {
	nan := fit.Drawn{I: math.NaN()}
	s := Spread{Gate: gate, Least: nan, Median: nan, Most: nan}
	var all []fit.Drawn
	how := map[string]int{}
	for _, u := range units {
		i := u.drain.At(gate)
		if math.IsNaN(i.I) {
			s.Unknown++
			continue
		}
		all = append(all, i)
		how[i.By]++
	}
	s.Known = len(all)
	for by := range how {
		s.By = append(s.By, by)
	}
	slices.SortFunc(s.By, func(a, b string) int { return cmp.Or(cmp.Compare(how[b], how[a]), cmp.Compare(a, b)) })
	if len(all) > 0 {
		slices.SortStableFunc(all, func(a, b fit.Drawn) int {
			return cmp.Or(cmp.Compare(a.I, b.I), cmp.Compare(a.Beyond, b.Beyond))
		})
		s.Least, s.Median, s.Most = all[0], all[(len(all)-1)/2], all[len(all)-1]
		if n := len(all); n%2 == 0 && all[n/2-1].Beyond == 0 && all[n/2].Beyond == 0 {
			s.Median.I = (all[n/2-1].I + all[n/2].I) / 2
		}
	}
	return s
}

// now says what the network gives as it is.
func (p *Plan) now() {
	n := p.Network
	var w Now
	switch {
	case p.Reach != nil:
		w.Reach, w.Trimmed, w.Given = *p.Reach, true, true
		w.Middle = (w.Reach.Low + w.Reach.High) / 2
		w.Tolerated, w.Sure, w.RSS = noRange, noRange, math.NaN()
	case n != nil && n.Complete():
		w.Middle, w.Reach, w.Tolerated, w.Sure = n.At(0.5), n.Reach(), n.Tolerated(0.5), n.Sure()
		w.Parts = n.Parts(0.5)
		w.RSS, w.Trimmed = RootSumSquare(w.Parts), n.Trimmer > 0
	default:
		return
	}
	units := p.counted()
	w.Idle = spreadAt(units, w.Middle)
	p.tolerances(&w)
	for i := range p.Units {
		u := &p.Units[i]
		if !u.Gate.Ok() {
			continue
		}
		u.At = u.drain.At(w.Middle)
		if w.Trimmed && w.Reach.Holds(u.Gate.Value) {
			u.Setting = 0.5
			if span := w.Reach.High - w.Reach.Low; w.Given {
				u.Setting = (u.Gate.Value - w.Reach.Low) / span
				if u.Gate.Value < 0 {
					u.Setting = 1 - u.Setting
				}
			} else {
				u.Setting = math.Min(1, math.Max(0, n.Setting(u.Gate.Value)))
			}
		}
	}
	p.cover(&w)
	p.Now = &w
}

// cover counts the devices that the network serves: with a trimmer those whose gate
// voltage it reaches, else, where it is said how far the current may be off, those whose
// current is near enough. A device that never reaches the idle current is outside.
func (p *Plan) cover(w *Now) {
	var holds func(u *Unit) bool
	switch {
	case w.Trimmed:
		w.CoveredBy = "the trimmer reaches"
		holds = func(u *Unit) bool { return w.Reach.Holds(u.Gate.Value) }
		if !w.Given {
			w.Always = p.count(func(u *Unit) bool { return w.Sure.Holds(u.Gate.Value) })
		}
	case p.IdleTol > 0:
		w.CoveredBy = fmt.Sprintf("idle current within %s", percent(p.IdleTol))
		holds = func(u *Unit) bool { return u.At.Beyond == 0 && math.Abs(u.At.I-p.Idle) <= p.IdleTol*p.Idle*(1+1e-9) }
	default:
		return
	}
	w.Covered = p.count(holds)
	for i := range p.Units {
		u := &p.Units[i]
		u.Covered = u.Gate.Ok() && holds(u)
	}
}

func (p *Plan) count(holds func(u *Unit) bool) Covered {
	c := Covered{Of: p.N + p.Above}
	for i := range p.Units {
		u := &p.Units[i]
		switch {
		case !u.Counts || !u.Gate.Ok() && !u.Above:
		case u.Gate.Ok() && holds(u):
			c.Count++
		default:
			c.Outside = append(c.Outside, u.Name)
		}
	}
	c.Upper = stats.BadBound(c.Of-c.Count, c.Of, level)
	return c
}

// tolerances says what supply and resistors add to what the devices differ by: the
// variances add, because a board's network and the device put into it are independent.
func (p *Plan) tolerances(w *Now) {
	off, on := w.Tolerated.Low, w.Tolerated.High
	if p.pchannel {
		off, on = on, off
	}
	units := p.counted()
	w.Worst = w.Idle
	w.Worst.Least, w.Worst.Most = spreadAt(units, off).Least, spreadAt(units, on).Most
	w.CentreLow, w.CentreHigh = p.AtCentre(off), p.AtCentre(on)
	if w.Share = math.NaN(); w.Given {
		return
	}
	own := variance(w.Parts)
	w.Share = own / (own + p.SD*p.SD)
	if !(w.Share > 0.5) {
		return
	}
	supply := 0.0
	for _, q := range w.Parts {
		if q.Name == "supply" {
			supply = q.Volts
		}
	}
	w.Dominant = "resistors"
	if supply*supply/3 > own/2 {
		w.Dominant = "supply"
	}
}

// AtCentre is what a device at the centre of the lot draws at a gate voltage: the
// device nearest to the centre, its curve moved there. Nothing tells where no
// current of that device is told.
func (p *Plan) AtCentre(gate float64) fit.Drawn {
	units := slices.DeleteFunc(p.counted(), func(u *Unit) bool { return u.drain.By == "" })
	if len(units) == 0 || !isNumber(p.Centre) {
		return fit.Drawn{I: math.NaN()}
	}
	near := slices.MinFunc(units, func(a, b *Unit) int {
		return cmp.Compare(math.Abs(a.Gate.Value-p.Centre), math.Abs(b.Gate.Value-p.Centre))
	})
	return near.drain.At(gate + near.Gate.Value - p.Centre)
}
