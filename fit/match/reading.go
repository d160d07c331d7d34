package match

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// notOffered says why a member does not take part whatever it is matched by.
func notOffered(m *Member) string {
	switch {
	case m.Locked != "":
		return "it is in set " + m.Locked
	case m.Out != "":
		return m.Out
	case m.Result.State == fit.Above:
		return "" // the value says which current
	case m.Result.State != fit.Measured:
		if m.Result.Why != "" {
			return string(m.Result.State) + ": " + m.Result.Why
		}
		return string(m.Result.State)
	case m.Result.Has(fit.CodeDrainLeakage):
		return "it is flagged " + fit.CodeDrainLeakage
	}
	return ""
}

// chooseCurrents finds the currents at which curves are compared.
func (p *problem) chooseCurrents(why []string) error {
	if !slices.ContainsFunc(p.opt.By, func(c Criterion) bool { return c.Key == KeyCurve }) {
		return nil
	}
	have := map[float64]int{}
	n := 0
	for i := range p.members {
		if why[i] != "" {
			continue
		}
		if len(p.members[i].Result.Levels) > 0 {
			n++
		}
		for _, l := range p.members[i].Result.Levels {
			have[l.I]++
		}
	}
	for _, c := range fit.LevelCurrents {
		low, high := p.opt.From*(1-1e-9), math.Inf(1)
		if p.opt.To > 0 {
			high = p.opt.To * (1 + 1e-9)
		}
		if c < low || c > high {
			continue
		}
		if p.opt.To > 0 && have[c] > 0 || 4*have[c] >= 3*n && n > 0 {
			p.currents = append(p.currents, c)
		}
	}
	if len(p.currents) == 0 {
		return fmt.Errorf("%w: %d devices have a curve, and of %s none or too few of them tell anything", ErrCurrents, n, currentRange(p.opt.From, p.opt.To))
	}
	return nil
}

// read gives the values of a member by criterion, with their u, or why it has not
// all of them.
func (p *problem) read(i int) (values, u []float64, why string) {
	m := &p.members[i]
	r := &m.Result
	for _, c := range p.opt.By {
		if c.Key == KeyCurve {
			worst := math.NaN()
			for _, at := range p.currents {
				l, ok := levelAt(r, at)
				if !ok {
					return nil, nil, "no gate voltage at " + amperes(at)
				}
				worst = math.Max(worst, l.U)
				if math.IsNaN(worst) {
					worst = l.U
				}
			}
			v, _, _ := lot.Read(r, fit.KeyVgsIdle)
			values, u = append(values, v), append(u, worst)
			continue
		}
		v, w, above := lot.Read(r, c.Key)
		switch {
		case above:
			return nil, nil, "it never reaches " + p.currentOf(c.Key)
		case math.IsNaN(v) || isGain(c.Key) && v == 0:
			return nil, nil, "no " + p.nameOf(c.Key)
		}
		if isGain(c.Key) {
			w /= math.Abs(v)
		}
		values, u = append(values, v), append(u, w)
	}
	return values, u, ""
}

func levelAt(r *fit.Result, at float64) (fit.Level, bool) {
	for _, l := range r.Levels {
		if l.I == at && known(l.Vg) {
			return l, true
		}
	}
	return fit.Level{}, false
}

// packages makes the items, and takes out packages of which a side is out.
func (p *problem) packages(why []string) {
	sides := map[[2]string][]int{}
	for i := range p.members {
		if m := &p.members[i]; m.Package != "" {
			key := [2]string{m.Lot, m.Package}
			sides[key] = append(sides[key], i)
		}
	}
	for key, in := range sides {
		out := -1
		for _, i := range in {
			if why[i] != "" {
				out = i
			}
		}
		for _, i := range in {
			switch {
			case why[i] != "":
			case out >= 0:
				why[i] = fmt.Sprintf("the other side of package %s, %s, is out: %s", key[1], p.members[out].Name, why[out])
			case len(in) > p.opt.Size:
				why[i] = fmt.Sprintf("its package %s has %d devices, a set %d", key[1], len(in), p.opt.Size)
			}
		}
	}
	place := map[[2]string]int{}
	for i := range p.members {
		m := &p.members[i]
		if why[i] != "" {
			p.left = append(p.left, LeftOver{Member: i, Name: m.Name, Lot: m.Lot, Out: true, Locked: m.Locked, Why: why[i]})
			continue
		}
		d := len(p.used)
		p.used = append(p.used, i)
		key := [2]string{m.Lot, m.Package}
		at, ok := place[key]
		if m.Package == "" || !ok {
			at = len(p.items)
			p.items = append(p.items, item{})
			if m.Package != "" {
				place[key] = at
			}
		}
		it := &p.items[at]
		it.devices = append(it.devices, d)
		if m.PChannel {
			it.p++
		}
	}
}
