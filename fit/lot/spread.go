package lot

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
)

// SpreadOf gives the spread of a lot and says which devices stand apart.
//
// Inputs: the devices in the order in which they are to be shown, not modified;
// control parts and excluded devices are listed but in no statistic, dead and
// declined ones are listed and not counted. Result: a summary of every quantity
// of [fit.Keys]; limits of those by which devices were judged (V_GS(th), gate
// bias at the idle current, gains); a verdict for every device. Physical flags
// are given whatever the size of the lot; flags for standing apart only from 8
// devices up, or with the spread of earlier lots in opt.Known.
//
// Source: limits and the test for two populations, see [DefaultLimit] and
// partingOf. Checked: TestTenFromABag and the other scenarios, TestFalseAlarms,
// TestOtherDie.
func SpreadOf(devs []Device, opt SpreadOptions) Spread {
	l := newJudge(devs, opt)
	s := Spread{
		SortedBy:    l.sortedBy,
		Populations: 1,
		Summary:     l.summaries(),
		Limits:      map[fit.Key]Limit{},
	}
	s.Estimator = estimatorWords(s.Summary[l.sortedBy].N)
	if l.groups != nil {
		s.Populations = 2
		s.Split = l.groups.split(devs)
		s.Warnings = append(s.Warnings, fit.Warning{Code: fit.CodeTwoPopulations, Text: s.Split.Text})
		s.Warnings = append(s.Warnings, l.evenWarning()...)
	}
	for _, j := range l.judged {
		s.Limits[j.col.key] = j.band.limit(j.col)
	}
	for i := range devs {
		s.Devices = append(s.Devices, l.verdict(i))
	}
	s.Warnings = append(s.Warnings, l.sizeWarnings()...)
	s.Warnings = append(s.Warnings, l.readingWarnings(s.Summary)...)
	return s
}

// judge holds what is worked out once for the whole lot.
type judge struct {
	devs     []Device
	opt      SpreadOptions
	sortedBy fit.Key
	columns  map[fit.Key]*column
	keys     []fit.Key // of columns, in order
	family   []*column // quantities by which devices of one family are alike
	groups   *twoGroups
	odd      []bool // by device: in the small one of two populations; nil: none
	oddWords string // what the two groups are, where one is odd
	judged   []judged
	centers  map[fit.Key]*judged // for distances
	leak     leakRule
}

// judged is a column with its limits.
type judged struct {
	col  *column
	band band
}

func newJudge(devs []Device, opt SpreadOptions) *judge {
	if !(opt.K > 0) || math.IsInf(opt.K, 0) {
		opt.K = 0
	}
	l := &judge{devs: devs, opt: opt, columns: map[fit.Key]*column{}, centers: map[fit.Key]*judged{}}
	for _, k := range fit.Keys {
		l.columns[k] = columnOf(devs, k, opt.PChannel, opt.Resolution[k])
	}
	l.keys = slices.Clone(fit.Keys)
	l.sortedBy = opt.SortedBy
	if l.columns[l.sortedBy] == nil {
		l.sortedBy = fit.KeyVgsth
		if len(l.columns[fit.KeyVgsIdle].sorted) > 0 {
			l.sortedBy = fit.KeyVgsIdle
		}
	}
	l.dropUnasked()
	l.leak = leakRuleOf(l.columns[fit.KeyIdss], &l.opt)
	l.family = l.familyColumns()
	l.groups = findGroups(l.family)
	if l.groups != nil {
		l.findOdd()
	}
	l.setLimits()
	for _, k := range l.keys {
		c := l.columns[k]
		if _, ok := l.centers[k]; !ok && len(c.sorted) > 0 {
			l.centers[k] = &judged{c, center(l.main(c))}
		}
	}
	return l
}

// dropUnasked forgets 'above' for a quantity that no device has, unless the lot
// is sorted by it: nobody asked for that current.
func (l *judge) dropUnasked() {
	for k, c := range l.columns {
		if k != l.sortedBy && len(c.sorted) == 0 {
			c.above = nil
		}
	}
}

