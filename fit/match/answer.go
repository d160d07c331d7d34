package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// fill writes the answer down.
func (p *problem) fill(m *Matching, a *answer) {
	type made struct {
		devices []int
		d       int64
	}
	var sets []made
	for _, s := range a.sets {
		ds := p.devicesOf(s)
		// The one that needs least gate voltage first.
		slices.SortStableFunc(ds, func(x, y int) int { return compareInt(p.at[x][0], p.at[y][0]) })
		var d int64
		for i, x := range ds {
			for _, y := range ds[:i] {
				d = max(d, p.distance(x, y))
			}
		}
		sets = append(sets, made{ds, d})
	}
	slices.SortStableFunc(sets, func(a, b made) int {
		if c := compareInt(a.d, b.d); c != 0 {
			return c
		}
		return a.devices[0] - b.devices[0]
	})
	taken := make([]bool, len(p.used))
	var total, worst int64
	for k, s := range sets {
		total += s.d
		worst = max(worst, s.d)
		for _, d := range s.devices {
			taken[d] = true
		}
		set := p.set(s.devices)
		set.Number, set.Distance = k+1, float64(s.d)/nano
		m.Sets = append(m.Sets, set)
	}
	m.Total = float64(total) / nano
	if len(sets) > 0 {
		m.Worst = float64(worst) / nano
	}
	b := Bound{Kind: a.kind, Total: float64(a.total) / nano, Worst: math.NaN(), Sets: a.most, Proof: a.proof}
	if m.Aim == Worst {
		b.Worst = float64(a.worst) / nano
	}
	switch {
	case total == a.total:
		b.Gap = 0
	case a.total > 0:
		b.Gap = float64(total)/float64(a.total) - 1
	default:
		b.Gap = math.NaN()
	}
	m.Bound = b
	p.leave(m, taken)
	m.Text = p.sentence(m)
}

// set says all of one set but its number and distance.
func (p *problem) set(ds []int) Set {
	s := Set{Within: true, Spreads: make([]float64, len(p.opt.By))}
	widest := make([]int64, len(p.opt.By))
	for i, x := range ds {
		for _, y := range ds[:i] {
			s.Within = s.Within && p.inside(x, y)
			for c := range widest {
				widest[c] = max(widest[c], p.part(p.at, c, x, y))
			}
		}
	}
	u := p.setU(ds)
	s.Limit, s.Alike = 2*math.Sqrt2*u[0], true
	for c := range widest {
		diff := float64(widest[c]) / nano
		if !(diff <= 2*math.Sqrt2*u[c]) { // also where u is not known
			s.Alike = false
		}
		if isGain(p.opt.By[c].Key) {
			diff = math.Expm1(diff)
		}
		s.Spreads[c] = diff
	}
	s.Spread = s.Spreads[0]
	members := make([]Member, len(ds))
	for k, d := range ds {
		m := &p.members[p.used[d]]
		members[k] = *m
		s.Devices = append(s.Devices, Placed{Member: p.used[d], Name: m.Name, Lot: m.Lot, Package: m.Package, Side: m.Side,
			Values: slices.Clone(p.values[d]), U: p.u[d][0]})
	}
	s.Sharing = Share(members, p.opt)
	s.Repair = p.repair(members, s.Spread, s.Limit)
	p.insides(&s, ds)
	s.Text = p.setSentence(&s)
	return s
}

// setU is the greatest u of the devices, by criterion; between sessions where they
// are of several lots and it is known.
func (p *problem) setU(ds []int) []float64 {
	lots := false
	for _, d := range ds {
		lots = lots || p.members[p.used[d]].Lot != p.members[p.used[ds[0]]].Lot
	}
	u := make([]float64, len(p.opt.By))
	for c := range u {
		for _, d := range ds {
			x := p.u[d][c]
			if q := p.members[p.used[d]].Result.At(p.opt.By[c].Key); lots && q != nil && known(q.UBetween) {
				y := q.UBetween
				if isGain(p.opt.By[c].Key) {
					y /= math.Abs(q.Value)
				}
				x = math.Max(x, y)
			}
			if math.IsNaN(x) || x > u[c] {
				u[c] = x
			}
			if math.IsNaN(x) {
				break
			}
		}
	}
	return u
}

