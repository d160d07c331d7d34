package table

import (
	"fmt"
	"math"

	"gatesill/store/record"
)

// settleLoad tells the voltage across R_L from that at the drain in a column
// that is only called load: with more current the first grows and the second
// shrinks. Nothing else tells the two apart.
func (r *reader) settleLoad() error {
	c := r.first(roleLoad)
	if c == nil {
		return nil
	}
	var rise, fall float64
	same, total := 0, 0
	for i := range r.file.Sweeps {
		s := &r.file.Sweeps[i]
		d := r.loadMoves(s)
		if d > 0 {
			rise += d
		} else {
			fall -= d
		}
		vg, vl := s.Values(record.VG), s.Values(record.VL)
		for k := range vl {
			total++
			if math.Abs(vl[k]-vg[k]) <= 0.02*math.Abs(vg[k]) {
				same++
			}
		}
	}
	as, why := "", ""
	switch {
	case r.opt.Given.Circuit == record.Diode || r.talkCond.Circuit == record.Diode || same*10 > total*9:
		as, why = "vd", "drain and gate are tied together"
	case rise > 0.01 && rise > 10*fall:
		as, why = "vl", "it rises with the current"
	case fall > 0.01 && fall > 10*rise:
		as, why = "vd", "it falls when the current rises"
	case c.name == "vl": // our own name for it, and the readings do not object
		as, why = "vl", "it is named so"
	default:
		n := c.index + 1
		text := fmt.Sprintf("column %s may be the voltage across R_L (vl) or at the drain (vd), and it does not tell by rising or falling with the current", c.title())
		answer, err := r.ask(Question{Text: text, Choices: []string{"vl", "vd"}, Flag: "--map"}, r.headerLine, fmt.Sprintf("--map vl=%d or --map vd=%d", n, n))
		if err != nil {
			return err
		}
		as, why = answer, "so it was answered"
	}
	for _, c := range r.mapped(roleLoad) {
		c.as, c.how = as, "behaviour"
	}
	meaning := map[string]string{"vl": "the voltage across R_L", "vd": "the drain voltage"}[as]
	r.note("column %s is %s: %s", c.title(), meaning, why)
	if as == "vd" {
		for i := range r.file.Sweeps {
			r.file.Sweeps[i].rename(record.VL, record.VD)
		}
	}
	return nil
}

// loadMoves is how far the magnitude of the load voltage goes, in volts, from
// the third of the points with the least current to the third with the most.
// Without a current column the gate voltage stands for the current.
func (r *reader) loadMoves(s *Sweep) float64 {
	by, v := s.Values(record.ID), s.Values(record.VL)
	sign := 0.0 // of the current: its magnitude counts
	if by == nil {
		by, sign = s.Values(record.VG), 1
		if r.opt.PChannel && len(by) > 0 && by[len(by)/2] < 0 {
			sign = -1
		}
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	current := func(i int) float64 {
		if sign == 0 {
			return math.Abs(by[i])
		}
		return sign * by[i]
	}
	for i := range v {
		if x := current(i); x == x && v[i] == v[i] {
			lo, hi = min(lo, x), max(hi, x)
		}
	}
	var low, high, nLow, nHigh float64
	for i := range v {
		x := current(i)
		switch {
		case x != x || v[i] != v[i]:
		case x <= lo+(hi-lo)/3:
			low += math.Abs(v[i])
			nLow++
		case x >= hi-(hi-lo)/3:
			high += math.Abs(v[i])
			nHigh++
		}
	}
	if nLow == 0 || nHigh == 0 {
		return 0
	}
	return high/nHigh - low/nLow
}

// rename gives a column another quantity, and its marks too.
func (s *Sweep) rename(from, to record.Quantity) {
	if c := s.Column(from); c != nil {
		c.Quantity = to
	}
	for i := range s.Marks {
		if s.Marks[i].Quantity == from {
			s.Marks[i].Quantity = to
		}
	}
}
