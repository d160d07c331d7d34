package fit

import (
	"cmp"
	"math"
	"slices"
	"strconv"
	"strings"
)

const (
	// sweepsApart is how many standard uncertainties of their difference two sweeps
	// of one device may lie apart, sweepsLeast and sweepsCoarse how many volts they
	// may in any case: less matters to nobody, and what two coarse grids interpolate
	// in the knee is not known better (judgements; the same limits call heating).
	sweepsApart  = 3
	sweepsLeast  = 0.5e-3
	sweepsCoarse = 20e-3
)

// Combine makes one result of the sweeps of a device. Each sweep was evaluated
// apart; dirs[k] is "up", "down" or "spot" of rs[k] (missing: unknown).
//
// Gate voltages at a current: the mean weighted with 1/u² where the sweeps agree
// within three standard uncertainties of their differences, else the first up
// sweep and the warning sweeps-disagree. The random uncertainty is that of the
// mean, widened by the scatter where that is greater; the step of a display and the
// rest of the absolute uncertainty are common to the sweeps and are not averaged.
//
// Extrapolated threshold, gain factor, mobility reduction, transconductances and
// leakage depend on the stretch that a sweep covers, and two sweeps of one device
// differ in them by more than their uncertainties without anything being wrong:
// where they do, the first up sweep's value stands (of the largest transconductance
// the greatest), its random uncertainty widened to half of the difference. Of
// thresholds by different methods only those by the shown one are averaged: the
// leading sweep's method, or that of the first sweep that has any.
//
// Up and down sweep apart by more than three standard uncertainties at the same
// current: warning heating; see [Drift] for what whole curves tell. No sweep in
// the other direction: heating-not-checked.
//
// LeftOut stays with the sweeps, for its indices are theirs. The state is
// Measured when any sweep is; otherwise that of the first up sweep.
//
// Source: weighted mean and its widening by the Birge ratio, R. T. Birge, Phys.
// Rev. 40 (1932) 207–227 (from memory). Checked: TestCombine,
// TestCombineDisplayStep, TestCombineMethods.
func Combine(rs []Result, dirs []string) Result {
	if len(rs) == 0 {
		r := NewResult()
		r.State, r.Why = Declined, "There is no sweep."
		return r
	}
	lead := leader(rs, dirs)
	r := rs[lead]
	r.LeftOut = nil
	r.Warnings = joinWarnings(rs)
	for i := range rs {
		r.GmRising = r.GmRising || rs[i].GmRising
	}
	r.VtBy = combineThresholds(rs, lead)
	if len(rs) > 1 {
		r.Method = methodOf(rs, lead)
		for _, k := range Keys {
			if combineQuantity(&r, rs, k, lead) {
				continue
			}
			r.Warnings = append(r.Warnings, Warning{CodeSweepsDisagree, disagreement(rs, dirs, k)})
		}
	}
	r.Warnings = append(r.Warnings, checkHeating(rs, dirs)...)
	return r
}

func direction(dirs []string, k int) string {
	if k < len(dirs) {
		return dirs[k]
	}
	return ""
}

// leader is the sweep whose state and lone values count: the first measured up
// sweep, else the first measured, else the first up sweep, else the first.
func leader(rs []Result, dirs []string) int {
	best, rank := 0, -1
	for k := range rs {
		v := 0
		if rs[k].State == Measured {
			v += 2
		}
		if direction(dirs, k) == "up" {
			v++
		}
		if v > rank {
			best, rank = k, v
		}
	}
	return best
}

func joinWarnings(rs []Result) []Warning {
	var all []Warning
	for k := range rs {
		for _, v := range rs[k].Warnings {
			if !slices.Contains(all, v) {
				all = append(all, v)
			}
		}
	}
	state := map[State]bool{}
	for k := range rs {
		state[rs[k].State] = true
	}
	if len(state) > 1 {
		text := "The sweeps of this device do not give the same state:"
		for k := range rs {
			if k > 0 {
				text += ","
			}
			text += " " + string(rs[k].State)
		}
		all = append(all, Warning{CodeSweepsDisagree, text + "."})
	}
	return all
}

// methodOf is the method of the extrapolated threshold that is shown: the leading
// sweep's, or where that has none, the first that has one.
func methodOf(rs []Result, lead int) string {
	if rs[lead].Vt.Ok() {
		return rs[lead].Method
	}
	for j := range rs {
		if rs[j].Vt.Ok() {
			return rs[j].Method
		}
	}
	return rs[lead].Method
}