// insides gives what the packages of a set are in themselves.
func (p *problem) insides(s *Set, ds []int) {
	if p.loose() {
		return
	}
	for _, it := range p.items {
		if len(it.devices) < 2 || !slices.Contains(ds, it.devices[0]) {
			continue
		}
		var d int64
		var members []Member
		for i, x := range it.devices {
			members = append(members, p.members[p.used[x]])
			for _, y := range it.devices[:i] {
				d = max(d, p.part(p.at, 0, x, y))
			}
		}
		s.Inside = append(s.Inside, Inside{Package: members[0].Package, Lot: members[0].Lot, Spread: float64(d) / nano, Sharing: Share(members, p.opt)})
	}
}

// repair finds what makes a set equal at the idle current: the device that needs
// most gate voltage stays, the others get a source resistor of (V_most - V)/I; or
// each gate gets what its device needs above the least.
func (p *problem) repair(members []Member, spread, limit float64) Repair {
	var r Repair
	v := make([]float64, len(members))
	low, high := math.Inf(1), math.Inf(-1)
	for k := range members {
		v[k] = lawOf(&members[k], p.opt.At, p.opt.TestCurrent).idle
		if math.IsNaN(v[k]) { // then at the current at which it was matched
			x, _, _ := lot.Read(&members[k].Result, p.opt.By[0].Key)
			if members[k].PChannel {
				x = -x
			}
			v[k] = x
		}
		low, high = math.Min(low, v[k]), math.Max(high, v[k])
	}
	if !known(low) || !known(high) {
		return r
	}
	idle := p.opt.At > 0
	for k := range v {
		r.Trim = append(r.Trim, v[k]-low)
		if idle {
			r.Resistors = append(r.Resistors, (high-v[k])/p.opt.At)
		}
	}
	if high-low <= limit || high-low < 1e-6 {
		return r
	}
	var gates, sources []string
	for k := range v {
		if r.Trim[k] > 5e-7 {
			gates = append(gates, fmt.Sprintf("%s at %s", volts(r.Trim[k]), members[k].Name))
		}
		if idle && high-v[k] > 5e-7 {
			sources = append(sources, fmt.Sprintf("%s at %s", ohms(r.Resistors[k]), members[k].Name))
		}
	}
	r.Text = "More gate voltage makes them equal: " + listed(gates)
	if idle {
		r.Text += fmt.Sprintf("; or, at %s, a source resistor of %s", amperes(p.opt.At), listed(sources))
		if p.opt.SourceResistor > 0 {
			r.Text += " in addition"
		}
	}
	r.Text += "."
	return r
}

// leave lists the devices in no set with the reason, in the order given; taken is
// nil where there was nothing to choose.
func (p *problem) leave(m *Matching, taken []bool) {
	for d, i := range p.used {
		if taken != nil && taken[d] {
			continue
		}
		x := &p.members[i]
		why := "too few devices for a set"
		if taken != nil {
			why = p.whyLeft(d, taken)
		}
		m.LeftOver = append(m.LeftOver, LeftOver{Member: i, Name: x.Name, Lot: x.Lot, Why: why})
	}
	slices.SortStableFunc(m.LeftOver, func(a, b LeftOver) int { return a.Member - b.Member })
}

// alsoApart names the quantities besides the first in which two devices are further
// apart than the tolerance, "" where there are none: their distance alone would look
// near enough.
func (p *problem) alsoApart(d, e int) string {
	var in []string
	for c, most := range p.limit {
		if c > 0 && most != noLimit && p.part(p.at, c, d, e) > most {
			in = append(in, p.nameOf(p.opt.By[c].Key))
		}
	}
	if in == nil {
		return ""
	}
	return " and too far off in " + strings.Join(in, " and ")
}

// whyLeft says why a device that took part is in no set.
func (p *problem) whyLeft(d int, taken []bool) string {
	near, at := -1, int64(math.MaxInt64)
	within, free := 0, 0
	for e := range p.used {
		if e == d || p.complementary && p.opt.Size == 2 && p.members[p.used[e]].PChannel == p.members[p.used[d]].PChannel {
			continue
		}
		if x := p.distance(d, e); x < at {
			near, at = e, x
		}
		if p.inside(d, e) {
			within++
		}
		if !taken[e] {
			free++
		}
	}
	if near < 0 {
		return "there is no other device for it"
	}
	name := p.members[p.used[near]].Name
	apart := volts(float64(at) / nano)
	switch {
	case p.limits() && within == 0:
		return fmt.Sprintf("no other device is within the tolerance; the nearest, %s, is %s away%s", name, apart, p.alsoApart(d, near))
	case p.limits() && within < p.opt.Size-1:
		return fmt.Sprintf("only %s within the tolerance, too few for a set of %d", plural(within, "other device"), p.opt.Size)
	case p.opt.Aim == Best:
		return "it belongs to none of the best sets"
	case !p.limits() && free < p.opt.Size-1:
		return "the number of devices leaves some over, and the others go together better without it"
	}
	return "those within the tolerance make more or better sets without it"
}

