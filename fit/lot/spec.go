package lot

import (
	"math"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// Decision is what is said of one device against the limits of the data sheet.
type Decision string

// The decisions. Conditional ones lie nearer to a limit than the guard band.
const (
	Undecided       Decision = "" // no verdict; the reason stands beside it
	Pass            Decision = "pass"
	ConditionalPass Decision = "conditional pass"
	ConditionalFail Decision = "conditional fail"
	Fail            Decision = "fail"
)

// Decisions lists the decisions, best first.
var Decisions = []Decision{Pass, ConditionalPass, ConditionalFail, Fail}

// When a rule was set, as seen from the first reading of the lot.
const (
	RuleNone   = "none"
	RuleBefore = "before"
	RuleAfter  = "after"
)

// Guard is the guard band at a limit: how much nearer to the limit a value may lie
// and still be called conditional only.
type Guard struct {
	Value float64
	Unit  string // "V"; "u": multiples of the absolute standard uncertainty (k = 1) of each device; "": no rule, taken as 0 V
}

// SpecOptions are limits and rules for [SpecOf].
type SpecOptions struct {
	Min, Max    float64 // V, limits of V_GS(th) as the part has them; NaN: none
	PChannel    bool    // limits by magnitude, a more negative voltage is beyond the upper one
	Depletion   bool    // of a p-channel part: limits by sign after all, for they may lie on both sides of 0
	Guard       Guard
	GuardSet    string // RuleNone, RuleBefore or RuleAfter
	SendBack    bool   // there is a rule to send back a lot that has a device outside the limits
	SendBackSet string // as GuardSet
	Populations int    // that the lot was found to be; above 1: no capability, no tolerance interval
}

// Judgement is the verdict on one device. Of a device without one, Why says it.
type Judgement struct {
	Name     string
	Decision Decision
	Guard    float64 // V, guard band held against it; NaN: not known
	Conform  float64 // probability that the true value lies within the limits, from the reading and its absolute uncertainty; NaN: not known
	Why      string  // no verdict because ...; "" with one
}

// Specification is a lot held against the limits of its data sheet.
type Specification struct {
	Low, High float64 // V, limits by sign; NaN: none on that side
	PChannel  bool
	Why       string // why no device can be judged; "": some can
	Guard     Guard
	GuardSet  string
	Devices   []Judgement // in the order given; control parts and excluded devices are undecided
	Count     map[Decision]int
	Undecided int // devices that count and have no verdict

	Ppk     Capability
	Band    ToleranceBand
	Outside OutsideShare

	SendBack    bool
	SendBackSet string
	Broken      []string // names of the devices that break the rule, those judged Fail; nil: not broken
}

// NoAbsolute is why a device has no verdict whose guard band cannot be had.
const NoAbsolute = "its absolute uncertainty is not known, and the guard band is a multiple of it"

// NoRoom reports whether the guard band at both limits takes up all between them, for
// every device, so that none can pass.
func (s *Specification) NoRoom() bool {
	window, some := s.High-s.Low, false
	for _, j := range s.Devices {
		if math.IsNaN(j.Guard) {
			continue
		}
		if some = true; !(2*j.Guard > window+2*limitSlack) {
			return false
		}
	}
	return some
}

// limitSlack, V, is left so that a limit itself is inside, in spite of rounding.
const limitSlack = 1e-6

// SpecOf holds a lot against the limits of its data sheet. nil where there are none.
//
// Inputs: the devices, not modified; those with Unlike are not judged. A device passes
// when it lies inside the limits by the guard band or more, conditionally inside by
// less, fails conditionally outside by less, and fails outside by more. The guard
// band is 0 without a rule (simple acceptance), so that only Pass and Fail are left.
// One that never reached the test current fails when its gate was taken beyond the
// upper limit by more than the guard band, else it is not judged. The probability of
// conformance is that of a normal distribution about the reading with the absolute
// standard uncertainty: Φ((upper-x)/u) - Φ((lower-x)/u).
//
// Source: JCGM 106:2012, "The role of measurement uncertainty in conformity
// assessment", 7 and 8; the four verdicts: ILAC-G8:09/2019, "Guidelines on decision
// rules and statements of conformity", non-binary statement with guard band (both
// from memory). Checked: TestFourVerdicts, TestConformance, TestSpecOfPChannel.
func SpecOf(devs []Device, o SpecOptions) *Specification {
	least, most := o.limits()
	if math.IsNaN(least) && math.IsNaN(most) {
		return nil
	}
	s := &Specification{Guard: o.Guard, GuardSet: o.GuardSet, SendBack: o.SendBack, SendBackSet: o.SendBackSet, PChannel: o.PChannel, Count: map[Decision]int{}}
	s.Low, s.High = least, most
	if o.PChannel {
		s.Low, s.High = -most, -least
	}
	var of sample
	var why []string
	for i := range devs {
		d := &devs[i]
		j := o.judge(d, least, most)
		s.Devices = append(s.Devices, j)
		if d.Control || d.Result.State == fit.Excluded {
			continue
		}
		if j.Decision != Undecided {
			s.Count[j.Decision]++
		} else {
			s.Undecided++
			why = append(why, j.Why)
		}
		if j.Decision == Fail && o.SendBack {
			s.Broken = append(s.Broken, j.Name)
		}
		switch v := d.Result.Vgsth.Value; {
		case d.Unlike == "" && isFinite(v):
			of.x = append(of.x, o.sign()*v)
		case d.Unlike == "":
			of.without++
			if j.Decision == Fail {
				of.beyond++
			}
		}
	}
	if len(s.Count) == 0 {
		s.Why = reasonOfAll(why)
	}
	s.Ppk = capabilityOf(&of, least, most, o.Populations)
	s.Band = bandOfLot(&of, o.Populations)
	if o.PChannel {
		s.Band.Low, s.Band.High = -s.Band.High, -s.Band.Low
	}
	s.Outside = outsideOf(&of, least, most)
	return s
}

func isFinite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func (o *SpecOptions) sign() float64 {
	if o.PChannel {
		return -1
	}
	return 1
}

// limits are those on the scale on which more gate voltage is greater.
func (o *SpecOptions) limits() (least, most float64) {
	least, most = o.Min, o.Max
	if math.IsInf(least, 0) {
		least = math.NaN()
	}
	if math.IsInf(most, 0) {
		most = math.NaN()
	}
	switch {
	case o.PChannel && o.Depletion:
		least, most = -most, -least
	case o.PChannel:
		least, most = math.Abs(least), math.Abs(most)
	}
	if least > most {
		least, most = most, least
	}
	return least, most
}

// judge decides about one device.
func (o *SpecOptions) judge(d *Device, least, most float64) Judgement {
	j := Judgement{Name: d.Name, Guard: math.NaN(), Conform: math.NaN()}
	q := d.Result.Vgsth
	switch {
	case d.Result.State == fit.Excluded:
		j.Why = "excluded"
		return j
	case d.Control:
		j.Why = "kept for checking the bench"
		return j
	case d.Unlike != "":
		j.Why = d.Unlike
		return j
	}
	x, above := o.sign()*q.Value, false
	if !isFinite(x) {
		if d.Result.State != fit.Above || !(d.Reached > most) {
			j.Why = "has no V_GS(th)"
			switch {
			case d.Result.State == fit.Above && math.IsNaN(most):
				j.Why = "never reaches the test current"
			case d.Result.State == fit.Above:
				j.Why = "never reaches the test current, and its sweep ends before the upper limit"
			}
			return j
		}
		x, above = d.Reached, true
	}
	switch u := q.UAbsolute; {
	case o.Guard.Unit != "u":
		j.Guard = o.Guard.Value
	case o.Guard.Value == 0:
		j.Guard = 0
	default:
		j.Guard = o.Guard.Value * u
	}
	if math.IsNaN(j.Guard) && above {
		j.Why = "never reaches the test current, and how far beyond the limit the guard band goes is not known"
		return j
	}
	if math.IsNaN(j.Guard) {
		j.Why = NoAbsolute
		return j
	}
	inside := math.Inf(1)
	if !math.IsNaN(least) {
		inside = min(inside, x-least)
	}
	if !math.IsNaN(most) {
		inside = min(inside, most-x)
	}
	switch {
	case inside >= j.Guard-limitSlack:
		j.Decision = Pass
	case inside >= -limitSlack:
		j.Decision = ConditionalPass
	case inside >= -j.Guard-limitSlack:
		j.Decision = ConditionalFail
	default:
		j.Decision = Fail
	}
	if above {
		if j.Decision != Fail {
			j.Decision, j.Why = Undecided, "never reaches the test current, and its sweep ends within the guard band"
		}
		return j
	}
	if u := q.UAbsolute; u > 0 && !math.IsInf(u, 0) {
		j.Conform = conformance(x, u, least, most)
	}
	return j
}

// conformance is the probability that a value lies within the limits.
func conformance(x, u, least, most float64) float64 {
	p := 1.0
	if !math.IsNaN(least) {
		p -= stats.NormalUpper((x - least) / u)
	}
	if !math.IsNaN(most) {
		p -= stats.NormalUpper((most - x) / u)
	}
	return max(0, p)
}

// reasonOfAll says why nothing can be judged: the reason of most of the devices that
// count, the first of equals.
func reasonOfAll(why []string) string {
	best, n, count := "the lot has no device", 0, map[string]int{}
	for _, w := range why {
		if count[w]++; count[w] > n {
			best, n = w, count[w]
		}
	}
	return best
}
