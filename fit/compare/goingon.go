package compare

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// The names of the ways to go on.
const (
	TakeAsItIs     = "take as it is"
	ReAdjust       = "re-adjust"
	ChangeResistor = "change a bias resistor"
	SortFirst      = "sort"
	SendBack       = "send back"
)

// The rules of [Options.SendBack].
const (
	ByLimits = "outside-limits"
	ByMargin = "outside-margin"
)

// goingOn says what follows from each way to go on; it prefers none. The gate
// voltage of the reference lot is the trimmed mean of those at the idle current,
// carried over to the candidate's readings by what was taken off the shift.
func (c *comparing) goingOn() []Option {
	b := c.biases()
	return []Option{c.takeAsItIs(b), c.reAdjust(b), c.changeResistor(b), c.sortFirst(), c.sendBack()}
}

// biases is where the idle current lies in both lots.
type biases struct {
	idle      float64 // A; NaN: none
	old, new  float64 // V, centres, the candidate's as if measured with the reference; NaN: not had
	off       float64 // V, taken off the shift
	candidate []*Member
	v         []float64 // V, of the candidate's devices, off taken off, ascending; infinite ones left out
	above     int       // devices without one because they never reach it
}

func (c *comparing) biases() biases {
	b := biases{idle: c.ref.lot.Idle, old: math.NaN(), new: math.NaN(), off: c.takenOff()}
	if !(b.idle > 0) {
		return b
	}
	ref, cand := c.ref, c.cand
	if c.opt.By != fit.KeyVgsIdle {
		ref, cand = valuesOf(ref.lot, fit.KeyVgsIdle), valuesOf(cand.lot, fit.KeyVgsIdle)
		if b.off != 0 {
			b.off = c.out.Common.Offset // the temperature moves the gate bias by another slope
		}
	}
	b.old, b.new = stats.TrimmedMean(ref.x, trim).Mean, stats.TrimmedMean(cand.x, trim).Mean-b.off
	b.candidate, b.above = cand.of, cand.counts.Above
	for _, v := range cand.plain {
		b.v = append(b.v, v-b.off)
	}
	return b
}

// missing says why nothing can be said of the gate bias, "" where it can.
func (b *biases) missing(c *comparing) string {
	switch {
	case !(b.idle > 0):
		return "no idle current is given"
	case math.IsNaN(b.old):
		return "the gate bias of lot " + c.ref.lot.Name + " at the idle current is not known"
	}
	return ""
}

// takeAsItIs says what the candidate's devices draw at the reference lot's gate
// voltage.
func (c *comparing) takeAsItIs(b biases) Option {
	o := Option{Name: TakeAsItIs}
	if why := b.missing(c); why != "" {
		o.Text = why + ", so that what the devices would draw at the present gate voltage is not known"
		return o
	}
	var known []fit.Drawn
	unknown, beyond := 0, 0
	how := map[string]int{}
	for _, m := range b.candidate {
		i := m.Result.CurrentBeyond(b.old+b.off, b.idle, c.opt.Beta, c.ref.lot.PChannel)
		if math.IsNaN(i.I) {
			unknown++
			continue
		}
		if i.Beyond > 0 && i.By != fit.ByCurve {
			beyond++
			i.Beyond, i.By = 0, fit.ByCurve
		}
		known = append(known, i)
		how[i.By]++
	}
	gate := fmt.Sprintf("at %s, the centre of lot %s", volts(b.old), c.ref.lot.Name)
	if len(known) == 0 {
		o.Text = gate + ", the current of no device is known: its curve, gain factor or transconductance is missing (--beta gives one for all)"
		return o
	}
	slices.SortStableFunc(known, func(a, b fit.Drawn) int {
		return cmp.Or(cmp.Compare(a.I, b.I), cmp.Compare(a.Beyond, b.Beyond))
	})
	o.Text = fmt.Sprintf("%s, they would draw %s in the median instead of %s (least %s, greatest %s; %s by %s)", gate,
		drawnWords(known[(len(known)-1)/2]), amps(b.idle), drawnWords(known[0]), drawnWords(known[len(known)-1]), devices(len(known)), mostOf(how))
	if beyond > 0 {
		o.Text += fmt.Sprintf("; %d beyond the end of the curve, carried on by the square law", beyond)
	}
	if unknown > 0 {
		o.Text += fmt.Sprintf("; of %d nothing tells", unknown)
	}
	o.Text += c.twoCentres()
	return o
}