// sentence sums the answer up.
func (p *problem) sentence(m *Matching) string {
	if len(m.Sets) == 0 {
		return fmt.Sprintf("No set of %d within the tolerance can be made of %s.", m.Size, plural(m.Offered, "device"))
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s of %d from %s, total mismatch %s, worst %s", plural(len(m.Sets), "set"), m.Size, plural(m.Offered, "device"), volts(m.Total), volts(m.Worst))
	switch {
	case m.Bound.Kind == Optimal:
		b.WriteString("; no better choice exists.")
	case len(m.Sets) < m.Bound.Sets && p.opt.Aim != Best:
		fmt.Fprintf(&b, "; at most %d sets can exist, and with this number the total cannot be below %s.", m.Bound.Sets, volts(m.Bound.Total))
	default:
		fmt.Fprintf(&b, "; no choice has a total below %s.", volts(m.Bound.Total))
	}
	return b.String()
}

// setSentence sums one set up.
func (p *problem) setSentence(s *Set) string {
	var names []string
	for _, d := range s.Devices {
		names = append(names, d.Name)
	}
	text := fmt.Sprintf("%s are within %s", listed(names), volts(s.Spread))
	if !math.IsNaN(s.Sharing.Imbalance) {
		text += fmt.Sprintf("; on one gate line their currents differ by %s of %s (%s)", amperes(s.Sharing.Imbalance), amperes(p.opt.At), percent(s.Sharing.Share))
	}
	if s.Alike {
		text += "; the bench cannot tell them apart"
	}
	return text + "."
}

// warn says what a reader must know of the whole answer.
func (p *problem) warn(m *Matching) {
	add := func(code, text string) { m.Warnings = append(m.Warnings, fit.Warning{Code: code, Text: text}) }
	first := p.opt.By[0]
	if first.Within > 0 {
		if p.step > 0 && first.Within < p.step*(1-1e-9) {
			add(fit.CodeBenchLimited, fmt.Sprintf("The tolerance of %s is below the display step of %s: only equal readings are within it, and equal readings may differ by a step.", volts(first.Within), volts(p.step)))
		} else if u := p.usualU(); 2*math.Sqrt2*u > first.Within {
			add(fit.CodeBenchLimited, fmt.Sprintf("The tolerance of %s is below the %s up to which readings of two devices cannot be told apart: devices within it may be beyond it, and the other way round.", volts(first.Within), volts(2*math.Sqrt2*u)))
		}
	}
	if p.opt.Aim == Best && len(m.Sets) < p.opt.Sets {
		add(fit.CodeNTooSmall, fmt.Sprintf("%s were asked for, %d can be made.", plural(p.opt.Sets, "set"), len(m.Sets)))
	}
	lots := map[string]bool{}
	for _, i := range p.used {
		lots[p.members[i].Lot] = true
	}
	if len(lots) > 1 {
		add(fit.CodeCommonUnknown, fmt.Sprintf("The devices are of %d lots: what the bench adds to the difference of two lots is in every set that mixes them.", len(lots)))
	}
	if p.opt.At > 0 && len(m.Sets) > 0 {
		n := 0
		for _, s := range m.Sets {
			if math.IsNaN(s.Sharing.Imbalance) {
				n++
			}
		}
		if n > 0 {
			add(fit.CodeSpotOnly, fmt.Sprintf("In %s the imbalance is given in millivolts alone: a single reading of a device does not tell how its current changes with the gate voltage.", plural(n, "set")))
		}
	}
}

// usualU is the median u of the first criterion; 0: none is known.
func (p *problem) usualU() float64 {
	var u []float64
	for d := range p.u {
		if p.u[d][0] > 0 && known(p.u[d][0]) {
			u = append(u, p.u[d][0])
		}
	}
	if len(u) == 0 {
		return 0
	}
	slices.Sort(u)
	return u[len(u)/2]
}
