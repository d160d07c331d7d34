package compare

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// unlike is how small a difference of weights is no difference.
const unlike = 1e-9

// sharing is how a lot's devices are spread over sessions and sets of meters, as
// parts of 1, and what these do to its values.
type sharing struct {
	session, meters map[string]float64
	tau, gamma      float64 // standard uncertainty by a session, by the gain of meters; NaN: not known
}

// sharingOf weighs the sittings of the devices behind a test: every device the
// same, its sittings in equal parts. What is not known is a session, or a set of
// meters, of this lot alone. scale turns the value of a device into the factor by
// which its uncertainties are multiplied (1 for a voltage).
//
// The session part is what the uncertainty between sessions holds beside that
// within one, the gain part what the absolute one holds beside that; for each the
// median over the devices is taken. What a gain that both lots share does to the
// shift itself (0.3 % of it) is left out.
func sharingOf(l *Lot, of []*Member, by fit.Key, scale func(v float64) float64) sharing {
	s := sharing{session: map[string]float64{}, meters: map[string]float64{}}
	own := "\x00" + l.Name
	var tau, gamma []float64
	known := 0
	for _, m := range of {
		sat := m.Sittings
		if len(sat) == 0 {
			sat = []Sitting{{}}
		}
		w := 1 / float64(len(of)*len(sat))
		for _, t := range sat {
			s.session[orOwn(t.Session, own)] += w
			s.meters[orOwn(t.Meters, own)] += w
		}
		q := m.Result.At(by)
		if q == nil || !q.Ok() || math.IsInf(q.Value, 0) {
			continue
		}
		known++
		f := scale(q.Value)
		if v := q.UBetween*q.UBetween - q.U*q.U; !math.IsNaN(v) {
			tau = append(tau, f*math.Sqrt(math.Max(0, v)))
		}
		if v := q.UAbsolute*q.UAbsolute - q.UBetween*q.UBetween; !math.IsNaN(v) {
			gamma = append(gamma, f*math.Sqrt(math.Max(0, v)))
		}
	}
	s.tau, s.gamma = medianOfMost(tau, known), medianOfMost(gamma, known)
	return s
}

func orOwn(key, own string) string {
	if key == "" {
		return own
	}
	return key
}

// medianOfMost is the median where at least half of the devices have the number.
func medianOfMost(x []float64, of int) float64 {
	if 2*len(x) < of || len(x) == 0 {
		return math.NaN()
	}
	return stats.Median(x)
}

// variance is what an error drawn once for each key adds to candidate minus
// reference, 0 where both lots have the same weights. unknown: it adds something, but
// how much is not known.
//
//	Σ (w_candidate,k - w_reference,k)² u_k²
//
// u_k² is that of the lot that alone has the key, and the mean of both where both do.
func variance(ref, cand map[string]float64, uRef, uCand float64) (v float64, unknown bool) {
	if sameWeights(ref, cand) {
		return 0, false
	}
	if math.IsNaN(uRef) || math.IsNaN(uCand) {
		return 0, true
	}
	for k, w := range cand {
		u2 := uCand * uCand
		if _, both := ref[k]; both {
			u2 = (u2 + uRef*uRef) / 2
		}
		d := w - ref[k]
		v += d * d * u2
	}
	for k, w := range ref {
		if _, both := cand[k]; !both {
			v += w * w * uRef * uRef
		}
	}
	return v, false
}

func sameWeights(a, b map[string]float64) bool {
	for k, w := range a {
		if math.Abs(w-b[k]) > unlike {
			return false
		}
	}
	return len(a) == len(b)
}

// shared works out the error that the lots do not share: what session and meters
// do to one lot and not to the other.
type shared struct {
	u               float64 // standard uncertainty; NaN: nothing of it is known
	session, meters bool    // the lots differ in sessions, in meters
	missing         bool    // a part that enters is not known
	tempHeld        bool    // u holds what the temperatures are uncertain by, or one session has one
}

func sharedOf(ref, cand sharing) shared {
	s := shared{session: !sameWeights(ref.session, cand.session), meters: !sameWeights(ref.meters, cand.meters)}
	a, noSession := variance(ref.session, cand.session, ref.tau, cand.tau)
	b, noMeters := variance(ref.meters, cand.meters, ref.gamma, cand.gamma)
	s.missing, s.tempHeld = noSession || noMeters, !noSession
	s.u = math.Sqrt(a + b)
	if s.missing && s.u == 0 {
		s.u = math.NaN()
	}
	return s
}

// basis says in words what the lots have in common.
func (s *shared) basis() string {
	switch {
	case s.meters && s.session:
		return "different meters"
	case s.meters:
		return "one session, different meters"
	case s.session:
		return "sessions of one bench"
	}
	return "same session"
}

// one is the scale of quantities whose uncertainties are taken as they are.
func one(float64) float64 { return 1 }