// familyColumns are the quantities in which devices of one family are alike: one
// gate voltage (that which the lot is sorted by) and one measure of drive
// strength, the one that most devices have. More of each say the same again, and
// every quantity looked at costs power in all, for the false alarms of a lot are
// limited together. A gate span stands in where no gain is known.
func (l *judge) familyColumns() []*column {
	var out []*column
	add := func(c *column) {
		if c != nil && len(c.sorted) > 0 {
			out = append(out, c)
		}
	}
	add(l.most(l.sortedBy, isThreshold, fit.KeyVgsIdle, fit.KeyVgsth))
	gain := l.most(l.sortedBy, isGain, fit.KeyGmIdle, fit.KeyBeta, fit.KeyGmMax)
	add(gain)
	if isGain(l.sortedBy) && len(out) == 2 {
		out[0], out[1] = out[1], out[0] // the one that the lot is sorted by first
	}
	gains := 0
	if gain != nil {
		gains = len(gain.sorted)
	}
	if gains == 0 {
		step := math.Max(l.opt.Resolution[fit.KeyVgsth], l.opt.Resolution[fit.KeyVgsIdle])
		if !(step > 0) {
			step = math.Max(l.columns[fit.KeyVgsth].step, l.columns[fit.KeyVgsIdle].step)
		}
		span := columnOf(l.devs, KeySpan, l.opt.PChannel, step)
		if len(span.sorted) > 0 {
			l.columns[KeySpan] = span
			l.keys = append(l.keys, KeySpan)
			add(span)
		}
	}
	return out
}

// most is the column that the lot is sorted by if it is of that kind, else of the
// keys the one that most devices have, the first of equals.
func (l *judge) most(sortedBy fit.Key, kind func(fit.Key) bool, keys ...fit.Key) *column {
	if kind(sortedBy) && len(l.columns[sortedBy].sorted) > 0 {
		return l.columns[sortedBy]
	}
	var best *column
	for _, k := range keys {
		if c := l.columns[k]; c != nil && (best == nil || len(c.sorted) > len(best.sorted)) {
			best = c
		}
	}
	return best
}

// main is a column without the devices of a small second population.
func (l *judge) main(c *column) *column {
	if l.odd == nil {
		return c
	}
	return c.without(l.odd)
}

func (l *judge) findOdd() {
	odd, others := l.groups.minority()
	if odd != nil {
		c := l.groups.col
		l.odd = odd
		l.oddWords = groupWords(c, odd) + ", the other " + groupWords(c, others)
	}
}

// setLimits works out the limits of every quantity that can have some. In a lot
// of two populations of like size there are none: neither is the odd one.
func (l *judge) setLimits() {
	if l.groups != nil && l.odd == nil {
		return
	}
	var own, known []*column
	for _, c := range l.family {
		switch {
		case len(l.main(c).sorted) >= fewest:
			own = append(own, c)
		case l.knownSD(c) > 0:
			known = append(known, c)
		}
	}
	quantities := len(own) + len(known)
	for _, c := range own {
		l.limitBy(c, bandOf(l.main(c), l.opt.K, quantities))
	}
	for _, c := range known {
		l.limitBy(c, bandKnown(l.main(c), l.knownSD(c), l.opt.Known.Devices, l.opt.K, quantities))
	}
}

// limitBy judges by a column, unless too many of its devices are above the
// current to say where its middle lies.
func (l *judge) limitBy(c *column, b band) {
	if math.IsNaN(b.mid) || math.IsNaN(b.sd) {
		return
	}
	l.judged = append(l.judged, judged{c, b})
	l.centers[c.key] = &judged{c, b}
}

// knownSD is the spread of a quantity from earlier lots on the judged scale, 0
// where there is none.
func (l *judge) knownSD(c *column) float64 {
	k := l.opt.Known
	if k == nil || k.Devices < fewest {
		return 0
	}
	sd := k.RobustSD[c.key]
	if c.log {
		sd /= c.raw(center(c).mid)
	}
	if !(sd > 0) || math.IsInf(sd, 0) {
		return 0
	}
	return sd
}

func (l *judge) summaries() map[fit.Key]Summary {
	out := map[fit.Key]Summary{}
	for _, k := range fit.Keys {
		out[k] = l.columns[k].summary()
	}
	return out
}

// verdict of device i.
func (l *judge) verdict(i int) Verdict {
	d := &l.devs[i]
	v := Verdict{Name: d.Name, Distance: make(map[fit.Key]float64, len(l.keys))}
	for _, k := range l.keys {
		far := math.NaN()
		if j, ok := l.centers[k]; ok {
			far = j.band.distance(l.columns[k], i)
		}
		v.Distance[k] = far
	}
	if d.Control || d.Result.State == fit.Excluded {
		return v
	}
	v.Reasons = physical(d, &l.leak, &l.opt)
	if counts(d) {
		v.Reasons = append(v.Reasons, l.familyReasons(i)...)
	}
	v.Flagged = len(v.Reasons) > 0
	return v
}

