package fit

import (
	"cmp"
	"math"
	"slices"
	"strconv"
)

// sweepsApart is how many standard uncertainties of their difference two sweeps
// of one device may lie apart (judgement; the same limit calls heating).
const sweepsApart = 3

// Combine makes one result of the sweeps of a device. Each sweep was evaluated
// apart; dirs[k] is "up", "down" or "spot" of rs[k] (missing: unknown).
//
// Per quantity the mean weighted with 1/u² where the sweeps agree within
// three standard uncertainties of their differences, else the first up sweep
// and the warning sweeps-disagree. The random uncertainty is that of the mean,
// widened by the scatter where that is greater; the rest of the absolute
// uncertainty is common to the sweeps and is not averaged. Up and down sweep
// apart by more than that at the same current: warning heating. No sweep in
// the other direction: heating-not-checked.
//
// LeftOut stays with the sweeps, for its indices are theirs. The state is
// Measured when any sweep is; otherwise that of the first up sweep.
//
// Source: weighted mean and its widening by the Birge ratio, R. T. Birge, Phys.
// Rev. 40 (1932) 207–227 (from memory). Checked: TestCombine.
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
	r.VtBy = combineThresholds(rs, lead)
	for i := range rs {
		r.GmRising = r.GmRising || rs[i].GmRising
	}
	for _, k := range Keys {
		if len(rs) == 1 {
			break
		}
		q, agree := combineQuantity(rs, k, lead)
		*r.At(k) = q
		if !agree {
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

// combineQuantity gives one quantity over the sweeps that have it, and whether
// they agree.
func combineQuantity(rs []Result, k Key, lead int) (Quantity, bool) {
	var qs []Quantity
	for j := range rs {
		// Extrapolated thresholds by different methods are not averaged.
		if byMethod := k == KeyVt || k == KeyBeta || k == KeyTheta; byMethod && rs[j].Method != rs[lead].Method {
			continue
		}
		if q := *rs[j].At(k); q.Ok() {
			qs = append(qs, q)
		}
	}
	mine := *rs[lead].At(k)
	return meanOf(qs, mine)
}

// meanOf is the weighted mean of qs where they agree, else mine (or the first
// when mine has no value).
func meanOf(qs []Quantity, mine Quantity) (Quantity, bool) {
	switch len(qs) {
	case 0:
		return None(), true
	case 1:
		return qs[0], true
	}
	if !mine.Ok() {
		mine = qs[0]
	}
	if !agree(qs) {
		return mine, false
	}
	var sum, weights, common float64
	n := 0
	known := true
	for _, q := range qs {
		known = known && q.U > 0
	}
	for _, q := range qs {
		wt := 1.0
		if known {
			wt = 1 / (q.U * q.U)
		}
		sum += wt * q.Value
		weights += wt
		n += q.N
		common += wt * (q.UAbsolute*q.UAbsolute - q.U*q.U)
	}
	m := sum / weights
	out := Quantity{Value: m, U: math.NaN(), UBetween: math.NaN(), UAbsolute: math.NaN(), N: n}
	scatter := 0.0
	for _, q := range qs {
		wt := 1.0
		if known {
			wt = 1 / (q.U * q.U)
		}
		scatter += wt * (q.Value - m) * (q.Value - m)
	}
	scatter /= weights * float64(len(qs)-1)
	if known {
		out.U = math.Sqrt(math.Max(1/weights, scatter))
		out.UAbsolute = math.Sqrt(out.U*out.U + math.Max(0, common/weights))
	} else if scatter > 0 {
		out.U = math.Sqrt(scatter)
	} else {
		out.U = mine.U
	}
	return out, true
}

// agree reports whether every two of them differ by less than three standard
// uncertainties of the difference. Without uncertainties there is no telling.
func agree(qs []Quantity) bool {
	for a := range qs {
		for b := a + 1; b < len(qs); b++ {
			if d := sweepsApart * math.Hypot(qs[a].U, qs[b].U); math.Abs(qs[a].Value-qs[b].Value) > d {
				return false
			}
		}
	}
	return true
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
	return capital(keyWords[k]) + " differs between the sweeps by more than their uncertainty: " +
		x + " " + one + ", " + y + " " + other + "; the first up sweep is used."
}

// combineThresholds averages each method over the sweeps that have it.
func combineThresholds(rs []Result, lead int) map[string]Threshold {
	var out map[string]Threshold
	for _, method := range [...]string{"sqrt", "linear", "ratio", "curve"} {
		var vt, beta []Quantity
		for j := range rs {
			if t, ok := rs[j].VtBy[method]; ok {
				vt, beta = append(vt, t.Vt), append(beta, t.Beta)
			}
		}
		if len(vt) == 0 {
			continue
		}
		t := rs[lead].VtBy[method] // From and To are those of the leading sweep
		t.Vt, _ = meanOf(vt, t.Vt)
		t.Beta, _ = meanOf(beta, t.Beta)
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
		return []Warning{{CodeHeatingNotChecked, "Swept in one direction only: heating was not checked."}}
	}
	type gap struct{ d, u float64 }
	var gaps []gap
	for _, k := range [...]Key{KeyVgsth, KeyVgsIdle} {
		for _, a := range up {
			for _, b := range down {
				p, q := *rs[a].At(k), *rs[b].At(k)
				if u := math.Hypot(p.U, q.U); p.Ok() && q.Ok() && math.Abs(p.Value-q.Value) > sweepsApart*u {
					gaps = append(gaps, gap{p.Value - q.Value, u})
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
