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
// of [fit.Keys]; limits of those by which devices were judged (V_GS(th) or gate
// bias at the idle current, gains, the whole curve); a verdict for every device.
// Physical flags
// are given whatever the size of the lot; flags for standing apart only from 8
// devices up, or with the spread of earlier lots in opt.Known.
//
// Source: limits and the test for two populations, see [DefaultLimit] and
// partingOf. Checked: TestTenFromABag and the other scenarios, TestFalseAlarms,
// TestOtherDie,
// TestDamagedDevices.
func SpreadOf(devs []Device, opt SpreadOptions) Spread {
	l := newJudge(devs, opt)
	s := Spread{
		SortedBy:    l.sortedBy,
		Populations: 1,
		Summary:     l.summaries(),
		Further:     l.further(),
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
		l.showLimit(s.Limits, j)
	}
	for i := range devs {
		s.Devices = append(s.Devices, l.verdict(i))
	}
	if l.curves != nil {
		s.Currents = l.curves.at
	}
	s.Warnings = append(s.Warnings, l.sizeWarnings()...)
	s.Warnings = append(s.Warnings, l.curveWarnings()...)
	s.Warnings = append(s.Warnings, l.readingWarnings(s.Summary)...)
	s.Warnings = append(s.Warnings, rangeEdges(devs, l.sortedBy)...)
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
	curves   *curves   // nil: the lot has none to compare
	curve    []*column // departures of the curves, by current
	groups   *twoGroups
	odd      []bool              // by device: in the small one of two populations; nil: none
	oddWords string              // what the two groups are, where one is odd
	mains    map[*column]*column // without the odd ones, as far as asked for
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
	l := &judge{devs: devs, opt: opt, columns: map[fit.Key]*column{}, centers: map[fit.Key]*judged{}, mains: map[*column]*column{}}
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
	at := opt.Currents
	if at == nil {
		at = Currents(devs)
	}
	if l.curves = curvesOf(devs, at, opt.PChannel); l.curves != nil {
		l.curve = l.curves.columns()
	}
	l.groups = findGroups(l.family)
	if l.groups != nil {
		l.findOdd()
	}
	l.setLimits()
	for _, k := range l.keys {
		l.setCenter(l.columns[k])
	}
	for _, c := range l.curve {
		l.setCenter(c)
	}
	return l
}

// setCenter gives a column without limits something to measure distances from.
func (l *judge) setCenter(c *column) {
	if _, ok := l.centers[c.key]; !ok && len(c.sorted) > 0 {
		l.centers[c.key] = &judged{c, center(l.main(c))}
	}
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

// main is a column without the devices of a small second population.
func (l *judge) main(c *column) *column {
	if l.odd == nil {
		return c
	}
	m := l.mains[c]
	if m == nil {
		m = c.without(l.odd)
		l.mains[c] = m
	}
	return m
}

func (l *judge) findOdd() {
	odd, others := l.groups.minority()
	if odd != nil {
		c := l.groups.col
		l.odd = odd
		l.oddWords = groupWords(c, odd) + ", the other " + groupWords(c, others)
	}
}

func (l *judge) summaries() map[fit.Key]Summary {
	out := map[fit.Key]Summary{}
	for _, k := range fit.Keys {
		out[k] = l.columns[k].summary()
	}
	return out
}

// further sums up the quantities that only a lot has.
func (l *judge) further() map[fit.Key]Summary {
	out := map[fit.Key]Summary{}
	if c := l.columns[KeySpan]; c != nil {
		out[KeySpan] = c.summary()
	}
	for _, c := range l.curve {
		out[c.key] = c.summary()
	}
	return out
}

// verdict of device i.
func (l *judge) verdict(i int) Verdict {
	d := &l.devs[i]
	v := Verdict{Name: d.Name, Distance: make(map[fit.Key]float64, len(l.keys)+1)}
	for _, k := range l.keys {
		far := math.NaN()
		if j, ok := l.centers[k]; ok {
			far = j.band.distance(l.columns[k], i)
		}
		v.Distance[k] = far
	}
	if l.curve != nil {
		v.Distance[KeyCurve] = l.curveDistance(i)
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

// evenWarning says why two populations of like size leave nothing flagged, and
// what a limit over the whole lot would have done.
func (l *judge) evenWarning() []fit.Warning {
	if l.odd != nil {
		return nil
	}
	c := l.groups.col
	text := "neither group is small enough to be the odd one (a quarter of the lot), so neither is flagged as a group"
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
				"%s: %d of %d devices never reach the current, so the lot has no median", NameOf(c.key), s.Above, s.N+s.Above)})
			continue
		}
		if c.step > 0 && s.N > 1 && center(c).sd <= floorOf(c.step, 0) {
			out = append(out, fit.Warning{Code: fit.CodeBenchLimited, Text: fmt.Sprintf(
				"%s: the readings step by %s, too coarse for the spread of this lot", NameOf(c.key), stepWords(c, s))})
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