// combineQuantity sets one quantity of r from the sweeps that have it, and
// reports whether they agree as far as that says something of the device.
func combineQuantity(r *Result, rs []Result, k Key, lead int) bool {
	var qs []Quantity
	mine, greatest := None(), -1
	for j := range rs {
		q := *rs[j].At(k)
		switch k {
		case KeyVt, KeyBeta, KeyTheta: // a sweep may have the method shown without showing it
			if t, ok := rs[j].VtBy[r.Method]; ok {
				q = t.of(k)
			} else if rs[j].Method != r.Method {
				continue
			}
		}
		if !q.Ok() {
			continue
		}
		if j == lead || !mine.Ok() && j > lead {
			mine = q
		}
		if greatest < 0 || q.Value > rs[greatest].At(k).Value {
			greatest = j
		}
		qs = append(qs, q)
	}
	if !mine.Ok() && len(qs) > 0 {
		mine = qs[0]
	}
	if k == KeyVgsth || k == KeyVgsIdle {
		least := sweepsLeast
		for j := range rs {
			if rs[j].coarseAt(k) {
				least = sweepsCoarse
			}
		}
		_, agree := furthest(qs, least)
		if agree {
			mine = meanOf(qs, mine)
		}
		*r.At(k) = mine
		return agree
	}
	if _, agree := furthest(qs, 0); k == KeyGmMax && !agree {
		mine, r.GmRising = *rs[greatest].At(k), rs[greatest].GmRising
	}
	*r.At(k) = overStretches(qs, mine)
	return true
}

// of is the quantity of a threshold that belongs to key k.
func (t *Threshold) of(k Key) Quantity {
	switch k {
	case KeyBeta:
		return t.Beta
	case KeyTheta:
		return t.Theta
	}
	return t.Vt
}

// coarseAt reports whether the points lie too far apart at the current of k: of
// one such warning for two currents, that is the lower, where curves are steeper.
func (r *Result) coarseAt(k Key) bool {
	n := 0
	for _, w := range r.Warnings {
		if w.Code == CodeCoarseNearCurrent {
			n++
		}
	}
	other := r.Vgsth
	if k == KeyVgsth {
		other = r.VgsIdle
	}
	return n > 1 || n == 1 && (!other.Ok() || math.Abs(r.At(k).Value) <= math.Abs(other.Value))
}

// overStretches joins values that depend on the stretch that each sweep covers:
// their mean where they agree, else mine with its random uncertainty widened to
// half of the greatest difference.
func overStretches(qs []Quantity, mine Quantity) Quantity {
	d, agree := furthest(qs, 0)
	if agree {
		return meanOf(qs, mine)
	}
	if d/2 > mine.U {
		mine = widened(mine, d/2)
	}
	return mine
}

// furthest is the greatest distance between two of them, and whether every two
// lie less than three standard uncertainties of their difference, or least, apart.
// Without uncertainties there is no telling.
func furthest(qs []Quantity, least float64) (d float64, agree bool) {
	agree = true
	for a := range qs {
		for b := a + 1; b < len(qs); b++ {
			x := math.Abs(qs[a].Value - qs[b].Value)
			d = math.Max(d, x)
			agree = agree && !(x > math.Max(least, sweepsApart*math.Hypot(qs[a].U, qs[b].U)))
		}
	}
	return d, agree
}

// meanOf is the mean of qs weighted with 1/u², mine where there is one or none.
//
// Sweeps read by one meter on one grid share the rounding of its display, and
// where that is all that is left of an uncertainty ([work.stepFloor]) it is the
// same number in both: it is common and does not average out.
func meanOf(qs []Quantity, mine Quantity) Quantity {
	if len(qs) < 2 {
		return mine
	}
	known, step := true, 0.0
	for a, q := range qs {
		known = known && q.U > 0
		for _, o := range qs[:a] {
			if math.Abs(o.U-q.U) <= 1e-9*q.U {
				step = q.U
			}
		}
	}
	weight := func(q Quantity) float64 {
		if !known {
			return 1
		}
		return 1 / (q.U * q.U)
	}
	var sum, weights, own, between, common float64
	n := 0
	for _, q := range qs {
		wt := weight(q)
		sum += wt * q.Value
		weights += wt
		own += wt * wt * math.Max(0, q.U*q.U-step*step)
		n += q.N
		between += wt * (q.UBetween*q.UBetween - q.U*q.U)
		common += wt * (q.UAbsolute*q.UAbsolute - q.U*q.U)
	}
	m := sum / weights
	out := Quantity{Value: m, U: math.NaN(), UBetween: math.NaN(), UAbsolute: math.NaN(), N: n}
	scatter := 0.0
	for _, q := range qs {
		scatter += weight(q) * (q.Value - m) * (q.Value - m)
	}
	scatter /= weights * float64(len(qs)-1)
	if known {
		out.U = math.Sqrt(math.Max(own/(weights*weights)+step*step, scatter))
		out.UBetween = math.Sqrt(out.U*out.U + math.Max(0, between/weights))
		out.UAbsolute = math.Sqrt(out.U*out.U + math.Max(0, common/weights))
		out.Budget = joinBudgets(qs, weight, weights, out.U)
	} else if scatter > 0 {
		out.U = math.Sqrt(scatter)
	} else {
		out.U = mine.U
	}
	return out
}