// familyReasons says in which respects device i stands apart from its lot: one
// sentence for the gate voltage and one for the gain, each by the quantity that
// is farthest off.
func (l *judge) familyReasons(i int) []Reason {
	var out []Reason
	whose := "the lot's"
	if l.odd != nil {
		whose = "the greater group's"
		if l.odd[i] {
			c := l.groups.col
			out = append(out, Reason{fit.CodeTwoPopulations, fmt.Sprintf("%s of %s puts it with the smaller of two groups: %s",
				nameOf(c.key), show(c.key, c.v[i]), l.oddWords)})
		}
	}
	threshold, gain := l.farthest(i, isThreshold), l.farthest(i, isGain)
	if threshold != nil {
		out = append(out, Reason{fit.CodeOffFamilyThreshold, offSentence(threshold.col, &threshold.band, i, whose, l.spreads(threshold))})
	}
	if gain != nil {
		text := offSentence(gain.col, &gain.band, i, whose, l.spreads(gain))
		if threshold == nil && !math.IsNaN(l.columns[fit.KeyVgsth].x[i]) {
			text += ", while its V_GS(th) is like the others'"
		}
		out = append(out, Reason{fit.CodeOffFamilyGain, text})
	}
	return out
}

func (l *judge) farthest(i int, kind func(fit.Key) bool) *judged {
	var best *judged
	for n := range l.judged {
		j := &l.judged[n]
		if kind(j.col.key) && j.band.outside(j.col, i) &&
			(best == nil || math.Abs(j.band.distance(j.col, i)) > math.Abs(best.band.distance(best.col, i))) {
			best = j
		}
	}
	return best
}

// spreads names the unit of a distance.
func (l *judge) spreads(j *judged) string {
	if j.band.basis == BasisHistory {
		return fmt.Sprintf("robust spreads, known from %d earlier devices,", l.opt.Known.Devices)
	}
	return "robust spreads"
}

// evenWarning says why two populations of like size leave nothing flagged, and
// what a limit over the whole lot would have done.
func (l *judge) evenWarning() []fit.Warning {
	if l.odd != nil {
		return nil
	}
	c := l.groups.col
	text := "neither group is small enough to be the odd one (a quarter of the lot), so no device is flagged for standing apart"
	k := l.opt.K
	if k == 0 && len(c.sorted) >= fewest {
		k = DefaultLimit(len(c.sorted), 1)
	}
	if k > 0 {
		b := center(c)
		b.k = k
		b.widen(c, b.sd)
		would := 0
		for i := range c.x {
			if b.outside(c, i) {
				would++
			}
		}
		if would > 0 {
			text += fmt.Sprintf("; a limit of %s robust spreads over the mixed lot would flag %d", short(k), would)
		}
	}
	return []fit.Warning{{Code: fit.CodeTwoPopulations, Text: text}}
}

// sizeWarnings says for which quantities the devices are too few.
func (l *judge) sizeWarnings() []fit.Warning {
	if l.groups != nil && l.odd == nil {
		return nil
	}
	limited := map[fit.Key]band{}
	for _, j := range l.judged {
		limited[j.col.key] = j.band
	}
	first := l.columns[l.sortedBy]
	cols := l.family
	if len(cols) == 0 {
		cols = []*column{first}
	}
	var out []fit.Warning
	for _, c := range cols {
		n := len(l.main(c).sorted)
		if n >= fewest {
			continue
		}
		text := fmt.Sprintf("too few to judge one another by %s: %d devices have a value, %d are needed", nameOf(c.key), n, fewest)
		if b, ok := limited[c.key]; ok && b.basis == BasisHistory {
			text += fmt.Sprintf("; the spread of %d earlier devices of this part is used", l.opt.Known.Devices)
		} else {
			text += "; no device is flagged for standing apart in it"
		}
		out = append(out, fit.Warning{Code: fit.CodeNTooSmall, Text: text})
	}
	return out
}

// readingWarnings says where the readings limit what can be said of the spread,
// and where too many devices never reach the current.
func (l *judge) readingWarnings(sum map[fit.Key]Summary) []fit.Warning {
	var out []fit.Warning
	for _, c := range l.family {
		s := sum[c.key]
		if s.N == 0 {
			continue
		}
		if math.IsNaN(s.Median) {
			out = append(out, fit.Warning{Code: fit.CodeAboveRange, Text: fmt.Sprintf(
				"%s: %d of %d devices never reach the current, so the lot has no median", nameOf(c.key), s.Above, s.N+s.Above)})
			continue
		}
		if c.step > 0 && s.N > 1 && center(c).sd <= floorOf(c.step, 0) {
			out = append(out, fit.Warning{Code: fit.CodeBenchLimited, Text: fmt.Sprintf(
				"%s: the readings step by %s, too coarse for the spread of this lot", nameOf(c.key), stepWords(c, s))})
		}
	}
	return out
}

func stepWords(c *column, s Summary) string {
	if c.log {
		return show(c.key, s.Step)
	}
	return millivolts(s.Step)
}
