package lot

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
)

// familyColumns are the quantities, besides the curve, in which devices of one
// family are alike: one gate voltage (that which the lot is sorted by), the gain
// factor and the transconductance at the idle current. The two gains mostly say
// the same, but by one the whole curve speaks and by the other the place where
// the device will work, and either may be missing. A second gate voltage would
// say the same again: every quantity looked at costs power in all, for the false
// alarms of a lot are limited together. A gate span stands in where no gain is
// known.
func (l *judge) familyColumns() []*column {
	voltage := l.most(l.sortedBy, isThreshold, fit.KeyVgsIdle, fit.KeyVgsth)
	gains := l.gains()
	var out []*column
	if voltage != nil && len(voltage.sorted) > 0 {
		out = append(out, voltage)
	}
	if isGain(l.sortedBy) && len(gains) > 0 && gains[0].key == l.sortedBy {
		return append(gains[:1:1], append(out, gains[1:]...)...) // the one that the lot is sorted by first
	}
	return append(out, gains...)
}

// gains are the measures of drive strength: the one that most devices have, and
// of gain factor and transconductance at the idle current the other, where
// enough devices have it to judge one another, or half as many as have the first.
func (l *judge) gains() []*column {
	first := l.most(l.sortedBy, isGain, fit.KeyGmIdle, fit.KeyBeta, fit.KeyGmMax)
	if first == nil || len(first.sorted) == 0 {
		return l.span()
	}
	out := []*column{l.oneMethod(first)}
	for _, k := range []fit.Key{fit.KeyGmIdle, fit.KeyBeta} {
		if k == first.key {
			continue
		}
		c := l.oneMethod(l.columns[k])
		if n := len(c.sorted); n > 0 && (n >= fewest || 2*n >= len(first.sorted)) {
			out = append(out, c)
		}
	}
	return out
}

// oneMethod leaves out gain factors that were not found by the method of most
// devices: those of a straight line through √I and of one through I differ by
// more than devices do. Other quantities stay as they are.
func (l *judge) oneMethod(c *column) *column {
	if c.key != fit.KeyBeta {
		return c
	}
	count := map[string]int{}
	var most string
	for i, x := range c.x {
		if m := l.devs[i].Result.Method; !math.IsNaN(x) {
			if count[m]++; count[m] > count[most] || count[m] == count[most] && m < most {
				most = m
			}
		}
	}
	if count[most] == len(c.sorted) {
		return c
	}
	other := make([]bool, len(c.x))
	for i := range other {
		other[i] = l.devs[i].Result.Method != most
	}
	return c.without(other)
}

// span is the gate span, where any device has one.
func (l *judge) span() []*column {
	step := math.Max(l.opt.Resolution[fit.KeyVgsth], l.opt.Resolution[fit.KeyVgsIdle])
	if !(step > 0) {
		step = math.Max(l.columns[fit.KeyVgsth].step, l.columns[fit.KeyVgsIdle].step)
	}
	c := columnOf(l.devs, KeySpan, l.opt.PChannel, step)
	if len(c.sorted) == 0 {
		return nil
	}
	l.columns[KeySpan] = c
	l.keys = append(l.keys, KeySpan)
	return []*column{c}
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

// setLimits works out the limits of every quantity that can have some. In a lot
// of two populations of like size there are none: neither is the odd one. All
// departures of the curve together count as one quantity; as many of them as
// there are currents are free, less the two that shift and gain take up.
func (l *judge) setLimits() {
	if l.groups != nil && l.odd == nil {
		return
	}
	quantities := 0
	able := func(c *column) bool { return len(l.main(c).sorted) >= fewest || l.knownSD(c) > 0 }
	for _, c := range l.family {
		if able(c) {
			quantities++
		}
	}
	if slices.ContainsFunc(l.curve, able) {
		quantities++
	}
	for _, c := range l.family {
		l.setLimit(c, quantities)
	}
	for _, c := range l.curve {
		l.setLimit(c, quantities*(len(l.curve)-2))
	}
}

// setLimit judges by a column, if it can, as one of that many quantities: by the
// lot itself, else by the spread of earlier lots. It does not where too many of
// its devices are above the current to say where its middle lies.
func (l *judge) setLimit(c *column, quantities int) {
	var b band
	switch main := l.main(c); {
	case len(main.sorted) >= fewest:
		b = bandOf(main, l.opt.K, quantities)
	case l.knownSD(c) > 0:
		b = bandKnown(main, l.knownSD(c), l.opt.Known.devices(c.key), l.opt.K, quantities)
	default:
		return
	}
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
	if k == nil || k.devices(c.key) < fewest {
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

// devices behind the known spread of a quantity.
func (k *Known) devices(key fit.Key) int {
	if n, ok := k.Of[key]; ok {
		return n
	}
	return k.Devices
}

// familyReasons says in which respects device i stands apart from its lot: one
// sentence for the gate voltage, one for the gain and one for the curve, each by
// the quantity, or at the current, that is farthest off.
func (l *judge) familyReasons(i int) []Reason {
	var out []Reason
	whose := "the lot's"
	if l.odd != nil {
		whose = "the greater group's"
		if l.odd[i] {
			c := l.groups.col
			out = append(out, Reason{fit.CodeTwoPopulations, fmt.Sprintf("%s of %s puts it with the smaller of two groups: %s",
				NameOf(c.key), show(c.key, c.v[i]), l.oddWords)})
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
	if curve := l.farthest(i, isCurve); curve != nil {
		out = append(out, Reason{fit.CodeOffFamilyCurve, curveSentence(curve, i) + l.curveRange(i)})
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
		return fmt.Sprintf("robust spreads, known from %d earlier devices,", l.opt.Known.devices(j.col.key))
	}
	return "robust spreads"
}