func drawnWords(i fit.Drawn) string {
	switch i.Beyond {
	case 1:
		return "more than " + amps(i.I)
	case -1:
		return "less than " + amps(i.I)
	}
	return amps(i.I)
}

// mostOf names what was used, the most frequent first.
func mostOf(how map[string]int) string {
	var names []string
	for h := range how {
		names = append(names, h)
	}
	slices.SortFunc(names, func(a, b string) int { return cmp.Or(cmp.Compare(how[b], how[a]), cmp.Compare(a, b)) })
	return strings.Join(names, " or ")
}

// reAdjust says where the gate voltages have to go and how far trimmers must reach.
func (c *comparing) reAdjust(b biases) Option {
	o := Option{Name: ReAdjust}
	if why := b.missing(c); why != "" {
		o.Text = why
		return o
	}
	if math.IsNaN(b.new) || len(b.v) == 0 {
		o.Text = fmt.Sprintf("lot %s has no centre at the idle current: too many devices do not reach it", c.cand.lot.Name)
		return o
	}
	lo, hi := b.v[0], b.v[len(b.v)-1]
	o.Text = fmt.Sprintf("new centre %s instead of %s", volts(b.new), volts(b.old))
	if volts(b.new) == volts(b.old) {
		o.Text = fmt.Sprintf("the centre stays at %s", volts(b.old))
	}
	o.Text += b.asRead(c)
	o.Text += fmt.Sprintf("; trimmers must reach from %s to %s for the %s measured", volts(lo), volts(hi), devices(len(b.v)))
	if c.cand.lot.Populations > 1 {
		o.Text += c.twoCentres()
	} else if low, high, ok := nineteenOfTwenty(b.v); ok && (low < lo || high > hi) {
		o.Text += fmt.Sprintf("; 95 %% of a lot that lies like a normal distribution need %s to %s (95 %% confidence)", volts(low), volts(high))
	}
	if b.above > 0 {
		o.Text += fmt.Sprintf("; %s the idle current and %s more", stand(b.above, "device never reaches", "devices never reach"), map[bool]string{true: "needs", false: "need"}[b.above == 1])
	}
	return o
}

// asRead says how the new centre comes from what was read, where something was taken
// off.
func (b *biases) asRead(c *comparing) string {
	if b.off == 0 {
		return ""
	}
	return fmt.Sprintf(" (read as %s, less the %s that are not the parts')", volts(b.new+b.off), shiftWords(b.off))
}

// twoCentres is the caution of a lot that is two: its centre is nobody's.
func (c *comparing) twoCentres() string {
	if c.cand.lot.Populations < 2 {
		return ""
	}
	return fmt.Sprintf("; with care: lot %s is two populations, and between them may lie no device: go by each of them", c.cand.lot.Name)
}

// nineteenOfTwenty is the interval that holds 95 % of a normal lot with 95 %
// confidence, see [stats.ToleranceFactorTwoSided].
func nineteenOfTwenty(v []float64) (low, high float64, ok bool) {
	if len(v) < 8 {
		return 0, 0, false
	}
	m, sd := stats.MeanSD(v)
	k := stats.ToleranceFactorTwoSided(len(v), 0.95, 0.95)
	return m - k*sd, m + k*sd, true
}

// changeResistor says how far the divider's gate voltage must move.
func (c *comparing) changeResistor(b biases) Option {
	o := Option{Name: ChangeResistor}
	if why := b.missing(c); why != "" {
		o.Text = why
		return o
	}
	if math.IsNaN(b.new) {
		o.Text = fmt.Sprintf("lot %s has no centre at the idle current: too many devices do not reach it", c.cand.lot.Name)
		return o
	}
	o.Text = fmt.Sprintf("the gate voltage of the divider must move by %s, from %s to %s",
		shiftWords(b.new-b.old), volts(b.old), volts(b.new))
	if volts(b.new) == volts(b.old) {
		o.Text = fmt.Sprintf("the gate voltage of the divider stays at %s", volts(b.old))
	}
	o.Text += b.asRead(c)
	if c.cand.lot.Populations > 1 {
		o.Text += c.twoCentres()
	} else if r := c.out.Spread.Value; !math.IsNaN(r) {
		o.Text += fmt.Sprintf("; trimmers then need the reach that they had, times %.2f, the ratio of the spreads", r)
	}
	return o
}