// commonOf works out the error common to whole lots, and what control parts say of
// it. The lots' own devices behind the shift are those of ref and cand.
//
// Source: JCGM 100:2008 F.1.2.3, correlated input quantities (from memory). The
// gains of meters are rectangles rather than normal; taken as normal the interval
// is a little too wide. Checked: TestCommon, TestSimulated.
func (c *comparing) commonOf(ref, cand []*Member) (Common, float64) {
	s := sharedOf(sharingOf(c.ref.lot, ref, c.opt.By, one), sharingOf(c.cand.lot, cand, c.opt.By, one))
	out := Common{U: s.u, Basis: s.basis(), OffsetU: math.NaN()}
	c.tempHeld = s.tempHeld
	nu := math.Inf(1)
	if !s.session && !s.meters {
		return out, nu
	}
	if t := c.ties(); t.n > 0 {
		c.tied = t
		out.Controls, out.Offset, out.OffsetU = t.n, t.offset, t.u
		out.U, out.Basis = t.u, "control parts"
		if math.IsNaN(t.u) {
			c.warn(fit.CodeCommonUnknown, "one control part ties the lots together, and neither its uncertainty nor the repeatability of the bench is known: the interval leaves out how well it does")
		} else if t.n == 1 {
			c.warn(fit.CodeNTooSmall, fmt.Sprintf("one control part ties the lots together: how well it does is taken from the uncertainty of its readings, %s, not from its scatter", millivolts(t.u)))
		}
		return out, t.nu
	}
	if s.missing {
		var what []string
		if s.session {
			what = append(what, "session")
		}
		if s.meters {
			what = append(what, "meters")
		}
		c.warn(fit.CodeCommonUnknown, "the lots do not share "+strings.Join(what, " and ")+
			", and what that does to the shift is not known for lack of accuracy statements: the interval holds the scatter of the devices and not all of the bench")
	}
	return out, nu
}

// ties is what control parts measured with both lots say.
type ties struct {
	n      int
	offset float64 // mean of candidate - reference over the controls
	u      float64 // of offset
	nu     float64 // its degrees of freedom
	pairs  [][2]*Member
}

// ties collects the control parts of one name in both lots that were measured in
// sessions of the lots' own devices, where these are known.
//
// The uncertainty of the mean difference is that of its scatter, and not less than
// the readings' own; of one control part √2 times the uncertainty of one reading, or
// of inserting it anew where that is more.
func (c *comparing) ties() ties {
	t := ties{u: math.NaN(), nu: math.Inf(1)}
	var d, u []float64
	for _, p := range c.controlPairs() {
		a, ua, _ := lot.Read(&p[0].Result, c.opt.By)
		b, ub, _ := lot.Read(&p[1].Result, c.opt.By)
		if math.IsNaN(a) || math.IsNaN(b) {
			continue
		}
		t.pairs = append(t.pairs, p)
		d = append(d, b-a)
		for _, v := range []float64{ua, ub} {
			if v > 0 {
				u = append(u, v)
			}
		}
	}
	t.n = len(d)
	if t.n == 0 {
		return t
	}
	t.offset = stats.Mean(d)
	reading := c.least // not less than what the lots' own readings are uncertain by
	if len(u) > 0 {
		reading = math.Max(reading, stats.Median(u))
	}
	if c.opt.Repeatability > reading {
		reading = c.opt.Repeatability
	}
	if reading > 0 {
		t.u = math.Sqrt2 * reading / math.Sqrt(float64(t.n))
	}
	if t.n > 1 {
		if scatter := stats.SD(d) / math.Sqrt(float64(t.n)); !(scatter <= t.u) {
			t.u, t.nu = scatter, float64(t.n-1)
		}
	}
	return t
}

// controlPairs are the control parts of one name in both lots, by name.
func (c *comparing) controlPairs() [][2]*Member {
	ref := controlsOf(c.ref.lot)
	cand := controlsOf(c.cand.lot)
	var names []string
	for name := range ref {
		if cand[name] != nil {
			names = append(names, name)
		}
	}
	slices.Sort(names)
	var out [][2]*Member
	for _, name := range names {
		out = append(out, [2]*Member{ref[name], cand[name]})
	}
	return out
}

// controlsOf are the control parts that speak for the sessions of their lot.
func controlsOf(l *Lot) map[string]*Member {
	sat := map[string]bool{}
	for i := range l.Members {
		if m := &l.Members[i]; takesPart(m) {
			for _, s := range m.Sittings {
				sat[s.Session] = true
			}
		}
	}
	out := map[string]*Member{}
	for i := range l.Members {
		m := &l.Members[i]
		if m.Control && m.Aside == "" && !faulty(m.Result.State) && with(m, sat) {
			out[m.Name] = m
		}
	}
	return out
}

// with reports whether a device was measured in one of the sessions; what is not
// known may have been.
func with(m *Member, sat map[string]bool) bool {
	if len(m.Sittings) == 0 || len(sat) == 0 {
		return true
	}
	return slices.ContainsFunc(m.Sittings, func(s Sitting) bool { return s.Session == "" || sat[""] || sat[s.Session] })
}