func differs(k Key) string { return capital(keyWords[k]) + " differs between the sweeps" }

// saysDisagreement reports whether w says that two sweeps differ in k.
func saysDisagreement(w Warning, k Key) bool {
	return w.Code == CodeSweepsDisagree && strings.HasPrefix(w.Text, differs(k))
}

// disagreement tells in words what two sweeps give for one quantity: the two that
// lie furthest apart, by their direction where those differ, else by their place.
func disagreement(rs []Result, dirs []string, k Key) string {
	a, b := -1, -1
	for j := range rs {
		q := *rs[j].At(k)
		if !q.Ok() {
			continue
		}
		if a < 0 || q.Value < rs[a].At(k).Value {
			a = j
		}
		if b < 0 || q.Value > rs[b].At(k).Value {
			b = j
		}
	}
	a, b = min(a, b), max(a, b)
	one, other := direction(dirs, a), direction(dirs, b)
	if one == "down" && other == "up" {
		a, b, one, other = b, a, other, one
	}
	if one == other || one == "" || other == "" {
		one, other = "in sweep "+strconv.Itoa(a+1), "in sweep "+strconv.Itoa(b+1)
	}
	x, y := spoken(k, rs[a].At(k).Value), spoken(k, rs[b].At(k).Value)
	return differs(k) + " by more than their uncertainty: " +
		x + " " + one + ", " + y + " " + other + "; the first up sweep is used."
}

// combineThresholds joins each method over the sweeps that have it; From and To
// are those of the leading sweep, or of the first that has the method.
func combineThresholds(rs []Result, lead int) map[string]Threshold {
	var out map[string]Threshold
	for _, method := range [...]string{"sqrt", "linear", "ratio", "curve"} {
		var vt, beta, theta []Quantity
		t, ok := rs[lead].VtBy[method]
		for j := range rs {
			o, has := rs[j].VtBy[method]
			if !has {
				continue
			}
			if !ok {
				t, ok = o, true
			}
			vt, beta = append(vt, o.Vt), append(beta, o.Beta)
			if o.Theta.Ok() {
				theta = append(theta, o.Theta)
			}
		}
		if !ok {
			continue
		}
		t.Vt, t.Beta = overStretches(vt, t.Vt), overStretches(beta, t.Beta)
		if len(theta) > 0 && !t.Theta.Ok() {
			t.Theta = theta[0]
		}
		t.Theta = overStretches(theta, t.Theta)
		if out == nil {
			out = make(map[string]Threshold, 2)
		}
		out[method] = t
	}
	return out
}

// checkHeating compares up with down sweeps at the same current.
func checkHeating(rs []Result, dirs []string) []Warning {
	var up, down []int
	sweeps := 0
	for k := range rs {
		switch direction(dirs, k) {
		case "up":
			up = append(up, k)
			sweeps++
		case "down":
			down = append(down, k)
			sweeps++
		case "spot":
		default:
			sweeps++
		}
	}
	if sweeps == 0 {
		return nil
	}
	if len(up) == 0 || len(down) == 0 {
		if slices.ContainsFunc(rs, func(r Result) bool { return r.Returned }) {
			return nil
		}
		return []Warning{{CodeHeatingNotChecked, "Swept in one direction only: heating was not checked."}}
	}
	type gap struct{ d, u float64 }
	var gaps []gap
	for _, k := range [...]Key{KeyVgsth, KeyVgsIdle} {
		for _, a := range up {
			for _, b := range down {
				p, q := *rs[a].At(k), *rs[b].At(k)
				least := sweepsLeast
				if rs[a].coarseAt(k) || rs[b].coarseAt(k) {
					least = sweepsCoarse
				}
				if _, agree := furthest([]Quantity{p, q}, least); p.Ok() && q.Ok() && !agree {
					gaps = append(gaps, gap{p.Value - q.Value, math.Hypot(p.U, q.U)})
				}
			}
		}
	}
	if len(gaps) == 0 {
		return nil
	}
	worst := slices.MaxFunc(gaps, func(a, b gap) int { return cmp.Compare(math.Abs(a.d), math.Abs(b.d)) })
	return []Warning{{CodeHeating, "Up and down sweep lie " + si(math.Abs(worst.d), "V") +
		" apart at the same current, more than their uncertainty allows: the part warms up or drifts."}}
}