// sortFirst says how many bins there are, and how many devices lie where the
// reference lot does.
func (c *comparing) sortFirst() Option {
	o := Option{Name: SortFirst}
	var devs []lot.Device
	for _, m := range c.cand.of {
		devs = append(devs, lot.Device{Name: m.Name, Result: m.Result})
	}
	width := lot.NiceWidth(devs, c.opt.By) // as sort and the page of the lot take it
	s, err := lot.SortInto(devs, lot.SortOptions{By: c.opt.By, Width: width})
	if err != nil {
		o.Text = "it cannot be sorted: " + err.Error()
		return o
	}
	var parts []string
	used := 0
	for _, b := range s.Bins {
		parts = append(parts, strconv.Itoa(len(b.Devices)))
		if len(b.Devices) > 0 {
			used++
		}
	}
	o.Text = fmt.Sprintf("they fill %d of %s of %s", used, stand(len(s.Bins), "bin", "bins"), millivolts(width))
	if len(parts) > 1 && len(parts) <= 12 {
		o.Text += fmt.Sprintf(", %s from %s up", strings.Join(parts, ", "), volts(s.Bins[0].Low))
	}
	if centre := c.out.Centre[0]; !math.IsNaN(c.opt.Margin) && !math.IsNaN(centre) {
		n := 0
		for _, v := range c.cand.plain {
			if math.Abs(v-c.takenOff()-centre) <= c.opt.Margin {
				n++
			}
		}
		o.Text += fmt.Sprintf("; %d of %d lie within %s of the centre of lot %s, %s", n, len(c.cand.x), millivolts(c.opt.Margin), c.ref.lot.Name, volts(centre))
	}
	return o
}

// sendBack holds the lot against the rule that the user stored; without one, or with
// one that is kept, nothing asks for it.
func (c *comparing) sendBack() Option {
	o := Option{Name: SendBack, Rule: c.opt.SendBack}
	const kept = "your stored rule is kept: "
	const broken = "your stored rule is broken: "
	switch c.opt.SendBack {
	case "":
		o.Text = "no stored rule asks for it"
	case ByLimits:
		if c.opt.Judged != "" {
			o.Text = c.opt.Judged
			return o
		}
		low, high := c.opt.LimitLow, c.opt.LimitHigh
		if math.IsNaN(low) && math.IsNaN(high) {
			o.Text = "your stored rule names the limits of the data sheet, and none are known for V_GS(th) at this current"
			return o
		}
		th := valuesOf(c.cand.lot, fit.KeyVgsth)
		if len(th.x) == 0 {
			o.Text = "your stored rule names the limits of the data sheet, and no V_GS(th) is known that they could be held against"
			return o
		}
		var out []string
		for i, v := range th.x {
			if c.ref.lot.PChannel { // limits are magnitudes, or both negative
				v, low, high = math.Abs(v), math.Abs(low), math.Abs(high)
				if low > high {
					low, high = high, low
				}
			}
			if !math.IsInf(v, 0) && (v < low || v > high) {
				out = append(out, th.of[i].Name)
			}
		}
		limits := limitWords(low, high)
		if o.Text = kept + "no device is outside " + limits; len(out) > 0 {
			o.Text = fmt.Sprintf("%s%s of %d outside %s: %s", broken, stand(len(out), "device", "devices"), len(th.x), limits, firstOf(out, 5))
		}
		if n := th.counts.Above; n > 0 {
			o.Text += "; " + neverReach(n) + ", which leaves it open"
		}
	case ByMargin:
		switch c.out.Verdict {
		case OutsideMargin:
			o.Text = broken + "the shift lies outside the margin"
		case InsideMargin:
			o.Text = kept + "the shift lies inside the margin"
		case TooFew:
			o.Text = "whether your stored rule is broken cannot be told from so few"
		default:
			o.Text = "your stored rule names a margin, and none is given"
		}
	default:
		o.Text = fmt.Sprintf("the stored rule %q is not known", c.opt.SendBack)
	}
	return o
}

func limitWords(low, high float64) string {
	switch {
	case math.IsNaN(low):
		return "the data sheet's greatest value of " + volts(high)
	case math.IsNaN(high):
		return "the data sheet's least value of " + volts(low)
	}
	return fmt.Sprintf("the data sheet's %s to %s", volts(low), volts(high))
}

// firstOf lists the first few names.
func firstOf(names []string, few int) string {
	if len(names) <= few {
		return strings.Join(names, ", ")
	}
	return strings.Join(names[:few], ", ") + fmt.Sprintf(" and %d more", len(names)-few)
}
